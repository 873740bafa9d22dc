"""ANDI-MS netCDF (ASTM E2077): full-scan electron-ionization runs.

Read through `scipy.io.netcdf_file` with scaling on (attributes ``scale_factor`` and ``add_offset`` apply). −9999 and the netCDF
fill value mean "missing"; points within a scan may stand in any order; scans are checked against the point count.
"""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from identify.errors import FormatError, InputError, quote
from identify.readers.limits import MAX_FILE_BYTES
from identify.records import FloatArray, Source
from identify.runs.model import Run

MISSING = -9999.0
FILL = 9.0e36
NEEDED = ("scan_acquisition_time", "scan_index", "point_count", "mass_values", "intensity_values")
SINGLE: Mapping[str, type[np.floating[Any]]] = {"mass_values": np.float32, "intensity_values": np.float32}
"""Columns with a value for each point, kept in single precision as in `Run`: a file of 200 MB has 25 million points."""
CONTINUUM_GAP_DA = 0.15


def read_andi_run(path: Path) -> Run:
    """The run in an ANDI-MS file.

    Parameters
    ----------
    path : Path

    Returns
    -------
    Run
        Scans in the order of time; scans without a time and points without a value are left out, which `notes` says.

    Raises
    ------
    InputError
        If the file cannot be opened or is too large.
    FormatError
        For a file that is truncated or not netCDF, lacks a variable, holds continuum data, a single scan, or another
        ionization than electron ionization.
    """
    where = str(path)
    attributes, columns = _read_variables(path)
    _refuse_other_experiments(attributes, where)
    times, first, count = columns["scan_acquisition_time"], columns["scan_index"], columns["point_count"]
    mz, intensity = columns["mass_values"], columns["intensity_values"]
    if not times.size == first.size == count.size:
        found = f"{times.size} times, {first.size} scan starts, {count.size} point counts"
        raise FormatError("scans", where=where, found=found, expected="one of each per scan")
    if mz.size != intensity.size:
        raise FormatError(
            "points", where=where, found=f"{mz.size} m/z, {intensity.size} intensities", expected="as many"
        )
    start, length = first.astype(np.int64), np.maximum(count, 0).astype(np.int64)
    if ((start < 0) | (start + length > mz.size)).any():
        scan = int(np.nonzero((start < 0) | (start + length > mz.size))[0][0]) + 1
        raise FormatError(
            "scan", where=f"{where}, scan {scan}", found=f"points up to {start[scan - 1] + length[scan - 1]:,}",
            expected=f"at most {mz.size:,}", hint="The file may be truncated.",
        )  # fmt: skip
    return _assemble(where, attributes, times, start, length, mz, intensity)


def _read_variables(path: Path) -> tuple[dict[str, str], dict[str, FloatArray]]:
    from scipy.io import netcdf_file

    where = str(path)
    try:
        size = path.stat().st_size
        if size > MAX_FILE_BYTES:
            raise InputError("run", where=where, found=f"{size:,} bytes", expected=f"at most {MAX_FILE_BYTES:,}")
        with netcdf_file(where, "r", mmap=False, maskandscale=True) as file:
            names = file.variables
            missing = [name for name in NEEDED if name not in names]
            if missing:
                raise FormatError(
                    "ANDI-MS file", where=where, found=f"no {', '.join(missing)}", expected=", ".join(NEEDED)
                )
            columns = {name: _column(names[name][:], SINGLE.get(name, np.float64)) for name in NEEDED}
            attributes = {str(key): _text(value) for key, value in vars(file)["_attributes"].items()}
    except OSError as error:
        raise InputError("run", where=where, found=error.strerror or str(error), expected="a readable file") from None
    except (ValueError, TypeError, KeyError, IndexError, EOFError, MemoryError, OverflowError, AttributeError) as error:
        found = quote(str(error) or type(error).__name__)
        raise FormatError(
            "netCDF file",
            where=where,
            found=found,
            expected="a complete ANDI-MS file",
            hint="The file may be truncated.",
        ) from None
    return attributes, columns


def _column(values: Any, dtype: type[np.floating[Any]]) -> FloatArray:
    with np.errstate(over="ignore"):  # What single precision cannot hold becomes infinite, and is left out as unusable.
        column = np.ma.filled(np.ma.asarray(values, dtype=dtype), MISSING)
    return np.asarray(column, dtype=dtype).reshape(-1)


