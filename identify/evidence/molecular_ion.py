"""Which nominal mass has the molecule, judged from the query and its neighbours alone?

Three estimators look at the same candidate masses: the query's own high-mass ions, losses and fragment pairs; the masses of its
neighbours in the library and how far these lie above their highest ions; and neighbours whose fragments fit once they are shifted
by the mass difference. A model fitted on open records, the compound itself removed from the library, weighs them together.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from identify.evidence.mass_features import (
    NEIGHBOURS,
    SEEN,
    MassProblem,
    all_features,
    dense_of,
    fragment_levels,
    network_inputs,
)
from identify.evidence.mass_model import load_model, softmax
from identify.evidence.shifted import build_shift_table
from identify.records import CleanSpectrum, Entry, MassEstimate, MolecularIonEstimate

WORDS = {
    "query": "ions and losses of the query",
    "neighbours": "masses of the neighbours",
    "shifted": "neighbours after shifting",
}
MOST_ESTIMATES = 5
LEAST_PROBABILITY = 0.01


def estimate_molecular_ion(spectrum: CleanSpectrum, neighbours: Sequence[tuple[Entry, float]]) -> MolecularIonEstimate:
    """Distribution over nominal molecular masses, with the probability that the molecular ion is not seen.

    Parameters
    ----------
    spectrum : CleanSpectrum
        The query.
    neighbours : sequence of (Entry, cosine in [0, 1])
        Most similar library entries, best first; may be empty. Up to 40 compounds are used: the more, the better the
        estimate.

    Returns
    -------
    MolecularIonEstimate
        At most five masses, best first. `basis` names the estimators that alone would put a mass on top; `agreement` says how
        many of the three agree on the best one.

    Notes
    -----
    Measured by `tests/benchmarks/evidence.py` on open records with the compound removed: the answer is wrong more often than not
    where the molecular ion is not seen and no neighbour has its mass; the probability says so.
    """
    if not len(spectrum.nominal):
        return MolecularIonEstimate((), 1.0, "There is no peak to judge by.")
    relative = dense_of(spectrum)
    problem = MassProblem(relative, build_shift_table(spectrum, neighbours, NEIGHBOURS))
    masses = problem.masses
    if not masses.size:
        return MolecularIonEstimate((), 1.0, "No mass can be proposed from these peaks.")
    model = load_model()
    matrix, _ = all_features(problem)
    standardised = model.standardise(matrix)
    first = model.estimators["first look"].logits(standardised)
    kept = np.argsort(-first, kind="stable")[: model.kept]
    inputs = network_inputs(standardised[kept], problem.levels, masses[kept])
    by_query, together = model.judge(matrix[kept], inputs, fragment_levels(problem.levels))
    alone = {"query": int(masses[kept[int(np.argmax(by_query))]])}
    if problem.table.entries:
        for name in ("neighbours", "shifted"):
            alone[name] = int(masses[int(np.argmax(model.estimators[name].logits(standardised)))])
    probability = softmax(together)
    order = np.argsort(-probability, kind="stable")
    present = np.array([mass < relative.size and relative[mass] >= SEEN for mass in masses[kept].tolist()])
    estimates = tuple(
        _estimate(int(masses[kept[place]]), float(probability[place]), alone)
        for place in order[:MOST_ESTIMATES].tolist()
        if probability[place] >= LEAST_PROBABILITY or place == order[0]
    )
    return MolecularIonEstimate(
        estimates, float(min(probability[~present].sum(), 1.0)), _agreement(estimates[0].nominal_mass, alone)
    )


def _estimate(mass: int, probability: float, alone: dict[str, int]) -> MassEstimate:
    basis = tuple(WORDS[name] for name, choice in alone.items() if choice == mass)
    return MassEstimate(mass, probability, basis or ("all together",))


def _agreement(mass: int, alone: dict[str, int]) -> str:
    agreeing = [WORDS[name] for name, choice in alone.items() if choice == mass]
    others = ", ".join(f"{WORDS[name]}: {choice}" for name, choice in alone.items() if choice != mass)
    if len(agreeing) == len(alone):
        return f"All {len(alone)} estimators give {mass}."
    if not agreeing:
        return f"No single estimator gives {mass}, all together do ({others})."
    return f"{len(agreeing)} of {len(alone)} estimators give {mass} ({others})."
