"""Structures through rdkit: identifiers, formulas, drawings, classes, similarity.

All functions take SMILES text and translate rdkit's refusals to `StructureError`. SMILES from files are hostile: length and
number of atoms are bounded. rdkit is imported inside the functions, so that importing this module costs nothing.
"""

from __future__ import annotations

import re
from functools import lru_cache
from typing import TYPE_CHECKING, Any, Final

from identify.chem.class_table import PATTERNS, WHOLE
from identify.chem.elements import MASS_NUMBER, NUCLIDES
from identify.chem.formula import Formula
from identify.errors import StructureError, quote

if TYPE_CHECKING:
    from rdkit.Chem import Mol

MAX_SMILES: Final = 1000
"""Longest SMILES or InChI read, in characters."""
MAX_ATOMS: Final = 300
"""Most atoms (hydrogens not counted) of a structure."""
_INCHIKEY: Final = re.compile(r"[A-Z]{14}(?:-[A-Z]{10}-[A-Z])?")


def _checked(mol: Any, text: str) -> Mol:
    """`mol` if rdkit made one of an acceptable size."""
    if mol is None:
        raise StructureError("structure", found=quote(text), expected="a valid SMILES or InChI")
    if not 0 < mol.GetNumHeavyAtoms() <= MAX_ATOMS and mol.GetNumAtoms() != 1:
        raise StructureError(
            "structure", found=f"{mol.GetNumHeavyAtoms()} atoms in {quote(text)}", expected=f"1 to {MAX_ATOMS} atoms"
        )
    if any(atom.GetAtomicNum() == 0 for atom in mol.GetAtoms()):
        raise StructureError("structure", found=f"a placeholder atom in {quote(text)}", expected="elements only")
    checked: Mol = mol
    return checked


@lru_cache(maxsize=2048)
def _read_mol(smiles: str) -> Mol:
    """Molecule of a SMILES, isotopes kept."""
    from rdkit import Chem, rdBase

    if len(smiles) > MAX_SMILES:
        raise StructureError("structure", found=f"{len(smiles)} characters", expected=f"at most {MAX_SMILES}")
    with rdBase.BlockLogs():
        return _checked(Chem.MolFromSmiles(smiles.strip()) if smiles.strip() else None, smiles)


@lru_cache(maxsize=2048)
def plain_mol(smiles: str) -> Mol:
    """Molecule of a SMILES with natural isotopes, for everything that isotopes do not change."""
    from rdkit import Chem, rdBase

    mol = Chem.RWMol(_read_mol(smiles))
    if not any(atom.GetIsotope() for atom in mol.GetAtoms()):
        return mol.GetMol()
    for atom in mol.GetAtoms():
        atom.SetIsotope(0)
    with rdBase.BlockLogs():
        return Chem.RemoveHs(mol.GetMol())


@lru_cache(maxsize=16384)
def canonical_smiles(smiles: str) -> str:
    """Canonical SMILES, stereochemistry and isotopes kept.

    Parameters
    ----------
    smiles : str

    Returns
    -------
    str

    Raises
    ------
    StructureError
        For text that is no SMILES, too long, too many atoms, or placeholder atoms.

    Examples
    --------
    >>> canonical_smiles("C(C)O")
    'CCO'
    """
    from rdkit import Chem

    return str(Chem.MolToSmiles(_read_mol(smiles)))


@lru_cache(maxsize=4096)
def smiles_of_inchi(inchi: str) -> str:
    """Canonical SMILES of an InChI.

    Parameters
    ----------
    inchi : str

    Returns
    -------
    str

    Raises
    ------
    StructureError
        For text that is no InChI, or a structure out of bounds.

    Examples
    --------
    >>> smiles_of_inchi("InChI=1S/C2H6O/c1-2-3/h3H,2H2,1H3")
    'CCO'
    """
    from rdkit import Chem, rdBase

    if len(inchi) > MAX_SMILES or not inchi.startswith("InChI="):
        raise StructureError("structure", found=quote(inchi), expected=f"an InChI of at most {MAX_SMILES} characters")
    from_inchi: Any = Chem.MolFromInchi
    with rdBase.BlockLogs():
        mol = _checked(from_inchi(inchi), inchi)
    return str(Chem.MolToSmiles(mol))


