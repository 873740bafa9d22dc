"""Fits what the evidence room measures on the open records, and writes it into the package.

    python tests/benchmarks/fit_evidence.py carbons          identify/evidence/carbon_errors.py
    python tests/benchmarks/fit_evidence.py weights          identify/evidence/weights.py
    python tests/benchmarks/fit_evidence.py classes          identify/evidence/class_model.py

Only coefficients and quantiles are written, no spectrum and no accession.
"""

from __future__ import annotations

import math
import sys
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from evidence_data import PROVENANCE, ROOM, SEED, OpenRecords, as_query, load_open_records
from numpy.typing import NDArray

from identify.chem.structures import compound_classes
from identify.errors import StructureError
from identify.evidence.carbon_errors import CarbonErrors
from identify.evidence.class_ions import RULES
from identify.evidence.classes import MAX_NEIGHBOURS, met_rules, vote_shares
from identify.evidence.facts import build_query_facts, formula_facts, spectrum_facts
from identify.evidence.fragments import EXTRA, MISSING
from identify.evidence.gather import examine
from identify.evidence.isotopes import CARBON_13, take_apart
from identify.settings import Settings
from identify.spectra.align import align

KNOTS = {"sector": (14.0, 30.0, 60.0, 98.0), "narrow": (10.0, 40.0)}
"""Intensities of M (% of base) at which quantiles are taken; the first is the floor below which M+1 does not vote."""


def carbon_errors(records: OpenRecords) -> list[tuple[str, float, float]]:
    """Instrument class, intensity of M and ln(counted / true) of every record whose M+1 can be read."""
    rows = []
    for entry in records.entries:
        formula = formula_facts(entry.formula_as_measured)
        if formula is None or formula.carbons == 0 or formula.heavy - {"Cl", "Br", "S", "Si"}:
            continue
        facts = spectrum_facts(entry.spectrum, entry.acquisition)
        parts, mass = take_apart(facts, formula), formula.nominal_mass
        if parts.molecular < 5.0 or not facts.has_isotope_peaks or mass in facts.saturated or facts.at(mass + 1) <= 0:
            continue
        others = formula.ratio(1) - CARBON_13 * formula.carbons
        seen = facts.at(mass + 1) - parts.minus_one * formula.ratio(2) - parts.minus_two * formula.ratio(3)
        counted = (seen / parts.molecular - others) / CARBON_13
        rows.append((facts.instrument_class, parts.molecular, math.log(max(counted, 0.05) / formula.carbons)))
    return rows


def carbon_model(rows: list[tuple[str, float, float]]) -> dict[str, tuple[CarbonErrors, ...]]:
    """Error quantiles by class; classes with too few records of their own share the model of the other narrow ones."""
    pools = {
        "sector": [row for row in rows if row[0] == "sector"],
        "narrow": [row for row in rows if row[0] in ("time-of-flight", "high-resolution", "quadrupole", "trap")],
    }
    model: dict[str, tuple[CarbonErrors, ...]] = {}
    for pool, members in pools.items():
        height = np.array([row[1] for row in members])
        error = np.array([row[2] for row in members])
        knots = []
        for knot in KNOTS[pool]:
            distance = np.abs(np.log(height / knot))
            near = np.argsort(distance)[: max(60, int(0.25 * len(members)))]
            quantiles = np.quantile(error[near], (0.05, 0.25, 0.75, 0.95))
            knots.append(CarbonErrors(knot, *(round(float(value), 3) for value in quantiles)))
        for name in (
            ("sector", "unknown", "quadrupole", "trap") if pool == "sector" else ("time-of-flight", "high-resolution")
        ):
            model[name] = tuple(knots)
    return model


