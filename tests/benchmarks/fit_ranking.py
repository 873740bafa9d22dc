"""Fits the additive ranking on the open records and writes `identify/ranking/coefficients.py`.

    python tests/benchmarks/fit_ranking.py

Only coefficients are written, no spectrum and no accession. The protocol is that of `ranking_data`; `accuracy.py` fits the
same way on four folds of compounds and measures on the fifth. Every query is played with its compound in the library and
without it. Queries spoiled on purpose (`ranking_spoiled`) take no part: tried with weights of 0.15 and 0.4, they made the
probabilities of spoiled queries a little better and those of good ones worse.
"""

from __future__ import annotations

import hashlib
import json
import os
import pprint
import tempfile
from collections import Counter
from collections.abc import Callable, Sequence
from dataclasses import dataclass, fields
from datetime import UTC, datetime
from pathlib import Path
from typing import TypeVar

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
from identify.ranking.alternatives import (
    ELSEWHERE_NAMES,
    FROM_BEST,
    MOST_BEHIND,
    MOST_LEAD,
    PROFILE,
    UNLISTED_NAMES,
    describe_composition,
    group_isomers,
)
from identify.ranking.features import NAMES, compare_with_entries
from identify.ranking.grouping import Match, compound_key
from identify.ranking.ions import compare_closely
from identify.ranking.model import (
    SPECTRAL_NAMES,
    Linear,
    RankingModel,
    as_coefficients,
    build_model,
    mass_log_odds,
)
from identify.ranking.shortlist import Draft, shortlist
from identify.records import Entry, EvidenceItem, Query
from identify.settings import Settings

ROOT = Path(__file__).resolve().parents[2]
ROOM = ROOT / "identify" / "ranking"
SCRATCH = Path(tempfile.gettempdir()) / "ionwitness-benchmark"
RIDGE, RIDGE_SPECTRA = 2.0, 5.0
ROUGH, N_ROWS = "cosine, soft", 50
"""Entries by this measure that take part in the fit of the spectra."""
PROVENANCE = "tests/benchmarks/fit_ranking.py on the open EI records (MassBank release 2025.05.1), by compound"
KINDS = (
    "molecular ion", "isotope pattern", "halogens in fragments", "carbon count", "losses from M", "ions above M",
    "nitrogen rule and rings", "intensity explained", "ions missing in the query", "ions only in the query", "accurate mass",
    "retention index",
)  # fmt: skip
"""Kinds of evidence weighed, in the order of the columns."""
PART_STARTS = (
    ("cosine", "reverse", "forward"), ("deviation",), ("entry peaks missing", "query peaks missing", "strongest"), ("tilt",),
    ("same highest", "query goes", "entry goes"), ("entry peaks", "query peaks", "peaks in common", "low energy", "range"),
    ("ions by m/z",), ("ions",),
)  # fmt: skip
"""Parts of the spectra that get a weight of their own beside the evidence, by the beginnings of the feature names; ions further
by whether they are missing, and where. First match wins."""


def _part(name: str) -> tuple[int, str]:
    side = next(
        (side for side in ("in the query", "in the entry") if name.startswith("ions") and f"missing {side}" in name), ""
    )
    return next(n for n, starts in enumerate(PART_STARTS) if name.startswith(starts)), side


PARTS = sorted({_part(name) for name in SPECTRAL_NAMES})
IN_PART = np.array([[_part(name) == part for part in PARTS] for name in SPECTRAL_NAMES], dtype=np.float64)
"""Which feature belongs to which part, shape ``(n_features, n_parts)``."""
Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Mask = NDArray[np.bool_]
Kept = TypeVar("Kept")
Fit = tuple[Linear, Linear]
N_PIECES = 8


@dataclass(eq=False)
class EntryRows:
    """Features of the likeliest entries found for every query as measured, of the right ones too; rows sorted by query."""

    x: Floats
    query: Ints
    right: Mask
    fold: Ints
    weight: Floats


