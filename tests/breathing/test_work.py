"""Closed forms of work against quadrature and numerical minimization; limits as data; what is refused."""

from __future__ import annotations

import csv
import itertools
from importlib import resources

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.optimize import minimize_scalar

import gasphys as gp
from gasphys import breathing
from gasphys.errors import RangeError, UnknownNameError, ValidityError

GASES = list(itertools.product((1.0, 4.0, 10.0), (0.8, 1.18), (0.0, 0.3)))


@pytest.mark.parametrize(("density", "viscosity", "tissue"), GASES)
@pytest.mark.parametrize("ventilation", [10.0, 40.0, 62.5, 90.0])
def test_resistive_work_is_the_integral_over_a_sinusoidal_breath(density, viscosity, tissue, ventilation):
    tidal, rate = 2.0, ventilation / 2.0 / 60.0
    peak = np.pi * rate * tidal

    def power(t: float) -> float:
        flow = peak * np.sin(2.0 * np.pi * rate * t)
        pressure = breathing.airway_pressure(flow * 60.0, density, viscosity, tissue_share=tissue)
        return float(pressure * flow)

    period = 1.0 / rate
    both = sum(
        quad(power, a, b, epsabs=1e-12, epsrel=1e-12)[0] for a, b in ((0.0, period / 2), (period / 2, period))
    )
    found = breathing.resistive_work(ventilation, density, viscosity, tissue_share=tissue)
    assert found == pytest.approx(both / tidal, rel=1e-10)


@pytest.mark.parametrize("ventilation", [15.0, 75.0])
def test_square_wave_is_constant_flow_in_and_out(ventilation):
    pressure = breathing.airway_pressure(2.0 * ventilation, 3.0)
    assert breathing.resistive_work(ventilation, 3.0, wave="square") == pytest.approx(
        2.0 * pressure, rel=1e-12
    )


@pytest.mark.parametrize("k2", [0.0, 0.03, 0.12, 0.6])
@pytest.mark.parametrize("alveolar", [6.0, 20.0, 50.0])
def test_optimum_frequency_is_the_numerical_minimum(k2, alveolar):
    def power(rate: float) -> float:
        return float(
            breathing.inspiratory_power(rate, breathing.tidal_volume(rate, alveolar, 0.2), 0.834, 0.24, k2)
        )

    found = minimize_scalar(power, bounds=(4.0, 100.0), method="bounded", options={"xatol": 1e-7}).x
    assert breathing.optimum_frequency(0.834, alveolar, 0.2, 0.24, k2) == pytest.approx(found, rel=1e-5)


def test_inspiratory_power_is_the_integral_over_half_a_breath():
    rate, tidal, elastance, k1, k2 = 20.0, 1.2, 0.9, 0.3, 0.1
    omega = 2.0 * np.pi * rate / 60.0

    def power(t: float) -> float:
        volume = tidal / 2.0 * (1.0 - np.cos(omega * t))
        flow = tidal / 2.0 * omega * np.sin(omega * t)
        return float((elastance * volume + k1 * flow + k2 * flow * flow) * flow)

    work = quad(power, 0.0, np.pi / omega, epsabs=1e-13)[0]
    found = breathing.inspiratory_power(rate, tidal, elastance, k1, k2)
    assert found == pytest.approx(work * rate / 60.0, rel=1e-10)


def test_otis_and_density_signature():
    """Resistance rises little with density at rest, much in work: Held & Pendergast 2013, +19 % and +75 %."""
    rise = [breathing.airway_resistance(f, 4.6) / breathing.airway_resistance(f) - 1.0 for f in (30.0, 120.0)]
    assert rise[0] == pytest.approx(0.19, abs=0.04)
    assert rise[1] == pytest.approx(0.75, abs=0.05)


def test_measured_oxygen_cost_lies_in_the_range_of_efficiency():
    """1.17 (SD 0.26) and 1.21 (SD 0.42) mL a liter at moderate ventilation; efficiency 5-10 %."""
    work = breathing.work_of_breathing(breathing.resistive_work(60.0), breathing.elastic_work(1.5, 0.834))
    power = breathing.breathing_power(work, 60.0)
    cost = [1000.0 * breathing.oxygen_cost_of_breathing(power, e) / 60.0 for e in (0.10, 0.05)]
    assert cost[0] < 1.21 < cost[1]


