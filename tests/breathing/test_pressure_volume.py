"""Measured loops: areas against closed forms, files refused with line and column, comparison with limits."""

from __future__ import annotations

import io

import numpy as np
import pytest
import xarray as xr

from gasphys import breathing
from gasphys.errors import InputFileError, RangeError, UnknownNameError


def rohrer_loop(ventilation=62.5, tidal=2.5, density=4.0, elastance=0.0, offset=0.0, samples=4000):
    turn = np.linspace(0.0, 2.0 * np.pi, samples, endpoint=False)
    flow = np.pi * ventilation * np.sin(turn)
    volume = tidal / 2.0 * (1.0 - np.cos(turn))
    pressure = offset - breathing.airway_pressure(flow, density) - elastance * volume
    return volume, pressure


def text(volume, pressure, unit="kPa", breath=None):
    head = f"volume_L,pressure_{unit}" + (",breath" if breath is not None else "")
    rows = [
        f"{v:.9g},{p:.9g}" + (f",{b}" if breath is not None else "")
        for v, p, b in zip(volume, pressure, breath if breath is not None else [0] * len(volume), strict=True)
    ]
    return io.StringIO("\n".join([head, *rows]) + "\n")


def test_area_is_the_closed_form_of_rohrer():
    found = breathing.external_work(breathing.read_pressure_volume(text(*rohrer_loop())))
    assert float(found.external_work[0]) == pytest.approx(breathing.resistive_work(62.5, 4.0), rel=1e-5)
    assert float(found.tidal_volume[0]) == pytest.approx(2.5, rel=1e-9)


@pytest.mark.parametrize("elastance", [0.0, 0.4, 0.9])
def test_elastance_does_no_net_work(elastance):
    ds = breathing.read_pressure_volume(text(*rohrer_loop(elastance=elastance)))
    found = breathing.external_work(ds)
    assert float(found.elastance[0]) == pytest.approx(elastance, abs=1e-5)
    assert float(found.external_work[0]) == pytest.approx(breathing.resistive_work(62.5, 4.0), rel=1e-5)


def test_an_ellipse_has_pi_over_four_of_its_box():
    turn = np.linspace(0.0, 2.0 * np.pi, 2000, endpoint=False)
    found = breathing.external_work(
        breathing.read_pressure_volume(text(1.0 - np.cos(turn), -1.3 * np.sin(turn)))
    )
    assert float(found.external_work[0]) == pytest.approx(np.pi / 4.0 * 2.6, rel=1e-5)


def test_a_rectangle_is_exact_and_its_positive_part_too():
    # 2 L at -0.5 kPa in, but for the first half liter at +0.2; back at +0.7.
    volume = [0.0, 0.25, 0.5, 0.5, 1.0, 1.5, 2.0, 2.0, 1.0, 0.0]
    pressure = [0.2, 0.2, 0.2, -0.5, -0.5, -0.5, -0.5, 0.7, 0.7, 0.7]
    found = breathing.external_work(breathing.read_pressure_volume(text(volume, pressure)))
    assert float(found.external_work[0]) == pytest.approx((-0.1 + 0.75 + 1.4) / 2.0, rel=1e-12)
    assert float(found.positive_inhalation_work[0]) == pytest.approx(0.05, rel=1e-12)
    assert float(found.lowest_mouth_pressure[0]) == -0.5
    assert float(found.highest_mouth_pressure[0]) == 0.7


def test_positive_part_of_a_slanted_line():
    # From -1 to +1 kPa over a liter in: the positive triangle is 0.25 J.
    volume = [0.0, 0.2, 0.4, 0.6, 0.8, 1.0, 1.0, 0.5, 0.0]
    pressure = [-1.0, -0.6, -0.2, 0.2, 0.6, 1.0, 3.0, 3.0, 3.0]
    found = breathing.external_work(breathing.read_pressure_volume(text(volume, pressure)))
    assert float(found.positive_inhalation_work[0]) == pytest.approx(0.25, rel=1e-12)


