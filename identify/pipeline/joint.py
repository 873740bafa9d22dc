"""Identifications of one run seen together: what each says alone must fit what the others say.

One compound per peak and one peak per compound; the order of elution must fit known retention indices and the order within a
homologous series. Where it does not, claims are lowered; agreement among neighbours is no evidence of its own and raises none.
(`elution` has judged each peak by its time before, `run_classes` names classes, which do rest on the run as well and say so.)
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

from identify.pipeline.run_claims import COMPOUND_LEVELS, claim_group, lower_claim
from identify.records import Candidate, ClaimLevel, Verdict
from identify.retention import doubt_about_index, phase_class, series_key
from identify.runs.findings import Finding
from identify.settings import Settings

RIVAL_PROBABILITY = 0.25
RIVAL_AREA_SHARE = 0.01
"""A second peak with the same best compound counts from this probability and this share of the claimed peak's area."""
SPLIT_WIDTHS, SPLIT_SHARE = 2.5, 0.3
"""Closer than this many peak widths and smaller than this share, the second is a remainder of the first."""
INDEX_SLACK = 30.0
"""Index units by which two entries may be out of order: laboratories differ by about 20 on one phase class."""


def settle_jointly(findings: Sequence[Finding], width_s: float, settings: Settings) -> tuple[Finding, ...]:
    """Findings whose claims do not contradict each other.

    Parameters
    ----------
    findings : sequence of Finding
        In the order of elution.
    width_s : float
        Typical full width of a peak at half height, in seconds.
    settings : Settings
        The claim threshold decides which level is left after lowering.

    Returns
    -------
    tuple of Finding
        As many, same order; each lowered claim has a note with the reason.
    """
    settled = [_without_mixture_doubt(finding, settings.claim_threshold) for finding in findings]
    for lower in (_one_peak_per_compound, _order_of_indices, _order_in_series):
        for place, reason in lower(settled, width_s).items():
            found = settled[place].identification
            if found is not None:
                lowered = lower_claim(found, reason, settings.claim_threshold)
                settled[place] = replace(settled[place], identification=lowered)
    return tuple(settled)


def _without_mixture_doubt(finding: Finding, threshold: float) -> Finding:
    """The finding with its isomer group claimed, where a peak is overloaded and only the doubt about its purity stood against it.

    The ion ratios of an overloaded peak drift, so that a second entry always explains them better: no sign of a mixture.
    """
    found = finding.identification
    if found is None or not finding.component.is_saturated or not found.candidates or found.purity is None:
        return finding
    formula, claim = found.candidates[0].entry.formula_as_measured, found.claim
    open_levels = (ClaimLevel.CLASS, ClaimLevel.NO_CLAIM)
    doubted = found.purity.verdict is Verdict.CONFLICTS and claim.level in open_levels
    if not (doubted and formula and claim.group_probability >= threshold):
        return finding
    note = "The peak is overloaded and its ion ratios drift: that two entries explain it better than one is no sign of a mixture."
    return replace(finding, identification=replace(claim_group(found), notes=(*found.notes, note)))


def compound_key(candidate: Candidate) -> str:
    """The same text for entries of one compound in one derivative, stereoisomers together.

    Parameters
    ----------
    candidate : Candidate

    Returns
    -------
    str
    """
    identity = candidate.entry.identity
    who = identity.inchikey[:14] or identity.name.casefold()
    return f"{who} {candidate.entry.measured_as} {candidate.entry.is_labelled}"


def _best(finding: Finding) -> Candidate | None:
    found = finding.identification
    return found.candidates[0] if found and found.candidates else None


def _is_claimed(finding: Finding) -> bool:
    return finding.identification is not None and finding.identification.claim.level in COMPOUND_LEVELS


def _minutes(finding: Finding) -> str:
    return f"{finding.component.time_s / 60.0:.2f} min"


