"""Retention indices against worked examples, and what makes a stated index unusable."""

from __future__ import annotations

from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from identify.errors import FormatError, InputError
from identify.records import Entry, Retention
from identify.retention import (
    build_ladder,
    doubt_about_index,
    find_suspect_indices,
    kovats_index,
    linear_index,
    out_of_order,
    parse_ladder,
    phase_class,
    series_key,
)
from tests.builders import build_entry

HARRIS = build_ladder([(8, 14.3), (9, 18.5)])
WIDE = build_ladder([(10, 8.0), (12, 11.0)])


def test_kovats_reproduces_the_textbook_value() -> None:
    """Harris, Quantitative Chemical Analysis: 836 (numbers from memory, recomputed to 836.4 in standards.md 4.2 [C])."""
    assert kovats_index(15.7, HARRIS, 0.5) == pytest.approx(836.4, abs=0.05)
    assert linear_index(15.7, HARRIS) == pytest.approx(833.3, abs=0.05)


def test_standards_two_carbons_apart() -> None:
    """Standards.md 4.2 [C]: 1083.33 linear, 1092.70 Kováts with t0 = 1.5."""
    assert linear_index(9.25, WIDE) == pytest.approx(1083.33, abs=0.005)
    assert kovats_index(9.25, WIDE, 1.5) == pytest.approx(1092.70, abs=0.005)


@given(st.lists(st.floats(0.1, 5.0), min_size=2, max_size=12), st.data())
def test_an_alkane_has_a_hundred_times_its_carbons(gaps: list[float], data: st.DataObject) -> None:
    times = [sum(gaps[: place + 1]) + 1.0 for place in range(len(gaps))]
    ladder = build_ladder(list(zip(range(8, 8 + len(times)), times, strict=True)))
    place = data.draw(st.integers(0, len(times) - 1))
    assert linear_index(times[place], ladder) == pytest.approx(100.0 * (8 + place))
    assert kovats_index(times[place], ladder, 0.5) == pytest.approx(100.0 * (8 + place))


def test_nothing_is_extrapolated() -> None:
    assert linear_index(7.99, WIDE) is None
    assert linear_index(11.01, WIDE) is None
    assert kovats_index(9.25, WIDE, 8.0) is None, "a dead time at the first alkane leaves no adjusted time"
    assert kovats_index(9.25, WIDE, -0.1) is None


@pytest.mark.parametrize(
    ("pairs", "found"),
    [
        ([(10, 8.0)], "1 alkanes"),
        ([(10, 8.0), (11, 8.0)], "C11 at 8 after C10 at 8"),
        ([(10, 8.0), (11, 7.0)], "C11 at 7 after C10 at 8"),
        ([(10, 0.0), (11, 7.0)], "C10 at 0"),
    ],
)
def test_impossible_ladder_is_refused(pairs: list[tuple[int, float]], found: str) -> None:
    with pytest.raises(InputError, match="ladder") as caught:
        build_ladder(pairs)
    assert caught.value.found == found


def test_ladder_text_in_any_order_with_comments() -> None:
    ladder = parse_ladder("alkane\ttime\nC12\t11.0\n# standard mix\nn-C10, 8.0\n11;9.6  # undecane\n")
    assert ladder.carbons == (10, 11, 12)
    assert ladder.times == (8.0, 9.6, 11.0)


@pytest.mark.parametrize(("text", "line"), [("C10 8.0\nC11 late 9\n", 2), ("C10 8\nC10 9\n", 2), ("10 8.0 9.0\n", 1)])
def test_ladder_line_that_cannot_be_read_is_named(text: str, line: int) -> None:
    with pytest.raises(FormatError) as caught:
        parse_ladder(text, "ladder.txt")
    assert caught.value.where == f"ladder.txt:{line}"


