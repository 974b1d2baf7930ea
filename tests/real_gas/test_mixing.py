"""Mixing rules written out as loops over all seven gases, against the bodies without loops."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

import gasphys as gp
from gasphys import real_gas
from gasphys.constants import GAS_CONSTANT
from gasphys.gas import FORMULAS
from gasphys.real_gas.data import MOLAR_MASSES, data, pair
from gasphys.real_gas.peng_robinson import peng_robinson_attraction, peng_robinson_covolume
from gasphys.real_gas.virial import virial_stiffness

polynomial = np.polynomial.polynomial.polyval

STATES = [
    (dict(zip(FORMULAS, np.random.default_rng(k).dirichlet(np.ones(7)), strict=True)), t)
    for k, t in enumerate((-12.0, 3.0, 25.0, 50.0))
]

each_state = pytest.mark.parametrize(("x", "t"), STATES, ids=[f"{t} degC" for _, t in STATES])


@pytest.fixture(autouse=True)
def _quiet():
    # Far more carbon dioxide than a trace, so that each of its terms counts.
    with gp.validity("ignore"):
        yield


def virial_coefficients(x: dict[str, float], t: float) -> tuple[float, float, float, float]:
    xi = 298.15 / (t + 273.15) - 1.0
    pure = data("virial")["pure"]
    listed = {frozenset(r["gases"]): r["B"] for r in data("virial")["cross"]}
    b = 0.0
    for i, j in itertools.product(FORMULAS, repeat=2):
        series = listed.get(frozenset((i, j)))
        mean = 0.5 * (polynomial(xi, pure[i]["B"]) + polynomial(xi, pure[j]["B"]))
        b += x[i] * x[j] * (mean if series is None else polynomial(xi, series))
    c = sum(x[g] * polynomial(xi, pure[g]["C"]) ** (1.0 / 3.0) for g in FORMULAS) ** 3
    d = sum(x[g] * pure[g].get("D", 0.0) ** 0.25 for g in FORMULAS) ** 4
    e = sum(x[g] * polynomial(xi, pure[g].get("E", [0.0])) for g in FORMULAS)
    return float(b), float(c), float(d), float(e)


@each_state
def test_virial_coefficients(x: dict[str, float], t: float) -> None:
    b, c, d, e = virial_coefficients(x, t)
    assert real_gas.second_virial(*x.values(), t) == pytest.approx(b, rel=1e-12)
    assert real_gas.third_virial(*x.values(), t) == pytest.approx(c, rel=1e-12)
    assert real_gas.fourth_virial(*list(x.values())[:-1]) == pytest.approx(d, rel=1e-12)
    assert real_gas.fifth_virial(x["O2"], x["N2"], x["Ar"], t) == pytest.approx(e, rel=1e-12)


@each_state
def test_pressure_of_the_series(x: dict[str, float], t: float) -> None:
    mass = sum(x[g] * float(MOLAR_MASSES[g]) for g in FORMULAS)
    for density in (0.5, 20.0, 150.0):
        n = density / mass / 1000.0  # mol/cm3
        z = 1.0 + sum(k * n**p for p, k in enumerate(virial_coefficients(x, t), start=1))
        expected = density / mass * float(GAS_CONSTANT) * (t + 273.15) * z
        f = real_gas.pressure_at_density.pick(model="virial")
        assert f(density, *x.values(), t) == pytest.approx(expected, rel=1e-12)


@each_state
def test_peng_robinson_parameters(x: dict[str, float], t: float) -> None:
    file = data("peng_robinson")
    kappa = file["universal"]["kappa"]
    r, kelvin = float(GAS_CONSTANT), t + 273.15
    binary = {frozenset(row["gases"]): row["k"] for row in file["cross"]}
    a, b = {}, {}
    for gas, row in file["pure"].items():
        tc, pc = row["critical_temperature_K"], row["critical_pressure_kPa"]
        m = polynomial(row["acentric_factor"], kappa)
        alpha = (1.0 + m * (1.0 - (kelvin / tc) ** 0.5)) ** 2
        a[gas] = file["universal"]["a"] * r**2 * tc**2 / pc * alpha
        b[gas] = file["universal"]["b"] * r * tc / pc
    attraction = sum(
        x[i] * x[j] * (a[i] * a[j]) ** 0.5 * (1.0 - binary.get(frozenset((i, j)), 0.0))
        for i, j in itertools.product(FORMULAS, repeat=2)
    )
    covolume = sum(x[g] * b[g] for g in FORMULAS)
    assert peng_robinson_attraction(*x.values(), t) == pytest.approx(attraction, rel=1e-12)
    assert peng_robinson_covolume(*x.values()) == pytest.approx(covolume, rel=1e-12)
    mass = sum(x[g] * float(MOLAR_MASSES[g]) for g in FORMULAS)
    v = mass / 60.0  # L/mol
    expected = r * kelvin / (v - covolume) - attraction / (v * (v + covolume) + covolume * (v - covolume))
    f = real_gas.pressure_at_density.pick(model="peng_robinson_1976")
    assert f(60.0, *x.values(), t) == pytest.approx(expected, rel=1e-12)


@each_state
def test_uncertainty(x: dict[str, float], t: float) -> None:
    coefficient = sum(
        2.0 * x[i] * x[j] * pair(i, j).uncertainty
        for i, j in itertools.combinations(FORMULAS, 2)
        if pair(i, j).quality != "good"
    )
    for pressure, series in ((3000.0, 5e-4), (12000.0, 1.5e-3), (25000.0, 3e-3)):
        density = real_gas.density.pick(model="virial")(pressure, *x.values(), t)
        c = density / sum(x[g] * float(MOLAR_MASSES[g]) for g in FORMULAS)
        stiffness = virial_stiffness(c, *virial_coefficients(x, t))
        f = real_gas.uncertainty.pick(model="virial")
        assert f(pressure, *x.values(), t) == pytest.approx(
            series + coefficient * c / 1000.0 / stiffness, rel=1e-12
        )


@each_state
def test_sums_over_the_gases(x: dict[str, float], t: float) -> None:
    rows = data("transport")["gas"]
    heat = sum(
        x[g] * (rows[g]["cp0_298"] + (rows[g]["cp0_310"] - rows[g]["cp0_298"]) * (t - 25.0) / 12.0)
        for g in FORMULAS
    )
    assert real_gas.heat_capacity.pick(model="ideal_sum")(*x.values(), t) == pytest.approx(heat, rel=1e-12)
    densities = data("virial")["density_at_0_degC_1_atm"]
    scaled = 3.0 * sum(x[g] * densities[g] for g in FORMULAS)
    f = real_gas.reference_density.pick(rule="scaled_1_atm")
    assert f(3.0 * 101.325, *x.values()) == pytest.approx(scaled, rel=1e-12)
    mass = sum(x[g] * float(MOLAR_MASSES[g]) for g in FORMULAS)
    slope = sum(x[g] * rows[g].get("a", 0.0) for g in FORMULAS)
    viscosity = real_gas.viscosity.pick(model="wilke_1950")
    rise = viscosity(*x.values(), t, 40.0) - viscosity(*x.values(), t)
    assert rise == pytest.approx(slope * 40.0 / mass, rel=1e-9)
