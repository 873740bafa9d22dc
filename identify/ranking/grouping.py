"""Which library entries are the same compound, measured in the same form?"""

from __future__ import annotations

import re
from collections.abc import Sequence
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
    tell them apart. Isotope-labelled forms and derivatives of a compound have spectra of their own and stay apart.

    Parameters
    ----------
    entry : Entry

    Returns
    -------
    str
        Connectivity block, else SMILES, else name and formula, followed by what was measured.

    Examples
    --------
    >>> from types import SimpleNamespace as Record
    >>> identity = Record(inchikey="UHOVQNZJYSORNB-UHFFFAOYSA-N", smiles="c1ccccc1", name="Benzene", formula="C6H6")
    >>> compound_key(Record(identity=identity, measured_as="", is_labelled=False, formula_as_measured="C6H6"))
    'UHOVQNZJYSORNB'
    """
    identity = entry.identity
    if _KEY.match(identity.inchikey):
        key = identity.inchikey[:14]
    elif identity.smiles:
        key = f"smiles {identity.smiles}"
    else:
        key = f"name {' '.join(identity.name.lower().split())} {identity.formula}"
    if entry.measured_as:
        key += f" as {entry.measured_as}"
    if entry.is_labelled:
        # The structure of a labelled record is that of the parent; only formula and name hold the label.
        key += f" labelled {entry.formula_as_measured or ' '.join(identity.name.lower().split())}"
    return key


def group_matches(matches: Sequence[Match]) -> dict[str, list[Match]]:
    """Matches of each compound, compounds in the order of their first match.

    Parameters
    ----------
    matches : sequence of Match
        In the order of the index; the same entry may come only once.

    Returns
    -------
    dict of str to list of Match
    """
    groups: dict[str, list[Match]] = {}
    for match in matches:
        groups.setdefault(compound_key(match.entry), []).append(match)
    return groups
