"""Is the query one compound?"""

from __future__ import annotations

import numpy as np
import pytest

from identify.evidence import purity
from identify.evidence.purity import judge_purity
from identify.records import Verdict

NAPHTHALENE = {51: 8.0, 63: 6.0, 64: 7.0, 74: 4.0, 77: 4.0, 102: 8.0, 126: 7.0, 127: 13.0, 128: 100.0, 129: 10.9}
DODECANE = {
    41: 40.0,
    43: 88.0,
    55: 25.0,
    56: 20.0,
    57: 100.0,
    70: 15.0,
    71: 60.0,
    85: 43.0,
    99: 7.0,
    113: 5.0,
    170: 6.5,
}
PHENOL = {39: 12.0, 40: 6.0, 55: 6.0, 63: 5.0, 65: 18.0, 66: 24.0, 94: 100.0, 95: 6.6}
"""Invented, rounded, from general knowledge of the compounds."""


def mix(*parts: tuple[dict[int, float], float]) -> dict[int, float]:
    total: dict[int, float] = {}
    for peaks, share in parts:
        current = sum(peaks.values())
        for mz, value in peaks.items():
            total[mz] = total.get(mz, 0.0) + share * value / current
    return total


@pytest.fixture
def entries(build):
    names = {"naphthalene": NAPHTHALENE, "dodecane": DODECANE, "phenol": PHENOL}
    return [build.entry(peaks, name=name, number=n) for n, (name, peaks) in enumerate(names.items(), start=1)]


@pytest.mark.parametrize("share", [0.15, 0.3, 0.5])
def test_two_compounds_are_found_with_their_shares(build, entries, share: float) -> None:
    outcome = judge_purity(build.spectrum(mix((NAPHTHALENE, 1 - share), (DODECANE, share))), entries)
    assert outcome.verdict is Verdict.CONFLICTS
    shares = {part.name: part.share for part in outcome.parts}
    assert shares == pytest.approx({"naphthalene": 1 - share, "dodecane": share}, abs=0.01)
    assert outcome.explained_share > 0.98
    assert outcome.residual is None


def test_three_compounds_are_found(build, entries) -> None:
    outcome = judge_purity(build.spectrum(mix((NAPHTHALENE, 0.4), (DODECANE, 0.35), (PHENOL, 0.25))), entries)
    assert {part.name for part in outcome.parts} == {"naphthalene", "dodecane", "phenol"}


def test_pure_spectrum_needs_no_second_entry(build, entries) -> None:
    noisy = {
        mz: value * factor
        for (mz, value), factor in zip(
            NAPHTHALENE.items(), (0.9, 1.1, 1.0, 0.8, 1.2, 0.95, 1.05, 1.1, 1.0, 1.0), strict=True
        )
    }
    outcome = judge_purity(build.spectrum(noisy), entries)
    assert outcome.verdict is Verdict.AGREES
    assert [part.name for part in outcome.parts] == ["naphthalene"]


def test_same_shape_twice_is_no_mixture(build) -> None:
    twin = {mz: value * (1.15 if mz < 100 else 0.9) for mz, value in NAPHTHALENE.items()}
    entries = [build.entry(NAPHTHALENE, name="one"), build.entry(twin, name="other", number=2)]
    halfway = {mz: (NAPHTHALENE[mz] + twin[mz]) / 2 for mz in twin}
    assert len(judge_purity(build.spectrum(halfway), entries).parts) == 1


def test_unknown_second_compound_is_left_as_a_new_query(build, entries) -> None:
    query = mix((NAPHTHALENE, 0.5), (PHENOL, 0.5))
    outcome = judge_purity(build.spectrum(query), entries[:2])
    assert outcome.residual is not None
    left = set(outcome.residual.mz.astype(int).tolist())
    assert {94, 66, 65} <= left


def test_background_is_named_not_offered(build, entries) -> None:
    outcome = judge_purity(build.spectrum({**NAPHTHALENE, 207: 20.0, 281: 8.0, 73: 9.0}), entries[:1])
    assert outcome.background == ("siloxane",)
    assert outcome.residual is None


def test_nothing_to_explain_with_is_not_assessed(build) -> None:
    assert judge_purity(build.spectrum(NAPHTHALENE), []).verdict is Verdict.NOT_ASSESSED
    assert judge_purity(build.spectrum({}), [build.entry(NAPHTHALENE)]).verdict is Verdict.NOT_ASSESSED


def test_best_pair_equals_trying_all_pairs(build) -> None:
    """Oracle: closed form for all pairs at once against solving each pair."""
    rng = np.random.default_rng(8)
    for _ in range(20):
        matrix = rng.uniform(0, 1, (6, 30)) * (rng.uniform(0, 1, (6, 30)) < 0.4)
        query = rng.uniform(0, 1, 30)
        gram, target, total = matrix @ matrix.T, matrix @ query, float(query @ query)
        lengths = np.sqrt(np.maximum(gram.diagonal(), 1e-12))
        alike = gram / np.outer(lengths, lengths)
        found = purity._best_pair(gram, target, total, alike, (0,))

        def needs_both(pair: tuple[int, int], gram=gram, target=target) -> bool:
            return bool((np.linalg.solve(gram[np.ix_(pair, pair)], target[list(pair)]) > 0).all())

        pairs = [(one, other) for one in range(6) for other in range(one)]
        plain = min(
            left_by(matrix, query, pair) for pair in pairs if alike[pair] < purity.MOST_ALIKE and needs_both(pair)
        )
        assert found is not None
        assert found[0] == pytest.approx(plain, abs=1e-6)


