"""The invented case that `ionwitness demo` plays, made from chemistry: run this file to write `fixtures/demo/unknowns`.

    python tests/make_demo_case.py

Nothing in it was measured: the place, the people, the samples and the spectra are made up. Ions come from the starter
entries, or for the two compounds missing there from general knowledge of their fragmentation; isotope peaks are computed.
Then every spectrum is disturbed as a real one would be (scatter, mass discrimination, a detection limit, noise, bleed,
air, a second compound, a scan that starts late). The random numbers are seeded by the file name and made with plain
arithmetic, so the same bytes come out everywhere; `tests/test_demo_case.py` checks that.
"""

from __future__ import annotations

import random
import sys
from collections.abc import Callable
from dataclasses import dataclass, field
from functools import lru_cache
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
if __name__ == "__main__":
    sys.path.insert(0, str(ROOT))

from identify.chem.formula import Formula, parse_formula  # noqa: E402
from identify.chem.isotopes import fine_isotope_pattern  # noqa: E402
from identify.library.starter import computed_peaks, starter_entries  # noqa: E402

FOLDER = ROOT / "fixtures" / "demo" / "unknowns"
COLUMN = "5 % phenyl methyl silicone, 30 m x 0.25 mm x 0.25 um"
INVENTED = "invented for the ionwitness demonstration; nothing here was measured"
LICENCE = "CC0"

COUMAPHOS = """
C14H16ClO5PS=100 C12H12ClO5PS=24 C10H8ClO5PS=15 C10H7ClO2S=60 C10H7ClO3=40 C9H7ClOS=10 C9H7ClO2=20 C9H6ClO2=8 C9H7O2=8
C2H6O3P=68 C2H6O2PS=26 H2O2PS=45 C7H5=10 C6H5=8 H2O2P=14 C5H3=8 C4H3=8 PO=6 C2H5=15 C2H3=12 C4H10O2PS=7 C9H6ClO=6
C8H6O=6 H2O3P=6 C3H3=7 C8H7O=5"""
OCTINOXATE = """
C18H26O3=12 C10H11O3=8 C10H10O3=100 C10H9O2=58 C9H9O=18 C9H10O=8 C8H9O=8 C8H6O=5 C9H7O2=3 C8H7O2=3 C7H6=6 C7H5=5
C6H5=6 C5H11=5 C5H10=4 C4H9=9 C4H7=5 C3H7=7 C3H5=7 C2H5=4 C5H3=3 C4H3=3 C8H16=2 C7H7O=3 C9H5O=2"""
"""Principal ions of two compounds the starter library lacks, from memory: an acaricide and a sunscreen filter."""

BLEED = "C5H15O3Si3=100 C7H21O4Si4=55 C3H9Si=40 C9H27O5Si5=18 C4H13O3Si3=10 C6H17O4Si4=8 C11H33O6Si6=9 C3H9O2Si2=6"
AIR = {17: 6.0, 18: 26.0, 28: 60.0, 32: 14.0, 40: 1.5, 44: 3.0}
PEAK_SCATTER = 0.03
"""Relative standard deviation of one peak of an isotope cluster, on top of counting noise."""
Peaks = list[tuple[float, float]]


class Dice:
    """Random numbers from plain arithmetic on `random.random`, whose sequence Python guarantees."""

    def __init__(self, seed: str) -> None:
        self._random = random.Random(seed)

    def uniform(self, low: float, high: float) -> float:
        return low + (high - low) * self._random.random()

    def normal(self) -> float:
        """Nearly standard normal: twelve uniform numbers, centred."""
        return sum(self._random.random() for _ in range(12)) - 6.0


@dataclass(frozen=True)
class Unknown:
    """One spectrum of the case and what was done to it."""

    file: str
    title: str
    parts: tuple[tuple[str, float], ...]
    """Starter accession without its prefix, or a name in `OWN_IONS`, and its share."""
    retention_index: int | None = None
    scatter: float = 0.20
    """Relative standard deviation of every ion against the entry; its isotope peaks go with it (`PEAK_SCATTER` between them)."""
    tilt: float = 0.0
    """Mass discrimination: relative loss (or gain) towards high m/z over 200 Da."""
    limit: float = 0.4
    """Peaks below this share of the base peak are not seen, in percent."""
    noise: tuple[int, float] = (0, 0.0)
    """Number of stray peaks, and the height of the highest in percent."""
    bleed: float = 0.0
    """Height of m/z 207 in percent of the base peak."""
    air: float = 0.0
    """Height of residual air relative to the table `AIR`."""
    lowest_mz: int = 33
    base_counts: int = 100_000
    details: tuple[tuple[str, str], ...] = field(default=())