@dataclass(eq=False)
class Trials:
    """Queries against libraries, as the model sees them before its weights are known.

    Candidates (`x`, `trial`, `group`, `right`, `isomer`, `composition`, `derivative`, `entry`), isomer groups (`group_trial`,
    `known`) and trials (`fold`, `weight`, `place`).
    """

    x: Floats
    trial: Ints
    group: Ints
    right: Mask
    isomer: Mask
    composition: Floats
    derivative: Floats
    entry: Ints
    group_trial: Ints
    known: Mask
    fold: Ints
    weight: Floats
    place: Ints


def collect_entry_rows(bench: Benchmark, index: SearchIndex, settings: Settings, places: Sequence[int]) -> EntryRows:
    """Features of the best hits of some records played as queries."""
    x, query, right = [], [], []
    for number, place in enumerate(places):
        asked, own = bench.query(place), bench.entries[place].id
        entries = [match.entry for match in bench.find(index, asked, settings, (own,))]
        energies = [entry.acquisition.energy_ev for entry in entries]
        features = compare_with_entries(asked.spectrum, [entry.spectrum for entry in entries], energies)
        is_right = np.array([bench.key_of[entry.id] == bench.keys[place] for entry in entries])
        order = np.argsort(-features[:, NAMES.index(ROUGH)], kind="stable")
        order = np.array([n for rank, n in enumerate(order.tolist()) if rank < N_ROWS or is_right[n]])
        closer = compare_closely(asked.spectrum, [entries[n].spectrum for n in order])
        x.append(np.concatenate([features[order], closer], axis=1).astype(np.float32))
        query += [number] * order.size
        right.append(is_right[order])
    keys = [bench.keys[place] for place in places]
    everything = Counter(bench.keys[place] for place in bench.queries + bench.extra)
    fold, weight = np.array([bench.fold[key] for key in keys]), np.array([everything[key] ** -0.5 for key in keys])
    return EntryRows(np.concatenate(x), np.array(query), np.concatenate(right), fold, weight)


def fit_spectra(rows: EntryRows, folds: Sequence[int]) -> Fit:
    """Weights of the shortlist and of the closer look, 0 for the average right entry."""
    used = np.isin(rows.fold[rows.query], folds)
    query, right = rows.query[used], rows.right[used]
    weight = rows.weight[np.unique(query)]
    found = []
    for n_columns in (len(NAMES), len(SPECTRAL_NAMES)):
        x = rows.x[used, :n_columns]
        mean, spread = x.mean(axis=0, dtype=np.float64), x.std(axis=0, dtype=np.float64) + 1e-6
        centre = x[right].mean(axis=0, dtype=np.float64)
        x = ((x - mean) / spread).astype(np.float32)
        w = fit_choice(x, query, right, weight, np.full(n_columns, RIDGE_SPECTRA)) / spread
        found.append(Linear(0.0, tuple(w.tolist()), tuple(centre.tolist())))
    return found[0], found[1]


def _fit_once(rows: EntryRows, folds: Sequence[int], fits: dict[tuple[int, ...], Fit]) -> Fit:
    key = tuple(sorted(folds))
    if key not in fits:
        fits[key] = fit_spectra(rows, folds)
    return fits[key]


def spectra_only(shortlist_weights: Linear, spectra: Linear) -> RankingModel:
    """A model that knows the spectra alone, enough for a shortlist."""

    def silent(n: int) -> Linear:
        return Linear(0.0, (0.0,) * n, (0.0,) * n)

    unlisted, elsewhere = silent(len(UNLISTED_NAMES)), silent(len(ELSEWHERE_NAMES))
    return RankingModel("", shortlist_weights, spectra, {}, 0.0, unlisted, elsewhere, 0.0)


