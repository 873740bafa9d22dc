"""Here is a file: the run it holds, told apart by content."""

from __future__ import annotations

from pathlib import Path

from identify.errors import FormatError, InputError
from identify.readers.andi import read_andi_run
from identify.runs.model import Run

NETCDF = (b"CDF\x01", b"CDF\x02")


def read_run(path: Path) -> Run:
    """The GC-MS run in a file.

    Parameters
    ----------
    path : Path
        ANDI-MS netCDF.

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
            head = stream.read(8)
    except OSError as error:
        raise InputError(
            "run", where=str(path), found=error.strerror or str(error), expected="a readable file"
        ) from None
    if head.startswith(NETCDF):
        return read_andi_run(path)
    raise FormatError(
        "run", where=str(path), found="a file of another kind", expected="ANDI-MS netCDF",
        hint="Spectra and peak lists are searched with `ionwitness search`.",
    )  # fmt: skip
