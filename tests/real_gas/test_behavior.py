"""What the real-gas functions do with every kind of input, outside their range, and with doubtful pairs."""

from __future__ import annotations

import warnings
from typing import Any

import numpy as np
import pytest
import sympy as sp
import xarray as xr
from scipy.optimize import brentq

import gasphys as gp
from gasphys import real_gas
from gasphys.errors import ProvenanceError, RangeError
from gasphys.gas import FORMULAS, gas_fractions
from gasphys.real_gas import newton
from gasphys.real_gas.peng_robinson import peng_robinson_series, peng_robinson_stiffness
from gasphys.real_gas.virial import virial_pressure, virial_series, virial_stiffness

MODELS = ("virial", "ideal", "peng_robinson_1976")
GASES = (
    "air",
    "oxygen",
    "helium",
    "heliox 21/79",
    "trimix 18/45",
    "mix O2=0.04 H2=0.96",
    "mix O2=0.3 Ar=0.3 Ne=0.2",
)


def states(shape: tuple[int, ...], seed: int = 1) -> dict[str, Any]:
    rng = np.random.default_rng(seed)
    x = rng.dirichlet(np.ones(4), size=shape)
    return {
        "ambient_pressure": rng.uniform(100.0, 30000.0, shape),
        "oxygen": x[..., 0],
        "nitrogen": x[..., 1],
        "helium": x[..., 2],
        "argon": x[..., 3],
        "hydrogen": 0.0,
        "neon": 0.0,
        "carbon_dioxide": 0.0,
        "temperature": rng.uniform(-10.0, 50.0, shape),
    }


# ---- Newton --------------------------------------------------------------------------------------


@pytest.mark.parametrize("model", ["virial", "peng_robinson_1976"])
@pytest.mark.parametrize("gas", GASES)
def test_against_a_bracketed_root(model: str, gas: str) -> None:
    forward = real_gas.pressure_at_density.pick(model=model).raw
    fractions = list(gas_fractions(gas).values())
    for pressure in (5.0, 101.325, 3000.0, 12000.0, 30000.0):
        for temperature in (-13.0, 20.0, 51.0):
            slow = brentq(
                lambda d, p=pressure, t=temperature: forward(d, *fractions, t) - p,
                1e-9,
                25.0 * float(gp.Gas.parse(gas).molar_mass),
                xtol=1e-300,
                rtol=1e-14,
            )
            assert real_gas.density(pressure, gas, temperature, model=model) == pytest.approx(slow, rel=1e-12)


@pytest.mark.parametrize("model", ["virial", "peng_robinson_1976"])
def test_converges_everywhere_it_answers(model: str) -> None:
    """Beyond validity too, as far as the possible range: a number or nan, never an endless loop."""
    grid = np.geomspace(5.0, 100000.0, 40)[:, None]
    warm = np.linspace(-23.0, 100.0, 15)
    with gp.validity("ignore"):
        for gas in GASES:
            found = real_gas.density.pick(model=model)(grid, *gas_fractions(gas).values(), warm)
            assert found.shape == (40, 15)
            assert np.all(np.isfinite(found[grid[:, 0] <= 30000.0]))
            assert np.all(np.diff(found, axis=0)[np.isfinite(np.diff(found, axis=0))] > 0.0)


def test_at_most_five_steps_in_the_range() -> None:
    steps: list[int] = []

    def counting(start: Any, wanted: Any, level: Any, slope: Any) -> Any:
        count = 0

        def counted(x: Any) -> Any:
            nonlocal count
            count += 1
            return level(x)

        found = newton.newton(start, wanted, counted, slope)
        steps.append(count)
        return found

    from gasphys.real_gas import virial

    original, virial.newton = virial.newton, counting
    try:
        for gas in ("air", "oxygen", "helium", "trimix 18/45"):
            for t in (-13.0, 51.0):
                real_gas.density(30000.0, gas, t)
    finally:
        virial.newton = original
    assert max(steps) <= 5


