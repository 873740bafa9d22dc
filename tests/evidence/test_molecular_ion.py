"""The molecular mass from the query and its neighbours."""

from __future__ import annotations

import numpy as np
import pytest

from identify.evidence.mass_features import (
    LOSSES,
    MassProblem,
    _neighbour_names,
    all_features,
    correct_for_carbon,
    dense_of,
    fragment_levels,
    highest_ions,
    neighbour_features,
    network_inputs,
)
from identify.evidence.mass_model import Network, Trees, load_model, softmax
from identify.evidence.molecular_ion import estimate_molecular_ion
from identify.evidence.shifted import SPAN, build_shift_table, match_shifted
from tests.builders import PUBLISHED_ACETOPHENONE

PALMITATE = {43: 30.0, 55: 20.0, 74: 100.0, 75: 18.0, 87: 65.0, 143: 15.0, 227: 9.0, 239: 7.0, 270: 10.0, 271: 1.9}
STEARATE = {43: 30.0, 55: 21.0, 74: 100.0, 75: 18.0, 87: 66.0, 143: 16.0, 255: 9.0, 267: 6.0, 298: 10.0, 299: 2.1}
"""Invented, from general knowledge: methyl esters with the rearrangement ions 74 and 87, losses of 31 and 43 from M."""


def test_molecular_ion_on_top_is_found_without_neighbours(build) -> None:
    estimate = estimate_molecular_ion(build.spectrum(PUBLISHED_ACETOPHENONE), [])
    assert estimate.estimates[0].nominal_mass == 120
    assert estimate.estimates[0].probability > 0.5
    assert estimate.not_observed_probability < 0.5


@pytest.mark.parametrize("peaks", [{}, {43: 100.0}, {1: 5.0}, {1990: 10.0}, dict.fromkeys(range(10, 700), 50.0)])
def test_any_spectrum_gives_a_distribution(build, peaks: dict[int, float]) -> None:
    estimate = estimate_molecular_ion(build.spectrum(peaks), [])
    chances = [item.probability for item in estimate.estimates]
    assert chances == sorted(chances, reverse=True)
    assert sum(chances) <= 1.0 + 1e-9
    assert 0.0 <= estimate.not_observed_probability <= 1.0
    assert estimate.agreement


def test_chain_longer_by_two_carbons_is_found_from_its_homologue(build) -> None:
    """The upper ions of the homologue fit when shifted by 28; a weak M at 298 would else be open."""
    query = {mz: value for mz, value in STEARATE.items() if mz < 298}
    neighbour = (build.entry(PALMITATE, "C17H34O2", name="methyl palmitate"), 0.95)
    table = build_shift_table(build.spectrum(query), [neighbour], 5)
    gain = table.gains_at(np.arange(271, 330))[:, 0]
    assert 271 + int(np.argmax(gain)) == 298
    match = match_shifted(build.spectrum(query), [neighbour])[0]
    assert (match.shift, match.entry.identity.name) == (28, "methyl palmitate")
    assert match.score > match.direct


def test_known_mass_fixes_the_shift(build) -> None:
    neighbour = (build.entry(PALMITATE, "C17H34O2"), 0.9)
    assert match_shifted(build.spectrum(STEARATE), [neighbour], mass=298)[0].shift == 28
    assert match_shifted(build.spectrum(PALMITATE), [neighbour])[0].shift == 0, "identical spectra need no shift"


def test_shift_table_equals_the_plain_definition(build) -> None:
    """Oracle: the Fourier transform gives the same sums as two loops."""
    rng = np.random.default_rng(4)

    def random_peaks() -> dict[int, float]:
        mz = rng.choice(np.arange(20, 160), 25, replace=False)
        return dict(zip(mz.tolist(), rng.uniform(0.5, 100.0, 25).tolist(), strict=True))

    query, other = random_peaks(), random_peaks()
    table = build_shift_table(build.spectrum(query), [(build.entry(other, "C10H22"), 0.5)], 5)

    def unit(peaks: dict[int, float]) -> dict[int, float]:
        weights = {mz: (value * mz) ** 0.5 for mz, value in peaks.items()}
        length = sum(value**2 for value in weights.values()) ** 0.5
        return {mz: value / length for mz, value in weights.items()}

    left, right = unit(query), unit(other)
    shared = left.keys() & right.keys()
    assert table.direct[0] == pytest.approx(sum(left[mz] * right[mz] for mz in shared))
    left_over = {mz: max(left[mz] - right.get(mz, 0.0), 0.0) for mz in left}
    right_over = {mz: max(right[mz] - left.get(mz, 0.0), 0.0) for mz in right}
    for shift in (-60, -14, -1, 0, 1, 15, 28, 100):
        plain = sum(value * right_over.get(mz - shift, 0.0) for mz, value in left_over.items())
        assert table.shifted[0, shift + SPAN] == pytest.approx(plain, abs=1e-9), shift


