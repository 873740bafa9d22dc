"""How often is the first candidate right, and do the probabilities say so? On the open records, compounds held out.

    python tests/benchmarks/accuracy.py              five folds, nested: parameters from four folds, measured on the fifth
    python tests/benchmarks/accuracy.py --quick      the shipped parameters on one fold (its compounds took part in their fit)
    python tests/benchmarks/accuracy.py --degrade    also with noise, cut low masses, tilt, co-elution, a thinned library

Protocol: see `ranking_data`. Every query goes through the product's own path: index → shortlist → evidence → rank. Baselines
rank the same compounds by one score from an exact search of the same library.
"""

from __future__ import annotations

import argparse
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from fit_ranking import KINDS, collect, fit_model, is_isomer
from numpy.typing import NDArray
from ranking_data import N_FOLDS, SEED, Benchmark, load_benchmark

from identify.evidence.facts import build_query_facts
from identify.evidence.gather import gather_evidence
from identify.evidence.molecular_ion import estimate_molecular_ion
from identify.index import SearchIndex, search_index
from identify.ranking.model import RankingModel, default_model
from identify.ranking.rank import Ranking, rank
from identify.ranking.shortlist import Draft, shortlist
from identify.records import CleanSpectrum, Entry, EvidenceItem, MolecularIonEstimate, Peaks, Query
from identify.settings import Settings, Weighting
from identify.similarity.scores import composite_score
from identify.spectra.align import align

BASELINES = {
    "plain cosine": Weighting(mz_power=0.0, intensity_power=1.0),
    "cosine m/z^0.5 I^0.5": Weighting(mz_power=0.5, intensity_power=0.5),
    "cosine m/z^1.3 I^0.53": Weighting(mz_power=1.3, intensity_power=0.53),
    "cosine m/z^3 I^0.6": Weighting(mz_power=3.0, intensity_power=0.6),
}
FALSE_ALARMS = 0.012
Floats = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(eq=False)
class Answer:
    """One query's result, judged."""

    place: int
    present: bool
    rank: int
    """Of the right compound; 999 when it is not among the candidates."""
    right: bool
    group_right: bool
    compound: float
    """Confidence that the first candidate is right."""
    group: float
    inside: float
    """Confidence that the compound is in the library."""
    class_chance: float = 0.0


@dataclass(eq=False)
class Prepared:
    """What the ranking gets, kept for ablations."""

    query: Query
    drafts: tuple[Draft, ...]
    evidence: list[tuple[EvidenceItem, ...]]
    ion: MolecularIonEstimate


def prepare(bench: Benchmark, index: SearchIndex, query: Query, settings: Settings, model: RankingModel) -> Prepared:
    """The product's path up to the ranking."""
    drafts = shortlist(query.spectrum, bench.find(index, query, settings), settings, model)
    ion = estimate_molecular_ion(query.spectrum, [(draft.entry, draft.cosine) for draft in drafts])
    facts = build_query_facts(query)
    return Prepared(query, drafts, [gather_evidence(query, d.entry, d.aligned, settings, facts) for d in drafts], ion)


def judge(bench: Benchmark, place: int, present: bool, ranking: Ranking) -> Answer:
    """Compare a ranking with the truth."""
    keys = [bench.key_of[candidate.entry.id] for candidate in ranking.candidates]
    truth, key = bench.entries[place], bench.keys[place]
    best = ranking.candidates[0] if ranking.candidates else None
    return Answer(
        place,
        present,
        keys.index(key) + 1 if key in keys else 999,
        bool(keys) and keys[0] == key,
        best is not None and (keys[0] == key or is_isomer(best.entry, truth)),
        best.probability if best else 0.0,
        ranking.claim.group_probability,
        ranking.in_library_probability,
        ranking.claim.class_probability,
    )


def run_product(
    bench: Benchmark, index: SearchIndex, places: Sequence[int], models: dict[int, RankingModel], gone: set[str],
    change: Callable[[Query], Query] = lambda query: query,
) -> tuple[list[Answer], list[Prepared]]:  # fmt: skip
    """Answers of the product for some queries."""
    settings, answers, kept = Settings(), [], []
    for place in places:
        model = models[bench.fold[bench.keys[place]]]
        ready = prepare(bench, index, change(bench.query(place)), settings, model)
        ranking = rank(ready.query, ready.drafts, ready.evidence, ready.ion, settings, model)
        answers.append(judge(bench, place, bench.keys[place] not in gone, ranking))
        kept.append(ready)
    return answers, kept


