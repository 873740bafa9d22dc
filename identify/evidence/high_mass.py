"""The high-mass end against a candidate.

Is the molecular ion where the formula puts it, does anything lie above it, are the losses possible?
"""

from __future__ import annotations

from functools import lru_cache

from identify.chem.structures import compound_classes
from identify.errors import StructureError
from identify.evidence.class_ions import SELDOM_WITH_M
from identify.evidence.facts import FormulaFacts, QueryFacts
from identify.evidence.finding import Finding, not_assessed
from identify.evidence.fragments import BACKGROUND
from identify.evidence.isotopes import CARBON_13
from identify.records import Entry, Verdict

MOLECULAR_ION = "molecular ion"
IONS_ABOVE = "ions above M"
LOSSES = "losses from M"

LEVELS = ((0.5, "absent"), (5.0, "weak"), (25.0, "medium"), (float("inf"), "strong"))
RANK = {name: place for place, (_, name) in enumerate(LEVELS)}
IMPROBABLE_LOSSES = (4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 21, 22, 23, 24, 25, 37, 38)
"""McLafferty & Turecek (from memory), without 14 and 33: on the open records 33 is lost in 7 % of spectra."""
HALOGEN_LOSSES = {"Cl": (37, 38), "F": (21, 22), "Br": (), "B": (9, 10, 11, 12, 13)}
"""Losses that halogens or boron make probable: Cl + H2 and HCl + H2, HF + H and HF + H2, BH."""
LOSS_SOURCE = (
    "Improbable losses 4–13, 21–25, 37, 38: McLafferty & Turecek, Interpretation of Mass Spectra (from memory); 33 left out "
    "because open records show it; weighed on open EI records"
)
PRESENCE_SOURCE = (
    "Molecular ion at the nominal mass of the formula as measured (definition); weighed on open EI records"
)
ABOVE_SOURCE = (
    "Nothing but isotope peaks and [M+H]+ lies above the molecular ion (definition); weighed on open EI records"
)


def level_of(relative: float) -> str:
    """Word for a relative intensity (base peak = 100): absent < 0.5, weak < 5, medium < 25, strong."""
    return next(name for limit, name in LEVELS if relative < limit)


def check_molecular_ion(
    facts: QueryFacts, formula: FormulaFacts | None, entry: Entry, n_groups: int | None = None
) -> Finding:
    """Whether the query shows the molecular ion as strongly as the entry's own spectrum leads one to expect.

    Parameters
    ----------
    facts : QueryFacts
    formula : FormulaFacts or None
        Formula as measured.
    entry : Entry
        Its own spectrum says whether absence is normal.
    n_groups : int or None
        Number of derivative groups chosen from the query, for an entry that does not state it.

    Returns
    -------
    Finding
        The tallest isotope peak stands for the ion (for Br2 the one at M + 2). Where a silylated entry shows no molecular ion,
        [M − CH3]+ (trimethylsilyl) or [M − C4H9]+ (tert-butyldimethylsilyl) stands for it.
    """
    if formula is None:
        return not_assessed(MOLECULAR_ION, "The entry has no formula, so the mass of its molecular ion is not known.")
    mass, mz = formula.nominal_mass, formula.nominal_mass + formula.strongest_offset
    label = f"M (m/z {mass})" if mz == mass else f"M (m/z {mass}; tallest isotope peak at m/z {mz})"
    stand_in = ""
    own = _entry_at(entry, mz)
    lost = 57 if "TBDMS" in entry.measured_as else 15 if "Si" in formula.heavy else 0
    if lost and own < LEVELS[0][0] and _entry_at(entry, mz - lost) >= 1.0:
        mz, stand_in, label = (
            mz - lost,
            f"M − {lost}, ",
            f"M − {lost} (m/z {mz - lost}), usual in place of M for silyl groups,",
        )
        own = _entry_at(entry, mz)
    if mz < facts.lowest_mz or (facts.highest_mz is not None and mz > facts.highest_mz):
        return not_assessed(MOLECULAR_ION, f"m/z {mz} lies outside the measured range.")
    seen = facts.at(mz)
    verdict, reason = _compare_levels(seen, own, label, facts.floor)
    seldom = _seldom_class(entry) if verdict is Verdict.CONFLICTS and level_of(own) == "weak" else ""
    if seldom:
        verdict = Verdict.INCONCLUSIVE
        reason = (
            f"The query does not show {label}; {100 * SELDOM_WITH_M[seldom]:.0f} % of the open records of its class "
            f"({seldom}) do not."
        )
    cell = f"{stand_in}entry {level_of(own)}, query {level_of(seen)}"
    if n_groups is not None:
        reason = f"{reason[:-1]}, taken as {n_groups} groups because that fits the query best."
        if verdict is Verdict.AGREES:  # the number was chosen so that it would
            verdict, cell = Verdict.INCONCLUSIVE, ""
    return Finding(
        MOLECULAR_ION,
        verdict,
        reason,
        cell=cell,
        observed=f"{seen:.1f} % of base",
        expected=f"{own:.1f} % of base in the entry",
        uncertainty=f"peaks below {facts.floor:.2g} % are not recorded",
        source=PRESENCE_SOURCE,
    )


