"""How often is the first candidate right, and do the probabilities say so? On the open records, compounds held out.

    python tests/benchmarks/accuracy.py                     ranks, confidence, open set, errors and ceiling
    python tests/benchmarks/accuracy.py --degrade           noise, cut low masses, tilt, co-elution, a thinned library
    python tests/benchmarks/accuracy.py --ablate            each kind of evidence left out
    python tests/benchmarks/accuracy.py --plot FILE.svg     the reliability plot of the open set
    python tests/benchmarks/accuracy.py --quick             the shipped parameters on one fold (which took part in their fit)

Five folds, nested: parameters from four folds of compounds, measured on the fifth. Protocol: see `ranking_data`. Every query
goes through the product's own path: index → shortlist → evidence, purity → rank. Baselines rank the same compounds by one score
from an exact search of the same library. What the fit needs is kept in a scratch folder (`fit_ranking`) for the next run.
"""

from __future__ import annotations

import argparse
import time
from collections import Counter
from collections.abc import Callable, Collection, Sequence
from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path

import numpy as np
from fit_ranking import fit_folds, is_isomer, judge_alone
from numpy.typing import NDArray
from ranking_data import ABSENT_SHARE, N_FOLDS, SEED, Benchmark, load_benchmark
from ranking_spoiled import Spoiled, ways_to_spoil

from identify.evidence.facts import build_query_facts
from identify.evidence.gather import gather_evidence
from identify.evidence.molecular_ion import estimate_molecular_ion
from identify.index import SearchIndex, search_index
from identify.ranking.alternatives import EVIDENCE_KINDS
from identify.ranking.features import NAMES
from identify.ranking.model import RankingModel, default_model
from identify.ranking.rank import Ranking, rank
from identify.ranking.shortlist import Draft, shortlist
from identify.records import CleanSpectrum, Entry, EvidenceItem, MolecularIonEstimate, Purity, Query
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
EVERY = 2
"""Of the degraded queries every second one is played."""
N_DRAWS = 20
MOST_CERTAIN = 0.3
"""Share of the answers, the most certain ones, whose errors are looked at one by one."""
LEAST_LIKENESS = 0.6
"""A reference less like the query than this is taken for a wrong record or one of other conditions."""
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
    first: int = -1
    """Id of the entry of the first candidate."""


@dataclass(eq=False)
class Prepared:
    """What the ranking gets, kept for ablations."""

    query: Query
    drafts: tuple[Draft, ...]
    evidence: list[tuple[EvidenceItem, ...]]
    ion: MolecularIonEstimate
    purity: Purity


def prepare(
    bench: Benchmark,
    index: SearchIndex,
    query: Query,
    settings: Settings,
    model: RankingModel,
    gone: Collection[str] = (),
) -> Prepared:
    """The product's path up to the ranking, without some compounds that are in the index."""
    matches = [match for match in bench.find(index, query, settings) if bench.key_of[match.entry.id] not in gone]
    drafts = shortlist(query.spectrum, matches, settings, model)
    ion = estimate_molecular_ion(query.spectrum, [(draft.entry, draft.cosine) for draft in drafts])
    facts = build_query_facts(query)
    evidence = [gather_evidence(query, draft.entry, draft.aligned, settings, facts) for draft in drafts]
    purity = judge_alone(bench, index, gone, query.spectrum, drafts, matches)
    return Prepared(query, drafts, evidence, ion, purity)


def judge(bench: Benchmark, place: int, present: bool, ranking: Ranking, partner: int | None = None) -> Answer:
    """Compare a ranking with the truth; of two compounds that both make much of the query either is right."""
    keys = [bench.key_of[candidate.entry.id] for candidate in ranking.candidates]
    truths = [place] if partner is None else [place, partner]
    ranks = [keys.index(bench.keys[truth]) + 1 for truth in truths if bench.keys[truth] in keys]
    best = ranking.candidates[0] if ranking.candidates else None
    return Answer(
        place,
        present,
        min(ranks, default=999),
        1 in ranks,
        best is not None and (1 in ranks or any(is_isomer(best.entry, bench.entries[truth]) for truth in truths)),
        best.probability if best else 0.0,
        ranking.claim.group_probability,
        ranking.in_library_probability,
        ranking.claim.class_probability,
        best.entry.id if best else -1,
    )


