"""Reading SMILES into rdkit molecules, bounded: what the other modules on structures share.

SMILES from files are hostile: length and number of atoms are limited. rdkit is imported inside the functions, so that importing
this module costs nothing.
"""

from __future__ import annotations

from functools import lru_cache
from typing import TYPE_CHECKING, Any, Final

from identify.errors import StructureError, quote

if TYPE_CHECKING:
    from rdkit.Chem import Mol

MAX_SMILES: Final = 1000
"""Longest SMILES or InChI read, in characters."""
MAX_ATOMS: Final = 300
"""Most atoms (hydrogens not counted) of a structure."""


def atoms_of(mol: Mol) -> list[Any]:
    """Atoms in order of their index: several times faster than iterating over rdkit's own sequence.

    Parameters
    ----------
    mol : rdkit.Chem.Mol

    Returns
    -------
    list of rdkit.Chem.Atom
    """
    return [mol.GetAtomWithIdx(place) for place in range(mol.GetNumAtoms())]


def bonds_of(mol: Mol) -> list[Any]:
    """Bonds in order of their index (see `atoms_of`).

    Parameters
    ----------
    mol : rdkit.Chem.Mol

    Returns
    -------
    list of rdkit.Chem.Bond
    """
    return [mol.GetBondWithIdx(place) for place in range(mol.GetNumBonds())]


def checked(mol: Any, text: str) -> Mol:
    """A molecule that rdkit made and that is within bounds.

    Parameters
    ----------
    mol : rdkit.Chem.Mol or None
        What rdkit answered.
    text : str
        What it was asked, for the message.

    Returns
    -------
    rdkit.Chem.Mol

    Raises
    ------
    StructureError
        If there is no molecule, it is empty or has more than `MAX_ATOMS` atoms, or an atom is a placeholder.
    """
    if mol is None or "\0" in text:  # rdkit 2024.3 reads no further than such a character
        raise StructureError("structure", found=quote(text), expected="a valid SMILES or InChI")
    if not mol.GetNumAtoms() or mol.GetNumHeavyAtoms() > MAX_ATOMS:
        raise StructureError(
            "structure", found=f"{mol.GetNumHeavyAtoms()} atoms in {quote(text)}", expected=f"1 to {MAX_ATOMS} atoms"
        )
    if any(atom.GetAtomicNum() == 0 for atom in atoms_of(mol)):
        raise StructureError("structure", found=f"a placeholder atom in {quote(text)}", expected="elements only")
    known: Mol = mol
    return known


@lru_cache(maxsize=2048)
def read_mol(smiles: str) -> Mol:
    """Molecule of a SMILES, isotopes kept; shared, not to be changed.

    Parameters
    ----------
    smiles : str

    Returns
    -------
    rdkit.Chem.Mol

    Raises
    ------
    StructureError
        For text that is no SMILES or out of bounds.
    """
    from rdkit import Chem, rdBase

    if len(smiles) > MAX_SMILES:
        raise StructureError("structure", found=f"{len(smiles)} characters", expected=f"at most {MAX_SMILES}")
    with rdBase.BlockLogs():
        return checked(Chem.MolFromSmiles(smiles.strip()) if smiles.strip() else None, smiles)


@lru_cache(maxsize=2048)
def plain_mol(smiles: str) -> Mol:
    """Molecule of a SMILES with natural isotopes, for everything that isotopes do not change; shared, not to be changed.

    Parameters
    ----------
    smiles : str

    Returns
    -------
    rdkit.Chem.Mol

    Raises
    ------
    StructureError
        For text that is no SMILES or out of bounds.
    """
    from rdkit import Chem, rdBase

    read = read_mol(smiles)
    if not any(atom.GetIsotope() for atom in atoms_of(read)):
        return read
    mol = Chem.RWMol(read)
    for atom in atoms_of(mol):
        atom.SetIsotope(0)
    with rdBase.BlockLogs():
        return Chem.RemoveHs(mol.GetMol())