def _seldom_class(entry: Entry) -> str:
    """Class of the compound itself that seldom shows M; empty for none. Asked only where M is weak: it takes time."""
    if not entry.identity.smiles or entry.measured_as:
        return ""
    try:
        found = compound_classes(entry.identity.smiles)
    except StructureError:
        return ""
    return max((name for name in found if name in SELDOM_WITH_M), key=lambda name: SELDOM_WITH_M[name], default="")


def _compare_levels(seen: float, own: float, label: str, floor: float) -> tuple[Verdict, str]:
    seen_level, own_level = level_of(seen), level_of(own)
    gap = RANK[own_level] - RANK[seen_level]
    if own_level == "absent" and seen_level == "absent":
        return Verdict.INCONCLUSIVE, f"Neither spectrum shows {label}; its absence is normal for this entry."
    if own_level == "absent":
        return (
            Verdict.INCONCLUSIVE,
            f"The query has an ion where {label} would be, but the entry's own spectrum does not show its molecular ion.",
        )
    if seen_level == "absent" and floor >= own / 2:
        return Verdict.INCONCLUSIVE, f"The query does not show {label}, but records nothing that weak."
    if seen_level == "absent":
        return Verdict.CONFLICTS, f"The query does not show {label}, which the entry's own spectrum shows."
    if gap >= 2:
        return Verdict.CONFLICTS, f"The query shows {label} far weaker than the entry's own spectrum."
    if gap == 1 and own_level == "strong":
        return Verdict.INCONCLUSIVE, f"The query shows {label} weaker than the entry's own spectrum."
    if gap <= -2:
        return Verdict.INCONCLUSIVE, f"The query shows {label} far stronger than the entry's own spectrum."
    return Verdict.AGREES, f"The query shows {label} about as strong as the entry's own spectrum."


def _entry_at(entry: Entry, mz: int) -> float:
    peaks = entry.spectrum.nominal
    return 100.0 * peaks.intensity_at(mz) / float(peaks.intensity.max()) if len(peaks) else 0.0


def entry_dense(entry: Entry) -> tuple[float, ...]:
    """Relative intensity of an entry at every integer m/z up to its highest peak."""
    peaks = entry.spectrum.nominal
    if not len(peaks):
        return ()
    dense = [0.0] * (int(peaks.mz[-1]) + 1)
    for mz, value in zip(peaks.mz.tolist(), peaks.relative.tolist(), strict=True):
        dense[int(mz)] = value
    return tuple(dense)


def excess_above(dense: tuple[float, ...], formula: FormulaFacts) -> tuple[float, int]:
    """Largest relative intensity above M that isotopes and [M+H]+ do not explain, and its m/z.

    Parameters
    ----------
    dense : tuple of float
        Relative intensity by integer m/z.
    formula : FormulaFacts

    Returns
    -------
    excess : float
        0 when everything is explained.
    mz : int
        Where; 0 when nothing is left.
    """
    mass = formula.nominal_mass
    if len(dense) <= mass + 1:
        return 0.0, 0
    molecular = dense[mass]
    protonated = max(dense[mass + 1] - molecular * formula.ratio(1), 0.0)
    worst, where = 0.0, 0
    for offset, value in enumerate(dense[mass + 1 :], start=1):
        if value <= worst:
            continue
        isotopes = molecular * formula.ratio(offset) + protonated * formula.ratio(offset - 1)
        if offset == 1:
            isotopes = max(
                isotopes if molecular >= protonated / 2 else 0.0, dense[mass + formula.strongest_offset] * 0.5
            )
        left = value - 1.3 * isotopes
        if left > worst:
            worst, where = left, mass + offset
    return worst, where