def run_baseline(
    bench: Benchmark, index: SearchIndex, places: Sequence[int], gone: set[str], *, composite: bool = False
) -> list[Answer]:
    """Answers of one score: best entry of each compound, confidence = the score itself."""
    answers = []
    for place in places:
        spectrum = bench.entries[place].spectrum
        scored: list[tuple[float, Entry]] = []
        for hit in search_index(index, spectrum, 100):
            entry = bench.by_id[hit.entry_id]
            score = hit.cosine
            if composite:
                score = composite_score(align(spectrum, entry.spectrum), Weighting(mz_power=1.0, intensity_power=0.5))
            scored.append((score, entry))
        scored.sort(key=lambda pair: -pair[0])
        keys = list(dict.fromkeys(bench.key_of[entry.id] for _, entry in scored))
        key, truth = bench.keys[place], bench.entries[place]
        top, best = scored[0]
        right = keys[0] == key
        where = keys.index(key) + 1 if key in keys else 999
        answers.append(Answer(place, key not in gone, where, right, right or is_isomer(best, truth), top, top, top))
    return answers


def roc_area(confidence: Floats, right: Mask) -> float:
    """Chance that a right answer is more certain than a wrong one."""
    order = np.argsort(confidence, kind="stable")
    values, ranks = confidence[order], np.arange(1, confidence.size + 1, dtype=float)
    for value in np.unique(values):
        tied = values == value
        ranks[tied] = ranks[tied].mean()
    good = right[order]
    n, m = int(good.sum()), int((~good).sum())
    return float((ranks[good].sum() - n * (n + 1) / 2) / (n * m)) if n and m else float("nan")


def accepted_at(confidence: Floats, right: Mask, precision: float) -> float:
    """Largest share of the right answers that can be accepted with at least this precision."""
    order = np.argsort(-confidence, kind="stable")
    good = np.cumsum(right[order])
    fine = good >= precision * np.arange(1, order.size + 1)
    # An end inside a run of equal confidences is no threshold.
    ends = np.r_[np.diff(confidence[order]) != 0, True]
    return float(good[fine & ends].max() / right.sum()) if (fine & ends).any() else 0.0


def calibration_error(confidence: Floats, right: Mask) -> float:
    """Mean distance of confidence and share right over ten bins of [0, 1], weighted by their sizes."""
    bins = np.minimum((confidence * 10).astype(int), 9)
    return float(
        sum(abs(confidence[bins == b].sum() - right[bins == b].sum()) for b in range(10)) / max(confidence.size, 1)
    )


def flagged_absent(inside: Floats, present: Mask) -> float:
    """Share of absent compounds flagged when `FALSE_ALARMS` of the present ones are."""
    limit = np.sort(inside[present])[int(FALSE_ALARMS * present.sum())]
    return float((inside[~present] < limit).mean())


def columns(answers: Sequence[Answer]) -> dict[str, NDArray[np.generic]]:
    """Answers as arrays."""
    names = ("place", "present", "rank", "right", "group_right", "compound", "group", "inside", "class_chance")
    return {name: np.array([getattr(answer, name) for answer in answers]) for name in names}


def laboratory(entry: Entry) -> str:
    """Contributor of a record, from its accession."""
    return entry.accession.split("-")[1] if entry.accession.count("-") >= 2 else entry.accession


def subsets(bench: Benchmark, places: Sequence[int]) -> dict[str, Mask]:
    """Named parts of the queries."""
    cross, other_authors, derivative, cut, twin = [], [], [], [], []
    for place in places:
        entry, others = bench.entries[place], [bench.entries[other] for other in bench.replicates(place)]
        cross.append(all(laboratory(other) != laboratory(entry) for other in others))
        other_authors.append(all(other.authors != entry.authors for other in others))
        derivative.append(bool(entry.measured_as))
        cut.append(entry.spectrum.lowest_mz >= 50)
        twin.append(any(same_peaks(entry.spectrum, other.spectrum) for other in others))
    return {
        "all": np.ones(len(places), bool),
        "other contributor only": np.array(cross),
        "other authors only": np.array(other_authors),
        "plain compounds": ~np.array(derivative),
        "derivatives": np.array(derivative),
        "starts at m/z 50 or higher": np.array(cut),
        "without exact duplicates": ~np.array(twin),
    }