def _text(value: object) -> str:
    return value.decode("latin-1").strip("\x00 ") if isinstance(value, bytes) else str(value)


def _refuse_other_experiments(attributes: dict[str, str], where: str) -> None:
    kind = attributes.get("experiment_type", "")
    if "continuum" in kind.lower():
        raise FormatError(
            "run", where=where, found=quote(kind), expected="centroided scans",
            hint="Centroid the run (peak picking) in the data system and export it again.",
        )  # fmt: skip
    ionization = attributes.get("test_ionization_mode", "")
    if ionization and "electron" not in ionization.lower() and ionization.upper() not in ("EI", "EI+"):
        raise FormatError(
            "run", where=where, found=quote(ionization), expected="electron ionization",
            hint="Spectra of other ionizations cannot be compared with electron-ionization entries.",
        )  # fmt: skip
    if "negative" in attributes.get("test_ionization_polarity", "").lower():
        raise FormatError("run", where=where, found="negative ions", expected="positive ions")
    function = attributes.get("test_scan_function", "")
    if "ion" in function.lower() and "select" in function.lower():
        raise FormatError(
            "run", where=where, found=quote(function), expected="full scans",
            hint="Selected-ion runs hold too few ions to name an unknown.",
        )  # fmt: skip


def _assemble(
    where: str,
    attributes: dict[str, str],
    times: FloatArray,
    start: NDArray[np.int64],
    length: NDArray[np.int64],
    mz: FloatArray,
    intensity: FloatArray,
) -> Run:
    notes: list[str] = []
    timed = np.isfinite(times) & (times >= 0) & (times < FILL)
    if not timed.all():
        notes.append(f"{np.count_nonzero(~timed)} scans without a time left out")
    order = np.nonzero(timed)[0]
    order = order[np.argsort(times[order], kind="stable")]
    repeated = np.concatenate([[False], np.diff(times[order]) <= 0]) if order.size else np.zeros(0, dtype=np.bool_)
    if repeated.any():
        notes.append(f"{np.count_nonzero(repeated)} scans at the time of another left out")
        order = order[~repeated]
    scan = np.repeat(np.arange(order.size, dtype=np.int32), length[order])
    if (np.diff(order) != 1).any() or (start[1:] != start[:-1] + length[:-1]).any() or scan.size != mz.size:
        point = _points_of(start[order], length[order])
        mz, intensity = mz[point], intensity[point]
    good = np.isfinite(mz) & np.isfinite(intensity) & (mz > 0) & (mz < 10_000) & (intensity >= 0) & (intensity < FILL)
    if not good.all():
        notes.append(f"{np.count_nonzero(~good):,} points without a usable value left out")
        mz, intensity, scan = mz[good], intensity[good], scan[good]
    _refuse_continuum(mz, scan, where)
    counts = np.bincount(scan, minlength=order.size)
    first = np.concatenate([[0], np.cumsum(counts)]).astype(np.int64)
    return Run(
        Source(where), attributes.get("experiment_title", ""), attributes.get("source_file_reference", ""),
        attributes.get("experiment_date_time_stamp", ""), times[order], first, mz.astype(np.float32, copy=False),
        intensity.astype(np.float32, copy=False), tuple(notes),
    )  # fmt: skip


def _points_of(start: NDArray[np.int64], length: NDArray[np.int64]) -> NDArray[np.int64]:
    """Positions of all points of the scans, in their order."""
    if not length.sum():
        return np.zeros(0, dtype=np.int64)
    begin = np.repeat(start - np.concatenate([[0], np.cumsum(length)[:-1]]), length)
    return begin + np.arange(int(length.sum()))


def _refuse_continuum(mz: FloatArray, scan: NDArray[np.int64], where: str) -> None:
    """Points so dense within scans that they sample peak shapes."""
    same = np.diff(scan) == 0
    gaps = np.diff(mz)[same]
    if gaps.size >= 1000 and float(np.mean((gaps > 0) & (gaps < CONTINUUM_GAP_DA))) > 0.8:
        raise FormatError(
            "run", where=where, found="continuum (profile) scans", expected="centroided scans",
            hint="Centroid the run (peak picking) in the data system and export it again.",
        )  # fmt: skip
