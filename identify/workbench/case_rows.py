"""What a case file holds, as records, and how large values are stored."""

from __future__ import annotations

import json
import zlib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from identify.errors import LibraryDamaged
from identify.records import SpectrumRecord

MAX_UNPACKED = 64 * 2**20
STATES = ("open", "accepted", "rejected", "follow-up")
"""What the last decision made of a query."""


@dataclass(frozen=True, slots=True)
class Job:
    """Work in the background."""

    id: int
    kind: str
    name: str
    who: str
    created_at: str
    options: dict[str, Any]
    state: str
    n_done: int
    n_total: int | None
    message: str
    finished_at: str | None

    @property
    def is_over(self) -> bool:
        """Whether nothing more will happen."""
        return self.state in ("done", "failed", "cancelled")


@dataclass(frozen=True, slots=True)
class QueryRow:
    """One line of the work list: a query, its latest result, its latest decision."""

    id: int
    job_id: int
    number: int
    run_id: int | None
    name: str
    source: str
    time_s: float | None
    result_id: int
    made_at: str
    level: str
    statement: str
    probability: float
    best: str
    state: str
    decided_level: str
    decided_compound: str
    decided_by: str
    decided_at: str


@dataclass(frozen=True, slots=True)
class Decision:
    """What a person decided about a query, on which result, when and why."""

    seq: int
    query_id: int
    result_id: int
    at: str
    who: str
    kind: str
    level: str
    compound: str
    accession: str
    note: str
    previous_hash: str
    hash: str


@dataclass(frozen=True, slots=True)
class NewQuery:
    """A query with its first result, to be added."""

    number: int
    record: SpectrumRecord
    document: dict[str, Any]


def pack(values: Mapping[str, Any]) -> bytes:
    """Compressed JSON.

    Parameters
    ----------
    values : mapping

    Returns
    -------
    bytes
    """
    return zlib.compress(json.dumps(values, separators=(",", ":"), allow_nan=False).encode(), 6)


def unpack(data: bytes, path: Path) -> dict[str, Any]:
    """The values that `pack` took.

    Parameters
    ----------
    data : bytes
    path : Path
        For messages.

    Returns
    -------
    dict

    Raises
    ------
    LibraryDamaged
        If the data are no compressed JSON object of reasonable size.
    """
    try:
        machine = zlib.decompressobj()
        text = machine.decompress(data, MAX_UNPACKED)
        values = json.loads(text) if machine.eof else None
    except (zlib.error, ValueError):
        values = None
    if not isinstance(values, dict):
        raise LibraryDamaged("case file", where=str(path), found="data that cannot be unpacked", expected="stored JSON")
    return values
