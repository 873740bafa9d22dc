"""Results as JSON: the stable contract ``ionwitness.result/1``, described by ``identify/schemas/result-1.json``.

The other writers and the pages read the same `Report`; this file fixes names, order and rounding of what leaves the program.
"""

from __future__ import annotations

import json
from collections.abc import Iterable, Iterator, Mapping, Sequence
from functools import cache, lru_cache
from importlib import resources
from json.encoder import encode_basestring
from math import isfinite
from pathlib import Path
from typing import Any

from identify.records import (
    Candidate,
    Claim,
    CleaningStep,
    EvidenceItem,
    FollowUp,
    Identification,
    LibraryState,
    MolecularIonEstimate,
    Purity,
    Rejection,
    Report,
)
from identify.writers.explanation_json import write_explanations
from identify.writers.files import open_atomically

SCHEMA_NAME = "ionwitness.result/1"
SCHEMA_FILE = "result-1.json"
_LISTS = ("queries", "rejected")
"""Parts of a result with a line for each row; the last ones."""
DECIMALS = 6
"""Decimals of scores, probabilities, log-odds and m/z: far below what any of them means, so no information is lost."""
SIGNIFICANT_DIGITS = 6
"""Digits of intensities, which come in any unit."""


def load_schema() -> dict[str, Any]:
    """JSON Schema (draft 2020-12) of the result, as a dict.

    Returns
    -------
    dict

    Examples
    --------
    >>> load_schema()["properties"]["schema"]["const"]
    'ionwitness.result/1'
    """
    text = resources.files("identify").joinpath("schemas", SCHEMA_FILE).read_text(encoding="utf-8")
    schema: dict[str, Any] = json.loads(text)
    return schema


def report_to_dict(report: Report) -> dict[str, Any]:
    """Plain dict of a report in the order and with the names of the result contract.

    Parameters
    ----------
    report : Report

    Returns
    -------
    dict
        JSON values only (str, int, float, bool, None, list, dict); valid against `load_schema`.

    Notes
    -----
    ``library`` is the first library searched and ``libraries`` all of them. Scores, probabilities and log-odds carry
    `DECIMALS` decimals; parts of an explanation are rounded together so that the printed parts add up to the printed
    value (`identify.writers.explanation_json`). Same report, same dict: nothing here reads a clock, a locale or the
    environment. The dict is the text of `report_to_json`, read back: what a result says is decided once.
    """
    document: dict[str, Any] = json.loads(report_to_json(report))
    return document


def report_to_json(report: Report) -> str:
    """JSON text of a report, one query a line, ending with a newline.

    Parameters
    ----------
    report : Report

    Returns
    -------
    str
        Strict JSON (no NaN or Infinity), in UTF-8 characters; lone surrogates from broken input are written as escapes.

    Raises
    ------
    ValueError
        If a number is not finite: a bug upstream that must not reach a file.
    """
    queries = (identification_to_json(found) for found in report.identifications)
    return "".join(_json_pieces(report, queries, report.rejected))


def identification_to_json(found: Identification) -> str:
    """One line of JSON: what stands for one query under ``queries``.

    Parameters
    ----------
    found : Identification

    Returns
    -------
    str

    Raises
    ------
    ValueError
        If a number is not finite.
    """
    hits = ", ".join(_hit_texts(found.candidates))
    return f'{{{_members(_query(found))}, "hits": [{hits}], {_members(_beside_hits(found))}}}'


def _json_pieces(frame: Report, queries: Iterable[str], rejected: Sequence[Rejection]) -> Iterator[str]:
    """The text of a result, piece by piece; `rejected` is looked at when all queries are out, for it may grow until then."""
    yield "{"
    for name, value in _frame(frame).items():
        yield f"\n  {_dumps(name)}: {_dumps(value)},"
    for name, rows in zip(_LISTS, (queries, (_dumps(_rejection(row)) for row in rejected)), strict=True):
        comma = "," if name != _LISTS[-1] else ""
        yield f"\n  {_dumps(name)}: ["
        before = "\n    "
        for row in rows:
            yield before + row
            before = ",\n    "
        yield f"]{comma}" if before == "\n    " else f"\n  ]{comma}"
    yield "\n}\n"


