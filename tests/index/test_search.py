"""Every score of the index is that of the plain definition; order, ties and masking are as stated."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from identify.index import build_index, score_all
from identify.records import CleanSpectrum, Peaks
from identify.settings import Weighting
from identify.similarity.scores import cosine_score, reverse_score
from identify.spectra.align import align


def spectrum(peaks: dict[int, float], lowest_mz: int | None = None) -> CleanSpectrum:
    mz = sorted(peaks)
    lowest = lowest_mz if lowest_mz is not None else (mz[0] if mz else 1)
    return CleanSpectrum(Peaks(mz, [peaks[m] for m in mz]), None, lowest)


peak_maps = st.dictionaries(st.integers(10, 70), st.floats(0.001, 1000.0), min_size=1, max_size=12)


@st.composite
def spectra(draw: st.DrawFn) -> CleanSpectrum:
    peaks = draw(peak_maps)
    return spectrum(peaks, draw(st.integers(5, 75)))


weightings = st.sampled_from([Weighting(), Weighting(0.0, 1.0), Weighting(3.0, 0.6)])


@settings(max_examples=60, deadline=None)
@given(library=st.lists(spectra(), max_size=12), query=spectra(), weighting=weightings)
def test_index_scores_are_the_plain_definition(
    library: list[CleanSpectrum], query: CleanSpectrum, weighting: Weighting
) -> None:
    index = build_index(((i + 1, s.nominal, s.lowest_mz) for i, s in enumerate(library)), weighting)
    ids, cosine, reverse = score_all(index, query)
    pairs = [align(query, entry) for entry in library]
    assert ids.tolist() == list(range(1, len(library) + 1))
    assert cosine == pytest.approx(np.array([cosine_score(p, weighting) for p in pairs]), abs=1e-6)
    assert reverse == pytest.approx(np.array([reverse_score(p, weighting) for p in pairs]), abs=1e-6)