OWN_IONS = {"coumaphos": COUMAPHOS, "octinoxate": OCTINOXATE}


def parse_ions(text: str) -> tuple[tuple[Formula, int], ...]:
    pairs = (token.split("=") for token in text.split())
    return tuple((parse_formula(ion), int(intensity)) for ion, intensity in pairs)


@lru_cache(maxsize=1)
def library_ions() -> dict[str, tuple[tuple[Formula, int], ...]]:
    return {entry.accession.removeprefix("starter: "): entry.ions for entry in starter_entries()}


def ions_of(name: str) -> tuple[tuple[Formula, int], ...]:
    if name in OWN_IONS:
        return parse_ions(OWN_IONS[name])
    return library_ions()[name]


def scattered(dice: Dice, deviation: float) -> float:
    return max(0.05, 1.0 + deviation * dice.normal())


def disturbed(unknown: Unknown) -> Peaks:
    """Integer m/z and counts of one unknown."""
    dice = Dice(unknown.file)
    mixed: dict[int, float] = {}
    for name, share in unknown.parts:
        ions = tuple((ion, value * scattered(dice, unknown.scatter)) for ion, value in ions_of(name))
        for mz, intensity in computed_peaks(ions).items():
            mixed[mz] = mixed.get(mz, 0.0) + share * intensity
    if unknown.bleed:
        for mz, intensity in computed_peaks(parse_ions(BLEED)).items():
            mixed[mz] = mixed.get(mz, 0.0) + unknown.bleed * intensity / 100
    seen = {}
    for mz in sorted(mixed):
        counting = (100 / (unknown.base_counts * mixed[mz])) ** 0.5
        factor = scattered(dice, PEAK_SCATTER + counting) * max(0.1, 1.0 - unknown.tilt * (mz - 100) / 200)
        seen[mz] = mixed[mz] * factor
    n_stray, height = unknown.noise
    top = max(seen)
    for _ in range(n_stray):
        mz = int(dice.uniform(unknown.lowest_mz, top + 60))
        seen[mz] = seen.get(mz, 0.0) + dice.uniform(0.25, 1.0) * height
    for mz, intensity in AIR.items():
        if unknown.air:
            seen[mz] = seen.get(mz, 0.0) + unknown.air * intensity
    base = max(seen.values())
    counts = {mz: round(unknown.base_counts * value / base) for mz, value in seen.items()}
    floor = unknown.base_counts * unknown.limit / 100
    return [(mz, counts[mz]) for mz in sorted(counts) if mz >= unknown.lowest_mz and counts[mz] >= max(1.0, floor)]


def disturbed_accurate(unknown: Unknown, error_ppm: float = 2.5) -> Peaks:
    """Accurate m/z with a random error, isotope peaks of one nominal mass merged when the analyser could not part them."""
    dice = Dice(unknown.file)
    ((name, _),) = unknown.parts
    lines: Peaks = []
    for ion, written in ions_of(name):
        intensity = written * scattered(dice, unknown.scatter)
        charged = Formula(ion.counts, ion.charge or 1)
        masses, fractions = fine_isotope_pattern(charged, 2e-3)
        tallest = max(fractions)
        for mass, fraction in zip(masses.tolist(), fractions.tolist(), strict=True):
            lines.append((mass / charged.charge, intensity * fraction / tallest))
    merged: Peaks = []
    for mz, intensity in sorted(lines):
        if merged and mz - merged[-1][0] < 0.006:
            old_mz, old = merged[-1]
            merged[-1] = ((old_mz * old + mz * intensity) / (old + intensity), old + intensity)
        else:
            merged.append((mz, intensity))
    moved = [
        (mz * (1 + error_ppm * 1e-6 * dice.normal()), intensity * scattered(dice, PEAK_SCATTER))
        for mz, intensity in merged
    ]
    base = max(intensity for _, intensity in moved)
    scaled = [(round(mz, 4), round(unknown.base_counts * intensity / base)) for mz, intensity in moved]
    floor = unknown.base_counts * unknown.limit / 100
    return [(mz, counts) for mz, counts in scaled if mz >= unknown.lowest_mz and counts >= floor]


def retention_time_min(index: int) -> float:
    """Minutes of an invented programme: straight from index 400 at 2.1 min, 75 units per minute."""
    return 2.1 + (index - 400) / 75