def write_json(path: Path, report: Report) -> None:
    """Nothing comes out; afterwards `path` holds the report as JSON, whole or not at all.

    Parameters
    ----------
    path : Path
    report : Report

    Raises
    ------
    UsageError
        If the file cannot be written.
    ValueError
        If a number in the report is not finite (a bug).
    """
    queries = (identification_to_json(found) for found in report.identifications)
    write_json_stream(path, report, queries, report.rejected)


def write_json_stream(path: Path, frame: Report, queries: Iterable[str], rejected: Sequence[Rejection]) -> None:
    """Nothing comes out; afterwards `path` holds a report whose queries came one by one, whole or not at all.

    Parameters
    ----------
    path : Path
    frame : Report
        Program, settings and libraries; its queries and rejections are not looked at.
    queries : iterable of str
        From `identification_to_json`.
    rejected : sequence of Rejection
        May grow while `queries` are taken.

    Raises
    ------
    UsageError
        If the file cannot be written.
    """
    with open_atomically(path) as file:
        for piece in _json_pieces(frame, queries, rejected):
            # A lone surrogate cannot be UTF-8; its backslash form is the JSON escape of the same character.
            file.write(piece.encode("utf-8", "backslashreplace"))


def _frame(report: Report) -> dict[str, Any]:
    """All of a result but its lists."""
    libraries = [_library(state) for state in report.libraries]
    return {
        "schema": SCHEMA_NAME,
        "program": {"name": report.program, "version": report.version},
        "settings": _plain(report.settings),
        "library": libraries[0] if libraries else None,
        "libraries": libraries,
    }


def _query(found: Identification) -> dict[str, Any]:
    """A query before its hits: what was measured, and what it says by itself."""
    record, spectrum = found.query.record, found.query.spectrum
    return {
        "id": found.query.id,
        "source": str(record.source),
        "name": record.identity.name or record.title,
        "retention_time_s": _optional(record.retention.time_s),
        "retention_index": _optional(record.retention.index),
        "lowest_mz": spectrum.lowest_mz,
        "peaks": _pairs(zip(spectrum.nominal.mz.tolist(), spectrum.nominal.relative.tolist(), strict=True)),
        "cleaning": [_cleaning(step) for step in spectrum.steps],
        "molecular_ion": _molecular_ion(found.molecular_ion),
        "in_library_probability": _number(found.in_library_probability),
        "claim": _claim(found.claim),
    }


def _beside_hits(found: Identification) -> dict[str, Any]:
    """A query behind its hits."""
    return {
        "follow_up": [_follow_up(plan) for plan in found.follow_up],
        "notes": list(found.notes),
        "purity": None if found.purity is None else _purity(found.purity),
        "classes": [
            {
                "name": item.name,
                "probability": _number(item.probability),
                "neighbours": list(item.neighbours),
                "ions": list(item.ions),
            }
            for item in found.classes
        ],
        "analogues": [
            {
                "name": item.name,
                "accession": item.accession,
                "shift": item.shift,
                "text": item.text,
                "score": _number(item.score),
            }
            for item in found.analogues
        ],
    }


def _purity(found: Purity) -> dict[str, Any]:
    left = found.residual
    return {
        "verdict": found.verdict.value,
        "reason": found.reason,
        "parts": [
            {"name": part.name, "accession": part.accession, "share": _number(part.share)} for part in found.parts
        ],
        "explained_share": _number(found.explained_share),
        "misfit": [_number(value) for value in found.misfit],
        "residual": None if left is None else _pairs(zip(left.mz.tolist(), left.intensity.tolist(), strict=True)),
        "background": list(found.background),
    }


def _cleaning(step: CleaningStep) -> dict[str, Any]:
    return {
        "step": step.step,
        "reason": step.reason,
        "peaks_before": step.peaks_before,
        "peaks_after": step.peaks_after,
        "removed": _pairs(step.removed),
    }


def _molecular_ion(found: MolecularIonEstimate) -> dict[str, Any]:
    return {
        "estimates": [
            {"nominal_mass": row.nominal_mass, "probability": _number(row.probability), "basis": list(row.basis)}
            for row in found.estimates
        ],
        "not_observed_probability": _number(found.not_observed_probability),
        "agreement": found.agreement,
    }


