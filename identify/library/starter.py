"""The starter library: some hundred compounds an analyst meets, as ions an analyst remembers.

Each entry of ``libraries/starter/*.toml`` lists principal ions as *fragment formula = relative intensity*, from memory and
rounded. Isotope peaks are computed here. The entries show how the program works and name everyday compounds; they are
not measured reference spectra and say so in every record.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from datetime import datetime
from importlib.resources.abc import Traversable
from pathlib import Path
from types import MappingProxyType
from typing import Any, Final

from identify.chem.derivatives import find_derivative, formula_as_measured
from identify.chem.formula import Formula, parse_formula, rings_plus_double_bonds
from identify.chem.isotopes import isotope_pattern
from identify.errors import FormatError, FormulaError, StructureError, quote
from identify.library.build import BuildReport, build_from_records
from identify.library.identities import is_cas_number
from identify.library.shipped import find_shipped
from identify.records import Acquisition, EntryStatus, Identity, Retention, Source, SpectrumRecord, read_only

LABEL: Final = "principal ions from memory, rounded, for demonstration; not reference data"
LICENCE: Final = "CC0"
AUTHORS: Final = "ionwitness developers"
ENERGY_EV: Final = 70.0
DEFAULT_LOWEST_MZ: Final = 26
"""Where the ions of a file begin unless it states `lowest_mz`: air and water stand below."""
SMALLEST_PERCENT: Final = 0.1
"""Computed peaks below this share of the base peak are left out, in percent."""
_FILE_KEYS: Final = MappingProxyType({"class": str, "lowest_mz": int, "compound": list})
_ENTRY_KEYS: Final = MappingProxyType(
    {"name": str, "smiles": str, "cas": str, "derivative": str, "retention_index": int, "ions": str}
)
_ION: Final = re.compile(r"([A-Z][A-Za-z0-9]*(?:\^2\+)?)=(\d{1,3})")


@dataclass(frozen=True, slots=True)
class StarterEntry:
    """One entry of a starter file, checked."""

    file: str
    number: int
    compound_class: str
    name: str
    smiles: str
    cas: str
    derivative: str
    """As measured, `2 TMS`; empty for the compound itself."""
    retention_index: int | None
    """On a non-polar column, from memory, rounded."""
    lowest_mz: int
    formula: Formula
    formula_as_measured: Formula
    ions: tuple[tuple[Formula, int], ...]
    """Ion (charge 0 stands for the usual +1; +2 is stated) and intensity of the tallest peak of its isotope cluster."""

    @property
    def accession(self) -> str:
        """Name of the entry, unique within the starter library."""
        return f"starter: {self.name}" + (f", {self.derivative}" if self.derivative else "")


def starter_entries(folder: Traversable | None = None) -> tuple[StarterEntry, ...]:
    """All entries of the starter library, in order of file name and place in the file.

    Parameters
    ----------
    folder : Traversable, optional
        Folder with ``*.toml`` files; by default the one that comes with the program.

    Returns
    -------
    tuple of StarterEntry

    Raises
    ------
    FormatError
        For a file that is no valid TOML, an unknown or missing key, a wrong type, an ion that is no part of what is
        measured, a strongest ion other than 100, or a name used twice.
    LibraryMissing
        If the shipped folder is not there.

    Examples
    --------
    >>> [str(ion) for ion, intensity in starter_entries()[0].ions if intensity == 100]
    ['C2H3O']
    """
    folder = find_shipped("starter") if folder is None else folder
    files = sorted((file for file in folder.iterdir() if file.name.endswith(".toml")), key=lambda file: file.name)
    entries: list[StarterEntry] = []
    seen: set[str] = set()
    for file in files:
        for entry in _entries_of(file):
            if entry.accession in seen:
                raise _fault(entry.file, entry.name, "the same name and derivative again", "each compound once")
            seen.add(entry.accession)
            entries.append(entry)
    return tuple(entries)


def starter_records() -> tuple[SpectrumRecord, ...]:
    """The starter library as spectra: isotope peaks computed, summed at integer m/z, base peak 100.

    Returns
    -------
    tuple of SpectrumRecord
        Licence CC0; every record carries the comment that it is no reference data.

    Raises
    ------
    FormatError, LibraryMissing
        As `starter_entries`.
    """
    return tuple(record_of(entry) for entry in starter_entries())


def build_starter(path: Path | str, who: str, when: datetime, *, replace: bool = False) -> BuildReport:
    """Report on a new library file made of the starter entries, each with the status `demonstration`.

    Parameters
    ----------
    path : Path or str
    who : str
    when : datetime
        With time zone.
    replace : bool
        Whether a library already there is replaced.

    Returns
    -------
    BuildReport

    Raises
    ------
    FormatError, LibraryMissing
        As `starter_entries`.
    UsageError, LibraryError
        As `identify.library.build.build_from_records`.
    """
    return build_from_records(
        path,
        starter_records(),
        origin="starter library",
        replace=replace,
        who=who,
        when=when,
        reason=LABEL,
        status=EntryStatus.DEMONSTRATION,
    )


def record_of(entry: StarterEntry) -> SpectrumRecord:
    """Spectrum of one entry.

    Parameters
    ----------
    entry : StarterEntry

    Returns
    -------
    SpectrumRecord
        Base peak 100; intensities rounded to 0.01, peaks below `SMALLEST_PERCENT` left out.
    """
    peaks = computed_peaks(entry.ions)
    mz = sorted(mz for mz, intensity in peaks.items() if intensity >= SMALLEST_PERCENT)
    return SpectrumRecord(
        source=Source(f"starter/{entry.file}", number=entry.number),
        mz=read_only(mz),
        intensity=read_only([round(peaks[value], 2) for value in mz]),
        accession=entry.accession,
        title=entry.accession,
        identity=Identity(entry.name, entry.formula.hill, entry.smiles, cas=entry.cas),
        acquisition=Acquisition(
            ionization="EI", energy_ev=ENERGY_EV, ms_level=1, polarity="positive", lowest_mz=float(entry.lowest_mz)
        ),
        retention=_retention_of(entry),
        derivative=entry.derivative,
        licence=LICENCE,
        authors=AUTHORS,
        comments=(LABEL, f"class: {entry.compound_class}"),
    )


def computed_peaks(ions: Iterable[tuple[Formula, float]]) -> dict[int, float]:
    """Integer m/z → intensity of all ions with their isotope clusters, base peak 100.

    Parameters
    ----------
    ions : iterable of (Formula, float)
        Each with the intensity of the tallest peak of its cluster. Of a doubly charged ion only the peaks at whole m/z
        count: the others fall between two integers.

    Returns
    -------
    dict of int to float

    Examples
    --------
    >>> peaks = computed_peaks(((parse_formula("CH3Br"), 100),))
    >>> round(peaks[96], 1), peaks[94]
    (97.3, 100.0)
    """
    total: dict[int, float] = {}
    for ion, intensity in ions:
        pattern = isotope_pattern(ion)
        tallest = float(pattern.ratios.max())
        for step, ratio in enumerate(pattern.ratios):
            mz, half = divmod(pattern.first_mass + step, ion.charge or 1)
            if not half:
                total[mz] = total.get(mz, 0.0) + intensity * float(ratio) / tallest
    top = max(total.values())
    return {mz: 100.0 * value / top for mz, value in total.items()}


def _retention_of(entry: StarterEntry) -> Retention:
    if entry.retention_index is None:
        return Retention()
    return Retention(
        index=float(entry.retention_index), index_kind="linear", column="non-polar, from memory", phase="non-polar"
    )


def _fault(file: str, name: str, found: str, expected: str, what: str = "starter entry") -> FormatError:
    where = file if not name else f"{file} ({name})"
    return FormatError(what, where=where, found=found, expected=expected)


def _entries_of(file: Traversable) -> Iterator[StarterEntry]:
    try:
        content = tomllib.loads(file.read_text(encoding="utf-8"))
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise _fault(file.name, "", str(error), "TOML in UTF-8", "starter file") from None
    _check_keys(content, _FILE_KEYS, {"class", "compound"}, file.name, "")
    for number, table in enumerate(content["compound"], start=1):
        if not isinstance(table, dict):
            raise _fault(file.name, f"entry {number}", quote(table), "a table")
        label = str(table.get("name", f"entry {number}"))
        _check_keys(table, _ENTRY_KEYS, {"name", "smiles", "ions"}, file.name, label)
        yield _entry_of(file.name, number, content, table)


def _check_keys(table: Mapping[str, Any], keys: Mapping[str, type], needed: set[str], file: str, name: str) -> None:
    for key in sorted(needed - table.keys()):
        raise _fault(file, name, f"no '{key}'", f"the keys {', '.join(sorted(needed))}")
    for key, value in table.items():
        if key not in keys:
            raise _fault(file, name, f"key {quote(key)}", "one of " + ", ".join(keys))
        if type(value) is not keys[key]:
            raise _fault(file, name, f"{key} = {quote(value)}", f"a value of type {keys[key].__name__}")


def _entry_of(file: str, number: int, content: Mapping[str, Any], table: Mapping[str, Any]) -> StarterEntry:
    from identify.chem.structures import formula_of

    name, derivative, cas = table["name"], table.get("derivative", ""), table.get("cas", "")
    if cas and not is_cas_number(cas):
        raise _fault(file, name, f"cas {quote(cas)}", "a registry number with a right check digit")
    try:
        formula = formula_of(table["smiles"])
    except StructureError as error:
        raise _fault(file, name, error.found or "a structure", "a SMILES that can be read") from None
    measured: Formula | None = formula
    if derivative:
        groups = find_derivative(derivative)
        measured = None if groups is None else formula_as_measured(formula, groups)
        if measured is None or str(groups) != derivative:
            raise _fault(file, name, f"derivative {quote(derivative)}", "the normal form, such as '2 TMS'")
    assert measured is not None
    lowest_mz = content.get("lowest_mz", DEFAULT_LOWEST_MZ)
    return StarterEntry(
        file=file,
        number=number,
        compound_class=content["class"],
        name=name,
        smiles=table["smiles"],
        cas=cas,
        derivative=derivative,
        retention_index=table.get("retention_index"),
        lowest_mz=lowest_mz,
        formula=formula,
        formula_as_measured=measured,
        ions=_ions_of(file, name, table["ions"], measured, lowest_mz),
    )


def _ions_of(file: str, name: str, text: str, measured: Formula, lowest_mz: int) -> tuple[tuple[Formula, int], ...]:
    ions: dict[Formula, int] = {}
    for token in text.split():
        match = _ION.fullmatch(token)
        if not match:
            raise _fault(file, name, quote(token), "ions as formula=intensity, such as C7H7=100")
        try:
            ion = parse_formula(match[1])
        except FormulaError as error:
            raise _fault(file, name, f"{quote(token)} ({error.found})", "a formula") from None
        intensity = int(match[2])
        if not 1 <= intensity <= 100:
            raise _fault(file, name, quote(token), "an intensity from 1 to 100")
        if ion in ions:
            raise _fault(file, name, f"{quote(token)} again", "each ion once")
        if not measured.contains(ion):
            raise _fault(file, name, quote(token), f"a part of {measured.hill}")
        if rings_plus_double_bonds(ion) < -0.5:
            raise _fault(file, name, quote(token), "an ion with at least -0.5 rings plus double bonds")
        if ion.nominal_mass < lowest_mz * (ion.charge or 1):
            raise _fault(file, name, quote(token), f"no ion below m/z {lowest_mz}")
        ions[ion] = intensity
    if max(ions.values(), default=0) != 100:
        raise _fault(file, name, f"a strongest ion of {max(ions.values(), default=0)}", "100")
    return tuple(ions.items())
