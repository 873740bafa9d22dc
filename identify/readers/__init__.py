"""Here is a file: which spectra does it hold?

Formats are told apart by content (`recognize`), files come from folders and archives as streams (`containers`), and every
bound on hostile input stands in `limits`. A bad record becomes a `Rejection`; a file that is unreadable as a whole raises.

Not for: judging spectra (cleaning does), choosing which records a library takes (the library does), or writing files.
"""

from identify.readers.opening import read_pasted, read_spectra

__all__ = ["read_pasted", "read_spectra"]
