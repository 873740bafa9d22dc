"""mzML runs: the full scans (MS1) of a GC-MS acquisition, read one after another.

The guards against hostile XML are those of `identify.readers.mzml`. Profile scans are centroided (`centroid_scan`).
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any

import numpy as np

from identify.errors import FormatError, InputError, quote
from identify.readers.mzml import IonSources, ionization_of, open_mzml, unpack_array
from identify.readers.profile import looks_like_profile
from identify.readers.text_lines import PeekedStream
from identify.records import FloatArray, Source
from identify.runs.model import Run

MAX_POINTS = 60_000_000
"""Points of one run: 0.5 GB; a quadrupole run of an hour holds about one million."""
SELECTED = ("SIM spectrum", "SRM spectrum", "selected ion monitoring chromatogram")
SECONDS = {"minute": 60.0, "min": 60.0, "second": 1.0, "s": 1.0, "millisecond": 0.001, "hour": 3600.0}


def read_mzml_run(path: Path) -> Run:
    """The run in an mzML file.

    Parameters
    ----------
    path : Path

    Returns
    -------
    Run
        First-level scans in the order of time; scans left out are counted in `notes`.

    Raises
    ------
    InputError
        If the file cannot be opened or is too large.
    FormatError
        For damaged XML, another ionization, selected-ion scans, negative ions, no first-level scan, or more than `MAX_POINTS`
        points.
    """
    where = str(path)
    try:
        with path.open("rb") as stream, open_mzml(PeekedStream(stream), where) as (items, sources):
            return _collect(items, sources, where)
    except OSError as error:
        raise InputError("run", where=where, found=error.strerror or str(error), expected="a readable file") from None


def centroid_scan(mz: FloatArray, intensity: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Peaks of one profile scan.

    Parameters
    ----------
    mz, intensity : ndarray of shape (n_points,)
        m/z increasing.

    Returns
    -------
    mz, intensity : ndarray of shape (n_peaks,)
        Intensity-weighted mean m/z and summed intensity of each stretch between two minima (or zeros).

    Notes
    -----
    A point is a border when it is 0 or a local minimum; its intensity goes to the peak on its left. O(points).

    Examples
    --------
    >>> centroid_scan(np.array([42.9, 43.0, 43.1, 43.9, 44.0]), np.array([1.0, 2.0, 1.0, 0.0, 4.0]))
    (array([43., 44.]), array([4., 4.]))
    """
    if mz.size < 3:
        return mz[intensity > 0], intensity[intensity > 0]
    before, after = np.concatenate([[0.0], intensity[:-1]]), np.concatenate([intensity[1:], [0.0]])
    border = (intensity <= 0) | ((intensity < before) & (intensity <= after))
    group = np.cumsum(np.concatenate([[False], border[:-1]]))
    total = np.bincount(group, weights=intensity).astype(np.float64)
    centre = np.bincount(group, weights=intensity * mz).astype(np.float64)
    kept = total > 0
    return centre[kept] / total[kept], total[kept]


def _collect(items: Iterable[dict[str, Any]], sources: IonSources, where: str) -> Run:
    times: list[float] = []
    mzs: list[np.ndarray[Any, np.dtype[np.float32]]] = []
    intensities: list[np.ndarray[Any, np.dtype[np.float32]]] = []
    n_points, counts = 0, {"higher": 0, "profile": 0, "untimed": 0, "faulty": 0}
    for item in items:
        scan = _read_scan(item, sources, where, counts)
        if scan is None:
            continue
        time_s, mz, intensity = scan
        n_points += mz.size
        if n_points > MAX_POINTS:
            found = f"more than {MAX_POINTS:,} points"
            raise FormatError("run", where=where, found=found, expected="centroided scans of a GC-MS run")
        times.append(time_s)
        mzs.append(mz.astype(np.float32))
        intensities.append(intensity.astype(np.float32))
    order, notes = _ordered(times, counts)
    if not times:
        found = "only scans of a higher level" if counts["higher"] else "no first-level scan"
        raise FormatError("run", where=where, found=found, expected="full scans (MS1)")
    empty = [np.zeros(0, dtype=np.float32)]
    first = np.concatenate([[0], np.cumsum([mzs[i].size for i in order])]).astype(np.int64)
    return Run(
        Source(where), "", "", "", np.array([times[i] for i in order]), first,
        np.concatenate([mzs[i] for i in order] or empty), np.concatenate([intensities[i] for i in order] or empty), notes,
    )  # fmt: skip


def _ordered(times: list[float], counts: Mapping[str, int]) -> tuple[list[int], tuple[str, ...]]:
    """Places of the scans in the order of time, each time once, and notes on what was left out."""
    ranked = sorted(range(len(times)), key=lambda place: times[place])
    order = [place for rank, place in enumerate(ranked) if rank == 0 or times[place] > times[ranked[rank - 1]]]
    words = {
        "higher": "scans of a higher level left out", "profile": "profile scans centroided",
        "untimed": "scans without a time left out", "faulty": "scans without usable numbers left out",
    }  # fmt: skip
    notes = [f"{counts[name]:,} {text}" for name, text in words.items() if counts[name]]
    if len(order) < len(times):
        notes.append(f"{len(times) - len(order):,} scans at the time of another left out")
    return order, tuple(notes)


def _read_scan(
    item: dict[str, Any], sources: IonSources, where: str, counts: dict[str, int]
) -> tuple[float, FloatArray, FloatArray] | None:
    """Time and points of one scan; None (counted) for one that does not belong."""
    if int(item.get("ms level", 1)) != 1:
        counts["higher"] += 1
        return None
    scan = (item.get("scanList", {}).get("scan") or [{}])[0]
    _refuse_other_experiments(item, scan, sources, where)
    time = scan.get("scan start time")
    if time is None:
        counts["untimed"] += 1
        return None
    time_s = float(time) * SECONDS.get(str(getattr(time, "unit_info", "") or "minute"), 60.0)
    try:
        mz, intensity = (np.asarray(unpack_array(item, f"{name} array", where)) for name in ("m/z", "intensity"))
    except FormatError:
        counts["faulty"] += 1
        return None
    if mz.size != intensity.size or not np.isfinite(time_s):
        counts["faulty"] += 1
        return None
    order = np.argsort(mz, kind="stable")
    mz, intensity = mz[order], intensity[order]
    good = (mz > 0) & (mz < 10_000) & (intensity >= 0)
    mz, intensity = mz[good], intensity[good]
    if "profile spectrum" in item or ("centroid spectrum" not in item and looks_like_profile(mz, intensity)):
        counts["profile"] += 1
        mz, intensity = centroid_scan(mz, intensity)
    return time_s, mz, intensity


def _refuse_other_experiments(
    item: Mapping[str, Any], scan: Mapping[str, Any], sources: IonSources, where: str
) -> None:
    ionization = ionization_of(scan, sources)
    if ionization not in ("", "EI"):
        raise FormatError(
            "run", where=where, found=quote(ionization), expected="electron ionization",
            hint="Spectra of other ionizations cannot be compared with electron-ionization entries.",
        )  # fmt: skip
    if any(name in item for name in SELECTED):
        raise FormatError(
            "run", where=where, found="selected-ion scans", expected="full scans",
            hint="Selected-ion runs hold too few ions to name an unknown.",
        )  # fmt: skip
    if "negative scan" in item:
        raise FormatError("run", where=where, found="negative ions", expected="positive ions")
