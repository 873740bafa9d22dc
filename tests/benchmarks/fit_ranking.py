"""Fits the additive ranking on the open records and writes `identify/ranking/coefficients.py`.

    python tests/benchmarks/fit_ranking.py

Only coefficients are written, no spectrum and no accession. The protocol is that of `ranking_data`; `accuracy.py` fits the
same way on four folds of compounds and measures on the fifth.
"""

from __future__ import annotations

import pprint
import tempfile
from collections.abc import Sequence
from dataclasses import dataclass, replace
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from ranking_data import ABSENT_SHARE, N_FOLDS, Benchmark, load_benchmark
from ranking_fit import Alternatives, fit_choice

from identify.chem.structures import compound_classes
from identify.errors import StructureError
from identify.evidence.facts import build_query_facts, formula_facts
from identify.evidence.gather import gather_evidence
from identify.evidence.molecular_ion import estimate_molecular_ion
from identify.index import SearchIndex
from identify.ranking.alternatives import ELSEWHERE_NAMES, UNLISTED_NAMES, group_isomers
from identify.ranking.features import compare_with_entries
from identify.ranking.grouping import compound_key
from identify.ranking.model import Linear, RankingModel, as_coefficients, mass_log_odds
from identify.ranking.shortlist import shortlist
from identify.settings import Settings

ROOM = Path(__file__).resolve().parents[2] / "identify" / "ranking"
SCRATCH = Path(tempfile.gettempdir()) / "ionwitness-benchmark"
RIDGE_SPECTRA, RIDGE_REST = 5.0, 2.0
PROVENANCE = "tests/benchmarks/fit_ranking.py on the open EI records (MassBank release 2025.05.1), by compound"
Floats = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(eq=False)
class EntryRows:
    """Features of every entry found for every query; rows sorted by query."""

    x: Floats
    query: NDArray[np.int64]
    right: Mask
    fold: NDArray[np.int64]
    weight: Floats


@dataclass(eq=False)
class Trial:
    """One query against one library: its drafts as the model sees them before weights are known."""

    fold: int
    weight: float
    features: Floats
    evidence: Floats
    mass: Floats
    entries: list[int]
    right: Mask
    isomer: Mask
    """Drafts that are isomers of the answer."""
    place: int
    """Place of the query among the records."""


def collect_entry_rows(bench: Benchmark, index: SearchIndex, settings: Settings, places: Sequence[int]) -> EntryRows:
    """Features of all hits of all queries."""
    x, query, right = [], [], []
    for number, place in enumerate(places):
        asked, own = bench.query(place), bench.entries[place].id
        entries = [match.entry for match in bench.find(index, asked, settings, (own,))]
        x.append(
            compare_with_entries(
                asked.spectrum, [e.spectrum for e in entries], [e.acquisition.energy_ev for e in entries]
            )
        )
        query += [number] * len(entries)
        right += [bench.key_of[entry.id] == bench.keys[place] for entry in entries]
    fold = np.array([bench.fold[bench.keys[place]] for place in places])
    return EntryRows(np.concatenate(x), np.array(query), np.array(right), fold, _weights(bench, places))


def _weights(bench: Benchmark, places: Sequence[int]) -> Floats:
    """Each compound weighs as much as the root of its number of queries."""
    keys = [bench.keys[place] for place in places]
    return np.array([keys.count(key) ** -0.5 for key in keys])


def fit_spectra(rows: EntryRows, folds: Sequence[int]) -> Linear:
    """Weights of the spectral features, 0 for the average right entry."""
    used = np.isin(rows.fold[rows.query], folds)
    x, query, right = rows.x[used], rows.query[used], rows.right[used]
    spread = x.std(axis=0) + 1e-9
    weight = rows.weight[np.unique(query)]
    w = fit_choice((x - x.mean(axis=0)) / spread, query, right, weight, RIDGE_SPECTRA) / spread
    return Linear(0.0, tuple(w.tolist()), tuple(x[right].mean(axis=0).tolist()))


def spectra_only(linear: Linear) -> RankingModel:
    """A model that knows the spectra alone, enough for a shortlist."""
    silent_u = Linear(0.0, (0.0,) * len(UNLISTED_NAMES), (0.0,) * len(UNLISTED_NAMES))
    silent_e = Linear(0.0, (0.0,) * len(ELSEWHERE_NAMES), (0.0,) * len(ELSEWHERE_NAMES))
    return RankingModel("", linear, 1.0, {}, 0.0, silent_u, silent_e, 0.0)


