"""What a library entry's own spectrum, its replicates and its neighbours say about the identity it claims, as cells.

The same checks that judge a candidate judge a reference: ions above M, losses, isotopes, carbons, explained intensity. Two
more come from the library: do other spectra of the compound look alike, and are the spectra that look alike of compounds
with this mass and of related structure? Each observation falls into one of a few cells; `identify.library.audit_weights` says
how much more often wrong entries fall into it than right ones.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

from identify.chem.formula import parse_formula
from identify.errors import FormulaError, StructureError
from identify.evidence.composition import FORMULA_RULES, check_explained, check_formula_rules
from identify.evidence.facts import FormulaFacts, QueryFacts, entry_formula, spectrum_facts
from identify.evidence.finding import Finding
from identify.evidence.high_mass import excess_above, improbable_loss
from identify.evidence.isotopes import check_carbon_count, check_isotope_pattern
from identify.library.replicates import are_replicates
from identify.records import Entry

TOP = "highest ions"
BESIDE = "M+1 beside M"
ABOVE = "ions above M"
LOSSES = "losses from M"
NEIGHBOUR_MASS = "mass of similar spectra"
REPLICATES = "replicates"
RELATED = "structure of similar spectra"
SHIFT = "shifted by one"
DEPTH = 40
"""Most similar spectra looked at."""
USEFUL_COSINE = 0.6
"""A neighbour below this says nothing about mass or structure (judgement)."""
NEAR_COSINE = 0.85
"""A neighbour from here on should be of a compound with this mass or of related structure (judgement)."""
LEAST_COSINE = 0.3
"""Neighbours below this change no cell: beside one of `USEFUL_COSINE` they are far behind."""
COMMON = frozenset({"Cl", "Br", "S", "Si"})
"""Elements with strong heavier isotopes for which the parity of fragments still says something."""
USUAL_LOSSES = frozenset({1, 2, 3, *range(15, 21), *range(26, 37), *range(39, 49)})
"""Single losses from M that molecules of many classes show (McLafferty & Turecek, from memory)."""


@dataclass(frozen=True, slots=True)
class Cell:
    """One observation on one entry."""

    kind: str
    cell: str
    """Row of the weight table; empty when nothing could be assessed."""
    reason: str
    observed: str = ""
    expected: str = ""


@dataclass(frozen=True, slots=True)
class Neighbour:
    """A similar spectrum of the library."""

    entry: Entry
    cosine: float


def observe_entry(
    entry: Entry,
    neighbours: Sequence[Neighbour],
    replicates: Sequence[Neighbour],
    *,
    cosine_if_shifted: float | None = None,
) -> tuple[Cell, ...]:
    """Cells of an entry, always one per kind in the same order.

    Parameters
    ----------
    entry : Entry
    neighbours : sequence of Neighbour
        Most similar other entries, best first; replicates among them count as replicates only.
    replicates : sequence of Neighbour
        Other entries of the compound, measured in the same form at like energy, with their cosine.
    cosine_if_shifted : float, optional
        Cosine of the most similar spectrum when all m/z are taken as one lower, where that was looked at.

    Returns
    -------
    tuple of Cell
    """
    facts = spectrum_facts(entry.spectrum, entry.acquisition)
    formula, _ = entry_formula(entry, facts)
    own = _own_cells(facts, formula)
    if is_salt(entry):
        salt = "A salt evaporates in parts, so M of the formula is not expected."
        own = tuple(Cell(cell.kind, "", salt) if cell.kind in OF_MOLECULE else cell for cell in own)
    return (
        *own,
        _neighbour_mass(formula, [found for found in neighbours if not are_replicates(entry, found.entry)]),
        _replicates(replicates),
        _related(entry, neighbours),
        _shift(neighbours, replicates, cosine_if_shifted),
    )


OF_MOLECULE = frozenset({TOP, BESIDE, LOSSES, FORMULA_RULES})
"""Kinds that mean nothing where the molecule of the formula does not evaporate as a whole."""
_SALT = re.compile(
    r"(ammonium|pyridinium|phosphonium|sulfonium)\s+(chloride|bromide|iodide)|hydrochloride|hydrobromide|methiodide",
    re.IGNORECASE,
)


def is_salt(entry: Entry) -> bool:
    """Whether the entry's formula is that of a salt: charged parts in its structure, or an onium halide by name."""
    smiles = entry.identity.smiles
    parts = set(smiles.split("."))
    is_salt_structure = len(parts) > 1 and ("+" in smiles or bool(parts & {"Cl", "Br", "I"}))
    return is_salt_structure or bool(_SALT.search(entry.identity.name))


