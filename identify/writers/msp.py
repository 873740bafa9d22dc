"""Spectrum record → the plain-text name/value-and-peaks exchange format (.msp)."""

from __future__ import annotations

from identify.records import SpectrumRecord
from identify.writers.named_values import display_name, named_values, number_text


def render_msp(record: SpectrumRecord) -> str:
    """Text of one record: ``Name: value`` lines, ``Num Peaks: n``, one pair per line, a blank line.

    Parameters
    ----------
    record : SpectrumRecord

    Returns
    -------
    str
        Ends with a blank line, so that records can be joined.

    Notes
    -----
    Retention times carry their unit (`s`); fields without a customary name go under ours.
    """
    pairs = named_values(record)
    if not record.identity.name:
        pairs.insert(0, ("Name", display_name(record)))
    lines = [f"{name}: {value}" for name, value in pairs]
    rows = [f"{number_text(mz)} {number_text(height)}" for mz, height in zip(record.mz, record.intensity, strict=True)]
    return "\n".join([*lines, f"Num Peaks: {len(rows)}", *rows]) + "\n\n"
