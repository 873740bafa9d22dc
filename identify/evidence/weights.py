"""Measured log-odds of each cell of each check (see `identify.evidence.finding`).

Fitted on the open EI records (MassBank release 2025.05.1, 60–80 eV or unstated, unlabelled)
by `tests/benchmarks/fit_evidence.py weights`: 2,510 queries. Right: the best other entry of the compound;
wrong: the three most similar entries of another formula. For `ions missing in the query` and `ions only in the
query` at equal cosine similarity. The comment gives how many right and wrong candidates fell into the cell.
"""

from __future__ import annotations

LOG_ODDS: dict[str, dict[str, float]] = {
    "molecular ion": {
        "M − 15, entry medium, query absent": -1.61,  # 2 right, 15 wrong
        "M − 15, entry medium, query medium": 0.97,  # 24 right, 8 wrong
        "M − 15, entry medium, query strong": 0.49,  # 5 right, 2 wrong
        "M − 15, entry medium, query weak": 0.21,  # 5 right, 4 wrong
        "M − 15, entry strong, query absent": -1.20,  # 0 right, 1 wrong
        "M − 15, entry strong, query medium": -0.01,  # 3 right, 3 wrong
        "M − 15, entry strong, query strong": 0.24,  # 20 right, 15 wrong
        "M − 15, entry strong, query weak": 1.20,  # 1 right, 0 wrong
        "M − 15, entry weak, query absent": -2.95,  # 2 right, 49 wrong
        "M − 15, entry weak, query medium": 1.22,  # 9 right, 2 wrong
        "M − 15, entry weak, query weak": 1.67,  # 35 right, 5 wrong
        "M − 57, entry medium, query absent": -1.91,  # 0 right, 2 wrong
        "M − 57, entry medium, query medium": -0.38,  # 0 right, 0 wrong
        "M − 57, entry medium, query weak": -0.38,  # 0 right, 0 wrong
        "M − 57, entry strong, query absent": -1.00,  # 0 right, 1 wrong
        "M − 57, entry strong, query medium": -0.38,  # 0 right, 0 wrong
        "M − 57, entry strong, query strong": -1.57,  # 0 right, 1 wrong
        "M − 57, entry strong, query weak": -2.23,  # 0 right, 2 wrong
        "entry absent, query absent": -0.29,  # 602 right, 797 wrong
        "entry absent, query medium": 0.35,  # 8 right, 5 wrong
        "entry absent, query strong": 4.27,  # 6 right, 0 wrong
        "entry absent, query weak": 1.46,  # 82 right, 18 wrong
        "entry medium, query absent": -2.56,  # 12 right, 165 wrong
        "entry medium, query medium": 1.44,  # 298 right, 69 wrong
        "entry medium, query strong": 0.52,  # 70 right, 40 wrong
        "entry medium, query weak": 0.31,  # 57 right, 41 wrong
        "entry strong, query absent": -1.22,  # 9 right, 34 wrong
        "entry strong, query medium": -0.55,  # 82 right, 143 wrong
        "entry strong, query strong": 0.26,  # 670 right, 513 wrong
        "entry strong, query weak": -0.38,  # 19 right, 28 wrong
        "entry weak, query absent": -1.50,  # 91 right, 412 wrong
        "entry weak, query medium": 0.77,  # 50 right, 22 wrong
        "entry weak, query strong": 0.73,  # 16 right, 7 wrong
        "entry weak, query weak": 1.52,  # 217 right, 46 wrong
    },
    "isotope pattern": {
        "halogen, high": -0.39,  # 6 right, 10 wrong
        "halogen, low": -1.50,  # 5 right, 27 wrong
        "halogen, ok": 2.27,  # 107 right, 10 wrong
        "none, high": -2.37,  # 6 right, 73 wrong
        "none, low": -0.01,  # 4 right, 4 wrong
        "none, ok": 0.49,  # 905 right, 546 wrong
        "sulfur or silicon, high": -0.58,  # 8 right, 16 wrong
        "sulfur or silicon, low": -0.54,  # 15 right, 27 wrong
        "sulfur or silicon, ok": 1.18,  # 209 right, 63 wrong
    },
    "halogens in fragments": {
        "agrees": 0.90,  # 55 right, 21 wrong
        "formula only": -0.27,  # 69 right, 90 wrong
        "has too few": -5.04,  # 0 right, 10 wrong
        "lacks them": -2.26,  # 2 right, 26 wrong
    },
    "carbon count": {
        "narrow, excess": -2.21,  # 5 right, 53 wrong
        "narrow, far too few": -1.91,  # 0 right, 2 wrong
        "narrow, near": 1.37,  # 28 right, 6 wrong
        "narrow, too few": -0.77,  # 1 right, 4 wrong
        "narrow, within": 0.27,  # 21 right, 15 wrong
        "wide, excess": -1.24,  # 2 right, 10 wrong
        "wide, excess explainable": -0.50,  # 35 right, 59 wrong
        "wide, far too few": -0.17,  # 24 right, 29 wrong
        "wide, near": 1.12,  # 458 right, 147 wrong
        "wide, too few": -0.75,  # 4 right, 10 wrong
        "wide, within": 0.11,  # 330 right, 292 wrong
    },
    "losses from M": {
        "none": 0.16,  # 2043 right, 1731 wrong
        "some": -1.69,  # 22 right, 125 wrong
        "some, entry too": 0.71,  # 83 right, 39 wrong
        "strong": -1.97,  # 10 right, 78 wrong
        "strong, entry too": 0.51,  # 26 right, 15 wrong
        "trace": -0.61,  # 79 right, 145 wrong
        "trace, entry too": 0.61,  # 123 right, 65 wrong
    },
    "ions above M": {
        "none": 0.33,  # 2369 right, 1690 wrong
        "some": -2.31,  # 33 right, 341 wrong
        "some, entry too": 0.49,  # 22 right, 13 wrong
        "strong": -2.77,  # 16 right, 268 wrong
        "strong, entry too": -0.80,  # 6 right, 15 wrong
        "trace": -1.28,  # 41 right, 151 wrong
        "trace, entry too": 0.76,  # 23 right, 10 wrong
    },
    "nitrogen rule and rings": {
        "even N, few even": -1.95,  # 10 right, 76 wrong
        "even N, many even": -0.02,  # 131 right, 133 wrong
        "even N, some even": -0.47,  # 55 right, 88 wrong
        "impossible": -1.57,  # 0 right, 1 wrong
        "no N, few even": 0.19,  # 811 right, 661 wrong
        "no N, many even": -0.25,  # 204 right, 261 wrong
        "no N, some even": 0.02,  # 814 right, 788 wrong
        "odd N, few even": -0.51,  # 48 right, 80 wrong
        "odd N, many even": 0.27,  # 284 right, 214 wrong
        "odd N, some even": -0.27,  # 116 right, 152 wrong
    },
    "intensity explained": {
        "little": -0.24,  # 42 right, 54 wrong
        "much": -1.23,  # 12 right, 44 wrong
        "none": 0.02,  # 2375 right, 2316 wrong
        "some": 0.47,  # 46 right, 28 wrong
        "trace": -0.25,  # 35 right, 45 wrong
    },
    "ions missing in the query": {
        "few": -0.25,  # 309 right, 352 wrong
        "many": -0.13,  # 173 right, 719 wrong
        "none": 0.34,  # 1767 right, 535 wrong
        "some": -0.43,  # 261 right, 881 wrong
    },
    "ions only in the query": {
        "few": 0.13,  # 283 right, 278 wrong
        "many": -0.41,  # 143 right, 694 wrong
        "many, foreign": -2.15,  # 9 right, 226 wrong
        "none": 0.55,  # 1825 right, 458 wrong
        "some": -0.20,  # 246 right, 684 wrong
        "some, foreign": -1.97,  # 4 right, 146 wrong
    },
    "accurate mass": {
        "all": 0.68,  # 81 right, 40 wrong
        "few": -2.27,  # 2 right, 27 wrong
        "half": -1.80,  # 1 right, 11 wrong
        "most": -0.52,  # 8 right, 15 wrong
    },
    "retention index": {
        "agrees": 3.38,  # 124 right, 4 wrong
        "between": 2.49,  # 68 right, 5 wrong
        "conflicts": -1.23,  # 18 right, 65 wrong
        "phase not stated": 0.36,  # 182 right, 125 wrong
    },
}
