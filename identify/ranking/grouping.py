"""Which library entries are the same compound, measured in the same form?"""

from __future__ import annotations

import re
from typing import NamedTuple

from identify.records import Entry, Hit

_KEY = re.compile(r"^[A-Z]{14}(-[A-Z]{8,10}(-[A-Z])?)?$")


class Match(NamedTuple):
    """A hit, the entry it points at, and the library that entry came from."""

    hit: Hit
    entry: Entry
    library: str = ""


def compound_key(entry: Entry) -> str:
    """Text that is equal for two entries exactly when they are one candidate.

    Stereoisomers share the connectivity block of their InChIKey and are one candidate: electron ionization does not
    tell them apart. Derivatives of a compound are one candidate too, shown as its best entry was measured: sources often
    disagree on the number of groups, and either answer names the compound. Isotope-labelled forms are compounds of their
    own.

    Parameters
    ----------
    entry : Entry

    Returns
    -------
    str
        Connectivity block, else SMILES, else name and formula; followed by the label, if any.

    Examples
    --------
    >>> from types import SimpleNamespace as Record
    >>> identity = Record(inchikey="UHOVQNZJYSORNB-UHFFFAOYSA-N", smiles="c1ccccc1", name="Benzene", formula="C6H6")
    >>> compound_key(Record(identity=identity, is_labelled=False, formula_as_measured="C6H6"))
    'UHOVQNZJYSORNB'
    """
    identity = entry.identity
    if _KEY.match(identity.inchikey):
        key = identity.inchikey[:14]
    elif identity.smiles:
        key = f"smiles {identity.smiles}"
    else:
        key = f"name {_plain(identity.name)} {identity.formula}"
    if entry.is_labelled:
        # The structure of a labelled record is that of the parent; only formula and name hold the label.
        key += f" labelled {_plain(identity.name)} {entry.formula_as_measured}"
    return key


def isomer_key(entry: Entry) -> str:
    """Text that is equal for entries of isomers: the same formula as measured.

    Parameters
    ----------
    entry : Entry

    Returns
    -------
    str
        Formula as measured; where the number of derivative groups is not known, the parent's formula and what is known;
        empty when the source gives no formula.
    """
    if entry.formula_as_measured:
        return entry.formula_as_measured
    if entry.identity.formula and entry.measured_as:
        return f"{entry.identity.formula} as {entry.measured_as}"
    return ""


def _plain(name: str) -> str:
    return " ".join(name.casefold().split())
