"""Does an unknown meet a document's identification criteria against a standard of the same laboratory?"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from identify.evidence.criteria_files import Criteria, RetentionRule
from identify.records import CleanSpectrum, Verdict

CAUTION = (
    "These rules suppose a standard run on the same instrument, by the same method, near in time to the unknown. Against a "
    "library spectrum from elsewhere they are outside their scope."
)
MEMORY_CAUTION = (
    "The windows of this document are written from memory: check them against the original before relying on them."
)
EDGE = 1e-9


@dataclass(frozen=True, slots=True)
class RetentionTimes:
    """Retention times in seconds of unknown and standard, and of the internal standard in either run where there is one."""

    unknown_s: float
    standard_s: float
    internal_in_unknown_s: float | None = None
    internal_in_standard_s: float | None = None


@dataclass(frozen=True, slots=True)
class IonVerdict:
    """One ion of the standard judged in the unknown; intensities in % of the standard's base-peak ion."""

    mz: int
    standard_percent: float
    unknown_percent: float
    low: float
    high: float
    verdict: Verdict
    reason: str


@dataclass(frozen=True, slots=True)
class Confirmation:
    """The outcome of one document's criteria.

    Attributes
    ----------
    criteria : Criteria
    ions : tuple of IonVerdict
        By falling intensity in the standard.
    ions_verdict, retention_verdict, verdict : Verdict
        Ions alone, retention alone, and both (with points where the document counts them).
    ions_reason, retention_reason : str
    extra : tuple of (int, float)
        Ions of 10 % or more in the unknown that the standard lacks, with their relative intensity: to be reviewed.
    points, points_needed : float or None
        None when the document counts none.
    cautions : tuple of str
    """

    criteria: Criteria
    ions: tuple[IonVerdict, ...]
    ions_verdict: Verdict
    ions_reason: str
    retention_verdict: Verdict
    retention_reason: str
    extra: tuple[tuple[int, float], ...]
    points: float | None
    points_needed: float | None
    verdict: Verdict
    cautions: tuple[str, ...]


def check_confirmation(
    unknown: CleanSpectrum,
    standard: CleanSpectrum,
    criteria: Criteria,
    *,
    times: RetentionTimes | None = None,
    molecular_mz: int | None = None,
    chosen_ions: Sequence[int] = (),
) -> Confirmation:
    """Whether the unknown meets the criteria against the standard, ion by ion.

    Parameters
    ----------
    unknown, standard : CleanSpectrum
        Nominal peaks are used.
    criteria : Criteria
        From `load_criteria`.
    times : RetentionTimes, optional
        Without them retention is `not assessed` and the whole verdict at best `inconclusive` where the document asks for it.
    molecular_mz : int, optional
        m/z of the molecular ion, for documents that demand it.
    chosen_ions : sequence of int, optional
        Diagnostic ions chosen beforehand; default: all that the document considers.

    Returns
    -------
    Confirmation

    Notes
    -----
    Both spectra are scaled to the standard's base-peak ion, so that a co-eluting compound with a taller ion elsewhere does
    not shift every ratio. Where that ion is missing in the unknown, all ions conflict.
    """
    base = int(standard.nominal.base_peak_mz)
    scale = unknown.nominal.intensity_at(base)
    reference = dict(zip(standard.nominal.mz.astype(int).tolist(), standard.nominal.relative.tolist(), strict=True))
    wanted = _wanted_ions(reference, criteria, molecular_mz, chosen_ions)
    ions = tuple(
        _judge_ion(
            mz, reference.get(mz, 0.0), 100.0 * unknown.nominal.intensity_at(mz) / scale if scale else 0.0, criteria
        )
        for mz in wanted
    )
    ions_verdict, ions_reason = _judge_ions(ions, criteria, bool(chosen_ions), molecular_mz)
    retention_verdict, retention_reason = check_retention_rule(criteria.retention, times)
    met = sum(ion.verdict is Verdict.AGREES for ion in ions)
    points = needed = None
    if criteria.points is not None:
        separation = criteria.points.separation if retention_verdict is Verdict.AGREES else 0.0
        points, needed = separation + criteria.points.per_ion * met, criteria.points.needed
    cautions = (CAUTION, MEMORY_CAUTION) if "memory" in criteria.provenance else (CAUTION,)
    return Confirmation(
        criteria,
        ions,
        ions_verdict,
        ions_reason,
        retention_verdict,
        retention_reason,
        _extra_ions(unknown, reference, scale),
        points,
        needed,
        _overall(ions_verdict, retention_verdict, criteria, points, needed),
        cautions,
    )


def _wanted_ions(
    reference: dict[int, float], criteria: Criteria, molecular_mz: int | None, chosen: Sequence[int]
) -> tuple[int, ...]:
    if chosen:
        return tuple(chosen)
    wanted = {mz for mz, percent in reference.items() if percent >= criteria.considered_from_percent}
    limit = criteria.molecular_ion_from_percent
    if molecular_mz in reference and limit is not None and reference[molecular_mz] >= limit:
        wanted.add(molecular_mz)
    return tuple(sorted(wanted, key=lambda mz: (-reference[mz], mz)))


