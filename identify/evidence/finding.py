"""From what a check found to an evidence item: the verdict is chemistry, the log-odds are measured.

A check puts its observation into one of a few cells ("entry strong / query absent"). How often a right candidate and how often
a close wrong one falls into that cell was counted on the open records (`tests/benchmarks/fit_evidence.py`); the logarithm of the
quotient is the evidence. The table is `identify.evidence.weights`.
"""

from __future__ import annotations

from functools import lru_cache
from typing import NamedTuple

from identify.evidence.weights import LOG_ODDS
from identify.records import EvidenceItem, Verdict

SPEAKING = (Verdict.AGREES, Verdict.CONFLICTS)


class Finding(NamedTuple):
    """What one check found, before it is weighed.

    Attributes
    ----------
    kind : str
        Name of the check.
    verdict : Verdict
    reason : str
        One plain sentence.
    cell : str
        Row of the log-odds table; empty when nothing was assessed.
    observed, expected, uncertainty, source : str
        As in `EvidenceItem`.
    """

    kind: str
    verdict: Verdict
    reason: str
    cell: str = ""
    observed: str = ""
    expected: str = ""
    uncertainty: str = ""
    source: str = ""


def not_assessed(kind: str, reason: str) -> Finding:
    """A check that could not be made, with the reason."""
    return Finding(kind, Verdict.NOT_ASSESSED, reason)


@lru_cache(maxsize=4096)  # two thirds of what is found for a candidate was found for another one too
def weigh(finding: Finding) -> EvidenceItem:
    """Evidence item of a finding, with the measured log-odds of its cell.

    Parameters
    ----------
    finding : Finding
        What the check found.

    Returns
    -------
    EvidenceItem
        Log-odds 0 for a silent verdict and for a cell too rare to have been measured. A measured value whose sign contradicts
        the verdict is set to 0: "agrees" never counts against a candidate, "conflicts" never for it.
    """
    log_odds = 0.0
    if finding.verdict in SPEAKING:
        log_odds = LOG_ODDS.get(finding.kind, {}).get(finding.cell, 0.0)
        agrees = finding.verdict is Verdict.AGREES
        log_odds = max(log_odds, 0.0) if agrees else min(log_odds, 0.0)
    return EvidenceItem(
        kind=finding.kind,
        verdict=finding.verdict,
        reason=finding.reason,
        observed=finding.observed,
        expected=finding.expected,
        uncertainty=finding.uncertainty,
        log_odds=log_odds,
        source=finding.source,
    )