def may_be_shifted(entry: Entry, neighbours: Sequence[Neighbour], replicates: Sequence[Neighbour]) -> bool:
    """Whether it is worth a second search with all m/z one lower: nothing is very similar, and M is not plainly seen.

    Parameters
    ----------
    entry : Entry
    neighbours, replicates : sequence of Neighbour

    Returns
    -------
    bool
    """
    if any(found.cosine >= NEAR_COSINE for found in (*neighbours[:1], *replicates[:1])):
        return False
    facts = spectrum_facts(entry.spectrum, entry.acquisition)
    formula, _ = entry_formula(entry, facts)
    if formula is None:
        return True
    mz = formula.nominal_mass + formula.strongest_offset
    return facts.at(mz) < max(1.0, 2.0 * facts.at(mz + 1))


def _shift(neighbours: Sequence[Neighbour], replicates: Sequence[Neighbour], shifted: float | None) -> Cell:
    if shifted is None:
        return Cell(SHIFT, "", "Nothing suggests that all m/z are one too high.")
    best = max((found.cosine for found in (*neighbours[:1], *replicates[:1])), default=0.0)
    gain = shifted - best
    cell = "far better" if gain >= 0.2 and shifted >= 0.7 else "better" if gain >= 0.1 and shifted >= 0.8 else ""
    reason = f"With all m/z one lower, similar spectra of the library fit {cell or 'no better'}."
    return Cell(SHIFT, cell, reason, f"cosine {shifted:.2f} instead of {best:.2f}", "no better than as it is")


def _own_cells(facts: QueryFacts, formula: FormulaFacts | None) -> tuple[Cell, ...]:
    checks = (check_isotope_pattern, check_carbon_count, check_explained, check_formula_rules)
    found = [_from_finding(check(facts, formula)) for check in checks]
    if formula is not None and formula.heavy - COMMON:
        reason = "Fragments with metals, boron or selenium follow no rule of parity or saturation."
        found[-1] = Cell(FORMULA_RULES, "", reason)
    if formula is None:
        missing = "The formula as measured is not known."
        return (*(Cell(kind, "", missing) for kind in (TOP, BESIDE, ABOVE, LOSSES)), *found)
    own = (_highest_ions(facts, formula), _beside(facts, formula), _above(facts, formula), _losses(facts, formula))
    return (*own, *found)


def _from_finding(finding: Finding) -> Cell:
    return Cell(finding.kind, finding.cell, finding.reason, finding.observed, finding.expected)


def top_of_cluster(facts: QueryFacts, formula: FormulaFacts) -> int:
    """m/z of the lightest strong ion of the highest cluster of at least 1 % of the base peak.

    Parameters
    ----------
    facts : QueryFacts
    formula : FormulaFacts
        With elements of strong heavier isotopes, an ion two below as tall or taller makes a peak an isotope peak.

    Returns
    -------
    int
        The highest peak when none reaches 1 %.
    """
    for mz in range(facts.top_mz, 0, -1):
        value = facts.at(mz)
        if value < 1.0:
            continue
        is_carbon_13 = facts.at(mz - 1) * mz * 0.00085 * 1.6 >= value
        is_heavy = bool(formula.heavy) and max(1.2 * facts.at(mz - 2), facts.at(mz - 1)) >= value
        is_halogen = facts.at(mz - 2) * 0.25 < value < facts.at(mz - 2) * 1.05
        if not (is_carbon_13 or is_heavy or is_halogen):
            return mz
    return facts.top_mz


