"""Defensible names for unknown electron-ionization mass spectra.

Start reading at `identify.records` (the nouns), then `identify.pipeline` (the main path).
"""

__version__ = "0.1.0"