def collect_trials(
    bench: Benchmark, index: SearchIndex, settings: Settings, model: RankingModel, places: Sequence[int]
) -> Trials:
    """Each of these held-out queries twice: with its compound in the library, and without it."""
    columns: dict[str, list[NDArray[np.generic]]] = {field.name: [] for field in fields(Trials)}
    n_trials = n_groups = 0
    for place in places:
        query = bench.query(place)
        matches = bench.find(index, query, settings)
        seen: dict[int, tuple[EvidenceItem, ...]] = {}
        for absent in (False, True):
            kept = [m for m in matches if not absent or bench.key_of[m.entry.id] != bench.keys[place]]
            one = _trial(bench, place, query, kept, model, seen)
            weight = ABSENT_SHARE if absent else 1 - ABSENT_SHARE
            _append(columns, one, n_trials, n_groups, bench.fold[bench.keys[place]], weight, place)
            n_trials, n_groups = n_trials + 1, n_groups + int(one["group"].max()) + 1
    return Trials(**{name: np.concatenate(parts) for name, parts in columns.items()})


def _append(
    columns: dict[str, list[NDArray[np.generic]]], one: dict[str, NDArray[np.generic]], n_trials: int, n_groups: int,
    fold: int, weight: float, place: int,
) -> None:  # fmt: skip
    size, groups = len(one["group"]), int(one["group"].max()) + 1
    added = {
        **one,
        "trial": np.full(size, n_trials),
        "group": one["group"] + n_groups,
        "group_trial": np.full(groups, n_trials),
        "fold": np.array([fold]),
        "weight": np.array([weight]),
        "place": np.array([place]),
    }
    for name, values in added.items():
        columns[name].append(values)


def _trial(
    bench: Benchmark, place: int, query: Query, matches: Sequence[Match], model: RankingModel,
    seen: dict[int, tuple[EvidenceItem, ...]],
) -> dict[str, NDArray[np.generic]]:  # fmt: skip
    settings = Settings()
    drafts = shortlist(query.spectrum, matches, settings, model)
    ion = estimate_molecular_ion(query.spectrum, [(draft.entry, draft.cosine) for draft in drafts])
    facts = build_query_facts(query)
    for draft in drafts:
        if draft.entry.id not in seen:
            seen[draft.entry.id] = gather_evidence(query, draft.entry, draft.aligned, settings, facts)
    rows = [_row(draft, seen[draft.entry.id], ion) for draft in drafts]
    truth, entries = bench.entries[place], [draft.entry for draft in drafts]
    features = np.array([draft.features for draft in drafts])
    groups = group_isomers(entries, features, np.zeros(len(entries)))
    return {
        "x": np.array(rows),
        "group": groups.of_candidate,
        "right": np.array([compound_key(entry) == bench.keys[place] for entry in entries]),
        "isomer": np.array([is_isomer(entry, truth) for entry in entries]),
        "composition": np.array([describe_composition(entry) for entry in entries]),
        "derivative": np.array([float(bool(entry.measured_as)) for entry in entries]),
        "entry": np.array([entry.id for entry in entries]),
        "known": np.array([bool(key) for key in groups.keys]),
    }


def _row(draft: Draft, items: Sequence[EvidenceItem], ion) -> Floats:  # type: ignore[no-untyped-def]
    told = {item.kind: item.log_odds for item in items}
    found = formula_facts(draft.entry.formula_as_measured)
    mass = mass_log_odds(found.nominal_mass, ion) if found and ion.estimates else 0.0
    return np.r_[draft.features, [told.get(kind, 0.0) for kind in KINDS], mass]


def is_isomer(entry: Entry, truth: Entry) -> bool:
    """Same formula as measured; where either does not state it, the same formula of the parent compound."""
    if entry.formula_as_measured and truth.formula_as_measured:
        return entry.formula_as_measured == truth.formula_as_measured
    return bool(truth.identity.formula) and entry.identity.formula == truth.identity.formula