def _highest_ions(facts: QueryFacts, formula: FormulaFacts) -> Cell:
    mass = formula.nominal_mass
    gap = mass - top_of_cluster(facts, formula)
    seen = facts.at(mass + formula.strongest_offset)
    if -formula.last_offset <= gap < 0 and seen >= 1.0 and _excess(facts, formula)[0] < 3.0:
        gap = 0
    observed = f"highest cluster at m/z {mass - gap}, {seen:.1f} % of base at M"
    if -14 <= gap < 0 and seen < 1.0:
        cell, reason = (
            f"M+{-gap} instead of M" if gap == -1 else "a little above M",
            "The highest ions lie just above M.",
        )
    elif gap < 0:
        cell, reason = ("above M, M seen" if seen >= 1.0 else "far above M"), "The highest ions lie above M."
    elif gap == 0 or seen >= 1.0:
        cell = "M strong" if seen >= 20.0 else "M seen"
        reason = "The spectrum ends with M."
    elif gap in USUAL_LOSSES:
        cell, reason = "usual loss", f"M is not seen; M − {gap} is a usual loss."
    elif gap < 49:
        cell, reason = "unusual loss", f"M is not seen; M − {gap} would be an unusual loss."
    else:
        cell = "ends below M − 48" if gap < 90 else "ends far below M"
        reason = f"The spectrum ends {gap} below M."
    return Cell(TOP, cell, reason, observed, f"M at m/z {mass}")


def _beside(facts: QueryFacts, formula: FormulaFacts) -> Cell:
    """Whether the ion one above M is larger than 13C and a little [M+H]+ make it: a sign that everything is one too high."""
    mass = formula.nominal_mass
    molecular, next_one = facts.at(mass), facts.at(mass + 1)
    if max(molecular, next_one) < 1.0:
        return Cell(BESIDE, "", "Neither M nor M+1 is seen.")
    excess = next_one - formula.ratio(1) * molecular
    share = excess / max(molecular, next_one)
    cell = next(
        name for limit, name in ((0.9, "alone"), (0.5, "very tall"), (0.2, "tall"), (-2.0, "usual")) if share >= limit
    )
    reason = f"The ion at m/z {mass + 1} is {cell} beside M."
    return Cell(BESIDE, cell, reason, f"M {molecular:.1f} %, M+1 {next_one:.1f} % of base", "13C of M, a little [M+H]+")


def _above(facts: QueryFacts, formula: FormulaFacts) -> Cell:
    excess, mz = _excess(facts, formula)
    cell = "none" if excess < 0.5 else "trace" if excess < 2.0 else "some" if excess < 10.0 else "strong"
    reason = f"m/z {mz} is heavier than the molecule (M {formula.nominal_mass})." if mz else "Nothing lies above M."
    return Cell(ABOVE, cell, reason, f"{excess:.1f} % of base", "isotope peaks and [M+H]+ only")


def _excess(facts: QueryFacts, formula: FormulaFacts) -> tuple[float, int]:
    """Excess above M; where another isotope peak is the tallest (Br2), M is taken from that one."""
    offset = formula.strongest_offset
    if offset <= 0:
        return excess_above(facts.dense, formula)
    mass, dense = formula.nominal_mass, list(facts.dense)
    if mass < len(dense):
        dense[mass] = max(dense[mass], facts.at(mass + offset) / formula.ratio(offset))
    return excess_above(tuple(dense), formula)


def _losses(facts: QueryFacts, formula: FormulaFacts) -> Cell:
    if facts.top_mz < formula.nominal_mass - 60:
        return Cell(LOSSES, "", "There are no ions in the range of small losses from M.")
    worst, loss = improbable_loss(facts.dense, formula)
    cell = "none" if worst < 1.0 else "trace" if worst < 3.0 else "some" if worst < 10.0 else "strong"
    reason = f"M − {loss} would be an improbable loss." if loss else "All ions near M are probable losses."
    return Cell(LOSSES, cell, reason, f"{worst:.1f} % of base", "no ion at M − 4…13, 21…25, 37, 38")