def run_product(
    bench: Benchmark, index: SearchIndex, places: Sequence[int], models: dict[int, RankingModel], gone: set[str],
    change: Callable[[Query], Spoiled] = Spoiled, *, alone: bool = False,
) -> tuple[list[Answer], list[Prepared]]:  # fmt: skip
    """Answers of the product for some queries; `alone`: each against the library without its own compound."""
    settings, answers, kept = Settings(), [], []
    for place in places:
        key = bench.keys[place]
        model, asked = models[bench.fold[key]], change(bench.query(place))
        ready = prepare(bench, index, asked.query, settings, model, {key} if alone else ())
        ranking = rank(ready.query, ready.drafts, ready.evidence, ready.ion, settings, model, purity=ready.purity)
        answers.append(judge(bench, place, key not in gone and not alone, ranking, asked.partner))
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


def error_by_chance(confidence: Floats, n: int = 200) -> float:
    """The calibration error that probabilities without any fault would show on as few answers as these, mean of draws."""
    rng = np.random.default_rng(SEED)
    return float(np.mean([calibration_error(confidence, rng.random(confidence.size) < confidence) for _ in range(n)]))


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


def open_numbers(answers: Sequence[Answer], *, calibrated: bool) -> list[float]:
    """Measures of the open set, in the order of `OPEN_HEAD`; not a number where one does not apply."""
    c = columns(answers)
    right, group_right = c["right"].astype(bool), c["group_right"].astype(bool)
    return [
        roc_area(c["compound"], right),
        accepted_at(c["compound"], right, 0.95),
        accepted_at(c["group"], group_right, 0.95),
        accepted_at(c["group"], group_right, 0.99),
        flagged_absent(c["inside"], c["present"].astype(bool)) if not c["present"].all() else float("nan"),
        calibration_error(c["compound"], right) if calibrated else float("nan"),
        calibration_error(c["group"], group_right) if calibrated else float("nan"),
    ]


def open_line(name: str, answers: Sequence[Answer], *, calibrated: bool) -> str:
    """Measures of the open set."""
    numbers = open_numbers(answers, calibrated=calibrated)
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


def print_degraded(
    bench: Benchmark, places: Sequence[int], models: dict[int, RankingModel], index: SearchIndex
) -> None:
    """Accuracy and calibration when queries or library get worse; the open-set library."""
    some = places[::EVERY]
    print(f"\nDegraded queries, open set ({len(some)} queries)\n{DEGRADED_HEAD}")
    for name, change in {"as measured": lambda query, rng: Spoiled(query), **ways_to_spoil(bench)}.items():
        rng = np.random.default_rng(SEED + 1)
        answers, _ = run_product(bench, index, some, models, bench.absent, partial(change, rng=rng))
        print(degraded_line(name, answers), flush=True)
    rng = np.random.default_rng(SEED + 1)
    gone = {key for key in bench.by_key if rng.random() > 0.1}
    answers, _ = run_product(bench, bench.build_index(Settings(), gone), some, models, gone)
    print(degraded_line("library thinned to 10 %", answers))


DEGRADED_HEAD = (
    f"{'':<28}{'rank-1 of those present':>24}{'mean p':>8}{'right':>8}{'ECE cmpd':>10}"
    f"{'mean p':>9}{'right':>8}{'ECE grp':>9}   both by chance"
)