def test_slopes_are_the_derivatives() -> None:
    """The two slopes that Newton uses are written out; each must be the derivative of its series."""
    c = sp.Symbol("molar_density")
    for series, slope in (
        (c * virial_series.symbolic(), virial_stiffness.symbolic()),
        (peng_robinson_series.symbolic(), peng_robinson_stiffness.symbolic()),
    ):
        difference = sp.nsimplify(sp.diff(series, c) - slope)
        assert sp.simplify(difference) == 0


def test_blocks_do_not_change_a_digit() -> None:
    f = real_gas.density.pick(model="virial")
    many = states((newton._BLOCK * 2 + 137,))
    whole = f(**many)
    for k in (0, newton._BLOCK - 1, newton._BLOCK, newton._BLOCK * 2 + 136):
        one = {key: float(v[k]) if np.ndim(v) else v for key, v in many.items()}
        assert f(**one) == pytest.approx(whole[k], rel=1e-14)


@pytest.mark.parametrize("shapes", [((300, 1), (1, 200)), ((2, 1, 1), (1, 20000, 1)), ((20000,), (3, 1))])
def test_broadcasting(shapes: tuple[tuple[int, ...], ...]) -> None:
    f = real_gas.density.pick(model="virial")
    first, second = shapes
    inputs = states(first) | {"temperature": np.linspace(-10.0, 50.0, int(np.prod(second))).reshape(second)}
    found = f(**inputs)
    shape = np.broadcast_shapes(first, second)
    assert found.shape == shape
    full = {k: np.broadcast_to(v, shape).ravel() if np.ndim(v) else v for k, v in inputs.items()}
    np.testing.assert_allclose(found.ravel(), f(**full), rtol=1e-14)


# ---- Kinds of input ------------------------------------------------------------------------------


def test_gas_as_object_name_and_labelled_array() -> None:
    gas = gp.Gas.parse("trimix 18/45")
    labelled = xr.DataArray(
        [[0.18, 0.21], [0.37, 0.79], [0.45, 0.0]],
        dims=("gas", "mix"),
        coords={"gas": ["O2", "N2", "He"], "mix": ["a", "b"]},
        attrs={"units": "1"},
    )
    pressure = xr.DataArray([1.0, 200.0], dims="p", attrs={"units": "bar"})
    found = real_gas.density(pressure, labelled, 20.0)
    assert set(found.dims) == {"p", "mix"}
    assert found.attrs["units"] == "g/L"
    assert found.attrs["quantity"] == "density"
    for mix, name in (("a", gas), ("b", "air")):
        for bar, kelvin in ((1.0, 293.15), (200.0, 293.15)):
            one = real_gas.density(f"{bar} bar", name, f"{kelvin} K")
            assert float(found.sel(mix=mix).isel(p=[1.0, 200.0].index(bar))) == pytest.approx(one, rel=1e-13)


@pytest.mark.parametrize("model", MODELS)
def test_lazy(model: str) -> None:
    pressure = xr.DataArray(np.geomspace(100.0, 30000.0, 50), dims="p", attrs={"units": "kPa"})
    lazy = real_gas.density(pressure.chunk({"p": 20}), "heliox 21/79", model=model)
    assert lazy.chunks is not None
    eager = real_gas.density(pressure, "heliox 21/79", model=model)
    np.testing.assert_allclose(lazy.compute().values, eager.values, rtol=1e-14)
    assert lazy.attrs == eager.attrs


def test_nan_stays_nan_alone() -> None:
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        found = real_gas.density(np.array([100.0, np.nan, 20000.0]), "air")
    assert np.isnan(found).tolist() == [False, True, False]