def test_cherry_2009_is_the_evidence_beside_the_illustration():
    """PaCO2 46.1 mmHg at 4.7 atm abs against 34.2 immersed at 1: the illustration rises too, less surely."""
    surface, deep = (
        breathing.illustrative_arterial_pco2(2.0, d, 150.0, exponent=1.0 / 3.0) for d in (1.0, 4.76)
    )
    assert deep > surface
    low, high = (breathing.illustrative_arterial_pco2(2.0, 4.76, 150.0, exponent=m) for m in (0.2, 0.5))
    # The exponent nobody measured moves the result as much as the whole rise is uncertain.
    assert high - low > 0.3
    assert "illustrative" in breathing.illustrative_arterial_pco2._spec.labels


def test_warkander_is_refused_beyond_its_range():
    with gp.validity("raise"):
        with pytest.raises(ValidityError, match="57 msw"):
            breathing.external_work_limit(58.0)
        with pytest.raises(RangeError, match="0 to 60 msw"):
            breathing.external_work_limit(100.0)
    with pytest.raises(UnknownNameError, match="warkander_2007"):
        breathing.external_work_limit(0.0, model="warkander_2017")


#: The sheet's table of apparatus limits, typed again: number and unit, provenance.
LIMITS = {
    "warkander_2007_work": ("", "J/L", "read"),
    "warkander_2007_elastance": ("0.7", "kPa/L", "read"),
    "warkander_2007_load_vertical_low": ("0.4", "kPa", "read"),
    "warkander_2007_load_vertical_high": ("2.9", "kPa", "read"),
    "warkander_2007_load_horizontal_low": ("-0.3", "kPa", "read"),
    "warkander_2007_load_horizontal_high": ("1.7", "kPa", "read"),
    "warkander_1992_work_low": ("1.5", "J/L", "read"),
    "warkander_1992_work_high": ("2.0", "J/L", "read"),
    "en250_work": ("3.0", "J/L", "secondary"),
    "en250_inhalation_pressure": ("-25", "mbar", "secondary"),
    "en250_exhalation_pressure": ("25", "mbar", "secondary"),
    "en250_positive_inhalation_work": ("0.3", "J/L", "secondary"),
    "morrison_reimers_preferred": ("", "J/L", "memory_medium"),
    "morrison_reimers_maximum": ("", "J/L", "memory_medium"),
    "nedu_goal_open_circuit": ("0.14", "kgf*m/L", "memory_medium"),
    "nedu_goal_surface_supplied": ("0.18", "kgf*m/L", "memory_medium"),
    "nedu_goal_closed_circuit": ("2.75", "J/L", "memory_medium"),
}


def test_apparatus_limits_as_printed():
    text = resources.files("gasphys.breathing").joinpath("apparatus_limits.csv").read_text(encoding="utf-8")
    rows = {r["id"]: r for r in csv.DictReader(text.splitlines(), strict=True)}
    assert set(rows) == set(LIMITS)
    for name, (value, unit, known) in LIMITS.items():
        assert (rows[name]["value"], rows[name]["unit"], rows[name]["provenance"]) == (value, unit, known)
        assert rows[name]["comparison"] == (
            ">=" if ("load" in name and name.endswith("low")) or "inhalation_pressure" in name else "<="
        )
    ds = breathing.apparatus_limits()
    found = {str(n): float(ds.limit_value.sel(limit=n)) for n in ds.limit.values}
    assert found["en250_exhalation_pressure"] == pytest.approx(2.5, rel=1e-12)
    assert found["nedu_goal_open_circuit"] == pytest.approx(1.37, abs=0.005)
    assert found["nedu_goal_surface_supplied"] == pytest.approx(1.76, abs=0.006)
    conditions = {
        "warkander_1992_work_low": (30.0, 75.0, 1.45 * 101.325, 6.8 * 101.325),
        "en250_work": (62.5, 62.5, 600.0, 600.0),
        "nedu_goal_open_circuit": (62.5, 62.5, 101.325, 198 * 101.325 / 33 + 101.325),
        "nedu_goal_closed_circuit": (75.0, 75.0, np.nan, np.nan),
    }
    for name, ends in conditions.items():
        row = ds.sel(limit=name)
        given = [
            float(row[f"{what}_{end}"]) for what in ("ventilation", "pressure") for end in ("low", "high")
        ]
        assert given == pytest.approx(ends, rel=0.01, nan_ok=True)
