"""How many injected errors the library audit finds, at how many false alarms; with `--fit`, where its weights come from.

    python tests/benchmarks/audit.py LIB [--per-kind 100] [--fit] [--whole] [--sample 40]

LIB is built of the open records (`ionwitness library build all.ionlib ../shared/data/massbank-2025.05.1-ei.zip --licence
all`). Errors are injected into copies in memory: spectra swapped between compounds, a formula changed by a few atoms, a
derivative not declared, all m/z one too high, a labelled compound under its unlabelled formula. Each copy is judged against
the library without the entry it was made of. A second count uses the spectrum alone, for entries without a structure: there
a wrong formula is not given away by its disagreement with the structure.

Clean entries are such that another measurement of the compound agrees with (cosine at least 0.85). Because that favours
them wherever replicates count, every case is judged twice: with the other entries of its compound in the library, and as
if the compound had been measured only once (all of them left out). Fitting and counting use different compounds.
"""

from __future__ import annotations

import argparse
import dataclasses
import random
import re
import zlib
from collections import Counter, defaultdict
from collections.abc import Iterator
from pathlib import Path
from typing import NamedTuple

import numpy as np

from identify.chem.formula import Formula, parse_formula
from identify.errors import FormulaError
from identify.index import SearchIndex
from identify.library.audit import USE, AuditReport, EntryAudit, audit_library, look_around, observe_in_library
from identify.library.audit_cells import ABOVE, REPLICATES, Cell, nominal_mass_of
from identify.library.audit_metadata import Grade, check_statements
from identify.library.audit_weights import BASE_LOG_ODDS, CAUTION_FROM, QUARANTINE_FROM, WEIGHTS
from identify.library.cache import load_index
from identify.library.store import Library, open_library
from identify.records import CleanSpectrum, Entry, Peaks
from identify.settings import Weighting

KINDS = ("swapped spectra", "wrong formula", "derivative not declared", "m/z one too high", "label not declared")
CHANGES = (
    {"C": 1, "H": 2}, {"C": -1, "H": -2}, {"O": 1}, {"O": -1}, {"H": 2}, {"H": -2}, {"N": 1, "H": 1}, {"C": 1, "O": 1},
    {"Cl": 1, "H": -1},
)  # fmt: skip
CLEAN_FROM = 0.85
UNDECLARED = frozenset({"derivative not declared"})
"""Findings of grade caution that are about an injected error; few peaks or a retention index are not."""
LABEL = re.compile(r"\[\d+(?=[A-Za-z])")
"""Mass number of an atom in a SMILES."""
WEIGHTS_FILE = Path(__file__).resolve().parents[2] / "identify" / "library" / "audit_weights.py"


class Case(NamedTuple):
    """One entry as judged."""

    kind: str
    """One of `KINDS`, or `clean`."""
    cells: tuple[Cell, ...]
    """With the other entries of the compound in the library."""
    alone: tuple[Cell, ...]
    """As if the compound had been measured only once."""
    is_contradictory: bool
    """Whether the entry's own statements contradict each other or those of its replicates."""
    is_flagged: bool
    """Whether its statements alone would make it no better than `use with caution`."""
    is_flagged_alone: bool
    """The same without replicates to compare with."""


def is_70_ev(entry: Entry) -> bool:
    energy = entry.acquisition.energy_ev
    return energy is None or 60.0 <= energy <= 80.0


def is_for_fitting(entry: Entry) -> bool:
    """Half of the compounds, by their connectivity or name."""
    key = entry.identity.inchikey[:14] or entry.identity.name.casefold()
    return zlib.crc32(key.encode()) % 2 == 0


def shifted(spectrum: CleanSpectrum) -> CleanSpectrum:
    return CleanSpectrum(Peaks(spectrum.nominal.mz + 1, spectrum.nominal.intensity), None, spectrum.lowest_mz)


def with_wrong_formula(entry: Entry, chance: random.Random) -> Entry | None:
    if entry.measured_as or not entry.identity.formula:
        return None
    counts = dict(parse_formula(entry.identity.formula).counts)
    for symbol, change in chance.choice(CHANGES).items():
        counts[symbol] = counts.get(symbol, 0) + change
    try:
        formula = Formula.from_counts(counts)
    except FormulaError:
        return None
    identity = dataclasses.replace(entry.identity, formula=formula.hill)
    return dataclasses.replace(entry, identity=identity, formula_as_measured=formula.hill, compound_id=-1)


