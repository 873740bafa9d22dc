"""Here is a raw spectrum: clean it; here are two: align them.

Not for: scoring an alignment (`similarity`), finding spectra in a run (`runs`), reading files (`readers`).
"""
