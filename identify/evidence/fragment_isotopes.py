"""Chlorine and bromine in the fragments, where the molecular ion may be missing."""

from __future__ import annotations

from functools import lru_cache

from identify.evidence.facts import FormulaFacts, QueryFacts
from identify.evidence.finding import Finding, not_assessed
from identify.evidence.isotope_cluster import ClusterFit, element_words, fit_cluster
from identify.records import Verdict

FRAGMENT_HALOGENS = "halogens in fragments"
SOURCE = (
    "Chlorine and bromine clusters (Cl 3:1, Br 1:1 and their combinations) fitted in the strongest fragments by least squares; "
    "weighed on open EI records"
)
LEAST = 8.0
"""Relative intensity (% of base) of a fragment whose cluster is worth a fit."""
MOST_FITS = 3
LOWEST, CLOSE_FIT, PURE = 80, 1.5, 0.85
"""A fragment below m/z 80, one fitted loosely, or one mixed with its own [M ± H] neighbours is too easily imitated by chance."""


@lru_cache(maxsize=64)
def find_halogen_clusters(facts: QueryFacts) -> tuple[ClusterFit, ...]:
    """Strong clusters of a query in which a fit supports chlorine or bromine, strongest first.

    Parameters
    ----------
    facts : QueryFacts

    Returns
    -------
    tuple of ClusterFit
        At most `MOST_FITS`; most queries need no fit at all, because nothing in them rises at +2 as a halogen makes it rise.
    """
    dense = facts.dense
    starts = []
    for mz in range(max(facts.lowest_mz, 35), len(dense) - 4):
        value, second = dense[mz], dense[mz + 2]
        if value < LEAST or not 0.22 * value <= second <= 2.3 * value:
            continue
        if (
            second > 2.0 * max(dense[mz + 1], dense[mz + 3])
            and 2.0 * max(dense[mz - 1], dense[mz - 2]) < value + second
        ):
            starts.append((value, mz))
    strongest = [mz for _, mz in sorted(starts, reverse=True)[:MOST_FITS]]
    # A fit takes a millisecond: it is not made where no outcome would convince.
    fits = [
        fit_cluster(facts, mz) for mz in strongest if mz >= LOWEST and (facts.at(mz + 4) > 0 or _is_alone(facts, mz))
    ]
    return tuple(fit for fit in fits if _convinces(fit, facts))


def _convinces(fit: ClusterFit, facts: QueryFacts) -> bool:
    """Two halogens or more with the peak at +4 seen, or one in a cluster with its 13C peaks that no other ion surrounds.

    Alkyl ions (69 and 71, 97 and 99), aryl ions (77 and 79) and silyl ions (73 and 75) look like chlorine or bromine; they have
    no peak at +4 in proportion and never stand alone.
    """
    if fit.reason or not {"Cl", "Br"} & set(fit.supported):
        return False
    if fit.misfit > CLOSE_FIT or fit.parts[2] < PURE:
        return False
    if fit.count("Cl") + fit.count("Br") >= 2:
        return facts.at(fit.mz + 4) > 0
    return _is_alone(facts, fit.mz)


def _is_alone(facts: QueryFacts, mz: int) -> bool:
    """Whether a cluster has its 13C peaks and hardly an ion around it."""
    around = max(facts.at(mz + offset) for offset in (-16, -15, -14, -13, -12, -4, -3, 4, 5, 12, 13, 14, 15, 16))
    isotopes = facts.at(mz + 1) > 0 and facts.at(mz + 3) > 0
    return isotopes and around < 0.1 * facts.at(mz)


def check_fragment_halogens(facts: QueryFacts, formula: FormulaFacts | None) -> Finding:
    """Whether the halogens that fragment clusters ask for are in the candidate's formula.

    Parameters
    ----------
    facts : QueryFacts
    formula : FormulaFacts or None

    Returns
    -------
    Finding
        Not assessed when neither the query's fragments nor the formula hold chlorine or bromine.
    """
    if formula is None:
        return not_assessed(FRAGMENT_HALOGENS, "The entry has no formula.")
    found = find_halogen_clusters(facts)
    has = formula.formula.count("Cl") + formula.formula.count("Br") > 0
    if not found:
        if not has:
            return not_assessed(FRAGMENT_HALOGENS, "Neither the fragments nor the formula show chlorine or bromine.")
        return Finding(
            FRAGMENT_HALOGENS,
            Verdict.INCONCLUSIVE,
            "No strong fragment shows the halogens of this formula; fragments may have lost them.",
            cell="formula only",
            observed="no Cl or Br cluster",
            expected=formula.formula.hill,
            source=SOURCE,
        )
    needed = {
        symbol: max(fit.count(symbol) for fit in found if symbol in fit.supported) for symbol in _supported(found)
    }
    short = [symbol for symbol, number in needed.items() if formula.formula.count(symbol) < number]
    shown = "; ".join(f"m/z {fit.mz}: {element_words(fit)}" for fit in found)
    if not short:
        verdict, cell = Verdict.AGREES, "agrees"
        reason = f"Fragments show {_text(needed)}, which this formula has."
    else:
        verdict, cell = Verdict.CONFLICTS, "lacks them" if not has else "has too few"
        reason = f"Fragments show {_text(needed)}; this formula has too little {' and '.join(short)}."
    return Finding(
        FRAGMENT_HALOGENS, verdict, reason, cell=cell, observed=shown, expected=formula.formula.hill, source=SOURCE
    )


def _supported(fits: tuple[ClusterFit, ...]) -> list[str]:
    return [symbol for symbol in ("Cl", "Br") if any(symbol in fit.supported for fit in fits)]


def _text(needed: dict[str, int]) -> str:
    return " and ".join(f"{number} {symbol}" for symbol, number in needed.items())