def fit_carbons(records: OpenRecords) -> None:
    """Write the error model of the carbon count."""
    rows = carbon_errors(records)
    model = carbon_model(rows)
    counts = Counter(name for name, _, _ in rows)
    lines = [
        '"""How far carbons counted from M+1 are off, by instrument class and intensity of M.',
        "",
        f"{PROVENANCE},",
        "M at least 5 % of base and M+1 recorded, by `tests/benchmarks/fit_evidence.py carbons`. Records used:",
        f"{', '.join(f'{number:,} {name}' for name, number in counts.most_common())}.",
        "Quadrupole and trap records are too few: those classes use the wide sector model.",
        '"""',
        "",
        "from __future__ import annotations",
        "",
        "from typing import NamedTuple",
        "",
        "",
        "class CarbonErrors(NamedTuple):",
        '    """Quantiles of ln(counted / true carbons) at an intensity of M (% of base): 5, 25, 75 and 95 %."""',
        "",
        "    molecular: float",
        "    low: float",
        "    lower: float",
        "    upper: float",
        "    high: float",
        "",
        "",
        "_WIDE = (",
        *(f"    CarbonErrors{tuple(row)}," for row in model["sector"]),
        ")",
        "_NARROW = (",
        *(f"    CarbonErrors{tuple(row)}," for row in model["time-of-flight"]),
        ")",
        "ERRORS: dict[str, tuple[CarbonErrors, ...]] = {",
        *(
            f'    "{name}": {"_NARROW" if rows == model["time-of-flight"] else "_WIDE"},'
            for name, rows in model.items()
        ),
        "}",
        'NARROW_CLASSES = frozenset({"time-of-flight", "high-resolution"})',
        '"""By `identify.evidence.facts.instrument_class`; the first row is the floor below which M+1 does not vote."""',
        "",
    ]
    (ROOM / "carbon_errors.py").write_text("\n".join(lines), encoding="utf-8")


@dataclass(frozen=True)
class Judged:
    """The findings on one candidate of one query."""

    query: int
    right: bool
    same_formula: bool
    weight: float
    cosine: float
    cells: dict[str, tuple[str, str]]
    """Cell and verdict by kind of check."""


N_WRONG = 3
MAX_QUERIES_PER_COMPOUND = 2


def judge_candidates(records: OpenRecords) -> Iterator[Judged]:
    """Findings on the right and the closest wrong candidates of up to two records of every compound with replicates.

    The right candidate is the best other entry of the compound, measured as the same derivative. Wrong ones are the most
    similar entries of other compounds: the `N_WRONG` best of another formula as measured (weight 1/3 each), and the best one of
    the same formula among the ten nearest, kept apart because formula checks cannot speak about isomers.
    """
    rng = np.random.default_rng(SEED)
    settings = Settings()
    for (compound, _), places in records.replicates.items():
        if len(places) < 2:
            continue
        for place in rng.permutation(places)[:MAX_QUERIES_PER_COMPOUND].tolist():
            entry = records.entries[place]
            query = as_query(entry)
            facts = build_query_facts(query)
            cosine = records.matrix[places] @ records.matrix[place]
            right = max(other for other in zip(cosine.tolist(), places, strict=True) if other[1] != place)
            near = [item for item in records.nearest(place, 15) if records.compounds[item[0]] != compound]
            formula = entry.formula_as_measured
            other = [item for item in near if records.entries[item[0]].formula_as_measured not in ("", formula)][
                :N_WRONG
            ]
            isomer = [item for item in near[:10] if records.entries[item[0]].formula_as_measured == formula][:1]
            rows = [(right[1], right[0], True, True, 1.0)]
            rows += [(item[0], item[1], False, False, 1.0 / len(other)) for item in other]
            rows += [(item[0], item[1], False, True, 1.0) for item in isomer]
            for candidate, similarity, is_right, same, weight in rows:
                chosen = records.entries[candidate]
                aligned = align(query.spectrum, chosen.spectrum)
                found = examine(query, chosen, aligned, settings, facts)
                cells = {item.kind: (item.cell, item.verdict.value) for item in found}
                yield Judged(place, is_right, same, weight, similarity, cells)


def likelihood_ratios(judged: list[Judged]) -> dict[str, dict[str, tuple[float, float, float]]]:
    """By kind and cell: log-odds, and the weights of right and wrong candidates in the cell."""
    table: dict[str, dict[str, tuple[float, float, float]]] = {}
    used = [item for item in judged if item.right or not item.same_formula]
    for kind in judged[0].cells:
        right: Counter[str] = Counter()
        wrong: Counter[str] = Counter()
        for item in used:
            (right if item.right else wrong)[item.cells[kind][0]] += item.weight  # type: ignore[assignment]
        n_right, n_wrong = sum(right.values()), sum(wrong.values())
        table[kind] = {}
        for cell in sorted((set(right) | set(wrong)) - {""}):
            pooled = (right[cell] + wrong[cell]) / (n_right + n_wrong)
            share_right = (right[cell] + PSEUDO * pooled * n_right / n_wrong) / (n_right + PSEUDO * pooled)
            share_wrong = (wrong[cell] + PSEUDO * pooled) / (n_wrong + PSEUDO * pooled)
            seen = right[cell] + wrong[cell]
            shrink = seen / (seen + SHRINK)
            table[kind][cell] = (
                shrink * math.log(max(share_right, 1e-6) / max(share_wrong, 1e-6)),
                right[cell],
                wrong[cell],
            )
    for kind in (MISSING, EXTRA):
        table[kind] = at_equal_cosine(used, kind)
    return table


