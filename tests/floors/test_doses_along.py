"""Doses along an exposure against quadrature; the numbers of the treatment tables."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from scipy.integrate import quad

from gasphys import Exposure
from gasphys.doses import oxygen
from gasphys.errors import ExposureError, RangeError, UnknownNameError
from gasphys.schedules import names, treatment
from tests.floors.exposures import exposures

#: name, table minutes, duration, UPTD of oxygen periods, of the table, of the whole exposure.
#: Computed from the formula in the reference tables (33 fsw per atm, air O2 0.21, exponent 5/6), which
#: print 331.9 / 640.8 / 274.0 for oxygen periods and 333.1 / 644.4 / 717.1 / 274.0 for all segments.
TABLES = [
    ("usn_5", 135.0, 138.0, 331.86, 333.08, 333.18),
    ("usn_6", 285.0, 288.0, 640.79, 644.45, 644.54),
    ("usn_6a", 350.0, 358.25, 640.79, 717.12, 721.73),
    ("usn_9", 102.25, 104.5, 273.97, 273.97, 273.97),
]


@pytest.mark.parametrize(("name", "minutes", "duration", "periods", "table", "whole"), TABLES)
def test_treatment_tables(
    name: str, minutes: float, duration: float, periods: float, table: float, whole: float
) -> None:
    exposure = treatment(name)
    assert exposure.attrs["table_minutes"] == minutes
    assert exposure.duration == pytest.approx(duration, rel=1e-12)
    for count, expected in (("oxygen", periods), ("table", table), ("all", whole)):
        assert float(oxygen(exposure, ["uptd"], count=count).dose[0]) == pytest.approx(expected, abs=0.005)


@pytest.mark.parametrize(
    ("deep", "shallow", "minutes", "periods", "all_segments"),
    [
        (2, 0, 335.0, 784.4, 790.5),
        (2, 2, 485.0, None, None),
        (0, 2, 435.0, None, None),
        (1, 1, 385.0, None, None),
    ],
)
def test_extensions_of_table_6(
    deep: int, shallow: int, minutes: float, periods: float, all_segments: float
) -> None:
    exposure = treatment("usn_6", deep, shallow)
    assert exposure.attrs["table_minutes"] == minutes
    if periods is not None:
        assert float(oxygen(exposure, ["uptd"], count="oxygen").dose[0]) == pytest.approx(periods, abs=0.05)
        assert float(oxygen(exposure, ["uptd"], count="table").dose[0]) == pytest.approx(
            all_segments, abs=0.05
        )


def test_table_5_extensions_stand_before_the_last_ascent() -> None:
    exposure = treatment("usn_5", extensions_shallow=2)
    assert exposure.attrs["table_minutes"] == 175.0
    assert exposure.part[-3:] == ("oxygen", "oxygen", "travel on oxygen")


@pytest.mark.parametrize(
    ("name", "extensions", "minutes_at_stop"),
    # Oxygen minutes at the stop, plus the whole ascent: US Navy Diving Manual, Rev 4 Change A, p 21-26.
    [
        ("usn_5", 0, 0),
        ("usn_6", 0, 30),
        ("usn_6", 1, 30),
        ("usn_6", 2, 60),
        ("usn_6a", 0, 60),
        ("usn_6a", 2, 90),
        ("usn_9", 0, 15),
    ],
)
def test_attendant_oxygen(name: str, extensions: int, minutes_at_stop: float) -> None:
    exposure = treatment(name, extensions_deep=extensions, attendant=True)
    patient = treatment(name, extensions_deep=extensions)
    assert exposure.duration == pytest.approx(patient.duration)
    pure = exposure.fractions["O2"] == 1.0
    still = exposure.columns["start_pressure"] == exposure.columns["end_pressure"]
    minutes = exposure.columns["segment_duration"]
    assert minutes[pure & still].sum() == pytest.approx(minutes_at_stop)
    ascent = pure & ~still
    assert ascent.sum() == 1
    assert minutes[ascent][0] == patient.columns["segment_duration"][-1]


def test_descent_on_oxygen_adds_what_the_table_does_not_count() -> None:
    air, on_oxygen = treatment("usn_5"), treatment("usn_5", descent="oxygen")
    added = [float(oxygen(e, ["uptd"]).dose[0]) for e in (on_oxygen, air)]
    # 7.0 more with oxygen on the descent (from the reference table's assumptions line), less the air's 0.1.
    assert added[0] - added[1] == pytest.approx(7.0 - 0.1, abs=0.05)


def test_unknown_and_refused() -> None:
    with pytest.raises(UnknownNameError, match="nearest: 'usn_6'"):
        treatment("usn6")
    with pytest.raises(RangeError, match="allows 0 to 2"):
        treatment("usn_6", extensions_deep=3)
    with pytest.raises(RangeError, match="allows 0 to 0"):
        treatment("usn_9", extensions_shallow=1)
    with pytest.raises(RangeError, match="no oxygen rule"):
        treatment("clinical_2_4_atm", attendant=True)
    with pytest.raises(ExposureError, match="named parts"):
        oxygen(Exposure.start("air").stay(1), count="table")
    with pytest.raises(UnknownNameError, match="count"):
        oxygen(Exposure.start("air").stay(1), count="everything")
    with pytest.raises(UnknownNameError, match="measure"):
        oxygen(Exposure.start("air").stay(1), ["upt"])


def test_clinical_session_takes_two_hours() -> None:
    assert treatment("clinical_2_4_atm").duration == 120.0
    assert treatment("clinical_2_4_atm", surface_pressure=101.0).pressure == 101.0
    assert set(names()) >= {"usn_5", "usn_6", "usn_6a", "usn_9", "clinical_2_4_atm"}


@settings(max_examples=25, deadline=None)
@given(exposures())
def test_uptd_against_quadrature(exposure: Exposure) -> None:
    pieces = exposure.pieces()
    expected = 0.0
    for a, b, t in zip(pieces.start_po2, pieces.end_po2, pieces.duration, strict=True):

        def rate(s: float, a: float = a, b: float = b) -> float:
            return max((a + (b - a) * s) / 101.325 - 0.5, 0.0)

        knee = [] if a == b else [s for s in [(50.6625 - a) / (b - a)] if 0 < s < 1]
        whole = quad(
            lambda s: (rate(s) / 0.5) ** (5 / 6),
            0,
            1,
            points=knee or None,
            epsabs=1e-13,
            epsrel=1e-12,
            limit=400,
        )
        expected += t * whole[0]
    assert float(oxygen(exposure, ["uptd"]).dose[0]) == pytest.approx(expected, rel=1e-8, abs=1e-9)


@settings(max_examples=40, deadline=None)
@given(exposures())
def test_splitting_changes_no_dose(exposure: Exposure) -> None:
    cut = exposure._split(np.linspace(0.0, exposure.duration, 9)[1:-1])
    for measure in ("uptd", "noaa_cns", "noaa_cns_day"):
        one, other = (float(oxygen(e, [measure]).dose[0]) for e in (exposure, cut))
        assert one == pytest.approx(other, rel=1e-11, abs=1e-12, nan_ok=True)


def test_noaa_not_applicable_above_the_table_is_no_error() -> None:
    found = oxygen(treatment("usn_6"), ["uptd", "noaa_cns"])
    assert np.isnan(found.dose.sel(measure="noaa_cns"))
    assert found.status.values.tolist() == ["within", "not applicable"]
    assert "1.60 atm" in str(found.reason.sel(measure="noaa_cns").values)
