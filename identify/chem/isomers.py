"""How many isomers of the same kind a compound has: positional and chain isomers, enumerated and bounded.

Electron ionization often cannot tell such isomers apart, and most of them have no entry in any library; a claim about one of
them has to know how many others there could be. Kept: rings, and every functional group with its kind of carbon (a phenol stays
a phenol, an aldehyde an aldehyde, a secondary amine a secondary amine). Moved: methyl groups among all C–H carbons (this
redistributes alkyl chains), substituents among the C–H carbons of the aromatic rings, heteroatom substituents among the
saturated C–H carbons, and carbon–carbon double bonds along chains. Stereoisomers are one.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING, Any, Final

from identify.chem.structures import plain_mol
from identify.errors import UsageError

if TYPE_CHECKING:
    from rdkit.Chem import Mol

MAX_LIMIT: Final = 2000
"""Largest limit accepted."""
MAX_HEAVY_ATOMS: Final = 60
"""Larger compounds are not enumerated: the answer is "at least 1"."""

_Move = tuple[tuple[tuple[int, int, int], ...], tuple[int, int]]
"""Bonds to set as (atom, atom, order; 0 = none), and the carbons that gain and lose a hydrogen."""


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
def count_isomers(smiles: str, limit: int = 100) -> IsomerCount:
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
        Complete, or "at least `limit`"; "at least 1" for salts, mixtures and more than `MAX_HEAVY_ATOMS` atoms.

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
    from rdkit import Chem

    if not 1 <= limit <= MAX_LIMIT:
        raise UsageError("limit of isomers", found=f"{limit}", expected=f"1 to {MAX_LIMIT}")
    start = Chem.Mol(plain_mol(smiles))
    Chem.RemoveStereochemistry(start)
    first = str(Chem.MolToSmiles(start))
    if "." in first or start.GetNumHeavyAtoms() > MAX_HEAVY_ATOMS:
        return IsomerCount((first,), False)
    start = Chem.MolFromSmiles(first)
    kept, tried = {first: start}, {first}
    wanted = _signature(start)
    queue = [first]
    for current in queue:
        for smiles_found in _neighbours(kept[current]):
            if smiles_found in tried:
                continue
            tried.add(smiles_found)
            found = Chem.MolFromSmiles(smiles_found)
            if found is None or _signature(found) != wanted:
                continue
            if len(queue) == limit:
                return IsomerCount(tuple(queue), False)
            kept[smiles_found] = found
            queue.append(smiles_found)
    return IsomerCount(tuple(queue), True)


def _neighbours(mol: Mol) -> Iterator[str]:
    """Canonical SMILES of everything one move away, some more than once."""
    from rdkit import Chem

    for bonds, (gains, loses) in _moves(mol):
        edited = Chem.RWMol(mol)
        for begin, end, order in bonds:
            edited.RemoveBond(begin, end)
            if order:
                edited.AddBond(begin, end, Chem.BondType.SINGLE if order == 1 else Chem.BondType.DOUBLE)
        for index, change in ((gains, 1), (loses, -1)):
            atom = edited.GetAtomWithIdx(index)
            if atom.GetNoImplicit():
                atom.SetNumExplicitHs(atom.GetNumExplicitHs() + change)
        edited.UpdatePropertyCache(False)
        yield str(Chem.MolToSmiles(edited))


def _moves(mol: Mol) -> Iterator[_Move]:
    """All moves of one structure; of equivalent sources only one is moved."""
    from rdkit import Chem

    ranks = list(Chem.CanonicalRankAtoms(mol, breakTies=False))
    atoms = list(mol.GetAtoms())
    with_h = [atom.GetIdx() for atom in atoms if atom.GetAtomicNum() == 6 and atom.GetTotalNumHs()]
    aromatic = [index for index in with_h if atoms[index].GetIsAromatic()]
    saturated = [index for index in with_h if _is_saturated(atoms[index])]
    done: set[tuple[int, int]] = set()
    for bond in mol.GetBonds():
        if bond.IsInRing() or bond.GetBondTypeAsDouble() != 1.0:
            continue
        for anchor, moved in ((bond.GetBeginAtom(), bond.GetEndAtom()), (bond.GetEndAtom(), bond.GetBeginAtom())):
            key = (ranks[anchor.GetIdx()], ranks[moved.GetIdx()])
            if anchor.GetAtomicNum() != 6 or key in done:
                continue
            done.add(key)
            is_methyl = moved.GetAtomicNum() == 6 and moved.GetDegree() == 1 and _is_saturated(moved)
            if is_methyl:
                sites = with_h
            elif anchor.GetIsAromatic():
                sites = aromatic
            elif _is_saturated(anchor) and moved.GetAtomicNum() != 6:
                sites = saturated
            else:
                continue
            a, x = anchor.GetIdx(), moved.GetIdx()
            part = _side(mol, x, a)
            for site in sites:
                if site not in part and site != a:
                    yield ((a, x, 0), (site, x, 1)), (a, site)
    yield from _shifts(mol)


def _shifts(mol: Mol) -> Iterator[_Move]:
    """Moves of a double bond by one place: a=b–c to a–b=c."""
    for bond in mol.GetBonds():
        if bond.GetBondTypeAsDouble() != 2.0 or {
            bond.GetBeginAtom().GetAtomicNum(),
            bond.GetEndAtom().GetAtomicNum(),
        } != {6}:
            continue
        for a, b in ((bond.GetBeginAtom(), bond.GetEndAtom()), (bond.GetEndAtom(), bond.GetBeginAtom())):
            for c in b.GetNeighbors():
                if c.GetAtomicNum() == 6 and c.GetTotalNumHs() and _is_saturated(c):
                    yield (
                        ((a.GetIdx(), b.GetIdx(), 1), (b.GetIdx(), c.GetIdx(), 2)),
                        (a.GetIdx(), c.GetIdx()),
                    )


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


def _kind(atom: Any) -> str:
    """What a functional group sees of a neighbour: aromatic, unsaturated or saturated carbon, or the element."""
    if atom.GetAtomicNum() != 6:
        return str(atom.GetSymbol())
    return "a" if atom.GetIsAromatic() else "s" if _is_saturated(atom) else "u"


def _signature(mol: Mol) -> tuple[tuple[object, ...], ...]:
    """Functional groups of a structure: heteroatoms, carbons bound to them by multiple bonds, and C=C, each with its kind."""
    groups: list[tuple[object, ...]] = []
    for atom in mol.GetAtoms():
        around = sorted((bond.GetBondTypeAsDouble(), _kind(bond.GetOtherAtom(atom))) for bond in atom.GetBonds())
        if atom.GetAtomicNum() != 6:
            groups.append((atom.GetSymbol(), atom.GetTotalNumHs(), atom.GetFormalCharge(), tuple(around)))
        elif not atom.GetIsAromatic():
            hetero = [entry for entry in around if entry[1] not in ("a", "u", "s")]
            if any(order > 1 for order, _ in hetero):
                is_end = len(hetero) == 1 and atom.GetTotalNumHs() > 0
                beside = [kind for _, kind in around if kind in ("a", "u")]
                groups.append(("C", is_end, tuple(hetero), tuple(beside)))
    for bond in mol.GetBonds():
        ends = (bond.GetBeginAtom(), bond.GetEndAtom())
        if bond.GetBondTypeAsDouble() in (2.0, 3.0) and all(end.GetAtomicNum() == 6 for end in ends):
            beside = sorted(
                _kind(near)
                for end, other in (ends, ends[::-1])
                for near in end.GetNeighbors()
                if near.GetIdx() != other.GetIdx() and _kind(near) != "s"
            )
            groups.append(("CC", bond.GetBondTypeAsDouble(), bond.IsInRing(), tuple(beside)))
    return tuple(sorted(groups, key=repr))
