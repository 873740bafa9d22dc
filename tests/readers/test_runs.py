"""Run files: what a good one gives, and the one sentence each bad one gets."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from identify.errors import FormatError, InputError, IonwitnessError
from identify.readers import andi, mzml_run
from identify.readers.mzml_run import centroid_scan
from identify.readers.runs import is_run, read_run
from tests.readers.run_files import SCANS, mzml_text, write_andi

MZML = [
    {"mz": [43.0, 57.0], "intensity": [100.0, 50.0], "minutes": 1.0},
    {"mz": [43.0, 57.0, 71.0], "intensity": [200.0, 80.0, 20.0], "minutes": 1.01},
    {"mz": [43.0], "intensity": [90.0], "minutes": 1.02},
]


def points(run, scan: int) -> list[tuple[float, float]]:
    part = slice(run.first_point[scan], run.first_point[scan + 1])
    return sorted(
        (round(float(mz), 2), float(value)) for mz, value in zip(run.mz[part], run.intensity[part], strict=True)
    )


def test_an_andi_run_gives_its_scans_and_points_in_any_order_within_a_scan(tmp_path: Path) -> None:
    run = read_run(write_andi(tmp_path / "a.cdf"))
    assert run.time_s.tolist() == [1.0, 2.0, 3.0]
    assert points(run, 1) == [(43.0, 200.0), (57.1, 80.0), (71.0, 20.0)]
    assert run.title == "invented"


def test_scale_factors_apply(tmp_path: Path) -> None:
    mz = np.array([4300, 5710, 5710, 4300, 7100, 4300], dtype=np.int32)
    run = read_run(write_andi(tmp_path / "a.cdf", mass_values=mz, mass_scale=0.01, intensity_scale=10.0))
    assert points(run, 0) == [(43.0, 1000.0), (57.1, 500.0)]


def test_missing_values_are_left_out_and_counted(tmp_path: Path) -> None:
    scans = [[(43.0, 100.0), (-9999.0, 5.0), (57.0, -9999.0)], [(43.0, 90.0)], [(43.0, 80.0)]]
    run = read_run(write_andi(tmp_path / "a.cdf", scans))
    assert points(run, 0) == [(43.0, 100.0)]
    assert run.notes == ("2 points without a usable value left out",)


def test_scans_without_a_time_or_at_the_time_of_another_are_left_out_and_counted(tmp_path: Path) -> None:
    scans = [*SCANS, [(44.0, 1.0)], [(45.0, 2.0)]]
    times = np.array([3.0, -9999.0, 1.0, 3.0, 2.0])
    run = read_run(write_andi(tmp_path / "a.cdf", scans, scan_acquisition_time=times))
    assert run.time_s.tolist() == [1.0, 2.0, 3.0]
    assert run.notes == ("1 scans without a time left out", "1 scans at the time of another left out")
    assert points(run, 0) == [(43.0, 90.0)]


def test_empty_scans_are_kept(tmp_path: Path) -> None:
    run = read_run(write_andi(tmp_path / "a.cdf", [[(43.0, 100.0)], [], [(43.0, 80.0)]]))
    assert np.diff(run.first_point).tolist() == [1, 0, 1]


@pytest.mark.parametrize(
    ("changes", "found", "hint"),
    [
        ({"experiment_type": "Continuum Mass Spectrum"}, "Continuum", "Centroid the run"),
        ({"test_ionization_mode": "Electrospray Ionization"}, "Electrospray", "other ionizations"),
        ({"test_ionization_mode": "Chemical Ionization"}, "Chemical", "other ionizations"),
        ({"test_ionization_polarity": "Negative Polarity"}, "negative ions", ""),
        ({"test_scan_function": "Selected Ion Detection"}, "Selected", "too few ions"),
        ({"point_count": np.array([2, 3, 500], dtype=np.int32)}, "points up to", "truncated"),
        ({"scan_index": np.array([0, 2, -7], dtype=np.int32)}, "points up to", "truncated"),
        ({"point_count": np.array([2, 3], dtype=np.int32)}, "2 point counts", ""),
        ({"mass_values": np.array([43.0], dtype=np.float32)}, "1 m/z, 6 intensities", ""),
        ({"mass_values": None}, "no mass_values", ""),
    ],
)
def test_a_file_that_cannot_be_used_says_why(tmp_path: Path, changes, found: str, hint: str) -> None:
    with pytest.raises(FormatError) as caught:
        read_run(write_andi(tmp_path / "bad.cdf", **changes))
    assert found in caught.value.found
    assert hint in caught.value.hint


def test_continuum_points_are_refused_even_when_the_file_says_centroid(tmp_path: Path) -> None:
    dense = [(40.0 + 0.05 * k, 10.0 + k % 7) for k in range(600)]
    with pytest.raises(FormatError, match="continuum"):
        read_run(write_andi(tmp_path / "a.cdf", [dense, dense, dense]))


def test_a_run_of_one_scan_points_to_the_command_for_spectra(tmp_path: Path) -> None:
    with pytest.raises(FormatError, match="ionwitness search"):
        read_run(write_andi(tmp_path / "a.cdf", [[(43.0, 100.0)]]))


def test_a_truncated_file_says_so(tmp_path: Path) -> None:
    whole = write_andi(tmp_path / "a.cdf").read_bytes()
    (tmp_path / "b.cdf").write_bytes(whole[: len(whole) - 12])
    with pytest.raises(FormatError, match="truncated"):
        read_run(tmp_path / "b.cdf")


def test_a_file_above_the_bound_is_not_read(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(andi, "MAX_FILE_BYTES", 100)
    with pytest.raises(InputError, match="at most 100"):
        read_run(write_andi(tmp_path / "a.cdf"))


def test_a_missing_file_and_a_text_file_are_refused(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="No such file"):
        read_run(tmp_path / "nothing.cdf")
    (tmp_path / "a.txt").write_text("43 100\n57 50\n")
    with pytest.raises(FormatError, match="ionwitness search"):
        read_run(tmp_path / "a.txt")
    assert not is_run(tmp_path / "a.txt")


@settings(max_examples=150)
@given(
    flips=st.lists(st.tuples(st.integers(0, 5000), st.integers(0, 255)), min_size=1, max_size=6),
    cut=st.integers(0, 400),
)
def test_a_damaged_andi_file_gives_a_run_or_one_of_our_errors(tmp_path: Path, flips, cut: int) -> None:
    data = bytearray(write_andi(tmp_path / "a.cdf").read_bytes())
    for place, value in flips:
        data[place % len(data)] = value
    path = tmp_path / "b.cdf"
    path.write_bytes(b"CDF\x01" + bytes(data[4 : max(8, len(data) - cut)]))
    try:
        run = read_run(path)
    except IonwitnessError:
        return
    assert (np.diff(run.time_s) > 0).all()


def test_an_mzml_run_gives_its_first_level_scans(tmp_path: Path) -> None:
    path = tmp_path / "a.mzML"
    path.write_text(mzml_text([*MZML, {"mz": [50.0], "intensity": [1.0], "minutes": 1.03, "level": 2}]))
    run = read_run(path)
    assert run.time_s.tolist() == pytest.approx([60.0, 60.6, 61.2])
    assert points(run, 1) == [(43.0, 200.0), (57.0, 80.0), (71.0, 20.0)]
    assert run.notes == ("1 scans of a higher level left out",)
    assert is_run(path)


def test_profile_scans_of_an_mzml_run_are_centroided_and_it_says_so(tmp_path: Path) -> None:
    mz = np.arange(42.0, 58.0, 0.1)
    shape = 100.0 * np.exp(-(((mz - 43.05) / 0.15) ** 2)) + 60.0 * np.exp(-(((mz - 57.02) / 0.15) ** 2))
    scan = {"mz": mz, "intensity": np.round(shape, 2), "profile": True}
    path = tmp_path / "a.mzML"
    path.write_text(mzml_text([{**scan, "minutes": 1.0 + 0.01 * k} for k in range(3)]))
    run = read_run(path)
    assert [mz for mz, _ in points(run, 0)] == pytest.approx([43.05, 57.02], abs=0.02)
    assert run.notes == ("3 profile scans centroided",)


def test_centroids_keep_the_summed_intensity() -> None:
    mz = np.arange(40.0, 50.0, 0.05)
    intensity = np.abs(np.sin(mz * 3.0)) * (mz > 41)
    assert centroid_scan(mz, intensity)[1].sum() == pytest.approx(intensity.sum())


@pytest.mark.parametrize(
    ("scans", "source_term", "found"),
    [
        (MZML, "electrospray ionization", "ESI"),
        ([{**scan, "terms": ["SIM spectrum"]} for scan in MZML], "electron ionization", "selected-ion"),
        ([{**scan, "terms": ["negative scan"]} for scan in MZML], "electron ionization", "negative ions"),
        ([{**scan, "level": 2} for scan in MZML], "electron ionization", "higher level"),
        ([], "electron ionization", "no first-level scan"),
    ],
)
def test_an_mzml_file_that_is_no_usable_run_says_why(tmp_path: Path, scans, source_term: str, found: str) -> None:
    path = tmp_path / "a.mzML"
    path.write_text(mzml_text(scans, source_term=source_term))
    with pytest.raises(FormatError, match=found):
        read_run(path)


def test_an_mzml_run_above_the_bound_is_not_read_to_its_end(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(mzml_run, "MAX_POINTS", 4)
    path = tmp_path / "a.mzML"
    path.write_text(mzml_text(MZML))
    with pytest.raises(FormatError, match="more than 4 points"):
        read_run(path)


@settings(max_examples=80)
@given(
    flips=st.lists(st.tuples(st.integers(0, 9000), st.integers(32, 126)), min_size=1, max_size=5),
    cut=st.integers(0, 900),
)
def test_a_damaged_mzml_file_gives_a_run_or_one_of_our_errors(tmp_path: Path, flips, cut: int) -> None:
    data = bytearray(mzml_text(MZML).encode())
    for place, value in flips:
        data[place % len(data)] = value
    path = tmp_path / "b.mzML"
    path.write_bytes(bytes(data[: max(60, len(data) - cut)]))
    try:
        read_run(path)
    except IonwitnessError:
        return
