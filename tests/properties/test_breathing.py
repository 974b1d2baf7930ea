"""Properties of the equations of breathing: limits, symmetry, inverses, conservation, scale."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

import gasphys as gp
from gasphys import breathing, real_gas

from .coverage import covers, members

ventilations = st.floats(5.0, 120.0)
flows = st.floats(1.0, 600.0)
densities = st.floats(0.3, 15.0)
viscosities = st.floats(0.5, 1.3)
coefficients = st.floats(0.02, 1.0)
shares = st.floats(0.0, 1.0)
uptakes = st.floats(0.2, 4.0)
fractions = st.floats(0.0, 1.0)


@pytest.fixture(autouse=True)
def _quiet():
    with gp.validity("ignore"):
        yield


# -- airways ---------------------------------------------------------------------------------------


@covers("breathing.viscous_coefficient", "breathing.turbulent_coefficient")
@given(ratio=st.floats(0.5, 10.0), k=coefficients, tissue=shares)
def test_coefficients_scale_with_their_own_property_only(ratio, k, tissue):
    assert breathing.viscous_coefficient(1.0, k, tissue) == pytest.approx(k, rel=1e-12)
    assert breathing.viscous_coefficient(ratio, k, 1.0) == pytest.approx(k, rel=1e-12)
    grown = breathing.viscous_coefficient(ratio, k, tissue) - breathing.viscous_coefficient(0.1, k, tissue)
    assert grown == pytest.approx(k * (1.0 - tissue) * (ratio - 0.1), rel=1e-9, abs=1e-15)
    assert breathing.turbulent_coefficient(ratio, k) == pytest.approx(ratio * k, rel=1e-12)


@covers("breathing.airway_pressure", "breathing.airway_resistance", "breathing.density_share")
@given(flow=flows, density=densities, viscosity=viscosities, k1=coefficients, k2=coefficients, tissue=shares)
def test_airway_pressure_is_odd_and_its_parts_add_up(flow, density, viscosity, k1, k2, tissue):
    gas = (density, viscosity, k1, k2, tissue)
    pressure = breathing.airway_pressure(flow, *gas)
    assert breathing.airway_pressure(-flow, *gas) == pytest.approx(-pressure, rel=1e-12)
    resistance = breathing.airway_resistance(flow, *gas)
    assert pressure == pytest.approx(resistance * flow / 60.0, rel=1e-12)
    assert breathing.airway_resistance(-flow, *gas) == resistance
    turbulent = breathing.airway_pressure(flow, density, viscosity, 0.0, k2)
    assert breathing.density_share(flow, *gas) == pytest.approx(turbulent / pressure, rel=1e-9)


@covers(*members("breathing.resistive_work"))
@given(volume=ventilations, density=densities, viscosity=viscosities, k1=coefficients, k2=coefficients)
def test_resistive_work_splits_by_phase_and_is_least_at_constant_flow(volume, density, viscosity, k1, k2):
    gas = (volume, density, viscosity, k1, k2)
    for wave in ("sinusoid", "square"):
        both = breathing.resistive_work(*gas, wave=wave)
        assert breathing.resistive_work(*gas, phases="one", wave=wave) == pytest.approx(both / 2.0, rel=1e-12)
        # Viscous work follows ventilation, turbulent work its square.
        viscous = breathing.resistive_work(volume, density, viscosity, k1, 0.0, wave=wave)
        doubled = breathing.resistive_work(2.0 * volume, density, viscosity, k1, k2, wave=wave)
        assert doubled == pytest.approx(2.0 * viscous + 4.0 * (both - viscous), rel=1e-9)
    assert breathing.resistive_work(*gas) > breathing.resistive_work(*gas, wave="square")


@covers("breathing.elastic_work", "breathing.work_of_breathing", "breathing.breathing_power")
@given(
    tidal=st.floats(0.3, 4.0),
    elastance=st.floats(0.3, 3.0),
    resistive=st.floats(0.1, 5.0),
    rate=st.floats(5.0, 50.0),
)
def test_power_is_work_of_a_breath_times_breaths(tidal, elastance, resistive, rate):
    elastic = breathing.elastic_work(tidal, elastance)
    total = breathing.work_of_breathing(resistive, elastic)
    power = breathing.breathing_power(total, rate * tidal)
    breath = resistive * tidal + elastance * tidal * tidal / 2.0
    assert power == pytest.approx(breath * rate / 60.0, rel=1e-12)


@covers("breathing.tidal_volume", "breathing.inspiratory_power")
@given(
    rate=st.floats(4.0, 60.0),
    alveolar=st.floats(3.0, 40.0),
    dead=st.floats(0.05, 0.4),
    k1=coefficients,
    k2=coefficients,
)
def test_inspiratory_power_is_resistive_work_of_one_phase_and_elastic_work(rate, alveolar, dead, k1, k2):
    tidal = breathing.tidal_volume(rate, alveolar, dead)
    assert (tidal - dead) * rate == pytest.approx(alveolar, rel=1e-9)
    power = breathing.inspiratory_power(rate, tidal, 0.8, k1, k2)
    work = breathing.resistive_work(rate * tidal, 1.0, 1.0, k1, k2, phases="one")
    total = breathing.work_of_breathing(work, breathing.elastic_work(tidal, 0.8))
    assert power == pytest.approx(breathing.breathing_power(total, rate * tidal), rel=1e-12)


@covers(*members("breathing.optimum_frequency"), "breathing.elastance_of_least_work")
@given(
    elastance=st.floats(0.3, 3.0),
    alveolar=st.floats(3.0, 60.0),
    dead=st.floats(0.05, 0.4),
    k1=st.floats(0.05, 1.0),
    k2=st.floats(0.0, 1.0),
)
def test_the_optimum_frequency_takes_least_power(elastance, alveolar, dead, k1, k2):
    def power(rate):
        return breathing.inspiratory_power(
            rate, min(breathing.tidal_volume(rate, alveolar, dead), 10.0), elastance, k1, k2
        )

    best = breathing.optimum_frequency(elastance, alveolar, dead, k1, k2)
    assume(2.0 < best < 140.0 and alveolar / best < 9.0)
    assert breathing.elastance_of_least_work(best, alveolar, dead, k1, k2) == pytest.approx(
        elastance, rel=1e-7
    )
    for other in (best * 0.98, best * 1.02):
        assert power(other) > power(best)
    laminar = breathing.optimum_frequency(elastance, alveolar, dead, k1, model="laminar")
    assert breathing.optimum_frequency(elastance, alveolar, dead, k1, 0.0) == pytest.approx(laminar, rel=1e-7)
    # Denser gas slows breathing.
    assert best <= laminar * (1.0 + 1e-9)


@covers("breathing.oxygen_cost_of_breathing")
@given(power=st.floats(0.1, 20.0), efficiency=st.floats(0.02, 0.5))
def test_oxygen_cost_holds_the_energy_of_the_work(power, efficiency):
    cost = breathing.oxygen_cost_of_breathing(power, efficiency)
    joules = cost * 1000.0 * 20.1
    assert joules * efficiency == pytest.approx(power * 60.0, rel=1e-12)


@covers("breathing.static_lung_load")
@given(source=st.floats(0.0, 80.0), lung=st.floats(0.0, 80.0))
def test_static_lung_load_depends_on_the_difference_alone(source, lung):
    load = breathing.static_lung_load(source, lung)
    assert breathing.static_lung_load(lung, source) == pytest.approx(-load, abs=1e-12)
    assert breathing.static_lung_load(source + 7.0, lung + 7.0) == pytest.approx(load, abs=1e-9)


# -- capacity --------------------------------------------------------------------------------------


@covers("breathing.density_ratio", "breathing.viscosity_ratio")
@given(factor=st.floats(0.2, 5.0))
def test_ratios_are_one_in_air_at_the_surface(factor):
    air = real_gas.humid_density("1 atm", "air", 37.0, "47 mmHg")
    assert breathing.density_ratio(air) == pytest.approx(1.0, rel=1e-9)
    assert breathing.density_ratio(factor * air) == pytest.approx(factor, rel=1e-9)
    viscosity = real_gas.viscosity("air", 37.0, air)
    assert breathing.viscosity_ratio(viscosity) == pytest.approx(1.0, rel=1e-9)
    assert breathing.viscosity_ratio(viscosity * factor) == pytest.approx(factor, rel=1e-9)


@covers("breathing.maximum_ventilation")
@given(surface=st.floats(60.0, 220.0), first=densities, second=densities, n=st.floats(0.0, 0.6))
def test_maximum_ventilation_scales(surface, first, second, n):
    one = breathing.maximum_ventilation(surface, first, n)
    assert breathing.maximum_ventilation(surface, 1.0, n) == pytest.approx(surface, rel=1e-12)
    # From gas to gas only the ratio of densities counts.
    assume(1.0 < one < 500.0)
    assert breathing.maximum_ventilation(one, second / first, n) == pytest.approx(
        breathing.maximum_ventilation(surface, second, n), rel=1e-9
    )


@covers(
    "breathing.ventilatory_reserve",
    "breathing.sustainable_o2_uptake",
    "breathing.ventilation_for_o2_uptake",
)
@given(most=st.floats(20.0, 220.0), share=st.floats(0.5, 0.9), ratio=st.floats(18.0, 30.0))
def test_the_uptake_left_leaves_the_reserve_that_was_asked_for(most, share, ratio):
    uptake = breathing.sustainable_o2_uptake(most, share, ratio)
    ventilation = breathing.ventilation_for_o2_uptake(uptake, ratio)
    assert breathing.ventilatory_reserve(ventilation, most) == pytest.approx(1.0 - share, abs=1e-9)


@covers(*members("breathing.external_work_limit"), "breathing.external_work_share")
@given(depth=st.floats(0.0, 50.0), deeper=st.floats(0.1, 10.0), volume=ventilations)
def test_limits_of_external_work_are_lines(depth, deeper, volume):
    fall = breathing.external_work_limit(depth) - breathing.external_work_limit(depth + deeper)
    assert fall == pytest.approx(0.016 * deeper, rel=1e-6)
    names = ("morrison_reimers_1982_preferred", "morrison_reimers_1982_maximum")
    preferred, highest = (breathing.external_work_limit(0.0, volume, name) for name in names)
    assert highest - preferred == pytest.approx(0.02 * volume, rel=1e-9)
    assert breathing.external_work_share(preferred, preferred) == 1.0


@covers("breathing.response_exponent", "breathing.illustrative_arterial_pco2")
@given(
    output=st.floats(0.2, 3.0),
    density=densities,
    surface=st.floats(80.0, 220.0),
    inspired=st.floats(0.0, 1.0),
    s=st.floats(0.0, 1.0),
)
def test_the_illustration_meets_its_own_equations(output, density, surface, inspired, s):
    m = breathing.response_exponent(s)
    assert 0.0 <= m <= 0.5
    assert m / (1.0 - m) == pytest.approx(s, abs=1e-9)
    found = breathing.illustrative_arterial_pco2(output, density, surface, inspired, exponent=m)
    alveolar = 101.325 * 310.15 / 273.15 * output / (found - inspired)
    total = alveolar / 0.75
    ceiling = 0.7 * surface * density**-0.45
    line = 15.0 * density**-m * (found - 4.93)
    assert total == pytest.approx(min(line, ceiling), rel=1e-6)


# -- loops -----------------------------------------------------------------------------------------


@covers("breathing.semi_closed_o2_fraction")
@given(uptake=uptakes, surplus=st.floats(0.5, 20.0), oxygen=fractions)
def test_steady_loop_conserves_oxygen_and_inert_gas(uptake, surplus, oxygen):
    flow = uptake + surplus
    assume(flow * oxygen >= uptake)
    found = breathing.semi_closed_o2_fraction(flow, oxygen, uptake)
    assert surplus * found + uptake == pytest.approx(flow * oxygen, rel=1e-9)
    assert surplus * (1.0 - found) == pytest.approx(flow * (1.0 - oxygen), rel=1e-9, abs=1e-9)


@covers(
    "breathing.loop_o2_after",
    "breathing.flushed_loop_o2_fraction",
    "breathing.semi_closed_time_constant",
)
@given(
    start=fractions,
    uptake=uptakes,
    surplus=st.floats(0.05, 20.0),
    oxygen=st.floats(0.3, 1.0),
    gas=st.floats(4.0, 60.0),
    first=st.floats(0.01, 20.0),
    second=st.floats(0.01, 20.0),
)
def test_a_full_loop_relaxes_and_may_be_cut_anywhere(start, uptake, surplus, oxygen, gas, first, second):
    flow = uptake + surplus
    later = breathing.loop_o2_after(first, start, flow, oxygen, uptake, gas)
    assume(0.0 <= later <= 1.0)
    # The same formula by its parts: steady state and time constant.
    steady = (flow * oxygen - uptake) / surplus
    tau = breathing.semi_closed_time_constant(gas, flow, uptake)
    assert later == pytest.approx(
        steady + (start - steady) * np.exp(-first / tau), abs=1e-9 * max(1.0, abs(steady))
    )
    assert later == breathing.flushed_loop_o2_fraction(first, start, flow, oxygen, uptake, gas)
    whole = breathing.loop_o2_after(first + second, start, flow, oxygen, uptake, gas)
    split = breathing.loop_o2_after(second, later, flow, oxygen, uptake, gas)
    assert split == pytest.approx(whole, abs=1e-9)


@covers("breathing.shrinking_loop_o2_fraction")
@given(
    start=fractions,
    uptake=uptakes,
    share=fractions,
    oxygen=fractions,
    gas=st.floats(20.0, 60.0),
    time=st.floats(0.0, 4.0),
)
def test_a_shrinking_loop_keeps_its_inert_gas(start, uptake, share, oxygen, gas, time):
    flow = share * uptake
    found = breathing.shrinking_loop_o2_fraction(time, start, flow, oxygen, uptake, gas)
    left = gas + (flow - uptake) * time
    inert = gas * (1.0 - start) + flow * (1.0 - oxygen) * time
    assert (1.0 - found) * left == pytest.approx(inert, rel=1e-9, abs=1e-9)
    assert breathing.loop_o2_after(time, start, flow, oxygen, uptake, gas) == pytest.approx(found, abs=1e-12)


@given(uptake=uptakes, start=fractions, oxygen=fractions, gas=st.floats(5.0, 60.0), time=st.floats(0.0, 5.0))
def test_full_and_shrinking_meet_where_flow_equals_uptake(uptake, start, oxygen, gas, time):
    inputs = (time, start, uptake, oxygen, uptake, gas)
    assert breathing.flushed_loop_o2_fraction(*inputs) == pytest.approx(
        breathing.shrinking_loop_o2_fraction(*inputs), abs=1e-9
    )


@covers(*members("breathing.breath_keyed_o2_fraction"))
@given(
    pressure=st.floats(120.0, 1500.0),
    oxygen=st.floats(0.2, 1.0),
    share=st.floats(0.05, 0.5),
    ratio=st.floats(15.0, 40.0),
)
def test_breath_keyed_balances_what_it_discharges(pressure, oxygen, share, ratio):
    for conditions, liters in (
        ("same", pressure / 101.325),
        ("btps_and_stpd", gp.laws.convert_gas_volume(1.0, "btps", "stpd", pressure)),
    ):
        found = breathing.breath_keyed_o2_fraction(pressure, oxygen, share, ratio, conditions)
        discharged = share * ratio * liters
        # For one liter of O2 taken up.
        assert discharged * found + 1.0 == pytest.approx((discharged + 1.0) * oxygen, rel=1e-9)


@covers("breathing.constant_mass_ratio_o2_fraction")
@given(ratio=st.floats(0.06, 1.0), oxygen=st.floats(0.3, 1.0), epsilon=st.floats(20.0, 30.0), uptake=uptakes)
def test_constant_ratio_is_the_constant_flow_of_a_ventilation(ratio, oxygen, epsilon, uptake):
    found = breathing.constant_mass_ratio_o2_fraction(ratio, oxygen, epsilon)
    flow = ratio * breathing.ventilation_for_o2_uptake(uptake, epsilon)
    assert found == pytest.approx(
        breathing.semi_closed_o2_fraction(flow, oxygen, uptake), rel=1e-9, abs=1e-12
    )


@covers("breathing.closed_loop_po2_rate", "breathing.time_to_po2")
@given(uptake=uptakes, flow=st.floats(0.0, 0.19), volume=st.floats(3.0, 10.0), rich=st.floats(0.0, 0.9))
def test_po2_falls_with_what_is_taken_up(uptake, flow, volume, rich):
    rate = breathing.closed_loop_po2_rate(flow, uptake, volume, 37.0, rich)
    assert rate < 0.0
    # Oxygen of the loop at 37 degC, STPD, for each kPa.
    per_kpa = volume / 101.325 * 273.15 / 310.15
    assert rate * per_kpa == pytest.approx(-(uptake - flow) * (1.0 - rich), rel=1e-9)
    time = breathing.time_to_po2(130.0, 16.0, rate)
    assert 130.0 + rate * time == pytest.approx(16.0, abs=1e-9)


@covers("breathing.absorbent_duration")
@given(capacity=st.floats(50.0, 242.0), mass=st.floats(0.5, 5.0), flow=st.floats(0.2, 3.0))
def test_absorbent_duration_undoes_the_capacity_of_a_bench_run(capacity, mass, flow):
    longest = breathing.absorbent_duration(capacity, mass, flow)
    assert gp.doses.absorbent_capacity(longest, flow, mass) == pytest.approx(capacity, rel=1e-12)


# -- heat ------------------------------------------------------------------------------------------


@covers(
    "breathing.volumetric_heat_capacity", "breathing.convective_heat_loss", "breathing.expired_temperature"
)
@given(
    pressure=st.floats(101.325, 5000.0),
    cp=st.floats(20.0, 30.0),
    volume=ventilations,
    inspired=st.floats(-10.0, 34.0),
)
def test_convective_loss_is_moles_times_heat_times_warming(pressure, cp, volume, inspired):
    held = breathing.volumetric_heat_capacity(pressure, cp)
    expired = breathing.expired_temperature(inspired)
    moles = gp.real_gas.density(pressure, "helium", 37.0, model="ideal") * volume / 60.0 / 4.002602
    loss = breathing.convective_heat_loss(volume, held, expired, inspired)
    assert loss == pytest.approx(moles * cp * (expired - inspired), rel=1e-9)
    assert breathing.convective_heat_loss(volume, held, inspired, expired) == pytest.approx(-loss, rel=1e-9)


@covers("breathing.evaporative_heat_loss", "breathing.vapor_density")
@given(volume=ventilations, inspired=st.floats(1.0, 20.0), expired=st.floats(21.0, 37.0))
def test_evaporative_loss_is_water_added(volume, inspired, expired):
    wet, dry = breathing.vapor_density(expired), breathing.vapor_density(inspired)
    assert wet > dry
    grams = (wet - dry) * volume / 60.0
    assert breathing.evaporative_heat_loss(volume, wet, dry) == pytest.approx(grams * 2420.0, rel=1e-9)
    # The gas law again: mass of vapor in a liter.
    moles = gp.lungs.water_vapor_pressure(expired) / (8.31446261815324 * (expired + 273.15))
    assert wet == pytest.approx(moles * 18.015, rel=2e-4)


@covers("breathing.minimum_inspired_temperature")
@given(held=st.floats(9.6, 38.0), loss=st.floats(200.0, 400.0))
def test_the_lowest_inspired_temperature_has_the_permitted_loss(held, loss):
    lowest = breathing.minimum_inspired_temperature(held, loss)
    assert breathing.convective_heat_loss(60.0, held, 34.8, lowest) == pytest.approx(loss, rel=1e-9)