def _judge_ion(mz: int, standard: float, seen: float, criteria: Criteria) -> IonVerdict:
    if standard <= 0:
        return IonVerdict(mz, 0.0, seen, 0.0, 0.0, Verdict.NOT_ASSESSED, "The standard does not show this ion.")
    low, high = criteria.window(standard)
    if seen <= 0:
        verdict, reason = Verdict.CONFLICTS, "The unknown does not show this ion."
    elif low - EDGE <= seen <= high + EDGE:
        verdict, reason = Verdict.AGREES, "Inside the window."
    else:
        side = "below" if seen < low else "above"
        verdict, reason = Verdict.CONFLICTS, f"{side.capitalize()} the window of {low:.1f}–{high:.1f} %."
    return IonVerdict(mz, standard, seen, low, high, verdict, reason)


def _judge_ions(
    ions: tuple[IonVerdict, ...], criteria: Criteria, chosen: bool, molecular_mz: int | None
) -> tuple[Verdict, str]:
    judged = [ion for ion in ions if ion.verdict is not Verdict.NOT_ASSESSED]
    met = sum(ion.verdict is Verdict.AGREES for ion in judged)
    limit = criteria.present_above_percent
    missing = [
        ion.mz for ion in judged if limit is not None and ion.standard_percent > limit and ion.unknown_percent <= 0
    ]
    if missing:
        return Verdict.CONFLICTS, f"m/z {', '.join(map(str, missing))} of the standard must be present and is missing."
    if len(judged) < criteria.minimum_ions:
        return (
            Verdict.NOT_ASSESSED,
            f"The standard shows {len(judged)} usable ions; {criteria.minimum_ions} are needed.",
        )
    molecular = next((ion for ion in judged if ion.mz == molecular_mz), None)
    if molecular is not None and criteria.molecular_ion_from_percent is not None and molecular.unknown_percent <= 0:
        return Verdict.CONFLICTS, f"The molecular ion (m/z {molecular_mz}) of the standard is missing."
    needed = len(judged) if criteria.all_must_meet or chosen else criteria.minimum_ions
    text = f"{met} of {len(judged)} ions lie inside their windows; {needed} are needed."
    return (Verdict.AGREES if met >= needed else Verdict.CONFLICTS), text


def check_retention_rule(rule: RetentionRule | None, times: RetentionTimes | None) -> tuple[Verdict, str]:
    """Verdict of a document's retention rule, and the reason.

    Parameters
    ----------
    rule : RetentionRule or None
        None when the document sets none.
    times : RetentionTimes or None

    Returns
    -------
    verdict : Verdict
    reason : str
    """
    if rule is None:
        return Verdict.NOT_ASSESSED, "The document sets no retention limit."
    if times is None:
        return Verdict.NOT_ASSESSED, "No retention times are given."
    if rule.kind == "relative time":
        inner, outer = times.internal_in_unknown_s, times.internal_in_standard_s
        if not inner or not outer:
            return Verdict.NOT_ASSESSED, "The rule is relative to an internal standard, whose times are not given."
        unknown, standard, unit = times.unknown_s / inner, times.standard_s / outer, ""
    else:
        unknown, standard, unit = times.unknown_s / 60.0, times.standard_s / 60.0, " min"
    limit = _retention_limit(rule, standard)
    difference = unknown - standard
    inside = abs(difference) <= limit + EDGE
    text = f"Differs by {difference:+.4g}{unit}; the limit is {limit:.4g}{unit}."
    return (Verdict.AGREES if inside else Verdict.CONFLICTS), text


def _retention_limit(rule: RetentionRule, standard: float) -> float:
    if rule.early_relative_percent is not None and standard < rule.early_below_min:
        return rule.early_relative_percent * standard / 100.0
    limits = []
    if rule.absolute_min is not None:
        limits.append(rule.absolute_min)
    if rule.relative_percent is not None:
        limits.append(rule.relative_percent * standard / 100.0)
    return max(limits) if rule.combine == "greater" else min(limits)


def _extra_ions(unknown: CleanSpectrum, reference: dict[int, float], scale: float) -> tuple[tuple[int, float], ...]:
    if not scale:
        return ()
    rows = zip(unknown.nominal.mz.astype(int).tolist(), unknown.nominal.intensity.tolist(), strict=True)
    found = [(mz, 100.0 * value / scale) for mz, value in rows if mz not in reference]
    return tuple((mz, percent) for mz, percent in found if percent >= 10.0)


def _overall(
    ions: Verdict, retention: Verdict, criteria: Criteria, points: float | None, needed: float | None
) -> Verdict:
    if Verdict.CONFLICTS in (ions, retention):
        return Verdict.CONFLICTS
    if ions is Verdict.NOT_ASSESSED:
        return Verdict.NOT_ASSESSED
    if criteria.retention is not None and retention is not Verdict.AGREES:
        return Verdict.INCONCLUSIVE
    if points is not None and needed is not None and points < needed:
        return Verdict.INCONCLUSIVE
    return Verdict.AGREES
