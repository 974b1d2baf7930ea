"""Limits of doses, narcosis and carbon dioxide in a review."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from gasphys import Exposure, Gas, doses, review, validity
from gasphys.errors import InputFileError, RangeError, ValidityError
from gasphys.explanation import explain
from gasphys.limits import load
from gasphys.reviews import levers
from gasphys.schedules import treatment

ATM = 101.325
LIMITS = {x.id: x for x in load()}
PER_DAY = [name for name, x in LIMITS.items() if x.per_day]


def test_limits_of_a_day_are_named() -> None:
    assert PER_DAY == [
        "noaa_cns_day",
        "uptd_day_one",
        "pulmonary_index_2_days",
        "pulmonary_index_5_days",
        "pulmonary_index_every_day",
    ]


@pytest.mark.parametrize("name", PER_DAY)
def test_an_allowance_of_a_day_is_not_judged_on_longer_exposures(name: str) -> None:
    """850 UPTD is the allowance of the first day (Hamilton 1988); two days of 500 are not beyond it."""
    day = Exposure.start("oxygen", pressure=130.0).stay(300)
    short = day.then(1440 - 300, pressure=ATM)
    row = review(short, limits=[LIMITS[name]]).isel(limit=0)
    assert str(row.status.values) in ("beyond", "within")
    longer = short.then(300, "oxygen", pressure=130.0)
    row = review(longer, limits=[LIMITS[name]]).isel(limit=0)
    assert str(row.status.values) == "not judged"
    assert str(row.reason.values) == "the limit is for a day and the exposure is longer"
    assert np.isnan(row.worst)
    told = explain(review(longer, limits=[LIMITS[name]]), "worst", limit=name)
    assert "for a day" in next(iter(told.given))
    patient = review(longer, limits=[LIMITS[name]], role="patient").isel(limit=0)
    assert str(patient.status.values) == "not applicable"


def test_a_dose_without_a_day_is_judged_however_long() -> None:
    """CPTD 615: median loss of vital capacity 2 %, whatever the days (Clark & Lambertsen 1971)."""
    days = Exposure.start("oxygen").stay(400).then(2000, "air").then(400, "oxygen", pressure=ATM)
    row = review(days, limits=[LIMITS["uptd_2_percent"]]).isel(limit=0)
    assert str(row.status.values) == "beyond"
    assert float(row.worst) == pytest.approx(800.0)
    assert float(row.first_crossing) == pytest.approx(2400.0 + 215.0)


@pytest.mark.parametrize("depth", [10.0, 30.0, 50.0, 70.0, 90.0])
def test_bands_of_nitrogen_begin_where_the_table_says(depth: float) -> None:
    """Clark 2015, table 1: 0.79 of an atmosphere for 10 msw; 3.16 atm at 30 msw."""
    names = [n for n in LIMITS if n.startswith("nitrogen_")]
    atmospheres = (depth / 10.0 + 1.0) * ATM
    at = Exposure.start("air", pressure=atmospheres).stay(1)
    deeper = Exposure.start("air", pressure=atmospheres * 1.004).stay(1)
    beyond = [
        int((review(x, limits=[LIMITS[n] for n in names]).status.values == "beyond").sum())
        for x in (at, deeper)
    ]
    band = [10.0, 30.0, 50.0, 70.0, 90.0].index(depth)
    assert beyond == [band, band + 1]


def test_nitrogen_of_a_mixture_and_of_a_loop() -> None:
    limit = LIMITS["nitrogen_slow"]
    dive = Exposure.start("trimix 18/45").travel(depth=60, minutes=3).stay(5)
    found = review(dive, limits=[limit])
    assert float(found.worst[0]) == pytest.approx((101.325 + 600.0) * 0.37)
    argon = Gas(oxygen=0.2, argon=0.8)
    assert float(review(Exposure.start(argon).stay(1), limits=[limit]).worst[0]) == pytest.approx(0.8 * ATM)
    loop = Exposure.start("air").loop(130.0, "trimix 17/48").travel(depth=40, minutes=4).stay(5)
    found = review(loop, limits=[limit])
    assert float(found.worst[0]) == pytest.approx((101.325 + 400.0 - 130.0) * 0.35 / 0.83)
    for ds in (found, review(dive, limits=[limit])):
        told = explain(ds, "worst", limit="nitrogen_slow")
        assert told.value == pytest.approx(told.stored, rel=1e-12)
    deep = Exposure.start("air").travel(depth=45, minutes=3).stay(5)
    (lever,) = levers(deep, limit)
    assert lever.gas is not None
    instead = Exposure.start(lever.gas).travel(depth=45, minutes=3).stay(5)
    assert lever.gas.startswith("trimix 21/")
    assert review(instead, limits=[limit]).status.values == ["within"]
    assert lever.pressure == pytest.approx(3.16 * ATM / 0.79 - (ATM + 450.0), rel=1e-9)


def test_oxygen_fraction_open_and_on_a_loop() -> None:
    """The lesser of 40 % O2 and 1.40 atm (29 CFR 1910 subpart T appendix C)."""
    limit = LIMITS["o2_fraction_osha"]
    for gas, status in (("nitrox 40", "within"), ("nitrox 41", "beyond")):
        assert review(Exposure.start(gas).stay(1), limits=[limit]).status.values == [status]
    assert review(treatment("usn_6"), limits=[limit], role="patient").status.values == ["not applicable"]
    # 130 kPa is 40 % of 325 kPa; coming up it is passed there, not where a straight line would say.
    up = Exposure.start("air", pressure=500.0).loop(130.0, "air").travel(pressure=250.0, minutes=10)
    row = review(up, limits=[limit]).isel(limit=0)
    assert float(row.first_crossing) == pytest.approx(10.0 * (500.0 - 325.0) / 250.0, rel=1e-9)
    told = explain(review(up, limits=[limit]), "worst", limit="o2_fraction_osha")
    assert told.value == pytest.approx(told.stored, rel=1e-12)


def test_carbon_dioxide_against_every_authority() -> None:
    """0.5 % at 4 atm is 2 % surface equivalent: beyond 0.5, 0.7 and 0.8 %, within 2, 2.5 and 4 %."""
    gas = Gas(oxygen=0.21, carbon_dioxide=0.00499)
    found = review(Exposure.start(gas, pressure=4.0 * ATM).stay(60))
    co2 = {
        str(n): str(found.status.sel(limit=n).values) for n in found.limit.values if str(n).startswith("co2_")
    }
    assert co2 == {
        "co2_usn_saturation": "beyond",
        "co2_usn_4_hours": "within",
        "co2_osha": "beyond",
        "co2_nasa": "beyond",
        "co2_rest": "within",
        "co2_nrc_1_hour": "within",
        "co2_nrc_24_hours": "within",
        "co2_nrc_90_days": "beyond",
    }


OUT_OF_RANGE = {
    "noaa_cns_single": (lambda: doses.noaa_cns_fraction("1.7 atm", 10.0), 1.7, "1.60 atm"),
    "noaa_cns_day": (lambda: doses.noaa_cns_fraction("1.7 atm", 10.0, total="day"), 1.7, "1.60 atm"),
    "usn_closed_circuit_o2": (lambda: doses.usn_closed_circuit_o2_limit("60 fsw"), 1 + 60 / 33, "50 fsw"),
    "pulmonary_index_2_days": (lambda: doses.arieli_pulmonary_index("0.5 atm", 10.0), 0.5, "0.99 atm"),
}


@pytest.mark.parametrize("name", OUT_OF_RANGE)
def test_out_of_range_raises_alone_and_is_not_applicable_inside(name: str) -> None:
    alone, atmospheres, words = OUT_OF_RANGE[name]
    with validity("raise"), pytest.raises((RangeError, ValidityError)):
        alone()
    gas = "oxygen" if atmospheres >= 1.0 else Gas(oxygen=atmospheres)
    exposure = Exposure.start(gas, pressure=max(atmospheres, 1.0) * ATM).stay(10)
    found = review(exposure)
    row = found.sel(limit=name)
    assert str(row.status.values) == "not applicable"
    assert words in str(row.reason.values)
    assert np.isnan(row.worst)
    # The others go on.
    assert str(found.status.sel(limit="uptd_2_percent").values) == "within"
    assert np.isfinite(found.worst.sel(limit="po2_usn_hypoxia"))


def test_a_sites_own_allowance_for_a_day(tmp_path: Path) -> None:
    text = """[[limit]]
id = "house_day"
title = "Oxygen of a day"
quantity = "uptd"
comparison = "<="
value = 500
unit = "1"
authority = "the unit"
edition = "1"
roles = ["patient"]
conditions = "a day"
provenance = "read"
source = "the unit"
per_day = true
"""
    path = tmp_path / "house.toml"
    path.write_text(text)
    long = Exposure.start("oxygen").stay(1441)
    assert review(long, role="patient", limits=[path]).status.values == ["not judged"]
    path.write_text(text.replace("per_day = true", "per_day = false"))
    assert review(long, role="patient", limits=[path]).status.values == ["beyond"]
    path.write_text(text.replace("per_day = true", "per_day = 1"))
    with pytest.raises(InputFileError, match="per_day = 1 is of the wrong kind") as caught:
        load(path)
    assert caught.value.line == 14
    path.write_text(text.replace("per_day = true", "perday = true"))
    with pytest.raises(InputFileError, match="nearest: 'per_day'"):
        load(path)
