"""Calibration of class votes and worth of characteristic ions.

Fitted on the open EI records (MassBank release 2025.05.1, 60–80 eV or unstated, unlabelled)
by `tests/benchmarks/fit_evidence.py classes`, the compound removed from the library.
"""

from __future__ import annotations

CALIBRATION = (-0.173, 1.026, 0.039, 0.429)
"""Constant, logit of the share of votes, best cosine, ln ratio of characteristic ions."""
RULE_LOG_RATIO: dict[str, float] = {
    "n-alkane: CnH2n+1 series 43, 57, 71, 85 falling evenly": 5.09,  # met by 17 of the class, 20 others
    "branched alkane: CnH2n+1 series 43, 57, 71": 3.26,  # met by 4 of the class, 98 others
    "alkene: CnH2n−1 series 41, 55, 69": 1.91,  # met by 9 of the class, 95 others
    "cycloalkane: CnH2n−1 series 41, 55, 69, 83": 1.91,  # met by 3 of the class, 118 others
    "alkylbenzene: tropylium 91 with 65 and 39": 2.85,  # met by 13 of the class, 164 others
    "terpene: C7H9+ 93 with 91 and 77": 3.61,  # met by 11 of the class, 38 others
    "fatty acid methyl ester: rearrangement ion 74 with 87": 5.60,  # met by 25 of the class, 10 others
    "fatty acid ethyl ester: rearrangement ion 88 with 101": 5.81,  # met by 8 of the class, 14 others
    "fatty acid: rearrangement ion 60 with 73": 4.56,  # met by 6 of the class, 20 others
    "acetate: acetyl 43 as one of the tallest ions": 1.92,  # met by 154 of the class, 508 others
    "phthalate: protonated phthalic anhydride 149": 4.26,  # met by 31 of the class, 57 others
    "TMS derivative: trimethylsilyl 73 with 75": 2.83,  # met by 229 of the class, 83 others
    "TMS derivative: trimethylsilyl 73 with 147 (two groups or more)": 3.13,  # met by 135 of the class, 36 others
    "siloxane: siloxane ions 73, 147, 207": 3.48,  # met by 1 of the class, 15 others
    "alcohol: CH2OH+ 31": 2.02,  # met by 78 of the class, 66 others
    "acetal: dimethoxymethyl 75": 1.65,  # met by 28 of the class, 131 others
    "amine: CH2NH2+ 30": 2.31,  # met by 41 of the class, 41 others
    "amine: C2H6N+ 44": 1.33,  # met by 25 of the class, 67 others
    "amine: C3H8N+ 58": 2.37,  # met by 51 of the class, 48 others
    "amine: C5H12N+ 86": 2.15,  # met by 17 of the class, 20 others
    "pyridine: pyridine ions 79 and 52": 1.65,  # met by 6 of the class, 38 others
    "indole: quinolinium 130 with 103": 1.97,  # met by 2 of the class, 20 others
    "thiophene: thenyl 97 with CHS+ 45": 3.30,  # met by 0 of the class, 7 others
    "thiol: CH2SH+ 47": 2.49,  # met by 7 of the class, 107 others
    "thioether: C2H5S+ 61": 2.70,  # met by 20 of the class, 72 others
    "ketone: benzoyl 105 with 77": 1.24,  # met by 50 of the class, 114 others
    "methoxyarene: methoxybenzyl 121": 1.16,  # met by 12 of the class, 77 others
    "phosphate ester: H4PO4+ 99": 2.37,  # met by 10 of the class, 94 others
    "perfluoroalkyl compound: CF3+ 69 with C2F5+ 119": 3.78,  # met by 5 of the class, 71 others
    "nitrile: ions 41, 54, 82, 96 of long-chain nitriles": 0.81,  # met by 3 of the class, 102 others
}
"""ln of how much more often spectra of the class meet the rule; 0 for a rule that does not help."""