def as_jcamp(unknown: Unknown, peaks: Peaks) -> str:
    lines = [
        f"##TITLE= {unknown.title}",
        "##JCAMP-DX= 5.00",
        "##DATA TYPE= MASS SPECTRUM",
        "##DATA CLASS= PEAK TABLE",
        "##ORIGIN= ionwitness developers",
        f"##OWNER= {LICENCE}",
        f"$$ {INVENTED}",
        "##.IONIZATION MODE= EI+",
        "##.IONIZATION ENERGY= 70",
        "##.INLET= GC",
    ]
    if unknown.retention_index is not None:
        lines += [
            f"##.RETENTION TIME= {retention_time_min(unknown.retention_index):.2f} min",
            f"##$RETENTION INDEX= {unknown.retention_index}",
            f"##$COLUMN= {COLUMN}",
        ]
    lines += ["##XUNITS= M/Z", "##YUNITS= COUNTS", f"##NPOINTS= {len(peaks)}", "##PEAK TABLE= (XY..XY)"]
    pairs = [f"{mz_text(mz)},{counts}" for mz, counts in peaks]
    lines += [" ".join(pairs[start : start + 8]) for start in range(0, len(pairs), 8)]
    return "\n".join([*lines, "##END=", ""])


def as_name_value(unknown: Unknown, peaks: Peaks) -> str:
    lines = [
        f"Name: {unknown.title}",
        "Ionization: EI",
        "Ionization energy: 70 eV",
        "Instrument type: GC-EI-Q",
        f"License: {LICENCE}",
        "Authors: ionwitness developers",
        f"Comments: {INVENTED}",
    ]
    if unknown.retention_index is not None:
        lines += [
            f"Retention time: {retention_time_min(unknown.retention_index):.2f} min",
            f"Retention index: {unknown.retention_index}",
            f"Column: {COLUMN}",
        ]
    lines += [f"Num Peaks: {len(peaks)}"]
    pairs = [f"{mz_text(mz)} {counts};" for mz, counts in peaks]
    return "\n".join(lines + [" ".join(pairs[start : start + 6]) for start in range(0, len(pairs), 6)]) + "\n"


def as_csv(unknown: Unknown, peaks: Peaks) -> str:
    lines = [f"# {INVENTED}", f"title: {unknown.title}"]
    if unknown.retention_index is not None:
        lines += [
            f"retention time (min): {retention_time_min(unknown.retention_index):.2f}",
            f"retention index: {unknown.retention_index}",
            f"column: {COLUMN}",
        ]
    return "\n".join([*lines, "m/z,intensity", *(f"{mz_text(mz)},{counts}" for mz, counts in peaks)]) + "\n"


def as_open_record(unknown: Unknown, peaks: Peaks) -> str:
    number = unknown.file[:2]
    base = max(counts for _, counts in peaks)
    details = dict(unknown.details)
    lines = [
        f"ACCESSION: INVNT-Demo-DEMO{number}",
        f"RECORD_TITLE: {unknown.title}; {details['type']}; MS; 70 eV",
        "DATE: 2025.01.01",
        "AUTHORS: ionwitness developers",
        f"LICENSE: {LICENCE}",
        f"COMMENT: {INVENTED}",
        f"CH$NAME: {unknown.title}",
        "CH$COMPOUND_CLASS: N/A",
        "CH$FORMULA: N/A",
        "CH$EXACT_MASS: 0",
        "CH$SMILES: N/A",
        "CH$IUPAC: N/A",
        "AC$INSTRUMENT: invented instrument",
        f"AC$INSTRUMENT_TYPE: {details['type']}",
        "AC$MASS_SPECTROMETRY: MS_TYPE MS",
        "AC$MASS_SPECTROMETRY: ION_MODE POSITIVE",
        "AC$MASS_SPECTROMETRY: IONIZATION EI",
        "AC$MASS_SPECTROMETRY: IONIZATION_ENERGY 70 eV",
    ]
    if unknown.retention_index is not None:
        lines += [
            f"AC$CHROMATOGRAPHY: COLUMN_NAME {COLUMN}",
            f"AC$CHROMATOGRAPHY: RETENTION_INDEX {unknown.retention_index}",
            f"AC$CHROMATOGRAPHY: RETENTION_TIME {retention_time_min(unknown.retention_index):.2f} min",
        ]
    lines += [f"PK$SPLASH: {splash(peaks)}", f"PK$NUM_PEAK: {len(peaks)}", "PK$PEAK: m/z int. rel.int."]
    lines += [f"  {mz_text(mz)} {counts} {max(1, round(999 * counts / base))}" for mz, counts in peaks]
    return "\n".join([*lines, "//", ""])


def mz_text(mz: float) -> str:
    """Integers bare, accurate m/z with four decimals."""
    return str(mz) if isinstance(mz, int) else f"{mz:.4f}"


