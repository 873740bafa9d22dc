"""Fits the additive ranking on the open records and writes `identify/ranking/coefficients.py`.

    python tests/benchmarks/fit_ranking.py

Only coefficients are written, no spectrum and no accession. The protocol is that of `ranking_data`; `accuracy.py` fits the
same way on four folds of compounds and measures on the fifth. Every query is played with its compound in the library and
without it. The order of candidates is fitted on queries as measured. The weights of what is not listed are then fitted once
more, with the log-odds of the candidates as they are and a query of each compound spoiled in one of ten ways (`ranking_spoiled`)
beside the one as measured, at `SPOILED_WEIGHT`.
"""

from __future__ import annotations

import hashlib
import json
import os
import pprint
import tempfile
from collections import Counter
from collections.abc import Callable, Collection, Sequence
from dataclasses import dataclass, fields
from datetime import UTC, datetime
from functools import partial
from pathlib import Path
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray
from ranking_data import ABSENT_SHARE, N_FOLDS, SEED, Benchmark, load_benchmark
from ranking_fit import Alternatives, fit_choice
from ranking_spoiled import Spoiled, ways_to_spoil

from identify.chem.structures import compound_classes
from identify.errors import StructureError
from identify.evidence.facts import build_query_facts, formula_facts
from identify.evidence.gather import gather_evidence
from identify.evidence.molecular_ion import estimate_molecular_ion
from identify.index import SearchIndex, search_index
from identify.pipeline.query_nature import judge_parts
from identify.pipeline.search import DEPTH_OF_RESIDUAL
from identify.ranking.alternatives import (
    ELEMENTS,
    ELSEWHERE_NAMES,
    EVIDENCE_KINDS,
    EXTENT,
    FROM_BEST,
    KINDS,
    MOST_BEHIND,
    MOST_LEAD,
    PROFILE,
    UNLISTED_NAMES,
    describe_composition,
    describe_query,
    group_isomers,
    kinds_of,
    spread_by_kind,
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
from identify.records import CleanSpectrum, Entry, EvidenceItem, Purity
from identify.settings import Settings

ROOT = Path(__file__).resolve().parents[2]
ROOM = ROOT / "identify" / "ranking"
SCRATCH = Path(tempfile.gettempdir()) / "ionwitness-benchmark"
RIDGE, RIDGE_SPECTRA = 2.0, 5.0
ROUGH, N_ROWS = "cosine, soft", 50
CONTAINED, N_CONTAINED = "reverse, root", 10
"""Entries by these measures that take part in the fit of the spectra; by the second one those of few peaks do too."""
PROVENANCE = "tests/benchmarks/fit_ranking.py on the open EI records (MassBank release 2025.05.1), by compound"
ROWS_DEPEND_ON = ("chem", "spectra"), ("features", "grouping", "ions"), ("ranking_data",)
"""Rooms, modules of the ranking and benchmarks that decide what the rows of entries are."""
SPOILED_WEIGHT = 0.3
"""Of a spoiled query beside one as measured: tried with 0.1 and 0.3; more makes the probabilities of good queries worse."""
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

    Candidates (`x`, `trial`, `group`, `right`, `isomer`, `composition`, `kinds`, `entry`), isomer groups (`group_trial`,
    `known`) and trials (`fold`, `weight`, `place`, `about`, `spoiled`).
    """

    x: Floats
    trial: Ints
    group: Ints
    right: Mask
    isomer: Mask
    composition: Floats
    kinds: Floats
    entry: Ints
    group_trial: Ints
    known: Mask
    fold: Ints
    weight: Floats
    place: Ints
    about: Floats
    spoiled: Mask


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
        contained = np.argsort(-features[:, NAMES.index(CONTAINED)], kind="stable")[:N_CONTAINED].tolist()
        order = np.array([n for rank, n in enumerate(order.tolist()) if rank < N_ROWS or is_right[n] or n in contained])
        closer = compare_closely(asked.spectrum, [entries[n].spectrum for n in order])
        x.append(np.concatenate([features[order], closer], axis=1).astype(np.float32))
        query += [number] * order.size
        right.append(is_right[order])
    keys = [bench.keys[place] for place in places]
    everything = Counter(bench.keys[place] for place in bench.queries + bench.extra)
    fold, weight = np.array([bench.fold[key] for key in keys]), np.array([everything[key] ** -0.5 for key in keys])
    return EntryRows(np.concatenate(x), np.array(query), np.concatenate(right), fold, weight)


def fit_spectra(rows: EntryRows, folds: Sequence[int], near: Fit | None = None) -> Fit:
    """Weights of the shortlist and of the closer look, 0 for the average right entry; `near` is where the climb begins."""
    used = np.isin(rows.fold[rows.query], folds)
    query, right = rows.query[used], rows.right[used]
    weight = rows.weight[np.unique(query)]
    found = []
    for place, n_columns in enumerate((len(NAMES), len(SPECTRAL_NAMES))):
        x = rows.x[used, :n_columns]
        mean, spread = x.mean(axis=0, dtype=np.float64), x.std(axis=0, dtype=np.float64) + 1e-6
        centre = x[right].mean(axis=0, dtype=np.float64)
        x = ((x - mean) / spread).astype(np.float32)
        start = None if near is None else np.array(near[place].weights) * spread
        w = fit_choice(x, query, right, weight, np.full(n_columns, RIDGE_SPECTRA), start) / spread
        found.append(Linear(0.0, tuple(w.tolist()), tuple(centre.tolist())))
    return found[0], found[1]


def _fit_once(rows: EntryRows, folds: Sequence[int], fits: dict[tuple[int, ...], Fit]) -> Fit:
    """The same maximum from wherever the climb begins: from the weights of more folds it is a third of the way."""
    key = tuple(sorted(folds))
    if key not in fits:
        near = next((fit for other, fit in fits.items() if set(key) < set(other)), None)
        fits[key] = fit_spectra(rows, folds, near)
    return fits[key]


def spectra_only(shortlist_weights: Linear, spectra: Linear) -> RankingModel:
    """A model that knows the spectra alone, enough for a shortlist."""

    def silent(n: int) -> Linear:
        return Linear(0.0, (0.0,) * n, (0.0,) * n)

    unlisted, elsewhere = silent(len(UNLISTED_NAMES)), silent(len(ELSEWHERE_NAMES))
    return RankingModel("", shortlist_weights, spectra, {}, 0.0, unlisted, elsewhere, {}, 0.0)


def collect_trials(
    bench: Benchmark, index: SearchIndex, settings: Settings, model: RankingModel, numbers: Sequence[int]
) -> Trials:
    """These of the held-out queries, as measured and spoiled in one way, with the compound in the library and without it."""
    columns: dict[str, list[NDArray[np.generic]]] = {field.name: [] for field in fields(Trials)}
    ways = list(ways_to_spoil(bench).values())
    n_trials = n_groups = 0
    for number in numbers:
        place = bench.queries[number]
        query, rng = bench.query(place), np.random.default_rng([SEED, number])
        for asked, spoiled in ((Spoiled(query), False), (ways[number % len(ways)](query, rng), True)):
            matches = bench.find(index, asked.query, settings)
            seen: dict[int, tuple[EvidenceItem, ...]] = {}
            for absent in (False, True):
                gone = {bench.keys[place]} if absent else set[str]()
                kept = [m for m in matches if bench.key_of[m.entry.id] not in gone]
                one = _trial(bench, place, asked, kept, model, seen, partial(judge_alone, bench, index, gone))
                weight = ABSENT_SHARE if absent else 1 - ABSENT_SHARE
                about = {"weight": weight * (SPOILED_WEIGHT if spoiled else 1.0), "spoiled": spoiled}
                about |= {"fold": bench.fold[bench.keys[place]], "place": place}
                _append(columns, one, n_trials, n_groups, about)
                n_trials, n_groups = n_trials + 1, n_groups + int(one["group"].max()) + 1
    return Trials(**{name: np.concatenate(parts) for name, parts in columns.items()})


def judge_alone(
    bench: Benchmark, index: SearchIndex, gone: Collection[str], spectrum: CleanSpectrum, drafts: Sequence[Draft],
    matches: Sequence[Match],
) -> Purity:  # fmt: skip
    """Purity of a query as the product judges it, with some compounds out of the library."""

    def search(left: CleanSpectrum) -> list[Match]:
        found = [Match(hit, bench.by_id[hit.entry_id]) for hit in search_index(index, left, DEPTH_OF_RESIDUAL)]
        return [match for match in found if bench.key_of[match.entry.id] not in gone]

    return judge_parts(spectrum, drafts, matches, search)


def _append(
    columns: dict[str, list[NDArray[np.generic]]], one: dict[str, NDArray[np.generic]], n_trials: int, n_groups: int,
    about: dict[str, float],
) -> None:  # fmt: skip
    size, groups = len(one["group"]), int(one["group"].max()) + 1
    added = {
        **one,
        "trial": np.full(size, n_trials),
        "group": one["group"] + n_groups,
        "group_trial": np.full(groups, n_trials),
        **{name: np.array([value]) for name, value in about.items()},
    }
    for name, values in added.items():
        columns[name].append(values)


def _trial(
    bench: Benchmark, place: int, asked: Spoiled, matches: Sequence[Match], model: RankingModel,
    seen: dict[int, tuple[EvidenceItem, ...]], judge: Callable[..., Purity],
) -> dict[str, NDArray[np.generic]]:  # fmt: skip
    settings, query = Settings(), asked.query
    drafts = shortlist(query.spectrum, matches, settings, model)
    ion = estimate_molecular_ion(query.spectrum, [(draft.entry, draft.cosine) for draft in drafts])
    facts = build_query_facts(query)
    for draft in drafts:
        if draft.entry.id not in seen:
            seen[draft.entry.id] = gather_evidence(query, draft.entry, draft.aligned, settings, facts)
    evidence = [seen[draft.entry.id] for draft in drafts]
    entries = [draft.entry for draft in drafts]
    features = np.array([draft.features for draft in drafts])
    about = describe_query(query.spectrum, judge(query.spectrum, drafts, matches))
    groups = group_isomers(entries, features, np.zeros(len(entries)), evidence, about)
    truths = [bench.entries[place], *([] if asked.partner is None else [bench.entries[asked.partner]])]
    keys = {bench.key_of[truth.id] for truth in truths}
    return {
        "x": np.array([_row(draft, items, ion) for draft, items in zip(drafts, evidence, strict=True)]),
        "group": groups.of_candidate,
        "right": np.array([compound_key(entry) in keys for entry in entries]),
        "isomer": np.array([any(is_isomer(entry, truth) for truth in truths) for entry in entries]),
        "composition": np.array([describe_composition(entry) for entry in entries]),
        "kinds": np.array([kinds_of(entry) for entry in entries]),
        "entry": np.array([entry.id for entry in entries]),
        "known": np.array([bool(key) for key in groups.keys]),
        "about": about[np.newaxis],
    }


def _row(draft: Draft, items: Sequence[EvidenceItem], ion) -> Floats:  # type: ignore[no-untyped-def]
    told = {item.kind: item.log_odds for item in items}
    found = formula_facts(draft.entry.formula_as_measured)
    mass = mass_log_odds(found.nominal_mass, ion) if found and ion.estimates else 0.0
    return np.r_[draft.features, [told.get(kind, 0.0) for kind in EVIDENCE_KINDS], mass]


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
            s[best], lead, share, np.log(size), trials.composition[best], trials.x[best][:, columns],
            trials.about[trials.group_trial, : len(EXTENT)],
        ]
    )  # fmt: skip
    unlisted = spread_by_kind(unlisted, trials.kinds[best])
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
    x = trials.x[top]
    elsewhere = np.column_stack(
        [
            s[top], lead, *behind, trials.composition[top, -len(ELEMENTS) :], x[:, columns], trials.about,
            x[:, len(SPECTRAL_NAMES) : -1],
        ]
    )  # fmt: skip
    return unlisted, spread_by_kind(elsewhere, trials.kinds[top]), top


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


def choose(trials: Trials, of_trial: Mask) -> Trials:
    """Some of the trials, renumbered."""
    of_row, of_group = of_trial[trials.trial], of_trial[trials.group_trial]
    new_trial, new_group = np.cumsum(of_trial) - 1, np.cumsum(of_group) - 1
    kept = {
        "x": of_row,
        "right": of_row,
        "isomer": of_row,
        "composition": of_row,
        "kinds": of_row,
        "entry": of_row,
    }
    kept |= {"known": of_group, "fold": of_trial, "weight": of_trial, "place": of_trial}
    kept |= {"about": of_trial, "spoiled": of_trial}
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

    `fits` keeps the weights of the spectra by folds, for use with other sets of folds.
    """
    fits = {} if fits is None else fits
    shortlist_weights, spectra = _fit_once(rows, folds, fits)
    used = choose(trials, np.isin(trials.fold, folds))
    x = _parts_and_evidence(rows, used, folds, fits)
    measured = ~used.spoiled
    w = fit_order(choose(used, measured), x[measured[used.trial]])
    steepness, unlisted, elsewhere, top = fit_unlisted(used, x @ w)
    n_parts, not_listed = len(PARTS), np.flatnonzero(answers_of(used)[1] & measured)
    return RankingModel(
        provenance=PROVENANCE,
        shortlist=shortlist_weights,
        spectra=Linear(0.0, tuple((np.array(spectra.weights) * (IN_PART @ w[:n_parts])).tolist()), spectra.centres),
        evidence_weights=dict(zip(EVIDENCE_KINDS, w[n_parts:-1].tolist(), strict=True)),
        mass_weight=float(w[-1]),
        unlisted=unlisted,
        elsewhere=elsewhere,
        steepness=dict(zip(("any", *KINDS), steepness.tolist(), strict=True)),
        same_class=_same_class(bench, used, top[not_listed], used.place[not_listed]),
    )


def _parts_and_evidence(
    rows: EntryRows, used: Trials, folds: Sequence[int], fits: dict[tuple[int, ...], Fit]
) -> Floats:
    """What each part of the spectra says by weights that did not see the compound, evidence, mass; one row per candidate.

    What a part is worth beside the evidence is fitted on these: for each fold the weights are those of the other folds.
    """
    n_spectral = len(SPECTRAL_NAMES)
    scores = np.zeros((used.trial.size, len(PARTS)))
    for fold in folds:
        others = _fit_once(rows, [other for other in folds if other != fold], fits)[1]
        rows_of_fold = used.fold[used.trial] == fold
        scores[rows_of_fold] = others.parts(used.x[rows_of_fold, :n_spectral]) @ IN_PART
    return np.column_stack([scores, used.x[:, n_spectral:]])


def fit_order(trials: Trials, x: Floats) -> Floats:
    """Weights of the parts of the spectra, of the evidence, and of the mass, shape ``(n_columns of x,)``."""
    n_parts = len(PARTS)
    w, theta = np.r_[np.full(n_parts, 0.6), np.full(len(EVIDENCE_KINDS), 0.5), 0.3], np.zeros(0)
    for _ in range(3):  # the group features depend on the weights: a few rounds settle both
        unlisted, elsewhere, _ = group_features(trials, x @ w)
        phi, z = _scaled(unlisted)[0], _scaled(elsewhere)[0]
        ridge = np.r_[np.full(n_parts, 0.1), np.full(w.size - n_parts, RIDGE), _ridge(phi), _ridge(z)]
        alt = _alternatives(trials, x, phi, z)
        theta = alt.fit(ridge, theta if theta.size else np.r_[w, np.zeros(phi.shape[1] + z.shape[1])])
        w = alt.split(theta)[0]
    return w


def fit_unlisted(trials: Trials, s: Floats) -> tuple[Floats, Linear, Linear, Ints]:
    """Steepness, what is not listed, and the best candidate of each trial, with the log-odds of the candidates as they are."""
    unlisted, elsewhere, top = group_features(trials, s)
    (phi, *phi_scale), (z, *z_scale) = _scaled(unlisted), _scaled(elsewhere)
    of_kind = trials.kinds[top][trials.trial]
    x = np.column_stack([s, s[:, np.newaxis] * of_kind])
    alt = _alternatives(trials, x, phi, z)
    ridge = np.r_[1e-3, np.full(len(KINDS), RIDGE), _ridge(phi), _ridge(z)]
    w, b, d = alt.split(alt.fit(ridge, np.r_[1.0, np.zeros(len(KINDS) + phi.shape[1] + z.shape[1])]))
    return w, _as_linear(b, *phi_scale), _as_linear(d, *z_scale), top


def _alternatives(trials: Trials, x: Floats, phi: Floats, z: Floats) -> Alternatives:
    group_right, else_right = answers_of(trials)
    return Alternatives(
        x, trials.group, trials.trial, trials.right, phi, trials.group_trial, group_right, trials.known, z, else_right,
        trials.weight,
    )  # fmt: skip


def _ridge(features: Floats) -> Floats:
    """None to speak of for the constant, twice as much for the corrections by kind."""
    n_plain = 1 + (features.shape[1] - 1 - len(KINDS)) // (1 + len(KINDS))
    return np.r_[1e-3, np.full(n_plain - 1, RIDGE), np.full(features.shape[1] - n_plain, 2 * RIDGE)]


def _as_linear(weights: Floats, mean: Floats, spread: Floats) -> Linear:
    return Linear(float(weights[0]), tuple((weights[1:] / spread).tolist()), tuple(mean.tolist()))


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
            f"trials-{n}",
            Trials,
            lambda n=n: collect_trials(bench, index, settings, model, range(len(bench.queries))[n::N_PIECES]),
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
    digest = _digest() if kind is Trials else _digest(*ROWS_DEPEND_ON)
    path = SCRATCH / f"ranking-{digest}-{name}.npz"
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


def _digest(
    rooms: Sequence[str] = ("chem", "evidence", "spectra"),
    modules: Sequence[str] = ("alternatives", "features", "grouping", "ions", "shortlist"),
    protocol: Sequence[str] = ("ranking_data", "ranking_spoiled"),
) -> str:
    """Of the code that the trials (as it stands) or the rows depend on: rooms, modules of the ranking, benchmarks."""
    own = [ROOM / f"{name}.py" for name in modules]
    others = [path for room in rooms for path in sorted((ROOM.parent / room).glob("*"))]
    others = [path for path in others if path.suffix in (".py", ".json")]
    split = [Path(__file__).parent / f"{name}.py" for name in protocol]
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
