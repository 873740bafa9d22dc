"""Verification recomputes everything and names the first thing that does not agree."""

from __future__ import annotations

import random
import sqlite3
from pathlib import Path

import pytest
from library_builders import build_random_records, build_test_library, move

from identify.errors import IonwitnessError, LibraryVersionError
from identify.library.info import describe_library
from identify.library.store import open_library
from identify.library.verify import verify_library
from identify.records import EntryStatus


def tamper(path: Path, *statements: str) -> None:
    """Change a library as somebody would who knows SQLite: triggers away, change, triggers back."""
    raw = sqlite3.connect(path, isolation_level=None)
    triggers = raw.execute("SELECT name, sql FROM sqlite_master WHERE type = 'trigger'").fetchall()
    for name, _ in triggers:
        raw.execute(f"DROP TRIGGER {name}")
    for statement in statements:
        raw.execute(statement)
    for _, sql in triggers:
        raw.execute(sql)
    raw.close()


def test_an_intact_library_has_no_problem(library_path: Path) -> None:
    move(library_path, 2, EntryStatus.WITHDRAWN)
    report = verify_library(library_path)
    assert report.problems == ()
    assert (report.n_events, report.n_entries, report.exit_code) == (3, 5, 0)


@pytest.mark.parametrize(
    ("statement", "place"),
    [
        ("UPDATE entry SET name = 'Xylene' WHERE id = 3", "entry 3 (TEST-3)"),
        ("UPDATE entry SET energy_ev = 20 WHERE id = 3", "entry 3 (TEST-3)"),
        ("UPDATE entry SET initial_status = 'own standard' WHERE id = 3", "entry 3 (TEST-3)"),
        ("UPDATE source_peaks SET mz = zeroblob(length(mz)) WHERE entry_id = 4", "entry 4 (TEST-4)"),
        ("DELETE FROM source_peaks WHERE entry_id = 4", "entry 4 (TEST-4)"),
        ("UPDATE entry SET compound_id = 1 WHERE id = 2", "entry 2 (TEST-2)"),
        ("UPDATE entry SET content_hash = upper(content_hash) WHERE id = 5", "entry 5 (TEST-5)"),
        ("DELETE FROM entry WHERE id = 5", "event 2"),
        ("UPDATE event SET who = 'B' WHERE seq = 2", "event 2"),
        ("UPDATE event SET content = '{}' WHERE seq = 2", "event 2"),
        ("UPDATE event SET reason = 'x' WHERE seq = 1", "event 1"),
        ("DELETE FROM event WHERE seq = 1", "event 1 is missing"),
        ("UPDATE standing SET status = 'reference'", "entry 2"),
        ("DELETE FROM standing", "entry 2"),
        ("UPDATE compound SET name = 'Heptane' WHERE id = 1", "compound 1"),
        ("UPDATE compound SET key = 'structure X' WHERE id = 1", "entry 1 (TEST-1)"),
        ("CREATE TABLE other (a)", "schema"),
        ("DROP INDEX entry_by_mass", "schema"),
    ],
)
def test_a_change_behind_the_back_is_named(library_path: Path, statement: str, place: str) -> None:
    move(library_path, 2, EntryStatus.WITHDRAWN)
    tamper(library_path, statement)
    report = verify_library(library_path)
    assert report.exit_code == 4
    assert report.problems[0].place == place or any(
        p.place == place and report.problems[0].place == "file" for p in report.problems
    ), [str(p) for p in report.problems]


def test_a_missing_trigger_is_named(library_path: Path) -> None:
    raw = sqlite3.connect(library_path)
    raw.execute("DROP TRIGGER entry_no_update")
    raw.close()
    assert str(verify_library(library_path).problems[0]) == "schema: entry_no_update is missing"


def everything_readable(path: Path) -> list[object]:
    """All a library can return, as plain values."""
    with open_library(path) as library:
        out: list[object] = [library.state(), library.events(), describe_library(library)]
        for entry in library.iter_entries(frozenset(EntryStatus)):
            peaks = entry.spectrum.nominal
            out += [entry.accession, entry.identity, entry.acquisition, entry.retention, entry.status, entry.comments]
            out += [peaks.mz.tolist(), peaks.intensity.tolist(), entry.spectrum.lowest_mz, entry.spectrum.steps]
            out += [entry.licence, entry.authors, entry.source, entry.formula_as_measured, entry.compound_id]
        for record in library.get_records(library.entry_ids(frozenset(EntryStatus))):
            out += [record.mz.tolist(), record.intensity.tolist(), record.extra, record.splash, record.title]
        return out


@pytest.mark.parametrize("n_flips", [300, pytest.param(20_000, marks=pytest.mark.long)])
def test_every_flipped_bit_is_found_or_changes_nothing_that_can_be_read(library_path: Path, n_flips: int) -> None:
    """Bits in unused space of a page mean nothing; every other one must be found."""
    library_path.unlink()
    build_test_library(library_path, build_random_records(80))
    move(library_path, 2, EntryStatus.WITHDRAWN)
    intact, expected = library_path.read_bytes(), everything_readable(library_path)
    chance = random.Random(20250502)
    found = 0
    for _ in range(n_flips):
        data = bytearray(intact)
        position = chance.randrange(len(data))
        data[position] ^= 1 << chance.randrange(8)
        library_path.write_bytes(data)
        try:
            report = verify_library(library_path)
        except IonwitnessError:
            found += 1
            continue
        if report.problems:
            assert str(report.problems[0])
            found += 1
        else:
            assert everything_readable(library_path) == expected, position
    assert found > n_flips // 3


def test_a_newer_schema_version_is_refused_whatever_else_is_in_the_file(library_path: Path) -> None:
    """The version is one number in the file's head: a flipped bit there must not pass for an intact library."""
    data = bytearray(library_path.read_bytes())
    data[60] ^= 1 << 4  # the highest byte of the version, as SQLite's file format lays it
    library_path.write_bytes(data)
    with pytest.raises(LibraryVersionError, match=r"found schema version 268435458, expected version 2\. Update"):
        verify_library(library_path)


def test_info_counts_what_is_there(library_path: Path) -> None:
    move(library_path, 2, EntryStatus.WITHDRAWN)
    with open_library(library_path) as library:
        info = describe_library(library)
    assert info.by_status == {"reference": 4, "withdrawn": 1}
    assert info.by_licence == {"CC BY": 2, "CC BY-SA": 1, "CC0": 1}
    assert info.by_energy == {"70 eV": 3, "not stated": 1}
    assert info.by_derivative == {"2 TMS": 1}
    assert (info.n_labelled, info.n_accurate, info.n_without_structure) == (0, 0, 2)
