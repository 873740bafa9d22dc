"""The findings of a run in words: the same on the terminal, in tables and on the page."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime

from identify.records import ClaimLevel, FollowUp
from identify.report.words import NO_BREAK, NONE, probability_text, sentence, visible_text
from identify.runs.findings import Finding, RunFindings
from identify.runs.model import ComponentKind

COMPOUND_LEVELS = (ClaimLevel.CONFIRMED, ClaimLevel.SUPPORTED, ClaimLevel.TENTATIVE)
MAX_PLANS = 12


@dataclass(frozen=True, slots=True)
class ComponentRow:
    """One component as a table shows it; all fields are text."""

    number: str
    time: str
    index: str
    share: str
    signal_to_noise: str
    purity: str
    answer: str
    level: str
    probability: str
    remarks: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Plan:
    """A follow-up of a run: which component asks for it."""

    run: int
    component: int
    time: str
    plan: FollowUp


def component_row(finding: Finding, area_of_compounds: float) -> ComponentRow:
    """The texts of one component.

    Parameters
    ----------
    finding : Finding
    area_of_compounds : float
        All signal outside solvent and background: what shares refer to.

    Returns
    -------
    ComponentRow
    """
    c, found = finding.component, finding.identification
    index = finding.retention_index
    share = c.area / area_of_compounds if area_of_compounds > 0 else 0.0
    return ComponentRow(
        number=str(c.number),
        time=f"{c.time_s / 60.0:.2f}",
        index="" if index is None else f"{index:.0f}",
        share="" if finding.is_background else share_text(share),
        signal_to_noise=f"{c.signal_to_noise:.0f}",
        purity=f"{100.0 * c.purity:.0f}{NO_BREAK}%",
        answer=answer_text(finding),
        level=found.claim.level.value if found else c.kind.value,
        probability=probability_text(found.claim.probability) if found and finding.is_explained else NONE,
        remarks=_remarks(finding),
    )


def answer_text(finding: Finding) -> str:
    """What a component is, as short as it can be said.

    Parameters
    ----------
    finding : Finding

    Returns
    -------
    str
    """
    found = finding.identification
    prefix = "" if finding.component.kind is ComponentKind.COMPOUND else f"{finding.component.kind.value}: "
    if found is None:
        return prefix.removesuffix(": ") or finding.reason
    best = found.candidates[0] if found.candidates else None
    if best is None:
        return prefix + "nothing alike in the library"
    name = visible_text(best.entry.identity.name)
    level = found.claim.level
    if level in COMPOUND_LEVELS:
        return prefix + name
    if level is ClaimLevel.ISOMER_GROUP:
        return f"{prefix}isomer of {visible_text(best.entry.formula_as_measured)} (such as {name})"
    if level is ClaimLevel.CLASS:
        return prefix + visible_text(found.claim.members[0])
    return f"{prefix}not named; nearest {name}, {probability_text(best.probability)}"


def date_text(stamp: str) -> str:
    """A time stamp of a run file as date and time; as it stands where it is of no known form.

    Parameters
    ----------
    stamp : str
        As in ANDI files (ASTM E2077: YYYYMMDDhhmmss and the offset from UTC) or mzML (ISO 8601).

    Returns
    -------
    str

    Examples
    --------
    >>> date_text("20210304050607+0100"), date_text("2021-03-04T05:06:07Z"), date_text("spring")
    ('2021-03-04 05:06 UTC+01:00', '2021-03-04 05:06 UTC', 'spring')
    """
    for form in ("%Y%m%d%H%M%S%z", "%Y%m%d%H%M%S", "%Y-%m-%dT%H:%M:%S%z", "%Y-%m-%dT%H:%M:%S"):
        try:
            when = datetime.strptime(stamp.strip(), form)
        except ValueError:
            continue
        return f"{when:%Y-%m-%d %H:%M} {when.tzname() or ''}".strip()
    return visible_text(stamp)


def share_text(share: float) -> str:
    """A share of the signal as percent with the digits that mean something.

    Parameters
    ----------
    share : float
        In [0, 1].

    Returns
    -------
    str

    Examples
    --------
    >>> [share_text(value).replace(NO_BREAK, " ") for value in (0.1234, 0.0123, 0.00004)]
    ['12.3 %', '1.2 %', '< 0.01 %']
    """
    percent = 100.0 * share
    if percent < 0.01:
        return f"<{NO_BREAK}0.01{NO_BREAK}%"
    return f"{percent:.{1 if percent >= 1 else 2}f}{NO_BREAK}%"


def share_lines(run: RunFindings) -> tuple[tuple[str, str], ...]:
    """What explains the signal of a run, as (name, share) pairs, strongest level first, sums included.

    Parameters
    ----------
    run : RunFindings

    Returns
    -------
    tuple of (str, str)
    """
    shares = run.shares
    total = shares.compounds
    rows = [
        (level.value, share_text(shares.explained[level] / total))
        for level in ClaimLevel
        if total > 0 and level in shares.explained
    ]
    rows.append(("in no component", share_text(shares.unassigned / total if total > 0 else 0.0)))
    rows.append(("explained at class level or better", share_text(shares.at_least(ClaimLevel.CLASS))))
    return tuple(rows)


def follow_up_plans(runs: Sequence[RunFindings]) -> tuple[Plan, ...]:
    """Next measurements over all runs: those that would decide most signal first, each action once.

    Parameters
    ----------
    runs : sequence of RunFindings

    Returns
    -------
    tuple of Plan
        At most `MAX_PLANS`.
    """
    ranked = []
    for run in runs:
        total = run.shares.compounds or 1.0
        for finding in run.findings:
            if finding.identification is None or finding.is_background:
                continue
            for plan in finding.identification.follow_up:
                weight = plan.priority * finding.component.area / total
                ranked.append((weight, Plan(run.number, finding.component.number, _minutes(finding), plan)))
    ranked.sort(key=lambda pair: -pair[0])
    chosen: dict[str, Plan] = {}
    for _, proposed in ranked:
        chosen.setdefault(proposed.plan.action, proposed)
        if len(chosen) == MAX_PLANS:
            break
    return tuple(chosen.values())


def _minutes(finding: Finding) -> str:
    return f"{finding.component.time_s / 60.0:.2f}{NO_BREAK}min"


def _remarks(finding: Finding) -> tuple[str, ...]:
    c = finding.component
    remarks = [c.note] if c.note else []
    if c.is_saturated and "overloaded" not in c.note:
        remarks.append("saturated: its ion ratios are not to be trusted")
    if finding.identification:
        remarks += list(finding.identification.notes)
    return tuple(sentence(text) for text in remarks)
