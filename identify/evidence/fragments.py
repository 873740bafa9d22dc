"""Ions that only one of the two spectra has, judged: background, co-elution or contradiction?"""

from __future__ import annotations

import numpy as np

from identify.evidence.facts import FormulaFacts, QueryFacts
from identify.evidence.finding import Finding, not_assessed
from identify.records import AlignedPeaks, Verdict

MISSING = "ions missing in the query"
EXTRA = "ions only in the query"

NOTABLE = 5.0
"""Relative intensity (% of base) from which an ion that only one spectrum has is named."""
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
    if not aligned.mz.size or not aligned.entry.any():
        return not_assessed(MISSING, "There is no m/z range that both spectra cover.")
    absent = (aligned.query <= 0.1 * aligned.entry) & (aligned.entry >= np.maximum(NOTABLE, 2.0 * facts.floor))
    weight = aligned.entry * aligned.mz
    total = float(weight.sum())
    share = float(weight[absent].sum()) / total if total else 0.0
    named = _named(aligned.mz[absent], aligned.entry[absent])
    size = next(word for edge, word in ((1e-9, "none"), (0.05, "few"), (0.2, "some"), (2.0, "many")) if share <= edge)
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
    if not aligned.mz.size or not aligned.query.any():
        return not_assessed(EXTRA, "There is no m/z range that both spectra cover.")
    extra = (aligned.entry <= 0.1 * aligned.query) & (aligned.query >= NOTABLE)
    known = np.array([int(mz) in BACKGROUND for mz in aligned.mz.tolist()], dtype=bool)
    counted = extra & ~known
    weight = aligned.query * aligned.mz
    total = float(weight.sum())
    share = float(weight[counted].sum()) / total if total else 0.0
    foreign = [
        int(mz) for mz in aligned.mz[counted].tolist() if formula is not None and not _reachable(formula, int(mz))
    ]
    named = _named(aligned.mz[counted], aligned.query[counted])
    background = sorted({BACKGROUND[int(mz)] for mz in aligned.mz[extra & known].tolist()})
    size = next(word for edge, word in ((1e-9, "none"), (0.05, "few"), (0.2, "some"), (2.0, "many")) if share <= edge)
    cell = size + (", foreign" if foreign and size in ("some", "many") else "")
    aside = f" Named background left aside: {', '.join(background)}." if background else ""
    if size == "none":
        verdict, reason = Verdict.AGREES, "The entry has every notable ion of the query." + aside
    elif foreign and size != "few":
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
    reachable = formula.reachable
    return any(0 < place < reachable.size and bool(reachable[place]) for place in (mz, mz - 1, mz - 2))


def _named(
    mz: np.ndarray[tuple[int, ...], np.dtype[np.float64]], intensity: np.ndarray[tuple[int, ...], np.dtype[np.float64]]
) -> str:
    order = np.argsort(-intensity, kind="stable")[:5]
    return _list([int(value) for value in mz[order].tolist()])


def _list(values: list[int]) -> str:
    return ", ".join(str(value) for value in values[:5])
