"""Findings of runs as JSON: ``ionwitness.run/1``, the result contract inside it (``identify/schemas/run-1.json``)."""

from __future__ import annotations

import json
from importlib import resources
from pathlib import Path
from typing import Any

from identify.records import ClaimLevel
from identify.runs.findings import Finding, RetentionScale, RunFindings, RunsReport
from identify.writers.files import write_atomically
from identify.writers.results_json import report_to_dict

SCHEMA_NAME, SCHEMA_FILE = "ionwitness.run/1", "run-1.json"


def load_run_schema() -> dict[str, Any]:
    """JSON Schema (draft 2020-12) of the result of a run, as a dict.

    Returns
    -------
    dict

    Examples
    --------
    >>> load_run_schema()["properties"]["schema"]["const"]
    'ionwitness.run/1'
    """
    text = resources.files("identify").joinpath("schemas", SCHEMA_FILE).read_text(encoding="utf-8")
    schema: dict[str, Any] = json.loads(text)
    return schema


def runs_to_dict(found: RunsReport) -> dict[str, Any]:
    """Plain dict of the findings in the order and with the names of the contract.

    Parameters
    ----------
    found : RunsReport

    Returns
    -------
    dict
        JSON values only; ``result`` is a complete document of the result contract, to whose queries components point.
    """
    return {
        "schema": SCHEMA_NAME,
        "runs": [_run(run) for run in found.runs],
        "unknowns": [
            {"number": u.number, "members": [{"run": run, "component": c} for run, c in u.members]}
            for u in found.unknowns
        ],
        "result": report_to_dict(found.report),
    }


def write_run_json(path: Path, found: RunsReport) -> None:
    """Nothing comes out; afterwards `path` holds the findings as JSON, whole or not at all.

    Parameters
    ----------
    path : Path
    found : RunsReport

    Raises
    ------
    UsageError
        If the file cannot be written.
    """
    text = ",\n".join(f"{_dumps(name)}: {_dumps(value)}" for name, value in runs_to_dict(found).items())
    write_atomically(path, f"{{{text}}}\n".encode("utf-8", "backslashreplace"))


def _dumps(value: Any) -> str:
    return json.dumps(value, ensure_ascii=False, allow_nan=False)


def _run(run: RunFindings) -> dict[str, Any]:
    shares = run.shares
    return {
        "number": run.number,
        "source": run.run.source.path,
        "title": run.run.title,
        "instrument": run.run.instrument,
        "acquired": run.run.acquired,
        "scans": run.run.n_scans,
        "first_scan_s": _number(run.decomposition.time_s[0]),
        "last_scan_s": _number(run.decomposition.time_s[-1]),
        "peak_width_scans": _number(run.decomposition.width_scans),
        "skew_scans_per_mz": _number(run.decomposition.skew_scans_per_mz),
        "notes": list(run.notes),
        "retention_scale": _scale(run.scale) if run.scale else None,
        "signal": {
            "solvent_area": _number(shares.solvent),
            "background_area": _number(shares.background),
            "compounds_area": _number(shares.compounds),
            "unassigned_area": _number(shares.unassigned),
            "area_by_level": {level.value: _number(area) for level, area in shares.explained.items()},
            "explained_at_class_or_better": _number(shares.at_least(ClaimLevel.CLASS)),
        },
        "components": [_component(finding, shares.compounds) for finding in run.findings],
        "unexplained": [finding.component.number for finding in run.unexplained],
    }


def _scale(scale: RetentionScale) -> dict[str, Any]:
    return {
        "origin": scale.origin,
        "uncertainty": _number(scale.uncertainty),
        "phase": scale.phase,
        "ladder": [
            {"carbons": n, "time_min": _number(time)}
            for n, time in zip(scale.ladder.carbons, scale.ladder.times, strict=True)
        ],
    }


def _component(finding: Finding, compounds: float) -> dict[str, Any]:
    c = finding.component
    index = finding.retention_index
    return {
        "number": c.number,
        "query": finding.identification.query.id if finding.identification else None,
        "reason_without_query": finding.reason,
        "unknown": finding.unknown,
        "kind": c.kind.value,
        "note": c.note,
        "time_s": _number(c.time_s),
        "start_s": _number(c.start_s),
        "end_s": _number(c.end_s),
        "retention_index": None if index is None else _number(index),
        "height": _number(c.height),
        "area": _number(c.area),
        "share_of_compounds": None if finding.is_background or compounds <= 0 else _number(c.area / compounds),
        "signal_to_noise": _number(c.signal_to_noise),
        "purity": _number(c.purity),
        "shape_quality": _number(c.shape_quality),
        "saturated": c.is_saturated,
        "peaks": [
            [_number(mz), _number(intensity), _number(spread)]
            for mz, intensity, spread in zip(c.peaks.mz, c.peaks.intensity, c.uncertainty, strict=True)
        ],
    }


def _number(value: float) -> float:
    return float(f"{float(value):.7g}") + 0.0
