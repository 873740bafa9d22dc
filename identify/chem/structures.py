"""Structures through rdkit: identifiers, formulas, drawings, classes, similarity.

All functions take SMILES text and translate rdkit's refusals to `StructureError`; `identify.chem.molecules` bounds what is
read. rdkit is imported inside the functions, so that importing this module costs nothing.
"""

from __future__ import annotations

import re
from functools import lru_cache
from typing import Any, Final

from identify.chem.classes import compound_classes
from identify.chem.elements import MASS_NUMBER, NUCLIDES
from identify.chem.formula import Formula
from identify.chem.molecules import MAX_SMILES, checked, plain_mol, read_mol
from identify.errors import FormulaError, StructureError, quote

__all__ = [
    "active_hydrogens",
    "canonical_smiles",
    "compound_classes",
    "connectivity_block",
    "draw_svg",
    "formula_of",
    "has_diastereomers",
    "inchikey_of",
    "smiles_of_inchi",
    "structure_similarity",
]

_INCHIKEY: Final = re.compile(r"[A-Z]{14}(?:-[A-Z]{10}-[A-Z])?")


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

    return str(Chem.MolToSmiles(read_mol(smiles)))


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
        mol = checked(from_inchi(inchi), inchi)
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
        key = str(to_inchikey(read_mol(smiles)))
    if not key:
        raise StructureError("structure", found=quote(smiles), expected="a structure that has an InChI")
    return key


@lru_cache(maxsize=4096)
def has_diastereomers(smiles: str) -> bool:
    """Whether compounds of the same connectivity exist that are no mirror images: a column parts them, their spectra rarely do.

    Parameters
    ----------
    smiles : str
        Stereochemistry in it is not looked at.

    Returns
    -------
    bool
        True with a double bond that has two forms, or with two stereogenic atoms or more; the bridgeheads of a cage force
        each other and count as one.

    Raises
    ------
    StructureError
        See `canonical_smiles`.

    Examples
    --------
    2-Butene has two forms; 2-butanol only mirror images; camphor, whose stereogenic atoms are its bridgeheads, too.

    >>> has_diastereomers("CC=CC"), has_diastereomers("CCC(C)O"), has_diastereomers("CC1(C)C2CCC1(C)C(=O)C2")
    (True, False, False)
    """
    from rdkit import Chem
    from rdkit.Chem.rdMolDescriptors import CalcNumBridgeheadAtoms

    mol = Chem.Mol(read_mol(smiles))
    Chem.RemoveStereochemistry(mol)
    found = Chem.FindPotentialStereo(mol)
    atoms = {item.centeredOn for item in found if item.type == Chem.StereoType.Atom_Tetrahedral}
    bridgeheads: Any = []  # filled by the call; its stub asks for another type
    CalcNumBridgeheadAtoms(mol, bridgeheads)
    n_forced = max(len(atoms & set(bridgeheads)) - 1, 0)
    return any(item.type == Chem.StereoType.Bond_Double for item in found) or len(atoms) - n_forced > 1


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
        For a SMILES that cannot be read, an element or isotope that the table does not hold, or a molecule that is too heavy.

    Examples
    --------
    >>> formula_of("[2H]C([2H])([2H])O").hill
    'CH[2H]3O'
    """
    mol = read_mol(smiles)
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
    try:
        return Formula.from_counts(counts, charge)
    except FormulaError as error:
        raise StructureError(f"formula of {quote(smiles)}", found=error.found, expected=error.expected) from None


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
    from rdkit import rdBase
    from rdkit.Chem import rdDepictor
    from rdkit.Chem.Draw import rdMolDraw2D

    if not (20 <= width <= 4000 and 20 <= height <= 4000):
        raise StructureError("drawing", found=f"{width} × {height} pixels", expected="20 to 4000 pixels each way")
    with rdBase.BlockLogs():
        mol = rdMolDraw2D.PrepareMolForDrawing(read_mol(smiles), kekulize=True, addChiralHs=False)
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
