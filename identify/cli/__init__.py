"""The terminal: options in, functions of `identify.pipeline` and `identify.library` called, results shown.

Not for: any decision about spectra, and nothing heavy at import (``--help`` answers in under 0.3 s).
"""

from __future__ import annotations

from identify.cli.app import main

__all__ = ["main"]
