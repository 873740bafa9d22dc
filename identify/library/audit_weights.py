"""Placeholder until `tests/benchmarks/audit.py --fit` has run."""

BASE_LOG_ODDS = 0.0
CAUTION_FROM = 1.0
QUARANTINE_FROM = 3.0
WEIGHTS: dict[str, dict[str, float]] = {}
