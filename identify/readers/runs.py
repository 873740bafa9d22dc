"""Here is a file: the run it holds, told apart by content."""

from __future__ import annotations

from pathlib import Path

from identify.errors import FormatError, InputError
from identify.readers.andi import read_andi_run
from identify.readers.limits import HEAD_BYTES
from identify.readers.mzml_run import read_mzml_run
from identify.runs.model import Run

NETCDF = (b"CDF\x01", b"CDF\x02")


def read_run(path: Path) -> Run:
    """The GC-MS run in a file.

    Parameters
    ----------
    path : Path
        ANDI-MS netCDF or mzML.

    Returns
    -------
    Run

    Raises
    ------
    InputError
        If the file cannot be opened.
    FormatError
        If it is of another kind, or breaks the rules of its format.
    """
    try:
        with path.open("rb") as stream:
            head = stream.read(HEAD_BYTES)
    except OSError as error:
        raise InputError(
            "run", where=str(path), found=error.strerror or str(error), expected="a readable file"
        ) from None
    if head.startswith(NETCDF):
        return read_andi_run(path)
    if _is_mzml(head):
        return read_mzml_run(path)
    raise FormatError(
        "run", where=str(path), found="a file of another kind", expected="ANDI-MS netCDF or mzML",
        hint="Spectra and peak lists are searched with `ionwitness search`.",
    )  # fmt: skip


def is_run(path: Path) -> bool:
    """Whether a file is of a kind that holds runs, told by its first bytes; False when it cannot be opened.

    Parameters
    ----------
    path : Path

    Returns
    -------
    bool
    """
    try:
        with path.open("rb") as stream:
            head = stream.read(HEAD_BYTES)
    except (OSError, ValueError):
        return False
    return head.startswith(NETCDF) or _is_mzml(head)


def _is_mzml(head: bytes) -> bool:
    start = head.lstrip(b"\xef\xbb\xbf \r\n\t")
    return start.startswith(b"<") and (b"<mzML" in head or b"<indexedmzML" in head)
