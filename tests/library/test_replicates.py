"""A consensus takes the median over the replicates that could have seen an ion, and says how far they scatter."""

from __future__ import annotations

from pathlib import Path

import pytest
from library_builders import build_record, build_test_library

from identify.errors import UsageError
from identify.library.replicates import build_consensus, find_replicates
from identify.library.store import open_library
from identify.records import Acquisition


def entries_of(path: Path, *spectra: dict[float, float], low: tuple[float | None, ...] = ()):
    records = [
        build_record(
            f"R{number}",
            "Thing",
            peaks,
            formula="C7H8",
            acquisition=Acquisition(ionization="EI", energy_ev=70.0, lowest_mz=low[number] if low else None),
        )
        for number, peaks in enumerate(spectra)
    ]
    build_test_library(path, records)
    with open_library(path) as library:
        return find_replicates(library, *library.get_entries([1]))


def test_median_and_spread_by_hand(tmp_path: Path) -> None:
    """m/z 50 at 10, 20, 60 % of base: median 20, absolute deviations 10, 0, 40, their median 10, times 1.4826."""
    entries = entries_of(
        tmp_path / "a.ionlib", {50: 10.0, 91: 100.0}, {50: 40.0, 91: 200.0}, {50: 0.6, 77: 0.1, 91: 1.0}
    )
    consensus = build_consensus(entries)
    assert consensus.mz.tolist() == [50.0, 91.0]
    assert consensus.intensity == pytest.approx([20.0, 100.0], rel=1e-6)
    assert consensus.spread == pytest.approx([14.826, 0.0], rel=1e-6)
    assert consensus.accessions == ("R0", "R1", "R2")


def test_an_ion_below_the_range_of_a_replicate_is_unknown_there(tmp_path: Path) -> None:
    entries = entries_of(
        tmp_path / "a.ionlib",
        {28: 30.0, 91: 100.0}, {28: 50.0, 91: 100.0}, {91: 100.0}, {91: 100.0}, {91: 100.0},
        low=(20.0, 20.0, 45.0, 45.0, 45.0),
    )  # fmt: skip
    consensus = build_consensus(entries)
    assert consensus.mz.tolist() == [28.0, 91.0]
    assert consensus.n_covering.tolist() == [2.0, 5.0]
    assert consensus.intensity[0] == pytest.approx(40.0)
    assert consensus.spread[0] == pytest.approx(10.0), "half the range for two"


def test_one_entry_or_two_compounds_are_no_replicates(library_path: Path) -> None:
    with open_library(library_path) as library:
        with pytest.raises(UsageError, match="found 1 entries"):
            build_consensus(library.get_entries([1]))
        with pytest.raises(UsageError, match="found 2 entries of 2 compounds"):
            build_consensus(library.get_entries([1, 2]))


def test_low_energy_spectra_are_no_replicates_of_70_ev(tmp_path: Path) -> None:
    peaks = {50: 10.0, 91: 100.0}
    build_test_library(
        tmp_path / "a.ionlib",
        [build_record(f"R{energy}", "Thing", peaks, formula="C7H8", energy_ev=energy) for energy in (70.0, None, 12.0)],
    )
    with open_library(tmp_path / "a.ionlib") as library:
        usual, _, low = library.get_entries([1, 2, 3])
        assert [entry.accession for entry in find_replicates(library, usual)] == ["R70.0", "RNone"]
        assert [entry.accession for entry in find_replicates(library, low)] == ["R12.0"]