@pytest.mark.parametrize(("unit", "factor"), [("Pa", 1e3), ("mbar", 10.0), ("cmH2O", 1.0 / 0.0980665)])
def test_units_of_the_file_do_not_matter(unit, factor):
    volume, pressure = rohrer_loop(samples=200)
    plain = breathing.external_work(breathing.read_pressure_volume(text(volume, pressure)))
    other = breathing.external_work(breathing.read_pressure_volume(text(volume, pressure * factor, unit)))
    assert float(other.external_work[0]) == pytest.approx(float(plain.external_work[0]), rel=1e-7)


def test_breaths_are_kept_apart():
    one, two = rohrer_loop(samples=100), rohrer_loop(density=8.0, samples=100)
    both = [np.concatenate(pair) for pair in zip(one, two, strict=True)]
    ds = breathing.read_pressure_volume(text(*both, breath=[1] * 100 + [2] * 100))
    found = breathing.external_work(ds)
    assert found.breath.values.tolist() == [1, 2]
    expected = [breathing.resistive_work(62.5, d) for d in (4.0, 8.0)]
    assert found.external_work.values == pytest.approx(expected, rel=5e-3)


def test_a_loop_that_runs_backward_is_refused():
    volume, pressure = rohrer_loop(samples=100)
    with pytest.raises(RangeError, match=r"runs backward.*turn the sign"):
        breathing.external_work(breathing.read_pressure_volume(text(volume, -pressure)))


GOOD = "volume_L,pressure_kPa\n" + "\n".join(
    f"{1 - np.cos(a):.4f},{-np.sin(a):.4f}" for a in np.linspace(0, 2 * np.pi, 12, endpoint=False)
)


@pytest.mark.parametrize(
    ("content", "line", "column", "words"),
    [
        ("", None, None, "no data"),
        ("volume_L,pressure\n1,2\n", 1, 2, "pressure_kPa"),
        ("volume_L,volume_L,pressure_kPa\n", 1, 2, "given twice"),
        ("pressure_kPa\n1\n", 1, None, "no volume column"),
        ("volume_L,pressure_kPa,pressure_mbar\n", 1, None, "2 columns"),
        (GOOD.replace("\n1.0000,-1.0000", "\n1.0000,x"), 5, 2, "is not a number"),
        (GOOD.replace("\n1.0000,-1.0000", "\n1.0000,nan"), 5, 2, "is not a number"),
        (GOOD.replace("\n1.0000,-1.0000", "\n1.0000"), 5, 2, "1 cells where the header has 2"),
        (GOOD.replace("\n1.0000,-1.0000", "\n1.0000,-1,3"), 5, 3, "3 cells"),
        (GOOD.replace("\n1.0000,-1.0000", "\n1.0000,-1e6"), 5, 2, "outside the possible range"),
        ("# a comment\n\n" + GOOD.replace("\n1.0000,-1.0000", "\n1.0000,x"), 7, 2, "is not a number"),
        ("volume_L,pressure_kPa\n1,2\n2,3\n", 3, None, "needs 8"),
        ("volume_L,pressure_kPa\n" + "1,2\n" * 9, 10, None, "moves no volume"),
        ("volume_L,pressure_kPa\n" + "".join(f"{k / 9},0\n" for k in range(10)), 11, None, "does not close"),
        ("volume_L,pressure_kPa,breath\n1,2,1.5\n", 2, 3, "whole number"),
        ('volume_L,pressure_kPa\n"1,2\n', 2, None, "quotation mark"),
        ("volume_L,pressure_kPa\n", None, None, "no samples"),
    ],
)
def test_files_are_refused_with_line_and_column(content, line, column, words):
    with pytest.raises(InputFileError, match=words) as caught:
        breathing.read_pressure_volume(io.StringIO(content))
    assert (caught.value.line, caught.value.column) == (line, column)
    assert caught.value.remedy


def test_a_breath_in_two_parts_is_refused():
    volume, pressure = rohrer_loop(samples=20)
    with pytest.raises(InputFileError, match="two parts") as caught:
        breathing.read_pressure_volume(text(volume, pressure, breath=[1] * 8 + [2] * 4 + [1] * 8))
    assert caught.value.line == 14


