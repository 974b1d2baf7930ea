"""Chamber gas, heat and the bedside: round trips, conservation, limits, splitting."""

from __future__ import annotations

import math

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from gasphys import chamber, doses, laws, real_gas

from .coverage import covers, members

pressures = st.floats(50.0, 1000.0)
volumes = st.floats(1000.0, 60000.0)
inflows = st.floats(0.0, 100.0)
flows = st.floats(0.0, 3000.0)
times = st.floats(0.0, 600.0)
fractions = st.floats(0.15, 0.6)
temperatures = st.floats(5.0, 40.0)


@covers(*members("chamber.trapped_gas_volume"), "chamber.cuff_volume")
@given(st.floats(0.001, 1.0), pressures, pressures, pressures, st.floats(0.0, 10.0))
def test_trapped_gas_comes_back_by_any_way(v: float, p1: float, p2: float, p3: float, c: float) -> None:
    for how in ({"humid": True}, {"humid": False}):
        there = chamber.trapped_gas_volume(v, p1, p2, **how)
        assert chamber.trapped_gas_volume(there, p2, p1, **how) == pytest.approx(v, rel=1e-12)
        direct = chamber.trapped_gas_volume(v, p1, p3, **how)
        assert chamber.trapped_gas_volume(there, p2, p3, **how) == pytest.approx(direct, rel=1e-12)
    there = chamber.cuff_volume(v, p1, p2, c)
    assert chamber.cuff_volume(there, p2, p1, c) == pytest.approx(v, rel=1e-12)
    # Without pressure of its own a cuff is dry trapped gas; humid gas moves more than dry.
    assert chamber.cuff_volume(v, p1, p2, 0.0) == pytest.approx(laws.boyle_volume(v, p1, p2), rel=1e-14)
    dry, humid = (chamber.trapped_gas_volume(1.0, p1, p2, humid=h) for h in (False, True))
    assert abs(math.log(humid)) >= abs(math.log(dry)) * (1.0 - 1e-12)


@pytest.mark.parametrize("vapor", [0.1, 0.01, 0.001])
def test_the_saturated_ratio_tends_to_the_dry_one(vapor: float) -> None:
    """Higher pressures make the vapor a smaller share of them: the ratio then is the dry one."""
    surface = 6.2661522 / vapor
    humid = chamber.trapped_gas_volume(1.0, 2.8 * surface, surface)
    assert humid == pytest.approx(2.8, rel=0.75 * vapor)
    assert humid != pytest.approx(2.8, rel=0.5 * vapor)


@covers(*members("chamber.travel_pressure"), *members("chamber.trapped_volume_loss"))
@given(pressures, pressures, st.floats(0.0, 1.0))
def test_travel_begins_and_ends_where_it_should(p1: float, p2: float, share: float) -> None:
    for profile in ("linear", "constant_ratio"):
        at = [chamber.travel_pressure(s, p1, p2, profile=profile) for s in (0.0, share, 1.0)]
        assert at[0] == pytest.approx(p1, rel=1e-13)
        assert at[2] == pytest.approx(p2, rel=1e-13)
        assert min(p1, p2) * (1.0 - 1e-12) <= at[1] <= max(p1, p2) * (1.0 + 1e-12)
        loss = chamber.trapped_volume_loss(share, p1, p2, profile=profile)
        assert 1.0 - loss == pytest.approx(laws.boyle_volume(1.0, p1, at[1]), rel=1e-12, abs=1e-14)
    # By a constant ratio each minute takes the same share: half-way is the geometric mean.
    half = chamber.travel_pressure(0.5, p1, p2, profile="constant_ratio")
    assert half == pytest.approx(math.sqrt(p1 * p2), rel=1e-12)


@covers("chamber.middle_ear_difference", "chamber.travel_rate_for")
@given(st.floats(0.1, 50.0), st.floats(0.05, 5.0))
def test_the_rate_keeps_the_ear_at_its_limit(limit: float, minutes: float) -> None:
    rate = chamber.travel_rate_for(limit, minutes)
    assert chamber.middle_ear_difference(rate, minutes) == pytest.approx(limit, rel=1e-14)
    assert chamber.middle_ear_difference(rate, 2.0 * minutes) == pytest.approx(2.0 * limit, rel=1e-14)


@covers("chamber.o2_fraction", "chamber.steady_o2_fraction")
@given(times, times, volumes, inflows, flows, fractions)
def test_oxygen_does_not_see_how_time_is_split(
    t1: float, t2: float, v: float, q: float, air: float, start: float
) -> None:
    middle = chamber.o2_fraction(t1, v, q, air, initial=start)
    whole = chamber.o2_fraction(t1 + t2, v, q, air, initial=start)
    assert chamber.o2_fraction(t2, v, q, air, initial=middle) == pytest.approx(whole, rel=1e-12)
    if air > 10.0:
        steady = chamber.steady_o2_fraction(q, air)
        assert chamber.o2_fraction(100.0 * v / air, v, q, air, initial=start) == pytest.approx(
            steady, rel=1e-9
        )
        assert chamber.o2_fraction(t1, v, q, air, initial=steady) == pytest.approx(steady, rel=1e-13)
    still = chamber.o2_fraction(t1, v, 0.0, 0.0, initial=start)
    assert still == start