@lru_cache(maxsize=16384)
def inchikey_of(smiles: str) -> str:
    """Standard InChIKey.

    Parameters
    ----------
    smiles : str

    Returns
    -------
    str
        27 characters.

    Raises
    ------
    StructureError
        For a SMILES that cannot be read or has no InChI.

    Examples
    --------
    >>> inchikey_of("CCO")
    'LFQSCWFLJHTTHZ-UHFFFAOYSA-N'
    """
    from rdkit import Chem, rdBase

    to_inchikey: Any = Chem.MolToInchiKey
    with rdBase.BlockLogs():
        key = str(to_inchikey(_read_mol(smiles)))
    if not key:
        raise StructureError("structure", found=quote(smiles), expected="a structure that has an InChI")
    return key


def connectivity_block(inchikey: str) -> str:
    """First block of an InChIKey: the same for stereoisomers and isotopologues.

    Parameters
    ----------
    inchikey : str
        A whole key, or its first block alone.

    Returns
    -------
    str
        14 letters.

    Raises
    ------
    StructureError
        For text that is no InChIKey.

    Examples
    --------
    >>> connectivity_block("LFQSCWFLJHTTHZ-UHFFFAOYSA-N")
    'LFQSCWFLJHTTHZ'
    """
    if not _INCHIKEY.fullmatch(inchikey):
        raise StructureError("InChIKey", found=quote(inchikey), expected="14 letters, 10 letters and 1 letter")
    return inchikey[:14]


@lru_cache(maxsize=16384)
def formula_of(smiles: str) -> Formula:
    """Formula with charge; atoms given as isotopes are labelled atoms.

    Parameters
    ----------
    smiles : str

    Returns
    -------
    Formula
        An isotope that is the most abundant one of its element (`[12C]`) counts as the element.

    Raises
    ------
    StructureError
        For a SMILES that cannot be read, or an isotope that the table does not hold.
    FormulaError
        For an element that the table does not hold, or a molecule that is too heavy.

    Examples
    --------
    >>> formula_of("[2H]C([2H])([2H])O").hill
    'CH[2H]3O'
    """
    mol = _read_mol(smiles)
    counts: list[tuple[str, int]] = []
    charge = 0
    for atom in mol.GetAtoms():
        symbol, isotope = str(atom.GetSymbol()), int(atom.GetIsotope())
        if isotope and isotope != MASS_NUMBER.get(symbol):
            symbol = f"[{isotope}{symbol}]"
            if symbol not in NUCLIDES:
                raise StructureError("structure", found=f"isotope {symbol} in {quote(smiles)}", expected="a nuclide")
        counts += [(symbol, 1), ("H", int(atom.GetTotalNumHs()))]
        charge += int(atom.GetFormalCharge())
    return Formula.from_counts(counts, charge)


