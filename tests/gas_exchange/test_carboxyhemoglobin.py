"""Carboxyhemoglobin along an exposure against a general ODE solver and what was seen in people."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from scipy.integrate import solve_ivp

from gasphys import Exposure, Person, blood, explain, gas_exchange
from gasphys.errors import RangeError
from gasphys.schedules import treatment

MMHG = 101.325 / 760.0


def _published(t: float, y: np.ndarray, pressure, fraction: float, ppm: float) -> list[float]:
    """Coburn, Forster & Kane 1965 typed from the paper: mL, mmHg, min; hemoglobin 14.1, 6 L/min."""
    dry = pressure(t) / MMHG - 47.0
    capillary = fraction * dry - 49.0
    resistance = 1.0 / 30.0 + 713.0 / (6000.0 * (713.0 / 760.0) * (273.15 / 310.15))
    capacity = 1.38 * 14.1 / 100.0
    content = y[0] * capacity
    o2hb = capacity - content
    back = content * capillary / (218.0 * o2hb)
    return [(0.007 / 5500.0 + (ppm * 1e-6 * dry - back) / (5500.0 * resistance)) / capacity]


def test_along_a_schedule_against_solve_ivp() -> None:
    """P-02 through a table; largest difference 1e-9 of COHb."""
    session = (
        Exposure.start("oxygen")
        .travel(pressure="2.8 atm", minutes=5)
        .stay(25)
        .switch("air")
        .stay(5)
        .travel(pressure="1.9 atm", minutes=30)
        .switch("oxygen")
        .travel(pressure="1 atm", minutes=20)
    )
    times = np.linspace(0.0, 85.0, 40)
    ds = gas_exchange.carboxyhemoglobin(session, Person(hemoglobin=14.1, cohb_fraction=0.31), 20.0, at=times)
    p0, p1, p2 = 101.325, 2.8 * 101.325, 1.9 * 101.325
    pieces = [
        (0.0, 5.0, p0, p1, 1.0),
        (5.0, 30.0, p1, p1, 1.0),
        (30.0, 35.0, p1, p1, 0.21),
        (35.0, 65.0, p1, p2, 0.21),
        (65.0, 85.0, p2, p0, 1.0),
    ]
    value, expected = 0.31, np.full(ds.time.shape, np.nan)
    for begin, end, low, high, fraction in pieces:

        def pressure(t: float, b=begin, e=end, low=low, high=high) -> float:
            return low + (high - low) * (t - b) / (e - b)

        found = solve_ivp(
            _published,
            (begin, end),
            [value],
            method="DOP853",
            rtol=1e-11,
            atol=1e-14,
            dense_output=True,
            args=(pressure, fraction, 20.0),
        )
        here = (ds.time.values >= begin) & (ds.time.values <= end)
        expected[here] = found.sol(ds.time.values[here])[0]
        value = float(found.y[0, -1])
    assert np.abs(ds.cohb_fraction.values - expected).max() < 1e-8
    assert np.all(ds.cohb_fraction_low <= ds.cohb_fraction)
    assert np.all(ds.cohb_fraction <= ds.cohb_fraction_high)


#: Half-lives seen in people: gas, pressure, minutes, who. Jay & McKindley's under pressure is left out: the
#: pressure is not in the abstract.
SEEN = [
    ("air", "1 atm", 320.0, "Peterson & Stewart 1970, volunteers"),
    ("oxygen", "1 atm", 80.3, "Peterson & Stewart 1970, volunteers"),
    ("oxygen", "3 atm", 23.3, "Peterson & Stewart 1970, volunteers"),
    ("oxygen", "1 atm", 74.0, "Weaver 2000, mean of 93 poisoned"),
    ("oxygen", "1 atm", 71.3, "Jay & McKindley 1997, 12 volunteers"),
    ("oxygen", "1 atm", 47.0, "Pace 1950"),
    ("oxygen", "2.5 atm", 22.0, "Pace 1950"),
    ("oxygen", "1 atm", 70.0, "reviews, fast end"),
    ("oxygen", "2.5 atm", 15.0, "reviews, fast end"),
    ("oxygen", "2.5 atm", 23.0, "reviews, slow end"),
]


@pytest.mark.parametrize(("gas", "pressure", "minutes", "who"), SEEN)
def test_band_reaches_what_was_seen(gas: str, pressure: str, minutes: float, who: str) -> None:
    """Half of 20 % (40 % on air would not be stood): every mean lies between the fast and the slow end."""
    session = Exposure.start(gas, pressure=pressure).stay(1500)
    ds = gas_exchange.carboxyhemoglobin(session, Person(cohb_fraction=0.20), target=0.10)
    _, fast, slow = ds.time_at_target.values
    assert fast < minutes < slow, who


def test_the_equation_is_faster_than_people_and_says_so() -> None:
    """The band 0.7 to 1.5 of the linear form does not reach the means on O2; 2.1 does.

    Not even 2.1 reaches the slowest: 148 min in one of 93, 130 in reviews.
    """
    for pressure, seen, nominal in (("1 atm", (74.0, 80.3), 39.0), ("3 atm", (23.3,), 12.0)):
        session = Exposure.start("oxygen", pressure=pressure).stay(300)
        one = Person(cohb_fraction=0.20)
        ds = gas_exchange.carboxyhemoglobin(session, one, target=0.10)
        ours, fast, slow = ds.time_at_target.values
        assert ours == pytest.approx(nominal, abs=0.5)  # as the text beside the result says
        assert fast / ours == pytest.approx(0.7, abs=0.01)
        assert slow / ours == pytest.approx(2.1, abs=0.02)
        assert "expect the slow end" in ds.attrs["evidence"]
        narrow = gas_exchange.carboxyhemoglobin(
            session, one, target=0.10, half_life_band=blood.COHB_HALF_LIFE_BAND
        )
        assert all(narrow.time_at_target.values[2] < value < slow for value in seen)
        assert slow < 130.0


def test_linear_form_with_the_band_covers_the_poisoned() -> None:
    """51.6 min at 1 atm (printed), 0.7 to 1.5 times it: 74 inside, as the sheet's band was made."""
    linear = blood.cohb_half_life(664.0 * MMHG, 5.0)
    assert 0.7 * linear < 74.0 < 1.5 * linear


