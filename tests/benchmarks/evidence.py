"""Prints how good each piece of evidence is on the open records.

    python tests/benchmarks/evidence.py [molecular-ion] [carbons] [halogens] [checks] [purity] [classes] [speed]

Without arguments all parts run (some minutes on one core). Every number comes from records whose compound the fitted part had not
seen: cross-fitting for the molecular mass, split halves for carbons and classes. The log-odds table (some hundred cells, some
ten thousand judged candidates) is counted on all.
"""

from __future__ import annotations

import sys
import time
from collections import Counter, defaultdict
from itertools import pairwise

import numpy as np
from evidence_data import MAX_MZ, SEED, OpenRecords, as_query, load_open_records
from fit_evidence import (
    carbon_errors,
    carbon_model,
    class_design,
    class_rows,
    fit_logistic,
    judge_candidates,
    likelihood_ratios,
    rule_ratios,
)
from fit_molecular_ion import cross_fit, mass_data, print_mass_quality
from numpy.typing import NDArray

from identify.evidence.facts import build_query_facts, formula_facts, spectrum_facts
from identify.evidence.gather import gather_evidence
from identify.evidence.isotope_cluster import fit_cluster
from identify.evidence.isotopes import error_row
from identify.evidence.molecular_ion import estimate_molecular_ion
from identify.evidence.purity import judge_purity
from identify.records import CleanSpectrum, Peaks, Verdict
from identify.settings import Settings, Weighting
from identify.similarity.scores import peak_weights
from identify.spectra.align import align


def show_molecular_ion(records: OpenRecords) -> None:
    """Nominal mass right on top with the compound removed, by estimator and by agreement."""
    data = mass_data(records)
    naive = []
    for place in data.places.tolist():
        peaks = records.entries[place].spectrum.nominal
        strong = peaks.mz[peaks.relative >= 1.0]
        formula = formula_facts(records.entries[place].formula_as_measured)
        naive.append(formula is not None and int(strong[-1]) == formula.nominal_mass)
    print(f"queries {len(naive):,}; highest ion of 1 % or more is M: {np.mean(naive):.3f}")
    print_mass_quality(data, cross_fit(data))


def show_carbons(records: OpenRecords) -> None:
    """Coverage and width of the 90 % carbon interval, fitted on one half and judged on the other."""
    rows = carbon_errors(records)
    rng = np.random.default_rng(SEED)
    half = rng.permutation(len(rows)) % 2 == 0
    inside: dict[tuple[str, str], list[tuple[bool, float]]] = defaultdict(list)
    for part in (half, ~half):
        model = carbon_model([row for row, chosen in zip(rows, part, strict=True) if chosen])
        for (name, molecular, error), chosen in zip(rows, part, strict=True):
            if chosen or molecular < model[name][0].molecular:
                continue
            row = error_row(molecular, model[name])
            size = next(
                word for edge, word in ((20, "below 20 %"), (50, "20–50 %"), (101, "50–100 %")) if molecular < edge
            )
            width = float(np.exp(-row.low) - np.exp(-row.high))
            for key in ((name, size), (name, "all"), ("all", "all")):
                inside[key].append((row.low <= error <= row.high, width))
    print("90 % carbon interval, fitted on one half, judged on the other: coverage, width for ten carbons counted")
    for key, found in sorted(inside.items()):
        print(
            f"  {key[0]:18s} {key[1]:12s} n {len(found):5d}  {np.mean([hit for hit, _ in found]):.3f}"
            f"  {10 * np.mean([width for _, width in found]):.1f}"
        )


def show_halogens(records: OpenRecords) -> None:
    """Halogen counts of molecular clusters: right, wrong, open; and what is said about S and Si."""
    counts: Counter[str] = Counter()
    said: dict[str, Counter[tuple[bool, str]]] = defaultdict(Counter)
    for entry in records.entries:
        formula = formula_facts(entry.formula_as_measured)
        if formula is None or formula.heavy - {"Cl", "Br", "S", "Si"}:
            continue
        facts = spectrum_facts(entry.spectrum, entry.acquisition)
        if facts.at(formula.nominal_mass) * max(formula.pattern) < 5.0:
            continue
        truth = (formula.formula.count("Cl"), formula.formula.count("Br"))
        if not formula.heavy and entry.id % 4:
            continue
        fit = fit_cluster(facts, formula.nominal_mass)
        for symbol in ("Cl", "Br", "S", "Si"):
            word = "supported" if symbol in fit.supported else "excluded" if symbol in fit.excluded else "open"
            said[symbol][formula.formula.count(symbol) > 0, word] += 1
        if any(truth):
            decided = not fit.reason and {"Cl", "Br"} & set(fit.supported)
            counts["open" if not decided else "right" if (fit.count("Cl"), fit.count("Br")) == truth else "wrong"] += 1
    total = sum(counts.values())
    print(
        "halogen counts from the molecular cluster (M at least 5 %): "
        + ", ".join(f"{k} {v} ({v / total:.2f})" for k, v in counts.items())
    )
    for symbol, table in said.items():
        print(
            f"  {symbol:3s}"
            + "".join(f"  {'has' if has else 'lacks'} it: {word} {n}" for (has, word), n in sorted(table.items()))
        )


