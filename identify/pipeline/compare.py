"""Two results: what changed between them, and which of the known causes can explain it.

Pure but for `read_result` and `list_events_between`. A change that none of the causes explains says so: the same program,
settings, library and spectrum must give the same answer.
"""

from __future__ import annotations

import json
from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path, PurePath
from typing import Any

from identify.errors import FormatError, InputError, UsageError, quote
from identify.library.events import Event
from identify.library.store import open_library
from identify.pipeline.result_view import CandidateView, QueryView, ResultView, view_result
from identify.writers.results_json import SCHEMA_NAME

MAX_BYTES = 2**30
SAME = 5e-4
"""Probabilities and scores closer than this are the same on any page."""
PART = 0.05
"""Parts of an explanation (natural-log odds) that changed less are not told."""


@dataclass(frozen=True, slots=True)
class Change:
    """One thing that is different: what, before, after, and why as far as the two results tell."""

    what: str
    before: str
    after: str
    why: str = ""


@dataclass(frozen=True, slots=True)
class QueryComparison:
    """One query in both results."""

    name: str
    source: str
    changes: tuple[Change, ...]


@dataclass(frozen=True, slots=True)
class Comparison:
    """What is different between two results.

    Attributes
    ----------
    causes : tuple of Change
        Program, settings and libraries: what can make answers differ.
    queries : tuple of QueryComparison
        Those with a change, in the order of the second result.
    only_first, only_second : tuple of str
        Queries that only one of them has.
    n_same : int
        Queries in both without any change.
    """

    causes: tuple[Change, ...]
    queries: tuple[QueryComparison, ...]
    only_first: tuple[str, ...]
    only_second: tuple[str, ...]
    n_same: int


def read_result(path: Path) -> dict[str, Any]:
    """A result as `ionwitness search --json` wrote it.

    Parameters
    ----------
    path : Path

    Returns
    -------
    dict

    Raises
    ------
    InputError
        If the file cannot be read.
    FormatError
        If it is no result of this version of the contract.
    """
    try:
        with path.open("rb") as stream:
            data = stream.read(MAX_BYTES + 1)
    except OSError as error:
        words = {FileNotFoundError: "no file", PermissionError: "no permission", IsADirectoryError: "a folder"}
        found = words.get(type(error)) or error.strerror or type(error).__name__
        raise InputError("result", where=str(path), found=found, expected="a readable JSON file") from None
    hint = "Give the file that --json wrote."
    if len(data) > MAX_BYTES:
        raise FormatError("result", where=str(path), found="more than 1 GB", expected="a result", hint=hint)
    try:
        value = json.loads(data)
    except (ValueError, RecursionError) as error:
        line = f":{error.lineno}" if isinstance(error, json.JSONDecodeError) else ""
        raise FormatError(
            "result", where=f"{path}{line}", found="no JSON", expected=f"a file of {SCHEMA_NAME}", hint=hint
        ) from None
    schema = value.get("schema") if isinstance(value, dict) else type(value).__name__
    if not isinstance(value, dict) or schema != SCHEMA_NAME:
        raise FormatError("result", where=str(path), found=quote(schema), expected=SCHEMA_NAME, hint=hint)
    return value


def compare_results(
    first: Mapping[str, Any], second: Mapping[str, Any], where: tuple[str, str] = ("the first", "the second")
) -> Comparison:
    """What changed from one result to another, and why as far as they tell.

    Parameters
    ----------
    first, second : mapping
        Parsed results, see `read_result`.
    where : tuple of str
        Names of the two, for messages.

    Returns
    -------
    Comparison

    Raises
    ------
    FormatError
        If one of them breaks the result contract.
    """
    one, two = view_result(first, where[0]), view_result(second, where[1])
    causes = (*_program_changes(one, two), *_setting_changes(one, two), *_library_changes(one, two))
    before, after = _by_key(one.queries), _by_key(two.queries)
    why = _Causes.of(one, two)
    compared = [
        QueryComparison(query.name or query.id, query.source, _query_changes(before[key], query, why))
        for key, query in after.items()
        if key in before
    ]
    return Comparison(
        causes,
        tuple(query for query in compared if query.changes),
        tuple(query.name or query.id for key, query in before.items() if key not in after),
        tuple(query.name or query.id for key, query in after.items() if key not in before),
        sum(not query.changes for query in compared),
    )


