"""Tune checks: the isotope-governed windows must hold what the formulas give (standards.md 2.2, 2.3)."""

from __future__ import annotations

import pytest

from identify.chem.formula import parse_formula
from identify.chem.isotopes import isotope_pattern
from identify.errors import UsageError
from identify.evidence.criteria_files import INSTRUMENT_CHECKS, list_editions, load_instrument_check
from identify.evidence.instrument import check_instrument, passes
from identify.records import Verdict

ISOTOPE_GOVERNED = [  # ion, formula, offset of the reference ion, offset of the ion, computed % (standards.md 2.2 [C*])
    ("dftpp", 443, 442, "C18H5F10P", 1, 19.53),
    ("dftpp", 199, 198, "C6F5P", 1, 6.49),
    ("bfb", 96, 95, "C6H4F", 1, 6.54),
    ("bfb", 175, 174, "C6H4BrF", 1, 6.54),
    ("bfb", 176, 174, "C6H4BrF", 2, 97.46),
    ("pftba", 70, 69, "CF3", 1, 1.08),
    ("pftba", 220, 219, "C4F9", 1, 4.33),
    ("pftba", 503, 502, "C9F20N", 1, 10.10),
]


@pytest.mark.parametrize(("name", "mz", "of", "formula", "offset", "percent"), ISOTOPE_GOVERNED)
def test_isotope_governed_windows_hold_the_computed_ratio(
    name: str, mz: int, of: int, formula: str, offset: int, percent: float
) -> None:
    computed = 100 * isotope_pattern(parse_formula(formula)).at(offset)
    assert computed == pytest.approx(percent, abs=0.006)
    for edition in list_editions(name):
        for rule in load_instrument_check(name, edition).rules:
            if rule.mz == mz and rule.of == of:
                assert rule.low is not None
                assert rule.high is not None
                assert rule.low <= computed <= rule.high, edition


GOOD_BFB = {50: 25.0, 75: 48.0, 95: 100.0, 96: 6.6, 173: 0.4, 174: 75.0, 175: 5.0, 176: 73.0, 177: 4.8}
"""Invented tune spectrum that meets method 8260C: values in the middle of every window."""
GOOD_DFTPP = {
    51: 45.0, 68: 0.5, 69: 40.0, 70: 0.3, 127: 50.0, 197: 0.2, 198: 100.0, 199: 6.6, 275: 22.0, 365: 2.5, 441: 9.0, 442: 62.0,
    443: 12.1,
}  # fmt: skip


@pytest.mark.parametrize(("name", "peaks"), [("bfb", GOOD_BFB), ("dftpp", GOOD_DFTPP)])
def test_good_tune_passes_every_edition(build, name: str, peaks: dict[int, float]) -> None:
    for edition in list_editions(name):
        verdicts = check_instrument(build.spectrum(peaks), load_instrument_check(name, edition))
        assert passes(verdicts), (edition, [v for v in verdicts if v.verdict is not Verdict.AGREES])


@pytest.mark.parametrize(
    ("name", "peaks", "change", "fails"),
    [
        ("bfb", GOOD_BFB, {176: 75.8}, 176),  # 101.07 % of 174: the window ends below 101
        ("bfb", GOOD_BFB, {173: 1.5}, 173),  # exactly 2 % of 174: "below 2" excludes it
        ("bfb", GOOD_BFB, {75: 60.1}, 75),
        ("dftpp", GOOD_DFTPP, {51: 29.9}, 51),
        ("dftpp", GOOD_DFTPP, {443: 14.4}, 443),
        ("dftpp", GOOD_DFTPP, {441: 12.1}, 441),  # must be below m/z 443
        ("dftpp", GOOD_DFTPP, {69: 120.0}, 198),  # no longer the base peak
    ],
)
def test_one_ion_outside_is_named(
    build, name: str, peaks: dict[int, float], change: dict[int, float], fails: int
) -> None:
    verdicts = check_instrument(build.spectrum({**peaks, **change}), load_instrument_check(name))
    assert fails in {verdict.mz for verdict in verdicts if verdict.verdict is Verdict.CONFLICTS}


def test_window_ends_belong_to_the_window(build) -> None:
    verdicts = check_instrument(build.spectrum({**GOOD_BFB, 75: 60.0, 50: 15.0}), load_instrument_check("bfb"))
    assert passes(verdicts)


def test_missing_reference_ion_is_not_assessed_rather_than_failed(build) -> None:
    peaks = {mz: value for mz, value in GOOD_BFB.items() if mz != 176}
    verdicts = {
        verdict.mz: verdict.verdict for verdict in check_instrument(build.spectrum(peaks), load_instrument_check("bfb"))
    }
    assert verdicts[177] is Verdict.NOT_ASSESSED
    assert verdicts[176] is Verdict.CONFLICTS


def test_every_check_says_its_windows_are_from_memory() -> None:
    for name in INSTRUMENT_CHECKS:
        assert load_instrument_check(name).provenance == "from memory"
    with pytest.raises(UsageError, match="8260c, 524-2"):
        load_instrument_check("bfb", "1999")