def _one_peak_per_compound(findings: Sequence[Finding], width_s: float) -> dict[int, str]:
    """Claims on a compound that is the best answer for another peak too, unless a retention index tells them apart."""
    by_compound: dict[str, list[int]] = {}
    for place, finding in enumerate(findings):
        best = _best(finding)
        if best and best.probability >= RIVAL_PROBABILITY:
            by_compound.setdefault(compound_key(best), []).append(place)
    reasons: dict[int, str] = {}
    for places in by_compound.values():
        backed = [place for place in places if _index_agrees(findings[place])]
        for place in places:
            if not _is_claimed(findings[place]) or backed == [place]:
                continue
            rivals = [
                other for other in places if other != place and _is_rival(findings[other], findings[place], width_s)
            ]
            if rivals:
                names = ", ".join(_minutes(findings[other]) for other in rivals[:4])
                reasons[place] = (
                    f"The same compound is the best answer for the peak at {names}; it can be one of them only."
                )
    return reasons


def _is_rival(other: Finding, claimed: Finding, width_s: float) -> bool:
    """Whether the other peak could be the claimed compound instead: not a mere remainder of the claimed one, not a trace."""
    area, own = other.component.area, claimed.component.area
    close = abs(other.component.time_s - claimed.component.time_s) <= SPLIT_WIDTHS * width_s
    if close and area <= SPLIT_SHARE * own:
        return False
    return area >= RIVAL_AREA_SHARE * own


def _index_agrees(finding: Finding) -> bool:
    best = _best(finding)
    return best is not None and any(
        item.kind == "retention index" and item.verdict is Verdict.AGREES for item in best.evidence
    )


def _order_of_indices(findings: Sequence[Finding], width_s: float) -> dict[int, str]:
    """Claims whose entries' indices do not rise with the time of elution."""
    reasons: dict[int, str] = {}
    rows: dict[str, list[tuple[int, float, float]]] = {}
    for place, finding in enumerate(findings):
        best = _best(finding)
        if best is None or not _is_claimed(finding):
            continue
        retention = best.entry.retention
        phase = retention.phase or phase_class(retention.column)
        if phase and retention.index is not None and not doubt_about_index(retention.index, retention.time_s):
            rows.setdefault(phase, []).append((place, retention.index, best.probability))
    for phase, members in rows.items():
        for place in _misfits(members, lambda early, late: late >= early - INDEX_SLACK):
            reasons[place] = f"Its entry's retention index ({phase}) is out of order with the other claims of this run."
    return reasons


def _order_in_series(findings: Sequence[Finding], width_s: float) -> dict[int, str]:
    """Claims on members of a homologous series that elute against the order of their chain lengths."""
    series: dict[str, list[tuple[int, float, float]]] = {}
    for place, finding in enumerate(findings):
        best = _best(finding)
        if best is None or not _is_claimed(finding):
            continue
        key, length = series_key(best.entry.identity.smiles)
        if key:
            series.setdefault(f"{key} {best.entry.measured_as}", []).append((place, float(length), best.probability))
    reasons: dict[int, str] = {}
    for members in series.values():
        for place in _misfits(members, lambda early, late: late >= early):
            reasons[place] = (
                "Longer chains of a homologous series elute later; this claim and its series are out of order."
            )
    return reasons


def _misfits(rows: Sequence[tuple[int, float, float]], fits: Callable[[float, float], bool]) -> list[int]:
    """Places outside the heaviest chain whose neighbours fit; rows are (place, value, weight) in the order of elution."""
    best_weight = [weight for _, _, weight in rows]
    previous: list[int | None] = [None] * len(rows)
    for late in range(len(rows)):
        for early in range(late):
            if fits(rows[early][1], rows[late][1]) and best_weight[early] + rows[late][2] > best_weight[late]:
                best_weight[late], previous[late] = best_weight[early] + rows[late][2], early
    chain: set[int] = set()
    step: int | None = max(range(len(rows)), key=lambda place: best_weight[place], default=None)
    while step is not None:
        chain.add(step)
        step = previous[step]
    return [rows[place][0] for place in range(len(rows)) if place not in chain]