KINDS = (
    "molecular ion", "isotope pattern", "halogens in fragments", "carbon count", "losses from M", "ions above M",
    "nitrogen rule and rings", "intensity explained", "ions missing in the query", "ions only in the query", "accurate mass",
    "retention index",
)  # fmt: skip
"""Kinds of evidence weighed, in the order of the columns."""


def collect_trials(
    bench: Benchmark, index: SearchIndex, settings: Settings, places: Sequence[int], model: RankingModel
) -> list[Trial]:
    """Each query twice: with its compound in the library, and without it."""
    trials = []
    weights = _weights(bench, places)
    for place, weight in zip(places, weights, strict=True):
        own, key = bench.entries[place].id, bench.keys[place]
        asked = bench.query(place)
        matches = bench.find(index, asked, settings, (own,))
        facts, seen = build_query_facts(asked), {}
        for absent in (False, True):
            kept = [match for match in matches if not absent or bench.key_of[match.entry.id] != key]
            drafts = shortlist(asked.spectrum, kept, settings, model)
            for draft in drafts:
                if draft.entry.id not in seen:
                    seen[draft.entry.id] = gather_evidence(asked, draft.entry, draft.aligned, settings, facts)
            share = ABSENT_SHARE if absent else 1 - ABSENT_SHARE
            trials.append(_trial(bench, place, asked, drafts, seen, weight * share))
    return trials


def _trial(bench, place, asked, drafts, seen, weight) -> Trial:  # type: ignore[no-untyped-def]
    ion = estimate_molecular_ion(asked.spectrum, [(draft.entry, draft.cosine) for draft in drafts])
    items = [seen[draft.entry.id] for draft in drafts]
    mass = []
    for draft in drafts:
        found = formula_facts(draft.entry.formula_as_measured)
        mass.append(mass_log_odds(found.nominal_mass, ion) if found and ion.estimates else 0.0)
    truth = bench.entries[place]
    return Trial(
        bench.fold[bench.keys[place]],
        weight,
        np.array([draft.features for draft in drafts]),
        np.array([[{item.kind: item.log_odds for item in row}.get(kind, 0.0) for kind in KINDS] for row in items]),
        np.array(mass),
        [draft.entry.id for draft in drafts],
        np.array([compound_key(draft.entry) == bench.keys[place] for draft in drafts]),
        np.array([is_isomer(draft.entry, truth) for draft in drafts]),
        place,
    )


def is_isomer(entry, truth) -> bool:  # type: ignore[no-untyped-def]
    """Same formula as measured; where either does not state it, the same formula of the parent compound."""
    if entry.formula_as_measured and truth.formula_as_measured:
        return entry.formula_as_measured == truth.formula_as_measured
    return bool(truth.identity.formula) and entry.identity.formula == truth.identity.formula


def alternatives_of(bench: Benchmark, trials: Sequence[Trial], spectra: Linear, w: Floats) -> Alternatives:
    """Rows of the second likelihood, with group features computed at the candidate weights `w`."""
    x, group, query, right, phi, group_query, group_right, z, other = ([] for _ in range(9))
    n_groups = 0
    for number, trial in enumerate(trials):
        rows = np.column_stack([spectra.value(trial.features), trial.evidence, trial.mass])
        entries = [bench.by_id[entry] for entry in trial.entries]
        groups = group_isomers(entries, trial.features, rows @ w)
        listed = bool(trial.right.any())
        of_isomer = np.zeros(len(groups.keys), dtype=bool)
        for member in np.flatnonzero(trial.isomer):
            if not listed and not of_isomer.any():
                of_isomer[groups.of_candidate[member]] = True
        x.append(rows)
        group.append(groups.of_candidate + n_groups)
        query += [number] * len(entries)
        right.append(trial.right)
        phi.append(np.column_stack([np.ones(len(groups.keys)), groups.unlisted]))
        group_query += [number] * len(groups.keys)
        group_right.append(of_isomer)
        z.append(np.r_[1.0, groups.elsewhere])
        other.append(not listed and not of_isomer.any())
        n_groups += len(groups.keys)
    cat = np.concatenate
    return Alternatives(
        cat(x), cat(group), np.array(query), cat(right), cat(phi), np.array(group_query), cat(group_right), np.array(z),
        np.array(other), np.array([trial.weight for trial in trials]),
    )  # fmt: skip


def _standardised(values: Floats) -> tuple[Floats, Floats, Floats]:
    """Columns after the constant brought to mean 0 and spread 1, with those means and spreads."""
    mean, spread = values[:, 1:].mean(axis=0), values[:, 1:].std(axis=0) + 1e-9
    return np.column_stack([values[:, 0], (values[:, 1:] - mean) / spread]), mean, spread


