"""Folders and archives: order, provenance, bounds, tricks, damage."""

from __future__ import annotations

import gzip
import io
import os
import struct
import tarfile
import zipfile
from pathlib import Path

import numpy as np
import pytest

from identify.errors import FormatError, InputError
from identify.readers import containers, read_spectra
from identify.records import Rejection, SpectrumRecord
from tests.readers.format_samples import PAIRS, massbank, msp


def read(path: Path) -> tuple[list[SpectrumRecord], list[Rejection]]:
    rejected: list[Rejection] = []
    return list(read_spectra(path, rejected.append)), rejected


def write_zip(path: Path, members: dict[str, str], compression: int = zipfile.ZIP_DEFLATED) -> Path:
    with zipfile.ZipFile(path, "w", compression) as archive:
        for name, text in members.items():
            archive.writestr(name, text)
    return path


def write_tar(path: Path, members: dict[str, str], mode: str = "w:gz") -> Path:
    with tarfile.open(path, mode) as archive:  # type: ignore[call-overload]
        for name, text in members.items():
            info = tarfile.TarInfo(name)
            info.size = len(text.encode())
            archive.addfile(info, io.BytesIO(text.encode()))
    return path


MEMBERS = {"release/b/two.txt": massbank(PAIRS, "Two"), "release/a/one.msp": msp(PAIRS, "One")}


@pytest.mark.parametrize("kind", ["zip", "tar.gz", "tar"])
def test_members_of_an_archive_are_read_with_their_names(kind: str, tmp_path: Path) -> None:
    path = tmp_path / f"release.{kind}"
    if kind == "zip":
        write_zip(path, MEMBERS)
    else:
        write_tar(path, MEMBERS, "w:gz" if kind == "tar.gz" else "w")
    records, rejected = read(path)
    assert [record.source.path for record in records] == [f"{path}::{name}" for name in MEMBERS]
    assert not rejected


def test_a_gzipped_file_is_read(tmp_path: Path) -> None:
    path = tmp_path / "one.msp.gz"
    path.write_bytes(gzip.compress(msp(PAIRS).encode()))
    records, _ = read(path)
    assert len(records) == 1


def test_a_folder_is_walked_in_sorted_order_without_hidden_files(tmp_path: Path) -> None:
    for name in ("b/2.msp", "a/1.msp", "a/.hidden.msp", ".git/3.msp", "c.msp"):
        (tmp_path / name).parent.mkdir(exist_ok=True)
        (tmp_path / name).write_text(msp(PAIRS))
    write_zip(tmp_path / "d.zip", {"4.msp": msp(PAIRS)})
    records, rejected = read(tmp_path)
    names = [record.source.path.removeprefix(f"{tmp_path}/") for record in records]
    assert names == ["c.msp", "d.zip::4.msp", "a/1.msp", "b/2.msp"] and not rejected


def test_an_unreadable_file_of_a_folder_is_rejected_and_the_rest_is_read(tmp_path: Path) -> None:
    (tmp_path / "1.msp").write_bytes(b"")
    (tmp_path / "2.zip").write_bytes(b"PK\x03\x04 cut off")
    (tmp_path / "3.msp").write_text(msp(PAIRS))
    (tmp_path / "4.msp").symlink_to(tmp_path / "nowhere")
    os.mkfifo(tmp_path / "5.msp")
    records, rejected = read(tmp_path)
    assert len(records) == 1
    assert [Path(item.source).name for item in rejected] == ["1.msp", "2.zip", "4.msp", "5.msp"]


def test_an_empty_folder_is_an_input_error(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"folder in .*: found no file, expected files with spectra\."):
        read(tmp_path)


def test_a_device_is_not_read() -> None:
    with pytest.raises(InputError, match="found a device or pipe"):
        read(Path("/dev/zero"))


@pytest.mark.skipif(os.geteuid() == 0, reason="root may read everything")
def test_a_file_without_permission_is_an_input_error(tmp_path: Path) -> None:
    path = tmp_path / "a.msp"
    path.write_text(msp(PAIRS))
    path.chmod(0)
    with pytest.raises(InputError, match="permission denied"):
        read(path)


def test_nothing_is_written_where_member_names_point(tmp_path: Path) -> None:
    folder = tmp_path / "here"
    folder.mkdir()
    names = {"../escaped.msp": msp(PAIRS), str(tmp_path / "absolute.msp"): msp(PAIRS)}
    for path in (write_zip(folder / "a.zip", names), write_tar(folder / "a.tar.gz", names)):
        assert len(read(path)[0]) == 2
    assert sorted(item.name for item in tmp_path.iterdir()) == ["here"]
    assert sorted(item.name for item in folder.iterdir()) == ["a.tar.gz", "a.zip"]