def _by_key(queries: Sequence[QueryView]) -> dict[tuple[str, str, int], QueryView]:
    """Queries by file name and title: folders may have moved between two results; equal ones are numbered."""
    seen: Counter[tuple[str, str]] = Counter()
    found = {}
    for query in queries:
        key = (PurePath(query.source).name, query.name)
        seen[key] += 1
        found[(*key, seen[key])] = query
    return found


def _program_changes(one: ResultView, two: ResultView) -> list[Change]:
    return [Change("program", one.version, two.version)] if one.version != two.version else []


def _setting_changes(one: ResultView, two: ResultView) -> list[Change]:
    names = sorted(one.settings.keys() | two.settings.keys())
    pairs = [(name, one.settings.get(name, "not there"), two.settings.get(name, "not there")) for name in names]
    return [Change(f"setting {name}", before, after) for name, before, after in pairs if before != after]


def _library_changes(one: ResultView, two: ResultView) -> list[Change]:
    before = {library.fingerprint: library for library in one.libraries}
    after = {library.fingerprint: library for library in two.libraries}
    gone = [library for key, library in before.items() if key not in after]
    new = [library for key, library in after.items() if key not in before]
    changes = []
    for index in range(max(len(gone), len(new))):
        old = gone[index].described if index < len(gone) else "not searched"
        fresh = new[index].described if index < len(new) else "not searched"
        changes.append(Change("library", old, fresh))
    return changes


@dataclass(frozen=True, slots=True)
class _Causes:
    """Which of the causes of a change apply to the two results as a whole."""

    program: bool
    settings: tuple[str, ...]
    library: bool

    @classmethod
    def of(cls, one: ResultView, two: ResultView) -> _Causes:
        return cls(
            one.version != two.version,
            tuple(change.what.removeprefix("setting ") for change in _setting_changes(one, two)),
            bool(_library_changes(one, two)),
        )

    def explain(self, peaks_differ: bool, *, with_library: bool = True, only: tuple[str, ...] = ()) -> str:
        """The causes that can explain a change; `only` limits the settings to those whose names start so."""
        settings = [name for name in self.settings if not only or name.startswith(only)]
        parts = ["the spectrum is another one"] if peaks_differ else []
        parts += ["another program version"] if self.program else []
        parts += [f"setting {', '.join(settings)}"] if settings else []
        parts += ["another state of the library"] if self.library and with_library else []
        return " or ".join(parts) if parts else "not explained by program, settings, library or spectrum"


def _query_changes(before: QueryView, after: QueryView, why: _Causes) -> tuple[Change, ...]:
    differ = before.peaks != after.peaks
    changes = []
    if differ:
        cause = _Causes(why.program, why.settings, False).explain(False, only=("cleaning",))
        cause = "another input file" if cause.startswith("not explained") else f"{cause}, or another input file"
        changes.append(Change("cleaned spectrum", f"{len(before.peaks)} peaks", f"{len(after.peaks)} peaks", cause))
    whole = why.explain(differ)
    changes += [
        Change(what, old, new, whole)
        for what, old, new in (
            ("claim", f"{before.level}: {before.statement}", f"{after.level}: {after.statement}"),
            ("molecular mass", before.molecular_mass, after.molecular_mass),
        )
        if old != new
    ]
    changes += _number("probability of the claim", before.claim_probability, after.claim_probability, whole)
    changes += _number("probability that it is in the library", before.in_library, after.in_library, whole)
    changes += _order_changes(before, after, whole)
    known = {candidate.key: candidate for candidate in before.candidates}
    for candidate in after.candidates:
        if candidate.key in known:
            changes += _candidate_changes(known[candidate.key], candidate, differ, why)
    return tuple(changes)


