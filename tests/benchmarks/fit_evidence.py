"""Fits what the evidence room measures on the open records, and writes it into the package.

    python tests/benchmarks/fit_evidence.py carbons          identify/evidence/carbon_errors.py
    python tests/benchmarks/fit_evidence.py weights          identify/evidence/weights.py
    python tests/benchmarks/fit_evidence.py molecular-ion    identify/evidence/molecular_ion_model.json

Only coefficients and quantiles are written, no spectrum and no accession.
"""

from __future__ import annotations

import math
import sys
from collections import Counter, defaultdict
from collections.abc import Iterator
from pathlib import Path

import numpy as np
from evidence_data import OpenRecords, as_query, load_open_records

from identify.evidence.carbon_errors import CarbonErrors
from identify.evidence.facts import build_query_facts, formula_facts, spectrum_facts
from identify.evidence.isotopes import CARBON_13, take_apart

ROOM = Path(__file__).resolve().parents[2] / "identify" / "evidence"
PROVENANCE = "Fitted on the open EI records (MassBank release 2025.05.1, 60–80 eV or unstated, unlabelled)"

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
        for name in ("sector", "unknown", "quadrupole", "trap") if pool == "sector" else ("time-of-flight", "high-resolution"):
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
        "M at least 5 % of base and M+1 recorded, by `tests/benchmarks/fit_evidence.py carbons`. Records used: ",
        f"{', '.join(f'{number:,} {name}' for name, number in counts.most_common())}. Quadrupole and trap records are too few: those classes use",
        "the wide sector model.",
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
        *(f'    "{name}": {"_NARROW" if rows == model["time-of-flight"] else "_WIDE"},' for name, rows in model.items()),
        "}",
        '"""By `identify.evidence.facts.instrument_class`; the first row is the floor below which M+1 does not vote."""',
        "",
    ]
    (ROOM / "carbon_errors.py").write_text("\n".join(lines), encoding="utf-8")


if __name__ == "__main__":
    {"carbons": fit_carbons}[sys.argv[1]](load_open_records())
