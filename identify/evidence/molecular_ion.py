"""Which nominal mass has the molecule, judged from the query and its neighbours alone?"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence

from identify.evidence.facts import QueryFacts, formula_facts, spectrum_facts
from identify.records import Acquisition, CleanSpectrum, Entry, MassEstimate, MolecularIonEstimate

OTHER_MASSES = 0.72
"""Weight of all masses nobody votes for, beside 1 for the highest cluster: alone it is the molecular ion in 58 % of open
70 eV records (methods.md section 7), and 1 / (1 + 0.72) = 0.58."""


def estimate_molecular_ion(spectrum: CleanSpectrum, neighbours: Sequence[tuple[Entry, float]]) -> MolecularIonEstimate:
    """Distribution over nominal molecular masses, with the probability that the molecular ion is not seen.

    Parameters
    ----------
    spectrum : CleanSpectrum
        The query.
    neighbours : sequence of (Entry, cosine in [0, 1])
        Most similar library entries, best first; may be empty.

    Returns
    -------
    MolecularIonEstimate
        Estimates best first, at most five.
    """
    facts = spectrum_facts(spectrum, Acquisition())
    votes: dict[int, float] = defaultdict(float)
    basis: dict[int, list[str]] = defaultdict(list)
    top = _top_of_cluster(facts)
    if top:
        votes[top] += 1.0
        basis[top].append("highest cluster")
    for entry, cosine in neighbours[:25]:
        formula = formula_facts(entry.formula_as_measured)
        if formula is not None and cosine > 0:
            votes[formula.nominal_mass] += cosine**6
            if "neighbours" not in basis[formula.nominal_mass]:
                basis[formula.nominal_mass].append("neighbours")
    if not votes:
        return MolecularIonEstimate((), 1.0, "nothing to judge by")
    total = sum(votes.values()) + OTHER_MASSES
    ranked = sorted(votes.items(), key=lambda item: (-item[1], item[0]))[:5]
    estimates = tuple(MassEstimate(mass, vote / total, tuple(basis[mass])) for mass, vote in ranked)
    seen = sum(item.probability for item in estimates if facts.at(item.nominal_mass) > 0)
    sources = basis[ranked[0][0]]
    agreement = "highest cluster and neighbours agree" if len(sources) > 1 else f"{sources[0]} alone"
    return MolecularIonEstimate(estimates, max(0.0, 1.0 - seen), agreement)


def _top_of_cluster(facts: QueryFacts) -> int:
    """Lightest strong member of the highest significant cluster; 0 when there is none."""
    for mz in range(facts.top_mz, 0, -1):
        value = facts.at(mz)
        if value < 1.0:
            continue
        below = facts.at(mz - 1)
        if below * mz * 0.00085 * 1.6 >= value or (facts.at(mz - 2) * 0.25 < value < facts.at(mz - 2) * 1.05):
            continue
        return mz
    return facts.top_mz
