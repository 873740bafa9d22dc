"""Files behind a path: a single file, a folder, or an archive read as a stream, member by member.

Nothing is ever unpacked to disk, so names with ``..`` are only text; member sizes, the total and the number of members
are bounded (see `identify.readers.limits`), so a zip bomb costs bounded time and memory.
"""

from __future__ import annotations

import gzip
import io
import os
import struct
import tarfile
import zipfile
import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import IO, BinaryIO, cast

from identify.errors import FormatError, InputError, quote
from identify.readers.fault_reports import OnReject, rejection_of
from identify.readers.limits import (
    MAX_ARCHIVE_BYTES,
    MAX_DIRECTORY_BYTES,
    MAX_FILE_BYTES,
    MAX_MEMBERS,
    MAX_TAR_HEADER_BYTES,
)
from identify.records import Rejection

_INCOMPLETE = "The file may be damaged or incomplete; fetch or copy it again."


@dataclass(frozen=True, slots=True)
class OpenFile:
    """One file to read: its name for provenance, its bytes, and whether it is one of several."""

    path: str
    stream: BinaryIO
    is_member: bool


class BoundedStream(io.RawIOBase):
    """A binary stream that refuses to give more than a number of bytes.

    Parameters
    ----------
    stream : file object
        Read forward only.
    limit : int
        Bytes.
    path : str
        File, for the message.
    """

    def __init__(self, stream: IO[bytes], limit: int, path: str) -> None:
        super().__init__()
        self._stream, self._limit, self._left, self._path = stream, limit, limit, path

    def readable(self) -> bool:
        """True."""
        return True

    def read(self, size: int | None = -1) -> bytes:
        """Bytes as from the stream.

        Raises
        ------
        FormatError
            When the limit is passed, or the compressed data are damaged.
        """
        wanted = self._left + 1 if size is None or size < 0 else min(size, self._left + 1)
        try:
            data = self._stream.read(wanted)
        except (EOFError, OSError, zlib.error, zipfile.BadZipFile, tarfile.TarError) as error:
            raise _damaged(self._path, error) from None
        self._left -= len(data)
        if self._left < 0:
            raise FormatError(
                "size",
                where=self._path,
                found=f"more than {self._limit} bytes after unpacking",
                expected=f"at most {self._limit}",
            )
        return data


def open_files(path: Path, on_reject: OnReject) -> Iterator[OpenFile]:
    """Files behind `path`, opened one after the other; each is closed when the next is asked for.

    Parameters
    ----------
    path : Path
        File, folder (walked in sorted order, hidden files and folders left out, links to folders not followed), zip
        archive, tar archive, gzipped tar archive or gzipped file, told apart by content.
    on_reject : callable
        Takes the `Rejection` of each member that cannot be opened.

    Yields
    ------
    OpenFile

    Raises
    ------
    InputError
        If there is nothing at `path`, it may not be read, or a folder or archive holds no file.
    FormatError
        If an archive is damaged; what stood before the damage has been yielded by then.
    """
    try:
        if path.is_dir():
            yield from _walk_folder(path, on_reject)
            return
        if not path.exists():
            raise InputError("input", where=str(path), found="nothing there", expected="a file or folder")
        if not path.is_file():
            raise InputError("input", where=str(path), found="a device or pipe", expected="a file or folder")
        yield from _open_file(path, on_reject, is_member=False)
    except (OSError, ValueError) as error:
        raise _unreadable(path, error) from None


def _unreadable(path: Path, error: OSError | ValueError) -> InputError:
    reason = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
    return InputError("input", where=str(path), found=reason.lower(), expected="a readable file")


def _damaged(path: str, error: Exception) -> FormatError:
    reason = str(error) or type(error).__name__
    return FormatError(
        "archive", where=path, found=f"damaged data ({reason})", expected="a complete archive", hint=_INCOMPLETE
    )


def _walk_folder(folder: Path, on_reject: OnReject) -> Iterator[OpenFile]:
    n_files = 0
    for parent, names, files in os.walk(folder):
        names[:] = sorted(name for name in names if not name.startswith("."))
        for name in sorted(name for name in files if not name.startswith(".")):
            n_files += 1
            if n_files > MAX_MEMBERS:
                raise InputError("folder", where=str(folder), found=f"more than {MAX_MEMBERS} files", expected="fewer")
            path = Path(parent) / name
            try:
                if not path.is_file():
                    raise InputError("input", where=str(path), found="a device, pipe or dead link", expected="a file")
                yield from _open_file(path, on_reject, is_member=True)
            except InputError as error:
                on_reject(rejection_of(error, str(path)))
            except OSError as error:
                on_reject(rejection_of(_unreadable(path, error), str(path)))
    if not n_files:
        raise InputError("folder", where=str(folder), found="no file", expected="files with spectra")


def _open_file(path: Path, on_reject: OnReject, *, is_member: bool) -> Iterator[OpenFile]:
    with path.open("rb") as stream:
        start = stream.read(512)
        stream.seek(0)
        if start.startswith((b"PK\x03\x04", b"PK\x05\x06")):
            yield from _read_zip(path, stream, on_reject)
        elif start.startswith(b"\x1f\x8b"):
            yield from _read_gzip(path, stream, on_reject, is_member=is_member)
        elif start[257:262] == b"ustar":
            yield from _read_tar(str(path), BoundedStream(stream, MAX_ARCHIVE_BYTES, str(path)), on_reject)
        else:
            yield OpenFile(str(path), stream, is_member)


