"""The process that reads what somebody uploaded: limited in time, memory and files, it says what it found as JSON lines.

Run as ``python -m identify.workbench.intake`` by `identify.workbench.intake_process`, with one JSON object of orders on
standard input. Whatever a hostile file does to this process, the server only sees lines that do not parse, or an end.

Lines: ``{"record": …}``, ``{"rejected": …}``, ``{"progress": [done, name]}``, ``{"run": …}``, ``{"found": [number, record,
document]}``, ``{"error": …}`` and at last ``{"end": true}``.
"""

from __future__ import annotations

import json
import os
import sys
from collections.abc import Callable, Mapping
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from identify.errors import IonwitnessError
from identify.records import ClaimLevel, Rejection, SpectrumRecord
from identify.workbench.record_json import record_to_dict, rejection_to_dict

if TYPE_CHECKING:
    from identify.runs.findings import RunFindings, Shares

MAX_SPECTRA = 5000
MAX_REJECTIONS = 1000
MAX_SCANS_KEPT = 20_000
MEBIBYTE = 2**20
NICENESS = 5
"""How far this process gives way to the one that answers browsers."""

Say = Callable[[Mapping[str, Any]], None]


def main() -> int:
    """Exit code: 0 when the last line was said."""
    orders = json.loads(sys.stdin.readline())
    os.nice(NICENESS)
    limit_process(orders["seconds"], orders["mebibytes"])
    # What others print must not become a line of ours.
    stream, sys.stdout = sys.stdout, sys.stderr

    def say(line: Mapping[str, Any]) -> None:
        stream.write(json.dumps(line, separators=(",", ":"), allow_nan=False) + "\n")
        stream.flush()

    readers: dict[str, Callable[[Mapping[str, Any], Say], None]] = {"spectra": say_spectra, "run": say_run}
    try:
        readers[orders["kind"]](orders, say)
    except IonwitnessError as error:
        names = _display_names(orders)
        say({"error": {key: _renamed(getattr(error, key), names) for key in ("what", "found", "expected", "hint")}})
    except MemoryError:
        say({"error": _too_large(orders["mebibytes"])})
    say({"end": True})
    return 0


def limit_process(seconds: int, mebibytes: int) -> None:
    """Nothing comes out; afterwards this process cannot take more processor time, memory or open files.

    Parameters
    ----------
    seconds : int
        Processor time.
    mebibytes : int
        Address space.
    """
    import resource

    limits = (
        (resource.RLIMIT_CPU, seconds),
        (resource.RLIMIT_AS, mebibytes * MEBIBYTE),
        (resource.RLIMIT_NOFILE, 128),
        (resource.RLIMIT_CORE, 0),
        (resource.RLIMIT_FSIZE, 64 * MEBIBYTE),
    )
    for kind, value in limits:
        _, hard = resource.getrlimit(kind)
        top = value if hard == resource.RLIM_INFINITY else min(value, hard)
        resource.setrlimit(kind, (top, top))


def _too_large(mebibytes: int) -> dict[str, str]:
    return {
        "what": "upload", "found": f"more than {mebibytes} MiB of memory needed to read it", "expected": "a smaller file",
        "hint": "Split the file, or use the command line.",
    }  # fmt: skip


def _display_names(orders: Mapping[str, Any]) -> dict[str, str]:
    """Names as uploaded by the paths they are kept under."""
    pairs = {orders["path"]: orders["name"]}
    if orders.get("blank"):
        pairs[orders["blank"]] = orders["blank_name"]
    return pairs


def _renamed(text: str, names: Mapping[str, str]) -> str:
    for path, name in names.items():
        text = text.replace(path, name)
    return text


def say_spectra(orders: Mapping[str, Any], say: Say) -> None:
    """Nothing comes out; records and rejections of the file are said, at most `MAX_SPECTRA`.

    Parameters
    ----------
    orders : mapping
    say : callable

    Raises
    ------
    InputError
        If the file cannot be read at all.
    """
    from identify.readers import read_pasted, read_spectra

    names = _display_names(orders)
    n_rejected = 0

    def reject(item: Rejection) -> None:
        nonlocal n_rejected
        n_rejected += 1
        if n_rejected <= MAX_REJECTIONS:
            say({"rejected": rejection_to_dict(replace(item, source=_renamed(item.source, names)))})

    path = Path(orders["path"])
    if orders.get("pasted"):
        records = read_pasted(path.read_text("utf-8", "replace"), orders["name"], reject)
    else:
        records = read_spectra(path, reject)
    for number, record in enumerate(records, start=1):
        if number > MAX_SPECTRA:
            limit = f"at most {MAX_SPECTRA:,} spectra in one upload"
            reject(Rejection(orders["name"], None, "too many spectra", f"more than {MAX_SPECTRA:,}", limit))
            break
        source = replace(record.source, path=_renamed(record.source.path, names))
        say({"record": record_to_dict(replace(record, source=source))})


