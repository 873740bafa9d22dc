"""How well are the components of a run found, and how well named?

    python tests/benchmarks/runs.py [--runs N] [--library LIB] [--no-search]

Synthetic runs with known truth: held-out open spectra (`../shared/data`) elute as exponentially modified Gaussian peaks with
counting statistics, rising bleed, scan skew, base ions from 60 to 600,000 units (dynamic range 10⁴), alone or as pairs 0.5 to
10 scans apart. Printed: components found, missed and false; spectrum cosine (intensities to the power 0.5) against truth by
separation and signal/noise, beside the plain apex-minus-background spectrum of the same run; area error; rank-1 of the
components, of the pure spectra and of the plain spectra. Compounds are those with another record in the library; the
held-out records themselves are left out of it (LIB is built in a temporary folder unless given).

Signal/noise: height of the base ion over the standard deviation of a reading at its background level. A component is found
when one lies within one scan (half the separation for closer pairs, at least half a scan) with cosine ≥ 0.7; each counts once.
"""

from __future__ import annotations

import argparse
import sys
import tempfile
import time
from collections import defaultdict
from dataclasses import dataclass
from pathlib import Path

import numpy as np

ROOT = Path(__file__).resolve().parent.parent.parent
sys.path.insert(0, str(ROOT))

from identify.errors import SpectrumError  # noqa: E402
from identify.library.drafts import read_chemistry  # noqa: E402
from identify.readers import read_spectra  # noqa: E402
from identify.records import Acquisition, Peaks, Source, SpectrumRecord  # noqa: E402
from identify.runs.components import find_components  # noqa: E402
from identify.runs.model import Component, ComponentKind  # noqa: E402
from identify.runs.traces import build_ion_matrix  # noqa: E402
from identify.settings import REFERENCE_CLEANING, Settings  # noqa: E402
from identify.spectra.cleaning import clean_spectrum  # noqa: E402
from tests.runs.synthetic_runs import AIR, BLEED, COUNT, SCAN_TIME_S, Eluting, apex_time_s, make_run  # noqa: E402

DATA = ROOT.parent / "shared" / "data" / "massbank-2025.05.1-ei.zip"
SEPARATIONS = (0.5, 1.0, 2.0, 3.0, 5.0, 10.0)
LOWEST_MZ, HIGHEST_MZ = 35, 450
N_SCANS, N_SLOTS = 2400, 24
SMALLEST, LARGEST = 60.0, 600_000.0


@dataclass(frozen=True)
class HeldOut:
    accession: str
    compound: str
    spectrum: dict[int, float]


@dataclass(frozen=True)
class Case:
    """One compound in one run and what came of it."""

    truth: HeldOut
    eluting: Eluting
    separation: float
    signal_to_noise: float
    found: Component | None
    cosine: float
    plain: dict[int, float]
    plain_cosine: float
    area_error: float


def held_out(n: int, seed: int) -> list[HeldOut]:
    """Records whose compound has at least one more record, in an order fixed by the seed."""
    groups = defaultdict(list)
    for record in read_spectra(DATA, lambda rejection: None):
        energy = record.acquisition.energy_ev
        if record.acquisition.ionization not in ("", "EI") or record.acquisition.ms_level not in (None, 1):
            continue
        if energy is not None and not 60 <= energy <= 80:
            continue
        facts = read_chemistry(record)
        if facts.label or not record.identity.inchikey:
            continue
        try:
            peaks = clean_spectrum(record, REFERENCE_CLEANING).nominal
        except SpectrumError:
            continue
        inside = (peaks.mz >= LOWEST_MZ) & (peaks.mz <= HIGHEST_MZ) & (peaks.relative >= 0.2)
        spectrum = dict(zip(peaks.mz[inside].astype(int).tolist(), peaks.relative[inside].tolist(), strict=True))
        usable = len(spectrum) >= 8 and max(spectrum.values()) >= 99.9 and peaks.mz[0] <= 50
        key = f"{record.identity.inchikey[:14]} {facts.measured_as}"
        groups[key].append(HeldOut(record.accession, key, spectrum) if usable else None)
    rng = np.random.default_rng(seed)
    keys = sorted(key for key, members in groups.items() if len(members) >= 2 and any(members))
    chosen = []
    for key in rng.permutation(keys)[:n]:
        members = [member for member in groups[key] if member]
        chosen.append(members[int(rng.integers(len(members)))])
    return chosen


