"""Which compound a standard is: from SMILES, InChI, CAS number or name, completed by what the library knows."""

from __future__ import annotations

import re

from identify.errors import StructureError, UsageError, quote
from identify.library.drafts import normalised_name
from identify.library.standing import ALL_STATUSES
from identify.library.store import Library
from identify.records import Entry, Identity

_CAS_NUMBER = re.compile(r"\d{2,7}-\d\d-\d", re.ASCII)


def resolve_identity(
    library: Library, *, name: str = "", smiles: str = "", inchi: str = "", cas: str = "", formula: str = ""
) -> Identity:
    """Identity with name, formula and structure as far as they are given or the library knows them.

    Parameters
    ----------
    library : Library
    name, smiles, inchi, cas, formula : str
        At least one of name, SMILES, InChI and CAS number.

    Returns
    -------
    Identity
        A structure given is the truth: its formula and InChIKey are computed. Without one, the structure of the library's
        entries with that CAS number, else that name, is taken, if they all have the same.

    Raises
    ------
    UsageError
        If nothing is given, the CAS number's check digit is wrong, or the library's entries disagree.
    StructureError
        If SMILES or InChI cannot be read, or do not agree with each other or with the formula.
    """
    if not (name or smiles or inchi or cas):
        raise UsageError("identity of a standard", found="nothing", expected="a name, SMILES, InChI or CAS number")
    if cas and not is_cas_number(cas):
        raise UsageError("CAS number", found=quote(cas), expected="digits with a right check digit, like 67-64-1")
    if smiles or inchi:
        return _from_structure(library, name, smiles, inchi, cas, formula)
    known = _known_entry(library, name, cas)
    if known is None:
        return Identity(name or cas, formula, cas=cas)
    same = known.identity
    if formula and same.formula and formula != same.formula:
        raise UsageError("formula", found=quote(formula), expected=f"{same.formula}, as in entry {known.accession}")
    return Identity(name or same.name, same.formula, same.smiles, same.inchi, same.inchikey, cas or same.cas)


def _from_structure(library: Library, name: str, smiles: str, inchi: str, cas: str, formula: str) -> Identity:
    from identify.chem.formula import parse_formula
    from identify.chem.structures import connectivity_block, formula_of, inchikey_of, smiles_of_inchi

    given = smiles or smiles_of_inchi(inchi)
    key = inchikey_of(given)
    if smiles and inchi and inchikey_of(smiles_of_inchi(inchi)) != key:
        raise StructureError("structure", found=quote(inchi), expected=f"the same compound as {quote(smiles)}")
    computed = formula_of(given)
    if formula and parse_formula(formula) != computed:
        raise StructureError("formula", found=quote(formula), expected=f"{computed.hill}, that of the structure")
    if not name:
        same = library.find_entries(inchikey=connectivity_block(key), statuses=ALL_STATUSES, limit=1)
        name = same[0].identity.name if same and not same[0].is_labelled else given
    return Identity(name, computed.hill, given, inchi, key, cas)


def _known_entry(library: Library, name: str, cas: str) -> Entry | None:
    """Entry whose structure goes with a CAS number, else with a name."""
    with library.reading() as connection:
        rows = connection.execute(
            "SELECT id FROM entry WHERE is_labelled = 0 AND inchikey != '' AND ((? != '' AND cas = ?)"
            " OR (? = '' AND name = ? COLLATE NOCASE)) ORDER BY id LIMIT 100",
            (cas, cas, cas, name),
        ).fetchall()
    entries = [entry for entry in library.get_entries([row[0] for row in rows]) if cas or _is_named(entry, name)]
    blocks = {entry.identity.inchikey[:14] for entry in entries}
    if len(blocks) > 1:
        names = ", ".join(sorted(entry.accession for entry in entries)[:5])
        raise UsageError(
            "identity of a standard", found=f"several structures for {quote(cas or name)} ({names})",
            expected="one", hint="Give the structure: SMILES or InChI.",
        )  # fmt: skip
    return entries[0] if entries else None


def _is_named(entry: Entry, name: str) -> bool:
    return normalised_name(entry.identity.name) == normalised_name(name)


def is_cas_number(text: str) -> bool:
    """Whether a text is a CAS registry number with a right check digit (weights 1, 2, 3 … from the right, modulo 10).

    Examples
    --------
    >>> is_cas_number("67-64-1"), is_cas_number("67-64-2"), is_cas_number("x")
    (True, False, False)
    """
    if not _CAS_NUMBER.fullmatch(text):
        return False
    check, *digits = (int(digit) for digit in reversed(text.replace("-", "")))
    return sum(weight * digit for weight, digit in enumerate(digits, 1)) % 10 == check