def left_by(matrix: np.ndarray, query: np.ndarray, chosen: tuple[int, ...]) -> float:
    """Relative misfit by non-negative least squares of scipy."""
    from scipy.optimize import nnls

    return float(nnls(matrix[list(chosen)].T, query)[1] ** 2 / (query @ query))


def test_best_third_entry_equals_trying_all(build) -> None:
    """Oracle: all thirds at once against non-negative least squares of scipy on each."""
    rng = np.random.default_rng(9)
    for _ in range(30):
        matrix = rng.uniform(0, 1, (7, 40)) * (rng.uniform(0, 1, (7, 40)) < 0.3)
        query = rng.uniform(0.2, 1, 3) @ matrix[:3] + rng.uniform(0, 0.2, 40)
        gram, target, total = matrix @ matrix.T, matrix @ query, float(query @ query)
        lengths = np.sqrt(gram.diagonal())
        found = purity._best_triple(gram, target, total, gram / np.outer(lengths, lengths), (0, 1))
        assert found is not None
        plain = min(left_by(matrix, query, (0, 1, third)) for third in range(2, 7))
        assert found[0] == pytest.approx(plain, abs=1e-6)


def test_alike_parts_are_not_tried_as_a_pair(build) -> None:
    gram = np.array([[1.0, 0.9], [0.9, 1.0]])
    assert purity._best_pair(gram, np.array([1.0, 1.0]), 2.0, gram, (0,)) is None


def test_what_the_best_entry_leaves_is_a_query_for_a_second_compound(build, entries) -> None:
    left = purity.leave_over(build.spectrum(mix((NAPHTHALENE, 0.7), (PHENOL, 0.3))), entries[:2])
    assert left is not None
    assert left.nominal.base_peak_mz == 94
    assert purity.leave_over(build.spectrum(NAPHTHALENE), entries) is None, "nothing is left of a pure spectrum"
    assert purity.leave_over(build.spectrum({}), entries) is None


def test_a_further_entry_must_bring_more_when_it_is_more_like_the_first() -> None:
    better = purity.needs_another(0.3, 0.03, 0.4, 0.1)
    assert better > purity.LEAST_CHANCE > purity.needs_another(0.3, 0.25, 0.4, 0.1)
    assert purity.needs_another(0.3, 0.1, 0.4, 0.1) > purity.needs_another(0.3, 0.1, 0.4, 0.7)


@pytest.mark.parametrize(
    ("foreign", "words"), [(0.3, "another instrument or a compound without"), (0.6, "not among them")]
)
def test_how_much_is_unexplained_is_said_in_words(build, entries, foreign: float, words: str) -> None:
    unknown = {44: 60.0, 58: 100.0, 91: 30.0, 165: 8.0}
    outcome = judge_purity(build.spectrum(mix((NAPHTHALENE, 1 - foreign), (unknown, foreign))), entries[:1])
    assert outcome.verdict is Verdict.INCONCLUSIVE
    assert words in outcome.reason
    assert outcome.residual is not None


def test_nothing_is_subtracted_where_nothing_is_explained(build, entries) -> None:
    outcome = judge_purity(build.spectrum({44: 60.0, 58: 100.0, 91: 30.0, 165: 8.0, 207: 9.0}), entries[:1])
    assert (outcome.residual, outcome.background) == (None, ())


def test_a_list_of_principal_ions_is_not_called_unexplained_for_want_of_weak_ones(build, entries) -> None:
    """From the newcomer's first hour: four typed ions of a known compound, its weaker ions not typed."""
    typed = {mz: value for mz, value in NAPHTHALENE.items() if value >= 8.0}
    weak = dict.fromkeys(range(37, 125, 6), 3.0)
    outcome = judge_purity(build.spectrum(typed), [build.entry({**weak, **NAPHTHALENE}, name="naphthalene", number=9)])
    assert outcome.explained_share > 0.6


def test_weak_ions_that_a_typed_list_leaves_out_do_not_make_its_compound_a_stranger(build) -> None:
    """Acetone, principal ions from memory: the analyst types six, the entry has ten weak ones more."""
    weak = dict.fromkeys((26, 28, 29, 37, 38, 39, 40, 41, 44, 57), 3.0)
    entry = build.entry({27: 7.0, 42: 7.0, 43: 100.0, 58: 35.0, 59: 1.2, **weak}, name="acetone")
    outcome = judge_purity(build.spectrum({15: 20.0, 27: 8.0, 42: 7.0, 43: 100.0, 58: 30.0, 59: 1.0}), [entry])
    assert outcome.explained_share > 0.9
    strangers = build.entry({43: 20.0, 58: 6.0, 71: 100.0, 86: 60.0}, name="another compound")
    outcome = judge_purity(build.spectrum({15: 20.0, 27: 8.0, 42: 7.0, 43: 100.0, 58: 30.0, 59: 1.0}), [strangers])
    assert outcome.explained_share < 0.5, "strong ions that the query lacks still count"
