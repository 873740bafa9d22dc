"""Entries come back as they went in; opening says exactly what is wrong."""

from __future__ import annotations

import shutil
import sqlite3
import subprocess
import threading
from pathlib import Path

import numpy as np
import pytest
from library_builders import TOLUENE, WHEN, build_record, build_records, build_test_library, move

from identify.errors import (
    LibraryBusy,
    LibraryConflict,
    LibraryDamaged,
    LibraryError,
    LibraryMissing,
    LibraryVersionError,
    UsageError,
)
from identify.library import connection
from identify.library.backup import backup_library
from identify.library.calibration import read_calibration
from identify.library.connection import connect, file_system_of
from identify.library.events import append_event
from identify.library.schema import SCHEMA_VERSION
from identify.library.standing import entry_history
from identify.library.store import open_library
from identify.records import EntryStatus


def test_an_entry_holds_what_the_record_said(library_path: Path) -> None:
    with open_library(library_path) as library:
        (entry,) = library.get_entries([1])
        (record,) = library.get_records([1])
    original = build_records()[0]
    assert entry.identity == original.identity
    assert entry.acquisition == original.acquisition
    assert (entry.licence, entry.authors, entry.status) == ("CC BY", "B. Beispiel", EntryStatus.REFERENCE)
    assert dict(zip(entry.spectrum.nominal.mz, entry.spectrum.nominal.intensity, strict=True)) == TOLUENE
    assert entry.spectrum.steps
    assert np.array_equal(record.mz, original.mz)
    assert np.array_equal(record.intensity, original.intensity)
    assert (record.accession, record.title, record.derivative) == ("TEST-1", "Toluene", "")


def test_source_peaks_survive_in_file_order_and_full_precision(tmp_path: Path) -> None:
    peaks = {91.05423: 1234.56789012345, 65.03858: 0.1, 39.02293: 17.0}
    build_test_library(tmp_path / "a.ionlib", [build_record("X", "Toluene", peaks)])
    with open_library(tmp_path / "a.ionlib") as library:
        (record,) = library.get_records([1])
        (entry,) = library.get_entries([1])
    assert dict(zip(record.mz, record.intensity, strict=True)) == peaks
    assert entry.spectrum.accurate is not None
    assert entry.spectrum.accurate.mz.tolist() == sorted(peaks)


def test_entries_come_in_the_order_asked_for(library_path: Path) -> None:
    with open_library(library_path) as library:
        assert [entry.id for entry in library.get_entries([4, 1, 4])] == [4, 1, 4]
        with pytest.raises(LibraryError, match="found no entry 99, expected a known id"):
            library.get_entries([1, 99])


def test_stereo_and_replicates_share_a_compound_and_nothing_else_does(library_path: Path) -> None:
    with open_library(library_path) as library:
        by_accession = {entry.accession: entry.compound_id for entry in library.iter_entries()}
    assert by_accession["TEST-1"] == by_accession["TEST-3"]
    assert len(set(by_accession.values())) == 4


def test_entries_are_found_by_what_is_known_of_them(library_path: Path) -> None:
    with open_library(library_path) as library:

        def found(**conditions: object) -> list[str]:
            return [entry.accession for entry in library.find_entries(**conditions)]  # type: ignore[arg-type]

        assert found(name="tolu") == ["TEST-1", "TEST-3"]
        assert found(name="%") == []
        assert found(formula="C6H6") == ["TEST-2"]
        assert found(nominal_mass=92, name="toluene") == ["TEST-1", "TEST-3"]
        assert found(inchikey="UHOVQNZJYSORNB") == ["TEST-2"]
        assert found(accession="TEST-4") == ["TEST-4"]
        with pytest.raises(UsageError, match="no condition"):
            found()


def test_the_state_counts_entries_and_compounds(library_path: Path) -> None:
    with open_library(library_path) as library:
        state = library.state()
        assert (state.entries, state.compounds, state.path) == (5, 4, str(library_path))
        assert state.fingerprint == library.events()[-1].hash


