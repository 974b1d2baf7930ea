"""Vapor pressure, sea water and atmosphere against general-purpose reference libraries."""

from __future__ import annotations

import gsw
import mpmath as mp
import numpy as np
import pytest
from iapws import IAPWS95, IAPWS97

import gasphys as gp
from gasphys import laws, lungs, surroundings

mp.mp.dps = 40


@pytest.mark.parametrize("celsius", [0.1, *range(1, 46)])
def test_vapor_pressure_is_that_of_iapws(celsius: float) -> None:
    ours = lungs.water_vapor_pressure(celsius)
    exact = IAPWS95(T=celsius + 273.15, x=0.0).P * 1e3
    assert ours == pytest.approx(exact, rel=5e-4)
    if celsius >= 1.0:  # the industrial formulation ends above the triple point
        assert ours == pytest.approx(IAPWS97(T=celsius + 273.15, x=0.0).P * 1e3, rel=5e-4)
    assert ours == pytest.approx(exact, rel=1e-4), "the docstring says 0.01 %"


LATITUDES = [0.0, 4.0, 45.0, -45.0, 90.0]


@pytest.mark.parametrize("latitude", LATITUDES)
def test_sea_water_by_unesco_is_close_to_teos_10(latitude: float) -> None:
    """Two standards for the same ocean: within 1 mm to 1000 dbar, 0.11 m at 5000 dbar; never equal."""
    p = np.array([10.0, 50.0, 125.0, 250.0, 600.0, 1000.0])
    depth = surroundings.depth_at_pressure(101.325 + 10.0 * p, water="unesco_1983", latitude=latitude)
    exact = -gsw.z_from_p(p, latitude)
    np.testing.assert_allclose(depth, exact, rtol=2e-4, atol=0.0)
    np.testing.assert_allclose(depth, exact, rtol=0.0, atol=0.002)
    pressure = surroundings.pressure_at_depth(exact, water="unesco_1983", latitude=latitude)
    np.testing.assert_allclose(pressure - 101.325, 10.0 * p, rtol=2e-4)
    deep = surroundings.depth_at_pressure.pick(water="unesco_1983").raw(101.325 + 5e4, latitude, 101.325)
    assert abs(deep + gsw.z_from_p(5000.0, latitude)) < 0.15


def test_unesco_beyond_what_a_person_meets() -> None:
    """Published rows deeper than the possible range of ambient pressure, by the body itself."""
    f = surroundings.depth_at_pressure.pick(water="unesco_1983")
    # Fofonoff & Millard 1983, 5000 dbar at 60 degrees: 4895.60 m.
    assert f.raw(101.325 + 5e4, 60.0, 101.325) == pytest.approx(4895.60, abs=0.01)
    # The same paper, from memory: 10 000 dbar at 30 degrees is 9712.653 m.
    assert f.raw(101.325 + 1e5, 30.0, 101.325) == pytest.approx(9712.653, abs=0.0005)
    # Saunders 1981, another formula: 7321.45 m at 30 degrees is 7500.0065 dbar. They differ by 0.02 %.
    assert f.raw(101.325 + 75000.065, 30.0, 101.325) == pytest.approx(7321.45, rel=3e-4)
    # Degrees taken as radians and the two traps of the coefficients would be seen.
    assert abs(f.raw(101.325 + 5e4, np.radians(60.0), 101.325) - 4895.60) > 1.0


@pytest.mark.parametrize("latitude", LATITUDES)
def test_sea_water_by_teos_10_is_gsw(latitude: float) -> None:
    depth = np.array([0.0, 10.0, 18.0, 100.0, 1000.0])
    ours = surroundings.pressure_at_depth(depth, water="teos10", latitude=latitude)
    np.testing.assert_allclose(ours, 101.325 + 10.0 * gsw.p_from_z(-depth, latitude), rtol=1e-12)


@pytest.mark.parametrize("altitude", [-400.0, 0.0, 500.0, 2438.4, 5000.0, 8848.0, 11000.0])
def test_atmosphere_is_the_integral_of_its_own_density(altitude: float) -> None:
    """dp = -g p M/(R T) dH with the 1976 constants, by quadrature; the exponent follows, it is not put in."""
    g, m, r, lapse, t0 = (mp.mpf(x) for x in ("9.80665", "0.0289644", "8.31432", "0.0065", "288.15"))
    radius = mp.mpf(6356766)
    height = radius * altitude / (radius + altitude)
    exact = 101.325 * mp.exp(-mp.quad(lambda h: g * m / (r * (t0 - lapse * h)), [0, height]))
    assert surroundings.standard_atmosphere_pressure(altitude) == pytest.approx(float(exact), rel=2e-7)


@pytest.mark.parametrize("pascal", [22700.0, 54048.3, 89876.3, 101325.0, 107000.0])
def test_altitude_is_the_closed_form_turned_round(pascal: float) -> None:
    height = 288.15 / 0.0065 * (1.0 - (pascal / 101325.0) ** (1.0 / 5.255876))
    exact = 6356766.0 * height / (6356766.0 - height)
    assert surroundings.altitude_at_pressure(pascal / 1e3) == pytest.approx(exact, rel=1e-9, abs=1e-6)


def test_gas_volumes_follow_from_moles() -> None:
    """The same moles of dry gas in two states, by the gas law alone."""
    r = 8.31446261815324
    for p, t, humidity in [(101.325, 20.0, 1.0), (283.71, 25.0, 0.4), (70.0, 5.0, 0.0)]:
        vapor = humidity * IAPWS95(T=t + 273.15, x=0.0).P * 1e3
        moles = (p - vapor) * 2.0 / (r * (t + 273.15))
        stpd = moles * r * 273.15 / 101.325
        btps = moles * r * 310.15 / (p - 47.0 * 0.133322387415)
        room = {"ambient_pressure": p, "temperature": t, "relative_humidity": humidity}
        assert laws.convert_gas_volume(2.0, "atps", "stpd", **room) == pytest.approx(stpd, rel=1e-5)
        assert laws.convert_gas_volume(2.0, "atps", "btps", **room) == pytest.approx(btps, rel=1e-5)


def test_ideal_density_follows_from_the_elements() -> None:
    """Molar masses by another library, density by the gas law."""
    from chemicals import MW

    cas = {"O2": "7782-44-7", "N2": "7727-37-9", "He": "7440-59-7", "Ar": "7440-37-1", "CO2": "124-38-9"}
    gas = gp.Gas(oxygen=0.2, helium=0.3, argon=0.05, carbon_dioxide=0.01)
    mass = sum(gas.fraction(k) * MW(v) for k, v in cas.items())
    exact = 405.3 * mass / (8.31446261815324 * 310.15)
    assert gp.real_gas.density(405.3, gas, temperature=37.0, model="ideal") == pytest.approx(exact, rel=2e-5)