def test_fractions_must_sum_to_one() -> None:
    labels = {"gas": ["O2", "N2"]}
    one = xr.DataArray([0.2, 0.7], dims="gas", coords=labels, attrs={"units": "1"})
    with pytest.raises(RangeError, match=r"sum to 0\.9"):
        real_gas.density(101.325, one)
    two = xr.DataArray([[0.2, 20.0], [0.8, 70.0]], dims=("gas", "m"), coords=labels, attrs={"units": "1"})
    with pytest.warns(gp.ValidityWarning, match="1 of 2 mixtures"):
        found = real_gas.density(101.325, two)
    assert np.isnan(found.values).tolist() == [False, True]
    percent = xr.DataArray([20.0, 80.0], dims="gas", coords=labels, attrs={"units": "%"})
    assert float(real_gas.density(101.325, percent)) == pytest.approx(real_gas.density(101.325, "nitrox 20"))


# ---- Range ---------------------------------------------------------------------------------------


@pytest.mark.parametrize("model", ["virial", "peng_robinson_1976"])
def test_cold_gas_is_refused(model: str) -> None:
    with pytest.raises(RangeError, match=r"-23\.15"):
        real_gas.density(20000.0, "air", temperature=-23.2, model=model)
    with pytest.warns(gp.ValidityWarning, match=r"-13\.15"):
        real_gas.density(20000.0, "air", temperature=-14.0, model=model)
    with pytest.warns(gp.ValidityWarning, match=r"51\.85"):
        real_gas.density(20000.0, "air", temperature=52.0, model=model)
    with pytest.warns(gp.ValidityWarning, match="30000"):
        real_gas.density(30001.0, "air", model=model)
    assert real_gas.density(20000.0, "air", temperature=-40.0, model="ideal") > 0.0


def test_carbon_dioxide_is_a_trace() -> None:
    with pytest.warns(gp.ValidityWarning, match="carbon_dioxide"):
        real_gas.density(500.0, "mix O2=0.2 CO2=0.06")
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        real_gas.density(500.0, "mix O2=0.2 CO2=0.05")


def test_bar_meant_as_kilopascal() -> None:
    with pytest.raises(RangeError, match="'4 atm'"):
        real_gas.density(4.0, "air")
    with pytest.raises(gp.GasphysError, match="nearest: 'virial'"):
        real_gas.density(400.0, "air", model="viral")


# ---- What a result rests on ----------------------------------------------------------------------


def labelled(gas: str) -> Any:
    return real_gas.density(xr.DataArray([20000.0], dims="p", attrs={"units": "kPa"}), gas)


def test_estimated_pairs_are_said() -> None:
    assert "estimated_pairs" not in labelled("nitrox 32").attrs
    assert "estimated_pairs" not in labelled("mix O2=0.0 He=0.5").attrs
    assert labelled("heliox 21/79").attrs["estimated_pairs"] == "He-O2: estimate, +-1.5 cm3/mol"
    text = labelled("mix O2=0.1 He=0.3 H2=0.3 Ar=0.1 Ne=0.1").attrs["estimated_pairs"]
    for part in (
        "He-O2: estimate",
        "He-Ar: estimate",
        "H2-O2: estimate",
        "He-H2: from memory",
        "He-Ne: from",
    ):
        assert part in text
    assert "mean of the pure gases" in text
    # Plain numbers carry no attributes: the same is asked by name.
    assert [str(p) for p in real_gas.pairs("heliox 21/79")] == ["He-O2: estimate, +-1.5 cm3/mol"]
    assert "estimated pairs: He-O2" in str(
        real_gas.density.working(ambient_pressure=20000.0, gas="heliox 21/79", temperature=20.0)
    )


def test_traces_are_not_worth_a_word() -> None:
    assert all(p.quality == "good" for p in real_gas.pairs(gp.Gas.dry_air("crc_83")))
    assert any(p.quality != "good" for p in real_gas.pairs("mix O2=0.16 He=0.8 CO2=0.04"))