def test_another_process_s_change_is_seen_at_once(library_path: Path) -> None:
    with open_library(library_path) as library:
        assert library.get_entries([2])[0].status is EntryStatus.REFERENCE
        before = library.fingerprint
        move(library_path, 2, EntryStatus.WITHDRAWN)
        assert library.get_entries([2])[0].status is EntryStatus.WITHDRAWN
        assert library.fingerprint != before
        assert (library.state().entries, library.state().compounds) == (4, 3)
        assert library.entry_ids() == [1, 3, 4, 5]
        assert library.entry_ids({EntryStatus.WITHDRAWN}) == [2]
        assert library.find_entries(accession="TEST-2") == []


def test_as_of_shows_the_library_as_it_stood(library_path: Path) -> None:
    with open_library(library_path) as library:
        before = library.fingerprint
    move(library_path, 2, EntryStatus.WITHDRAWN)
    for event in (2, before, before[:8]):
        with open_library(library_path, as_of=event) as library:
            assert library.fingerprint == before
            assert library.state().entries == 5
            assert library.get_entries([2])[0].status is EntryStatus.REFERENCE
    with pytest.raises(UsageError, match="0 events for '77'"):
        open_library(library_path, as_of=77)


def test_as_of_takes_a_hash_that_begins_with_digits_only(library_path: Path) -> None:
    # One hash in forty does; its first eight digits once counted as the number of an event that is not there.
    with open_library(library_path, writable=True) as library:
        for number in range(1000):
            with library.writing() as raw:
                append_event(raw, kind="noted", who="tester", when=WHEN, reason=str(number), content={})
            wanted = library.fingerprint
            if wanted[:8].isdecimal():
                break
    assert wanted[:8].isdecimal(), "no such hash among a thousand"
    with open_library(library_path, as_of=wanted[:8]) as library:
        assert library.fingerprint == wanted


def test_an_event_whose_content_is_no_object_is_damage(library_path: Path) -> None:
    for number, content in enumerate(("no JSON", "[1]", "[" * 100_000)):
        path = library_path.with_name(f"{number}.ionlib")
        shutil.copy(library_path, path)
        raw = sqlite3.connect(path)
        raw.execute("DROP TRIGGER event_no_update")
        raw.execute("UPDATE event SET content = ? WHERE seq = 2", (content,))
        raw.commit()
        raw.close()
        with open_library(path) as library, pytest.raises(LibraryDamaged, match="event 2 with content that is no JSON"):
            entry_history(library, "TEST-1")


def test_a_library_without_events_is_an_error_and_no_bug(library_path: Path) -> None:
    raw = sqlite3.connect(library_path)
    raw.execute("DROP TRIGGER event_no_delete")
    raw.execute("DELETE FROM event")
    raw.commit()
    raw.close()
    with open_library(library_path) as library:
        for name in ("fingerprint", "search_fingerprint"):
            with pytest.raises(LibraryError, match="no event"):
                getattr(library, name)


def test_a_calibration_with_a_number_beyond_all_bounds_is_refused(library_path: Path) -> None:
    content = {"sharpness": 10**400, "unlisted": 0.0, "elsewhere": 0.0, "note": "forged"}
    with open_library(library_path, writable=True) as library:
        with library.writing() as raw:
            append_event(raw, kind="calibrated", who="tester", when=WHEN, reason="forged", content=content)
        with pytest.raises(LibraryError, match="calibration"):
            read_calibration(library)


def test_a_name_that_no_file_can_have_is_an_error_and_no_bug(library_path: Path) -> None:
    endless = library_path.with_name("a" * 300)
    for use in (
        lambda: open_library(endless),
        lambda: build_test_library(endless),
        lambda: backup_library(library_path, endless),
    ):
        with pytest.raises(LibraryError, match="file name too long, expected the name of a file"):
            use()


