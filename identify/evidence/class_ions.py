"""Characteristic ions and losses of compound classes: a table to read a spectrum by when nothing in the library fits.

Class names are those of `identify.chem.structures.compound_classes`. The ions are common practice of EI interpretation (textbook
tables, from memory) unless a source is named; how much each rule is worth was measured on the open records
(`identify.evidence.class_model`).
"""

from __future__ import annotations

from typing import NamedTuple

COMMON = "common practice, from memory"
CONTAMINANTS = "contaminant table of an instrument help page (read)"

SELDOM_WITH_M = {
    "sugar": 1.0, "fatty alcohol": 0.80, "siloxane": 0.69, "acetal": 0.66, "phthalate": 0.63, "acetate": 0.55,
}  # fmt: skip
"""Classes most of whose open records show no molecular ion (below 0.5 % of base), with that share among 4,251 underivatized
records of release 2025.05.1; classes of fewer than 12 records left out. Over all classes it is 0.26."""


class ClassRule(NamedTuple):
    """Ions that mark a class.

    Attributes
    ----------
    compound_class : str
    ions : tuple of (m/z, least % of base)
        All must be there.
    text : str
        What the ions are.
    source : str
    """

    compound_class: str
    ions: tuple[tuple[int, float], ...]
    text: str
    source: str = COMMON


RULES: tuple[ClassRule, ...] = (
    ClassRule("n-alkane", ((43, 50), (57, 60), (71, 30), (85, 15)), "CnH2n+1 series 43, 57, 71, 85 falling evenly"),
    ClassRule("branched alkane", ((43, 40), (57, 40), (71, 20)), "CnH2n+1 series 43, 57, 71"),
    ClassRule("alkene", ((41, 40), (55, 50), (69, 30)), "CnH2n−1 series 41, 55, 69"),
    ClassRule("cycloalkane", ((41, 40), (55, 40), (69, 20), (83, 15)), "CnH2n−1 series 41, 55, 69, 83"),
    ClassRule("alkylbenzene", ((91, 50), (65, 3), (39, 3)), "tropylium 91 with 65 and 39"),
    ClassRule("terpene", ((93, 50), (91, 15), (77, 10)), "C7H9+ 93 with 91 and 77"),
    ClassRule("fatty acid methyl ester", ((74, 40), (87, 25)), "rearrangement ion 74 with 87"),
    ClassRule("fatty acid ethyl ester", ((88, 40), (101, 20)), "rearrangement ion 88 with 101"),
    ClassRule("fatty acid", ((60, 30), (73, 30)), "rearrangement ion 60 with 73"),
    ClassRule("acetate", ((43, 60),), "acetyl 43 as one of the tallest ions"),
    ClassRule("phthalate", ((149, 40),), "protonated phthalic anhydride 149", CONTAMINANTS),
    ClassRule("TMS derivative", ((73, 40), (75, 5)), "trimethylsilyl 73 with 75"),
    ClassRule("TMS derivative", ((73, 20), (147, 8)), "trimethylsilyl 73 with 147 (two groups or more)"),
    ClassRule("siloxane", ((73, 10), (147, 5), (207, 5)), "siloxane ions 73, 147, 207", CONTAMINANTS),
    ClassRule("alcohol", ((31, 20),), "CH2OH+ 31"),
    ClassRule("acetal", ((75, 40),), "dimethoxymethyl 75"),
    ClassRule("amine", ((30, 40),), "CH2NH2+ 30"),
    ClassRule("amine", ((44, 60),), "C2H6N+ 44"),
    ClassRule("amine", ((58, 60),), "C3H8N+ 58"),
    ClassRule("amine", ((86, 60),), "C5H12N+ 86"),
    ClassRule("pyridine", ((79, 30), (52, 10)), "pyridine ions 79 and 52"),
    ClassRule("indole", ((130, 50), (103, 3)), "quinolinium 130 with 103"),
    ClassRule("thiophene", ((97, 50), (45, 5)), "thenyl 97 with CHS+ 45"),
    ClassRule("thiol", ((47, 10),), "CH2SH+ 47"),
    ClassRule("thioether", ((61, 20),), "C2H5S+ 61"),
    ClassRule("ketone", ((105, 50), (77, 20)), "benzoyl 105 with 77"),
    ClassRule("methoxyarene", ((121, 50), (91, 3)), "methoxybenzyl 121"),
    ClassRule("phosphate ester", ((99, 40),), "H4PO4+ 99"),
    ClassRule("perfluoroalkyl compound", ((69, 30), (119, 5)), "CF3+ 69 with C2F5+ 119", CONTAMINANTS),
    ClassRule("nitrile", ((41, 30), (54, 10), (82, 5)), "ions 41, 54, 82, 96 of long-chain nitriles"),
)  # fmt: skip
