"""Two spectra are compared on accurate m/z where both have them, else on nominal m/z, and a mixed pair says so."""

from __future__ import annotations

import pytest

from identify.records import CleanSpectrum, Peaks
from identify.settings import Settings
from identify.similarity.pair import score_pair
from identify.similarity.scores import cosine_score, reverse_score
from identify.spectra.align import align

NOMINAL = Peaks([43, 58], [100.0, 40.0])
SETTINGS = Settings()


def spectrum(*accurate: float) -> CleanSpectrum:
    peaks = Peaks(accurate, NOMINAL.intensity) if accurate else None
    return CleanSpectrum(NOMINAL, peaks, 40)


ACETYL, PROPYL = spectrum(43.0178, 58.0413), spectrum(43.0542, 58.0413)
"""C2H3O+ or C3H7+ at 43 (electron mass removed), invented intensities."""


def test_accurate_masses_tell_ions_of_one_nominal_mass_apart() -> None:
    same = score_pair(ACETYL, spectrum(43.0180, 58.0414), SETTINGS)
    other = score_pair(ACETYL, PROPYL, SETTINGS)
    assert (same.cosine, same.reverse, same.is_accurate, same.note) == (
        pytest.approx(1.0, abs=1e-9), pytest.approx(1.0, abs=1e-9), True, "",
    )  # fmt: skip
    assert other.cosine < 0.6
    assert other.aligned.n_matched == 1


@pytest.mark.parametrize(
    ("query", "entry", "note"),
    [
        (ACETYL, spectrum(), "Compared at nominal m/z: the entry has no accurate masses."),
        (spectrum(), PROPYL, "Compared at nominal m/z: the query has no accurate masses."),
        (spectrum(), spectrum(), ""),
    ],
    ids=["query accurate", "entry accurate", "both nominal"],
)
def test_other_pairs_are_compared_at_nominal_mz(query: CleanSpectrum, entry: CleanSpectrum, note: str) -> None:
    pair = score_pair(query, entry, SETTINGS)
    aligned = align(query, entry)
    assert pair.cosine == cosine_score(aligned, SETTINGS.weighting)
    assert pair.reverse == reverse_score(aligned, SETTINGS.weighting)
    assert not pair.is_accurate
    assert pair.note == note


def test_the_tolerance_of_the_settings_applies() -> None:
    shifted = spectrum(43.0178 + 0.003, 58.0413)
    assert score_pair(ACETYL, shifted, Settings(tolerance_da=0.002)).aligned.n_matched == 1
    assert score_pair(ACETYL, shifted, Settings(tolerance_da=0.004)).aligned.n_matched == 2
