"""Results as a table: one row per candidate, for a spreadsheet. The only owner of pandas."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Any

from identify.records import Candidate, EvidenceItem, Identification, LibraryState, Report, Verdict
from identify.writers.files import write_atomically
from identify.writers.rows_csv import make_harmless

COLUMNS = (
    "query_id",
    "query_name",
    "source",
    "retention_time_s",
    "retention_index",
    "claim_level",
    "claim",
    "claim_probability",
    "in_library_probability",
    "rank",
    "name",
    "formula",
    "measured_as",
    "inchikey",
    "smiles",
    "cosine",
    "reverse",
    "matched_peaks",
    "probability",
    "evidence_agrees",
    "evidence_conflicts",
    "evidence_inconclusive",
    "evidence_not_assessed",
    "evidence",
    "accession",
    "status",
    "licence",
    "authors",
    "library",
    "library_fingerprint",
    "program_version",
)
DECIMALS = 6


def write_csv(path: Path, report: Report) -> None:
    """Nothing comes out; afterwards `path` holds one row per candidate (RFC 4180, UTF-8), whole or not at all.

    Parameters
    ----------
    path : Path
    report : Report

    Raises
    ------
    UsageError
        If the file cannot be written.
    """
    write_atomically(path, report_to_csv(report).encode("utf-8", "backslashreplace"))


def report_to_csv(report: Report) -> str:
    """CSV text of a report: the header of `COLUMNS`, then one row per candidate, best first.

    Parameters
    ----------
    report : Report

    Returns
    -------
    str
        Lines end with CR LF. A query without candidates keeps one row, its candidate cells empty.

    Notes
    -----
    Text that a spreadsheet would run as a formula gets an apostrophe in front (`make_harmless`); numbers are numbers. Scores and
    probabilities carry `DECIMALS` decimals.
    """
    import pandas

    # dtype=object keeps whole numbers whole in columns that have empty cells.
    frame = pandas.DataFrame(list(_rows(report)), columns=list(COLUMNS), dtype=object)
    text: str = frame.to_csv(index=False, lineterminator="\r\n", na_rep="")
    return text


def _rows(report: Report) -> Iterator[dict[str, Any]]:
    states = {state.path: state for state in report.libraries}
    for found in report.identifications:
        shared = {**_query_cells(found), "program_version": report.version}
        if not found.candidates:
            yield _harmless({**dict.fromkeys(COLUMNS), **shared})
        for candidate in found.candidates:
            yield _harmless({**shared, **_candidate_cells(candidate, states.get(candidate.library))})


def _query_cells(found: Identification) -> dict[str, Any]:
    record = found.query.record
    return {
        "query_id": found.query.id,
        "query_name": record.identity.name or record.title,
        "source": str(record.source),
        "retention_time_s": _rounded(record.retention.time_s),
        "retention_index": _rounded(record.retention.index),
        "claim_level": found.claim.level.value,
        "claim": found.claim.statement,
        "claim_probability": _rounded(found.claim.probability),
        "in_library_probability": _rounded(found.in_library_probability),
    }


def _candidate_cells(candidate: Candidate, library: LibraryState | None) -> dict[str, Any]:
    entry, identity = candidate.entry, candidate.entry.identity
    verdicts = [item.verdict for item in candidate.evidence]
    return {
        "rank": candidate.rank,
        "name": identity.name,
        "formula": identity.formula,
        "measured_as": entry.measured_as,
        "inchikey": identity.inchikey,
        "smiles": identity.smiles,
        "cosine": _rounded(candidate.cosine),
        "reverse": _rounded(candidate.reverse),
        "matched_peaks": candidate.aligned.n_matched,
        "probability": _rounded(candidate.probability),
        "evidence_agrees": verdicts.count(Verdict.AGREES),
        "evidence_conflicts": verdicts.count(Verdict.CONFLICTS),
        "evidence_inconclusive": verdicts.count(Verdict.INCONCLUSIVE),
        "evidence_not_assessed": verdicts.count(Verdict.NOT_ASSESSED),
        "evidence": " | ".join(_evidence_text(item) for item in candidate.evidence),
        "accession": entry.accession,
        "status": entry.status.value,
        "licence": entry.licence,
        "authors": entry.authors,
        "library": candidate.library,
        "library_fingerprint": library.fingerprint if library else "",
    }


def _evidence_text(item: EvidenceItem) -> str:
    return f"{item.kind}: {item.verdict.value} – {item.reason}"


def _harmless(cells: dict[str, Any]) -> dict[str, Any]:
    return {name: make_harmless(value) if isinstance(value, str) else value for name, value in cells.items()}


def _rounded(value: float | None) -> float | None:
    return None if value is None else round(float(value), DECIMALS) + 0.0
