"""Bytes on disk, whole or not at all."""

from __future__ import annotations

import contextlib
import os
import tempfile
from pathlib import Path

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
        If the folder is missing, not a folder, not writable, or the disk is full.

    Notes
    -----
    Written to a temporary file in the same folder, synchronised, then renamed over `path`.
    """
    path = Path(path)
    try:
        _write_and_replace(path, content)
    except OSError as error:
        raise UsageError(
            "output file",
            where=str(path),
            found=error.strerror or type(error).__name__,
            expected="a writable file in an existing folder",
        ) from error


def _write_and_replace(path: Path, content: bytes) -> None:
    if path.is_dir():
        raise IsADirectoryError(21, "a folder of that name")
    handle, name = tempfile.mkstemp(prefix=f".{path.name[:40]}.", suffix=".tmp", dir=path.parent)
    try:
        with os.fdopen(handle, "wb") as file:
            file.write(content)
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
    mask = os.umask(0o022)
    os.umask(mask)
    return mask