def fit_model(bench: Benchmark, rows: EntryRows, trials: Sequence[Trial], folds: Sequence[int]) -> RankingModel:
    """All parameters from the compounds of some folds."""
    spectra = fit_spectra(rows, folds)
    used = [trial for trial in trials if trial.fold in folds]
    w = np.r_[1.0, np.full(len(KINDS), 0.5), 0.3]
    for _ in range(3):  # the group features depend on the weights: a few rounds settle both
        alt = alternatives_of(bench, used, spectra, w)
        alt.phi, phi_mean, phi_spread = _standardised(alt.phi)
        alt.z, z_mean, z_spread = _standardised(alt.z)
        nw, nb, nd = alt.x.shape[1], alt.phi.shape[1], alt.z.shape[1]
        ridge = np.r_[
            0.1, np.full(nw - 1, RIDGE_REST), 0.0, np.full(nb - 1, RIDGE_REST), 0.0, np.full(nd - 1, RIDGE_REST)
        ]
        theta = alt.fit(ridge, np.r_[w, np.zeros(nb + nd)])
        w, b, d = theta[:nw], theta[nw : nw + nb], theta[nw + nb :]
    return RankingModel(
        provenance=PROVENANCE,
        spectra=spectra,
        spectra_weight=float(w[0]),
        evidence_weights=dict(zip(KINDS, w[1:-1].tolist(), strict=True)),
        mass_weight=float(w[-1]),
        unlisted=Linear(float(b[0]), tuple((b[1:] / phi_spread).tolist()), tuple(phi_mean.tolist())),
        elsewhere=Linear(float(d[0]), tuple((d[1:] / z_spread).tolist()), tuple(z_mean.tolist())),
        same_class=_same_class(bench, used, spectra, w),
    )


def _same_class(bench: Benchmark, trials: Sequence[Trial], spectra: Linear, w: Floats) -> float:
    """Share of queries without a listed compound or isomer whose compound has the best candidate's most telling class."""
    hits: list[bool] = []
    for trial in trials:
        if trial.right.any() or trial.isomer.any():
            continue
        log_odds = np.column_stack([spectra.value(trial.features), trial.evidence, trial.mass]) @ w
        best = _classes(bench.by_id[trial.entries[int(np.argmax(log_odds))]].identity.smiles)
        hits.append(bool(best) and best[0] in _classes(bench.entries[trial.place].identity.smiles))
    return float(np.mean(hits)) if hits else 0.0


def _classes(smiles: str) -> tuple[str, ...]:
    try:
        return compound_classes(smiles) if smiles else ()
    except StructureError:
        return ()


def collect(bench: Benchmark, settings: Settings) -> tuple[EntryRows, list[Trial]]:
    """Everything the fit needs; some two minutes."""
    index = bench.build_index(settings)
    places = bench.queries + bench.extra
    rows = collect_entry_rows(bench, index, settings, places)
    model = spectra_only(fit_spectra(rows, range(N_FOLDS)))
    return rows, collect_trials(bench, index, settings, places, model)


def write_coefficients(model: RankingModel, path: Path) -> None:
    """The module of numbers that the package ships."""
    table = pprint.pformat(_rounded(as_coefficients(model)), width=110, sort_dicts=False)
    path.write_text(
        '"""Coefficients of the ranking, written by `tests/benchmarks/fit_ranking.py`; not edited by hand.\n\n'
        'Each feature has its weight and its centre.\n"""\n\n'
        "from __future__ import annotations\n\nfrom typing import Any, Final\n\n"
        f"COEFFICIENTS: Final[dict[str, Any]] = {table}\n",
        encoding="utf-8",
    )


def _rounded(value):  # type: ignore[no-untyped-def]
    """Numbers with five significant digits."""
    if isinstance(value, dict):
        return {key: _rounded(item) for key, item in value.items()}
    if isinstance(value, tuple):
        return tuple(_rounded(item) for item in value)
    return float(f"{value:.5g}") if isinstance(value, float) else value


def main() -> None:
    """Fit on all compounds and write the coefficients."""
    bench = load_benchmark()
    rows, trials = collect(bench, Settings())
    model = fit_model(bench, rows, trials, range(N_FOLDS))
    dated = f"{PROVENANCE}; {len(bench.fold)} compounds, {len(trials)} trials; {datetime.now(UTC):%Y-%m-%d}"
    write_coefficients(replace(model, provenance=dated), ROOM / "coefficients.py")


if __name__ == "__main__":
    main()
