"""Why is a compound not the answer? Its entries, scored and weighed like the candidates, beside the best of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from identify.evidence.gather import gather_evidence
from identify.library.standing import ALL_STATUSES
from identify.library.store import SEARCHABLE, Library
from identify.pipeline.search import SearchableLibrary
from identify.records import Candidate, Entry, EvidenceItem, Identification, Verdict
from identify.report.words import probability_text, score_text, visible_text
from identify.settings import Settings
from identify.similarity.pair import PairScores, score_pair

MAX_COMPOUNDS = 5


@dataclass(frozen=True, slots=True)
class WhyNot:
    """One compound asked for, and the reasons."""

    name: str
    accession: str
    rank: int | None
    """Its rank when it is a candidate."""
    reasons: tuple[str, ...]
    cosine: float
    reverse: float
    evidence: tuple[EvidenceItem, ...]


def explain_absence(
    asked: str, found: Identification, libraries: Sequence[SearchableLibrary], settings: Settings
) -> tuple[WhyNot, ...]:
    """Reasons for the compound of this name, else for those whose name contains it, best cosine first; none when none does.

    Parameters
    ----------
    asked : str
        Name or part of it.
    found : Identification
    libraries : sequence of SearchableLibrary
    settings : Settings

    Returns
    -------
    tuple of WhyNot
    """
    ranked = {(c.library, c.entry.compound_id): c for c in found.candidates}
    best: dict[tuple[str, int], tuple[float, Entry, PairScores]] = {}
    for item in libraries:
        for entry in _entries_named(item.library, asked):
            key = (item.state.path, entry.compound_id)
            pair = score_pair(found.query.spectrum, entry.spectrum, settings)
            if key not in best or pair.cosine > best[key][0]:
                best[key] = (pair.cosine, entry, pair)
    exact = asked.strip().casefold()
    named = {key: row for key, row in best.items() if row[1].identity.name.casefold() == exact}
    ordered = sorted((named or best).items(), key=lambda item: (-item[1][0], item[1][1].accession))
    return tuple(
        _explain(entry, pair, found, settings, ranked.get(key)) for key, (_, entry, pair) in ordered[:MAX_COMPOUNDS]
    )


def _entries_named(library: Library, asked: str) -> list[Entry]:
    return library.find_entries(name=asked.strip(), statuses=ALL_STATUSES, limit=60)


def _explain(
    entry: Entry, pair: PairScores, found: Identification, settings: Settings, candidate: Candidate | None
) -> WhyNot:
    name = visible_text(entry.identity.name)
    if candidate is not None:
        reasons = _reasons_ranked(candidate, found)
        return WhyNot(
            name,
            candidate.entry.accession,
            candidate.rank,
            reasons,
            candidate.cosine,
            candidate.reverse,
            candidate.evidence,
        )
    evidence = gather_evidence(found.query, entry, pair.aligned, settings)
    told: list[str] = []
    if entry.status not in SEARCHABLE:
        told.append(f"Its entry is not searched: its standing is “{entry.status.value}”.")
    if found.candidates:
        last = found.candidates[-1]
        told.append(
            f"Its spectrum is not among the {len(found.candidates)} nearest: cosine {score_text(pair.cosine)} and reverse match"
            f" {score_text(pair.reverse)}, against {score_text(found.candidates[0].cosine)} and"
            f" {score_text(found.candidates[0].reverse)} for the first candidate and {score_text(last.cosine)} and"
            f" {score_text(last.reverse)} for the last."
        )
    told += _conflicts(evidence)
    return WhyNot(name, entry.accession, None, tuple(told), pair.cosine, pair.reverse, evidence)


def _reasons_ranked(candidate: Candidate, found: Identification) -> tuple[str, ...]:
    if candidate.rank == 1:
        return (f"It is the first candidate, with probability {probability_text(candidate.probability)}.",)
    first = found.candidates[0]
    reasons = [
        f"It is candidate {candidate.rank} with probability {probability_text(candidate.probability)}; the first,"
        f" {visible_text(first.entry.identity.name)}, has {probability_text(first.probability)}."
    ]
    theirs = {part.label: part.value for part in first.explanation.parts}
    for part in sorted(candidate.explanation.parts, key=lambda part: part.value - theirs.get(part.label, 0.0)):
        difference = part.value - theirs.get(part.label, 0.0)
        if difference < -0.005:
            reasons.append(
                f"{part.label[:1].upper()}{part.label[1:]}: {abs(difference):.2f} fewer log-odds than the first candidate."
            )
    return (*reasons, *_conflicts(candidate.evidence))


def _conflicts(evidence: Sequence[EvidenceItem]) -> list[str]:
    return [
        f"{item.kind[:1].upper()}{item.kind[1:]} conflicts: {item.reason}"
        for item in evidence
        if item.verdict is Verdict.CONFLICTS
    ]
