"""Coburn-Forster-Kane: the printed differential equation integrated, the pressure trap, the band."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp

import gasphys as gp
from gasphys import blood

MMHG = gp.convert(1.0, "mmHg", "kPa")

# In the units of the paper: mL, min, mmHg.
VB, M, DL, VA, VCO, HB = 5500.0, 218.0, 30.0, 5000.0, 0.007, 15.0
CAPACITY = 1.38 * HB / 100.0
B = 1.0 / DL + 760.0 * 310.15 / 273.15 / VA


def _integrate(start, pico, pco2, minutes, o2hb=None):
    def rate(_, cohb):
        free = CAPACITY - cohb if o2hb is None else o2hb
        return VCO / VB + (pico - cohb * pco2 / (M * free)) / (VB * B)

    found = solve_ivp(rate, (0.0, minutes), [start * CAPACITY], rtol=1e-11, atol=1e-14, method="DOP853")
    return found.y[0, -1] / CAPACITY


def _inputs(pico, pco2):
    return {
        "inspired_pco": pico * MMHG,
        "capillary_po2": pco2 * MMHG,
        "alveolar_ventilation_btps": VA / 1000.0,
        "co_diffusing_capacity": DL / MMHG,
        "blood_volume": VB / 1000.0,
        "haldane_affinity": M,
        "co_production_stpd": VCO / 1000.0,
        "hemoglobin": HB,
    }


CASES = [(0.01, 0.0713, 100.0), (0.31, 0.0, 664.0), (0.31, 0.0, 1804.0), (0.2, 0.02, 60.0)]


@pytest.mark.parametrize(("start", "pico", "pco2"), CASES)
def test_linear_against_the_differential_equation(start, pico, pco2):
    for minutes in (1.0, 30.0, 480.0):
        ours = blood.cohb_linear(minutes, start, **_inputs(pico, pco2), bound_o2=20.0)
        assert ours == pytest.approx(_integrate(start, pico, pco2, minutes, 0.20), rel=1e-6, abs=1e-9)


@pytest.mark.parametrize(("start", "pico", "pco2"), CASES)
def test_nonlinear_rate_against_the_differential_equation(start, pico, pco2):
    inputs = _inputs(pico, pco2)
    rest = [inputs[a.name] for a in blood.cohb_rate.arguments[1:]]
    found = solve_ivp(
        lambda _, y: blood.cohb_rate.raw(y, *rest), (0.0, 240.0), [start], rtol=1e-11, atol=1e-14
    )
    assert found.y[0, -1] == pytest.approx(_integrate(start, pico, pco2, 240.0), rel=1e-6)
    forever = _integrate(start, pico, pco2, 1e6)
    steady = blood.cohb_steady_state(*rest[:4], M, VCO / 1000.0)
    assert steady == pytest.approx(forever, rel=1e-6)


def test_ventilation_counted_btps_makes_the_chamber_pressure_drop_out():
    # PL over a STPD ventilation is the same number at 1 and at 3 atm ...
    for ambient in (760.0, 2280.0):
        stpd = gp.laws.convert_gas_volume(5.0, "btps", "stpd", ambient_pressure=ambient * MMHG)
        term = (ambient - 47.0) / (1000.0 * stpd)
        assert blood.co_resistance(5.0, DL / MMHG) / MMHG == pytest.approx(1.0 / DL + term, rel=1e-12)
    # ... and PL at 3 atm over a BTPS ventilation is 2.6 times too large, 713 is 17 % too small.
    ours = blood.co_resistance(5.0, DL / MMHG) / MMHG - 1.0 / DL
    assert (2280.0 - 47.0) / VA / ours == pytest.approx(2.6, abs=0.05)
    assert 713.0 / VA / ours == pytest.approx(1.0 - 0.17, abs=0.005)


@pytest.mark.parametrize(
    ("seen", "source", "po2", "dl"),
    [
        (320.0, "air, Peterson & Stewart 1970 [memory-high]", 100.0, 30.0),
        (80.3, "O2 1 atm, Peterson & Stewart 1970 [memory-high]", 664.0, 15.0),
        (74.0, "O2 1 atm, 93 poisoned, Weaver et al. 2000 [read]", 664.0, 30.0),
        (71.3, "O2 1 atm, Jay & McKindley 1997 [read]", 664.0, 30.0),
        (47.0, "O2 1 atm, Pace 1950 [memory-medium]", 664.0, 30.0),
        (22.0, "O2 2.5 atm, Pace 1950 [memory-medium]", 1804.0, 30.0),
        (23.3, "O2 3 atm, Peterson & Stewart 1970 [memory-high]", 2184.0, 30.0),
    ],
)
def test_half_lives_seen_in_people_lie_in_the_band(seen, source, po2, dl):
    half = blood.cohb_half_life(po2 * MMHG, 5.0, dl / MMHG)
    low, high = blood.COHB_HALF_LIFE_BAND
    assert low * half <= seen <= high * half, source


def test_defaults_are_from_memory_and_say_so():
    for f in (blood.cohb_half_life, blood.cohb_linear, blood.cohb_rate, blood.cohb_steady_state):
        assert f.provenance == "memory_medium"
        with gp.provenance("secondary"), pytest.raises(gp.errors.ProvenanceError):
            f(**{a.name: a.quantity.usual[1] for a in f.arguments if a.default is None})


def test_heavy_poisoning_and_anemia_give_numbers():
    # COHb 40 %, hemoglobin 3 g/dL, 3 atm: no end of the range is silent.
    rate = blood.cohb_rate(0.40, 0.0, 2184.0 * MMHG, hemoglobin=3.0)
    assert np.isfinite(rate)
    assert rate < 0.0
    with pytest.raises(gp.errors.RangeError, match="cohb_fraction"):
        blood.cohb_rate(0.99, 0.0, 13.3)