def splash(peaks: Peaks) -> str:
    import numpy as np

    from identify.spectra.splash import compute_splash

    mz, counts = zip(*peaks, strict=True)
    return compute_splash(np.array(mz, dtype=np.float64), np.array(counts, dtype=np.float64))


WRITERS: dict[str, Callable[[Unknown, Peaks], str]] = {
    ".jdx": as_jcamp,
    ".msp": as_name_value,
    ".csv": as_csv,
    ".txt": as_open_record,
}
"""Suffix → format; the readers look at the content, not at the suffix."""

CASE = (
    Unknown("01-drum-air.jdx", "drum, air above the liquid, peak 1", (("dichloromethane", 1),), 531, scatter=0.12),
    Unknown(
        "02-drum-air.csv", "drum, air above the liquid, peak 4", (("2,2,4-trimethylpentane", 1),), 692, air=0.5,
        lowest_mz=15,
    ),
    Unknown("03-drum-liquid.csv", "drum, liquid 1:1000, peak 2", (("m-xylene", 1),), scatter=0.15, tilt=0.1),
    Unknown(
        "04-drum-liquid.msp", "drum, liquid 1:1000, peak 5", (("limonene", 1),), 1033, noise=(70, 2.5),
        base_counts=3_000, limit=0.0, lowest_mz=35,
    ),
    Unknown("05-drum-liquid.jdx", "drum, liquid 1:1000, peak 6", (("N-methyl-2-pyrrolidone", 1),), 1043, tilt=0.2),
    Unknown("06-drum-label.jdx", "drum, scrapings where the label was, peak 9", (("p,p'-DDE", 1),), 2187, tilt=-0.15),
    Unknown(
        "07-soil-20cm.msp", "soil beside the drum, 0-20 cm, peak 11", (("naphthalene", 0.62), ("dodecane", 0.38)), 1192,
        scatter=0.15,
    ),
    Unknown(
        "08-soil-20cm.msp", "soil beside the drum, 0-20 cm, peak 31", (("fluoranthene", 1),), 2066, bleed=32.0,
        scatter=0.09, lowest_mz=45,
    ),
    Unknown(
        "09-soil-20cm.txt", "soil beside the drum, 0-20 cm, peak 24", (("lindane", 1),), 1776, noise=(25, 1.2),
        lowest_mz=45, details=(("type", "GC-EI-Q"),),
    ),
    Unknown(
        "10-soil-60cm.csv", "soil beside the drum, 40-60 cm, peak 17", (("metolachlor", 1),), 1946, lowest_mz=100,
    ),
    Unknown(
        "11-hose-rinse.msp", "rinse of the pump hose, peak 20", (("bis(2-ethylhexyl) phthalate", 1),), 2546, limit=0.8,
        tilt=0.15, lowest_mz=40,
    ),
    Unknown(
        "12-hose-rinse.txt", "rinse of the pump hose, accurate mass, peak 8", (("benzothiazole", 1),), 1229,
        scatter=0.15, limit=0.3, lowest_mz=40, details=(("type", "GC-EI-TOF"),),
    ),
    Unknown(
        "13-wax-silylated.msp", "wax crumbs from the drum lid, silylated, peak 14", (("palmitic acid, 1 TMS", 1),), 2049,
        tilt=-0.1, lowest_mz=50,
    ),
    Unknown("14-wax.jdx", "wax crumbs from the drum lid, peak 3", (("thymol", 1),), noise=(12, 0.8)),
    Unknown("15-wax.csv", "wax crumbs from the drum lid, peak 22", (("coumaphos", 1),), 2580, lowest_mz=45),
    Unknown(
        "16-glove.jdx", "wipe of the glove found on the drum, peak 19", (("octinoxate", 1),), 2320, lowest_mz=40,
    ),
    Unknown(
        "17-glove.csv", "wipe of the glove found on the drum, peak 12", (("DEET", 1),), 1574, scatter=0.3,
        base_counts=400, limit=1.5, noise=(15, 2.0), lowest_mz=40,
    ),
)  # fmt: skip


def make_case() -> dict[str, str]:
    """File name → content of every unknown."""
    made = {}
    for unknown in CASE:
        accurate = dict(unknown.details).get("type") == "GC-EI-TOF"
        peaks = disturbed_accurate(unknown) if accurate else disturbed(unknown)
        made[unknown.file] = WRITERS[Path(unknown.file).suffix](unknown, peaks)
    return made


if __name__ == "__main__":
    FOLDER.mkdir(parents=True, exist_ok=True)
    for name, content in make_case().items():
        (FOLDER / name).write_text(content, encoding="utf-8", newline="\n")
        print(f"{name}: {len(content)} bytes")
