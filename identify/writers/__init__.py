"""Here are results, or spectra: which bytes do they become in a format that others read?

`results_*` write what was found; `massbank`, `jcamp`, `msp`, `mzspeclib`, `mzml` and `peaks_csv` write spectra in open
formats (`spectrum_files.write_spectra` chooses); `files` puts bytes on disk whole or not at all.

Not for: terminal tables and pages (report does), or deciding what may be handed on (the library does).
"""