def test_provenance_follows_the_gases_present() -> None:
    assert labelled("nitrox 32").attrs["provenance"] == "memory_high"  # the molar masses
    assert labelled("heliox 21/79").attrs["provenance"] == "memory_medium"
    with gp.provenance("memory_high"):
        real_gas.density(20000.0, "nitrox 32")
        with pytest.raises(ProvenanceError, match="memory_medium"):
            real_gas.density(20000.0, "heliox 21/79")
        real_gas.viscosity("heliox 21/79", 20.0)
        with pytest.raises(ProvenanceError):
            real_gas.viscosity("mix O2=0.2 Ne=0.8", 20.0)


def test_uncertainty_as_stated() -> None:
    """Effect of +1.5 cm3/mol in He-O2 on density; heliox 50/50 half as much again, trimix 18/45 half."""
    for bar, percent in ((10.0, 0.02), (31.0, 0.06), (60.0, 0.11), (200.0, 0.31), (300.0, 0.40)):
        fitted = real_gas.uncertainty(f"{bar} bar", "mix O2=0.0 He=0.5")
        one = 100.0 * (real_gas.uncertainty(f"{bar} bar", "heliox 21/79") - fitted)
        assert one == pytest.approx(percent, abs=0.011)
        half = 100.0 * (real_gas.uncertainty(f"{bar} bar", "heliox 50/50") - fitted)
        assert half / one == pytest.approx(1.5, abs=0.1)
        trimix = 100.0 * (real_gas.uncertainty(f"{bar} bar", "trimix 18/45") - fitted)
        assert trimix / one == pytest.approx(0.5, abs=0.06)
    for bar, bound in ((71.0, 5e-4), (71.1, 1.5e-3), (200.0, 1.5e-3), (200.1, 3e-3), (300.0, 3e-3)):
        assert real_gas.uncertainty(f"{bar} bar", "nitrox 32") == pytest.approx(bound, rel=1e-12)


def test_uncertainty_is_the_effect_of_the_coefficient() -> None:
    """The bound against the density computed again with the coefficient moved."""
    fractions = gas_fractions("heliox 21/79")
    base = real_gas.density(30000.0, "heliox 21/79")
    shift = 2.0 * 0.21 * 0.79 * 1.5

    def moved(density: float) -> float:
        c = density / gp.Gas.parse("heliox 21/79").molar_mass
        extra = c * 8.31446261815324 * 293.15 * c / 1000.0 * shift
        return float(virial_pressure(density, *fractions.values(), 20.0)) + extra - 30000.0

    change = 1.0 - brentq(moved, 0.5 * base, base) / base
    stated = real_gas.uncertainty(30000.0, "heliox 21/79") - 3e-3
    assert stated == pytest.approx(change, rel=0.01)


def test_unlisted_pairs_carry_the_worst_error_of_the_mean_rule() -> None:
    from gasphys.real_gas.data import pair

    unknown = pair("Ar", "H2")
    assert unknown.quality == "mean of the pure gases"
    # He-O2: 18.4 against the mean of 11.844 and -15.858.
    assert unknown.uncertainty == pytest.approx(18.4 - 0.5 * (11.844 - 15.858), rel=1e-12)
    assert pair("Ne", "CO2").uncertainty == pytest.approx(21.5 - 0.5 * (11.844 - 123.01), rel=1e-12)


def test_limits_belong_to_zero_degrees() -> None:
    """The reference density does not know a body temperature: 12 % looser there, the unsafe direction."""
    assert "temperature" not in [a.name for a in real_gas.reference_density.arguments]
    air = "mix O2=0.2096 Ar=0.0092"
    ideal = real_gas.ideal_density(401.325, *gas_fractions(air).values(), 0.0)
    assert real_gas.reference_density(401.325, air, rule="ideal") == ideal
    assert ideal / real_gas.density(401.325, air, 37.0) == pytest.approx(1.135, abs=0.005)
    assert all(name in FORMULAS for name in ("O2", "N2"))
