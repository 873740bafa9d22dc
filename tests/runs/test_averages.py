"""Spectra averaged and subtracted by hand."""

from __future__ import annotations

import pytest

from identify.errors import InputError, UsageError
from identify.runs.averages import average_scans
from tests.runs.synthetic_runs import Eluting, apex_time_s, make_run

TRUTH = Eluting({57: 100.0, 91: 40.0, 148: 20.0}, 100.0, 30_000.0)
AT = apex_time_s(TRUTH) / 60.0
RUN = make_run([TRUTH], 200, seed=1, noisy=False)


def test_subtraction_leaves_the_compound_alone() -> None:
    found = average_scans(RUN, [AT], [AT - 0.3, AT + 0.3])
    assert set(found.peaks.mz[found.peaks.intensity > 100]) == {57.0, 91.0, 148.0}
    assert found.title.startswith("1.833 min, scan 101 minus mean of scans 65, 137")


def test_two_times_average_all_scans_between_them() -> None:
    found = average_scans(RUN, [AT - 0.01, AT + 0.01])
    assert "mean of scans 100 to 102" in found.title
    assert found.time_s == pytest.approx(60.0 * AT)
    single = average_scans(RUN, [AT])
    assert found.peaks.intensity_at(57) < single.peaks.intensity_at(57)


def test_a_time_outside_the_run_is_refused() -> None:
    with pytest.raises(UsageError, match=r"--background.*within the run, 1\.00 to 2\.66 min"):
        average_scans(RUN, [AT], [9.0])


@pytest.mark.parametrize("at", [[], [1.1, 1.2, 1.3]])
def test_one_or_two_times_are_needed(at: list[float]) -> None:
    with pytest.raises(UsageError, match="one time, or two"):
        average_scans(RUN, at)


def test_a_scan_minus_itself_leaves_nothing() -> None:
    with pytest.raises(InputError, match="nothing above the background"):
        average_scans(RUN, [AT], [AT])
