"""Ion traces of a run: the matrix of nominal m/z over time, its background, and the noise of a reading."""

from __future__ import annotations

import itertools

import numpy as np

from identify.errors import FormatError
from identify.records import FloatArray
from identify.runs.model import IonMatrix, NoiseModel, Run

MAX_CELLS = 60_000_000
"""Scans × ions held in memory, 0.5 GB for each of about five arrays: an hour of 20 scans a second over 565 m/z has 41 million."""
BLOCK_SCANS = 12
BLOCKS_SPANNED = 9
"""The background at a scan looks at 9 blocks of 12 scans: about 25 peak widths, so that no peak is taken for background."""


def build_ion_matrix(run: Run) -> IonMatrix:
    """Intensity of every nominal m/z in every scan; points of one nominal m/z in one scan are summed.

    Parameters
    ----------
    run : Run

    Returns
    -------
    IonMatrix

    Raises
    ------
    FormatError
        If the run has no points, or would need more than `MAX_CELLS` cells.

    Notes
    -----
    Unit-resolution scans are rounded half up: the mass-defect rule of `identify.spectra.nominal` needs one compound's
    spectrum, and quadrupole runs rarely pass m/z 450.
    """
    nominal = np.floor(run.mz.astype(np.float64) + 0.5).astype(np.int64)
    axis, column = np.unique(nominal, return_inverse=True)
    if axis.size == 0 or axis.size * run.n_scans > MAX_CELLS:
        found = "no points" if axis.size == 0 else f"{run.n_scans:,} scans × {axis.size:,} ions"
        raise FormatError("run", where=str(run.source), found=found, expected=f"1 to {MAX_CELLS:,} cells")
    scan = np.repeat(np.arange(run.n_scans), np.diff(run.first_point))
    cells = np.bincount(scan * axis.size + column, weights=run.intensity, minlength=run.n_scans * axis.size)
    return IonMatrix(run.time_s, axis, cells.reshape(run.n_scans, axis.size).astype(np.float32))


def estimate_background(matrix: IonMatrix) -> FloatArray:
    """Slowly changing background of each ion: bleed, air, the tail of the solvent.

    Parameters
    ----------
    matrix : IonMatrix

    Returns
    -------
    ndarray of shape (n_scans, n_ions)
        Intensity units, ≥ 0, nowhere above the ion's own maximum.

    Notes
    -----
    The 30th percentile of each block of 12 scans, of these the lower quartile over 9 blocks, linear between block
    centres. Peaks are narrower than a block is long, so they do not lift it. O(scans × ions).
    """
    intensity = matrix.intensity
    n_scans, n_ions = intensity.shape
    n_blocks = -(-n_scans // BLOCK_SCANS)
    padded = np.pad(intensity, ((0, n_blocks * BLOCK_SCANS - n_scans), (0, 0)), mode="edge")
    low = np.percentile(padded.reshape(n_blocks, BLOCK_SCANS, n_ions), 30, axis=1)
    half = BLOCKS_SPANNED // 2
    windows = np.lib.stride_tricks.sliding_window_view(
        np.pad(low, ((half, half), (0, 0)), mode="edge"), BLOCKS_SPANNED, axis=0
    )
    level = np.percentile(windows, 25, axis=-1)
    centre = (np.arange(n_blocks) + 0.5) * BLOCK_SCANS - 0.5
    scans = np.arange(n_scans)
    background = np.empty((n_scans, n_ions))
    for ion in range(n_ions):
        background[:, ion] = np.interp(scans, centre, level[:, ion])
    return background


def fit_noise(matrix: IonMatrix, background: FloatArray) -> NoiseModel:
    """Variance of a reading as a constant plus a share of the intensity, from the run itself.

    Parameters
    ----------
    matrix : IonMatrix
    background : ndarray of shape (n_scans, n_ions)

    Returns
    -------
    NoiseModel

    Notes
    -----
    Second differences over time, ``(y[i-1] − 2 y[i] + y[i+1]) / √6``, have the variance of one reading where the trace is
    straight; only readings that are mostly background count. Their robust spread (1.4826 × median absolute value) in
    bins of intensity is fitted by least squares with both constants ≥ 0. Without enough such readings the constants
    come from the smallest intensity in the file (its square, and itself per count).
    """
    intensity = matrix.intensity.astype(np.float64)
    written = intensity[intensity > 0]
    smallest = float(np.percentile(written, 1)) if written.size else 1.0
    centre = intensity[1:-1]
    bend = np.abs(intensity[:-2] - 2.0 * centre + intensity[2:]) / np.sqrt(6.0)
    steady = (centre > 0) & (background[1:-1] > 0.5 * centre)
    levels, variances = [], []
    edges = smallest * 2.0 ** np.arange(0, 16)
    for low, high in itertools.pairwise(edges):
        inside = steady & (centre >= low) & (centre < high)
        if np.count_nonzero(inside) >= 200:
            levels.append(float(np.mean(centre[inside])))
            variances.append(float(1.4826 * np.median(bend[inside])) ** 2)
    if len(levels) < 2:
        return NoiseModel(smallest**2, smallest, smallest)
    from scipy.optimize import nnls

    level, variance = np.array(levels), np.array(variances)
    weight = 1.0 / variance
    (constant, per_count), _ = nnls(np.column_stack([weight, weight * level]), weight * variance)
    return NoiseModel(max(float(constant), 0.05 * smallest**2), max(float(per_count), 0.01), smallest)
