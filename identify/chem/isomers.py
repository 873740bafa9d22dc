"""How many isomers of the same kind a compound has: positional and chain isomers, enumerated and bounded.

Electron ionization often cannot tell such isomers apart, and most of them have no entry in any library; a claim about one of
them has to know how many others there could be. Kept: rings, and every functional group with its kind of carbon (a phenol stays
a phenol, an aldehyde an aldehyde, a secondary amine a secondary amine). Moved: methyl groups among all C–H carbons (this
redistributes alkyl chains), substituents among the C–H carbons of the aromatic rings, heteroatom substituents among the
saturated C–H carbons, and carbon–carbon double bonds along chains. Stereoisomers are one,
and so are tautomers of azoles.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache
from itertools import chain
from typing import TYPE_CHECKING, Any, Final

from identify.chem.molecules import atoms_of, bonds_of, plain_mol
from identify.chem.structures import connectivity_block, inchikey_of
from identify.errors import UsageError

if TYPE_CHECKING:
    from rdkit.Chem import Mol

MAX_LIMIT: Final = 2000
"""Largest limit accepted."""
MAX_HEAVY_ATOMS: Final = 60
"""Larger compounds are not enumerated: the answer is "at least 1"."""

TRIES_PER_ISOMER: Final = 6
"""Structures looked at per isomer of the limit (and 100 more): most moves of a crowded molecule change its groups."""
_HALOGENS: Final = frozenset({"F", "Cl", "Br", "I"})
_CARBON_KINDS: Final = frozenset({"a", "u", "s"})
"""Aromatic, unsaturated, saturated carbon, as `_signature` sees it."""
_MARK: Final = 99
"""Isotope number that marks where a detached group was bound."""


@dataclass(frozen=True, slots=True)
class IsomerCount:
    """Isomers of one kind.

    `isomers` are canonical SMILES without stereochemistry and isotopes, the compound itself first. When `is_complete` is False
    the enumeration stopped at its bound and there are more.
    """

    isomers: tuple[str, ...]
    is_complete: bool

    @property
    def count(self) -> int:
        """Number of isomers found, the compound itself among them."""
        return len(self.isomers)

    def __str__(self) -> str:
        return str(self.count) if self.is_complete else f"at least {self.count}"


@lru_cache(maxsize=4096)
def count_isomers(smiles: str, limit: int = 50) -> IsomerCount:
    """Positional and chain isomers of a compound that keep its rings and functional groups.

    Parameters
    ----------
    smiles : str
        Stereochemistry and isotopes are not looked at.
    limit : int
        Most isomers to enumerate, 1 to `MAX_LIMIT`; time grows with it.

    Returns
    -------
    IsomerCount
        Complete, or "at least" as many as were found within `limit` and `TRIES_PER_ISOMER`; "at least 1" for salts, mixtures
        and more than `MAX_HEAVY_ATOMS` atoms.

    Raises
    ------
    UsageError
        For a limit out of range.
    StructureError
        For a SMILES that cannot be read.

    Notes
    -----
    Breadth-first closure of the moves named at the top of this module over canonical SMILES. A move is kept when the signature of
    the functional groups (`_signature`) is unchanged.

    Examples
    --------
    >>> str(count_isomers("Cc1ccccc1C")), count_isomers("CCCCCC").count
    ('4', 5)
    >>> str(count_isomers("CCCCCCCCCCCC", 20))
    'at least 20'
    """
    from rdkit import Chem, rdBase

    if not 1 <= limit <= MAX_LIMIT:
        raise UsageError("limit of isomers", found=f"{limit}", expected=f"1 to {MAX_LIMIT}")
    start = Chem.Mol(plain_mol(smiles))
    Chem.RemoveStereochemistry(start)
    first = str(Chem.MolToSmiles(start))
    if "." in first or start.GetNumHeavyAtoms() > MAX_HEAVY_ATOMS:
        return IsomerCount((first,), False)
    with rdBase.BlockLogs():
        start = Chem.MolFromSmiles(first)
    kept, tried, detached = {first: start}, {first}, set[tuple[str, str]]()
    wanted = _signature(start)
    queue, blocks = [first], set[str]()
    _is_new(first, blocks)
    for current in queue:
        for smiles_found in chain(_moved_groups(kept[current], detached), _shifted_bonds(kept[current])):
            if smiles_found in tried:
                continue
            tried.add(smiles_found)
            if len(tried) > 100 + TRIES_PER_ISOMER * limit:
                return IsomerCount(tuple(queue), False)
            with rdBase.BlockLogs():
                found = Chem.MolFromSmiles(smiles_found)
            if found is None or _signature(found) != wanted or not _is_new(smiles_found, blocks):
                continue
            if len(queue) == limit:
                return IsomerCount(tuple(queue), False)
            kept[smiles_found] = found
            queue.append(smiles_found)
    return IsomerCount(tuple(queue), True)


def _is_new(smiles: str, blocks: set[str]) -> bool:
    """Whether a structure with a mobile aromatic N–H is no tautomer of an earlier one; `blocks` collects what was seen."""
    if "[nH]" not in smiles:
        return True
    block = connectivity_block(inchikey_of(smiles))
    is_new = block not in blocks
    blocks.add(block)
    return is_new


def _moved_groups(mol: Mol, detached: set[tuple[str, str]]) -> Iterator[str]:
    """Canonical SMILES of everything one moved group away, except what the same rest and group gave before.

    What comes out depends on the rest and the group only, not on where the group was; `detached` remembers the pairs done. Sites
    that are equivalent in the rest give the same, so one of each kind is tried.
    """
    from rdkit import Chem

    for a, x, sites in _sources(mol):
        apart = Chem.RWMol(mol)
        apart.RemoveBond(a, x)
        _change_hydrogens(apart.GetAtomWithIdx(a), 1)
        apart.GetAtomWithIdx(x).SetIsotope(_MARK)
        apart.UpdatePropertyCache(False)
        kind = "+".join(sorted({"a" if mol.GetAtomWithIdx(site).GetIsAromatic() else "s" for site in sites}))
        key = (str(Chem.MolToSmiles(apart)), kind)
        if key in detached:
            continue
        detached.add(key)
        ranks = list(Chem.CanonicalRankAtoms(apart, breakTies=False))
        part = _side(mol, x, a)
        tried = {ranks[a]}
        apart.GetAtomWithIdx(x).SetIsotope(0)
        for site in sites:
            if site in part or ranks[site] in tried:
                continue
            tried.add(ranks[site])
            joined = Chem.RWMol(apart)
            joined.AddBond(site, x, Chem.BondType.SINGLE)
            _change_hydrogens(joined.GetAtomWithIdx(site), -1)
            joined.UpdatePropertyCache(False)
            yield str(Chem.MolToSmiles(joined))


def _change_hydrogens(atom: Any, change: int) -> None:
    """One hydrogen more or fewer on an atom that states its own number."""
    if atom.GetNoImplicit():
        atom.SetNumExplicitHs(atom.GetNumExplicitHs() + change)


def _sources(mol: Mol) -> Iterator[tuple[int, int, list[int]]]:
    """Groups that may move: their anchor, their own first atom, and the carbons they may go to; one of each equivalent kind."""
    from rdkit import Chem

    ranks = list(Chem.CanonicalRankAtoms(mol, breakTies=False))
    atoms = atoms_of(mol)
    with_h = [atom.GetIdx() for atom in atoms if atom.GetAtomicNum() == 6 and atom.GetTotalNumHs()]
    aromatic = [index for index in with_h if atoms[index].GetIsAromatic()]
    saturated = [index for index in with_h if _is_saturated(atoms[index])]
    done: set[tuple[int, int]] = set()
    for bond in bonds_of(mol):
        if bond.IsInRing() or bond.GetBondTypeAsDouble() != 1.0:
            continue
        for anchor, moved in ((bond.GetBeginAtom(), bond.GetEndAtom()), (bond.GetEndAtom(), bond.GetBeginAtom())):
            a, x = anchor.GetIdx(), moved.GetIdx()
            if anchor.GetAtomicNum() != 6 or (ranks[a], ranks[x]) in done:
                continue
            done.add((ranks[a], ranks[x]))
            if moved.GetAtomicNum() == 6 and moved.GetDegree() == 1 and _is_saturated(moved):
                yield a, x, with_h
            elif anchor.GetIsAromatic():
                yield a, x, aromatic
            elif _is_saturated(anchor) and moved.GetAtomicNum() != 6:
                yield a, x, saturated


def _shifted_bonds(mol: Mol) -> Iterator[str]:
    """Canonical SMILES with one double bond moved by one place: a=b–c to a–b=c."""
    from rdkit import Chem

    for bond in bonds_of(mol):
        ends = (bond.GetBeginAtom(), bond.GetEndAtom())
        if bond.GetBondTypeAsDouble() != 2.0 or any(end.GetAtomicNum() != 6 for end in ends):
            continue
        for a, b in (ends, ends[::-1]):
            for c in b.GetNeighbors():
                if c.GetAtomicNum() == 6 and c.GetTotalNumHs() and _is_saturated(c):
                    edited = Chem.RWMol(mol)
                    edited.GetBondBetweenAtoms(a.GetIdx(), b.GetIdx()).SetBondType(Chem.BondType.SINGLE)
                    edited.GetBondBetweenAtoms(b.GetIdx(), c.GetIdx()).SetBondType(Chem.BondType.DOUBLE)
                    _change_hydrogens(edited.GetAtomWithIdx(a.GetIdx()), 1)
                    _change_hydrogens(edited.GetAtomWithIdx(c.GetIdx()), -1)
                    edited.UpdatePropertyCache(False)
                    yield str(Chem.MolToSmiles(edited))


def _is_saturated(atom: Any) -> bool:
    """Whether an atom has single bonds only."""
    return all(bond.GetBondTypeAsDouble() == 1.0 for bond in atom.GetBonds())


def _side(mol: Mol, start: int, without: int) -> set[int]:
    """Atoms connected to `start` when the bond to `without` is cut."""
    side, to_visit = {start}, [start]
    while to_visit:
        for neighbour in mol.GetAtomWithIdx(to_visit.pop()).GetNeighbors():
            index = neighbour.GetIdx()
            if index not in side and index != without:
                side.add(index)
                to_visit.append(index)
    return side


def _signature(mol: Mol) -> Counter[tuple[object, ...]]:
    """Functional groups of a structure, each with its kind: heteroatoms, carbons that hold several or by multiple bonds, C=C.

    What a group sees of a neighbour is aromatic (a), unsaturated (u) or saturated (s) carbon, or the element.
    """
    atoms, bonds = atoms_of(mol), bonds_of(mol)
    kinds = ["s" if atom.GetAtomicNum() == 6 else str(atom.GetSymbol()) for atom in atoms]
    carbons = [index for index, kind in enumerate(kinds) if kind == "s"]
    near: list[list[tuple[float, int]]] = [[] for _ in atoms]
    multiple: list[tuple[int, int, float, Any]] = []
    for bond in bonds:
        begin, end, order = bond.GetBeginAtomIdx(), bond.GetEndAtomIdx(), bond.GetBondTypeAsDouble()
        near[begin].append((order, end))
        near[end].append((order, begin))
        if order != 1.0:
            multiple.append((begin, end, order, bond))
            for index in (begin, end):
                if kinds[index] == "s":
                    kinds[index] = "a" if atoms[index].GetIsAromatic() else "u"
    groups: list[tuple[object, ...]] = []
    for index, kind in enumerate(kinds):
        if kind not in _CARBON_KINDS:
            atom, around = atoms[index], sorted((order, kinds[other]) for order, other in near[index])
            groups.append((kind, atom.GetTotalNumHs(), atom.GetFormalCharge(), tuple(around)))
    for index in carbons:
        hetero = tuple(
            sorted((order, kinds[other]) for order, other in near[index] if kinds[other] not in _CARBON_KINDS)
        )
        if not hetero or kinds[index] == "a":
            continue
        if any(order > 1 for order, _ in hetero):
            is_end = len(hetero) == 1 and atoms[index].GetTotalNumHs() > 0
            around = sorted((order, kinds[other]) for order, other in near[index] if kinds[other] in ("a", "u"))
            groups.append(("C", is_end, hetero, tuple(kind for _, kind in around)))
        elif len(hetero) > 1 and any(kind not in _HALOGENS for _, kind in hetero):  # acetals and their like
            groups.append(("C", hetero))
    for begin, end, order, bond in multiple:
        if order in (2.0, 3.0) and kinds[begin] == kinds[end] == "u":
            ends = near[begin] + near[end]
            beside = sorted(kinds[other] for _, other in ends if other not in (begin, end) and kinds[other] != "s")
            groups.append(("CC", order, bond.IsInRing(), tuple(beside)))
    return Counter(groups)