@pytest.mark.parametrize("kind", ["zip", "tar.gz"])
def test_a_member_beyond_the_bound_is_rejected_and_the_next_is_read(
    kind: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(containers, "MAX_FILE_BYTES", 10_000)
    members = {"bomb.msp": "Name: x\n" + "Comment: 0\n" * 100_000, "good.msp": msp(PAIRS)}
    path = tmp_path / f"a.{kind}"
    records, rejected = read(write_zip(path, members) if kind == "zip" else write_tar(path, members))
    assert len(records) == 1
    assert [item.reason for item in rejected] == ["size"]


def test_a_zip_that_lies_about_the_size_of_a_member_is_stopped(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(containers, "MAX_FILE_BYTES", 10_000)
    path = write_zip(tmp_path / "a.zip", {"bomb.msp": "Name: x\n" + "Comment: 0\n" * 100_000, "good.msp": msp(PAIRS)})
    content = bytearray(path.read_bytes())
    entry = content.index(b"PK\x01\x02")
    struct.pack_into("<L", content, entry + 24, 500)
    path.write_bytes(bytes(content))
    records, rejected = read(path)
    assert len(records) == 1 and len(rejected) == 1


def test_an_archive_with_more_bytes_than_the_bound_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(containers, "MAX_ARCHIVE_BYTES", 50_000)
    members = {f"{number}.msp": "Comment: 0\n" * 1000 for number in range(20)}
    for path in (write_zip(tmp_path / "a.zip", members), write_tar(tmp_path / "a.tar.gz", members)):
        with pytest.raises(FormatError):
            read(path)


def test_an_archive_with_more_members_than_the_bound_is_refused(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(containers, "MAX_MEMBERS", 5)
    members = {f"{number}.msp": msp(PAIRS) for number in range(9)}
    for path in (write_zip(tmp_path / "a.zip", members), write_tar(tmp_path / "a.tar.gz", members)):
        with pytest.raises(FormatError, match="more data than any release of spectra"):
            read(path)


def test_a_table_of_contents_too_large_for_memory_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = write_zip(tmp_path / "a.zip", {f"{number}.msp": "x" for number in range(100)})
    monkeypatch.setattr(containers, "MAX_DIRECTORY_BYTES", 1000)
    with pytest.raises(FormatError, match="more data than any release of spectra"):
        read(path)


def test_a_tar_header_too_large_for_memory_is_refused(tmp_path: Path) -> None:
    info = tarfile.TarInfo("././@LongLink")
    info.type, info.size = tarfile.GNUTYPE_LONGNAME, 1 << 40
    path = tmp_path / "a.tar"
    path.write_bytes(info.tobuf() + bytes(10240))
    with pytest.raises(FormatError, match="damaged data"):
        read(path)


@pytest.mark.parametrize("fraction", [0.4, 0.6, 0.8, 0.95])
def test_what_stands_before_the_damage_of_a_tar_archive_is_kept(fraction: float, tmp_path: Path) -> None:
    noise = np.random.default_rng(7).integers(1, 999, size=(99, 89))
    members = {
        f"{row:03}.msp": msp([(10.0 + mz, float(height)) for mz, height in enumerate(noise[row])]) for row in range(99)
    }
    path = write_tar(tmp_path / "a.tar.gz", members)
    content = path.read_bytes()
    path.write_bytes(content[: int(fraction * len(content))])
    rejected: list[Rejection] = []
    records: list[SpectrumRecord] = []
    with pytest.raises(FormatError, match=r"damaged data .*expected a complete archive"):
        records.extend(read_spectra(path, rejected.append))
    assert len(records) > 90 * fraction - 12


def test_reading_closes_what_it_opened(tmp_path: Path) -> None:
    # Warnings are errors in the test run, so a file left open would fail here.
    path = write_zip(tmp_path / "a.zip", MEMBERS)
    spectra = read_spectra(path, lambda _: None)
    next(spectra)
    spectra.close()  # type: ignore[attr-defined]


@pytest.mark.parametrize(
    ("offset", "value", "found"), [(6, 1, "is encrypted, password required"), (8, 97, "not supported")]
)
def test_an_encrypted_or_strangely_packed_member_is_no_damage(
    offset: int, value: int, found: str, tmp_path: Path
) -> None:
    path = write_zip(tmp_path / "a.zip", {"a.msp": msp(PAIRS), "b.msp": msp(PAIRS)})
    data = bytearray(path.read_bytes())
    directory = data.index(b"PK\x01\x02")
    data[offset] = data[directory + offset + 2] = value  # flags or method of the first member, in both places
    path.write_bytes(data)
    records, rejected = read(path)
    assert len(records) == 1
    (rejection,) = rejected
    assert found in rejection.found
    assert rejection.hint == "Unpack it and pack it anew, without a password."