def check_ions_above(facts: QueryFacts, formula: FormulaFacts | None, entry: Entry) -> Finding:
    """Whether the query has ions heavier than the candidate's molecule.

    Parameters
    ----------
    facts : QueryFacts
    formula : FormulaFacts or None
        Formula as measured.
    entry : Entry
        Its own spectrum may show the same ions.

    Returns
    -------
    Finding
    """
    if formula is None:
        return not_assessed(IONS_ABOVE, "The entry has no formula, so nothing can be called too heavy.")
    excess, mz = excess_above(facts.dense, formula)
    size = "none" if excess < 0.5 else "trace" if excess < 2.0 else "some" if excess < 10.0 else "strong"
    shared = size != "none" and excess_above(entry_dense(entry), formula)[0] >= 0.3 * excess
    observed = f"m/z {mz}: {excess:.1f} % of base" if mz else "nothing beyond isotopes and [M+H]+"
    if size == "none":
        verdict, reason = Verdict.AGREES, f"No ion above M (m/z {formula.nominal_mass}) needs another explanation."
    elif shared:
        verdict, reason = (
            Verdict.INCONCLUSIVE,
            f"m/z {mz} lies above M, but the entry's own spectrum has such ions too.",
        )
    elif BACKGROUND.get(mz) == "siloxane" and size != "strong":
        verdict, reason = Verdict.INCONCLUSIVE, f"m/z {mz} lies above M and is known background ({BACKGROUND[mz]})."
    elif size == "trace":
        verdict, reason = Verdict.INCONCLUSIVE, f"A trace at m/z {mz} lies above M; background would explain it."
    else:
        verdict, reason = Verdict.CONFLICTS, f"m/z {mz} is heavier than this molecule (M {formula.nominal_mass})."
    return Finding(
        IONS_ABOVE,
        verdict,
        reason,
        cell=f"{size}, entry too" if shared else size,
        observed=observed,
        expected="isotope peaks and [M+H]+ only",
        uncertainty="traces below 2 % of base may be background",
        source=ABOVE_SOURCE,
    )


def improbable_loss(dense: tuple[float, ...], formula: FormulaFacts) -> tuple[float, int]:
    """Strongest ion that only an improbable loss from M could give, after correction for 13C, and the loss.

    Parameters
    ----------
    dense : tuple of float
        Relative intensity by integer m/z.
    formula : FormulaFacts

    Returns
    -------
    intensity : float
        Relative intensity left after the isotope peak of the ion one below is taken away.
    loss : int
        0 when there is none.
    """
    mass = formula.nominal_mass
    carbon = CARBON_13 * formula.carbons + formula.ratio(1) * 0.3
    worst, lost = 0.0, 0
    for loss in _improbable_losses(formula):
        mz = mass - loss
        if 1 <= mz < len(dense) and dense[mz] > worst:
            left = dense[mz] - 1.2 * carbon * dense[mz - 1]
            if left > worst:
                worst, lost = left, loss
    return worst, lost


@lru_cache(maxsize=20_000)
def _improbable_losses(formula: FormulaFacts) -> tuple[int, ...]:
    """`IMPROBABLE_LOSSES` without those that halogens or boron of the formula make probable."""
    excused = {loss for symbol, losses in HALOGEN_LOSSES.items() if formula.formula.count(symbol) for loss in losses}
    return tuple(loss for loss in IMPROBABLE_LOSSES if loss not in excused)


def check_losses(facts: QueryFacts, formula: FormulaFacts | None, entry: Entry) -> Finding:
    """Whether ions just below M need a loss that molecules hardly ever undergo.

    Parameters
    ----------
    facts : QueryFacts
    formula : FormulaFacts or None
    entry : Entry
        Its own spectrum may need the same loss.

    Returns
    -------
    Finding
    """
    if formula is None:
        return not_assessed(LOSSES, "The entry has no formula, so losses cannot be counted from M.")
    mass = formula.nominal_mass
    if mass - facts.lowest_mz < IMPROBABLE_LOSSES[0] or facts.top_mz < mass - 60:
        return not_assessed(LOSSES, "The query has no ions in the range of small losses from M.")
    worst, loss = improbable_loss(facts.dense, formula)
    size = "none" if worst < 1.0 else "trace" if worst < 3.0 else "some" if worst < 10.0 else "strong"
    shared = size != "none" and improbable_loss(entry_dense(entry), formula)[0] >= 0.3 * worst
    if size == "none":
        verdict, reason = Verdict.AGREES, "All ions near M can be reached by probable losses."
    elif shared:
        verdict = Verdict.INCONCLUSIVE
        reason = f"The improbable loss of {loss} is needed, but the entry's own spectrum shows it too."
    elif size == "trace":
        verdict, reason = (
            Verdict.INCONCLUSIVE,
            f"A trace at M − {loss} would be an improbable loss; background explains it.",
        )
    else:
        verdict, reason = Verdict.CONFLICTS, f"M − {loss} (m/z {mass - loss}) would be an improbable loss from M."
    return Finding(
        LOSSES,
        verdict,
        reason,
        cell=f"{size}, entry too" if shared else size,
        observed=f"M − {loss}: {worst:.1f} % of base" if loss else "none",
        expected="no ion at M − 4…13, 21…25, 37, 38",
        uncertainty="13C of the ion below is taken away first",
        source=LOSS_SOURCE,
    )
