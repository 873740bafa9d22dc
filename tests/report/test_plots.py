"""Drawings: well-formed, named for screen readers, true to the numbers."""

from __future__ import annotations

import itertools
import re
from xml.etree import ElementTree

import numpy as np
import pytest

from identify.records import AlignedPeaks
from identify.report.plots import MassMark, contribution_bar_svg, mirror_svg, probability_bar_svg, spectrum_svg
from tests.builders import ACETOPHENONE, build_peaks


def _parse(svg: str) -> ElementTree.Element:
    return ElementTree.fromstring(svg)


def _aligned(rows: list[tuple[float, float, float]]) -> AlignedPeaks:
    mz, query, entry = (np.array(column, float) for column in zip(*rows, strict=True)) if rows else (np.zeros(0),) * 3
    return AlignedPeaks(mz, query, entry, 35)


def _path(svg: str, classes: str) -> str:
    found = re.search(rf'<path class="{classes}" d="([^"]*)"', svg)
    return found.group(1) if found else ""


def test_spectrum_names_itself_and_escapes_what_it_is_told() -> None:
    svg = spectrum_svg(build_peaks(ACETOPHENONE), name="q1", title="<b>&\"'", description="105 > 77")
    root = _parse(svg)
    assert root.attrib["role"] == "img" and root.attrib["aria-labelledby"] == "q1-t q1-d"
    assert root[0].text == "<b>&\"'" and root[1].text == "105 > 77"


def test_spectrum_draws_every_peak_and_labels_the_principal_ones() -> None:
    svg = spectrum_svg(build_peaks(ACETOPHENONE), name="q1", title="t", description="d")
    assert _path(svg, "stick").count("M") == len(ACETOPHENONE)
    labels = re.findall(r"<text[^>]*>(\d+)</text>", svg[svg.index('<g class="ion">') :])
    assert {"105", "77", "120", "43", "51"} <= set(labels) and "91" not in labels


def test_stick_heights_are_proportional() -> None:
    svg = spectrum_svg(build_peaks({50: 25, 100: 100, 150: 50}), name="q", title="t", description="d")
    ends = [tuple(map(float, pair)) for pair in re.findall(r"M[\d.]+ ([\d.]+)V([\d.]+)", _path(svg, "stick"))]
    heights = [foot - tip for foot, tip in ends]
    assert [height / heights[1] for height in heights] == pytest.approx([0.25, 1.0, 0.5], abs=0.01)


def test_a_mass_mark_beyond_the_last_peak_is_inside_the_drawing() -> None:
    svg = spectrum_svg(
        build_peaks(ACETOPHENONE), name="q", title="t", description="d", mark=MassMark(180.0, "M 180? 60 %")
    )
    x = float(re.search(r'class="mark" d="M([\d.]+)', svg).group(1))  # type: ignore[union-attr]
    assert 46 < x < 630 and "M 180? 60 %" in svg


@pytest.mark.parametrize("peaks", [{105: 100.0}, {40: 1e-9, 41: 1e12}, {12.5: 3.0, 999.75: 2.0}])
def test_odd_spectra_are_drawn(peaks: dict[float, float]) -> None:
    assert "nan" not in spectrum_svg(build_peaks(peaks), name="q", title="t", description="d")


def test_mirror_tells_matched_and_unmatched_ions_apart_by_shape() -> None:
    svg = mirror_svg(_aligned([(50, 40, 60), (60, 30, 0), (70, 0, 20)]), name="m", title="t", description="d")
    assert _path(svg, "stick matched").count("M") == 1
    assert _path(svg, "head matched").count("h0") == 2
    assert "l4 4" in _path(svg, "head query-only") and "h6v6" in _path(svg, "head entry-only")
    assert _path(svg, "stick query-only").count("M") == 1 == _path(svg, "stick entry-only").count("M")


def test_mirror_puts_the_query_above_and_the_entry_below() -> None:
    svg = mirror_svg(_aligned([(60, 100, 0), (70, 0, 100)]), name="m", title="t", description="d")
    (query,) = re.findall(r"M[\d.]+ (\d+)V(\d+)", _path(svg, "stick query-only"))
    (entry,) = re.findall(r"M[\d.]+ (\d+)V(\d+)", _path(svg, "stick entry-only"))
    assert int(query[1]) < int(query[0]) == int(entry[0]) < int(entry[1])


def test_each_ion_is_labelled_once() -> None:
    svg = mirror_svg(_aligned([(50, 40, 60), (90, 80, 80), (130, 0, 70)]), name="m", title="t", description="d")
    ions = svg[svg.index('<g class="ion">') : svg.index('<g class="side">')]
    assert sorted(re.findall(r">(\d+)</text>", ions)) == ["130", "50", "90"]


def test_an_empty_alignment_is_drawn_without_ions() -> None:
    root = _parse(mirror_svg(_aligned([]), name="m", title="t", description="d"))
    assert not [node for node in root.iter() if node.attrib.get("class", "").startswith("stick")]


def test_bars_show_share_and_sign() -> None:
    assert 'd="M0 4H25.0"' in probability_bar_svg(0.25, 0.95) and 'd="M95.0 0V8"' in probability_bar_svg(0.25, 0.95)
    assert 'class="limit"' not in probability_bar_svg(0.25)
    assert 'class="against" d="M0 5h-25"' in contribution_bar_svg(-1.0, 2.0)
    assert 'class="for" d="M0 5h0"' in contribution_bar_svg(0.0, 0.0)


@pytest.mark.parametrize("highest", [60, 131, 218, 286, 420, 650, 1100])
def test_numbers_on_the_mass_axis_are_evenly_spaced_at_both_sizes(highest: int) -> None:
    svg = spectrum_svg(build_peaks({41: 50, highest: 100}), name="q", title="t", description="d")
    axis = svg[svg.index('<path class="axis"') : svg.index('class="unit"')]
    found = [(int(word), "fine" in classes) for classes, word in re.findall(r"<text([^>]*)>(\d+)</text>", axis)]
    for numbers in (sorted(word for word, _ in found), sorted(word for word, is_fine in found if not is_fine)):
        assert len(numbers) >= 2
        assert len({after - before for before, after in itertools.pairwise(numbers)}) == 1