@covers("chamber.air_flow_for_o2")
@given(volumes, st.floats(0.5, 100.0), st.floats(0.22, 0.5))
def test_times_and_flows_for_oxygen_put_back(v: float, q: float, limit: float) -> None:
    minutes = chamber.time_to_o2(limit, v, q, 0.0)
    assert chamber.o2_fraction(minutes, v, q, 0.0) == pytest.approx(limit, rel=1e-12)
    assert minutes == pytest.approx(-v / q * math.log((1.0 - limit) / (1.0 - 0.2095)), rel=1e-10)
    air = chamber.air_flow_for_o2(limit, q)
    assert chamber.steady_o2_fraction(q, air) == pytest.approx(limit, rel=1e-12)
    # Flushing back: air flow times time is the flushing air, whatever the flow.
    target = (limit + 0.2095) / 2.0
    used = v * math.log(2.0)  # half the excess
    for flow in (100.0, 1000.0):
        assert flow * chamber.time_to_o2(target, v, 0.0, flow, initial=limit) == pytest.approx(used, rel=1e-9)


@covers("chamber.co2_pressure", "chamber.steady_co2_pressure", "chamber.co2_surface_equivalent")
@given(
    st.floats(0.0, 60.0),
    st.floats(0.0, 60.0),
    st.floats(10000.0, 60000.0),
    st.floats(0.0, 2.0),
    flows,
    temperatures,
    st.floats(0.0, 1.0),
)
def test_carbon_dioxide_does_not_see_how_time_is_split(
    t1: float, t2: float, v: float, output: float, air: float, t: float, supply: float
) -> None:
    more = {"temperature": t, "supply_co2": supply}
    middle = chamber.co2_pressure(t1, v, output, air, **more)
    whole = chamber.co2_pressure(t1 + t2, v, output, air, **more)
    assert chamber.co2_pressure(t2, v, output, air, initial=middle, **more) == pytest.approx(whole, rel=1e-11)
    if air > 100.0:
        steady = chamber.steady_co2_pressure(output, air, **more)
        assert chamber.co2_pressure(t1, v, output, air, initial=steady, **more) == pytest.approx(
            steady, rel=1e-12
        )
    share = doses.surface_equivalent(middle / 200.0, 200.0)
    assert chamber.co2_surface_equivalent(middle) == pytest.approx(share, rel=1e-13)


@covers("chamber.air_flow_for_co2")
@given(volumes, st.floats(0.1, 5.0), st.floats(0.2, 3.0), temperatures)
def test_times_and_flows_for_carbon_dioxide_put_back(v: float, output: float, limit: float, t: float) -> None:
    minutes = chamber.time_to_co2(limit, v, output, 0.0, temperature=t)
    assert chamber.co2_pressure(minutes, v, output, 0.0, temperature=t) == pytest.approx(limit, rel=1e-12)
    air = chamber.air_flow_for_co2(limit, output, temperature=t)
    assert chamber.steady_co2_pressure(output, air, temperature=t) == pytest.approx(limit, rel=1e-12)


@covers("chamber.standard_flow", "chamber.actual_flow")
@given(st.floats(0.1, 1e4), pressures, temperatures, temperatures)
def test_flows_come_back(flow: float, p: float, t: float, reference: float) -> None:
    standard = chamber.standard_flow(flow, p, t, reference)
    assert chamber.actual_flow(standard, p, t, reference) == pytest.approx(flow, rel=1e-13)
    # A flow is a volume a minute: the same as the combined gas law.
    as_volume = laws.combined_gas_volume(flow, p, 101.325, t, reference)
    assert standard == pytest.approx(as_volume, rel=1e-13)


@covers(
    "chamber.pressurization_gas", "chamber.compressor_flow", "chamber.cylinders_needed", "chamber.air_stock"
)
@given(volumes, st.floats(100.0, 300.0), st.floats(300.0, 700.0), st.floats(1.0, 60.0), flows)
def test_amounts_of_air_add_up(v: float, p1: float, p2: float, minutes: float, air: float) -> None:
    middle = (p1 + p2) / 2.0
    parts = chamber.pressurization_gas(v, p1, middle) + chamber.pressurization_gas(v, middle, p2)
    whole = chamber.pressurization_gas(v, p1, p2)
    assert parts == pytest.approx(whole, rel=1e-12)
    flow = chamber.compressor_flow(v, p1, p2, minutes, air)
    assert flow == pytest.approx(whole / minutes + chamber.standard_flow(air, p2, 0.0), rel=1e-12)
    count = chamber.cylinders_needed(whole, 50.0, 20000.0, 2000.0)
    held = [real_gas.free_gas_volume(p, "air", water_capacity=50.0, model="ideal") for p in (20000.0, 2000.0)]
    assert count * (held[0] - held[1]) == pytest.approx(whole, rel=1e-12)
    stock = chamber.air_stock(v, v)
    assert chamber.air_stock(2.0 * v, v) - stock == pytest.approx(5.0 * v, rel=1e-6)
    assert chamber.air_stock(v, 2.0 * v) - stock == pytest.approx(10.0 * v, rel=1e-6)