def same_peaks(a: CleanSpectrum, b: CleanSpectrum) -> bool:
    """The same peak list: equal m/z and relative intensities to a tenth of a percent of the base peak."""
    return np.array_equal(a.nominal.mz, b.nominal.mz) and bool(
        np.allclose(a.nominal.relative, b.nominal.relative, atol=0.1)
    )


def ranks_line(name: str, ranks: NDArray[np.int64]) -> str:
    """Rank-1, 3 and 10."""
    shares = [(ranks <= k).mean() if ranks.size else float("nan") for k in (1, 3, 10)]
    return f"{name:<34} {ranks.size:>5}   " + "   ".join(f"{share:.3f}" for share in shares)


def spread_line(name: str, answers: Sequence[Answer], bench: Benchmark) -> str:
    """Rank-1 by fold: mean and spread."""
    folds = np.array([bench.fold[bench.keys[answer.place]] for answer in answers])
    right = np.array([answer.right for answer in answers])
    by_fold = [right[folds == fold].mean() for fold in np.unique(folds)]
    return f"{name:<34} rank-1 by fold {np.mean(by_fold):.3f} ± {np.std(by_fold):.3f}"


def open_line(name: str, answers: Sequence[Answer], *, calibrated: bool) -> str:
    """Measures of the open set."""
    c = columns(answers)
    right, group_right = c["right"].astype(bool), c["group_right"].astype(bool)
    numbers = [
        roc_area(c["compound"], right),
        accepted_at(c["compound"], right, 0.95),
        accepted_at(c["group"], group_right, 0.95),
        accepted_at(c["group"], group_right, 0.99),
        flagged_absent(c["inside"], c["present"].astype(bool)) if not c["present"].all() else float("nan"),
        calibration_error(c["compound"], right) if calibrated else float("nan"),
        calibration_error(c["group"], group_right) if calibrated else float("nan"),
    ]
    return f"{name:<34}" + "".join(f"{number:>9.3f}" if number == number else f"{'–':>9}" for number in numbers)


OPEN_HEAD = (
    f"{'':<34}{'ROC':>9}{'cmpd .95':>9}{'group.95':>9}{'group.99':>9}{'flagged':>9}{'ECE cmpd':>9}{'ECE grp':>9}"
)


def print_reliability(answers: Sequence[Answer]) -> None:
    """Reliability in ten bins, compound and group."""
    c = columns(answers)
    for level, truth in (("compound", "right"), ("group", "group_right")):
        bins = np.minimum((c[level] * 10).astype(int), 9)
        cells = []
        for b in range(10):
            inside = bins == b
            if inside.any():
                cells.append(f"{c[level][inside].mean():.2f}→{c[truth][inside].mean():.2f} ({inside.sum()})")
        print(f"  {level:<9}", "  ".join(cells))


def degradations() -> dict[str, Callable[[Query], Query]]:
    """Named ways to spoil a query."""
    rng = np.random.default_rng(SEED)

    def changed(query: Query, mz: Floats, intensity: Floats, lowest: int | None = None) -> Query:
        kept = intensity > 1e-3 * intensity.max()
        spectrum = query.spectrum
        peaks = Peaks(mz[kept], intensity[kept])
        return replace(query, spectrum=CleanSpectrum(peaks, None, lowest or spectrum.lowest_mz, spectrum.steps))

    def noise(share: float) -> Callable[[Query], Query]:
        def spoil(query: Query) -> Query:
            p = query.spectrum.nominal
            factor = np.exp(rng.normal(0, share, len(p)))
            floor = np.abs(rng.normal(0, 0.02 * share, len(p))) * p.intensity.max()
            return changed(query, p.mz, p.intensity * factor + floor)

        return spoil

    def cut(lowest: int) -> Callable[[Query], Query]:
        def spoil(query: Query) -> Query:
            p = query.spectrum.nominal
            kept = p.mz >= lowest
            if kept.sum() < 3:
                return query
            return changed(query, p.mz[kept], p.intensity[kept], max(lowest, query.spectrum.lowest_mz))

        return spoil

    def tilt(share: float) -> Callable[[Query], Query]:
        def spoil(query: Query) -> Query:
            p = query.spectrum.nominal
            place = (p.mz - p.mz[0]) / max(p.mz[-1] - p.mz[0], 1.0)
            return changed(query, p.mz, p.intensity * (1 + share * (2 * place - 1)))

        return spoil

    named = {f"intensity noise {share:.0%}": noise(share) for share in (0.1, 0.3, 0.6)}
    named |= {f"nothing below m/z {lowest}": cut(lowest) for lowest in (50, 70)}
    named |= {f"tilt {share:+.0%}": tilt(share) for share in (-0.3, 0.3)}
    return named