@pytest.mark.parametrize(
    ("column", "phase"),
    [
        ("DB-5MS UI, 30 m x 0.25 mm", "non-polar"),
        ("HP-5", "non-polar"),
        ("100 % dimethylpolysiloxane", "non-polar"),
        ("5 % phenyl methylpolysiloxane", "non-polar"),
        ("DB-17MS", "semi-polar"),
        ("35 % phenyl", "semi-polar"),
        ("DB-1701", "semi-polar"),
        ("semi-polar", "semi-polar"),
        ("DB-WAX", "polar"),
        ("polyethylene glycol", "polar"),
        ("polar", "polar"),
        ("non-polar", "non-polar"),
        ("", ""),
        ("column of unknown make", ""),
    ],
)
def test_phase_class_of_column_names(column: str, phase: str) -> None:
    """Phase classes by common practice: 0–5 % phenyl non-polar, 14–50 % phenyl or cyanopropyl semi-polar, glycols polar."""
    assert phase_class(column) == phase


@pytest.mark.parametrize(
    ("index", "time_s", "word"),
    [
        (None, None, "stated"),
        (0.0, None, "0"),
        (float("nan"), None, "number"),
        (910.38, 910.38, "retention time"),
        (15.17, 910.38, "100"),
        (9999.0, None, "outside"),
        (-5.0, None, "outside"),
    ],
)
def test_unusable_index_has_a_reason(index: float | None, time_s: float | None, word: str) -> None:
    """The traps are those of real records (standards.md 4.4, data traps seen [F]): 0, NA, equal to the retention time."""
    assert word in doubt_about_index(index, time_s)


def test_usable_index_has_none() -> None:
    assert doubt_about_index(1182.0, 910.38) == ""


def test_homologous_series_share_a_key() -> None:
    keys = {series_key(smiles)[0] for smiles in ("CCCCCC(=O)OC", "CCCCCCCC(=O)OC", "CCCCCCCCCC(=O)OC")}
    assert keys == {"C*(=O)OC"}
    assert series_key("c1ccccc1") == ("", 0)
    assert series_key("CCl")[1] == 0


def test_index_out_of_order_within_a_series_is_found() -> None:
    alkanes = [(n, 100.0 * n) for n in range(8, 20)]
    assert out_of_order(alkanes) == ()
    assert out_of_order([*alkanes[:5], (13, 1700.0), *alkanes[6:]]) == (5,)
    assert out_of_order([(4, 900.0), (6, 880.0)]) == (0, 1), "with two members nobody knows which is wrong"
    assert out_of_order([(4, 900.0)]) == ()


def test_open_indices_of_straight_chain_phthalates_raise_no_alarm() -> None:
    """NILU open indices (CC BY, standards.md 4.4 [F]) of dimethyl, diethyl and dibutyl phthalate by chain carbons.

    The listed value of the dioctyl ester, implausibly below its branched isomer's, still lies within 60 units of a line through
    all four: a homologous series alone does not catch it.
    """
    assert out_of_order([(2, 1451.7), (4, 1587.3), (8, 1953.0)]) == ()
    assert out_of_order([(2, 1451.7), (4, 1587.3), (8, 1953.0), (16, 2504.0)]) == ()


def test_suspect_indices_of_a_library_are_listed_with_their_reason() -> None:
    def entry(
        number: int, smiles: str, index: float | None, time_s: float | None = None, column: str = "DB-5"
    ) -> Entry:
        plain = build_entry(smiles, {43: 1.0}, entry_id=number, smiles=smiles)
        return replace(plain, retention=Retention(time_s, index, "", column))

    entries = [
        *(entry(n, "C" * n + "O", 100.0 * n + 270.0) for n in range(4, 10)),
        entry(20, "C" * 10 + "O", 900.0),
        entry(21, "C" * 11 + "O", 900.0, column="DB-WAX"),
        entry(22, "CCO", 0.0),
        entry(23, "CCO", 910.38, 910.38),
        entry(24, "CCO", None),
    ]
    assert find_suspect_indices(entries) == {
        20: "the index is out of order within its homologous series",
        22: "the index is 0",
        23: "the index equals the retention time",
    }