def _number(what: str, before: float, after: float, why: str) -> list[Change]:
    same = abs(before - after) < SAME
    return [] if same else [Change(what, f"{before:.3f}", f"{after:.3f}", why)]


def _order_changes(before: QueryView, after: QueryView, why: str) -> list[Change]:
    old = {candidate.key: candidate.rank for candidate in before.candidates}
    new = {candidate.key: candidate.rank for candidate in after.candidates}
    changes = [
        Change(f"candidate {candidate.name}", f"rank {candidate.rank}", "not among the candidates", why)
        for candidate in before.candidates
        if candidate.key not in new
    ]
    for candidate in after.candidates:
        rank = old.get(candidate.key)
        if rank != candidate.rank:
            was = "not among the candidates" if rank is None else f"rank {rank}"
            changes.append(Change(f"candidate {candidate.name}", was, f"rank {candidate.rank}", why))
    return changes


def _candidate_changes(before: CandidateView, after: CandidateView, differ: bool, why: _Causes) -> list[Change]:
    name, same_entry = after.name, before.accession == after.accession
    changes = []
    if not same_entry:
        cause = why.explain(differ)
        changes.append(Change(f"best entry of {name}", before.accession, after.accession, cause))
    entry_cause = "another entry is compared" if not same_entry else ""
    score_cause = entry_cause or why.explain(differ, with_library=False, only=("weighting", "cleaning"))
    changes += _number(f"cosine of {name}", before.cosine, after.cosine, score_cause)
    changes += _number(f"reverse match of {name}", before.reverse, after.reverse, score_cause)
    verdict_cause = entry_cause or why.explain(differ)
    for kind in sorted(before.verdicts.keys() | after.verdicts.keys()):
        old, new = before.verdicts.get(kind, "no such check"), after.verdicts.get(kind, "no such check")
        if old != new:
            changes.append(Change(f"{kind} of {name}", old, new, verdict_cause))
    if abs(before.probability - after.probability) >= SAME:
        changes += _number(
            f"probability of {name}", before.probability, after.probability, _part_changes(before, after, differ, why)
        )
    return changes


def _part_changes(before: CandidateView, after: CandidateView, differ: bool, why: _Causes) -> str:
    """Which parts of the log-odds moved; where none did, the rivals moved."""
    labels = sorted(before.parts.keys() | after.parts.keys())
    moved = [(label, after.parts.get(label, 0.0) - before.parts.get(label, 0.0)) for label in labels]
    told = sorted((pair for pair in moved if abs(pair[1]) >= PART), key=lambda pair: (-abs(pair[1]), pair[0]))
    if told:
        return "log-odds: " + ", ".join(f"{label} {value:+.2f}" for label, value in told[:6])
    return "its rivals changed: " + why.explain(differ)


def list_events_between(library: Path, first: Mapping[str, Any], second: Mapping[str, Any]) -> tuple[Event, ...]:
    """Events of a library after the earlier and up to the later of the states that two results used.

    Parameters
    ----------
    library : Path
    first, second : mapping
        Parsed results.

    Returns
    -------
    tuple of Event
        Empty when both used the same state.

    Raises
    ------
    LibraryError
        If the library cannot be opened.
    UsageError
        If one of the results used no state of this library.
    """
    with open_library(library) as opened:
        events = opened.events()
    places = {event.hash: event.seq for event in events}
    used = []
    for name, result in (("first", first), ("second", second)):
        known = [
            places[row.fingerprint] for row in view_result(result, f"the {name}").libraries if row.fingerprint in places
        ]
        if not known:
            raise UsageError(
                "--library", where=str(library), found=f"no event that the {name} result used",
                expected="the library both results came from",
            )  # fmt: skip
        used.append(known[0])
    return tuple(events[min(used) : max(used)])
