"""Here is a formula, a name or a structure: what masses, isotopes, derivatives, fragments and isomers does it imply?

`elements` the pinned isotope table · `formula` arithmetic and masses (`formula_reader` text) · `isotopes` patterns ·
`derivatives` TMS and its like · `labels` isotope labels in names · `subformulas` possible fragments · `structures` identifiers,
drawings, similarity, classes (`molecules`, `classes`, `class_table`) · `isomers` how many others there are.

Not for: looking at a spectrum (`spectra`, `evidence`), or deciding anything about a candidate.
"""