class Injector:
    """Entries with an error, made of right ones."""

    def __init__(self, entries: list[Entry], fitting: bool, seed: int) -> None:
        self.chance = random.Random(seed)
        self.unlabelled: dict[str, int] = {}
        for entry in entries:
            if not entry.is_labelled and entry.identity.inchikey:
                self.unlabelled.setdefault(entry.identity.inchikey[:14], entry.compound_id)
        self.pool = [entry for entry in entries if is_for_fitting(entry) is fitting]

    def draw(self, kind: str) -> tuple[Entry, int]:
        """Entry with the error, and the id that must not be its own neighbour."""
        while True:
            found = self._try(kind, self.chance.choice(self.pool))
            if found is not None:
                return found

    def _try(self, kind: str, entry: Entry) -> tuple[Entry, int] | None:
        if kind == "swapped spectra":
            other = self.chance.choice(self.pool)
            if other.compound_id == entry.compound_id:
                return None
            return dataclasses.replace(entry, spectrum=other.spectrum), other.id
        if kind == "wrong formula":
            wrong = with_wrong_formula(entry, self.chance)
            return None if wrong is None else (wrong, entry.id)
        if kind == "derivative not declared":
            if not entry.measured_as or not entry.formula_as_measured:
                return None
            return dataclasses.replace(entry, measured_as="", formula_as_measured=entry.identity.formula), entry.id
        if kind == "m/z one too high":
            return dataclasses.replace(entry, spectrum=shifted(entry.spectrum)), entry.id
        if not entry.is_labelled or not entry.identity.formula or "[" in entry.identity.formula:
            return None
        compound = self.unlabelled.get(entry.identity.inchikey[:14], -1)
        identity = dataclasses.replace(
            entry.identity, name="(not named)", smiles=LABEL.sub("[", entry.identity.smiles), inchikey=""
        )
        plain = dataclasses.replace(
            entry, identity=identity, is_labelled=False, formula_as_measured=identity.formula, compound_id=compound
        )
        return plain, entry.id


class Judge:
    """Cells of entries, in the library and alone."""

    def __init__(self, library: Library, index: SearchIndex) -> None:
        self.library, self.index = library, index
        self.same: dict[str, set[int]] = defaultdict(set)
        entries = list(library.iter_entries())
        for entry in entries:
            self.same[self.key(entry)].add(entry.id)
        self.entries = [entry for entry in entries if is_70_ev(entry)]

    @staticmethod
    def key(entry: Entry) -> str:
        return entry.identity.inchikey[:14] or entry.identity.name.casefold()

    def judge(self, kind: str, entry: Entry, made_of: int) -> Case:
        own = {entry.id, made_of}
        (source,) = self.library.get_entries([made_of])
        whole = own | self.same[self.key(entry)] | self.same[self.key(source)]
        (record,) = self.library.get_records([entry.id])
        cells, _, replicates = observe_in_library(self.library, self.index, entry, leave_out=own, many=True)
        found = check_statements(entry, record, [replicate.entry for replicate in replicates])
        is_contradictory = any(f.grade is Grade.SERIOUS or f.kind in UNDECLARED for f in found)
        flagged = [
            any(f.grade is not Grade.NOTE for f in stated) for stated in (found, check_statements(entry, record, ()))
        ]
        return Case(kind, cells, self.cells(entry, whole), is_contradictory, *flagged)

    def cells(self, entry: Entry, leave_out: set[int]) -> tuple[Cell, ...]:
        return observe_in_library(self.library, self.index, entry, leave_out=leave_out, many=True)[0]


def collect(judge: Judge, fitting: bool, per_kind: int, seed: int) -> Iterator[Case]:
    """Clean entries, then injected errors kind by kind, each with its own stream of chance."""
    yield from collect_clean(judge, fitting, 5 * per_kind, seed)
    for kind in KINDS:
        yield from collect_wrong(judge, kind, fitting, per_kind, seed)


def collect_clean(judge: Judge, fitting: bool, n_wanted: int, seed: int) -> Iterator[Case]:
    injector, n_clean = Injector(judge.entries, fitting, seed), 0
    pool = list(injector.pool)
    injector.chance.shuffle(pool)
    for entry in pool:
        if n_clean >= n_wanted:
            break
        _, replicates = look_around(judge.library, judge.index, entry, leave_out={entry.id}, many=True)
        if replicates and replicates[0].cosine >= CLEAN_FROM:
            n_clean += 1
            yield judge.judge("clean", entry, entry.id)


def collect_wrong(judge: Judge, kind: str, fitting: bool, n_wanted: int, seed: int) -> Iterator[Case]:
    injector = Injector(judge.entries, fitting, seed)
    for _ in range(n_wanted):
        yield judge.judge(kind, *injector.draw(kind))


