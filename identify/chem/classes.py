"""Which classes a compound belongs to: substructures of `identify.chem.class_table`, and rules for whole molecules."""

from __future__ import annotations

from functools import lru_cache
from typing import TYPE_CHECKING

from identify.chem.class_table import PATTERNS, WHOLE
from identify.chem.molecules import plain_mol

if TYPE_CHECKING:
    from rdkit.Chem import Mol


@lru_cache(maxsize=1)
def _patterns() -> tuple[tuple[str, Mol], ...]:
    from rdkit import Chem

    return tuple((name, Chem.MolFromSmarts(smarts)) for name, smarts in PATTERNS)


@lru_cache(maxsize=16384)
def compound_classes(smiles: str) -> tuple[str, ...]:
    """Classes a compound belongs to, most telling first.

    Parameters
    ----------
    smiles : str
        Isotopes are not looked at.

    Returns
    -------
    tuple of str
        Names of `identify.chem.class_table`; empty when none fits.

    Raises
    ------
    StructureError
        For a SMILES that cannot be read.

    Examples
    --------
    >>> compound_classes("CCCCCC"), compound_classes("Cc1ccccc1")
    (('n-alkane', 'hydrocarbon'), ('alkylbenzene', 'aromatic hydrocarbon', 'hydrocarbon'))
    >>> compound_classes("CCCCCCCCCCCCCCCC(=O)OC")
    ('fatty acid methyl ester', 'ester')
    """
    mol = plain_mol(smiles)
    elements = {atom.GetAtomicNum() for atom in mol.GetAtoms()}
    if 6 in elements and elements <= {1, 6}:
        return _hydrocarbon_classes(mol)
    names = [name for name, pattern in _patterns() if mol.HasSubstructMatch(pattern) and _fills(mol, name, pattern)]
    if _is_terpenoid(mol):
        names.insert(0, "terpenoid")
    return tuple(dict.fromkeys(names))


def _hydrocarbon_classes(mol: Mol) -> tuple[str, ...]:
    """Classes of a compound of carbon and hydrogen alone."""
    from rdkit.Chem import BondType

    rings = mol.GetRingInfo()
    atoms, bonds = list(mol.GetAtoms()), list(mol.GetBonds())
    aromatic = [ring for ring in rings.AtomRings() if all(mol.GetAtomWithIdx(i).GetIsAromatic() for i in ring)]
    has_double = any(bond.GetBondType() == BondType.DOUBLE for bond in bonds)
    has_triple = any(bond.GetBondType() == BondType.TRIPLE for bond in bonds)
    is_saturated = not (aromatic or has_double or has_triple)
    n_rings = rings.NumRings()
    names: list[str] = []
    if is_saturated and not n_rings:
        names.append("n-alkane" if all(atom.GetDegree() <= 2 for atom in atoms) else "branched alkane")
    if is_saturated and n_rings:
        names.append("cycloalkane")
    if len(aromatic) == 1 and n_rings == 1 and len(atoms) > 6 and not (has_double or has_triple):
        names.append("alkylbenzene")
    if _largest_fused_aromatic(mol) > 1:
        names.append("polycyclic aromatic hydrocarbon")
    if (n_rings or not is_saturated) and _is_terpenoid(mol):
        names.append("terpene")
    names += ["alkene"] * has_double + ["alkyne"] * has_triple + ["aromatic hydrocarbon"] * bool(aromatic)
    return (*names, "hydrocarbon")


def _largest_fused_aromatic(mol: Mol) -> int:
    """Most aromatic rings in one fused ring system; fluorene has 2, biphenyl 1."""
    systems: list[tuple[set[int], int]] = []
    rings = mol.GetRingInfo()
    for atoms, bonds in zip(rings.AtomRings(), rings.BondRings(), strict=True):
        is_aromatic = all(mol.GetAtomWithIdx(index).GetIsAromatic() for index in atoms)
        merged, count = set(bonds), int(is_aromatic)
        apart = []
        for other, other_count in systems:
            if merged & other:
                merged, count = merged | other, count + other_count
            else:
                apart.append((other, other_count))
        systems = [*apart, (merged, count)]
    return max((count for _, count in systems), default=0)


def _fills(mol: Mol, name: str, pattern: Mol) -> bool:
    """Whether the pattern may stand for the class: for whole-molecule classes every atom outside it is carbon."""
    if name not in WHOLE:
        return True
    match = mol.GetSubstructMatch(pattern)
    return all(atom.GetAtomicNum() == 6 for atom in mol.GetAtoms() if atom.GetIdx() not in match)


def _is_terpenoid(mol: Mol) -> bool:
    """Whether 10, 15 or 20 carbons in one piece can be cut into isoprene frames; nothing but C, H and up to two O.

    The isoprene rule (Ruzicka, Experientia 1953, 9, 357; from memory), aromatic compounds left out. Synthetic compounds may
    obey it by chance.
    """
    from rdkit import Chem

    kinds = [atom.GetAtomicNum() for atom in mol.GetAtoms()]
    if kinds.count(6) not in (10, 15, 20) or set(kinds) - {1, 6, 8} or kinds.count(8) > 2:
        return False
    if any(atom.GetIsAromatic() for atom in mol.GetAtoms()):
        return False
    carbons = Chem.DeleteSubstructs(mol, Chem.MolFromSmarts("[!#6]"))
    if len(Chem.GetMolFrags(carbons)) != 1:
        return False
    frame = Chem.MolFromSmarts("[#6]~[#6](~[#6])~[#6]~[#6]")
    units = {frozenset(match) for match in carbons.GetSubstructMatches(frame, maxMatches=2000)}
    return _can_tile(frozenset(range(carbons.GetNumAtoms())), units)


def _can_tile(atoms: frozenset[int], units: set[frozenset[int]]) -> bool:
    """Whether some of the units cover every atom exactly once."""
    if not atoms:
        return True
    first = min(atoms)
    return any(_can_tile(atoms - unit, units) for unit in units if first in unit and unit <= atoms)
