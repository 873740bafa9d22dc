"""Spectrum record → a table of its peaks for a spreadsheet."""

from __future__ import annotations

from identify.records import SpectrumRecord
from identify.writers.named_values import display_name, named_values, peak_rows


def render_peaks_csv(record: SpectrumRecord) -> str:
    """Text of one record: a cell ``name: value`` per line, the heading ``m/z,intensity``, one row per peak.

    Parameters
    ----------
    record : SpectrumRecord

    Returns
    -------
    str
        Ends with a blank line, so that records can be joined.

    Notes
    -----
    Each ``name: value`` is one quoted cell that starts with a letter: no spreadsheet takes it for a formula.
    """
    pairs = named_values(record)
    if not record.identity.name:
        pairs.insert(0, ("Name", display_name(record)))
    cells = [f"{name}: {value}".replace('"', '""') for name, value in pairs]
    rows = peak_rows(record, ",")
    return "\n".join([*[f'"{cell}"' for cell in cells], "m/z,intensity", *rows]) + "\n\n"
