"""Spectrum record → the plain-text name/value-and-peaks exchange format (.msp)."""

from __future__ import annotations

import re

from identify.records import SpectrumRecord
from identify.writers.named_values import display_name, named_values, peak_rows

_COUNT = re.compile(r"n(?:um(?:ber[\W_]*of)?)?[\W_]*peaks?[\W_]*", re.IGNORECASE)


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

    Examples
    --------
    >>> import numpy as np
    >>> from identify.records import Source
    >>> record = SpectrumRecord(Source("a"), np.array([43.0, 58.0]), np.array([100.0, 22.5]), title="acetone")
    >>> render_msp(record).splitlines()
    ['Name: acetone', 'Title: acetone', 'Num Peaks: 2', '43 100', '58 22.5', '']
    """
    pairs = named_values(record)
    if not record.identity.name:
        pairs.insert(0, ("Name", display_name(record)))
    # A further value of the source may be called like the count, behind which readers expect the peaks.
    lines = [f"{'x ' if _COUNT.fullmatch(name) else ''}{name}: {value}" for name, value in pairs]
    rows = peak_rows(record, " ")
    return "\n".join([*lines, f"Num Peaks: {len(rows)}", *rows]) + "\n\n"
