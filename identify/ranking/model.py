"""The additive model: log-odds of each candidate, of isomers without an entry, and of something else altogether.

Every answer to a query is one of

- a listed compound ``c``: log-odds ``s_c`` = what the spectra say + what the evidence says;
- an isomer of a listed compound that has no entry: ``log Σ_{c in group} exp(s_c) + u_g``. Such an isomer can give the same
  spectrum, so it is weighed beside the listed ones, ``u_g`` says how heavily;
- something else: ``o``.

Probabilities are ``exp(log-odds)`` over the sum of all of them. Then ``P(compound) = P(in the library) · P(compound | in the
library)`` holds as in Stein 1994, and a group is always at least as probable as each of its members. The parameters are in
`identify.ranking.coefficients`, fitted by `tests/benchmarks/fit_ranking.py`.

References
----------
Stein 1994, J. Am. Soc. Mass Spectrom. 5:316 (abstract read: the two-factor probability).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields
from functools import cache, cached_property
from typing import Any, Final

import numpy as np

from identify.ranking.alternatives import ELSEWHERE_NAMES, UNLISTED_NAMES
from identify.ranking.coefficients import COEFFICIENTS
from identify.ranking.features import NAMES
from identify.ranking.ions import CLOSE_NAMES, COUNTED, ION_NAMES, LEVELS, STATES
from identify.records import EvidenceItem, Explanation, FloatArray, MolecularIonEstimate, Terms

HEADINGS: Final = {
    "likeness": ("cosine", "reverse", "forward"),
    "intensity ratios": ("deviation",),
    "peaks missing": ("entry peaks missing", "query peaks missing", "strongest entry peak missing"),
    "tilt": ("tilt",),
    "highest ions": ("same highest", "query goes", "entry goes"),
    "measurement": ("entry peaks", "query peaks", "peaks in common", "low energy", "range in common"),
}
"""Headings under which the spectral parts are shown, with the beginnings of the feature names they take, first match wins."""

SPECTRAL_NAMES: Final = (*NAMES, *CLOSE_NAMES)
"""Features of a draft: those of the whole spectra, then tilt and ions."""
_PLACES: Final = {
    heading: tuple(
        place
        for place, name in enumerate(SPECTRAL_NAMES)
        if name not in ION_NAMES and heading == next(key for key, starts in HEADINGS.items() if name.startswith(starts))
    )
    for heading in HEADINGS
}
_SHOWN: Final = {
    heading: (places, tuple(SPECTRAL_NAMES[place] for place in places)) for heading, places in _PLACES.items()
}
"""Columns of all but the ions under each heading, and their names."""
IONS_HEADING: Final = "ions one by one"
_FIRST_ION: Final = len(SPECTRAL_NAMES) - len(ION_NAMES)
_ION_SHAPE: Final = (len(COUNTED), len(LEVELS), len(STATES))
"""The columns from `_FIRST_ION` on, unfolded."""

LINEAR_PARTS: Final = {
    "shortlist": NAMES,
    "spectra": SPECTRAL_NAMES,
    "unlisted": UNLISTED_NAMES,
    "elsewhere": ELSEWHERE_NAMES,
}
"""Linear parts of the model with the names of their features."""

MASS_FLOOR: Final = 0.02
"""Probability taken for a nominal mass that the estimate from the query does not name."""


@dataclass(frozen=True)
class Linear:
    """A weighted sum of named features, each seen from its centre.

    Attributes
    ----------
    constant : float
    weights, centres : tuple of float
        One per feature, in the order of the names they are used with.
    """

    constant: float
    weights: tuple[float, ...]
    centres: tuple[float, ...]

    @cached_property
    def _arrays(self) -> tuple[FloatArray, FloatArray]:
        return np.array(self.weights), np.array(self.centres)

    def parts(self, features: FloatArray) -> FloatArray:
        """Contribution of each feature; the last axis is that of the features."""
        weights, centres = self._arrays
        product: FloatArray = (features - centres) * weights
        return product

    def value(self, features: FloatArray) -> FloatArray:
        """Constant plus all contributions."""
        total: FloatArray = self.constant + self.parts(features).sum(axis=-1)
        return total


@dataclass(frozen=True, slots=True)
class RankingModel:
    """All parameters of the ranking, with where they come from.

    Attributes
    ----------
    provenance : str
        Script, data and date.
    shortlist : Linear
        Log-odds by which all entries found are sorted, over `identify.ranking.features.NAMES`.
    spectra : Linear
        What the spectra are worth beside the evidence, which looks at some of the same peaks, over `SPECTRAL_NAMES`; 0 for a
        typical right entry.
    evidence_weights : mapping of str to float
        What the log-odds of each kind of evidence are worth beside the spectra; 1 for a kind not named.
    mass_weight : float
        Weight of the logarithm of the probability of the candidate's nominal mass.
    unlisted : Linear
        Weight of isomers without an entry, over `identify.ranking.alternatives.UNLISTED_NAMES`.
    elsewhere : Linear
        Log-odds of something else, over `identify.ranking.alternatives.ELSEWHERE_NAMES`.
    steepness : mapping of str to float
        Factor on the log-odds of all candidates ("any"), and what is added to it where the best candidate is of a kind
        (`identify.ranking.alternatives.KINDS`): how much a lead is worth differs between kinds, the order of candidates stays.
    same_class : float
        Share of queries answered by something else whose compound is of the best candidate's class all the same.
    sharpness : float
        Factor on all log-odds before they become probabilities; 1 unless a library was calibrated.
    """

    provenance: str
    shortlist: Linear
    spectra: Linear
    evidence_weights: Mapping[str, float]
    mass_weight: float
    unlisted: Linear
    elsewhere: Linear
    steepness: Mapping[str, float]
    same_class: float
    sharpness: float = 1.0


def build_model(coefficients: Mapping[str, Any]) -> RankingModel:
    """Model of a plain table, as `as_coefficients` writes it.

    Parameters
    ----------
    coefficients : mapping
        See `identify.ranking.coefficients`.

    Returns
    -------
    RankingModel
    """
    values = dict(coefficients)
    for name, features in LINEAR_PARTS.items():
        table = values[name]
        rows = [table["features"][feature] for feature in features]
        values[name] = Linear(
            float(table["constant"]), tuple(float(row[0]) for row in rows), tuple(float(row[1]) for row in rows)
        )
    return RankingModel(**values)


def as_coefficients(model: RankingModel) -> dict[str, Any]:
    """Plain table of a model: numbers, texts and mappings only; `build_model` reads it back."""
    values: dict[str, Any] = {field.name: getattr(model, field.name) for field in fields(model)}
    for name in ("evidence_weights", "steepness"):
        values[name] = dict(values[name])
    for name, features in LINEAR_PARTS.items():
        linear: Linear = values[name]
        rows = zip(features, linear.weights, linear.centres, strict=True)
        values[name] = {"constant": linear.constant, "features": {feature: (w, c) for feature, w, c in rows}}
    return values


@cache
def default_model() -> RankingModel:
    """The model shipped with the package."""
    return build_model(COEFFICIENTS)


def explain_spectra(model: RankingModel, features: FloatArray) -> list[Explanation]:
    """What the spectra say for each entry, under the headings of `HEADINGS` and, ion by ion, under `IONS_HEADING`.

    Parameters
    ----------
    model : RankingModel
    features : array of shape (n_entries, n_features)
        In the order of `SPECTRAL_NAMES`.

    Returns
    -------
    list of Explanation
        Their values are ``model.spectra.value(features)``.
    """
    n = len(features)
    weighed = model.spectra.parts(features)
    values, seen = weighed[:, :_FIRST_ION].tolist(), np.round(features[:, :_FIRST_ION], 9).tolist()
    of_state = weighed[:, _FIRST_ION:].reshape(n, *_ION_SHAPE).sum(axis=(1, 2)).tolist()
    n_ions = features[:, _FIRST_ION:].reshape(n, *_ION_SHAPE)[:, 0].sum(axis=1).tolist()  # counted as one, not by m/z
    constant = [Explanation("constant", model.spectra.constant)] if model.spectra.constant else []
    told = []
    for row, shown, ions, numbers in zip(values, seen, of_state, n_ions, strict=True):
        parts = []
        for heading, (places, names) in _SHOWN.items():
            details = [f"{shown[place]:.3g}" for place in places]
            parts.append(_sum_up(heading, names, [row[place] for place in places], details))
        parts.append(_sum_up(IONS_HEADING, STATES, ions, [f"{n:.0f} ions" for n in numbers]))
        parts += constant
        told.append(Explanation("spectra", _total(parts), parts=tuple(parts)))
    return told


def explain_candidate(
    model: RankingModel,
    spectra: Explanation,
    evidence: Sequence[EvidenceItem],
    nominal_mass: int | None,
    molecular_ion: MolecularIonEstimate,
) -> Explanation:
    """Log-odds of a candidate before its rivals are looked at, part by part.

    Parameters
    ----------
    model : RankingModel
    spectra : Explanation
        From `explain_spectra`.
    evidence : sequence of EvidenceItem
    nominal_mass : int or None
        Of the formula as measured; None when it is not known.
    molecular_ion : MolecularIonEstimate

    Returns
    -------
    Explanation
    """
    told = [item for item in evidence if item.log_odds]
    worth = [model.evidence_weights.get(item.kind, 1.0) * item.log_odds for item in told]
    parts = [spectra, _sum_up("evidence", [item.kind for item in told], worth, [item.reason for item in told])]
    if nominal_mass is not None and molecular_ion.estimates:
        value = model.mass_weight * mass_log_odds(nominal_mass, molecular_ion)
        parts.append(Explanation("nominal mass", value, f"{nominal_mass} among the masses estimated from the query"))
    return Explanation("for this compound", _total(parts), parts=tuple(parts))


def mass_log_odds(nominal_mass: int, molecular_ion: MolecularIonEstimate) -> float:
    """Logarithm of the probability of a nominal mass over that of a mass nobody named.

    Parameters
    ----------
    nominal_mass : int
    molecular_ion : MolecularIonEstimate

    Returns
    -------
    float
        At least 0.
    """
    chance = sum(item.probability for item in molecular_ion.estimates if item.nominal_mass == nominal_mass)
    return float(np.log(max(chance, MASS_FLOOR) / MASS_FLOOR))


def _sum_up(heading: str, labels: Sequence[str], values: Sequence[float], details: Sequence[str]) -> Explanation:
    return Explanation(heading, float(sum(values)), parts=Terms(tuple(labels), tuple(values), tuple(details)))


def _total(parts: Sequence[Explanation]) -> float:
    return float(sum(part.value for part in parts))
