"""Inert gas as a reviewed quantity: attendants, divers, who refuses, many scenarios, a site's model."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

import gasphys as gp
from gasphys import Exposure, review, tissues
from gasphys.errors import InputFileError, UnknownNameError
from gasphys.limits import load
from gasphys.report import Units, review_text
from gasphys.schedules import treatment

SHIPPED = {"tissue_us_navy_1957": "us_navy_1957", "tissue_buhlmann_1995_c": "buhlmann_1995_c"}
SITE = """
[[limit]]
id = "own"
title = "Own choice of a model"
quantity = "limit_fraction"
model = "{model}"
comparison = "<="
value = {value}
unit = "1"
authority = "this unit"
edition = "2042"
roles = ["attendant"]
conditions = "attendants"
provenance = "secondary"
source = "house rule"
"""


def _largest(exposure: Exposure, model: str) -> tuple[float, float]:
    times = np.linspace(0.0, float(exposure.duration), 4001)
    share = tissues.tensions(exposure, model, at=times).limit_fraction.max("compartment")
    return float(share.max()), float(share.time[int(share.argmax("time"))])


@pytest.mark.parametrize("table", ["usn_5", "usn_6", "usn_6a"])
def test_attendants_of_a_treatment(table: str) -> None:
    exposure = treatment(table, attendant=True)
    found = review(exposure, role="attendant")
    for name, model in SHIPPED.items():
        row = found.sel(limit=name)
        worst, when = _largest(exposure, model)
        assert float(row.worst) == pytest.approx(worst, rel=1e-9)
        assert float(row.time_of_worst) == pytest.approx(when, abs=0.1)
        assert str(row.status.values) == "within"
    # Without the oxygen at the end more is left on surfacing.
    air = treatment(table, attendant=True)
    nothing = {"O2": np.full(len(air.part), 0.21), "N2": np.full(len(air.part), 0.79)}
    from dataclasses import replace

    worse = review(replace(air, fractions=nothing), role="attendant")
    assert float(worse.worst.sel(limit="tissue_us_navy_1957")) > float(
        found.worst.sel(limit="tissue_us_navy_1957")
    )


def test_a_dive_beyond_and_when() -> None:
    dive = Exposure.start("air").travel(depth=40.0, rate=20.0).stay(20.0).travel(depth=0.0, rate=9.0)
    row = review(dive).sel(limit="tissue_buhlmann_1995_c")
    assert str(row.status.values) == "beyond"
    times = np.linspace(22.0, dive.duration, 20001)
    share = tissues.tensions(dive, at=times).limit_fraction.max("compartment")
    crossed = float(share.time[int(np.argmax(share.values > 1.0))])
    assert float(row.first_crossing) == pytest.approx(crossed, abs=1e-3)
    assert float(row.time_beyond) == pytest.approx(float(dive.duration) - crossed, abs=1e-3)
    text = review_text(dive, review(dive), load(), Units())
    assert "ZH-L16C" in text
    assert "model behind the US Navy air tables" in text


def test_a_stay_that_comes_back_within() -> None:
    dive = (
        Exposure.start("air").travel(depth=40.0, rate=20.0).stay(25.0).travel(depth=3.0, rate=18.0).stay(60.0)
    )
    row = review(dive).sel(limit="tissue_buhlmann_1995_c")
    times = np.linspace(27.0, dive.duration, 40001)
    ds = tissues.tensions(dive, at=times).limit_fraction.max("compartment").sel(time=slice(27.0, None))
    over = ds.values > 1.0
    minutes = float((np.diff(ds.time.values) * (0.5 * over[:-1] + 0.5 * over[1:])).sum())
    assert minutes > 3.0
    assert not over[-1]
    assert float(row.time_beyond) == pytest.approx(minutes, abs=5e-3)
    assert float(row.worst) == pytest.approx(float(ds.max()), rel=1e-6)


def test_who_refuses_and_whom_it_is_for() -> None:
    trimix = (
        Exposure.start("trimix 17/48").travel(depth=30.0, rate=20.0).stay(5.0).travel(depth=0.0, rate=9.0)
    )
    found = review(trimix)
    refused = found.sel(limit="tissue_us_navy_1957")
    assert str(refused.status.values) == "not judged"
    assert "helium" in str(refused.reason.values)
    assert str(found.status.sel(limit="tissue_buhlmann_1995_c").values) in ("within", "beyond")
    patient = review(treatment("usn_5"), role="patient").sel(limit="tissue_us_navy_1957")
    assert str(patient.status.values) == "not applicable"


def test_scenarios_are_their_single_runs() -> None:
    depth = xr.DataArray([20.0, 30.0, 40.0], dims="d", attrs={"units": "msw"})

    def dive(d: object) -> Exposure:
        return Exposure.start("air").travel(depth=d, rate=20.0).stay(30.0).travel(depth=0.0, rate=9.0)

    many = review(dive(depth)).sel(limit=list(SHIPPED))
    for k, one in enumerate(depth.values):
        single = review(dive(float(one))).sel(limit=list(SHIPPED))
        for name in ("worst", "time_of_worst", "first_crossing", "time_beyond"):
            np.testing.assert_allclose(
                many[name].isel(d=k), single[name], rtol=1e-9, atol=1e-12, equal_nan=True
            )
    assert many.status.values.tolist()[1] == ["within", "beyond", "beyond"]


def test_a_site_chooses_its_model(tmp_path: Path) -> None:
    file = tmp_path / "own.toml"
    file.write_text(SITE.format(model="rogers_powell_1994", value="0.8"))
    exposure = treatment("usn_5", attendant=True)
    row = review(exposure, role="attendant", limits=file).sel(limit="own")
    # Surfacing values only: the last instant is judged, and no other.
    end = tissues.tensions(exposure, "rogers_powell_1994").limit_fraction.isel(time=-1).max()
    assert float(row.worst) == pytest.approx(float(end), rel=1e-9)
    assert float(row.time_of_worst) in (0.0, pytest.approx(exposure.duration))
    told = gp.explain(review(exposure, role="attendant"), "worst", limit="tissue_us_navy_1957")
    assert told.value == pytest.approx(told.stored, rel=1e-9)
    assert any("m_value" in str(step) for step in told.steps)
    file.write_text(SITE.format(model="nobody", value="0.8"))
    with pytest.raises(UnknownNameError, match="tissue model 'nobody'"):
        review(exposure, role="attendant", limits=file)
    file.write_text(SITE.format(model="", value="0.8"))
    with pytest.raises(InputFileError, match="the limit of a tissue model"):
        review(exposure, role="attendant", limits=file)


def test_other_limits_name_no_model(tmp_path: Path) -> None:
    file = tmp_path / "own.toml"
    text = SITE.format(model="us_navy_1957", value="1.4").replace('"limit_fraction"', '"breathing_gas_po2"')
    file.write_text(text.replace('unit = "1"', 'unit = "atm"'))
    with pytest.raises(InputFileError, match="the limit of a tissue model"):
        load(file)