def mix_with(bench: Benchmark, share: float) -> Callable[[Query], Query]:
    """A query with another record added: `share` of the base peak of the sum of both."""
    rng = np.random.default_rng(SEED + 1)

    def spoil(query: Query) -> Query:
        other = bench.entries[int(rng.choice(bench.extra))].spectrum.nominal
        own = query.spectrum.nominal
        axis = np.union1d(own.mz, other.mz)
        total = np.zeros(axis.size)
        total[np.searchsorted(axis, own.mz)] += (1 - share) * own.relative
        total[np.searchsorted(axis, other.mz)] += share * other.relative
        kept = (axis >= query.spectrum.lowest_mz) & (total > 0.1)
        spectrum = CleanSpectrum(Peaks(axis[kept], total[kept]), None, query.spectrum.lowest_mz)
        return replace(query, spectrum=spectrum)

    return spoil


def print_degraded(
    bench: Benchmark, places: Sequence[int], models: dict[int, RankingModel], index: SearchIndex
) -> None:
    """Accuracy and calibration when queries or library get worse; the open-set library."""
    some = places[::4]
    ways = degradations() | {f"co-elution {share:.0%}": mix_with(bench, share) for share in (0.1, 0.3, 0.5)}
    print(
        f"\nDegraded queries, open set ({len(some)} queries): rank-1 of those present, mean probability, ECE compound / group"
    )
    for name, change in {"as measured": lambda query: query, **ways}.items():
        answers, _ = run_product(bench, index, some, models, bench.absent, change)
        c = columns(answers)
        right, group_right = c["right"].astype(bool), c["group_right"].astype(bool)
        print(
            f"{name:<28} {right[c['present'].astype(bool)].mean():.3f}  p {c['compound'].mean():.3f} right {right.mean():.3f}"
            f"  ECE {calibration_error(c['compound'], right):.3f} / {calibration_error(c['group'], group_right):.3f}"
        )
    rng = np.random.default_rng(SEED + 2)
    gone = {key for key in bench.by_key if rng.random() > 0.1}
    thin = bench.build_index(Settings(), gone)
    answers, _ = run_product(bench, thin, some, models, gone)
    c = columns(answers)
    right, group_right = c["right"].astype(bool), c["group_right"].astype(bool)
    print(
        f"{'library thinned to 10 %':<28} {right[c['present'].astype(bool)].mean():.3f}  p {c['compound'].mean():.3f} "
        f"right {right.mean():.3f}  ECE {calibration_error(c['compound'], right):.3f} / "
        f"{calibration_error(c['group'], group_right):.3f}"
    )


def print_ablation(
    bench: Benchmark, answers: list[Answer], kept: list[Prepared], models: dict[int, RankingModel]
) -> None:
    """Closed-set ranks without each kind of evidence; the other weights stay as they are."""
    settings = Settings()

    def measure(name: str, without: Sequence[str], mass: bool = True) -> None:
        ranks, right, chance = [], [], []
        for answer, ready in zip(answers, kept, strict=True):
            model = models[bench.fold[bench.keys[answer.place]]]
            if not mass:
                model = replace(model, mass_weight=0.0)
            evidence = [tuple(item for item in items if item.kind not in without) for items in ready.evidence]
            ranking = rank(ready.query, ready.drafts, evidence, ready.ion, settings, model)
            judged = judge(bench, answer.place, True, ranking)
            ranks.append(judged.rank)
            right.append(judged.right)
            chance.append(judged.compound)
        area = roc_area(np.array(chance), np.array(right))
        print(f"{ranks_line(name, np.array(ranks))}   ROC {area:.3f}")

    print("\nEvidence left out (closed set)                  n   rank-1  rank-3  rank-10")
    measure("nothing", ())
    for kind in KINDS:
        measure(f"without {kind}", (kind,))
    measure("without nominal mass estimate", (), mass=False)
    measure("without any evidence", KINDS, mass=False)


