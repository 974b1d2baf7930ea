"""What an exposure, a gas and a limits file refuse, each with the words that tell what to write."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
import xarray as xr

from gasphys import Exposure, Gas, review
from gasphys.errors import (
    ExposureError,
    GasphysError,
    InputFileError,
    RangeError,
    UnitError,
    UnknownNameError,
    ValidityWarning,
)
from gasphys.gas import gas_fractions
from gasphys.limits import Limit, load


def _row(values: list[float], dim: str = "draw", units: str | None = "min") -> xr.DataArray:
    labels = {dim: list(range(len(values)))}
    return xr.DataArray(values, dims=dim, coords=labels, attrs={} if units is None else {"units": units})


def _gas(**shares: float) -> xr.DataArray:
    return xr.DataArray(list(shares.values()), dims="gas", coords={"gas": list(shares)}, attrs={"units": "1"})


@pytest.fixture
def square() -> Exposure:
    return Exposure.start("air").travel(depth=18, minutes=2).stay(30)


@pytest.fixture
def several(square: Exposure) -> Exposure:
    return square.stay(_row([5.0, 10.0]))


def test_one_of_several_is_not_chosen_silently(several: Exposure) -> None:
    rates = several.travel(depth=0, rate=_row([9.0, 18.0]))
    with pytest.raises(ExposureError, match="lies in another piece in another scenario; pick one"):
        rates.delay(3, at=38.0)
    with pytest.raises(ExposureError, match="one time for all scenarios"):
        several.delay(3, at=_row([1.0, 2.0]))
    with pytest.raises(ExposureError, match="boundaries differ between scenarios"):
        several.to_dataset(at=[1.0])
    with pytest.raises(ExposureError, match="several scenarios has no one text"):
        several.as_text()
    assert repr(several) == "<Exposure of 3 pieces over draw: 2>"


def test_a_delay_of_several_lengths_is_each_delay(square: Exposure, several: Exposure) -> None:
    lengths = _row([3.0, 4.0])
    for at in (0.0, 1.0, 2.0, 20.0, 32.0):
        for draw, minutes in enumerate(lengths.values):
            delayed = several.delay(lengths, at=at).segment_view().isel(draw=draw)
            alone = several.delay(float(minutes), at=at).segment_view().isel(draw=draw)
            by_hand = square.stay([5.0, 10.0][draw]).delay(float(minutes), at=at).segment_view()
            for name in ("segment_duration", "start_pressure", "end_pressure"):
                np.testing.assert_array_equal(delayed[name], alone[name])
                np.testing.assert_array_equal(delayed[name], by_hand[name])


def test_a_picked_scenario_is_its_single_run() -> None:
    depths, times = _row([18.0, 30.0], "depth_of", "msw"), _row([5.0, 10.0, 20.0], "stay_of")
    gases = xr.concat([_gas(O2=0.21, N2=0.79), _gas(O2=0.32, N2=0.68)], dim="depth_of")
    gases = gases.assign_coords(depth_of=depths.depth_of).assign_attrs(units="1")

    def dive(depth, minutes, gas):
        return (
            Exposure.start("air").switch(gas).travel(depth=depth, minutes=2).stay(minutes).loop(130.0, "air")
        )

    whole = dive(depths, times, gases)
    each = whole.scenarios()
    assert len(each) == 6
    for k, (i, j) in enumerate(np.ndindex(2, 3)):
        alone = dive(float(depths[i]), float(times[j]), ["air", "nitrox 32"][i]).stay(1)
        for picked in (whole.pick(depth_of=i, stay_of=j), whole.pick(stay_of=j).pick(depth_of=i), each[k]):
            xr.testing.assert_allclose(picked.stay(1).segment_view(), alone.segment_view(), rtol=1e-15)
    assert whole.pick(depth_of=1).dims == ("stay_of",)
    with pytest.raises(ExposureError, match="no dimension 'draw'; there are: depth_of, stay_of"):
        whole.pick(draw=0)
    with pytest.raises(ExposureError, match="no label 7; it has 0, 1"):
        whole.pick(depth_of=7)


def test_nothing_to_tell_before_the_first_piece() -> None:
    for ask in (Exposure.to_dataset, Exposure.segment_view, review):
        with pytest.raises(ExposureError, match="no piece yet"):
            ask(Exposure.start("air"))


def test_surface_pressures_of_several_come_back() -> None:
    surface = _row([101.325, 85.0], units="kPa")
    there = Exposure.start("air", surface_pressure=surface).travel(depth=10, minutes=1)
    back = Exposure.from_dataset(there.to_dataset())
    np.testing.assert_array_equal(np.ravel(back.surface_pressure), [101.325, 85.0])


@pytest.mark.parametrize(
    ("change", "error", "message"),
    [
        (lambda ds: ds.drop_vars("end_pressure"), ExposureError, "no variable end_pressure"),
        (lambda ds: _without_units(ds, "start_pressure"), UnitError, "start_pressure has no units"),
        (lambda ds: _scaled(ds, "segment_duration", -1.0), ExposureError, "negative or unknown duration"),
        (lambda ds: _scaled(ds, "start_pressure", np.nan), RangeError, "start_pressure"),
        (lambda ds: _scaled(ds, "end_pressure", 1e4), RangeError, "end_pressure"),
        (lambda ds: _scaled(ds, "gas_fraction", 1.01), ExposureError, "do not sum to 1 within 1e-6"),
    ],
)
def test_a_dataset_that_is_no_exposure(square: Exposure, change, error, message) -> None:
    with pytest.raises(error, match=message):
        Exposure.from_dataset(change(square.to_dataset()))


def _without_units(ds: xr.Dataset, name: str) -> xr.Dataset:
    ds = ds.copy(deep=True)
    del ds[name].attrs["units"]
    return ds


def _scaled(ds: xr.Dataset, name: str, factor: float) -> xr.Dataset:
    return ds.assign({name: (ds[name].dims, ds[name].values * factor, ds[name].attrs)})


@pytest.mark.parametrize(
    ("call", "error", "message"),
    [
        (lambda x: x.stay(True), TypeError, "must be a number, not a truth value"),
        (lambda x: x.stay(_row([1.0, 2.0]).assign_coords(draw=[7, 8])), ExposureError, "other labels"),
        (lambda x: x.stay(_row([1.0, 2.0], "time")), ExposureError, "dimension of the exposure itself"),
        (lambda x: x.switch(_row([0.2, 0.8], "part_of")), UnitError, "needs the dimension gas"),
        (lambda x: x.switch(_gas(O2=0.5, Xe=0.5)), UnknownNameError, "Xe"),
        (lambda x: x.switch(_gas(O2=0.5, N2=0.4)), GasphysError, "sum to 1"),
        (lambda x: x.travel(depth=10, minutes=0), ExposureError, "change of pressure needs time"),
        (lambda x: x.travel(pressure=1e6, minutes=5), RangeError, "ambient_pressure"),
    ],
)
def test_a_step_that_has_no_meaning(several: Exposure, call, error, message) -> None:
    with pytest.raises(error, match=message):
        call(several)


def test_staying_for_no_time_changes_nothing(square: Exposure) -> None:
    assert square.travel(depth=18, minutes=0).duration == square.duration
    assert square.delay(0.0, at=5.0).duration == square.duration


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: Gas.parse(0.21), "not float"),
        (lambda: Gas.dry_air("cipm_2070"), "nearest: 'cipm_2007'"),
        (lambda: Gas.parse("air").fraction("02"), "nearest: 'O2'"),
        (lambda: Gas(oxygen="0.21 kPa"), "kPa"),
        (lambda: Gas(oxygen=True), "oxygen"),
        (lambda: Gas(oxygen=1.2), "oxygen"),
        (lambda: Gas(oxygen=0.5, helium=0.6), "sum"),
    ],
)
def test_what_is_no_gas(call, message: str) -> None:
    with pytest.raises((GasphysError, TypeError), match=message):
        call()


def test_mixtures_that_do_not_sum_to_one() -> None:
    """One raises; of several the wrong one is nan and said; of lazy ones it is nan once computed."""
    two = xr.concat([_gas(O2=0.3, N2=0.7), _gas(O2=0.3, N2=0.6)], dim="mix")
    two.attrs["units"] = "1"
    with pytest.raises(RangeError, match=r"along dimension gas sum to 0\.9, not 1"):
        gas_fractions(two[1])
    with pytest.warns(ValidityWarning, match="1 of 2 mixtures"):
        eager = gas_fractions(two)["oxygen"]
    lazy = gas_fractions(two.chunk(mix=1))["oxygen"]
    assert lazy.chunks is not None
    np.testing.assert_array_equal(eager, [0.3, np.nan])
    np.testing.assert_array_equal(lazy.compute(), eager)


def test_percent_along_the_dimension_gas() -> None:
    mix = _gas(O2=30.0, N2=70.0)
    mix.attrs["units"] = "%"
    spread = gas_fractions(mix)
    assert spread["oxygen"].attrs["units"] == "%"
    assert spread["helium"] == 0.0


@pytest.mark.parametrize("gas", [0.3, ["O2"], xr.DataArray([1.0], dims="x"), None])
def test_what_is_no_mixture(gas) -> None:
    with pytest.raises(UnitError, match="a gas is a Gas, a name such as 'nitrox 32'"):
        gas_fractions(gas)
    with pytest.raises(UnknownNameError, match="Xe"):
        gas_fractions(_gas(O2=0.5, Xe=0.5))


LIMIT = """
[[limit]]
id = "unit_po2"
title = "PO2 of the unit"
quantity = "breathing_gas_po2"
comparison = "<="
value = 2.6
unit = "atm"
authority = "the unit"
edition = "2042"
roles = ["patient"]
conditions = "dry"
provenance = "read"
source = "house rule"
"""


def test_limits_come_as_file_as_name_and_as_themselves(tmp_path) -> None:
    path = tmp_path / "unit.toml"
    path.write_text(LIMIT, encoding="utf-8")
    (own,) = load([path])
    assert load(own) == (own,)
    mixed = load(["default", path, dataclasses.replace(own, id="again")])
    assert [x.id for x in mixed if x.site] == ["unit_po2", "again"]
    assert mixed[0].site
    assert not mixed[-1].site


@pytest.mark.parametrize(
    ("old", "new", "line", "message"),
    [
        ("[[limit]]", "note = 1\n[[limit]]", 2, r"only \[\[limit\]\] tables are read, found 'note'"),
        ("[[limit]]", "[limit]", None, r"no \[\[limit\]\] table"),
        ("read", "heard", 13, "unknown provenance 'heard'"),
        ('unit = "atm"', 'unit = "msw"', 8, "depth"),
        ("2.6", "-2.6", 7, "breathing_gas_po2"),
        ("2.6", "true", 7, "wrong kind"),
        ("patient", "guest", 11, "unknown role 'guest'"),
        ('"<="', '"<"', 6, "comparison '<'"),
        ("breathing_gas_po2", "breathing_gas_p02", 5, "nearest: 'breathing_gas_po2'"),
        ('edition = "2042"\n', "", 2, "no edition"),
        ("edition", "editions", 10, "nearest: 'edition'"),
    ],
)
def test_a_limits_file_with_an_error(tmp_path, old, new, line, message) -> None:
    path = tmp_path / "unit.toml"
    path.write_text(LIMIT.replace(old, new, 1), encoding="utf-8")
    with pytest.raises(InputFileError, match=message) as caught:
        load(path)
    assert caught.value.line == line


def test_two_limits_of_one_id(tmp_path) -> None:
    path = tmp_path / "unit.toml"
    path.write_text(LIMIT * 2, encoding="utf-8")
    with pytest.raises(UnknownNameError, match="'unit_po2' is given twice"):
        load(path)
    assert isinstance(load("default")[0], Limit)