def show_checks(records: OpenRecords) -> None:
    """For each check: how often it speaks, how often it is right to, and its likelihood ratios."""
    judged = list(judge_candidates(records))
    groups = {
        "right": [item for item in judged if item.right],
        "wrong": [item for item in judged if not item.right and not item.same_formula],
        "isomer": [item for item in judged if not item.right and item.same_formula],
    }
    numbers = {name: f"{len(members):,}" for name, members in groups.items()}
    print(
        f"{numbers['right']} right candidates, {numbers['wrong']} wrong of another formula, {numbers['isomer']} isomers"
    )
    print(f"{'check':28s} speaks   agrees: right wrong isomer  ratio   conflicts: right wrong isomer  ratio")
    for kind in judged[0].cells:
        share: dict[tuple[str, str], float] = {}
        for name, members in groups.items():
            weight = sum(item.weight for item in members)
            for verdict in ("agrees", "conflicts"):
                share[name, verdict] = sum(item.weight for item in members if item.cells[kind][1] == verdict) / weight
        speaks = share["right", "agrees"] + share["right", "conflicts"]
        print(f"{kind:28s} {speaks:.2f}", end="")
        for verdict in ("agrees", "conflicts"):
            right, wrong = share["right", verdict], share["wrong", verdict]
            print(
                f"      {right:.3f} {wrong:.3f} {share['isomer', verdict]:.3f}  {(right + 1e-4) / (wrong + 1e-4):6.2f}",
                end="",
            )
        print()
    print("cells whose measured sign contradicts their verdict (weighed as 0):")
    verdicts = {(kind, cell): verdict for item in judged for kind, (cell, verdict) in item.cells.items()}
    for kind, cells in likelihood_ratios(judged).items():
        for cell, (value, right, wrong) in cells.items():
            verdict = verdicts.get((kind, cell), "")
            if (verdict == "agrees" and value < 0) or (verdict == "conflicts" and value > 0):
                print(f"  {kind}: {cell} ({verdict}) {value:+.2f}, {right:.0f} right, {wrong:.0f} wrong")


def _spectrum_vector(records: OpenRecords, place: int) -> NDArray[np.float64]:
    peaks = records.entries[place].spectrum.nominal
    dense = np.zeros(MAX_MZ + 1)
    kept = peaks.mz <= MAX_MZ
    dense[peaks.mz[kept].astype(int)] = peaks.intensity[kept]
    return dense / dense.sum()


def show_purity(records: OpenRecords, count: int = 600) -> None:
    """False alarms on pure replicates, and detection of two-component mixtures of replicates by share of the smaller."""
    rng = np.random.default_rng(SEED)
    groups = [places for places in records.replicates.values() if len(places) >= 2]
    order = rng.permutation(len(groups))
    present = (records.matrix > 0).astype(np.float32)
    found: dict[float, list[tuple[bool, bool]]] = defaultdict(list)
    for number in range(min(count, len(groups))):
        first, second = (int(rng.choice(groups[order[(number * step + 1) % len(groups)]])) for step in (1, 5))
        share = float(rng.choice([0.0, 0.1, 0.2, 0.35, 0.5]))
        mixed = (1 - share) * _spectrum_vector(records, first) + share * _spectrum_vector(records, second)
        lowest = max(records.entries[place].spectrum.lowest_mz for place in (first, second))
        mixed[:lowest] = 0
        mixed[mixed < 0.002 * mixed.max()] = 0
        mz = np.flatnonzero(mixed)
        if mz.size < 5 or records.compounds[first] == records.compounds[second]:
            continue
        spectrum = CleanSpectrum(Peaks(mz.astype(float), mixed[mz]), None, lowest)
        hits = _hits(records, present, mz, mixed, {first, second})
        purity = judge_purity(spectrum, [records.entries[place] for place in hits])
        named = {
            int(records.compounds[place])
            for place in hits
            for part in purity.parts
            if part.accession == records.entries[place].accession
        }
        both = {int(records.compounds[first]), int(records.compounds[second])} <= named
        found[share].append((purity.verdict is Verdict.CONFLICTS, both))
    print("purity: share of the smaller compound, called a mixture, both compounds named")
    for share, rows in sorted(found.items()):
        print(
            f"  {share:.2f}  n {len(rows):4d}  {np.mean([row[0] for row in rows]):.2f}  {np.mean([row[1] for row in rows]):.2f}"
        )