def _neighbour_mass(formula: FormulaFacts | None, neighbours: Sequence[Neighbour]) -> Cell:
    if formula is None:
        return Cell(NEIGHBOUR_MASS, "", "The formula as measured is not known.")
    best: dict[bool, Neighbour] = {}
    for neighbour in neighbours:
        known = nominal_mass_of(neighbour.entry.formula_as_measured)
        if known:
            best.setdefault(known == formula.nominal_mass, neighbour)
    same = best[True].cosine if True in best else 0.0
    other = best[False].cosine if False in best else 0.0
    if max(same, other) < USEFUL_COSINE:
        return Cell(NEIGHBOUR_MASS, "", "No other spectrum of the library is similar.")
    lead = same - other
    cell = next(
        name
        for limit, name in (
            (0.15, "same mass clearly best"), (0.02, "same mass best"), (-0.02, "both alike"),
            (-0.1, "other mass best"), (-0.3, "other mass clearly best"), (-2.0, "other mass far best"),
        )
        if lead >= limit
    )  # fmt: skip
    if lead < -0.1 and other >= NEAR_COSINE:
        cell += ", near"
    nearest = best[lead >= 0].entry
    reason = f"The most similar spectrum is of {nearest.identity.name} ({nearest.formula_as_measured})."
    return Cell(NEIGHBOUR_MASS, cell, reason, f"same mass {same:.2f}, other mass {other:.2f}", "similar spectra of M")


@lru_cache(maxsize=50_000)
def nominal_mass_of(formula: str) -> int:
    """Nominal mass of a formula as text; 0 when there is none.

    Examples
    --------
    >>> nominal_mass_of("C7H8"), nominal_mass_of("")
    (92, 0)
    """
    try:
        return parse_formula(formula).nominal_mass if formula else 0
    except FormulaError:
        return 0


def _replicates(replicates: Sequence[Neighbour]) -> Cell:
    if not replicates:
        return Cell(REPLICATES, "", "There is no other spectrum of this compound in this form.")
    best = max(replicates, key=lambda neighbour: neighbour.cosine)
    cell = next(
        name
        for limit, name in (
            (0.95, "the same"),
            (0.85, "alike"),
            (0.7, "related"),
            (0.5, "different"),
            (-1.0, "strange"),
        )
        if best.cosine >= limit
    )
    reason = f"The most similar of {len(replicates)} other spectra of this compound is {best.entry.accession}."
    return Cell(REPLICATES, cell, reason, f"cosine {best.cosine:.2f}", "0.85 or more")


def _related(entry: Entry, neighbours: Sequence[Neighbour]) -> Cell:
    from identify.chem.structures import structure_similarity

    smiles = entry.identity.smiles
    useful = [
        neighbour
        for neighbour in neighbours
        if neighbour.entry.compound_id != entry.compound_id and neighbour.entry.identity.smiles
    ]
    if not smiles or not useful or useful[0].cosine < USEFUL_COSINE:
        return Cell(RELATED, "", "There is no structure, or no similar spectrum of another compound, to compare with.")
    total = weight = 0.0
    for neighbour in useful[:10]:
        share = neighbour.cosine**4
        try:
            total += share * structure_similarity(smiles, neighbour.entry.identity.smiles)
        except StructureError:
            continue
        weight += share
    if not weight:
        return Cell(RELATED, "", "The structures cannot be read.")
    mean = total / weight
    cell = next(
        name
        for limit, name in ((0.4, "close"), (0.25, "related"), (0.15, "remote"), (0.08, "foreign"), (-1.0, "alien"))
        if mean >= limit
    )
    if useful[0].cosine >= NEAR_COSINE:
        cell += ", near"
    reason = f"The compounds with the most similar spectra are {cell.removesuffix(', near')} in structure."
    return Cell(RELATED, cell, reason, f"mean similarity {mean:.2f}", "similar spectra of similar structures")
