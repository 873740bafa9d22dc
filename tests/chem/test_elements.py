"""The isotope table is the pinned one."""

from __future__ import annotations

import molmass
import pytest

from identify.chem.elements import MASS, MASS_NUMBER, NATURAL_ISOTOPES, NUCLIDES, element_of

# standards.md 3.1: masses AME2020 [F], representative abundances 2009/2011 [F]
PINNED = """
1H 1.007825031898 0.999885
2H 2.014101777844 0.000115
10B 10.012936862 0.199
11B 11.009305166 0.801
12C 12 0.9893
13C 13.00335483534 0.0107
14N 14.00307400425 0.99636
15N 15.00010889827 0.00364
16O 15.99491461926 0.99757
17O 16.99913175595 0.00038
18O 17.99915961214 0.00205
19F 18.99840316207 1
28Si 27.97692653442 0.92223
29Si 28.97649466434 0.04685
30Si 29.973770137 0.03092
31P 30.97376199768 1
32S 31.97207117354 0.9499
33S 32.97145890862 0.0075
34S 33.967867011 0.0425
36S 35.967080692 0.0001
35Cl 34.968852694 0.7576
37Cl 36.965902573 0.2424
79Br 78.918337574 0.5069
81Br 80.916288197 0.4931
127I 126.904472592 1
"""


def test_light_elements_are_the_pinned_table_exactly() -> None:
    expected: dict[str, list[tuple[int, float, float]]] = {}
    for line in PINNED.split("\n"):
        if line:
            nuclide, mass, fraction = line.split()
            number = int("".join(filter(str.isdigit, nuclide)))
            symbol = "".join(filter(str.isalpha, nuclide))
            expected.setdefault(symbol, []).append((number, float(mass), float(fraction)))
    for symbol, rows in expected.items():
        assert [(i.mass_number, i.mass, i.fraction) for i in NATURAL_ISOTOPES[symbol]] == rows


@pytest.mark.parametrize("symbol", sorted(NATURAL_ISOTOPES))
def test_every_element_agrees_with_molmass(symbol: str) -> None:
    theirs = {number: iso for number, iso in molmass.ELEMENTS[symbol].isotopes.items() if iso.abundance > 0}
    ours = {isotope.mass_number: isotope for isotope in NATURAL_ISOTOPES[symbol]}
    assert ours.keys() == theirs.keys()
    for number, isotope in ours.items():
        assert isotope.mass == pytest.approx(theirs[number].mass, abs=3e-6)  # AME2020 against AME2012
        assert isotope.fraction == pytest.approx(theirs[number].abundance, abs=1e-9)
    assert sum(isotope.fraction for isotope in ours.values()) == pytest.approx(1, abs=1e-6)


def test_principal_isotope_is_the_most_abundant_not_the_lightest() -> None:
    assert {symbol: MASS_NUMBER[symbol] for symbol in ("B", "Se", "Ge", "Sn", "Hg", "Br", "Cl", "C")} == {
        "B": 11,
        "Se": 80,
        "Ge": 74,
        "Sn": 120,
        "Hg": 202,
        "Br": 79,
        "Cl": 35,
        "C": 12,
    }


def test_every_nuclide_knows_its_element_mass_and_number() -> None:
    for nuclide, (symbol, number, mass) in NUCLIDES.items():
        assert nuclide == f"[{number}{symbol}]"
        assert element_of(nuclide) == symbol
        assert MASS[nuclide] == mass
        assert abs(mass - number) < 0.3
    assert {"[2H]", "[3H]", "[13C]", "[14C]", "[15N]", "[18O]"} <= NUCLIDES.keys()


def test_unknown_nuclide_is_no_element() -> None:
    with pytest.raises(KeyError):
        element_of("[99C]")
