"""What a further entry must bring to be called a compound of its own (see `identify.evidence.purity`).

Fitted on the open EI records (MassBank release 2025.05.1, 60–80 eV or unstated, unlabelled)
by `tests/benchmarks/fit_purity.py`: 1,400 spectra mixed from replicates or pure, half of the compounds.
"""

from __future__ import annotations

PURITY_WEIGHTS = (-0.837, -0.312, -4.640, 0.023, -3.269, -0.590, -0.166)
"""Constant, then one for each of `purity_features`."""
LEAST_CHANCE = 0.755
"""By five-fold cross-validation 1% of the pure spectra that have an entry and a second part to try
reach it."""