@covers("chamber.mask_oxygen", "chamber.mask_oxygen_stpd")
@given(st.floats(1.0, 60.0), st.floats(0.1, 120.0), pressures, pressures, st.floats(0.0, 1.0))
def test_oxygen_demand_does_not_see_a_split(
    flow: float, t: float, p1: float, p2: float, share: float
) -> None:
    middle = p1 + (p2 - p1) * share
    for f in (chamber.mask_oxygen, chamber.mask_oxygen_stpd):
        parts = f(flow, t * share, p1, middle) + f(flow, t * (1.0 - share), middle, p2)
        assert parts == pytest.approx(f(flow, t, p1, p2), rel=1e-12)
    dry = laws.convert_gas_volume(flow * t, "btps", "stpd", ambient_pressure=p1)
    assert chamber.mask_oxygen_stpd(flow, t, p1, p1) == pytest.approx(dry, rel=1e-12)


@covers("chamber.gauge_fall_time")
@given(volumes, st.floats(1.0, 50.0), st.floats(10.0, 2000.0), st.floats(150.0, 700.0))
def test_the_gauge_falls_as_gas_leaves(v: float, fall: float, flow: float, p: float) -> None:
    minutes = chamber.gauge_fall_time(v, fall, flow, p)
    # What left, as free gas, is what the fall of pressure took from the chamber.
    left = chamber.standard_flow(flow, p, 0.0) * minutes
    assert left == pytest.approx(chamber.pressurization_gas(v, 101.325, 101.325 + fall), rel=1e-10)


@covers(
    "chamber.isentropic_temperature",
    "chamber.filling_temperature",
    "chamber.filling_amount_ratio",
)
@given(temperatures, temperatures, st.floats(1.001, 8.0), st.floats(1.2, 1.67))
def test_heat_of_compression(t1: float, ts: float, ratio: float, gamma: float) -> None:
    p1, p2 = 101.325, 101.325 * ratio
    bound = chamber.isentropic_temperature(t1, p1, p2, gamma)
    assert chamber.isentropic_temperature(bound, p2, p1, gamma) == pytest.approx(t1, abs=1e-9)
    end = chamber.filling_temperature(t1, p1, p2, ts, gamma)
    assert chamber.filling_temperature(t1, p1, p1, ts, gamma) == pytest.approx(t1, abs=1e-10)
    moles = chamber.filling_amount_ratio(t1, p1, p2, ts, gamma)
    # Energy: n2 cv T2 = n1 cv T1 + (n2 - n1) cp Ts.
    energy = (t1 + 273.15) + (moles - 1.0) * gamma * (ts + 273.15)
    assert moles * (end + 273.15) == pytest.approx(energy, rel=1e-11)
    assert moles * (end + 273.15) / (t1 + 273.15) == pytest.approx(ratio, rel=1e-12)
    if ts == t1:
        assert end <= bound + 1e-9


@covers("chamber.temperature_after")
@given(st.floats(0.0, 60.0), st.floats(0.0, 60.0), st.floats(0.0, 90.0), temperatures, st.floats(0.2, 30.0))
def test_cooling_does_not_see_a_split(a: float, b: float, t: float, wall: float, tau: float) -> None:
    middle = chamber.temperature_after(a, t, wall, tau)
    whole = chamber.temperature_after(a + b, t, wall, tau)
    assert chamber.temperature_after(b, middle, wall, tau) == pytest.approx(whole, abs=1e-10)
    assert chamber.temperature_after(0.0, t, wall, tau) == pytest.approx(t, abs=1e-12)
    assert chamber.temperature_after(1e4, t, wall, tau) == pytest.approx(wall, abs=1e-10)


@covers("chamber.humidity_after")
@given(st.floats(0.01, 1.0), pressures, pressures, temperatures, temperatures)
def test_humidity_comes_back(humidity: float, p1: float, p2: float, t1: float, t2: float) -> None:
    there = chamber.humidity_after(humidity, p1, p2, t1, t2)
    assume(there <= 1.0)
    assert chamber.humidity_after(there, p2, p1, t2, t1) == pytest.approx(humidity, rel=1e-12)
    assert chamber.humidity_after(humidity, p1, p2) == pytest.approx(humidity * p2 / p1, rel=1e-13)


@covers("chamber.ventilator_volume")
@given(st.floats(0.1, 1.5), st.floats(0.1, 10.0), st.floats(0.1, 10.0))
def test_denser_gas_takes_volume_away(v: float, a: float, b: float) -> None:
    step = chamber.ventilator_volume(chamber.ventilator_volume(v, a), b)
    assume(step <= 5.0)
    assert step == pytest.approx(chamber.ventilator_volume(v, a * b), rel=1e-12)
    assert chamber.ventilator_volume(v, 1.0) == v
