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
from evidence_data import SEED, OpenRecords, as_query, load_open_records
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
from fit_molecular_ion import cross_fit, is_consistent, mass_data, print_mass_quality
from fit_purity import simulate

from identify.evidence.facts import build_query_facts, formula_facts, spectrum_facts
from identify.evidence.gather import gather_evidence
from identify.evidence.isotope_cluster import fit_cluster
from identify.evidence.isotopes import error_row
from identify.evidence.molecular_ion import estimate_molecular_ion
from identify.evidence.purity import judge_purity
from identify.records import Verdict
from identify.settings import Settings
from identify.spectra.align import align


def show_molecular_ion(records: OpenRecords) -> None:
    """Nominal mass right on top with the compound removed, by estimator and by agreement."""
    data = mass_data(records)
    above = data.matrix[:, data.names.index("above the highest ion of 1 %")]
    naive = np.add.reduceat(data.right & (above == 0), data.start[:-1])[data.is_first] > 0
    print(f"queries {naive.size:,}; highest ion of 1 % or more, without 13C, is M: {naive.mean():.3f}")
    crossed = cross_fit(data)
    print_mass_quality(data, crossed, data.is_first)
    print(
        "the same without records whose own spectrum contradicts the formula they state (ions of 2 % and more above M + 6)"
    )
    consistent = np.array([is_consistent(records, place) for place in data.places.tolist()])
    print_mass_quality(data, crossed, data.is_first & consistent)


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


def show_purity(records: OpenRecords, count: int = 700) -> None:
    """False alarms on pure spectra and detection of mixtures by share of the smaller compound; compounds not fitted on."""
    found: dict[tuple[str, float], list[tuple[bool, bool]]] = defaultdict(list)
    started = time.process_time()
    spent = 0.0
    for case in simulate(records, count, half=1):
        before = time.process_time()
        purity = judge_purity(case.spectrum, case.entries)
        spent += time.process_time() - before
        compound_of = {
            entry.accession: int(records.compounds[place])
            for entry, place in zip(case.entries, case.places, strict=True)
        }
        named = {compound_of[part.accession] for part in purity.parts}
        found[case.kind, case.share].append((purity.verdict is Verdict.CONFLICTS, case.compounds <= named))
    n = sum(map(len, found.values()))
    print(f"purity: {1e3 * spent / n:.2f} ms per query ({time.process_time() - started:.0f} s in all)")
    print("kind and share of the smaller compound, called a mixture, all its compounds named")
    for (kind, share), rows in sorted(found.items()):
        alarm, right = np.mean([row[0] for row in rows]), np.mean([row[1] for row in rows])
        print(f"  {kind:7s} {share:.2f}  n {len(rows):4d}  {alarm:.3f}  {right:.2f}")


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
