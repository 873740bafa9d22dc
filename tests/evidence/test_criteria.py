"""Windows of the named documents at their boundaries, and the rules applied to spectra.

Vectors: standards.md 1.1–1.6 and 1.9, computed there from tables that are themselves from memory (EPA TIC: read in a
copy). They test our reading of those tables, not the originals.
"""

from __future__ import annotations

import pytest

from identify.errors import UsageError
from identify.evidence.confirmation import RetentionTimes, check_confirmation, check_retention_rule
from identify.evidence.criteria_files import ION_CRITERIA, load_criteria
from identify.records import Verdict

VECTORS = [
    ("eu-2002-657", 60, 54.0, 66.0),
    ("eu-2002-657", 50.0, 42.5, 57.5),
    ("eu-2002-657", 50.1, 45.09, 55.11),
    ("eu-2002-657", 20, 16.0, 24.0),
    ("eu-2002-657", 20.1, 17.085, 23.115),
    ("eu-2002-657", 10, 5.0, 15.0),
    ("eu-2002-657", 10.1, 8.08, 12.12),
    ("eu-2021-808", 50, 30.0, 70.0),
    ("sante-11312", 50, 35.0, 65.0),
    ("wada-2003", 60, 50.0, 70.0),
    ("wada-2003", 50, 40.0, 60.0),
    ("wada-2003", 40, 32.0, 48.0),
    ("wada-2003", 25, 20.0, 30.0),
    ("wada-2003", 10, 5.0, 15.0),
    ("wada-2003", 3, 0.0, 8.0),
    ("epa-tic", 50, 30.0, 70.0),
    ("iso-22892", 100, 80.0, 120.0),
    ("iso-22892", 50, 35.0, 65.0),
    ("iso-22892", 20, 8.0, 32.0),
    ("iso-22892", 10, 0.0, 21.0),
]
# iso-22892 at I = 10: 10 ± (1 + 10) gives −1 … 21; the lower end is floored at 0 (standards.md writes 0–21).


@pytest.mark.parametrize(("name", "reference", "low", "high"), VECTORS)
def test_window_at_its_boundary(name: str, reference: float, low: float, high: float) -> None:
    assert load_criteria(name).window(reference) == pytest.approx((low, high), abs=1e-9)


@pytest.mark.parametrize("name", ION_CRITERIA)
def test_every_document_states_edition_source_and_whether_it_was_read(name: str) -> None:
    criteria = load_criteria(name)
    assert criteria.name == name
    assert criteria.edition
    assert criteria.source
    assert criteria.paraphrase
    assert criteria.provenance == ("read in a copy" if name == "epa-tic" else "from memory")
    assert criteria.windows[-1].above == 0.0, "some window must hold for every reference value"


def test_unknown_name_is_refused_with_the_list() -> None:
    with pytest.raises(UsageError, match="eu-2002-657, eu-2021-808"):
        load_criteria("eu-1999")


STANDARD = {77: 60.0, 105: 100.0, 120: 30.0, 51: 20.0, 43: 12.0}


def test_the_standard_itself_meets_every_document(build) -> None:
    spectrum = build.spectrum(STANDARD)
    times = RetentionTimes(600.0, 600.0, 500.0, 500.0)
    for name in ION_CRITERIA:
        outcome = check_confirmation(spectrum, spectrum, load_criteria(name), times=times, molecular_mz=120)
        assert outcome.verdict is Verdict.AGREES, name
        assert "same instrument" in outcome.cautions[0]
        assert (len(outcome.cautions) == 2) is (name != "epa-tic"), "what is from memory says so"


def test_one_ion_outside_separates_the_documents(build) -> None:
    """m/z 120 at 30 % in the standard and 16 % in the unknown: inside EPA's ± 20 points, outside 2002/657's ± 15 %."""
    unknown = build.spectrum({**STANDARD, 120: 16.0})
    outcomes = {
        name: {
            ion.mz: ion.verdict
            for ion in check_confirmation(unknown, build.spectrum(STANDARD), load_criteria(name)).ions
        }
        for name in ION_CRITERIA
    }
    assert {name for name, ions in outcomes.items() if ions[120] is Verdict.AGREES} == {"epa-tic"}
    assert all(ions[77] is Verdict.AGREES for ions in outcomes.values())