def group_features(trials: Trials, s: Floats) -> tuple[Floats, Floats, Ints]:
    """What `identify.ranking.alternatives.group_isomers` says of all trials at once, and the best candidate of each trial."""
    n_groups = trials.group_trial.size
    order = np.lexsort((-s, trials.group))
    start = np.flatnonzero(np.diff(trials.group[order], prepend=-1))
    best, size = order[start], np.diff(np.r_[start, order.size])
    second = s[order[np.minimum(start + 1, order.size - 1)]]
    lead = np.where(size > 1, np.minimum(s[best] - second, MOST_LEAD), MOST_LEAD)
    share = 1.0 / np.bincount(trials.group, np.exp(s - s[best][trials.group]), minlength=n_groups)
    columns = [NAMES.index(name) for name in FROM_BEST]
    unlisted = np.column_stack(
        [
            s[best], lead, share, np.log(size), trials.composition[best], ~trials.known, trials.derivative[best],
            trials.x[best][:, columns],
        ]
    )  # fmt: skip
    order = np.lexsort((-s[best], trials.group_trial))
    start = np.flatnonzero(np.diff(trials.group_trial[order], prepend=-1))
    first, size = order[start], np.diff(np.r_[start, order.size])
    second = s[best][order[np.minimum(start + 1, order.size - 1)]]
    top = best[first]
    lead = np.where(size > 1, np.minimum(s[top] - second, MOST_LEAD), MOST_LEAD)
    order = np.lexsort((-s, trials.trial))
    start = np.flatnonzero(np.diff(trials.trial[order], prepend=-1))
    end = np.r_[start[1:], order.size]
    behind = [
        np.where(
            start + place < end,
            np.minimum(s[order[start]] - s[order[np.minimum(start + place, order.size - 1)]], MOST_BEHIND),
            MOST_BEHIND,
        )
        for place in PROFILE
    ]
    elsewhere = np.column_stack([s[top], lead, trials.derivative[top], *behind, trials.x[top][:, columns]])
    return unlisted, elsewhere, top


def answers_of(trials: Trials) -> tuple[Mask, Mask]:
    """For each group whether the answer is an isomer of it without an entry; for each trial whether it is something else."""
    listed = np.zeros(trials.fold.size, bool)
    listed[trials.trial[trials.right]] = True
    group_right = np.zeros(trials.group_trial.size, bool)
    isomers = np.flatnonzero(trials.isomer & trials.known[trials.group] & ~listed[trials.trial])
    first = np.unique(trials.trial[isomers], return_index=True)[1]
    group_right[trials.group[isomers[first]]] = True
    isomer = np.zeros(trials.fold.size, bool)
    isomer[trials.group_trial[group_right]] = True
    return group_right, ~listed & ~isomer


def choose(trials: Trials, folds: Sequence[int]) -> Trials:
    """The trials of some folds, renumbered."""
    of_trial = np.isin(trials.fold, folds)
    of_row, of_group = of_trial[trials.trial], of_trial[trials.group_trial]
    new_trial, new_group = np.cumsum(of_trial) - 1, np.cumsum(of_group) - 1
    kept = {
        "x": of_row,
        "right": of_row,
        "isomer": of_row,
        "composition": of_row,
        "derivative": of_row,
        "entry": of_row,
    }
    kept |= {"known": of_group, "fold": of_trial, "weight": of_trial, "place": of_trial}
    values = {name: getattr(trials, name)[mask] for name, mask in kept.items()}
    return Trials(
        **values,
        trial=new_trial[trials.trial[of_row]],
        group=new_group[trials.group[of_row]],
        group_trial=new_trial[trials.group_trial[of_group]],
    )


def _scaled(values: Floats) -> tuple[Floats, Floats, Floats]:
    """Columns brought to mean 0 and spread 1 behind a column of ones, with those means and spreads."""
    mean, spread = values.mean(axis=0), values.std(axis=0) + 1e-9
    return np.column_stack([np.ones(len(values)), (values - mean) / spread]), mean, spread