def fit(cases: list[Case]) -> tuple[float, dict[str, dict[str, float]]]:
    """Base log-odds and weights of all cells but those on replicates, by logistic regression with a ridge.

    Every case counts twice, in the library and alone.
    """
    from sklearn.linear_model import LogisticRegression

    rows = [cells for case in cases for cells in (case.cells, case.alone)]
    names = sorted({(c.kind, c.cell) for cells in rows for c in cells if c.cell and c.kind != REPLICATES})
    column = {name: number for number, name in enumerate(names)}
    table = np.zeros((len(rows), len(names)))
    for row, cells in enumerate(rows):
        for cell in cells:
            if (cell.kind, cell.cell) in column:
                table[row, column[cell.kind, cell.cell]] = 1.0
    wrong = np.repeat([case.kind != "clean" for case in cases], 2)
    model = LogisticRegression(C=0.3, max_iter=2000, class_weight="balanced").fit(table, wrong)
    weights: dict[str, dict[str, float]] = defaultdict(dict)
    for (kind, observed), weight in zip(names, model.coef_[0], strict=True):
        weights[kind][observed] = round(float(weight), 2)
    return round(float(model.intercept_[0]), 2), dict(weights)


def replicate_weights(judge: Judge, cases: list[Case], n_right: int, seed: int) -> dict[str, float]:
    """Log quotient of how often wrong and right entries fall into each cell of the observation on replicates.

    Right: any entry with a replicate, since clean ones were chosen by theirs. Wrong: the injected errors. Limited to ±2.5,
    because some of the right ones are wrong already.
    """
    chance = random.Random(seed)
    pool = [entry for entry in judge.entries if is_for_fitting(entry)]
    right, wrong = Counter[str](), Counter[str]()
    while right.total() < n_right:
        entry = chance.choice(pool)
        right[_replicate_cell(judge.cells(entry, {entry.id}))] += 1
        del right[""]
    wrong.update(_replicate_cell(case.cells) for case in cases if case.kind != "clean")
    del wrong[""]
    n_cells = len(right | wrong)
    out = {}
    for cell in right | wrong:
        quotient = ((wrong[cell] + 1) / (wrong.total() + n_cells)) / ((right[cell] + 1) / (right.total() + n_cells))
        out[cell] = round(float(np.clip(np.log(quotient), -2.5, 2.5)), 2)
    return out


def _replicate_cell(cells: tuple[Cell, ...]) -> str:
    return next(cell.cell for cell in cells if cell.kind == REPLICATES)


def write_weights(base: float, weights: dict[str, dict[str, float]], cases: list[Case]) -> tuple[float, float]:
    clean = np.array([total(case.alone, base, weights) for case in cases if case.kind == "clean"])
    caution, quarantine = (round(float(np.quantile(clean, share)), 2) for share in (0.97, 0.995))
    n_clean, n_wrong = len(clean), len(cases) - len(clean)
    lines = [
        '"""How much more often wrong entries show an observation than right ones: fitted, not written by hand.',
        "",
        "`tests/benchmarks/audit.py --fit` on the open EI records of MassBank release 2025.05.1 (the part named",
        f"in `../shared/data/README.md`), half of the compounds: {n_clean:,} clean entries, {n_wrong:,} with injected errors of",
        "five kinds in equal numbers. Logistic regression with a ridge; thresholds: 97 % and 99.5 % quantiles of the clean",
        'entries of that half, judged as if measured only once. Natural logarithms."""',
        "",
        "from __future__ import annotations",
        "",
        f"BASE_LOG_ODDS = {base}",
        '"""Of the training set: as many wrong entries as clean ones."""',
        f"CAUTION_FROM = {caution}",
        f"QUARANTINE_FROM = {quarantine}",
        "WEIGHTS: dict[str, dict[str, float]] = {",
    ]
    for kind in sorted(weights):
        lines.append(f'    "{kind}": {{')
        lines += [f'        "{cell}": {weight},' for cell, weight in sorted(weights[kind].items())]
        lines.append("    },")
    WEIGHTS_FILE.write_text("\n".join([*lines, "}", ""]), encoding="utf-8")
    return caution, quarantine


def total(cells: tuple[Cell, ...], base: float, weights: dict[str, dict[str, float]]) -> float:
    """Log-odds as `weigh_cells` adds them up."""
    is_above = any(cell.kind == ABOVE and cell.cell in {"some", "strong"} for cell in cells)
    value = base
    for cell in cells:
        weight = weights.get(cell.kind, {}).get(cell.cell, 0.0)
        value += max(weight, 0.0) if is_above and cell.kind == REPLICATES else weight
    return value


