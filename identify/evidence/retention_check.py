"""The retention index of a candidate's entry against the query's."""

from __future__ import annotations

from identify.evidence.finding import Finding, not_assessed
from identify.records import Entry, EntryStatus, Query, Retention, Verdict
from identify.retention import doubt_about_index, phase_class

RETENTION = "retention index"
SUPPORTS, CONTRADICTS = 20.0, 50.0
OWN_SUPPORTS, OWN_CONTRADICTS = 8.0, 20.0
SOURCE = (
    "|ΔRI| ≤ 20 corroborates, > 50 rejects: PDA J. Pharm. Sci. Technol. 2025, 79(6), 568 (3,140 confirmed compounds), same phase "
    "class; own standards ≤ 8 / > 20 (this project's choice after the common practice of ± 2–5 on the same column and method)"
)


def check_retention(query: Query, entry: Entry) -> Finding:
    """Whether the retention indices of query and entry agree, on the same phase class.

    Parameters
    ----------
    query : Query
    entry : Entry

    Returns
    -------
    Finding
        Three states: within the narrow window, beyond the wide one, or in between.
    """
    index, own_index = query.record.retention.index, entry.retention.index
    if index is None or own_index is None:
        return not_assessed(RETENTION, f"The {'query' if index is None else 'entry'} states no retention index.")
    for holder, retention in (("query", query.record.retention), ("entry", entry.retention)):
        doubt = doubt_about_index(retention.index, retention.time_s)
        if doubt:
            return not_assessed(RETENTION, f"The index of the {holder} is not used: {doubt}.")
    ours, theirs = _phase(query.record.retention), _phase(entry.retention)
    difference = index - own_index
    shown = {
        "observed": f"{index:.0f}" + (f" ({ours})" if ours else ""),
        "expected": f"{own_index:.0f}" + (f" ({theirs})" if theirs else ""),
        "source": SOURCE,
    }
    if ours and theirs and ours != theirs:
        return Finding(
            RETENTION, Verdict.NOT_ASSESSED, f"Indices on {ours} and {theirs} columns cannot be compared.", **shown
        )
    own = entry.status is EntryStatus.OWN_STANDARD
    narrow, wide = (OWN_SUPPORTS, OWN_CONTRADICTS) if own else (SUPPORTS, CONTRADICTS)
    source_word = "own standard" if own else "reference value"
    shown["uncertainty"] = f"± {narrow:g} agrees, beyond ± {wide:g} conflicts ({source_word})"
    size = abs(difference)
    if not (ours and theirs):
        reason = f"The indices differ by {difference:+.0f}, but a column phase is not stated, so this decides nothing."
        return Finding(RETENTION, Verdict.INCONCLUSIVE, reason, cell="phase not stated", **shown)
    if size <= narrow:
        verdict, cell, reason = (
            Verdict.AGREES,
            "agrees",
            f"The indices differ by {difference:+.0f}, within ± {narrow:g}.",
        )
    elif size > wide:
        verdict, cell, reason = (
            Verdict.CONFLICTS,
            "conflicts",
            f"The indices differ by {difference:+.0f}, beyond ± {wide:g}.",
        )
    else:
        verdict, cell = Verdict.INCONCLUSIVE, "between"
        reason = f"The indices differ by {difference:+.0f}: too much to agree, too little to conflict."
    return Finding(RETENTION, verdict, reason, cell=f"own standard, {cell}" if own else cell, **shown)


def _phase(retention: Retention) -> str:
    return retention.phase or phase_class(retention.column)