def say_run(orders: Mapping[str, Any], say: Say) -> None:
    """Nothing comes out; the run, its components and what each was identified as are said.

    Parameters
    ----------
    orders : mapping
    say : callable

    Raises
    ------
    InputError, LibraryError, UsageError
        See `identify.pipeline.runs.run_files`.
    """
    from identify import __version__
    from identify.pipeline.runs import RunOptions, run_files
    from identify.retention import parse_ladder
    from identify.settings import resolve
    from identify.workbench.stored import result_document

    names = _display_names(orders)
    settings = resolve(orders["settings"], where="settings of the workbench")
    options = RunOptions(
        blank=Path(orders["blank"]) if orders.get("blank") else None,
        ladder=parse_ladder(orders["ladder"], "ladder") if orders.get("ladder") else None,
        column=orders.get("column", ""),
    )
    libraries = [Path(path) for path in orders["libraries"]]
    report = run_files(
        [Path(orders["path"])], libraries, settings, options, lambda done, name: say({"progress": [done, name]})
    )
    (found,) = report.runs
    say({"run": describe_run(found, orders)})
    for item in report.report.rejected[:MAX_REJECTIONS]:
        say({"rejected": rejection_to_dict(replace(item, source=_renamed(item.source, names)))})
    for finding in found.findings:
        if finding.identification is None:
            continue
        record = _renamed_record(finding.identification.query.record, names)
        query = replace(finding.identification.query, record=record)
        shown = replace(finding.identification, query=query)
        document = result_document(shown, settings, report.report.libraries, __version__)
        say({"found": [finding.component.number, record_to_dict(record), document]})


def _renamed_record(record: SpectrumRecord, names: Mapping[str, str]) -> SpectrumRecord:
    return replace(record, source=replace(record.source, path=_renamed(record.source.path, names)))


def describe_run(found: RunFindings, orders: Mapping[str, Any]) -> dict[str, Any]:
    """JSON values of a run for its page: summed signal over time, components, scale, what it was compared with.

    Parameters
    ----------
    found : RunFindings
    orders : mapping

    Returns
    -------
    dict
    """
    import numpy as np

    run, scale = found.run, found.scale
    total = np.add.reduceat(np.append(run.intensity.astype(np.float64), 0.0), run.first_point[:-1])
    total[np.diff(run.first_point) == 0] = 0.0
    step = max(1, -(-run.n_scans // MAX_SCANS_KEPT))
    return {
        "title": run.title,
        "instrument": run.instrument,
        "acquired": run.acquired,
        "n_scans": run.n_scans,
        "notes": list(found.notes),
        "blank": orders.get("blank_name", ""),
        "ladder": orders.get("ladder", ""),
        "column": orders.get("column", ""),
        "shares": _shares(found.shares),
        "scale": f"{scale.origin}, ± {scale.uncertainty:g} index units" if scale else "",
        "time_s": [round(float(value), 3) for value in run.time_s[::step]],
        "intensity": [round(float(value), 1) for value in total[::step]],
        "components": [
            {**{name: getattr(item.component, name) for name in _COMPONENT_FIELDS}, "index": item.retention_index,
             "reason": item.reason}
            for item in found.findings
        ],
    }  # fmt: skip


def _shares(shares: Shares) -> dict[str, float]:
    """Share of all signal by what explains it."""
    areas = {"solvent front": shares.solvent, "background": shares.background}
    areas |= {level.value: shares.explained[level] for level in ClaimLevel if level in shares.explained}
    areas["in no component"] = shares.unassigned
    total = sum(areas.values()) or 1.0
    return {name: round(area / total, 6) for name, area in areas.items()}


_COMPONENT_FIELDS = (
    "number", "time_s", "start_s", "end_s", "height", "area", "share_of_signal", "signal_to_noise", "shape_quality",
    "purity", "is_saturated", "kind", "note",
)  # fmt: skip


if __name__ == "__main__":
    sys.exit(main())
