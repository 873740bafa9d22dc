"""Which classes a compound belongs to: substructures of `identify.chem.class_table`, and rules for whole molecules."""

from __future__ import annotations

from collections import Counter
from functools import lru_cache
from typing import TYPE_CHECKING

from identify.chem.class_table import PATTERNS, WHOLE
from identify.chem.molecules import atoms_of, bonds_of, plain_mol

if TYPE_CHECKING:
    from rdkit.Chem import Mol


@lru_cache(maxsize=1)
def _patterns() -> tuple[tuple[str, Mol, frozenset[int]], ...]:
    """Name, pattern, and the elements (atomic numbers) without which it cannot match."""
    from rdkit import Chem

    read = [(name, Chem.MolFromSmarts(smarts)) for name, smarts in PATTERNS]
    # A pattern atom that may be one of several elements has atomic number 0.
    return tuple((name, pattern, frozenset(_count_elements(pattern)) - {0}) for name, pattern in read)


@lru_cache(maxsize=512)
def _patterns_of(elements: frozenset[int]) -> tuple[tuple[str, Mol], ...]:
    """Names and patterns that a compound of these elements can match; most compounds need not be tried for most patterns."""
    return tuple((name, pattern) for name, pattern, needed in _patterns() if needed <= elements)


def _count_elements(mol: Mol) -> Counter[int]:
    """Atoms of each atomic number."""
    return Counter(atom.GetAtomicNum() for atom in atoms_of(mol))


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
    elements = _count_elements(mol)
    if 6 in elements and set(elements) <= {1, 6}:
        return _hydrocarbon_classes(mol, elements)
    usable = _patterns_of(frozenset(elements))
    names = [name for name, pattern in usable if mol.HasSubstructMatch(pattern) and _fills(mol, name, pattern)]
    if _is_terpenoid(mol, elements):
        names.insert(0, "terpenoid")
    return tuple(dict.fromkeys(names))


def _hydrocarbon_classes(mol: Mol, elements: Counter[int]) -> tuple[str, ...]:
    """Classes of a compound of carbon and hydrogen alone."""
    from rdkit.Chem import BondType

    rings = mol.GetRingInfo()
    atoms, bonds = atoms_of(mol), bonds_of(mol)
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
    if (n_rings or not is_saturated) and _is_terpenoid(mol, elements):
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
    return all(atom.GetAtomicNum() == 6 for atom in atoms_of(mol) if atom.GetIdx() not in match)


def _is_terpenoid(mol: Mol, elements: Counter[int]) -> bool:
    """Whether 10, 15 or 20 carbons in one piece can be cut into isoprene frames; nothing but C, H and up to two O.

    The isoprene rule (Ruzicka, Experientia 1953, 9, 357; from memory), aromatic compounds left out. Synthetic compounds may
    obey it by chance.
    """
    from rdkit import Chem

    if elements[6] not in (10, 15, 20) or set(elements) - {1, 6, 8} or elements[8] > 2:
        return False
    if any(atom.GetIsAromatic() for atom in atoms_of(mol)):
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
