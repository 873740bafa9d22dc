"""Published identification criteria and instrument checks, as data: one TOML file each, shipped with the package.

Question answered: "which windows does this document set?" Not for: applying them (`identify.evidence.confirmation`,
`identify.evidence.instrument`).
"""
