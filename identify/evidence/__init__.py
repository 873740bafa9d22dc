"""Does anything independent of the match speak for or against this candidate?

`gather.gather_evidence` checks one candidate; `molecular_ion.estimate_molecular_ion` judges the query alone. Each check is pure,
never raises on missing data and says `not assessed` with a reason where it cannot speak. Not for: similarity of spectra
(`identify.similarity`), or combining evidence into a probability (`identify.ranking`).
"""