def test_a_missing_file_and_another_encoding(tmp_path):
    with pytest.raises(InputFileError, match="cannot be read"):
        breathing.read_pressure_volume(tmp_path / "none.csv")
    path = tmp_path / "latin.csv"
    path.write_bytes("volume_L,pressure_kPa # é\n".encode("latin-1"))
    with pytest.raises(InputFileError, match="UTF-8"):
        breathing.read_pressure_volume(path)
    path.write_text("\ufeff" + GOOD, encoding="utf-8")
    assert breathing.read_pressure_volume(path).sizes["sample"] == 12


def measured(**values):
    return xr.Dataset({k: ("breath", np.atleast_1d(v)) for k, v in values.items()})


def test_limits_are_judged_where_they_were_made_for():
    found = breathing.compare_apparatus(
        measured(
            external_work=2.0,
            elastance=0.6,
            lowest_mouth_pressure=-2.0,
            highest_mouth_pressure=2.6,
            positive_inhalation_work=0.1,
        ),
        depth_msw=49.8675,
        ventilation_btps=62.5,
        static_lung_load=0.3,
    )
    status = dict(zip(found.limit.values.tolist(), found.status.values.tolist(), strict=True))
    assert status == {
        "warkander_2007_work": "beyond",  # 1.692 at 49.9 msw
        "warkander_2007_elastance": "within",
        "warkander_2007_load_vertical_low": "beyond",
        "warkander_2007_load_vertical_high": "within",
        "warkander_2007_load_horizontal_low": "not applicable",
        "warkander_2007_load_horizontal_high": "not applicable",
        "warkander_1992_work_low": "beyond",
        "warkander_1992_work_high": "within",
        "en250_work": "within",
        "en250_inhalation_pressure": "within",
        "en250_exhalation_pressure": "beyond",
        "en250_positive_inhalation_work": "within",
        "morrison_reimers_preferred": "beyond",  # 1.75
        "morrison_reimers_maximum": "within",
        "nedu_goal_open_circuit": "beyond",
        "nedu_goal_surface_supplied": "beyond",
        "nedu_goal_closed_circuit": "not applicable",
    }
    row = found.sel(limit="warkander_2007_work")
    assert float(row.limit_value) == pytest.approx(2.49 - 0.016 * 49.8675, rel=1e-12)
    assert float(row.margin) == pytest.approx(float(row.limit_value) - 2.0, rel=1e-12)
    assert "made for ventilation" in str(found.reason.sel(limit="nedu_goal_closed_circuit").values)


def test_the_mean_of_breaths_and_what_was_not_measured():
    found = breathing.compare_apparatus(
        measured(external_work=[1.0, 2.0]), depth_msw=10.0, ventilation_btps=40.0
    )
    assert float(found.value.sel(limit="warkander_2007_work")) == 1.5
    assert str(found.status.sel(limit="warkander_2007_elastance").values) == "not judged"
    assert "made for pressure" not in str(found.reason.sel(limit="warkander_2007_elastance").values)


@pytest.mark.parametrize(("depth", "word"), [(58.0, "57"), (80.0, "not extrapolated")])
def test_warkander_does_not_speak_of_greater_depths(depth, word):
    found = breathing.compare_apparatus(measured(external_work=1.0), depth_msw=depth, ventilation_btps=40.0)
    row = found.sel(limit="warkander_2007_work")
    assert str(row.status.values) == "not applicable"
    assert word in str(row.reason.values)


def test_impossible_conditions_are_refused():
    with pytest.raises(UnknownNameError, match="vertical"):
        breathing.compare_apparatus(
            measured(external_work=1.0), depth_msw=1.0, ventilation_btps=40.0, posture="up"
        )
    with pytest.raises(RangeError, match="ventilation_btps"):
        breathing.compare_apparatus(measured(external_work=1.0), depth_msw=1.0, ventilation_btps=-1.0)
