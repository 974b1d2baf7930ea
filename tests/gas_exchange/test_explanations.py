"""Every number of every result of gas exchange is evaluated again from what the result recorded."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import xarray as xr

import gasphys as gp
from gasphys import Exposure, Person, explain, gas_exchange

DIVE = Exposure.start("air").travel(depth=24, minutes=0.5).stay(0.4).travel(depth=0, minutes=0.5)
SESSION = (
    Exposure.start("oxygen").travel(pressure="2.4 atm", minutes=10).stay(20).loop(setpoint=130, diluent="air")
).stay(5)
SMOKE = Person(hemoglobin=14.1, cohb_fraction=0.31, assumed=("hemoglobin",))


def _results() -> dict[str, xr.Dataset]:
    with gp.validity("ignore"):
        ill = Person.from_sample(arterial_po2=25.9, fio2=0.6, arterial_pco2=6.4)
    return {
        "oxygenation": gas_exchange.oxygenation(SESSION, ill, "both", fico2=0.001, at=[4.0]),
        "oxygenation, smoke": gas_exchange.oxygenation(SESSION, SMOKE, "both", at=[4.0]),
        "carboxyhemoglobin": gas_exchange.carboxyhemoglobin(SESSION, SMOKE, [3.0] * 3, target=0.15, at=[4.0]),
        "breath_hold": gas_exchange.breath_hold(DIVE, at=[0.2, 1.3]),
        "breath_hold, smoke": gas_exchange.breath_hold(DIVE, Person(cohb_fraction=0.05), blood_volume=6.0),
    }


RESULTS = _results()

#: Views of the exposure itself: its dimensions are gases and pieces.
_OF_THE_EXPOSURE = ("gas", "inert_gas", "segment")


@pytest.mark.parametrize("which", list(RESULTS))
def test_every_variable_is_explained(which: str) -> None:
    ds, count = RESULTS[which], 0
    for name in ds.data_vars:
        one = ds[name]
        if one.dtype.kind not in "fi" or set(one.dims) & set(_OF_THE_EXPOSURE):
            continue
        cells: list[dict[str, Any]] = [{}]
        for dim in one.dims:
            cells = [{**cell, str(dim): label} for cell in cells for label in ds[dim].values[1:3]]
        for cell in cells:
            found = explain(ds, str(name), **cell)
            stored = float(one.sel(cell).values)
            assert found.stored == pytest.approx(stored, nan_ok=True)
            assert found.value == pytest.approx(stored, rel=1e-12, nan_ok=True), (name, cell)
            count += 1
    assert count > 20


def test_an_integral_is_run_again_not_read() -> None:
    """A number changed in the result shows: the value is not the stored one."""
    for which, name in (("carboxyhemoglobin", "cohb_fraction"), ("breath_hold", "o2_in_lung")):
        ds = RESULTS[which].copy(deep=True)
        ds[name].values[-1] *= 1.01
        found = explain(ds, name, time=float(ds.time[-1]))
        assert found.value == pytest.approx(found.stored / 1.01, rel=1e-9)


def test_the_chain_of_an_integral_is_that_of_its_rate() -> None:
    text = str(explain(RESULTS["carboxyhemoglobin"], "time_at_target", half_life_factor=0.7))
    assert "blood.cohb_rate" in text
    assert "blood.co_capillary_po2" in text
    assert "integrated again from the start" in text
    ds = RESULTS["breath_hold"]
    found = explain(ds, "begins", event="co2_transfer_reversed")
    assert found.given["co2_transfer_stpd there"] == pytest.approx(0.0, abs=1e-9)
    never = [e for e in ds.event.values if np.isnan(float(ds.begins.sel(event=e)))]
    assert never
    assert np.isnan(explain(ds, "begins", event=never[0]).value)


def test_a_flag_is_told_in_words() -> None:
    ds = gas_exchange.oxygenation(Exposure.start("air", pressure="0.2 atm").stay(1))
    assert "negative_alveolar_po2" in str(explain(ds, "gas_exchange_flag", time=0.0))


def test_one_scenario_of_several_is_run_again() -> None:
    pressure = xr.DataArray([150.0, 280.0], dims="run", coords={"run": ["a", "b"]}, attrs={"units": "kPa"})
    session = Exposure.start("oxygen").travel(pressure=pressure, minutes=5).stay(20)
    ds = gas_exchange.carboxyhemoglobin(session, SMOKE, target=0.25)
    for run in ("a", "b"):
        found = explain(ds, "cohb_fraction_high", time=25.0, run=run)
        assert found.value == pytest.approx(float(ds.cohb_fraction_high.sel(time=25.0, run=run)), rel=1e-12)
        found = explain(ds, "time_at_target", half_life_factor=1.0, run=run)
        assert found.value == pytest.approx(found.stored, rel=1e-12)


def test_a_saved_result_is_explained(tmp_path: Any) -> None:
    for which in ("carboxyhemoglobin", "breath_hold"):
        path = tmp_path / f"{which}.nc"
        RESULTS[which].to_netcdf(path, engine="h5netcdf")
        with xr.open_dataset(path, engine="h5netcdf", decode_timedelta=False) as back:
            ds = back.load()
        name = "cohb_fraction" if which == "carboxyhemoglobin" else "co2_in_blood"
        found = explain(ds, name, time=float(ds.time[-1]))
        assert found.value == found.stored