def test_a_compound_votes_once(build) -> None:
    entry = build.entry(PALMITATE, "C17H34O2", name="methyl palmitate")
    table = build_shift_table(build.spectrum(STEARATE), [(entry, 0.9), (entry, 0.8)], 5)
    assert len(table.entries) == 1


def test_entries_without_a_mass_do_not_vote(build) -> None:
    table = build_shift_table(build.spectrum(STEARATE), [(build.entry(PALMITATE, ""), 0.9)], 5)
    assert table.entries == ()
    problem = MassProblem(dense_of(build.spectrum(STEARATE)), table)
    assert all((column == 0).all() for column in neighbour_features(problem).values())


def test_features_are_those_the_model_was_fitted_on(build) -> None:
    table = build_shift_table(build.spectrum(STEARATE), [(build.entry(PALMITATE, "C17H34O2"), 0.9)], 5)
    problem = MassProblem(dense_of(build.spectrum(STEARATE)), table)
    matrix, groups = all_features(problem)
    assert tuple(name for group in groups.values() for name in group) == load_model().names
    assert np.isfinite(matrix).all()
    assert 298 in problem.masses
    assert 270 in problem.masses, "a mass that a neighbour has is proposed unless it lies far below the top"


def test_carbon_13_is_taken_away_before_the_top_is_read() -> None:
    relative = np.zeros((1, 140))
    relative[0, 128], relative[0, 129] = 100.0, 10.9
    assert highest_ions(correct_for_carbon(relative)).tolist() == [[128, 128, 128, 128]]


def test_network_is_two_rectified_layers_and_a_sum() -> None:
    """By hand: hidden = (max(2 − 1, 0), max(−2 + 3, 0)) = (1, 1) with the fragment; second = max(1 + 2·1 − 0.5, 0) = 2.5."""
    network = Network(
        inputs=np.array([[1.0, -1.0]]),
        fragments=np.array([[-0.5, 1.5]]),
        first_bias=np.array([0.0, 0.0]),
        second=np.array([[1.0], [2.0]]),
        second_bias=np.array([-0.5]),
        last=np.array([4.0]),
    )
    assert network.logits(np.array([[2.0], [-9.0]]), np.array([2.0])).tolist() == [10.0, 4.0 * (2.0 * 12.0 - 0.5)]


def test_networks_read_every_loss_from_a_mass_and_its_remainder(build) -> None:
    problem = MassProblem(dense_of(build.spectrum(PALMITATE)), build_shift_table(build.spectrum(PALMITATE), [], 5))
    row = network_inputs(np.zeros((1, 2)), problem.levels, np.array([270]))[0, 2:]
    losses, remainder = row[: LOSSES.size], row[LOSSES.size :]
    assert set(LOSSES[losses > 0].tolist()) == {-1, 0, 31, 43, 127}, "the ions from 271 down to 143"
    assert losses[LOSSES.tolist().index(31)] == pytest.approx(np.log10(7.0 / 0.05) / np.log10(100.0 / 0.05))
    assert remainder.tolist() == [float(n == 270 % 14) for n in range(14)]
    assert fragment_levels(problem.levels).max() == pytest.approx(1.0), "the base peak, m/z 74"


def test_query_estimator_sees_nothing_of_the_neighbours() -> None:
    model = load_model()
    neighbours = [place for place, name in enumerate(model.names) if name in _neighbour_names()]
    assert neighbours
    assert not model.query.inputs[neighbours].any()
    assert model.everything.inputs[neighbours].any()


def test_trees_walk_like_nested_ifs() -> None:
    """x0 ≤ 1 → (x1 ≤ 5 → 1, else 2), else 3; plus a tree that is one leaf."""
    trees = Trees(
        feature=np.array([0, 1, 0, 0, 0, 0]),
        threshold=np.array([1.0, 5.0, 0.0, 0.0, 0.0, 0.0]),
        left=np.array([1, 3, 2, 3, 4, 5]),
        right=np.array([2, 4, 2, 3, 4, 5]),
        value=np.array([0.0, 0.0, 3.0, 1.0, 2.0, 10.0]),
        roots=np.array([0, 5]),
        depth=2,
    )
    rows = np.array([[0.5, 4.0], [0.5, 6.0], [2.0, 0.0], [1.0, 5.0]])
    assert trees.sum_over(rows).tolist() == [11.0, 12.0, 13.0, 11.0]


def test_softmax_of_large_logits_is_finite() -> None:
    assert softmax(np.array([1000.0, 0.0])).tolist() == [1.0, 0.0]
