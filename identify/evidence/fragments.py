"""Ions that only one of the two spectra has, judged: background, co-elution or contradiction?"""

from __future__ import annotations

from identify.evidence.facts import FormulaFacts, QueryFacts
from identify.evidence.finding import Finding, not_assessed
from identify.records import AlignedPeaks, FloatArray, Verdict

MISSING = "ions missing in the query"
EXTRA = "ions only in the query"

NOTABLE = 5.0
"""Relative intensity (% of base) from which an ion that only one spectrum has is named."""
GRAVE = ("some", "many")
"""Shares from which ions that only one spectrum has are a conflict."""
SOURCE = (
    "Ions of the reference above 10 % must be present, extra ions are reviewed for background and co-elution (EPA 8260 family, "
    "rules for tentatively identified compounds); weighed on open EI records at equal cosine similarity"
)
BACKGROUND: dict[int, str] = {
    18: "water", 28: "air", 32: "air", 40: "argon", 44: "carbon dioxide",
    73: "siloxane", 147: "siloxane", 207: "siloxane", 221: "siloxane", 267: "siloxane", 281: "siloxane", 295: "siloxane",
    341: "siloxane", 355: "siloxane", 429: "siloxane", 149: "phthalate",
}  # fmt: skip
"""Known background of gas chromatography (`standards.md` 6, contaminant table)."""


def check_missing_ions(facts: QueryFacts, aligned: AlignedPeaks) -> Finding:
    """Whether the query lacks ions that the entry shows strongly.

    Parameters
    ----------
    facts : QueryFacts
    aligned : AlignedPeaks

    Returns
    -------
    Finding
        An ion weaker than the query could record is not missed.
    """
    total = float(aligned.entry @ aligned.mz)
    if not total:
        return not_assessed(MISSING, "There is no m/z range that both spectra cover.")
    lost = _strongest_alone(aligned.mz, aligned.entry, aligned.query, max(NOTABLE, 2.0 * facts.floor))
    share = sum(mz * value for mz, value in lost) / total
    named = _list([mz for mz, _ in lost])
    size = _size_of(share)
    if size == "none":
        verdict, reason = Verdict.AGREES, "Every notable ion of the entry is in the query."
    elif size == "few":
        verdict, reason = Verdict.INCONCLUSIVE, f"The query lacks m/z {named}, a small part of the entry."
    else:
        verdict, reason = Verdict.CONFLICTS, f"The query lacks m/z {named}, which the entry shows."
    return Finding(
        MISSING,
        verdict,
        reason,
        cell=size,
        observed=f"{100 * share:.0f} % of the entry missing (weighted by m/z)",
        expected="all ions of 5 % or more",
        uncertainty=f"peaks below {facts.floor:.2g} % of base are not recorded",
        source=SOURCE,
    )


def check_extra_ions(facts: QueryFacts, aligned: AlignedPeaks, formula: FormulaFacts | None) -> Finding:
    """Whether the query has strong ions that the entry lacks, and what they may be.

    Parameters
    ----------
    facts : QueryFacts
    aligned : AlignedPeaks
    formula : FormulaFacts or None
        Ions no piece of it can have speak for a second compound or against the candidate.

    Returns
    -------
    Finding
    """
    total = float(aligned.query @ aligned.mz)
    if not total:
        return not_assessed(EXTRA, "There is no m/z range that both spectra cover.")
    found = _strongest_alone(aligned.mz, aligned.query, aligned.entry, NOTABLE)
    counted = [(mz, value) for mz, value in found if mz not in BACKGROUND]
    share = sum(mz * value for mz, value in counted) / total
    named = _list([mz for mz, _ in counted])
    background = sorted({BACKGROUND[mz] for mz, _ in found if mz in BACKGROUND})
    size = _size_of(share)
    foreign = sorted(mz for mz, _ in counted if not _reachable(formula, mz)) if formula and size in GRAVE else []
    cell = size + (", foreign" if foreign else "")
    aside = f" Named background left aside: {', '.join(background)}." if background else ""
    if size == "none":
        verdict, reason = Verdict.AGREES, "The entry has every notable ion of the query." + aside
    elif foreign:
        verdict = Verdict.CONFLICTS
        reason = f"m/z {_list(foreign)} cannot come from this formula: a second compound or another candidate." + aside
    elif size == "few":
        verdict, reason = Verdict.INCONCLUSIVE, f"The entry lacks m/z {named}, a small part of the query." + aside
    else:
        verdict, reason = Verdict.CONFLICTS, f"The entry lacks m/z {named}, which the query shows." + aside
    return Finding(
        EXTRA,
        verdict,
        reason,
        cell=cell,
        observed=f"{100 * share:.0f} % of the query not in the entry (weighted by m/z)",
        expected="no ion of 5 % or more beyond the entry and named background",
        uncertainty=f"peaks below {facts.floor:.2g} % of base are not recorded",
        source=SOURCE,
    )


def _reachable(formula: FormulaFacts, mz: int) -> bool:
    return any(formula.reachable[max(mz - 2, 1) : mz + 1])  # an isotope peak lies one or two above


def _strongest_alone(mz: FloatArray, own: FloatArray, other: FloatArray, least: float) -> list[tuple[int, float]]:
    """Peaks of at least `least` of which the other spectrum has a tenth or less, strongest first."""
    alone = ((own >= least) & (other <= 0.1 * own)).nonzero()[0]
    chosen = zip(mz[alone].astype(int).tolist(), own[alone].tolist(), strict=True)
    return sorted(chosen, key=lambda peak: -peak[1])


def _size_of(share: float) -> str:
    return "none" if share <= 1e-9 else "few" if share <= 0.05 else "some" if share <= 0.2 else "many"


def _list(values: list[int]) -> str:
    return ", ".join(str(value) for value in values[:5])