PSEUDO, SHRINK = 4.0, 4.0
"""Pseudo-observations spread like the pooled data, and the number of observations at which half of a log-odds value is kept."""


def at_equal_cosine(used: list[Judged], kind: str) -> dict[str, tuple[float, float, float]]:
    """Log-odds of a kind's cells beyond what cosine similarity says: logistic regression with cosine in four bends."""
    cells = sorted({item.cells[kind][0] for item in used} - {""})
    cosine = np.array([item.cosine for item in used])
    bends = np.stack(
        [np.ones_like(cosine), cosine, *(np.maximum(cosine - knot, 0) for knot in (0.6, 0.8, 0.9))], axis=1
    )
    marks = np.array([[item.cells[kind][0] == cell for cell in cells] for item in used], float)
    design = np.hstack([bends, marks])
    truth = np.array([item.right for item in used], float)
    weight = np.array([item.weight for item in used])
    ridge = np.array([1e-3] * bends.shape[1] + [2.0] * len(cells))
    beta = np.zeros(design.shape[1])
    for _ in range(60):
        probability = 1.0 / (1.0 + np.exp(-design @ beta))
        curvature = design.T @ (design * (weight * probability * (1 - probability))[:, None]) + np.diag(ridge)
        beta += np.linalg.solve(curvature, design.T @ (weight * (truth - probability)) - ridge * beta)
    effect = beta[bends.shape[1] :]
    totals = (marks * weight[:, None]).sum(axis=0)
    effect = effect - float((effect * totals).sum() / totals.sum())
    rights = (marks * (weight * truth)[:, None]).sum(axis=0)
    return {
        cell: (float(e), float(r), float(n - r)) for cell, e, r, n in zip(cells, effect, rights, totals, strict=True)
    }


def fit_weights(records: OpenRecords) -> None:
    """Write the log-odds table."""
    judged = list(judge_candidates(records))
    table = likelihood_ratios(judged)
    queries = len({item.query for item in judged})
    lines = [
        '"""Measured log-odds of each cell of each check (see `identify.evidence.finding`).',
        "",
        f"{PROVENANCE}",
        f"by `tests/benchmarks/fit_evidence.py weights`: {queries:,} queries. Right: the best other entry of the compound;",
        "wrong: the three most similar entries of another formula. For `ions missing in the query` and `ions only in the",
        "query` at equal cosine similarity. The comment gives how many right and wrong candidates fell into the cell.",
        '"""',
        "",
        "from __future__ import annotations",
        "",
        "LOG_ODDS: dict[str, dict[str, float]] = {",
    ]
    for kind, cells in table.items():
        lines.append(f'    "{kind}": {{')
        for cell, (value, right, wrong) in cells.items():
            lines.append(f'        "{cell}": {value:.2f},  # {right:.0f} right, {wrong:.0f} wrong')
        lines.append("    },")
    (ROOM / "weights.py").write_text("\n".join([*lines, "}", ""]), encoding="utf-8")


def class_rows(
    records: OpenRecords, count: int, seed: int = SEED
) -> list[tuple[bool, float, float, frozenset[str], str]]:
    """Is it of the class, share of votes, best cosine, rules met, class: one row per query and class in question."""
    rng = np.random.default_rng(seed)
    first = {int(records.compounds[place]): place for place in rng.permutation(len(records.entries)).tolist()}
    usable = [place for place in first.values() if records.entries[place].identity.smiles]
    rows = []
    for place in usable[:count]:
        entry = records.entries[place]
        try:
            own = set(compound_classes(entry.identity.smiles))
        except StructureError:
            continue
        near = records.nearest(place, MAX_NEIGHBOURS, without_compound=True)
        shares, _ = vote_shares([(records.entries[other], cosine) for other, cosine in near])
        best = max((cosine for _, cosine in near), default=0.0)
        met = met_rules(spectrum_facts(entry.spectrum, entry.acquisition))
        names = {rule.compound_class for rule in met}
        for name in sorted(set(shares) | names):
            texts = frozenset(f"{rule.compound_class}: {rule.text}" for rule in met if rule.compound_class == name)
            rows.append((name in own, shares.get(name, 0.0), best, texts, name))
    return rows