def test_a_number_beyond_64_bits_is_an_error_and_no_bug(library_path: Path) -> None:
    with open_library(library_path) as library:
        for use in (lambda: library.find_entries(nominal_mass=2**70), lambda: library.get_entries([2**70])):
            with pytest.raises(LibraryError, match="expected numbers of 64 bits"):
                use()


def test_what_others_commit_does_not_show_within_a_read(library_path: Path) -> None:
    with open_library(library_path) as library:
        before = library.state()
        with library.reading():
            move(library_path, 2, EntryStatus.WITHDRAWN)
            assert library.state() == before
            assert library.entry_ids() == [1, 2, 3, 4, 5]
            assert library.get_entries([2])[0].status is EntryStatus.REFERENCE
        assert library.state().entries == 4
        assert library.fingerprint != before.fingerprint
        assert library.get_entries([2])[0].status is EntryStatus.WITHDRAWN


def test_a_library_serves_several_threads(library_path: Path) -> None:
    failures: list[BaseException] = []

    def read() -> None:
        try:
            for _ in range(50):
                assert len(library.get_entries([1, 2, 3, 4, 5])) == 5
                assert len(list(library.iter_entries())) == 5
        except BaseException as error:
            failures.append(error)

    with open_library(library_path) as library:
        threads = [threading.Thread(target=read) for _ in range(4)]
        for thread in threads:
            thread.start()
        for thread in threads:
            thread.join()
    assert failures == []


# Opening: one message each.


def test_a_missing_library_says_how_to_get_one(tmp_path: Path) -> None:
    with pytest.raises(LibraryMissing) as caught:
        open_library(tmp_path / "none.ionlib")
    assert str(caught.value) == (
        f"library in {tmp_path / 'none.ionlib'}: found no file, expected a library."
        " Build one with `ionwitness library build`, or see it work with `ionwitness demo`."
    )


@pytest.mark.parametrize(
    ("content", "found"), [(b"", "an empty file"), (b"PK\x03\x04 something else", "a file of another kind")]
)
def test_what_is_no_library_is_refused(tmp_path: Path, content: bytes, found: str) -> None:
    path = tmp_path / "x.ionlib"
    path.write_bytes(content)
    with pytest.raises(LibraryError) as caught:
        open_library(path)
    assert str(caught.value) == (
        f"library in {path}: found {found}, expected a library. Build one from spectra with `ionwitness library build`."
    )


def test_another_program_s_database_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "x.ionlib"
    other = sqlite3.connect(path)
    other.execute("CREATE TABLE t (a)")
    other.close()
    with pytest.raises(LibraryError, match="found an SQLite file of another program, expected a library"):
        open_library(path)


def test_a_newer_schema_is_refused_with_both_versions(library_path: Path) -> None:
    other = sqlite3.connect(library_path)
    other.execute(f"PRAGMA user_version = {SCHEMA_VERSION + 1}")
    other.close()
    with pytest.raises(LibraryVersionError) as caught:
        open_library(library_path)
    assert str(caught.value) == (
        f"library in {library_path}: found schema version {SCHEMA_VERSION + 1}, expected version {SCHEMA_VERSION}."
        " Update ionwitness to open it."
    )


