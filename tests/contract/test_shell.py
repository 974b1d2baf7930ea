"""The shell and the decorators by equations made up for it: what no real equation happens to need."""

from __future__ import annotations

import math
import pickle
from typing import Any

import cloudpickle
import dask
import numpy as np
import pytest
import xarray as xr

import gasphys as gp
from gasphys.constants import ATMOSPHERE
from gasphys.equation import formula, inverse
from gasphys.errors import NotReachableError, NotTraceable, UnknownNameError, ValidityWarning
from gasphys.maths import exp, maximum, sqrt

MADE_UP = {"source": "common_practice", "provenance": "read", "register": False}


def _made_up(body: Any, **more: Any) -> Any:
    if body.__name__ == "<lambda>":
        body.__name__ = "made_up"
    return formula(**{"result": "final_volume"} | MADE_UP | more)(body)


def test_an_argument_that_the_body_ignores_still_broadcasts() -> None:
    def ignores(volume: Any, initial_pressure: Any) -> Any:
        return volume * 1.0

    f = _made_up(ignores)
    result = f(2.0, np.array([100.0, 200.0, 300.0]))
    assert result.tolist() == [2.0, 2.0, 2.0]
    result[0] = 5.0
    assert result[1] == 2.0
    assert f(np.array([[1.0], [2.0]]), np.full(3, 100.0)).shape == (2, 3)
    assert f(2.0, 100.0) == 2.0


def test_a_constant_body_gives_a_number_or_an_array() -> None:
    def constant(volume: Any) -> Any:
        return ATMOSPHERE * 2.0

    f = _made_up(constant)
    assert f(1.0) == 202.65
    assert f(np.ones(2)).tolist() == [202.65, 202.65]
    assert str(f.symbolic()) == "2.0*ATMOSPHERE"


@pytest.mark.parametrize("given", [-4.0, -4, np.float64(-4.0), "-4"])
def test_what_has_no_real_value_is_nan_and_never_complex(given: Any) -> None:
    def fraction_of_a_negative(temperature: Any) -> Any:
        return temperature**0.5

    f = _made_up(fraction_of_a_negative)
    assert type(f(given)) is float
    assert math.isnan(f(given))
    assert np.isnan(f(np.array([-4.0, 4.0]))).tolist() == [True, False]
    assert f(4.0) == 2.0


def test_overflow_and_division_by_zero_answer_as_arrays_do() -> None:
    def grows(temperature: Any) -> Any:
        return exp(temperature * 10.0) / (temperature - 100.0)

    f = _made_up(grows)
    assert f(100.0) == np.inf
    assert f(300.0) == np.inf
    assert f(np.array([300.0])).tolist() == [np.inf]
    assert math.isnan(_made_up(lambda temperature: sqrt(temperature))(-1.0))


@pytest.mark.parametrize(
    "body",
    [
        lambda volume: np.sin(volume),
        lambda volume: math.floor(volume),
        lambda volume: abs(volume),
        lambda volume: float(volume),
        lambda volume: undefined(volume),  # noqa: F821
    ],
)
def test_a_body_that_cannot_be_traced_is_refused_when_it_is_defined(body: Any) -> None:
    with pytest.raises(NotTraceable, match="a body may use"):
        _made_up(body)


def test_unknown_quantity_or_source_is_refused_when_it_is_defined() -> None:
    with pytest.raises(UnknownNameError, match="quantity"):
        _made_up(lambda nonsense: nonsense * 1.0)
    with pytest.raises(UnknownNameError, match="quantity"):
        _made_up(lambda volume: volume * 1.0, result="nonsense")
    with pytest.raises(UnknownNameError, match="source"):
        _made_up(lambda volume: volume * 1.0, source="nonsense")


@formula(result="final_volume", source="common_practice", provenance="memory_low", register=False)
def _weak(volume: Any) -> Any:
    """The volume, by a weak source."""
    return volume * 1.0


def _on_a_weak_one(volume: Any) -> Any:
    return _weak(volume) * 2.0