def rule_ratios(records: OpenRecords, count: int, seed: int = SEED) -> dict[str, tuple[float, int, int]]:
    """ln ratio of how often each rule is met within its class and outside, with the numbers of spectra that met it."""
    rng = np.random.default_rng(seed)
    inside, outside = Counter[str](), Counter[str]()
    members, others = Counter[str](), Counter[str]()
    texts = {f"{rule.compound_class}: {rule.text}": rule.compound_class for rule in RULES}
    for place in rng.permutation(len(records.entries))[:count].tolist():
        entry = records.entries[place]
        try:
            own = set(compound_classes(entry.identity.smiles)) if entry.identity.smiles else set()
        except StructureError:
            continue
        if not own:
            continue
        if "TMS" in entry.measured_as:
            own.add("TMS derivative")
        met = {
            f"{rule.compound_class}: {rule.text}"
            for rule in met_rules(spectrum_facts(entry.spectrum, entry.acquisition))
        }
        for text, name in texts.items():
            (members if name in own else others)[text] += 1
            (inside if name in own else outside)[text] += text in met
    return {
        text: (
            math.log(((inside[text] + 0.5) / (members[text] + 1)) / ((outside[text] + 0.5) / (others[text] + 1))),
            inside[text],
            outside[text],
        )
        for text in texts
    }


def fit_logistic(design: NDArray[np.float64], truth: NDArray[np.float64], ridge: float = 1.0) -> NDArray[np.float64]:
    """Coefficients of a logistic regression by Newton's method with a ridge."""
    beta = np.zeros(design.shape[1])
    for _ in range(50):
        chance = 1.0 / (1.0 + np.exp(-design @ beta))
        curvature = design.T @ (design * (chance * (1 - chance))[:, None]) + ridge * np.eye(design.shape[1])
        beta += np.linalg.solve(curvature, design.T @ (truth - chance) - ridge * beta)
    return beta


def class_design(
    rows: list[tuple[bool, float, float, frozenset[str], str]], ratios: dict[str, float]
) -> NDArray[np.float64]:
    """Columns of `identify.evidence.classes.class_probability`."""
    share = np.clip([row[1] for row in rows], 0.01, 0.99)
    ions = [max((ratios.get(text, 0.0) for text in row[3]), default=0.0) for row in rows]
    return np.stack([np.ones(len(rows)), np.log(share / (1 - share)), [row[2] for row in rows], ions], axis=1)


def fit_classes(records: OpenRecords) -> None:
    """Write the calibration of class votes and the worth of characteristic ions."""
    ratios = rule_ratios(records, 6000)
    rows = class_rows(records, 1500)
    values = {text: max(ratio, 0.0) for text, (ratio, _, _) in ratios.items()}
    beta = fit_logistic(class_design(rows, values), np.array([row[0] for row in rows], float))
    lines = [
        '"""Calibration of class votes and worth of characteristic ions.',
        "",
        f"{PROVENANCE}",
        "by `tests/benchmarks/fit_evidence.py classes`, the compound removed from the library.",
        '"""',
        "",
        "from __future__ import annotations",
        "",
        f"CALIBRATION = ({', '.join(f'{value:.3f}' for value in beta)})",
        '"""Constant, logit of the share of votes, best cosine, ln ratio of characteristic ions."""',
        "RULE_LOG_RATIO: dict[str, float] = {",
        *(
            f'    "{text}": {max(ratio, 0.0):.2f},  # met by {a} of the class, {b} others'
            for text, (ratio, a, b) in ratios.items()
        ),
        "}",
        '"""ln of how much more often spectra of the class meet the rule; 0 for a rule that does not help."""',
        "",
    ]
    (ROOM / "class_model.py").write_text("\n".join(lines), encoding="utf-8")


TASKS = {"carbons": fit_carbons, "weights": fit_weights, "classes": fit_classes}

if __name__ == "__main__":
    TASKS[sys.argv[1]](load_open_records())
