"""Properties of the gas laws, of what is breathed, and of sea water by two standards."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gasphys import breathing_gas, gas_exchange, laws, lungs, surroundings

from .coverage import covers

pressures = st.floats(20.0, 3000.0)
temperatures = st.floats(-40.0, 90.0)
fractions = st.floats(0.0, 1.0)


@covers("laws.charles_volume", "laws.gay_lussac_pressure", "laws.combined_gas_volume", "laws.boyle_volume")
@given(st.floats(0.01, 100.0), pressures, pressures, temperatures, temperatures)
def test_combined_law_is_boyle_then_charles(v: float, p1: float, p2: float, t1: float, t2: float) -> None:
    stepwise = laws.charles_volume(laws.boyle_volume(v, p1, p2), t1, t2)
    assert laws.combined_gas_volume(v, p1, p2, t1, t2) == pytest.approx(stepwise, rel=1e-13)
    # At the volume it began with, the pressure is Gay-Lussac's.
    assert laws.combined_gas_volume(v, p1, laws.gay_lussac_pressure(p1, t1, t2), t1, t2) == pytest.approx(
        v, rel=1e-13
    )


@covers("laws.graham_rate_ratio")
@given(st.floats(2.0, 200.0), st.floats(2.0, 200.0))
def test_graham_turned_round_is_the_reciprocal(m1: float, m2: float) -> None:
    assert laws.graham_rate_ratio(m1, m2) * laws.graham_rate_ratio(m2, m1) == pytest.approx(1.0, rel=1e-14)
    assert laws.graham_rate_ratio(m1, m1) == 1.0
    assert (laws.graham_rate_ratio(m1, m2) > 1.0) == (m2 > m1) or m1 == pytest.approx(m2)


@covers(
    "breathing_gas.open_circuit_po2",
    "breathing_gas.open_circuit_inert_pressure",
    "breathing_gas.fraction_breathed",
)
@given(fractions, pressures)
def test_open_circuit_partial_pressures_add_up(oxygen: float, pressure: float) -> None:
    po2 = breathing_gas.open_circuit_po2(oxygen, pressure)
    inert = breathing_gas.open_circuit_inert_pressure(1.0 - oxygen, pressure)
    assert po2 + inert == pytest.approx(pressure, rel=1e-13)
    assert breathing_gas.fraction_breathed(po2, pressure) == pytest.approx(oxygen, rel=1e-13)


@covers("breathing_gas.loop_po2", "breathing_gas.loop_inert_pressure")
@given(st.floats(40.0, 200.0), pressures, st.floats(0.0, 0.9), fractions)
def test_loop_pressures_add_up_and_never_exceed_ambient(
    setpoint: float, pressure: float, oxygen: float, share: float
) -> None:
    po2 = breathing_gas.loop_po2(setpoint, pressure)
    assert po2 <= min(setpoint, pressure)
    helium, nitrogen = (1.0 - oxygen) * share, (1.0 - oxygen) * (1.0 - share)
    he = breathing_gas.loop_inert_pressure(pressure, po2, helium, oxygen)
    n2 = breathing_gas.loop_inert_pressure(pressure, po2, nitrogen, oxygen)
    assert he + n2 + po2 == pytest.approx(pressure, rel=1e-12)
    assert he * (1.0 - share) == pytest.approx(n2 * share, rel=1e-9, abs=1e-9)


@covers("breathing_gas.loop_inert_pressure")
@given(pressures)
def test_a_loop_on_pure_oxygen_holds_no_inert_gas(pressure: float) -> None:
    assert breathing_gas.loop_inert_pressure(pressure, min(pressure, 130.0), 0.0, 1.0) == 0.0


@covers("breathing_gas.linear_in_piece")
@given(pressures, pressures, fractions)
def test_a_piece_turned_round_is_the_same_line(start: float, end: float, share: float) -> None:
    there = breathing_gas.linear_in_piece(start, end, share)
    back = breathing_gas.linear_in_piece(end, start, 1.0 - share)
    assert there == pytest.approx(back, rel=1e-12)
    assert min(start, end) - 1e-9 <= there <= max(start, end) + 1e-9


@covers("gas_exchange.arterial_po2_from_ratio")
@given(st.floats(5.0, 260.0), st.floats(0.75, 1.0))
def test_ratio_scales_and_one_is_identity(alveolar: float, ratio: float) -> None:
    assert gas_exchange.arterial_po2_from_ratio(alveolar, 1.0) == alveolar
    half = gas_exchange.arterial_po2_from_ratio(alveolar / 2.0, ratio)
    assert gas_exchange.arterial_po2_from_ratio(alveolar, ratio) == pytest.approx(2.0 * half, rel=1e-14)


@covers("surroundings.depth_at_pressure[teos10]", "surroundings.pressure_at_depth[teos10]")
@given(st.floats(0.1, 1000.0), st.floats(-90.0, 90.0))
def test_sea_water_by_two_standards(depth: float, latitude: float) -> None:
    p = surroundings.pressure_at_depth(depth, water="teos10", latitude=latitude)
    assert surroundings.depth_at_pressure(p, water="teos10", latitude=latitude) == pytest.approx(
        depth, rel=1e-9
    )
    other = surroundings.depth_at_pressure(p, water="unesco_1983", latitude=latitude)
    assert other == pytest.approx(depth, rel=2e-4)


def test_sea_water_within_0_02_percent_of_gsw() -> None:
    import gsw

    depth = np.linspace(0.5, 1000.0, 500)
    for latitude in (0.0, 45.0, 90.0):
        expected = gsw.p_from_z(-depth, latitude) * 10.0
        for water in ("unesco_1983", "teos10"):
            got = surroundings.pressure_at_depth(depth, water=water, latitude=latitude) - 101.325
            np.testing.assert_allclose(got, expected, rtol=2e-4)
            back = surroundings.depth_at_pressure(expected + 101.325, water=water, latitude=latitude)
            np.testing.assert_allclose(back, depth, rtol=2e-4)


@covers("laws.convert_gas_volume[atps,stpd]")
@given(st.one_of(st.floats(36.5, 36.999), st.floats(37.001, 37.5)))
def test_room_gas_follows_the_saturation_formula_away_from_37_degrees(temperature: float) -> None:
    vapor = lungs.water_vapor_pressure(temperature)
    expected = (101.325 - vapor) / 101.325 * 273.15 / (temperature + 273.15)
    assert laws.convert_gas_volume(1.0, "atps", "stpd", temperature=temperature) == pytest.approx(
        expected, rel=1e-12
    )