def fit_model(
    bench: Benchmark,
    rows: EntryRows,
    trials: Trials,
    folds: Sequence[int],
    fits: dict[tuple[int, ...], Fit] | None = None,
) -> RankingModel:
    """All parameters from the compounds of some folds.

    What each part of the spectra is worth beside the evidence is fitted on scores from weights that did not see the compound: for
    each fold those of the other folds. `fits` keeps the weights of the spectra by folds, for use with other sets of folds.
    """
    fits = {} if fits is None else fits
    shortlist_weights, spectra = _fit_once(rows, folds, fits)
    used = choose(trials, folds)
    n_spectral = len(SPECTRAL_NAMES)
    scores = np.zeros((used.trial.size, len(PARTS)))
    for fold in folds:
        others = _fit_once(rows, [other for other in folds if other != fold], fits)[1]
        rows_of_fold = used.fold[used.trial] == fold
        scores[rows_of_fold] = others.parts(used.x[rows_of_fold, :n_spectral]) @ IN_PART
    x = np.column_stack([scores, used.x[:, n_spectral:]])
    group_right, else_right = answers_of(used)
    n_parts = len(PARTS)
    w, theta = np.r_[np.full(n_parts, 0.6), np.full(len(KINDS), 0.5), 0.3], None
    for _ in range(3):  # the group features depend on the weights: a few rounds settle both
        unlisted, elsewhere, top = group_features(used, x @ w)
        phi, phi_mean, phi_spread = _scaled(unlisted)
        z, z_mean, z_spread = _scaled(elsewhere)
        alt = Alternatives(
            x, used.group, used.trial, used.right, phi, used.group_trial, group_right, used.known, z, else_right,
            used.weight,
        )  # fmt: skip
        free = np.full(w.size + phi.shape[1] + z.shape[1], RIDGE)
        free[:n_parts] = 0.1
        free[[w.size, w.size + phi.shape[1]]] = 1e-3
        theta = alt.fit(free, np.r_[w, np.zeros(phi.shape[1] + z.shape[1])] if theta is None else theta)
        w, b, d = alt.split(theta)
    return RankingModel(
        provenance=PROVENANCE,
        shortlist=shortlist_weights,
        spectra=Linear(0.0, tuple((np.array(spectra.weights) * (IN_PART @ w[:n_parts])).tolist()), spectra.centres),
        evidence_weights=dict(zip(KINDS, w[n_parts:-1].tolist(), strict=True)),
        mass_weight=float(w[-1]),
        unlisted=Linear(float(b[0]), tuple((b[1:] / phi_spread).tolist()), tuple(phi_mean.tolist())),
        elsewhere=Linear(float(d[0]), tuple((d[1:] / z_spread).tolist()), tuple(z_mean.tolist())),
        same_class=_same_class(bench, used, top[else_right], used.place[else_right]),
    )


def _same_class(bench: Benchmark, trials: Trials, best: Ints, places: Ints) -> float:
    """Share of queries without a listed compound or isomer whose compound has the best candidate's most telling class."""
    hits = []
    for row, place in zip(best, places, strict=True):
        classes = _classes(bench.by_id[int(trials.entry[row])].identity.smiles)
        hits.append(bool(classes) and classes[0] in _classes(bench.entries[int(place)].identity.smiles))
    return float(np.mean(hits)) if hits else 0.0


def _classes(smiles: str) -> tuple[str, ...]:
    try:
        return compound_classes(smiles) if smiles else ()
    except StructureError:
        return ()


def collect(bench: Benchmark, settings: Settings) -> tuple[EntryRows, Trials]:
    """Everything the fit needs: some six minutes, kept piece by piece in scratch files until the code it depends on changes."""
    index = bench.build_index(settings)
    places = bench.queries + bench.extra
    parts = [
        _keep(f"rows-{n}", EntryRows, lambda n=n: collect_entry_rows(bench, index, settings, places[n::N_PIECES]))
        for n in range(N_PIECES)
    ]
    rows = join_rows(parts)
    model = spectra_only(*fit_spectra(rows, range(N_FOLDS)))
    trials = [
        _keep(
            f"trials-{n}", Trials, lambda n=n: collect_trials(bench, index, settings, model, bench.queries[n::N_PIECES])
        )
        for n in range(N_PIECES)
    ]
    return rows, join_trials(trials)