def print_errors(bench: Benchmark, answers: list[Answer], kept: list[Prepared]) -> None:
    """What the wrong answers of the closed set are."""
    counts: dict[str, int] = {}
    for answer, ready in zip(answers, kept, strict=True):
        if answer.right:
            continue
        entry = bench.entries[answer.place]
        copies = [bench.entries[other] for other in bench.by_key[bench.keys[answer.place]] if other != answer.place]
        copies = [other for other in copies if other.id not in {bench.entries[place].id for place in bench.queries}]
        names = {other.identity.name.casefold() for other in copies} | {entry.identity.name.casefold()}
        first = ready.drafts[0]
        best = max(composite_score(align(entry.spectrum, other.spectrum), Weighting()) for other in copies)
        wrong = composite_score(align(entry.spectrum, first.entry.spectrum), Weighting())
        if first.entry.identity.name.casefold() in names:
            kind = "same name, another structure in the source"
        elif best < 0.6:
            kind = "reference unlike the query (below 0.6): wrong record or other conditions"
        elif is_isomer(first.entry, entry):
            kind = "isomer " + (
                "matches better than the right one" if wrong > best else "matches less well: ours to mend"
            )
        else:
            kind = "other formula " + (
                "matches better than the right one" if wrong > best else "matches less well: ours to mend"
            )
        counts[kind] = counts.get(kind, 0) + 1
    print(f"\nWrong first candidates of the closed set: {sum(counts.values())} of {len(answers)}")
    for kind, n in sorted(counts.items(), key=lambda pair: -pair[1]):
        print(f"  {n:>4}  {kind}")


def main() -> None:
    """Print all tables."""
    asked = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    asked.add_argument("--quick", action="store_true", help="shipped parameters, one fold")
    asked.add_argument("--degrade", action="store_true", help="degraded queries and library too")
    options = asked.parse_args()
    began, settings = time.perf_counter(), Settings()
    bench = load_benchmark()
    places = bench.queries
    if options.quick:
        places = [place for place in places if bench.fold[bench.keys[place]] == 0]
        models = dict.fromkeys(range(N_FOLDS), default_model())
    else:
        rows, trials = collect(bench, settings)
        models = {f: fit_model(bench, rows, trials, [g for g in range(N_FOLDS) if g != f]) for f in range(N_FOLDS)}
    print(f"{len(bench.entries)} records, {len(bench.queries)} held out, {len(places)} queries measured")
    closed, lacking = bench.build_index(settings), bench.build_index(settings, bench.absent)

    answers, kept = run_product(bench, closed, places, models, set())
    parts = subsets(bench, places)
    print("\nEvery compound in the library (closed set)      n   rank-1  rank-3  rank-10")
    tables: dict[str, tuple[list[Answer], list[Answer]]] = {}
    for name, weighting in BASELINES.items():
        pair = [bench.build_index(replace(settings, weighting=weighting), gone) for gone in ((), bench.absent)]
        tables[name] = (
            run_baseline(bench, pair[0], places, set()),
            run_baseline(bench, pair[1], places, bench.absent),
        )
        print(ranks_line(name, columns(tables[name][0])["rank"]))
    tables["composite with peak ratios"] = (
        run_baseline(bench, closed, places, set(), composite=True),
        run_baseline(bench, lacking, places, bench.absent, composite=True),
    )
    print(ranks_line("composite with peak ratios", columns(tables["composite with peak ratios"][0])["rank"]))
    ranks = columns(answers)["rank"]
    for name, chosen in parts.items():
        print(ranks_line("product" if name == "all" else f"product, {name}", ranks[chosen]))
    published = columns(tables["cosine m/z^1.3 I^0.53"][0])["rank"]
    print(ranks_line("  cosine, other contributor only", published[parts["other contributor only"]]))
    print(spread_line("product", answers, bench))

    print(f"\nClosed set, confidence\n{OPEN_HEAD}")
    for name, (ours, _) in tables.items():
        print(open_line(name, ours, calibrated=False))
    print(open_line("product", answers, calibrated=True))

    absent = sum(bench.keys[place] in bench.absent for place in places)
    print(f"\nOpen set: {absent} of {len(places)} queries' compounds not in the library\n{OPEN_HEAD}")
    open_answers, _ = run_product(bench, lacking, places, models, bench.absent)
    for name, (_, ours) in tables.items():
        print(open_line(name, ours, calibrated=False))
    print(open_line("product", open_answers, calibrated=True))
    print_reliability(open_answers)

    print_ablation(bench, answers, kept, models)
    print_errors(bench, answers, kept)
    if options.degrade:
        print_degraded(bench, places, models, lacking)
    print(f"\n{time.perf_counter() - began:.0f} s")


if __name__ == "__main__":
    main()