def test_the_weakest_word_wins() -> None:
    f = _made_up(_on_a_weak_one)
    assert f.provenance == "memory_low"
    assert f(3.0) == 6.0


def test_a_body_that_closes_over_local_names_is_refused() -> None:
    local = _weak

    def closes(volume: Any) -> Any:
        return local(volume)

    with pytest.raises(NotTraceable, match="local"):
        _made_up(closes)


def test_inverse_without_a_kernel_is_found_and_says_what_it_reaches() -> None:
    def bend(temperature: Any) -> Any:
        return maximum(temperature, 0.0) ** 2

    forward = _made_up(bend)
    # The name of an inverse is only shown; it need not exist in the module.
    root = inverse(
        forward, "temperature", name="bend_back", module=__name__, doc="Turned round.", register=False
    )
    assert root(400.0) == pytest.approx(20.0, rel=1e-14)
    np.testing.assert_allclose(root(np.array([1.0, 400.0])), [1.0, 20.0], rtol=1e-14)
    with pytest.raises(NotReachableError, match="temperature"):
        root(1e9)
    with pytest.warns(ValidityWarning, match="not reached"):
        assert np.isnan(root(np.array([1e9, 1.0]))).tolist() == [True, False]
    assert root.derivative("final_volume")(400.0) == pytest.approx(1.0 / 40.0)


def test_lazy_results_of_two_equations_do_not_mix() -> None:
    """Two members of a choice have one name; in one task graph they must stay apart."""
    x = xr.DataArray(np.full(4, 20.0), dims="x", attrs={"units": "10 kPa"}).chunk(x=2)
    y = xr.DataArray(np.full(4, 20.0), dims="x", attrs={"units": "m"}).chunk(x=2)
    fsw = xr.DataArray(np.full(4, 20.0), dims="x", attrs={"units": "fsw"}).chunk(x=2)
    depths = {"msw": x, "fresh": y, "en13319": y, "unesco_1983": y, "fsw": fsw, "fsw_33_08_per_atm": fsw}
    lazy = [gp.surroundings.pressure_at_depth(d, water=w).reset_coords(drop=True) for w, d in depths.items()]
    together = xr.concat(lazy, "water").compute(scheduler="synchronous")
    eager = [gp.surroundings.pressure_at_depth(20.0, water=w) for w in depths]
    np.testing.assert_allclose(together.values, np.array(eager)[:, None] * np.ones(4), rtol=1e-12)


def test_lazy_results_travel_to_another_process() -> None:
    x = xr.DataArray(np.linspace(1.0, 60.0, 4), dims="x", attrs={"units": "kPa"}).chunk(x=2)
    lazy = gp.blood.o2_content(x)
    again = cloudpickle.loads(cloudpickle.dumps(lazy)).compute(scheduler="synchronous")
    np.testing.assert_allclose(again.values, gp.blood.o2_content(x.values), rtol=1e-12)


def test_flags_of_two_lazy_inputs_do_not_force_a_computation() -> None:
    def never(*_: Any, **__: Any) -> Any:
        raise AssertionError("computed too early")

    with dask.config.set(scheduler=never):
        p = xr.DataArray(np.array([200.0, 300.0]), dims="x", attrs={"units": "kPa"}).chunk(x=1)
        moist = gp.lungs.inspired_po2(p, 0.21)
        alveolar = gp.lungs.alveolar_po2(p, 0.21, 5.3)
        both = gp.laws.boyle_volume(1.0, moist, alveolar)
    assert both.chunks is not None
    assert {"inspired_po2_flag", "alveolar_po2_flag", "final_volume_flag"} <= set(both.coords)


@pytest.mark.parametrize(
    "name", ["lungs.alveolar_po2", "blood.o2_content", "surroundings.altitude_at_pressure"]
)
def test_equations_pickle_by_name(name: str) -> None:
    f = gp.equations()[name]
    assert pickle.loads(pickle.dumps(f)) is f
