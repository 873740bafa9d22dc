"""A foreign opinion: matchms' cosine on the same weights gives the scores of the plain definition and of the index."""

from __future__ import annotations

import warnings
from typing import Any

import numpy as np
import pytest

from identify.index import build_index, scan, score_all, search_index
from identify.records import CleanSpectrum, Peaks
from identify.settings import Weighting
from identify.similarity.scores import cosine_score
from identify.spectra.align import align

pytestmark = pytest.mark.slow
"""Slow because importing matchms takes seconds, once."""

WEIGHTINGS = [Weighting(), Weighting(0.0, 1.0), Weighting(0.5, 0.5)]


@pytest.fixture(scope="module")
def matchms() -> Any:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # of matchms' own dependencies
        import matchms
        import matchms.similarity

        return matchms


def random_spectra(n: int, seed: int) -> list[CleanSpectrum]:
    rng = np.random.default_rng(seed)
    made = []
    for _ in range(n):
        lowest = int(rng.integers(10, 60))
        mz = np.sort(rng.choice(np.arange(lowest, 300), int(rng.integers(1, 60)), replace=False))
        made.append(CleanSpectrum(Peaks(mz, np.exp(rng.normal(2, 2, mz.size))), None, lowest))
    return made


def cut(spectrum: CleanSpectrum, lowest_mz: int, matchms: Any) -> Any:
    """Spectrum of matchms over the range that both spectra of a pair cover."""
    keep = spectrum.nominal.mz >= lowest_mz
    return matchms.Spectrum(
        mz=spectrum.nominal.mz[keep],
        intensities=spectrum.nominal.relative[keep],
        metadata={},
        metadata_harmonization=False,
    )


@pytest.mark.parametrize("weighting", WEIGHTINGS, ids=str)
def test_three_ways_to_the_cosine_agree(matchms: Any, weighting: Weighting) -> None:
    foreign = matchms.similarity.CosineGreedy(
        tolerance=0.1, mz_power=weighting.mz_power, intensity_power=weighting.intensity_power
    )
    library, queries = random_spectra(60, 1), random_spectra(6, 2)
    queries += library[:2]
    index = build_index(((i, s.nominal, s.lowest_mz) for i, s in enumerate(library)), weighting)
    n_compared = 0
    for query in queries:
        _, fast, _ = score_all(index, query)
        for entry, found in zip(library, fast.tolist(), strict=True):
            pair = align(query, entry)
            mine, theirs = cut(query, pair.lowest_mz, matchms), cut(entry, pair.lowest_mz, matchms)
            expected = float(foreign.pair(mine, theirs)["score"]) if mine.peaks and theirs.peaks else 0.0
            assert cosine_score(pair, weighting) == pytest.approx(expected, abs=1e-9)
            assert found == pytest.approx(expected, abs=1e-6)
            n_compared += expected > 0
    assert n_compared > 200


def test_the_best_hit_is_the_best_of_matchms(matchms: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(scan, "COMPILED_FROM_ENTRIES", 0)
    library = [CleanSpectrum(s.nominal, None, 1) for s in random_spectra(80, 3)]
    weighting = Weighting()
    foreign = matchms.similarity.CosineGreedy(tolerance=0.1, mz_power=1.3, intensity_power=0.53)
    index = build_index(((i, s.nominal, 1) for i, s in enumerate(library)), weighting)
    entries = [cut(entry, 1, matchms) for entry in library]
    for query in library[:5]:
        noisy = CleanSpectrum(Peaks(query.nominal.mz, query.nominal.intensity**0.9), None, 1)
        theirs = [float(foreign.pair(cut(noisy, 1, matchms), entry)["score"]) for entry in entries]
        best = search_index(index, noisy, 1)[0]
        assert best.entry_id == int(np.argmax(theirs))
        assert best.cosine == pytest.approx(max(theirs), abs=1e-6)
