"""Which next measurement would change the answer most, for its cost?"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Final

from identify.chem.structures import active_hydrogens
from identify.errors import StructureError
from identify.evidence.facts import formula_facts
from identify.ranking.alternatives import Chances
from identify.ranking.claim import percent
from identify.records import Candidate, EntryStatus, FollowUp, Identification, Query, Verdict
from identify.retention import phase_class

EFFORT: Final = {
    "own standard": 1.0,
    "retention index": 1.0,
    "cleaner spectrum": 1.0,
    "derivatization": 2.0,
    "soft ionization": 2.0,
    "accurate mass": 2.0,
    "authentic standard": 4.0,
}
"""Relative effort of each measurement (judgement of the developers): priorities are information per effort."""
MOST_ANSWERS: Final = 8
LEAST_CHANCE: Final = 0.005
LEAST_INFORMATION: Final = 0.02
"""Nats; what would tell less is not proposed."""
INDEX_STEP: Final = 20.0
"""Retention indices closer than this are not told apart: laboratories differ by about as much on one phase class."""
TMS_SHIFT_DA: Final = 72
"""Mass a trimethylsilyl group adds in place of one active hydrogen."""

Outcome = object


@dataclass(frozen=True, slots=True)
class WorkItem:
    """One line of the work list of a batch: a measurement and the queries it would help.

    Attributes
    ----------
    action : str
    queries : tuple of str
        Ids of the queries.
    reasons : tuple of str
        One per query.
    priority : float
        Sum over the queries, nats per relative effort.
    """

    action: str
    queries: tuple[str, ...]
    reasons: tuple[str, ...]
    priority: float


def propose_follow_up(query: Query, candidates: Sequence[Candidate], chances: Chances) -> tuple[FollowUp, ...]:
    """Next measurements, most information for the effort first.

    Parameters
    ----------
    query : Query
    candidates : sequence of Candidate
        Best first.
    chances : Chances
        Probabilities of all answers, candidates in the same order.

    Returns
    -------
    tuple of FollowUp
        `priority` is the expected information in nats divided by the relative effort (`EFFORT`).

    Notes
    -----
    A measurement sorts the answers into outcomes. Its expected information is the entropy of the outcomes, over the answers whose
    outcome is known, times the probability of those.
    """
    open_answers = [c for c in candidates[:MOST_ANSWERS] if c.probability >= LEAST_CHANCE]
    plans = _standards(open_answers)
    plans += _retention_indices(query, open_answers)
    plans += _masses(query, open_answers, chances)
    plans += _derivatization(open_answers)
    plans += _cleaner_spectrum(open_answers)
    return tuple(sorted(plans, key=lambda plan: -plan.priority))


def build_work_list(identifications: Sequence[Identification]) -> tuple[WorkItem, ...]:
    """The follow-up of all queries as one list; what helps several queries comes once, with its priorities added.

    Parameters
    ----------
    identifications : sequence of Identification

    Returns
    -------
    tuple of WorkItem
        Highest priority first.
    """
    found: dict[str, list[tuple[str, FollowUp]]] = {}
    for identification in identifications:
        for plan in identification.follow_up:
            found.setdefault(plan.action, []).append((identification.query.id, plan))
    items = [
        WorkItem(
            action,
            tuple(query for query, _ in plans),
            tuple(plan.reason for _, plan in plans),
            sum(plan.priority for _, plan in plans),
        )
        for action, plans in found.items()
    ]
    return tuple(sorted(items, key=lambda item: (-item.priority, item.action)))


def entropy(chances: Sequence[float]) -> float:
    """Entropy in nats of probabilities, brought to a sum of 1.

    Parameters
    ----------
    chances : sequence of float
        Not negative.

    Returns
    -------
    float

    Examples
    --------
    >>> round(entropy([0.5, 0.5]), 4), entropy([1.0]), entropy([])
    (0.6931, 0.0, 0.0)
    """
    total = sum(chances)
    return sum(-p / total * math.log(p / total) for p in chances if p > 0) if total > 0 else 0.0


def _information(outcomes: Sequence[tuple[Outcome | None, float]]) -> float:
    """Expected information of a measurement from the outcome (None: not known) and probability of each answer."""
    sums: dict[Outcome, float] = {}
    for outcome, chance in outcomes:
        if outcome is not None:
            sums[outcome] = sums.get(outcome, 0.0) + chance
    return sum(sums.values()) * entropy(list(sums.values()))


def _plan(
    kind: str, action: str, reason: str, names: Sequence[str], decides: str, information: float
) -> list[FollowUp]:
    if information < LEAST_INFORMATION:
        return []
    return [FollowUp(action, reason, tuple(names), decides, information / EFFORT[kind])]


def _names(answers: Sequence[Candidate]) -> list[str]:
    return [candidate.entry.identity.name for candidate in answers]


def _standards(answers: Sequence[Candidate]) -> list[FollowUp]:
    plans: list[FollowUp] = []
    for candidate in answers[:3]:
        name, p = candidate.entry.identity.name, candidate.probability
        own = candidate.entry.status is EntryStatus.OWN_STANDARD
        action = (
            f"measure the laboratory's own standard of {name} again" if own else f"buy and measure a standard of {name}"
        )
        plans += _plan(
            "own standard" if own else "authentic standard",
            action,
            f"{name} has probability {percent(p)}; the standard settles whether it is right",
            [name],
            "the same retention time and spectrum confirm it, a difference rules it out",
            entropy([p, 1.0 - p]),
        )
    return plans


def _retention_indices(query: Query, answers: Sequence[Candidate]) -> list[FollowUp]:
    plans: list[FollowUp] = []
    by_phase: dict[str, dict[int, float]] = {}
    for place, candidate in enumerate(answers):
        retention = candidate.entry.retention
        phase = retention.phase or phase_class(retention.column)
        if phase and retention.index and retention.index > 0:
            by_phase.setdefault(phase, {})[place] = retention.index
    for phase, known in by_phase.items():
        if query.record.retention.index is not None and query.record.retention.phase == phase:
            continue
        ordered = sorted(known, key=known.__getitem__)
        bins, outcome = dict.fromkeys(ordered, 0), 0
        for before, place in pairwise(ordered):
            outcome += known[place] - known[before] >= INDEX_STEP
            bins[place] = outcome
        told = _information([(bins.get(place), c.probability) for place, c in enumerate(answers)])
        values = ", ".join(f"{answers[place].entry.identity.name} {known[place]:.0f}" for place in ordered[:4])
        plans += _plan(
            "retention index",
            f"measure the retention index on a {phase} column",
            f"known indices differ: {values}",
            _names([answers[place] for place in ordered]),
            f"an index more than {INDEX_STEP:.0f} units away rules a candidate out",
            told,
        )
    return plans


def _masses(query: Query, answers: Sequence[Candidate], chances: Chances) -> list[FollowUp]:
    """Soft ionization (nominal mass) and accurate mass (formula)."""
    keys = chances.groups.keys
    by_group: dict[int, float] = {}
    formula_of: dict[int, str] = {}
    for place, candidate in enumerate(answers):
        group = int(chances.groups.of_candidate[place])
        by_group[group] = by_group.get(group, float(chances.unlisted[group])) + candidate.probability
        formula_of[group] = candidate.entry.formula_as_measured if keys[group] else ""

    def told(outcome: Callable[[str], Outcome | None]) -> float:
        rows = [(outcome(formula_of[group]), chance) for group, chance in by_group.items()]
        return _information([*rows, ("none of these", chances.elsewhere)])

    def nominal(formula: str) -> int | None:
        facts = formula_facts(formula)
        return facts.nominal_mass if facts else None

    names, mass_told = _names(answers), told(nominal)
    plans = _plan(
        "soft ionization",
        "soft ionization (chemical or field ionization)",
        "the candidates differ in molecular mass, or something else may be there",
        names,
        "the molecular mass",
        mass_told,
    )
    if query.spectrum.accurate is None:
        plans += _plan(
            "accurate mass",
            "measure accurate masses",
            "the candidates differ in formula, or something else may be there",
            names,
            "the formula of the molecular ion or of a large fragment",
            told(lambda formula: formula or None),
        )
    return plans


def _derivatization(answers: Sequence[Candidate]) -> list[FollowUp]:
    counts: list[int | None] = []
    for candidate in answers:
        smiles = candidate.entry.identity.smiles
        try:
            counts.append(active_hydrogens(smiles) if smiles and not candidate.entry.measured_as else None)
        except StructureError:
            counts.append(None)
    told = _information([(count, c.probability) for count, c in zip(counts, answers, strict=True)])
    known = [f"{c.entry.identity.name} {n}" for c, n in zip(answers, counts, strict=True) if n is not None]
    return _plan(
        "derivatization",
        "make the trimethylsilyl derivative",
        f"numbers of active hydrogens differ: {', '.join(known[:4])}",
        _names(answers),
        f"each active hydrogen adds {TMS_SHIFT_DA} to the molecular mass",
        told,
    )


def _cleaner_spectrum(answers: Sequence[Candidate]) -> list[FollowUp]:
    if not answers:
        return []
    foreign = [
        item
        for item in answers[0].evidence
        if item.kind in ("ions only in the query", "ions above M") and item.verdict is Verdict.CONFLICTS
    ]
    if not foreign:
        return []
    p = answers[0].probability
    return _plan(
        "cleaner spectrum",
        "take a cleaner spectrum and a blank",
        foreign[0].reason,
        [answers[0].entry.identity.name],
        "whether the ions that do not fit belong to this compound",
        0.5 * entropy([p, 1.0 - p]),
    )
