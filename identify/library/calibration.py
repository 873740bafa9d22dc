"""Which calibration of the probabilities does a library carry? One event per calibration; the last one counts."""

from __future__ import annotations

import json
import math
from dataclasses import asdict, dataclass
from datetime import datetime
from typing import Final

from identify.errors import LibraryError, quote
from identify.library.events import Event, append_event
from identify.library.store import Library
from identify.ranking.calibration import CalibrationResult, Shift

KIND: Final = "calibrated"
LARGEST_SHARPNESS, LARGEST_SHIFT = 60.0, 10.0


@dataclass(frozen=True, slots=True)
class Calibration:
    """What the library's last calibration says.

    Attributes
    ----------
    shift : Shift
        Without effect when the library went back to the shipped calibration.
    event : int
    at : str
    note : str
    """

    shift: Shift
    event: int
    at: str
    note: str

    @property
    def described(self) -> str:
        """One line for results."""
        return f"event {self.event} of the library ({self.at[:10]}): {self.note}"


def store_calibration(library: Library, result: CalibrationResult, *, who: str, when: datetime, reason: str) -> Event:
    """Event that gives the library a calibration.

    Parameters
    ----------
    library : Library
        Open for writing.
    result : CalibrationResult
    who, reason : str
    when : datetime

    Returns
    -------
    Event

    Raises
    ------
    UsageError, LibraryError
        See `identify.library.events.append_event` and `Library.writing`.
    """
    content = {
        **asdict(result.shift),
        "n_compounds": result.n_compounds,
        "loss_shipped": result.loss_shipped,
        "loss_refitted": result.loss_refitted,
        "note": result.note,
    }
    with library.writing() as connection:
        return append_event(connection, kind=KIND, who=who, when=when, reason=reason, content=content)


def read_calibration(library: Library) -> Calibration | None:
    """The calibration in force; None when the library was never calibrated.

    Parameters
    ----------
    library : Library

    Returns
    -------
    Calibration or None

    Raises
    ------
    LibraryError
        If the event holds something else than the numbers of a calibration.
    """
    with library.reading() as connection:
        row = connection.execute(
            "SELECT seq, at, content FROM event WHERE kind = ? AND seq <= ? ORDER BY seq DESC LIMIT 1",
            (KIND, library.last_event),
        ).fetchone()
    if row is None:
        return None
    seq, at, content = row
    where = f"{library.path}, event {seq}"
    try:
        told = json.loads(content)
        values = [float(told[name]) for name in ("sharpness", "unlisted", "elsewhere")]
        note = str(told["note"])
    except (ValueError, TypeError, KeyError, OverflowError, RecursionError):
        raise LibraryError("calibration", where=where, found=quote(str(content)), expected="its numbers") from None
    sharpness, unlisted, elsewhere = values
    sound = all(map(math.isfinite, values)) and 1 / LARGEST_SHARPNESS <= sharpness <= LARGEST_SHARPNESS
    if not (sound and abs(unlisted) <= LARGEST_SHIFT and abs(elsewhere) <= LARGEST_SHIFT):
        raise LibraryError("calibration", where=where, found=f"{values}", expected="numbers near 1, 0 and 0")
    return Calibration(Shift(sharpness, unlisted, elsewhere), int(seq), str(at), note)
