"""Bytes on disk, whole or not at all."""

from __future__ import annotations

import contextlib
import os
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import IO

from identify.errors import UsageError


def write_atomically(path: Path, content: bytes) -> None:
    """Nothing comes out; afterwards `path` holds `content`, or what it held before if anything went wrong.

    Parameters
    ----------
    path : Path
        File to write or replace; its folder must exist.
    content : bytes

    Raises
    ------
    UsageError
        As `open_atomically`.
    """
    with open_atomically(path) as file:
        file.write(content)


@contextmanager
def open_atomically(path: Path) -> Iterator[IO[bytes]]:
    """A file to write into that takes the place of `path` when the block ends, or vanishes if anything goes wrong.

    Parameters
    ----------
    path : Path
        File to write or replace; its folder must exist.

    Yields
    ------
    binary file

    Raises
    ------
    UsageError
        If the folder is missing, not a folder, not writable, or the disk is full.

    Notes
    -----
    A temporary file in the same folder, synchronised, then renamed over `path`.
    """
    path = Path(path)
    try:
        with _replacing(path) as file:
            yield file
    except OSError as error:
        raise UsageError(
            "output file",
            where=str(path),
            found=error.strerror or type(error).__name__,
            expected="a writable file in an existing folder",
        ) from error


@contextmanager
def _replacing(path: Path) -> Iterator[IO[bytes]]:
    if path.is_dir():
        raise IsADirectoryError(21, "a folder of that name")
    handle, name = tempfile.mkstemp(prefix=f".{path.name[:40]}.", suffix=".tmp", dir=path.parent)
    try:
        with os.fdopen(handle, "wb") as file:
            yield file
            file.flush()
            os.fsync(file.fileno())
        # mkstemp makes the file private; a result is as readable as any new file of this user.
        Path(name).chmod(path.stat().st_mode & 0o777 if path.exists() else 0o666 & ~_umask())
        Path(name).replace(path)
    except BaseException:
        with contextlib.suppress(FileNotFoundError):
            Path(name).unlink()
        raise


def _umask() -> int:
    mask = os.umask(0o077)  # it can only be read by being set: for a moment, to the safest
    os.umask(mask)
    return mask
