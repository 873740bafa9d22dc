"""What a fetch recipe names: where a release of open records lies, and what must arrive."""

from __future__ import annotations

import re
import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

from identify.errors import UsageError, quote
from identify.library.shipped import find_shipped

LOOPBACK = frozenset({"127.0.0.1", "::1", "localhost"})
_KEYS = {"name": str, "url": str, "file": str, "maximum_bytes": int, "size_bytes": int, "sha256": str, "expected": dict}
_EXPECTED = ("records_at_least", "electron_ionization_at_least", "splash_mismatches_at_most")
_FILE_NAME = re.compile(r"[A-Za-z0-9][A-Za-z0-9._-]{0,120}")
_SHA256 = re.compile(r"[0-9a-f]{64}")


@dataclass(frozen=True, slots=True)
class Recipe:
    """A release to download, and what it must hold."""

    name: str
    url: str
    file: str
    """Name the download is kept under."""
    maximum_bytes: int
    size_bytes: int | None = None
    sha256: str = ""
    records_at_least: int = 1
    electron_ionization_at_least: int = 1
    splash_mismatches_at_most: int = 0


def read_recipe(recipe: Path | str) -> Recipe:
    """Recipe of a TOML file, or one that comes with the program.

    Parameters
    ----------
    recipe : Path or str
        A file, or the bare name of a shipped recipe (`open-ei`).

    Returns
    -------
    Recipe

    Raises
    ------
    UsageError
        If there is no such recipe, or it holds anything unexpected.
    """
    path = Path(recipe)
    try:
        if path.is_file():
            text = path.read_text("utf-8")
        elif _FILE_NAME.fullmatch(str(recipe)) and (shipped := _shipped(str(recipe))) is not None:
            text = shipped
        else:
            raise UsageError("recipe", found=f"no file {quote(str(recipe))}", expected="a TOML file, or open-ei")
        return parse_recipe(tomllib.loads(text), str(recipe))
    except (ValueError, RecursionError, OSError) as error:
        raise UsageError("recipe", where=str(recipe), found=str(error), expected="a readable TOML file") from None


def _shipped(name: str) -> str | None:
    file = find_shipped("recipes").joinpath(name.removesuffix(".toml") + ".toml")
    return file.read_text("utf-8") if file.is_file() else None


def parse_recipe(values: dict[str, Any], where: str) -> Recipe:
    """Recipe of parsed TOML.

    Parameters
    ----------
    values : dict
    where : str
        File, for messages.

    Returns
    -------
    Recipe

    Raises
    ------
    UsageError
        For an unknown or missing key, a wrong type, an address that is not https, a file name with a folder.
    """
    for key, value in values.items():
        kind = _KEYS.get(key)
        if kind is None:
            raise UsageError("recipe", where=where, found=quote(key), expected=f"one of {', '.join(_KEYS)}")
        if type(value) is not kind:
            raise UsageError("recipe", where=where, found=f"{key} = {quote(value)}", expected=f"a {kind.__name__}")
    for key in ("name", "url", "file"):
        if not values.get(key):
            raise UsageError("recipe", where=where, found=f"no {key}", expected=f"{key} = …")
    expected = values.pop("expected", {})
    for key, value in expected.items():
        if key not in _EXPECTED or type(value) is not int or value < 0:
            raise UsageError("recipe", where=where, found=f"{key} = {quote(value)}", expected=", ".join(_EXPECTED))
    check_address(values["url"], where)
    if not _FILE_NAME.fullmatch(values["file"]):
        raise UsageError("recipe", where=where, found=f"file = {quote(values['file'])}", expected="a plain file name")
    if values.get("sha256") and not _SHA256.fullmatch(values["sha256"]):
        raise UsageError("recipe", where=where, found="another sha256", expected="64 hexadecimal digits")
    return Recipe(**{"maximum_bytes": 2 * 10**9, **values, **expected})


def check_address(url: str, where: str) -> None:
    """Refuse addresses that are neither https nor on this computer.

    Raises
    ------
    UsageError
        For any other address.
    """
    try:
        parts = urlsplit(url)
        allowed = parts.scheme == "https" or (parts.scheme == "http" and parts.hostname in LOOPBACK)
        allowed = allowed and bool(parts.hostname) and parts.username is None
    except ValueError:
        allowed = False
    if not allowed:
        raise UsageError("address", where=where, found=quote(url), expected="an https address")