def _claim(claim: Claim) -> dict[str, Any]:
    return {
        "level": claim.level.value,
        "statement": claim.statement,
        "probability": _number(claim.probability),
        "members": list(claim.members),
        "levels": {
            "compound": _number(claim.compound_probability),
            "isomer group": _number(claim.group_probability),
            "class": _number(claim.class_probability),
        },
        "unlisted_isomers": claim.unlisted_isomers,
        "msi_2007": claim.msi_2007,
        "schymanski_2014": claim.schymanski_2014,
    }


def _hit_texts(candidates: Sequence[Candidate]) -> Iterator[str]:
    """JSON of each candidate."""
    trees = [candidate.explanation for candidate in candidates]
    explanations = write_explanations(trees, DECIMALS)
    for candidate, told in zip(candidates, explanations, strict=True):
        evidence = ", ".join(map(_evidence_text, candidate.evidence))
        notes = _dumps(list(candidate.notes))
        yield f'{{{_members(_hit(candidate))}, "evidence": [{evidence}], "explanation": {told}, "notes": {notes}}}'


def _hit(candidate: Candidate) -> dict[str, Any]:
    """A candidate up to its evidence."""
    entry, identity = candidate.entry, candidate.entry.identity
    return {
        "rank": candidate.rank,
        "name": identity.name,
        "formula": identity.formula,
        "measured_as": entry.measured_as or None,
        "formula_as_measured": entry.formula_as_measured or None,
        "inchikey": identity.inchikey,
        "smiles": identity.smiles,
        "accession": entry.accession,
        "licence": entry.licence,
        "authors": entry.authors,
        "status": entry.status.value,
        "library": candidate.library,
        "cosine": _number(candidate.cosine),
        "reverse": _number(candidate.reverse),
        "matched_peaks": candidate.aligned.n_matched,
        "compared_from_mz": candidate.aligned.lowest_mz,
        "entries_of_compound": candidate.n_entries,
        "probability": _number(candidate.probability),
    }


@lru_cache(maxsize=8192)  # two thirds of the items of a query stand under several of its candidates
def _evidence_text(item: EvidenceItem) -> str:
    q = encode_basestring
    return (
        f'{{"kind": {q(item.kind)}, "verdict": {q(item.verdict.value)}, "reason": {q(item.reason)}, '
        f'"observed": {q(item.observed)}, "expected": {q(item.expected)}, "uncertainty": {q(item.uncertainty)}, '
        f'"log_odds": {_number(item.log_odds)}, "source": {q(item.source)}}}'
    )


def _follow_up(plan: FollowUp) -> dict[str, Any]:
    return {
        "action": plan.action,
        "reason": plan.reason,
        "candidates": list(plan.candidates),
        "decides": plan.decides,
        "priority": _number(plan.priority),
    }


def _library(state: LibraryState) -> dict[str, Any]:
    return {
        "path": state.path,
        "fingerprint": state.fingerprint,
        "entries": state.entries,
        "compounds": state.compounds,
        "calibration": state.calibration,
    }


def _rejection(item: Rejection) -> dict[str, Any]:
    return {
        "source": item.source,
        "line": item.line,
        "reason": item.reason,
        "found": item.found,
        "expected": item.expected,
        "hint": item.hint,
    }


def _number(value: float) -> float:
    rounded = round(float(value), DECIMALS)
    if not isfinite(rounded):
        raise ValueError(f"a result holds {rounded}, which JSON cannot say")
    return rounded + 0.0  # turns -0.0 into 0.0, so that equal results are equal text


def _optional(value: float | None) -> float | None:
    return None if value is None else _number(value)


def _pairs(pairs: Iterable[tuple[float, float]]) -> list[list[float]]:
    return [[_number(mz), float(f"{intensity:.{SIGNIFICANT_DIGITS}g}")] for mz, intensity in pairs]


def _plain(value: Any) -> Any:
    """Settings as JSON values: mappings and sequences unfolded, in their own order."""
    if isinstance(value, Mapping):
        return {str(name): _plain(item) for name, item in value.items()}
    if isinstance(value, Sequence) and not isinstance(value, str):
        return [_plain(item) for item in value]
    return value


@cache
def _encoder() -> json.JSONEncoder:
    return json.JSONEncoder(ensure_ascii=False, allow_nan=False, separators=(", ", ": "))


def _dumps(value: Any) -> str:
    return _encoder().encode(value)


def _members(values: dict[str, Any]) -> str:
    """JSON members of a mapping, to be joined with others."""
    return _dumps(values)[1:-1]