def plan_run(spectra: list[HeldOut], rng: np.random.Generator) -> list[tuple[HeldOut, Eluting, float]]:
    """Slots of 100 scans: a single compound or a pair."""
    plan = []
    waiting = list(spectra)
    for slot in range(N_SLOTS):
        centre = 50.0 + 100.0 * slot + float(rng.uniform(-10, 10))
        height = float(np.exp(rng.uniform(np.log(SMALLEST), np.log(LARGEST))))
        if slot % 3 == 0:
            plan.append((waiting.pop(), (centre, height), float("inf")))
            continue
        separation = SEPARATIONS[(slot * 2 // 3) % len(SEPARATIONS)]
        ratio = float(np.exp(rng.uniform(np.log(0.05), np.log(20.0))))
        other = float(np.clip(height * ratio, SMALLEST, LARGEST))
        plan.append((waiting.pop(), (centre, height), separation))
        plan.append((waiting.pop(), (centre + separation, other), separation))
    sigma, tail = float(rng.uniform(1.2, 2.2)), float(rng.uniform(0.3, 1.5))
    return [(item, Eluting(item.spectrum, apex, height, sigma, tail), gap) for item, (apex, height), gap in plan]


def signal_to_noise(eluting: Eluting) -> float:
    base = max(eluting.spectrum, key=lambda mz: eluting.spectrum[mz])
    rise = float(np.exp(4.0 * (eluting.apex / N_SCANS - 1.0)))
    level = 400.0 * rise * BLEED.get(base, 0.0) + 500.0 * AIR.get(base, 0.0)
    return eluting.height / float(np.sqrt(16.0 + COUNT * max(level, 20.0)))


def similarity(one: dict[int, float], other: dict[int, float]) -> float:
    axis = sorted(set(one) | set(other))
    a = np.sqrt([one.get(mz, 0.0) for mz in axis])
    b = np.sqrt([other.get(mz, 0.0) for mz in axis])
    return float(a @ b / max(1e-12, np.linalg.norm(a) * np.linalg.norm(b)))


def as_dict(peaks: Peaks) -> dict[int, float]:
    return {int(mz): float(value) for mz, value in zip(peaks.mz, peaks.intensity, strict=True) if mz >= LOWEST_MZ}


def run_cases(spectra: list[HeldOut], seed: int) -> tuple[list[Case], list[Component], float]:
    rng = np.random.default_rng(seed)
    plan = plan_run(spectra, rng)
    run = make_run([eluting for _, eluting, _ in plan], N_SCANS, seed, mz_range=(LOWEST_MZ, HIGHEST_MZ))
    began = time.perf_counter()
    components = [
        c for c in find_components(run) if c.kind is not ComponentKind.BLEED and c.kind is not ComponentKind.AIR
    ]
    took = time.perf_counter() - began
    matrix = build_ion_matrix(run)
    matched = match(plan, components)
    cases = []
    for place, (truth, eluting, gap) in enumerate(plan):
        component = matched.get(place)
        plain = plain_spectrum(matrix.mz, matrix.intensity, eluting)
        cosine = similarity(truth.spectrum, as_dict(component.peaks)) if component else 0.0
        area = true_area(eluting)
        error = abs(component.area - area) / area if component else float("nan")
        cases.append(
            Case(truth, eluting, gap, signal_to_noise(eluting), component, cosine, plain,
                 similarity(truth.spectrum, plain), error)
        )  # fmt: skip
    used = {id(component) for component in matched.values()}
    return cases, [c for c in components if id(c) not in used], took


def match(plan: list[tuple[HeldOut, Eluting, float]], components: list[Component]) -> dict[int, Component]:
    pairs = []
    for place, (truth, eluting, gap) in enumerate(plan):
        reach = SCAN_TIME_S * min(1.0, max(0.5, 0.5 * gap))
        for component in components:
            if abs(component.time_s - apex_time_s(eluting)) <= reach + 1e-9:
                cosine = similarity(truth.spectrum, as_dict(component.peaks))
                if cosine >= 0.7:
                    pairs.append((cosine, place, component))
    matched: dict[int, Component] = {}
    used: set[int] = set()
    for _, place, component in sorted(pairs, key=lambda pair: -pair[0]):
        if place not in matched and id(component) not in used:
            matched[place] = component
            used.add(id(component))
    return matched


def plain_spectrum(mz: np.ndarray, intensity: np.ndarray, eluting: Eluting) -> dict[int, float]:
    """Scan at the apex minus the mean of scans 12 before and after: what an analyst clicks."""
    top = round(eluting.apex)
    rest = intensity[top] - 0.5 * (intensity[max(0, top - 12)] + intensity[min(len(intensity) - 1, top + 12)])
    keep = rest > 0
    return {int(m): float(v) for m, v in zip(mz[keep], rest[keep], strict=True)}


def true_area(eluting: Eluting) -> float:
    from tests.runs.synthetic_runs import emg

    scans = np.arange(-40.0, 80.0, 0.1)
    shape = float(emg(scans, eluting.sigma, eluting.tail).sum() * 0.1)
    return eluting.height * sum(eluting.spectrum.values()) / max(eluting.spectrum.values()) * shape * SCAN_TIME_S


def rank_one(cases: list[Case], library_path: Path) -> dict[str, list[bool | None]]:
    """Whether the right compound comes first: for the component, the pure spectrum, and the plain one."""
    from identify.pipeline.search import identify_query, make_query, open_libraries

    settings = Settings()
    right: dict[str, list[bool | None]] = {"component": [], "pure": [], "plain": []}
    with open_libraries([library_path], settings) as libraries:
        for case in cases:
            wanted = case.truth.compound.split()[0]
            component = as_dict(case.found.peaks) if case.found else None
            for name, spectrum in (("component", component), ("pure", case.truth.spectrum), ("plain", case.plain)):
                if spectrum is None:
                    right[name].append(None)
                    continue
                record = SpectrumRecord(
                    Source("benchmark"), np.array(list(spectrum), float), np.array(list(spectrum.values())),
                    acquisition=Acquisition(ionization="EI", inlet="GC", ms_level=1, lowest_mz=float(LOWEST_MZ)),
                )  # fmt: skip
                found = identify_query(make_query(record, 1, settings), libraries, settings)
                best = found.candidates[0].entry.identity.inchikey[:14] if found.candidates else ""
                right[name].append(best == wanted)
    return right


def build_without(accessions: set[str], folder: Path) -> Path:
    """Library of all open records but the held-out ones."""
    import zipfile
    from datetime import UTC, datetime

    from identify.library.build import build_library

    rest, path = folder / "rest.zip", folder / "held-out.ionlib"
    with zipfile.ZipFile(DATA) as whole, zipfile.ZipFile(rest, "w") as part:
        for name in whole.namelist():
            if Path(name).stem not in accessions:
                part.writestr(name, whole.read(name))
    build_library(path, [rest], licences="all", who="benchmark", when=datetime(2026, 1, 1, tzinfo=UTC))
    return path


def show(title: str, cases: list[Case]) -> None:
    if not cases:
        return
    found = [case for case in cases if case.found]
    cosines = [case.cosine for case in found]
    errors = [case.area_error for case in found]
    print(
        f"{title:34} n {len(cases):4}  recall {len(found) / len(cases):.3f}  "
        f"cosine median {np.median(cosines) if cosines else 0:.3f} (10 % below "
        f"{np.percentile(cosines, 10) if cosines else 0:.3f}); plain "
        f"{np.median([case.plain_cosine for case in cases]):.3f}  area error median {np.median(errors) if errors else 0:.1%}"
    )


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--runs", type=int, default=8)
    parser.add_argument("--seed", type=int, default=7)
    parser.add_argument("--library", type=Path)
    parser.add_argument("--no-search", action="store_true")
    asked = parser.parse_args()
    per_run = N_SLOTS + 2 * N_SLOTS // 3
    spectra = held_out(asked.runs * per_run, asked.seed)
    cases: list[Case] = []
    false: list[Component] = []
    took = 0.0
    for number in range(asked.runs):
        part = spectra[number * per_run : (number + 1) * per_run]
        more, wrong, seconds = run_cases(part, asked.seed + number)
        cases += more
        false += wrong
        took += seconds
    print(f"{asked.runs} runs of {N_SCANS} scans, {len(cases)} compounds, {took / asked.runs:.2f} s a run")
    show("all", cases)
    for low, high in ((0, 5), (5, 20), (20, 100), (100, 1000), (1000, 1e9)):
        show(f"  signal/noise {low:g} to {high:g}", [c for c in cases if low <= c.signal_to_noise < high])
    for gap in (*SEPARATIONS, float("inf")):
        show(
            f"  {gap:g} scans apart, signal/noise ≥ 20",
            [c for c in cases if c.separation == gap and c.signal_to_noise >= 20],
        )
    goal = [c for c in cases if c.separation >= 3 and c.signal_to_noise >= 20]
    show("goal: ≥ 3 scans, signal/noise ≥ 20", goal)
    n_found = sum(1 for c in cases if c.found)
    weak = sum(1 for c in false if len(c.peaks) <= 4)
    print(f"false components {len(false)} of {n_found + len(false)} ({len(false) / max(1, n_found + len(false)):.1%}); "
          f"{weak} of them with at most 4 ions")  # fmt: skip
    if asked.no_search:
        return
    with tempfile.TemporaryDirectory() as folder:
        library = asked.library or build_without({c.truth.accession for c in cases}, Path(folder))
        show_rank_one(goal, library)


def show_rank_one(cases: list[Case], library: Path) -> None:
    right = rank_one(cases, library)
    found = [place for place, value in enumerate(right["component"]) if value is not None]
    print(f"rank-1 over {len(found)} components found (≥ 3 scans, signal/noise ≥ 20):")
    for name, values in right.items():
        print(f"  {name:10} {np.mean([bool(values[place]) for place in found]):.3f}")


if __name__ == "__main__":
    main()
