"""How alike are two aligned spectra, and through which peaks?

`scores` holds the plain definitions, one function per measure, all on `AlignedPeaks` (from `identify.spectra.align`):
what the fast index in `identify.index` must reproduce. `pair` rescores a pair on accurate m/z where both carry it.

Not for: aligning (`identify.spectra`), searching a library (`identify.index`), judging (`identify.evidence`).
"""