@lru_cache(maxsize=1024)
def draw_svg(smiles: str, width: int = 240, height: int = 180) -> str:
    """SVG fragment of a structure, safe to put into HTML as it is.

    Parameters
    ----------
    smiles : str
    width, height : int
        Size in pixels, 20 to 4000; the drawing scales with its container through its `viewBox`.

    Returns
    -------
    str
        One ``<svg>`` element: black lines, transparent, text as paths, no prolog, scripts, links, classes or ids.

    Raises
    ------
    StructureError
        For a SMILES that cannot be read or drawn, or a size out of range.

    Examples
    --------
    >>> draw_svg("CCO", 120, 90)[:4], "<?xml" in draw_svg("CCO", 120, 90)
    ('<svg', False)
    """
    from rdkit.Chem import rdDepictor
    from rdkit.Chem.Draw import rdMolDraw2D

    if not (20 <= width <= 4000 and 20 <= height <= 4000):
        raise StructureError("drawing", found=f"{width} × {height} pixels", expected="20 to 4000 pixels each way")
    mol = rdMolDraw2D.PrepareMolForDrawing(_read_mol(smiles), kekulize=True, addChiralHs=False)
    rdDepictor.StraightenDepiction(mol)
    drawer = rdMolDraw2D.MolDraw2DSVG(width, height)
    options: Any = drawer.drawOptions()
    options.clearBackground = False
    options.useBWAtomPalette()
    options.bondLineWidth = 1.4
    options.minFontSize = 9
    options.padding = 0.06
    drawer.DrawMolecule(mol)
    drawer.FinishDrawing()
    return _plain_svg(str(drawer.GetDrawingText()))


def _plain_svg(text: str) -> str:
    """The ``<svg>`` element alone: style text as attributes (a strict content policy allows those), defaults left out."""
    body = text[text.index("<svg") :].strip()
    body = re.sub(r"<!--.*?-->", "", body, flags=re.DOTALL)
    body = re.sub(r"\s+(?:class|xmlns:\w+|xml:space|version|baseProfile)='[^']*'", "", body)
    body = re.sub(r"style='([^']*)'", lambda match: _attributes(match[1]), body)
    return re.sub(r"\s+", " ", body).replace("> <", ">\n<").replace(" />", "/>")


def _attributes(style: str) -> str:
    """Style declarations as presentation attributes, without those that say what holds anyway."""
    defaults = {"stroke-linecap", "stroke-linejoin", "stroke-opacity", "stroke-miterlimit", "fill-rule", "fill-opacity"}
    pairs = (declaration.partition(":")[::2] for declaration in style.split(";") if declaration)
    return " ".join(f"{name}='{value.removesuffix('px')}'" for name, value in pairs if name not in defaults)


@lru_cache(maxsize=16384)
def active_hydrogens(smiles: str) -> int:
    """Number of hydrogens on oxygen, nitrogen and sulfur: the most that silylation or acylation can replace.

    Parameters
    ----------
    smiles : str

    Returns
    -------
    int
        Upper bound; hindered and amide N–H often stay.

    Raises
    ------
    StructureError
        For a SMILES that cannot be read.

    Examples
    --------
    >>> active_hydrogens("NCC(=O)O"), active_hydrogens("CC(=O)C")
    (3, 0)
    """
    return sum(int(atom.GetTotalNumHs()) for atom in plain_mol(smiles).GetAtoms() if atom.GetAtomicNum() in (7, 8, 16))


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
    if {atom.GetAtomicNum() for atom in mol.GetAtoms()} <= {1, 6}:
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


@lru_cache(maxsize=8192)
def _fingerprint(smiles: str) -> Any:
    from rdkit.Chem import rdFingerprintGenerator

    return rdFingerprintGenerator.GetMorganGenerator(radius=2, fpSize=2048).GetFingerprint(plain_mol(smiles))


def structure_similarity(a: str, b: str) -> float:
    """Tanimoto similarity of circular fingerprints (radius 2, 2048 bits), in [0, 1].

    Parameters
    ----------
    a, b : str
        SMILES; isotopes are not looked at.

    Returns
    -------
    float

    Raises
    ------
    StructureError
        For a SMILES that cannot be read.

    References
    ----------
    Rogers & Hahn, J. Chem. Inf. Model. 2010, 50, 742 (extended-connectivity fingerprints).

    Examples
    --------
    >>> structure_similarity("CCO", "OCC")
    1.0
    """
    from rdkit import DataStructs

    return float(DataStructs.TanimotoSimilarity(_fingerprint(a), _fingerprint(b)))
