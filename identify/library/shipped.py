"""Where the data that comes with the program lies: inside the installed package, or in the source tree."""

from __future__ import annotations

from importlib.resources import files
from importlib.resources.abc import Traversable
from pathlib import Path
from types import MappingProxyType
from typing import Final

from identify.errors import LibraryMissing, UsageError

PLACES: Final = MappingProxyType(
    {
        "starter": ("_libraries/starter", "libraries/starter"),
        "recipes": ("_libraries", "libraries"),
        "demo": ("_demo", "fixtures/demo"),
    }
)
"""Name → folder inside an installed package, folder in the source tree (`force-include` in `pyproject.toml`)."""


def find_shipped(name: str) -> Traversable:
    """Folder of shipped data.

    Parameters
    ----------
    name : str
        One of `PLACES`.

    Returns
    -------
    Traversable
        A folder; the installed copy if there is one, else the one beside the package (source tree, editable install).

    Raises
    ------
    UsageError
        For a name that is not in `PLACES`.
    LibraryMissing
        If neither place exists: the installation is not whole.

    Examples
    --------
    >>> find_shipped("starter").joinpath("aromatics.toml").is_file()
    True
    """
    if name not in PLACES:
        raise UsageError("shipped data", found=repr(name), expected="one of " + ", ".join(sorted(PLACES)))
    installed, in_tree = PLACES[name]
    package = files("identify")
    folder = package.joinpath(installed)
    if folder.is_dir():
        return folder
    beside = Path(str(package)).parent / in_tree
    if beside.is_dir():
        return beside
    raise LibraryMissing(
        f"shipped data '{name}'",
        found="no such folder",
        expected=f"{folder} or {beside}",
        hint="Install the package again.",
    )