def test_a_missing_ion_that_must_be_present_overrules_a_wide_window(build) -> None:
    """wada-2003 at 3–10 % reaches down to nearly 0, yet the ion must be there."""
    unknown = build.spectrum({mz: value for mz, value in STANDARD.items() if mz != 43})
    outcome = check_confirmation(unknown, build.spectrum(STANDARD), load_criteria("wada-2003"))
    assert outcome.ions_verdict is Verdict.CONFLICTS
    assert "43" in outcome.ions_reason


def test_epa_rules_want_every_major_ion_and_the_molecular_ion(build) -> None:
    standard = {**STANDARD, 120: 4.0}
    unknown = build.spectrum({mz: value for mz, value in standard.items() if mz != 120})
    without = check_confirmation(unknown, build.spectrum(standard), load_criteria("epa-tic"))
    with_molecular = check_confirmation(unknown, build.spectrum(standard), load_criteria("epa-tic"), molecular_mz=120)
    assert without.ions_verdict is Verdict.AGREES
    assert with_molecular.ions_verdict is Verdict.CONFLICTS


def test_ions_only_the_unknown_has_are_listed_for_review(build) -> None:
    outcome = check_confirmation(
        build.spectrum({**STANDARD, 149: 35.0}), build.spectrum(STANDARD), load_criteria("epa-tic")
    )
    assert outcome.extra == ((149, 35.0),)


def test_points_count_separation_and_ions_inside(build) -> None:
    """(EU) 2021/808: GC-MS with n ions gives 1 + n points (read in a copy, standards.md 1.2 [F])."""
    spectrum, criteria = build.spectrum(STANDARD), load_criteria("eu-2021-808")
    with_time = check_confirmation(
        spectrum, spectrum, criteria, times=RetentionTimes(600.0, 603.0), chosen_ions=(105, 77, 120, 51)
    )
    assert (with_time.points, with_time.points_needed, with_time.verdict) == (5.0, 5.0, Verdict.AGREES)
    without = check_confirmation(spectrum, spectrum, criteria, chosen_ions=(105, 77, 120, 51))
    assert (without.points, without.verdict) == (4.0, Verdict.INCONCLUSIVE)
    three = check_confirmation(
        spectrum, spectrum, criteria, times=RetentionTimes(600.0, 603.0), chosen_ions=(105, 77, 120)
    )
    assert (three.points, three.verdict) == (4.0, Verdict.INCONCLUSIVE)


@pytest.mark.parametrize(
    ("name", "times", "expected"),
    [
        ("eu-2021-808", RetentionTimes(606.0, 600.0), Verdict.AGREES),
        ("eu-2021-808", RetentionTimes(606.1, 600.0), Verdict.CONFLICTS),
        ("eu-2021-808", RetentionTimes(62.9, 60.0), Verdict.AGREES),
        ("eu-2021-808", RetentionTimes(63.1, 60.0), Verdict.CONFLICTS),
        ("sante-11312", RetentionTimes(606.0, 600.0), Verdict.AGREES),
        ("sante-11312", RetentionTimes(593.9, 600.0), Verdict.CONFLICTS),
        ("wada-2003", RetentionTimes(606.0, 600.0), Verdict.AGREES),
        ("wada-2003", RetentionTimes(1812.1, 1800.0), Verdict.CONFLICTS),
        ("eu-2002-657", RetentionTimes(600.0, 600.0), Verdict.NOT_ASSESSED),
        ("eu-2002-657", RetentionTimes(603.0, 600.0, 500.0, 500.0), Verdict.AGREES),
        ("eu-2002-657", RetentionTimes(603.1, 600.0, 500.0, 500.0), Verdict.CONFLICTS),
        ("epa-tic", RetentionTimes(1.0, 600.0), Verdict.NOT_ASSESSED),
    ],
)
def test_retention_rule_at_its_boundary(name: str, times: RetentionTimes, expected: Verdict) -> None:
    verdict, reason = check_retention_rule(load_criteria(name).retention, times)
    assert verdict is expected, reason


def test_unknown_without_the_base_ion_conflicts_in_every_ion(build) -> None:
    unknown = build.spectrum({77: 100.0, 51: 20.0})
    outcome = check_confirmation(unknown, build.spectrum(STANDARD), load_criteria("sante-11312"))
    assert {ion.verdict for ion in outcome.ions} == {Verdict.CONFLICTS}