def with_stated(value: float, case: Case, caution: float, quarantine: float, alone: bool) -> float:
    """Log-odds raised to the threshold that the statements reach.

    A clean entry counts as flagged whatever the finding is, an injected error as found only by a finding about errors.
    """
    if case.is_contradictory:
        return max(value, quarantine)
    is_flagged = case.is_flagged_alone if alone else case.is_flagged
    return max(value, caution) if case.kind == "clean" and is_flagged else value


def show(cases: list[Case], log_odds: list[float], caution: float, quarantine: float, title: str) -> None:
    print(f"\n{title}")
    by_kind = defaultdict(list)
    for case, value in zip(cases, log_odds, strict=True):
        by_kind[case.kind].append(value)
        if case.kind != "clean":
            by_kind["all injected"].append(value)
    for kind in ("clean", *KINDS, "all injected"):
        values = np.array(by_kind[kind])
        print(
            f"  {kind:26s} n {values.size:5d}   flagged {np.mean(values >= caution):6.1%}"
            f"   for quarantine {np.mean(values >= quarantine):6.1%}"
        )


def draw_sample(report: AuditReport, n: int, seed: int) -> tuple[tuple[str, list[EntryAudit]], ...]:
    """Entries drawn at random among those flagged and those not."""
    chance = random.Random(seed)
    flagged = [audit for audit in report.audits if audit.proposal != USE]
    rest = [audit for audit in report.audits if audit.proposal == USE]
    return tuple(
        (title, chance.sample(group, min(n, len(group)))) for title, group in (("flagged", flagged), ("not", rest))
    )


def describe(library: Library, audit: EntryAudit) -> str:
    """What a person needs to judge the entry: statements, the tallest and the highest peaks, the findings."""
    (entry,) = library.get_entries([audit.entry_id])
    peaks = sorted(zip(entry.spectrum.nominal.mz.tolist(), entry.spectrum.nominal.relative.tolist(), strict=True))
    tallest = sorted(sorted(peaks, key=lambda peak: -peak[1])[:14])
    lines = [
        f"{audit.accession} {audit.name}: {audit.proposal}, log-odds {audit.log_odds:+.1f} {audit.suspicion}",
        f"  {entry.formula_as_measured} M {nominal_mass_of(entry.formula_as_measured)} {entry.measured_as}"
        f" {entry.acquisition.energy_ev} eV, {len(peaks)} peaks, {entry.identity.smiles}",
        "  tallest " + " ".join(f"{mz:.0f}:{height:.0f}" for mz, height in tallest),
        "  highest " + " ".join(f"{mz:.0f}:{height:.2g}" for mz, height in peaks[-9:]),
    ]
    lines += [f"    {f.grade} {f.kind}: {f.reason} {f.observed}" for f in audit.findings]
    return "\n".join(lines)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("library", type=Path)
    parser.add_argument("--per-kind", type=int, default=100)
    parser.add_argument("--fit", action="store_true")
    parser.add_argument("--whole", action="store_true", help="also audit the whole library and count findings")
    parser.add_argument("--sample", type=int, default=0, help="entries to print for judging by hand, flagged and not")
    options = parser.parse_args()
    with open_library(options.library) as library:
        index = load_index(library, Weighting())
        judge = Judge(library, index)
        base, weights, caution, quarantine = BASE_LOG_ODDS, WEIGHTS, CAUTION_FROM, QUARANTINE_FROM
        if options.fit:
            cases = list(collect(judge, True, 4 * options.per_kind, seed=1))
            base, weights = fit(cases)
            weights[REPLICATES] = replicate_weights(judge, cases, 5 * options.per_kind, seed=2)
            caution, quarantine = write_weights(base, weights, cases)
            print(f"fitted on {len(cases):,} cases; thresholds {caution}, {quarantine}: {WEIGHTS_FILE}")
        cases = list(collect(judge, False, options.per_kind, seed=3))
        for title, with_statements in (("whole audit", True), ("spectrum alone", False)):
            for where in ("replicates in the library", "as if measured only once"):
                alone = where.startswith("as if")
                values = [total(case.alone if alone else case.cells, base, weights) for case in cases]
                if with_statements:
                    levels = caution, quarantine
                    values = [with_stated(*pair, *levels, alone) for pair in zip(values, cases, strict=True)]
                show(cases, values, caution, quarantine, f"other half of the compounds, {title}, {where}")
        if options.whole or options.sample:
            report = audit_library(library, index)
            print("\nwhole library:", dict(report.by_proposal))
            print("findings:", dict(report.by_finding))
            for title, audits in draw_sample(report, options.sample, seed=4):
                print(f"\n{title}")
                for audit in audits:
                    print(describe(library, audit))


if __name__ == "__main__":
    main()