def join_rows(parts: Sequence[EntryRows]) -> EntryRows:
    """Several sets of rows as one, numbers of queries running on."""
    starts = np.cumsum([0, *(part.fold.size for part in parts)])
    query = [part.query + start for part, start in zip(parts, starts, strict=False)]
    joined = {name: np.concatenate([getattr(p, name) for p in parts]) for name in ("x", "right", "fold", "weight")}
    return EntryRows(query=np.concatenate(query), **joined)


def _keep(name: str, kind: type[Kept], make: Callable[[], Kept]) -> Kept:
    rooms = ("chem", "evidence", "spectra") if kind is Trials else ("chem", "spectra")
    path = SCRATCH / f"ranking-{_digest(rooms)}-{name}.npz"
    if not path.is_file():
        made = make()
        SCRATCH.mkdir(parents=True, exist_ok=True)
        unfinished = path.with_suffix(f".{os.getpid()}.npz")
        np.savez(unfinished, **{field.name: getattr(made, field.name) for field in fields(made)})  # type: ignore[arg-type]
        unfinished.replace(path)
    with np.load(path) as arrays:
        return kind(**dict(arrays))


def join_trials(parts: Sequence[Trials]) -> Trials:
    """Several sets of trials as one, numbers of trials and groups running on."""
    columns: dict[str, list[NDArray[np.generic]]] = {field.name: [] for field in fields(Trials)}
    n_trials = n_groups = 0
    for part in parts:
        for name, values in columns.items():
            shift = {"trial": n_trials, "group_trial": n_trials, "group": n_groups}.get(name, 0)
            values.append(getattr(part, name) + shift if shift else getattr(part, name))
        n_trials, n_groups = n_trials + part.fold.size, n_groups + part.group_trial.size
    return Trials(**{name: np.concatenate(values) for name, values in columns.items()})


def fit_folds(bench: Benchmark, settings: Settings) -> dict[int, RankingModel]:
    """For each fold the model fitted on all others; kept beside the rows they were fitted on."""
    code = hashlib.sha256(
        Path(__file__).read_bytes() + (Path(__file__).parent / "ranking_fit.py").read_bytes()
    ).hexdigest()
    kept = SCRATCH / f"ranking-{_digest()}-{code[:8]}.json"
    if kept.is_file():
        return {int(fold): build_model(table) for fold, table in json.loads(kept.read_text(encoding="utf-8")).items()}
    rows, trials = collect(bench, settings)
    fits: dict[tuple[int, ...], Fit] = {}
    models = {
        fold: fit_model(bench, rows, trials, [other for other in range(N_FOLDS) if other != fold], fits)
        for fold in range(N_FOLDS)
    }
    kept.write_text(json.dumps({fold: as_coefficients(model) for fold, model in models.items()}), encoding="utf-8")
    return models


def _digest(rooms: Sequence[str] = ("chem", "evidence", "spectra")) -> str:
    """Of the code that rows and trials depend on."""
    own = [ROOM / f"{name}.py" for name in ("alternatives", "features", "grouping", "ions", "shortlist")]
    others = [path for room in rooms for path in sorted((ROOM.parent / room).glob("*"))]
    others = [path for path in others if path.suffix in (".py", ".json")]
    split = [Path(__file__).parent / "ranking_data.py"]
    return hashlib.sha256(b"".join(path.read_bytes() for path in (*own, *others, *split))).hexdigest()[:16]


def write_coefficients(model: RankingModel, provenance: str, path: Path) -> None:
    """The module of numbers that the package ships."""
    values = {**_rounded(as_coefficients(model)), "provenance": provenance}
    table = pprint.pformat(values, width=110, sort_dicts=False)
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
    dated = f"{PROVENANCE}; {len(bench.fold)} compounds, {trials.fold.size} trials; {datetime.now(UTC):%Y-%m-%d}"
    write_coefficients(model, dated, ROOM / "coefficients.py")


if __name__ == "__main__":
    main()
