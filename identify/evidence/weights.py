"""Measured log-odds of each cell of each check (see `identify.evidence.finding`).

Fitted on the open EI records (MassBank release 2025.05.1, 60–80 eV or unstated, unlabelled): one record of every compound
with replicates as the query, its compound's best other entry as the right candidate, the three most similar entries of
another formula as wrong ones. First fit by hand; `tests/benchmarks/fit_evidence.py` replaces it.
"""

from __future__ import annotations

LOG_ODDS: dict[str, dict[str, float]] = {
    "carbon count": {"far high": -0.59, "far low": -0.06, "high": -0.16, "low": -0.54, "ok": 0.86},
    "intensity explained": {"little": -0.14, "much": -1.11, "none": 0.01, "some": 0.33, "trace": -0.14},
    "ions above M": {
        "none": 0.29,
        "some": -1.97,
        "some, entry too": 0.54,
        "strong": -1.95,
        "strong, entry too": -0.92,
        "trace": -1.18,
        "trace, entry too": 0.15,
    },
    "isotope pattern": {
        "halogen, high": -0.31,
        "halogen, low": -1.27,
        "halogen, ok": 2.06,
        "none, high": -1.32,
        "none, low": -0.26,
        "none, ok": 0.46,
        "sulfur or silicon, high": -0.41,
        "sulfur or silicon, low": -0.02,
        "sulfur or silicon, ok": 0.82,
    },
    "losses from M": {
        "none": 0.17,
        "some": -1.56,
        "some, entry too": 0.6,
        "strong": -1.66,
        "strong, entry too": 0.41,
        "trace": -0.58,
        "trace, entry too": 0.55,
    },
    "molecular ion": {
        "entry absent, query absent": -0.24,
        "entry absent, query medium": -0.15,
        "entry absent, query strong": 0.66,
        "entry absent, query weak": 1.15,
        "entry medium, query absent": -1.99,
        "entry medium, query medium": 1.49,
        "entry medium, query strong": 0.59,
        "entry medium, query weak": 0.34,
        "entry strong, query absent": -1.1,
        "entry strong, query medium": -0.73,
        "entry strong, query strong": 0.3,
        "entry strong, query weak": -0.22,
        "entry weak, query absent": -1.39,
        "entry weak, query medium": 0.76,
        "entry weak, query strong": 0.37,
        "entry weak, query weak": 1.58,
    },
    "nitrogen rule and rings": {
        "even N, few even": -1.58,
        "even N, many even": -0.06,
        "even N, some even": -0.62,
        "impossible": -0.26,
        "no N, few even": 0.21,
        "no N, many even": -0.3,
        "no N, some even": 0.05,
        "odd N, few even": -0.53,
        "odd N, many even": 0.34,
        "odd N, some even": -0.47,
    },
    "retention index": {"agrees": 2.64, "between": 1.89, "conflicts": -1.49, "phase not stated": 0.33},
}
