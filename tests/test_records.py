"""The nouns refuse what they must not hold."""

from __future__ import annotations

import math
import pickle

import numpy as np
import pytest

from identify.errors import LibraryMissing, SpectrumError
from identify.records import EvidenceItem, Explanation, Peaks, Source, SpectrumRecord, Terms, Verdict


@pytest.mark.parametrize(
    ("mz", "intensity", "found"),
    [
        ([1.0, 2.0], [1.0], "2 m/z and 1 intensities"),
        ([1.0, math.nan], [1.0, 1.0], "a value that is not finite"),
        ([1.0, math.inf], [1.0, 1.0], "a value that is not finite"),
        ([1.0, 2.0], [1.0, math.nan], "a value that is not finite"),
        ([1.0, 2.0], [math.inf, 1.0], "a value that is not finite"),
        ([1.0, 2.0], [1.0, 0.0], "an intensity ≤ 0"),
        ([2.0, 1.0], [1.0, 1.0], "m/z out of order"),
        ([2.0, 2.0], [1.0, 1.0], "m/z out of order"),
        ([0.0, 2.0], [1.0, 1.0], "m/z out of order"),
    ],
)
def test_peaks_refuse_what_no_search_could_use(mz: list[float], intensity: list[float], found: str) -> None:
    with pytest.raises(SpectrumError) as error:
        Peaks(np.array(mz), np.array(intensity))
    assert error.value.found == found


def test_peaks_cannot_be_written_to() -> None:
    peaks = Peaks(np.array([43.0, 58.0]), np.array([100.0, 30.0]))
    with pytest.raises(ValueError, match="read-only"):
        peaks.mz[0] = 44.0
    assert peaks.intensity_at(58) == 30.0
    assert peaks.intensity_at(59) == 0.0
    assert peaks.base_peak_mz == 43.0


def test_parts_of_an_explanation_add_up() -> None:
    part = Explanation("cosine", 2.0)
    assert Explanation("all", 2.0, parts=(part,)).value == 2.0
    with pytest.raises(ValueError, match="do not add up"):
        Explanation("all", 3.0, parts=(part,))


def test_terms_are_parts_as_any_other() -> None:
    terms = Terms(("a", "b"), (1.0, 2.0), ("seen", ""))
    assert list(terms) == [terms[0], terms[1]] == [Explanation("a", 1.0, "seen"), Explanation("b", 2.0)]
    assert list(terms[1:]) == [Explanation("b", 2.0)]
    assert Explanation("all", 3.0, parts=terms).parts[-1].value == 2.0
    with pytest.raises(ValueError, match="do not add up"):
        Explanation("all", 4.0, parts=terms)


def test_a_silent_verdict_carries_no_weight() -> None:
    with pytest.raises(ValueError, match="carries no log-odds"):
        EvidenceItem("molecular ion", Verdict.NOT_ASSESSED, "no formula", log_odds=0.5)
    with pytest.raises(ValueError, match="needs its reason"):
        EvidenceItem("molecular ion", Verdict.AGREES, "")


def test_records_and_errors_cross_a_process_boundary() -> None:
    record = SpectrumRecord(Source("a.csv", 3), np.array([43.0]), np.array([1.0]), extra={"note": "x"})
    again = pickle.loads(pickle.dumps(record))
    assert again.extra == {"note": "x"}
    assert again.mz.tolist() == [43.0]
    error = LibraryMissing("library", where="x", expected="a file", hint="Build it.")
    assert str(pickle.loads(pickle.dumps(error))) == str(error) == "library in x: expected a file. Build it."
