"""Compound classes by substructure: the table behind `identify.chem.structures.compound_classes`.

Order matters: special classes first, general ones last; a compound belongs to every class it matches. Hydrocarbon and terpene
classes need the whole molecule and are found by rule, not by pattern; so is that nothing but carbon stands beside the pattern
of a class in `WHOLE`. The patterns are the project's own, written from the definitions of the classes.
"""

from __future__ import annotations

from typing import Final

_CHAIN: Final = "~".join(["[CX4H2,CX3H1;!R]"] * 5)

PATTERNS: Final[tuple[tuple[str, str], ...]] = (
    # silicon
    ("TMS derivative", "[$([O;!$(O([Si])[Si])]),N,S][Si]([CH3])([CH3])[CH3]"),
    ("TBDMS derivative", "[O,N,S][Si]([CH3])([CH3])C([CH3])([CH3])[CH3]"),
    ("siloxane", "[Si]O[Si]"),
    ("alkoxysilane", "[Si;!$([Si](C)(C)C)][OX2][#6]"),
    ("alkylsilane", "[Si;!$([Si]~[O,N,S,F,Cl,Br,I])]"),
    # skeletons of natural products
    (
        "sterol",
        "[#6]1~[#6]~[#6]2~[#6](~[#6]~[#6]~1[O,N])~[#6]~[#6]~[#6]1~[#6]~2~[#6]~[#6]~[#6]2~[#6]~1~[#6]~[#6]~[#6]~2",
    ),
    ("steroid", "[#6]1~[#6]~[#6]2~[#6](~[#6]~[#6]~1)~[#6]~[#6]~[#6]1~[#6]~2~[#6]~[#6]~[#6]2~[#6]~1~[#6]~[#6]~[#6]~2"),
    ("flavonoid", "O1~[#6](c2ccccc2)~[#6]~[#6]~c2ccccc12"),
    ("coumarin", "O=c1ccc2ccccc2o1"),
    ("xanthine", "[#7]1[#6](=O)[#7][#6]2=,:[#6]([#6]1=O)[#7][#6]=,:[#7]2"),
    ("barbiturate", "O=C1CC(=O)NC(=O)N1"),
    ("phenothiazine", "c1ccc2c(c1)[#7]c1ccccc1[#16]2"),
    ("benzodiazepine", "c1ccc2c(c1)C(=N*)~*~*~*~[#7]2"),
    ("phenethylamine", "c[CH2,CH1][CH2,CH1][NX3;!$(N[C,S]=[O,S])]"),
    ("sugar", "[OX2;R]1[CX4;R;$(C[OX2])][CX4;R;$(C[OX2])][CX4;R;$(C[OX2])][CX4;R]~*~1"),
    ("sugar", "[OX2;R]1[CX4;R;$(C[OX2])][CX4;R;$(C[OX2])][CX4;R;$(C[OX2])][CX4;R]1"),
    ("amino acid", "[NX3;!$(N[C,S]=O)][CX4][CX3](=O)[OX2H1]"),
    # esters and acids
    ("phthalate", "c1ccc(C(=O)O[#6])c(C(=O)O[#6])c1"),
    ("phosphate ester", "P(=O)(O[#6])(O)O"),
    ("thiophosphate", "P(=S)([O,S,N])[O,S,N]"),
    ("phosphonate", "[#6]P(=O)(O)O"),
    ("fatty acid methyl ester", f"[CH3]OC(=O){_CHAIN}"),
    ("fatty acid ethyl ester", f"[CH3][CH2]OC(=O){_CHAIN}"),
    ("fatty acid", f"[OX2H1]C(=O){_CHAIN}"),
    ("fatty alcohol", f"[OX2H1][CH2]{_CHAIN}"),
    ("acetate", "[CH3]C(=O)[OX2][#6;!$([#6]=O)]"),
    ("lactone", "O=[#6;R;!$([#6](~[#7,#8,#16])(~[#7,#8,#16])~[#7,#8,#16])][#8;R][#6]"),
    ("carbamate", "[NX3]C(=O)[OX2,SX2][#6]"),
    ("carbonate", "[#6]OC(=O)O[#6]"),
    ("acid anhydride", "[#6]C(=O)OC(=O)[#6]"),
    ("acyl halide", "[#6]C(=O)[F,Cl,Br,I]"),
    ("ester", "[CX3;!$(C(=O)(-O)-[O,N,S])](=O)[OX2][#6;!$([#6]=[O,S])]"),
    ("thioester", "[#6]C(=O)[SX2][#6]"),
    ("carboxylic acid", "[CX3](=O)[OX2H1]"),
    # carbonyl compounds
    ("quinone", "O=[#6]1[#6]=,:[#6][#6](=O)[#6]=,:[#6]1"),
    ("imide", "[#6]C(=O)[NX3]C(=O)[#6]"),
    ("urea", "[NX3]C(=[O,S])[NX3]"),
    ("lactam", "[#6;R](=O)[#7;R;!$([#7]C(=O)[O,N])]"),
    ("amide", "[CX3;!$(C(=O)(-[O,N])-[O,N,S])](=O)[NX3]"),
    ("aldehyde", "[CX3H1](=O)[#6]"),
    ("ketone", "[#6][CX3](=O)[#6]"),
    # oxygen
    ("phenol", "c[OX2H1]"),
    ("alcohol", "[CX4][OX2H1]"),
    ("epoxide", "C1OC1"),
    ("acetal", "[CX4]([OX2][#6;!$([#6]=O)])[OX2][#6;!$([#6]=O)]"),
    ("peroxide", "[OX2][OX2]"),
    ("methoxyarene", "c[OX2][CH3]"),
    ("furan", "o1cccc1"),
    ("ether", "[#6;!$([#6]=[O,S,N])][OX2;!$(O1CC1)][#6;!$([#6]=[O,S,N])]"),
    # nitrogen
    ("nitro compound", "[$([NX3](=O)=O),$([NX3+](=O)[O-])][#6]"),
    ("nitrate or nitrite ester", "[#6]O[N;$(N=O),$([N+](=O)[O-])]"),
    ("nitrosamine", "[NX3][NX2]=O"),
    ("azo compound", "[#6]N=N[#6]"),
    ("oxime", "[CX3]=[NX2][OX2]"),
    ("imine", "[CX3;!$(C[#7,#8,#16])]=[NX2][#6]"),
    ("nitrile", "[#6]C#N"),
    ("isocyanate", "[#6]N=C=O"),
    ("isothiocyanate", "[#6]N=C=S"),
    ("hydrazone", "[CX3]=[NX2][NX3]"),
    ("hydrazine", "[NX3][NX3]"),
    ("triazene", "[#7]N=N"),
    ("hydroxylamine", "[NX3;!$(N=*)][OX2]"),
    ("aromatic amine", "c[NX3;!$(N[C,S]=[O,S]);!$(N=*);!$([N+]);!R]"),
    ("amine", "[NX3;!$(N[C,S]=[O,S,N]);!$(N~[!#6;!#1]);!$(Nc)][CX4]"),
    ("quaternary ammonium", "[NX4+]([#6])([#6])([#6])[#6]"),
    ("pyridine", "n1ccccc1"),
    ("indole", "c1ccc2[#7]ccc2c1"),
    ("nitrogen heterocycle", "[#7;R]"),
    # sulfur
    ("thiophene", "s1cccc1"),
    ("sulfur heterocycle", "[#16;R]"),
    ("thiol", "[#6][SX2H1]"),
    ("disulfide", "[#6][SX2][SX2]"),
    ("thioether", "[#6;!$([#6]=[O,S])][SX2;!R][#6;!$([#6]=[O,S])]"),
    ("sulfoxide", "[#6][$([SX3]=O),$([SX3+][O-])][#6]"),
    ("sulfone", "[#6][SX4](=O)(=O)[#6]"),
    ("sulfonamide", "[#6][SX4](=O)(=O)[NX3]"),
    ("sulfonate or sulfate", "[#6,#8][SX4](=O)(=O)[OX2]"),
    # halogens
    ("chlorinated biphenyl", "Clc1ccccc1-!@c1ccccc1"),
    ("chlorinated biphenyl", "Clc1cccc(c1)-!@c1ccccc1"),
    ("chlorinated biphenyl", "Clc1ccc(cc1)-!@c1ccccc1"),
    ("aryl halide", "c[F,Cl,Br,I]"),
    ("perfluoroalkyl compound", "[CX4](F)(F)[CX4](F)F"),
    ("fluorinated", "[#6]F"),
    ("chlorinated", "[#6]Cl"),
    ("brominated", "[#6]Br"),
    ("iodinated", "[#6]I"),
    # other elements
    ("organosilicon", "[#14]"),
    ("boron compound", "[#5]"),
    ("phosphorus compound", "[#15]"),
    ("organometallic", "[Ge,Sn,Pb,Hg,As,Se,Te,Sb,Bi,Fe,Co,Ni,Cu,Zn,Cr,Mo,Mn,Pt,Pd,Al,Be,V,Ti]"),
    # frames
    ("oxygen heterocycle", "[#8;R]"),
    ("aromatic", "a"),
)
"""Class name and SMARTS, most telling first; a name may have several patterns."""

WHOLE: Final = frozenset({"fatty acid methyl ester", "fatty acid ethyl ester", "fatty acid", "fatty alcohol"})
"""Classes whose pattern must hold every atom of the molecule that is not carbon."""
