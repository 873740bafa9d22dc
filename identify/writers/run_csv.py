"""Findings of runs as a table: one row per component."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Any

from identify.runs.findings import RunsReport
from identify.writers.rows_csv import write_rows

COLUMNS = (
    "run", "source", "component", "query_id", "unknown", "retention_time_min", "start_min", "end_min", "retention_index",
    "kind", "area", "height", "share_of_compounds", "signal_to_noise", "purity", "shape_quality", "saturated",
    "claim_level", "claim", "claim_probability", "best_name", "best_formula", "best_inchikey", "best_probability",
    "best_cosine", "base_peak_mz", "n_ions", "remarks",
)  # fmt: skip


def write_run_csv(path: Path, found: RunsReport) -> None:
    """Nothing comes out; afterwards `path` holds one row per component in the order of elution, run by run.

    Parameters
    ----------
    path : Path
    found : RunsReport

    Raises
    ------
    UsageError
        If the file cannot be written.
    """
    write_rows(path, COLUMNS, ([row.get(name) for name in COLUMNS] for row in _rows(found)))


def _rows(found: RunsReport) -> Iterator[dict[str, Any]]:
    for run in found.runs:
        total = run.shares.compounds
        for finding in run.findings:
            c, answer = finding.component, finding.identification
            best = answer.candidates[0] if answer and answer.candidates else None
            notes = [c.note, finding.reason, *(answer.notes if answer else ())]
            row: dict[str, Any] = {
                "run": run.number, "source": run.run.source.path, "component": c.number, "unknown": finding.unknown,
                "retention_time_min": round(c.time_s / 60.0, 4), "start_min": round(c.start_s / 60.0, 4),
                "end_min": round(c.end_s / 60.0, 4), "kind": c.kind.value, "area": float(f"{c.area:.6g}"),
                "height": float(f"{c.height:.6g}"), "signal_to_noise": round(c.signal_to_noise, 1),
                "share_of_compounds": None if finding.is_background or not total else round(c.area / total, 6),
                "purity": round(c.purity, 4), "shape_quality": round(c.shape_quality, 4),
                "saturated": "yes" if c.is_saturated else "no", "base_peak_mz": c.peaks.base_peak_mz,
                "n_ions": len(c.peaks), "remarks": "; ".join(note for note in notes if note),
            }  # fmt: skip
            if answer:
                index = answer.query.record.retention.index
                row |= {
                    "query_id": answer.query.id, "retention_index": None if index is None else round(index, 1),
                    "claim_level": answer.claim.level.value, "claim": answer.claim.statement,
                    "claim_probability": round(answer.claim.probability, 6),
                }  # fmt: skip
            if best:
                row |= {
                    "best_name": best.entry.identity.name, "best_formula": best.entry.identity.formula,
                    "best_inchikey": best.entry.identity.inchikey, "best_probability": round(best.probability, 6),
                    "best_cosine": round(best.cosine, 6),
                }  # fmt: skip
            yield row