def test_target_is_crossed_where_it_says() -> None:
    session = treatment("usn_6")
    one = Person(hemoglobin=14.1, cohb_fraction=0.31)
    found = gas_exchange.carboxyhemoglobin(session, one, target=0.05).time_at_target
    for factor, name in ((1.0, "cohb_fraction"), (0.7, "cohb_fraction_low"), (2.1, "cohb_fraction_high")):
        time = float(found.sel(half_life_factor=factor))
        ds = gas_exchange.carboxyhemoglobin(session, one, at=[time])
        assert float(ds[name].sel(time=time, method="nearest")) == pytest.approx(0.05, abs=1e-7)
    never = gas_exchange.carboxyhemoglobin(Exposure.start("air").stay(5), one, target=0.05)
    assert np.isnan(never.time_at_target).all()


def test_constant_gas_leads_to_the_steady_state() -> None:
    """100 ppm at 1 atm: 13.69 % with VA 5 L/min, printed; hours to get there, whatever the start."""
    session = Exposure.start("air").stay(6000)
    for start in (0.0, 0.4):
        ds = gas_exchange.carboxyhemoglobin(
            session, Person(cohb_fraction=start), 100.0, alveolar_ventilation_btps=5.0
        )
        expected = blood.cohb_steady_state(float(ds.inspired_pco[0]), float(ds.capillary_po2[0]), 5.0)
        assert float(ds.cohb_fraction[-1]) == pytest.approx(expected, rel=1e-6)
    assert expected == pytest.approx(0.137, abs=2e-3)


def test_splitting_a_piece_changes_nothing_and_scenarios_stay_apart() -> None:
    one = Person(cohb_fraction=0.3)
    whole = gas_exchange.carboxyhemoglobin(Exposure.start("oxygen").stay(30), one)
    parts = gas_exchange.carboxyhemoglobin(
        Exposure.start("oxygen").stay(11.3).switch("oxygen").stay(18.7), one
    )
    assert float(parts.cohb_fraction[-1]) == pytest.approx(float(whole.cohb_fraction[-1]), abs=1e-9)
    pressure = xr.DataArray([150.0, 280.0], dims="run", attrs={"units": "kPa"})
    ds = gas_exchange.carboxyhemoglobin(
        Exposure.start("oxygen").travel(pressure=pressure, minutes=5).stay(20), one, target=0.25
    )
    assert ds.time_at_target.sizes == {"half_life_factor": 3, "run": 2}
    for i, p in enumerate(pressure.values):
        single = Exposure.start("oxygen").travel(pressure=float(p), minutes=5).stay(20)
        other = gas_exchange.carboxyhemoglobin(single, one, target=0.25)
        assert ds.cohb_fraction.isel(run=i).values == pytest.approx(other.cohb_fraction.values, rel=1e-13)
        assert ds.time_at_target.isel(run=i).values == pytest.approx(
            other.time_at_target.values, rel=1e-9, nan_ok=True
        )


def test_rate_is_explained_and_gas_may_differ_by_piece() -> None:
    session = Exposure.start("air").stay(10).switch("oxygen").stay(10)
    ds = gas_exchange.carboxyhemoglobin(session, Person(), [400.0, 0.0], at=[5.0, 15.0])
    assert float(ds.cohb_fraction.sel(time=10.0)) > 0.01
    assert float(ds.cohb_fraction[-1]) < float(ds.cohb_fraction.sel(time=10.0))
    for time in (5.0, 15.0):
        found = explain(ds, "cohb_rate", time=time)
        assert found.value == found.stored
    assert "alveolar_ventilation_btps = 6" in ds.attrs["assumed"]


@pytest.mark.parametrize(
    ("known", "ppm", "more", "words"),
    [
        ({}, -1.0, {}, "carbon_monoxide"),
        ({}, float("nan"), {}, "carbon_monoxide"),
        ({"hemoglobin": 0.0}, 0.0, {}, "hemoglobin"),
        ({}, 0.0, {"blood_volume": float("nan")}, "blood_volume"),
        ({}, 0.0, {"target": 1.5}, "target"),
        ({}, 0.0, {"half_life_band": (1.2, 1.5)}, "half_life_band"),
    ],
)
def test_refusals(known: dict, ppm: float, more: dict, words: str) -> None:
    with pytest.raises(RangeError, match=words):
        gas_exchange.carboxyhemoglobin(Exposure.start("air").stay(5), Person(**known), ppm, **more)


def test_a_gas_without_capillary_po2_is_refused() -> None:
    with pytest.raises(RangeError, match="no capillary PO2"):
        gas_exchange.carboxyhemoglobin(Exposure.start("trimix 6/60").stay(5))
