"""Properties of the real-gas equations: limits, inverses, monotone, symmetric, conserved."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import gasphys as gp
from gasphys import real_gas
from gasphys.gas import FORMULAS, gas_fractions

from .coverage import covers, members

MODELS = tuple(real_gas.density.registry)

pressures = st.floats(np.log(10.0), np.log(29999.0)).map(lambda x: float(np.exp(x)))
temperatures = st.floats(-13.0, 51.0)


@st.composite
def gases(draw: st.DrawFn, hydrogen: bool = True) -> gp.Gas:
    """Any breathing gas, traces of carbon dioxide included."""
    shares = [draw(st.floats(0.0, 1.0)) for _ in range(5)]
    co2 = draw(st.floats(0.0, 0.05))
    total = (sum(shares) + 0.01) / (1.0 - co2)
    oxygen, helium, argon, h2, neon = (s / total for s in shares)
    return gp.Gas(
        oxygen=oxygen,
        helium=helium,
        argon=argon,
        hydrogen=h2 if hydrogen else 0.0,
        neon=neon,
        carbon_dioxide=co2,
    )


# -- Equations of state ------------------------------------------------------------------------------


@covers(*members("real_gas.density"), *members("real_gas.pressure_at_density"))
@pytest.mark.parametrize("model", MODELS)
@given(gas=gases(), pressure=pressures, temperature=temperatures)
def test_density_and_pressure_undo_each_other(model, gas, pressure, temperature):
    density = real_gas.density(pressure, gas, temperature, model=model)
    assert real_gas.pressure_at_density(density, gas, temperature, model=model) == pytest.approx(
        pressure, rel=1e-12
    )


@pytest.mark.parametrize("model", MODELS)
@given(gas=gases(), pressure=pressures, temperature=temperatures, factor=st.floats(1.001, 2.0))
def test_density_rises_with_pressure_and_falls_with_temperature(model, gas, pressure, temperature, factor):
    density = real_gas.density(pressure, gas, temperature, model=model)
    with gp.validity("ignore"):
        assert real_gas.density(pressure * factor, gas, temperature, model=model) > density
        assert real_gas.density(pressure, gas, temperature + 1.0, model=model) < density


@covers(*members("real_gas.compressibility"))
@pytest.mark.parametrize("model", MODELS)
@given(gas=gases(), pressure=pressures, temperature=temperatures)
def test_compressibility_is_the_ratio_to_the_ideal_gas(model, gas, pressure, temperature):
    ideal = real_gas.density(pressure, gas, temperature, model="ideal")
    real = real_gas.density(pressure, gas, temperature, model=model)
    found = real_gas.compressibility(pressure, gas, temperature, model=model)
    assert found == pytest.approx(ideal / real, rel=1e-12)
    # Thin gas is ideal, whatever the model.
    assert real_gas.compressibility(5.0, gas, temperature, model=model) == pytest.approx(1.0, abs=2e-4)


@covers("real_gas.second_virial")
@given(gas=gases(), temperature=temperatures)
def test_second_virial_is_the_slope_of_compressibility_in_thin_gas(gas, temperature):
    b = real_gas.second_virial(*gas_fractions(gas).values(), temperature)
    c = real_gas.density(10.0, gas, temperature) / gas.molar_mass / 1000.0
    z = real_gas.compressibility(10.0, gas, temperature)
    # The next term, C c^2, is below 5e-7 at 10 kPa.
    assert (z - 1.0) / c == pytest.approx(b, abs=0.2)


@covers("real_gas.third_virial", "real_gas.fourth_virial", "real_gas.fifth_virial", "real_gas.second_virial")
@given(temperature=temperatures, share=st.floats(0.0, 1.0))
def test_coefficients_of_mixtures_lie_as_their_rules_say(temperature, share):
    """One gas mixed with itself under two names has its own coefficients; C, D, E of mixtures lie between."""
    for first in FORMULAS:
        for second in ("N2", "He"):
            mix = dict.fromkeys(FORMULAS, 0.0)
            mix[first] += share
            mix[second] += 1.0 - share
            ends = [
                {g: float(g == first) for g in FORMULAS},
                {g: float(g == second) for g in FORMULAS},
            ]
            with gp.validity("ignore"):
                for f, names in (
                    (real_gas.third_virial, tuple(FORMULAS)),
                    (real_gas.fourth_virial, tuple(FORMULAS)[:-1]),
                    (real_gas.fifth_virial, ("O2", "N2", "Ar")),
                ):
                    last = [temperature] if f is not real_gas.fourth_virial else []
                    value, *edges = (f(*(x[g] for g in names), *last) for x in (mix, *ends))
                    slack = 1e-9 * max(map(abs, edges))
                    assert min(edges) - slack <= value <= max(edges) + slack
                if first == second:
                    assert real_gas.second_virial(*mix.values(), temperature) == pytest.approx(
                        real_gas.second_virial(*ends[0].values(), temperature), rel=1e-12
                    )


@covers("real_gas.mixture_molar_mass")
@given(gas=gases())
def test_molar_mass_is_that_of_the_gas(gas):
    assert real_gas.mixture_molar_mass(*gas_fractions(gas).values()) == pytest.approx(
        gas.molar_mass, rel=1e-14
    )


@covers(*members("real_gas.uncertainty"))
@given(gas=gases(), pressure=pressures, temperature=temperatures)
def test_uncertainty_is_small_in_thin_gas_and_never_below_the_series(gas, pressure, temperature):
    found = real_gas.uncertainty(pressure, gas, temperature)
    assert found >= 5e-4
    assert real_gas.uncertainty(5.0, gas, temperature) == pytest.approx(5e-4, abs=2e-4)
    without = gp.Gas(oxygen=gas.oxygen, argon=gas.argon)  # nitrogen takes the place of the doubtful gases
    assert real_gas.uncertainty(pressure, without, temperature) <= found


@covers(*members("real_gas.humid_density"))
@pytest.mark.parametrize("model", ["virial", "ideal"])
@given(gas=gases(), pressure=st.floats(100.0, 20000.0), vapor=st.floats(0.0, 6.3))
def test_humid_gas_is_dry_gas_and_vapor(model, gas, pressure, vapor):
    humid = real_gas.humid_density(pressure, gas, 37.0, water_vapor_pressure=vapor, model=model)
    dry = real_gas.density(pressure - vapor, gas, 37.0, model=model)
    assert humid - dry == pytest.approx(vapor * 18.01528 / (8.31446261815324 * 310.15), rel=1e-6, abs=1e-9)
    assert real_gas.humid_density(pressure, gas, 37.0, model=model) == real_gas.density(
        pressure, gas, 37.0, model=model
    )


@covers(*members("real_gas.reference_density"))
@given(gas=gases(), pressure=pressures)
def test_reference_density_is_proportional_to_pressure(gas, pressure):
    for rule in ("scaled_1_atm", "ideal"):
        one = real_gas.reference_density(101.325, gas, rule=rule)
        assert real_gas.reference_density(pressure, gas, rule=rule) == pytest.approx(
            one * pressure / 101.325, rel=1e-12
        )
    scaled, ideal = (real_gas.reference_density(pressure, gas, rule=r) for r in ("scaled_1_atm", "ideal"))
    assert scaled == pytest.approx(ideal, rel=2e-3)


# -- Cylinders ---------------------------------------------------------------------------------------


@covers(*members("real_gas.cylinder_content"), *members("real_gas.cylinder_pressure"))
@pytest.mark.parametrize("model", ["virial", "ideal"])
@given(gas=gases(), pressure=pressures, temperature=temperatures, volume=st.floats(0.5, 50.0))
def test_content_and_pressure_undo_each_other(model, gas, pressure, temperature, volume):
    amount = real_gas.cylinder_content(pressure, gas, volume, temperature, model=model)
    assert real_gas.cylinder_pressure(amount, gas, volume, temperature, model=model) == pytest.approx(
        pressure, rel=1e-12
    )
    assert amount == pytest.approx(
        volume * real_gas.density(pressure, gas, temperature, model=model) / gas.molar_mass, rel=1e-12
    )
    # Twice the cylinder at the same pressure holds twice as much.
    assert real_gas.cylinder_content(pressure, gas, 2.0 * volume, temperature, model=model) == pytest.approx(
        2.0 * amount, rel=1e-12
    )


def test_an_empty_cylinder_holds_nothing():
    for model in ("virial", "ideal"):
        assert real_gas.cylinder_content(0.0, "trimix 18/45", model=model) == 0.0
        assert real_gas.cylinder_pressure(0.0, "trimix 18/45", model=model) == 0.0


@covers(*members("real_gas.free_gas_volume"))
@pytest.mark.parametrize("model", ["virial", "ideal"])
@given(gas=gases(), pressure=pressures, ambient=st.floats(50.0, 1000.0), volume=st.floats(0.5, 50.0))
def test_free_gas_is_the_same_amount(model, gas, pressure, ambient, volume):
    free = real_gas.free_gas_volume(pressure, gas, volume, 15.0, ambient, 30.0, model=model)
    inside = real_gas.cylinder_content(pressure, gas, volume, 15.0, model=model)
    assert real_gas.cylinder_content(ambient, gas, free, 30.0, model=model) == pytest.approx(
        inside, rel=1e-12
    )


# -- Transport ---------------------------------------------------------------------------------------


@covers(*members("real_gas.viscosity"), *members("real_gas.thermal_conductivity"))
@given(gas=gases(), temperature=st.floats(-13.0, 55.0))
def test_transport_rises_with_temperature_and_stays_near_the_pure_gases(gas, temperature):
    for f in (real_gas.viscosity, real_gas.thermal_conductivity):
        value = f(gas, temperature)
        assert f(gas, temperature + 1.0) > value
        present = [g for g, x in gas.fractions.items() if x > 0.0]
        pure = [
            f(gp.Gas(oxygen=0.0) if g == "N2" else gp.Gas(**{"oxygen": 0.0, FORMULAS[g]: 1.0}), temperature)
            for g in present
        ]
        # Not monotone in composition: helium mixtures pass their own gases.
        assert 0.8 * min(pure) <= value <= 1.2 * max(pure)
    assert real_gas.viscosity(gas, temperature, 10.0) >= real_gas.viscosity(gas, temperature)


@covers(*members("real_gas.viscosity"))
@given(share=st.floats(0.0, 1.0), temperature=st.floats(-13.0, 55.0))
def test_viscosity_is_continuous_where_a_gas_disappears(share, temperature):
    with_trace = gp.Gas(oxygen=share, helium=(1.0 - share) * (1.0 - 1e-9))
    without = gp.Gas(oxygen=share, helium=1.0 - share)
    assert real_gas.viscosity(with_trace, temperature) == pytest.approx(
        real_gas.viscosity(without, temperature), rel=1e-8
    )


@covers(*members("real_gas.heat_capacity"))
@given(first=gases(), second=gases(), share=st.floats(0.0, 1.0), temperature=st.floats(-13.0, 55.0))
def test_heat_capacity_is_a_sum(first, second, share, temperature):
    with gp.validity("ignore"):
        f = real_gas.heat_capacity.pick(model="ideal_sum")
        mixed = [
            share * a + (1.0 - share) * b
            for a, b in zip(gas_fractions(first).values(), gas_fractions(second).values(), strict=True)
        ]
        assert f(*mixed, temperature) == pytest.approx(
            share * real_gas.heat_capacity(first, temperature)
            + (1.0 - share) * real_gas.heat_capacity(second, temperature),
            rel=1e-12,
        )


@covers(*members("real_gas.diffusivity"))
@given(pressure=pressures, temperature=st.floats(-13.0, 55.0), factor=st.floats(1.1, 3.0))
def test_diffusivity_falls_with_pressure(pressure, temperature, factor):
    one = real_gas.diffusivity(pressure, "CO2-N2", temperature)
    assert real_gas.diffusivity(pressure * factor, "CO2-N2", temperature) == pytest.approx(
        one / factor, rel=1e-12
    )
    assert real_gas.diffusivity(pressure, "He-N2", temperature) > real_gas.diffusivity(
        pressure, "O2-N2", temperature
    )


@covers("real_gas.reynolds_number")
@given(
    flow=st.floats(0.1, 500.0),
    diameter=st.floats(0.001, 0.1),
    density=st.floats(0.1, 30.0),
    viscosity=st.floats(8.0, 25.0),
    factor=st.floats(0.3, 3.0),
)
def test_reynolds_number_scales(flow, diameter, density, viscosity, factor):
    one = real_gas.reynolds_number(flow, diameter, density, viscosity)
    assert real_gas.reynolds_number(flow * factor, diameter, density / factor, viscosity) == pytest.approx(
        one
    )
    assert real_gas.reynolds_number(flow, diameter * factor, density, viscosity / factor) == pytest.approx(
        one
    )
