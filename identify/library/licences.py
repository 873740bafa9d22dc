"""Which licences a library takes: names brought to one form, and the choices `free` and `all`."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Sequence
from functools import lru_cache

from identify.errors import UsageError

UNSTATED = "not stated"
FREE_LICENCES = frozenset({"CC0", "public domain", "CC BY", "CC BY-SA", "dl-de/by-2-0", "dl-de/zero-2-0"})
"""Free for every use, attribution (and share-alike) at most.

The German data licence `dl-de/by-2-0` counts as free: it allows every use, commercial ones included, under attribution
only (terms of version 2.0, section 1–2, from memory), as `CC BY` does.
"""
_CREATIVE = re.compile(
    r"^(?:CC|CREATIVE COMMONS)[ -]?(0|ZERO|BY(?:[ -](?:NC|SA|ND))*)(?:[ -]V?\d(?:\.\d)?)?(?:[ -].*)?$"
)
_PUBLIC = re.compile(r"^(?:PUBLIC[ -]DOMAIN|PD|PUBLIC DOMAIN MARK.*)$")


@lru_cache(maxsize=256)
def normalise_licence(text: str) -> str:
    """One form of a licence's name, without its version; `not stated` for none.

    Parameters
    ----------
    text : str
        As the source states it.

    Returns
    -------
    str
        A name unknown here comes back trimmed, otherwise as it is.

    Examples
    --------
    >>> normalise_licence("cc-by-sa 4.0"), normalise_licence("CC BY"), normalise_licence("CC0 1.0"), normalise_licence("")
    ('CC BY-SA', 'CC BY', 'CC0', 'not stated')
    >>> normalise_licence("dl-de/by-2-0"), normalise_licence("house rules")
    ('dl-de/by-2-0', 'house rules')
    """
    tidy = " ".join(unicodedata.normalize("NFKC", text).split())
    upper = tidy.upper()
    if upper in ("", "N/A", "NOT STATED"):
        return UNSTATED
    if _PUBLIC.match(upper):
        return "public domain"
    if upper.startswith("DL-DE"):
        return tidy.lower().replace(" ", "")
    creative = _CREATIVE.match(upper)
    if not creative:
        return tidy
    terms = creative.group(1).replace(" ", "-").split("-")
    if terms[0] in ("0", "ZERO"):
        return "CC0"
    return "-".join(["CC BY", *[term for term in ("NC", "SA", "ND") if term in terms]])


def resolve_licences(choice: str | Sequence[str]) -> frozenset[str] | None:
    """Licences a choice accepts; None for all of them.

    Parameters
    ----------
    choice : str or sequence of str
        `free`, `all`, or names of licences (a text may hold several, separated by commas).

    Returns
    -------
    frozenset of str or None

    Raises
    ------
    UsageError
        For an empty choice, or `free`/`all` inside a list of names.

    Examples
    --------
    >>> sorted(resolve_licences("CC0, cc by 4.0"))
    ['CC BY', 'CC0']
    >>> resolve_licences("all") is None
    True
    """
    names = [name.strip() for name in (choice.split(",") if isinstance(choice, str) else choice)]
    names = [name for name in names if name]
    if names == ["all"]:
        return None
    if names == ["free"]:
        return FREE_LICENCES
    if not names or {"all", "free"} & set(names):
        raise UsageError("licence choice", found=repr(choice), expected="free, all, or names of licences")
    return frozenset(normalise_licence(name) for name in names)
