"""The same component in several runs is one unknown, identified once: by its best spectrum."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from identify.runs.findings import Finding, RunFindings, Unknown
from identify.runs.kinds import spectrum_similarity

TIME_TOLERANCE_S, TIME_TOLERANCE_SHARE = 3.0, 0.005
INDEX_TOLERANCE = 8.0
MIN_SIMILARITY = 0.92
"""Same unknown: within 3 s (or 0.5 %) or 8 index units, and cosine of root intensities ≥ 0.92 (this project's choice)."""


def share_unknowns(runs: Sequence[RunFindings]) -> tuple[list[RunFindings], tuple[Unknown, ...]]:
    """Runs whose findings carry the number of their unknown, and the unknowns that more than one run shows.

    Parameters
    ----------
    runs : sequence of RunFindings

    Returns
    -------
    list of RunFindings
        An unknown has the identification of its best spectrum (signal/noise × purity) in every run; a note says which.
    tuple of Unknown
    """
    if len(runs) < 2:
        return list(runs), ()
    groups: list[list[tuple[int, int]]] = []
    places = [(r, f) for r, run in enumerate(runs) for f, finding in enumerate(run.findings) if finding.identification]
    places.sort(key=lambda place: -_finding(runs, place).component.area)
    for place in places:
        home = next((group for group in groups if _belongs(runs, place, group)), None)
        if home is None:
            groups.append([place])
        else:
            home.append(place)
    groups = sorted((g for g in groups if len(g) > 1), key=lambda g: _finding(runs, g[0]).component.time_s)
    shared = [list(run.findings) for run in runs]
    unknowns = []
    for number, group in enumerate(groups, start=1):
        best = max(group, key=lambda place: _quality(_finding(runs, place)))
        for place in group:
            shared[place[0]][place[1]] = _with_answer(
                _finding(runs, place), _finding(runs, best), runs[best[0]], number
            )
        members = sorted((runs[r].number, runs[r].findings[f].component.number) for r, f in group)
        unknowns.append(Unknown(number, tuple(members)))
    return [replace(run, findings=tuple(own)) for run, own in zip(runs, shared, strict=True)], tuple(unknowns)


def _finding(runs: Sequence[RunFindings], place: tuple[int, int]) -> Finding:
    return runs[place[0]].findings[place[1]]


def _quality(finding: Finding) -> float:
    return finding.component.signal_to_noise * finding.component.purity


def _belongs(runs: Sequence[RunFindings], place: tuple[int, int], group: Sequence[tuple[int, int]]) -> bool:
    """Whether a component is the group's: of a run not yet in it, at the same place, with the same spectrum."""
    if any(member[0] == place[0] for member in group):
        return False
    own, first = _finding(runs, place), _finding(runs, group[0])
    if own.retention_index is not None and first.retention_index is not None:
        together = abs(own.retention_index - first.retention_index) <= INDEX_TOLERANCE
    else:
        apart = abs(own.component.time_s - first.component.time_s)
        together = apart <= max(TIME_TOLERANCE_S, TIME_TOLERANCE_SHARE * first.component.time_s)
    return together and spectrum_similarity(own.component, first.component) >= MIN_SIMILARITY


def _with_answer(own: Finding, best: Finding, run: RunFindings, number: int) -> Finding:
    if own is best or own.identification is None or best.identification is None:
        return replace(own, unknown=number)
    note = f"Same unknown as component {best.component.number} of run {run.number}, whose spectrum is the better one."
    answer = replace(best.identification, query=own.identification.query, notes=(*best.identification.notes, note))
    return replace(own, identification=answer, unknown=number)