def test_a_truncated_library_is_damaged(library_path: Path) -> None:
    data = library_path.read_bytes()
    library_path.write_bytes(data[: len(data) // 2])
    with pytest.raises(LibraryDamaged, match="expected an intact file"), open_library(library_path) as library:
        list(library.iter_entries())


def test_a_second_writer_waits_and_then_says_so(library_path: Path) -> None:
    first = connect(library_path, writable=True)
    first.execute("BEGIN IMMEDIATE")
    try:
        with open_library(library_path, writable=True, busy_timeout_s=0.05) as library:
            with pytest.raises(LibraryBusy) as caught, library.writing():
                pass
            assert library.state().entries == 5, "readers are not disturbed"
    finally:
        first.close()
    assert str(caught.value) == (
        f"library in {library_path}: found another process writing to it, expected a free library."
        " Wait until the other process has finished, then try again."
    )


def test_a_library_open_for_reading_cannot_be_written(library_path: Path) -> None:
    with open_library(library_path) as library:
        with pytest.raises(UsageError, match="opened for reading"), library.writing():
            pass
        with pytest.raises(LibraryError, match="found a read-only file"), library.reading() as raw:
            raw.execute("DELETE FROM source_peaks")


def test_a_failed_change_leaves_nothing(library_path: Path) -> None:
    with open_library(library_path, writable=True) as library:
        before = library.fingerprint
        with pytest.raises(ZeroDivisionError), library.writing() as raw:
            append_event(raw, kind="x", who="A", when=WHEN, reason="", content={})
            raise ZeroDivisionError
        assert library.fingerprint == before


@pytest.mark.parametrize("table", ["event", "entry", "compound", "source_peaks", "standing"])
def test_nothing_written_can_be_changed_or_removed(library_path: Path, table: str) -> None:
    move(library_path, 2, EntryStatus.WITHDRAWN)
    column = "entry_id" if table in ("source_peaks", "standing") else ("seq" if table == "event" else "id")
    for statement in (f"UPDATE {table} SET {column} = {column}", f"DELETE FROM {table}"):
        with (
            open_library(library_path, writable=True) as library,
            pytest.raises(LibraryConflict, match="append-only"),
            library.writing() as raw,
        ):
            raw.execute(statement)


def test_a_library_whose_rules_were_taken_away_is_not_written(library_path: Path) -> None:
    raw = sqlite3.connect(library_path)
    raw.execute("DROP TRIGGER entry_no_update")
    raw.close()
    with pytest.raises(LibraryDamaged, match="found entry_no_update, which is missing"):
        open_library(library_path, writable=True)
    with open_library(library_path) as library:
        assert library.state().entries == 5


def test_a_network_share_is_refused_for_writing_only(library_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    mounts = library_path.parent / "mounts"
    mounts.write_text(f"/dev/sda1 / ext4 rw 0 0\nserver:/x {library_path.parent} nfs4 rw 0 0\n")
    monkeypatch.setattr(connection, "_MOUNTS", mounts)
    assert file_system_of(library_path) == "nfs4"
    with pytest.raises(LibraryError) as caught:
        open_library(library_path, writable=True)
    assert "found a network share (nfs4), expected a local disk for writing" in str(caught.value)
    assert "keep the library on a local disk and share copies" in str(caught.value)
    with open_library(library_path) as library:
        assert library.state().entries == 5


def test_reading_leaves_no_files_behind(library_path: Path) -> None:
    with open_library(library_path) as library:
        list(library.iter_entries())
    assert [found.name for found in library_path.parent.iterdir()] == [library_path.name]


def test_read_only_media_can_be_read_and_refuse_to_be_written(library_path: Path, tmp_path: Path) -> None:
    mount = shutil.which("mount")
    point = tmp_path / "media"
    point.mkdir()
    if not mount or subprocess.run([mount, "-t", "tmpfs", "tmpfs", point], capture_output=True).returncode:
        pytest.skip("needs the right to mount a small file system")
    try:
        shutil.copy(library_path, point / "a.ionlib")
        subprocess.run([mount, "-o", "remount,ro", point], check=True)
        with open_library(point / "a.ionlib") as library:
            assert library.state().entries == 5
            assert len(list(library.iter_entries())) == 5
        with pytest.raises(LibraryError) as caught:
            open_library(point / "a.ionlib", writable=True)
        assert str(caught.value) == (
            f"library in {point / 'a.ionlib'}: found a read-only file or folder, expected write access."
            " Copy the library to a folder you may write to."
        )
    finally:
        subprocess.run(["umount", point], check=True)