def _read_zip(path: Path, stream: BinaryIO, on_reject: OnReject) -> Iterator[OpenFile]:
    _check_zip_directory(path, stream)
    try:
        archive = zipfile.ZipFile(stream)
    except (zipfile.BadZipFile, NotImplementedError, ValueError, struct.error) as error:
        raise _damaged(str(path), error) from None
    left, n_members = MAX_ARCHIVE_BYTES, 0
    with archive:
        for info in archive.infolist():
            # `info.is_dir` fails on a member without a name (Python 3.11).
            if info.filename.endswith("/"):
                continue
            name = _member_name(str(path), info.filename)
            n_members += 1
            left -= info.file_size
            if n_members > MAX_MEMBERS or left < 0:
                raise _too_big(str(path))
            if info.file_size > MAX_FILE_BYTES:
                on_reject(_oversized(name, info.file_size))
                continue
            try:
                member = archive.open(info)
            except RuntimeError as error:  # encrypted, or packed in a way Python does not know
                hint = "Unpack it and pack it anew, without a password."
                on_reject(
                    Rejection(name, None, "archive", quote(str(error), 200), "a member that can be unpacked", hint)
                )
                continue
            except (zipfile.BadZipFile, ValueError, zlib.error, OSError) as error:
                on_reject(rejection_of(_damaged(name, error), name))
                continue
            with member:
                yield OpenFile(name, cast(BinaryIO, BoundedStream(member, MAX_FILE_BYTES, name)), True)
    if not n_members:
        raise _empty_archive(str(path))


def _check_zip_directory(path: Path, stream: BinaryIO) -> None:
    """Refuse a table of contents too large to hold in memory; `zipfile` reads it whole."""
    size = stream.seek(0, os.SEEK_END)
    stream.seek(max(0, size - 66_000))
    tail = stream.read()
    stream.seek(0)
    end = tail.rfind(b"PK\x05\x06")
    if end < 0 or len(tail) - end < 22:
        raise _damaged(str(path), ValueError("no table of contents at its end"))
    directory_bytes = struct.unpack_from("<L", tail, end + 12)[0]
    wide = tail.rfind(b"PK\x06\x06", 0, end)
    if directory_bytes == 0xFFFFFFFF and wide >= 0 and end - wide >= 56:
        directory_bytes = struct.unpack_from("<Q", tail, wide + 40)[0]
    if min(directory_bytes, size) > MAX_DIRECTORY_BYTES:
        raise _too_big(str(path))


def _read_gzip(path: Path, stream: BinaryIO, on_reject: OnReject, *, is_member: bool) -> Iterator[OpenFile]:
    with gzip.GzipFile(fileobj=stream) as unpacked:
        try:
            start = unpacked.read(512)
        except (EOFError, OSError, zlib.error) as error:
            raise _damaged(str(path), error) from None
        unpacked.seek(0)
        if start[257:262] == b"ustar":
            yield from _read_tar(
                str(path), BoundedStream(cast(BinaryIO, unpacked), MAX_ARCHIVE_BYTES, str(path)), on_reject
            )
        else:
            bounded = BoundedStream(cast(BinaryIO, unpacked), MAX_FILE_BYTES, str(path))
            yield OpenFile(str(path), cast(BinaryIO, bounded), is_member)


class _BoundedTarInfo(tarfile.TarInfo):
    """A header that refuses extended headers of unreasonable size, which `tarfile` reads into memory."""

    @classmethod
    def frombuf(cls, buf: bytes | bytearray, encoding: str, errors: str) -> _BoundedTarInfo:
        info = super().frombuf(buf, encoding, errors)
        if info.type in b"xgXLK" and info.size > MAX_TAR_HEADER_BYTES:
            raise tarfile.ReadError(f"an extended header of {info.size} bytes")
        return info


def _read_tar(path: str, stream: BoundedStream, on_reject: OnReject) -> Iterator[OpenFile]:
    n_members = 0
    try:
        with tarfile.open(fileobj=cast(BinaryIO, stream), mode="r|", tarinfo=_BoundedTarInfo) as archive:
            while (info := archive.next()) is not None:
                archive.members = []  # type: ignore[attr-defined]  # a stream cannot go back, so headers need not pile up
                if info.isdir():
                    continue
                name = _member_name(path, info.name)
                n_members += 1
                if n_members > MAX_MEMBERS:
                    raise _too_big(path)
                if not info.isreg():
                    on_reject(Rejection(name, None, "not a regular file", "a link or device", "a file"))
                elif info.size > MAX_FILE_BYTES:
                    on_reject(_oversized(name, info.size))
                elif (member := archive.extractfile(info)) is not None:
                    with member:
                        yield OpenFile(name, cast(BinaryIO, BoundedStream(member, MAX_FILE_BYTES, name)), True)
    except (tarfile.TarError, EOFError) as error:
        raise _damaged(path, error) from None
    if not n_members:
        raise _empty_archive(path)


def _member_name(archive: str, member: str) -> str:
    shown = member[:300]
    if not shown.isprintable():
        shown = "".join(letter if letter.isprintable() else "?" for letter in shown)
    return f"{archive}::{shown}"


def _oversized(name: str, n_bytes: int) -> Rejection:
    return Rejection(name, None, "size", f"{n_bytes} bytes after unpacking", f"at most {MAX_FILE_BYTES}")


def _too_big(path: str) -> FormatError:
    limits = f"at most {MAX_ARCHIVE_BYTES} bytes in {MAX_MEMBERS} members"
    return FormatError("archive", where=path, found="more data than any release of spectra", expected=limits)


def _empty_archive(path: str) -> FormatError:
    return FormatError("archive", where=path, found="no file in it", expected="files with spectra")