def _hits(
    records: OpenRecords,
    present: NDArray[np.float32],
    mz: NDArray[np.int64],
    mixed: NDArray[np.float64],
    skip: set[int],
) -> list[int]:
    query = np.zeros(MAX_MZ + 1, np.float32)
    query[mz] = peak_weights(mz.astype(float), mixed[mz], Weighting())
    query /= np.linalg.norm(query)
    cosine = records.matrix @ query
    reverse = cosine / np.sqrt(np.maximum(present @ query**2, 1e-9))
    reverse[present.sum(axis=1) < 6] = 0.0
    for scores in (cosine, reverse):
        scores[list(skip)] = -1.0
    taken: dict[int, int] = {}
    for scores, most in ((cosine, 18), (reverse, 30)):
        for place in np.argsort(-scores)[:300].tolist():
            if len(taken) == most:
                break
            taken.setdefault(int(records.compounds[place]), place)
    return list(taken.values())


def show_classes(records: OpenRecords) -> None:
    """Calibration and precision of class statements, fitted on one half of the queries and judged on the other."""
    values = {text: max(ratio, 0.0) for text, (ratio, _, _) in rule_ratios(records, 6000).items()}
    rows = class_rows(records, 1500, seed=SEED + 1)
    rng = np.random.default_rng(SEED)
    half = rng.permutation(len(rows)) % 2 == 0
    design, truth = class_design(rows, values), np.array([row[0] for row in rows], float)
    chance = 1.0 / (1.0 + np.exp(-design[~half] @ fit_logistic(design[half], truth[half])))
    judged = truth[~half]
    print("classes (compound removed): probability said, right")
    for low, high in pairwise((0.0, 0.1, 0.3, 0.5, 0.7, 0.9, 1.01)):
        chosen = (chance >= low) & (chance < high)
        if chosen.any():
            said, right = chance[chosen].mean(), judged[chosen].mean()
            print(f"  {low:.1f}–{min(high, 1):.1f}  n {chosen.sum():5d}  said {said:.2f}  right {right:.2f}")
    found = (chance >= 0.5) & (judged > 0)
    print(f"  of all classes in question that are right, {found.sum() / judged.sum():.2f} are given 0.5 or more")


def show_speed(records: OpenRecords, queries: int = 60) -> None:
    """Processor time per candidate and per query."""
    settings = Settings()
    rng = np.random.default_rng(SEED)
    evidence = estimate = candidates = 0.0
    for place in rng.permutation(len(records.entries))[:queries].tolist():
        query = as_query(records.entries[place])
        near = records.nearest(place, 40)
        pairs = [
            (records.entries[other], align(query.spectrum, records.entries[other].spectrum)) for other, _ in near[:25]
        ]
        start = time.process_time()
        facts = build_query_facts(query)
        for entry, aligned in pairs:
            gather_evidence(query, entry, aligned, settings, facts)
        evidence += time.process_time() - start
        candidates += len(pairs)
        start = time.process_time()
        estimate_molecular_ion(query.spectrum, [(records.entries[other], cosine) for other, cosine in near])
        estimate += time.process_time() - start
    print(f"all checks {1e3 * evidence / candidates:.3f} ms per candidate")
    print(f"molecular mass {1e3 * estimate / queries:.2f} ms per query")


PARTS = {
    "molecular-ion": show_molecular_ion,
    "carbons": show_carbons,
    "halogens": show_halogens,
    "checks": show_checks,
    "purity": show_purity,
    "classes": show_classes,
    "speed": show_speed,
}

if __name__ == "__main__":
    chosen = sys.argv[1:] or list(PARTS)
    open_records = load_open_records()
    for part in chosen:
        PARTS[part](open_records)