def degraded_line(name: str, answers: Sequence[Answer]) -> str:
    """Rank-1, mean probability, share right and calibration error at compound and group level."""
    c = columns(answers)
    right, group_right, present = (c[key].astype(bool) for key in ("right", "group_right", "present"))
    return (
        f"{name:<28}{right[present].mean():>24.3f}{c['compound'].mean():>8.3f}{right.mean():>8.3f}"
        f"{calibration_error(c['compound'], right):>10.3f}{c['group'].mean():>9.3f}{group_right.mean():>8.3f}"
        f"{calibration_error(c['group'], group_right):>9.3f}"
        f"{error_by_chance(c['compound']):>9.3f}{error_by_chance(c['group']):>7.3f}"
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
            ranking = rank(ready.query, ready.drafts, evidence, ready.ion, settings, model, purity=ready.purity)
            judged = judge(bench, answer.place, True, ranking)
            ranks.append(judged.rank)
            right.append(judged.right)
            chance.append(judged.compound)
        area = roc_area(np.array(chance), np.array(right))
        print(f"{ranks_line(name, np.array(ranks))}   ROC {area:.3f}")

    print("\nEvidence left out (closed set)                  n   rank-1  rank-3  rank-10")
    measure("nothing", ())
    for kind in EVIDENCE_KINDS:
        measure(f"without {kind}", (kind,))
    measure("without nominal mass estimate", (), mass=False)
    measure("without any evidence", EVIDENCE_KINDS, mass=False)


BETTER = "matches better than every reference of the right compound"
WORSE = "matches less well: ours to mend"


def names_of(entry: Entry) -> set[str]:
    """Names of an entry, without case and blanks."""
    return {"".join(name.casefold().split()) for name in (entry.identity.name, *entry.identity.other_names) if name}


def likeness(a: Entry, b: Entry) -> float:
    """Composite similarity of two entries."""
    return composite_score(align(a.spectrum, b.spectrum), Weighting())


def kind_of_error(bench: Benchmark, answer: Answer, held: set[int]) -> str:
    """Why the first candidate is wrong, as far as the records tell."""
    truth, first = bench.entries[answer.place], bench.by_id[answer.first]
    copies = [bench.entries[other] for other in bench.by_key[bench.keys[answer.place]] if other not in held]
    names = names_of(truth).union(*(names_of(copy) for copy in copies))
    best = max(likeness(truth, copy) for copy in copies)
    if names & names_of(first) and is_isomer(first, truth):
        return "same name and formula, another structure or none in the source"
    if best < LEAST_LIKENESS:
        return f"every reference unlike the query (below {LEAST_LIKENESS}): wrong record or other conditions"
    kind = "isomer" if is_isomer(first, truth) else "other formula"
    better = likeness(truth, first) > best
    return f"{kind} {BETTER if better else WORSE}"


def print_errors(bench: Benchmark, answers: list[Answer]) -> None:
    """What the wrong answers of the closed set are, and what follows for the ceiling."""
    held = set(bench.queries)
    wrong = [(kind_of_error(bench, answer, held), answer) for answer in answers if not answer.right]
    print(f"\nWrong first candidates of the closed set: {len(wrong)} of {len(answers)}")
    counts = print_kinds(bench, wrong)
    ours = sum(n for kind, n in counts.items() if "ours to mend" in kind)
    print(f"  rank-1 if none of ours were wrong {1 - (len(wrong) - ours) / len(answers):.3f}")
    conflicts = counts["same name and formula, another structure or none in the source"]
    print(f"  rank-1 with the same name and formula counted as right {1 - (len(wrong) - conflicts) / len(answers):.3f}")


def print_ceiling(bench: Benchmark, answers: list[Answer], kept: list[Prepared]) -> None:
    """How far any choice among the measures of likeness could get, and how far the isomers are within the replicate spread."""
    names = [name for name in NAMES if name.startswith(("cosine", "reverse", "forward", "deviation"))]
    by_any = np.zeros(len(answers), bool)
    for number, (answer, ready) in enumerate(zip(answers, kept, strict=True)):
        right = [draft.key == bench.keys[answer.place] for draft in ready.drafts]
        if any(right):
            rows = np.array([draft.features for draft in ready.drafts])
            for name in names:
                values = rows[:, NAMES.index(name)] * (-1 if name.startswith("deviation") else 1)
                by_any[number] |= right[int(np.argmax(values))]
    print(
        f"\nCeiling: the right compound is first by at least one of {len(names)} measures of likeness {by_any.mean():.3f}"
    )
    found = np.mean(
        [any(draft.key == bench.keys[a.place] for draft in r.drafts) for a, r in zip(answers, kept, strict=True)]
    )
    print(f"  among the candidates at all {found:.3f}")


def write_reliability(answers: Sequence[Answer], path: Path) -> None:
    """Reliability plot as SVG: share right over mean probability in ten bins, compound and group, 95 % intervals (Wilson)."""
    c = columns(answers)
    size, margin = 360, 44

    def x(value: float) -> float:
        return margin + value * size

    def y(value: float) -> float:
        return 16 + (1 - value) * size

    lines = [
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{size + margin + 120}" height="{size + 60}" font-family="sans-serif" '
        'font-size="12">',
        f'<line x1="{x(0)}" y1="{y(0)}" x2="{x(1)}" y2="{y(1)}" stroke="#999" stroke-dasharray="4 4"/>',
        f'<rect x="{x(0)}" y="{y(1)}" width="{size}" height="{size}" fill="none" stroke="#333"/>',
    ]
    for tick in (0.0, 0.2, 0.4, 0.6, 0.8, 1.0):
        lines.append(f'<text x="{x(tick)}" y="{y(0) + 16}" text-anchor="middle">{tick:g}</text>')
        lines.append(f'<text x="{x(0) - 6}" y="{y(tick) + 4}" text-anchor="end">{tick:g}</text>')
    lines.append(f'<text x="{x(0.5)}" y="{y(0) + 36}" text-anchor="middle">probability stated</text>')
    lines.append(f'<text x="{x(0)}" y="{y(1) - 4}">share right</text>')
    for place, (level, truth, colour) in enumerate(
        (("compound", "right", "#0b5394"), ("group", "group_right", "#b45f06"))
    ):
        chance, right = c[level].astype(float), c[truth].astype(bool)
        bins = np.minimum((chance * 10).astype(int), 9)
        for number in np.unique(bins):
            inside = bins == number
            low, high = wilson(int(right[inside].sum()), int(inside.sum()))
            at, share = float(chance[inside].mean()), float(right[inside].mean())
            lines.append(f'<line x1="{x(at)}" y1="{y(low)}" x2="{x(at)}" y2="{y(high)}" stroke="{colour}"/>')
            lines.append(f'<circle cx="{x(at)}" cy="{y(share)}" r="4" fill="{colour}"/>')
        error = calibration_error(chance, right)
        top = y(0.16 - 0.06 * place)
        lines.append(
            f'<text x="{x(0.52)}" y="{top}" fill="{colour}">{level}: error {error:.3f}, n {chance.size}</text>'
        )
    path.write_text("\n".join([*lines, "</svg>", ""]), encoding="utf-8")


def wilson(right: int, n: int, z: float = 1.96) -> tuple[float, float]:
    """95 % interval of a share (Wilson 1927; formula from memory)."""
    share, spread = right / n, z * z / n
    centre = (share + spread / 2) / (1 + spread)
    half = z * np.sqrt(share * (1 - share) / n + spread / (4 * n)) / (1 + spread)
    return max(0.0, centre - half), min(1.0, centre + half)


def run_baselines(
    bench: Benchmark, indexes: tuple[SearchIndex, SearchIndex], places: Sequence[int]
) -> dict[str, tuple[list[Answer], list[Answer]]]:
    """Answers of the single scores in the closed and the open set."""
    tables = {}
    for name, weighting in BASELINES.items():
        closed, lacking = (bench.build_index(Settings(weighting=weighting), gone) for gone in ((), bench.absent))
        tables[name] = run_baseline(bench, closed, places, set()), run_baseline(bench, lacking, places, bench.absent)
    tables["composite with peak ratios"] = (
        run_baseline(bench, indexes[0], places, set(), composite=True),
        run_baseline(bench, indexes[1], places, bench.absent, composite=True),
    )
    return tables


def print_closed(
    bench: Benchmark, places: Sequence[int], answers: list[Answer], tables: dict[str, tuple[list[Answer], list[Answer]]]
) -> None:
    """Ranks and confidence with every compound in the library."""
    parts, ranks = subsets(bench, places), columns(answers)["rank"]
    print("\nEvery compound in the library (closed set)      n   rank-1  rank-3  rank-10")
    for name, (closed, _) in tables.items():
        print(ranks_line(name, columns(closed)["rank"]))
    for name, chosen in parts.items():
        print(ranks_line("product" if name == "all" else f"product, {name}", ranks[chosen]))
    for name, (closed, _) in tables.items():
        print(ranks_line(f"  {name}, other contributor", columns(closed)["rank"][parts["other contributor only"]]))
    print(spread_line("product", answers, bench))
    print(f"\nClosed set, confidence\n{OPEN_HEAD}")
    for name, (closed, _) in tables.items():
        print(open_line(name, closed, calibrated=False))
    print(open_line("product", answers, calibrated=True))


def print_open(bench: Benchmark, answers: list[Answer], tables: dict[str, tuple[list[Answer], list[Answer]]]) -> None:
    """Confidence with some compounds absent from the library."""
    absent = sum(not answer.present for answer in answers)
    print(f"\nOpen set: {absent} of {len(answers)} queries' compounds not in the library\n{OPEN_HEAD}")
    for name, (_, lacking) in tables.items():
        print(open_line(name, lacking, calibrated=False))
    print(open_line("product", answers, calibrated=True))
    c = columns(answers)
    print(f"  calibration error by chance: {error_by_chance(c['compound']):.3f} {error_by_chance(c['group']):.3f}")
    print_reliability(answers)
    usable = ~c["present"].astype(bool) | np.array([has_usable_reference(bench, answer.place) for answer in answers])
    flagged = flagged_absent(c["inside"][usable], c["present"][usable].astype(bool))
    print(f"  absent flagged, present ones with a reference of at least {LEAST_LIKENESS} only: {flagged:.3f}")
    rated = absent_by_isomers(answers)
    print(f"  absent ones answered by an isomer that matches: {rated:.3f} of the absent")


def print_open_errors(bench: Benchmark, answers: list[Answer]) -> None:
    """What the most certain wrong answers of the open set are, and what could be accepted if some of them were right."""
    held = set(bench.queries)
    order = sorted(answers, key=lambda answer: -answer.compound)[: round(MOST_CERTAIN * len(answers))]
    wrong = [(kind_of_error(bench, answer, held), answer) for answer in order if not answer.right]
    print(f"\nWrong among the {len(order)} most certain answers of the open set: {len(wrong)}")
    print_kinds(bench, wrong)
    c = columns(answers)
    alike = {answer.place for kind, answer in wrong if not kind.endswith(WORSE)}
    kept = ~np.isin(c["place"], list(alike))
    share = accepted_at(c["compound"][kept].astype(float), c["right"][kept].astype(bool), 0.95)
    print(f"  compounds accepted at 95 % precision if only those that match less well were wrong {share:.3f}")


def print_kinds(bench: Benchmark, wrong: Sequence[tuple[str, Answer]]) -> Counter[str]:
    """Numbers and examples of each kind of error."""
    counts = Counter(kind for kind, _ in wrong)
    for kind, n in counts.most_common():
        print(f"  {n:>4}  {kind}")
        named = [
            (bench.entries[a.place].identity.name, bench.by_id[a.first].identity.name) for k, a in wrong if k == kind
        ]
        print("        " + "; ".join(f"{asked} → {told}" for asked, told in named[:4]))
    return counts


def print_draws(present: Sequence[Answer], absent: Sequence[Answer]) -> None:
    """Measures of the open set over draws of the absent compounds, each removed alone: mean and spread."""
    rng, rows = np.random.default_rng(SEED), []
    for _ in range(N_DRAWS):
        gone = set(rng.permutation(len(present))[: round(ABSENT_SHARE * len(present))].tolist())
        rows.append(open_numbers([absent[n] if n in gone else one for n, one in enumerate(present)], calibrated=True))
    print(f"\nOpen set, each absent compound removed alone, {N_DRAWS} draws\n{OPEN_HEAD}")
    for name, values in (("mean", np.mean(rows, axis=0)), ("spread", np.std(rows, axis=0))):
        print(f"{name:<34}" + "".join(f"{value:>9.3f}" for value in values))


def has_usable_reference(bench: Benchmark, place: int) -> bool:
    """Whether another record of the compound in the library resembles this one."""
    held = set(bench.queries)
    return any(
        likeness(bench.entries[place], bench.entries[other]) >= LEAST_LIKENESS
        for other in bench.by_key[bench.keys[place]]
        if other not in held
    )


def absent_by_isomers(answers: Sequence[Answer]) -> float:
    """Share of the absent compounds whose first candidate is an isomer."""
    absent = [answer for answer in answers if not answer.present]
    return float(np.mean([answer.group_right for answer in absent])) if absent else float("nan")


def main() -> None:
    """Print the tables asked for."""
    asked = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    asked.add_argument("--quick", action="store_true", help="shipped parameters, one fold")
    asked.add_argument("--degrade", action="store_true", help="degraded queries and a thinned library, nothing else")
    asked.add_argument("--ablate", action="store_true", help="evidence left out, nothing else")
    asked.add_argument("--plot", type=Path, metavar="FILE", help="reliability plot of the open set, as SVG")
    asked.add_argument("--no-baselines", action="store_true", help="the product alone")
    options = asked.parse_args()
    began, settings = time.perf_counter(), Settings()
    bench = load_benchmark()
    places = bench.queries
    if options.quick:
        places = [place for place in places if bench.fold[bench.keys[place]] == 0]
        models = dict.fromkeys(range(N_FOLDS), default_model())
    else:
        models = fit_folds(bench, settings)
    print(f"{len(bench.entries)} records, {len(bench.queries)} held out, {len(places)} queries measured", flush=True)
    if options.degrade:
        print_degraded(bench, places, models, bench.build_index(settings, bench.absent))
    elif options.ablate:
        print_ablation(bench, *run_product(bench, bench.build_index(settings), places, models, set()), models)
    else:
        closed, lacking = bench.build_index(settings), bench.build_index(settings, bench.absent)
        tables = {} if options.no_baselines else run_baselines(bench, (closed, lacking), places)
        answers, kept = run_product(bench, closed, places, models, set())
        print_closed(bench, places, answers, tables)
        print_errors(bench, answers)
        print_ceiling(bench, answers, kept)
        alone, _ = run_product(bench, closed, places, models, set(), alone=True)
        print_draws(answers, alone)
        answers, _ = run_product(bench, lacking, places, models, bench.absent)
        print_open(bench, answers, tables)
        print_open_errors(bench, answers)
        if options.plot:
            write_reliability(answers, options.plot)
    print(f"\n{time.perf_counter() - began:.0f} s")


if __name__ == "__main__":
    main()
