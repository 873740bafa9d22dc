"""Profile data are told from centroids by their spacing."""

from __future__ import annotations

import numpy as np
import pytest

from identify.readers import read_pasted
from identify.readers.profile import looks_like_profile


def sampled_peaks(width_da: float, step_da: float) -> tuple[np.ndarray, np.ndarray]:
    mz = np.arange(40.0, 110.0, step_da)
    centres = np.array([41.04, 43.05, 55.05, 57.07, 71.08, 85.1, 99.1])
    intensity = np.exp(-0.5 * ((mz[:, None] - centres) / width_da) ** 2).sum(axis=1) * 1000
    keep = intensity > 0.5
    return mz[keep], intensity[keep]


@pytest.mark.parametrize(("width_da", "step_da"), [(0.3, 0.1), (0.2, 0.05), (0.02, 0.004)])
def test_sampled_peak_shapes_are_a_profile(width_da: float, step_da: float) -> None:
    assert looks_like_profile(*sampled_peaks(width_da, step_da))


def test_nominal_centroids_are_none() -> None:
    rng = np.random.default_rng(1)
    assert not looks_like_profile(np.arange(35.0, 300.0), rng.exponential(10.0, 265))


def test_accurate_centroids_with_doublets_are_none() -> None:
    rng = np.random.default_rng(2)
    mz = np.sort(np.concatenate([np.arange(35, 300) + 0.02, np.arange(35, 300) + 0.06, np.arange(35, 300) + 0.1]))
    assert not looks_like_profile(mz, rng.exponential(10.0, mz.size))


def test_a_few_close_points_are_too_few_to_tell() -> None:
    mz, intensity = sampled_peaks(0.3, 0.1)
    assert not looks_like_profile(mz[:40], intensity[:40])


def test_a_pasted_profile_is_marked_by_the_reader() -> None:
    rows = "\n".join(f"{x:.3f},{y:.3f}" for x, y in zip(*sampled_peaks(0.2, 0.05), strict=True))
    (record,) = read_pasted(rows, "pasted", lambda _: None)
    assert record.is_profile
