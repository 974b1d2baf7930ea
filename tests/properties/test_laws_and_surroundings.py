"""Gas laws, gas volumes, depth and altitude: round trips, limits, monotone behavior."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

import gasphys as gp
from gasphys import laws, lungs, surroundings

from .coverage import covers, members

pressures = st.floats(20.0, 3000.0)
volumes = st.floats(0.001, 1000.0)
fractions = st.floats(0.0, 1.0)

STATES = ("stpd", "btps", "atps")
PAIRS = list(itertools.product(STATES, STATES))


@covers("laws.boyle_volume")
@given(volumes, pressures, pressures, pressures)
def test_boyle_comes_back_and_does_not_see_the_way(v: float, p1: float, p2: float, p3: float) -> None:
    there = laws.boyle_volume(v, p1, p2)
    assert laws.boyle_volume(there, p2, p1) == pytest.approx(v, rel=1e-14)
    assert laws.boyle_volume(there, p2, p3) == pytest.approx(laws.boyle_volume(v, p1, p3), rel=1e-14)
    assert there * p2 == pytest.approx(v * p1, rel=1e-14)


@covers("laws.dalton_partial_pressure", "laws.henry_dissolved_gas")
@given(fractions, pressures, st.floats(0.001, 1.0))
def test_partial_pressures_add_up_and_dissolve_in_proportion(f: float, p: float, solubility: float) -> None:
    parts = [laws.dalton_partial_pressure(x, p) for x in (f, 1.0 - f)]
    assert sum(parts) == pytest.approx(p, rel=1e-14)
    content = sum(laws.henry_dissolved_gas(x, solubility) for x in parts)
    assert content == pytest.approx(laws.henry_dissolved_gas(p, solubility), rel=1e-13)


@covers(*members("laws.convert_gas_volume"))
@pytest.mark.parametrize(("source", "target"), PAIRS)
@given(volumes, pressures, st.floats(0.0, 45.0), fractions, st.sampled_from(STATES))
def test_gas_volumes_come_back_by_any_way(
    source: str, target: str, v: float, p: float, t: float, humidity: float, via: str
) -> None:
    room = {"ambient_pressure": p, "temperature": t, "relative_humidity": humidity}

    def convert(volume: float, start: str, end: str) -> float:
        result: float = laws.convert_gas_volume(volume, start, end, **room)
        return result

    there = convert(v, source, target)
    assert convert(there, target, source) == pytest.approx(v, rel=1e-13)
    assert convert(convert(v, source, via), via, target) == pytest.approx(there, rel=1e-13)
    assert convert(2.0 * v, source, target) == pytest.approx(2.0 * there, rel=1e-14)


@covers(*members("laws.convert_gas_volume"))
@given(volumes, st.floats(20.0, 3000.0), st.floats(0.0, 36.0))
def test_drier_colder_and_denser_states_hold_less(v: float, p: float, t: float) -> None:
    assert laws.convert_gas_volume(v, "btps", "atps", p, t) < v
    assert laws.convert_gas_volume(v, "atps", "stpd", 101.325, t) < v
    assert laws.convert_gas_volume(v, "stpd", "btps", 2.0 * p) < laws.convert_gas_volume(v, "stpd", "btps", p)


@covers(*members("surroundings.pressure_at_depth"), *members("surroundings.depth_at_pressure"))
@pytest.mark.parametrize("water", list(surroundings.WATERS))
@given(st.floats(0.0, 1000.0), st.floats(-90.0, 90.0), st.floats(60.0, 105.0), st.floats(0.001, 100.0))
def test_depth_comes_back_and_pressure_grows_with_it(
    water: str, depth: float, latitude: float, surface: float, more: float
) -> None:
    place = {"water": water, "latitude": latitude, "surface_pressure": surface}
    pressure = surroundings.pressure_at_depth(depth, **place)
    assert surroundings.depth_at_pressure(pressure, **place) == pytest.approx(depth, rel=1e-9, abs=1e-9)
    assert surroundings.pressure_at_depth(depth + more, **place) > pressure
    assert surroundings.pressure_at_depth(0.0, **place) == pytest.approx(surface, rel=1e-12)


@covers("surroundings.pressure_at_depth[unesco_1983]")
@given(st.floats(1.0, 1000.0), st.floats(0.0, 89.0))
def test_gravity_grows_toward_the_poles(depth: float, latitude: float) -> None:
    def at(degrees: float) -> float:
        result: float = surroundings.pressure_at_depth(depth, "unesco_1983", latitude=degrees)
        return result

    assert at(latitude) == pytest.approx(at(-latitude), rel=1e-14)
    assert at(latitude + 1.0) > at(latitude)


@covers("surroundings.standard_atmosphere_pressure", "surroundings.altitude_at_pressure")
@given(st.floats(-499.0, 11000.0), st.floats(0.5, 18.0))
def test_altitude_comes_back_and_pressure_falls(altitude: float, more: float) -> None:
    pressure = surroundings.standard_atmosphere_pressure(altitude)
    assert surroundings.altitude_at_pressure(pressure) == pytest.approx(altitude, abs=1e-6)
    assert surroundings.standard_atmosphere_pressure(altitude + more) < pressure


@covers("lungs.alveolar_po2")
@given(pressures, st.floats(2.0, 9.0), st.floats(0.1, 2.0), st.floats(0.1, 2.0))
def test_on_pure_oxygen_the_exchange_ratio_does_not_matter(
    p: float, pco2: float, ratio: float, other: float
) -> None:
    assume(p > pco2 + 7.0)
    by_ratio = [lungs.alveolar_po2(p, 1.0, pco2, respiratory_exchange_ratio=r) for r in (ratio, other)]
    assert by_ratio == pytest.approx([p - 6.2661522 - pco2] * 2, rel=1e-7)
    assert by_ratio[0] == pytest.approx(by_ratio[1], rel=1e-12)


@covers("lungs.alveolar_po2")
@given(st.floats(90.0, 3000.0), st.floats(0.21, 1.0), st.floats(2.0, 9.0))
def test_at_a_ratio_of_one_oxygen_and_carbon_dioxide_change_places(
    p: float, fio2: float, pco2: float
) -> None:
    ours = lungs.alveolar_po2(p, fio2, pco2, respiratory_exchange_ratio=1.0)
    assert ours == pytest.approx(lungs.inspired_po2(p, fio2) - pco2, rel=1e-12)


@covers("blood.o2_saturation[severinghaus_1979]", "blood.o2_content[severinghaus_1979]")
@given(st.lists(st.floats(0.01, 399.0), min_size=2, max_size=30, unique=True))
def test_saturation_and_content_rise_with_po2(po2: list[float]) -> None:
    x = np.sort(np.array(po2))
    assume(np.all(np.diff(x) > 1e-6))
    assert np.all(np.diff(gp.blood.o2_saturation(x)) >= 0.0)
    assert np.all(np.diff(gp.blood.o2_content(x)) > 0.0)


@covers("doses.uptd", "doses.uptd_ramp")
@given(
    st.floats(5.0, 400.0),
    st.floats(5.0, 400.0),
    st.floats(0.1, 600.0),
    st.floats(0.0, 1.0),
    st.sampled_from([5.0 / 6.0, 0.83, 1.0]),
)
def test_a_ramp_may_be_cut_anywhere(start: float, end: float, t: float, cut: float, exponent: float) -> None:
    middle = start + cut * (end - start)
    whole = gp.doses.uptd_ramp(start, end, t, exponent)
    parts = gp.doses.uptd_ramp(start, middle, cut * t, exponent) + gp.doses.uptd_ramp(
        middle, end, (1.0 - cut) * t, exponent
    )
    assert parts == pytest.approx(whole, rel=1e-9, abs=1e-9)
    assert gp.doses.uptd_ramp(end, start, t, exponent) == pytest.approx(whole, rel=1e-12, abs=1e-12)
    low, high = sorted(gp.doses.uptd(p, t, exponent) for p in (start, end))
    assert low * (1.0 - 1e-12) <= whole <= high * (1.0 + 1e-12)
