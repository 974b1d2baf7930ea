"""Hazard along exposures: published integrals, an ODE solver, splitting, scenarios, exact gradients."""

from __future__ import annotations

import itertools

import mpmath
import numpy as np
import pytest
import xarray as xr
from scipy.integrate import solve_ivp

from gasphys import Exposure, explain, risk
from gasphys.errors import InputFileError, RangeError, UnknownNameError
from gasphys.risk.kernel import Parameters, Profile, accumulate
from gasphys.risk.model import _profile_of, stacked

ATM = 101.325


def _hold(minutes: float, tension: float, inert: float) -> Profile:
    """One stay at 1 atm, pressures in atm."""
    flat = [np.array([[x]]) for x in (minutes, ATM, ATM, inert * ATM, inert * ATM)]
    return Profile(*flat, np.array([tension * ATM]))


def _numbers(constant: float, gain: float, threshold: float, crossover: float) -> Parameters:
    row = (constant * np.log(2.0), gain, threshold * ATM, crossover * ATM, 0.0)
    return Parameters(*(np.array([v]) for v in row))


def test_linear_exponential_example() -> None:
    """Computed example of the linear-exponential form: time constant 40 min, cross-over 0.08 atm."""
    values = _numbers(40.0, 2e-3, 0.03, 0.08)
    total, tension = accumulate(_hold(63.0303, 1.6, 0.75), values)
    assert tension[0, 0, -1] / ATM == pytest.approx(1.08, abs=5e-7)  # linear for 63.0303 min
    assert (tension[0, 0, -1] - tension[0, 0, 0]) / ATM / 63.0303 == pytest.approx(-0.00825, abs=5e-9)
    at_end = accumulate(_hold(69.6024, 1.6, 0.75), values)[0][0, 0, -1]
    total, _ = accumulate(_hold(1440.0, 1.6, 0.75), values)
    assert total[0, 0, -1] == pytest.approx(0.03939840, abs=5e-9)
    assert total[0, 0, -1] - at_end < 1e-11  # risk ends at 69.6024 min


def test_exponential_example() -> None:
    """Computed example of the exponential form: time constant 510 min, risk ends at 621.978 min."""
    values = _numbers(510.0, 1e-3, 0.0, np.nan)
    total = accumulate(_hold(3000.0, 1.501, 0.79), values)[0][0, 0, -1]
    assert total == pytest.approx(0.12489460, abs=5e-9)
    for minutes, over in ((621.977, False), (621.979, True)):
        at = accumulate(_hold(minutes, 1.501, 0.79), values)
        assert (at[1][0, 0, -1] <= ATM) is np.bool_(over)


def _dive(rng: np.random.Generator) -> Exposure:
    x = Exposure.start("air")
    for _ in range(rng.integers(1, 3)):
        x = x.travel(depth=float(rng.uniform(15, 60)), rate=18).stay(float(rng.uniform(10, 60)))
        x = x.travel(depth=float(rng.uniform(3, 12)), rate=float(rng.uniform(3, 18)))
        x = x.stay(float(rng.uniform(1, 10)))
    if rng.random() < 0.5:
        x = x.switch("nitrox 48")
    return x.stay(5).travel(depth=0, rate=9)


def _model(rng: np.random.Generator) -> risk.HazardModel:
    return risk.HazardModel(
        [
            risk.Compartment(float(rng.uniform(2, 30)), 1e-3, float(rng.uniform(-2, 5))),
            risk.Compartment(
                float(rng.uniform(30, 300)), 3e-4, float(rng.uniform(0, 10)), float(rng.uniform(0, 30))
            ),
            risk.Compartment(float(rng.uniform(3, 30)), 3e-4, 0.0, float(rng.uniform(-5, 5))),
        ],
        fixed_venous_pressure=float(rng.uniform(-2, 15)),
        water_vapor_pressure=6.27,
    )


@pytest.mark.parametrize("number", range(6))
def test_against_an_ode_solver(number: int) -> None:
    """The tension and hazard equations, integrated step by step over ramps, holds and a switch."""
    rng = np.random.default_rng(number)
    dive, model = _dive(rng), _model(rng)
    ds = risk.probability(dive, model)
    row = _profile_of(dive.then(1440.0, "air"), 6.27)
    v = model.arrays()
    k, level = (
        np.log(2.0) / v.half_time,
        np.where(np.isnan(v.crossover), np.inf, v.crossover) - v.fixed_venous,
    )
    y = np.concatenate([np.repeat(row.initial, 3), np.zeros(3)])
    for s, minutes in enumerate(row.duration[0]):

        def slope(t, y, s=s, minutes=minutes):
            u = t / minutes
            ambient = row.start_pressure[0, s] * (1 - u) + row.end_pressure[0, s] * u
            inert = row.start_inert[0, s] * (1 - u) + row.end_inert[0, s] * u
            top = ambient + level
            change = np.where(
                y[:3] > top, k * (inert - np.where(np.isinf(top), 0.0, top)), k * (inert - y[:3])
            )
            excess = y[:3] - ambient - v.threshold + v.fixed_venous
            return np.concatenate([change, v.gain * np.maximum(0.0, excess / ambient)])

        step = max(minutes / 100.0, 0.02)
        y = solve_ivp(slope, (0.0, minutes), y, rtol=1e-9, atol=1e-12, max_step=step).y[:, -1]
    # The solver steps over the corners where branch and hazard change: that is its error, not ours.
    np.testing.assert_allclose(ds.tissue_pressure.values[:, -1], y[:3], rtol=2e-8)
    np.testing.assert_allclose(ds.cumulative_hazard.values[:, -1], y[3:], rtol=2e-6, atol=1e-11)


def test_against_exponential_integrals_on_fast_and_slow_ascents() -> None:
    """On a ramp without corner: the closed form, in 40 digits."""
    for half_time, minutes, begin in itertools.product((1.5, 20.0, 600.0), (0.5, 8.0, 4000.0), (1.3, 11.0)):
        ends = [np.array([[x]]) for x in (minutes, begin * ATM, ATM, 0.79 * begin * ATM, 0.79 * ATM)]
        values = Parameters(*(np.array([x]) for x in (half_time, 1.0, -50.0 * ATM, np.nan, 0.0)))
        ours = accumulate(Profile(*ends, np.array([1.1 * begin * ATM])), values)[0][0, 0, -1]
        with mpmath.workdps(40):
            k, a, end = mpmath.log(2) / mpmath.mpf(half_time), mpmath.mpf(begin), mpmath.mpf(minutes)
            inert = mpmath.mpf(0.79)
            b = (1 - a) / end
            lag = inert * b / k
            # p - P + 50 = (inert - 1)(a + b t) + 50 - lag + rest exp(-k t), over a + b t.
            rest = mpmath.mpf(1.1) * a - inert * a + lag
            straight = (inert - 1) * end + (50 - lag) * mpmath.log(1 / a) / b
            decay = mpmath.exp(k * a / b) * (mpmath.ei(-k / b) - mpmath.ei(-k * a / b)) / b
            exact = float(straight + rest * decay)
        assert ours == pytest.approx(exact, rel=1e-12)


@pytest.fixture
def model() -> risk.HazardModel:
    return _model(np.random.default_rng(3))


def test_probability_is_invariant_to_splitting(model) -> None:
    whole = Exposure.start("air").travel(depth=40, minutes=4).stay(30).travel(depth=0, minutes=5)
    parts = Exposure.start("air").travel(depth=10, minutes=1).travel(depth=40, minutes=3)
    parts = parts.stay(11).stay(19).travel(depth=16, minutes=3).travel(depth=0, minutes=2)
    one, two = (risk.probability(x, model).final_probability.item() for x in (whole, parts))
    assert one == pytest.approx(two, rel=1e-12)
    more = risk.probability(whole, model, at=[35.5, 36.1, 37.0, 100.0])
    assert more.final_probability.item() == pytest.approx(one, rel=1e-12)
    assert 35.5 in more.time.values


def test_monotone_in_depth_and_time(model) -> None:
    def chance(depth: float, minutes: float) -> float:
        x = Exposure.start("air").travel(depth=depth, minutes=2).stay(minutes).travel(depth=0, minutes=2)
        return risk.probability(x, model).final_probability.item()

    by_depth = [chance(d, 40.0) for d in (6, 12, 18, 30, 45)]
    by_time = [chance(30.0, t) for t in (5, 10, 20, 40, 80)]
    assert by_depth == sorted(by_depth)
    assert by_time == sorted(by_time)
    assert by_time[-1] > 2.0 * by_time[0]
    assert chance(30.0, 40.0) > 0.0


def test_each_scenario_is_its_single_run(model) -> None:
    depths = xr.DataArray([12.0, 30.0], dims="draw", coords={"draw": [0, 1]}, attrs={"units": "msw"})
    both = Exposure.start("air").travel(depth=depths, minutes=2).stay(40).travel(depth=0, minutes=2)
    ds = risk.probability(both, model)
    for draw, depth in enumerate((12.0, 30.0)):
        one = Exposure.start("air").travel(depth=depth, minutes=2).stay(40).travel(depth=0, minutes=2)
        alone = risk.probability(one, model)
        np.testing.assert_allclose(
            ds.risk_probability.isel(draw=draw), alone.risk_probability, rtol=1e-12, atol=1e-300
        )


def test_oxygen_and_loops_hold_no_inert_gas(model) -> None:
    x = Exposure.start("air").travel(depth=18, minutes=2).switch("oxygen").stay(600)
    assert risk.probability(x, model, 0.0).tissue_pressure[0, -1].item() == pytest.approx(0.0, abs=1e-4)
    loop = Exposure.start("air").loop(130.0, "air").travel(depth=20, minutes=2).stay(3000)
    found = risk.probability(loop, model, 0.0).tissue_pressure[0, -1].item()
    assert found == pytest.approx(301.325 - 130.0 - 6.27, rel=1e-9)


def test_every_gradient_is_exact(model) -> None:
    rng = np.random.default_rng(8)
    profile, _ = stacked([_dive(rng) for _ in range(5)], [(0.0, 0.0)] * 5, 6.27, 1440.0)

    def total(values):
        return accumulate(profile, model.arrays(values))[0].sum(axis=1)[:, -1]

    for name, value in model.parameters().items():
        exact = total({name: value + 1e-30j}).imag / 1e-30
        step = 1e-4 * max(abs(value), 1e-3)
        differences = (total({name: value + step}) - total({name: value - step})) / (2.0 * step)
        np.testing.assert_allclose(exact, differences, rtol=1e-5, atol=1e-6 * np.abs(exact).max())


def test_numbers_are_explained(model) -> None:
    dive = Exposure.start("air").travel(depth=30, minutes=2).stay(40).travel(depth=0, minutes=2)
    ds = risk.probability(dive, model)
    end = float(ds.time[-2])
    found = explain(ds, "risk_probability", time=end)
    assert found.value == found.stored > 0.0
    name = str(ds.compartment[0].values)
    found = explain(ds, "hazard", time=end, compartment=name)
    assert found.value == pytest.approx(found.stored, rel=1e-12)


def test_sampled_measures() -> None:
    t = np.linspace(0.0, 30.0, 7)
    x = np.sin(t)
    ds = risk.sampled_hazard(t, x, gain=0.02, threshold=0.1)
    fine = np.linspace(0.0, 30.0, 600_001)
    course = np.maximum(np.interp(fine, t, x) - 0.1, 0.0)
    assert ds.cumulative_hazard[-1].item() == pytest.approx(0.02 * np.trapezoid(course, fine), rel=1e-7)
    with pytest.raises(RangeError, match="time must rise"):
        risk.sampled_hazard([0.0, 0.0], [1.0, 1.0])
    with pytest.raises(RangeError, match="not numbers"):
        risk.sampled_hazard([0.0, 1.0], [1.0, np.nan])


FILE = """name = "own fit"
water_vapor_pressure = "47 mmHg"

[[compartment]]
half_time = 20
gain = 1e-3

[[compartment]]
half_time = "4 h"
gain = 2e-4
threshold = "0.1 bar"
crossover = 8
"""


def test_model_from_a_file(tmp_path) -> None:
    path = tmp_path / "own.toml"
    path.write_text(FILE, encoding="utf-8")
    model = risk.HazardModel.from_toml(path)
    assert model.compartments[1] == risk.Compartment(240.0, 2e-4, 10.0, 8.0)
    assert model.water_vapor_pressure == pytest.approx(6.266, abs=1e-3)


@pytest.mark.parametrize(
    ("old", "new", "line", "message"),
    [
        ("half_time = 20", "halftime = 20", 5, "nearest: 'half_time'"),
        ("gain = 1e-3\n", "", 4, "has no gain"),
        ("gain = 2e-4", "gain = -2", 10, "hazard_gain"),
        ('"0.1 bar"', '"0.1 min"', 11, "measures something else"),
        ("gain = 1e-3", "gain = true", 6, "not a number"),
        ("name", "names", 1, "nearest: 'name'"),
        ("[[compartment]]", "[[tissue]]", None, "no \\[\\[compartment\\]\\]"),
        ("= 20", "= = 20", 5, "line 5"),
    ],
)
def test_a_model_file_with_an_error(tmp_path, old, new, line, message) -> None:
    path = tmp_path / "own.toml"
    count = -1 if old.startswith("[[") else 1
    path.write_text(FILE.replace(old, new, count), encoding="utf-8")
    with pytest.raises(InputFileError, match=message) as caught:
        risk.HazardModel.from_toml(path)
    if line:
        assert caught.value.line == line


def test_what_is_no_model() -> None:
    with pytest.raises(RangeError, match="at least one compartment"):
        risk.HazardModel([])
    with pytest.raises(RangeError, match="half_time"):
        risk.Compartment(float("nan"), 1e-3)
    with pytest.raises(UnknownNameError, match="gain_2"):
        risk.HazardModel([risk.Compartment(20.0, 1e-3)]).with_parameters({"gain_2": 1.0})
    with pytest.raises(RangeError, match="fixed_venous_pressure"):
        risk.HazardModel([risk.Compartment(20.0, 1e-3)], fixed_venous_pressure=1e4)


# -- Inner ear ------------------------------------------------------------------------------------

EAR = risk.InnerEar(
    10.0,
    90.0,
    30.0,
    {"N2": 0.5, "He": 0.6},
    {"N2": 0.2, "He": 0.5},
    {"N2": 0.1, "He": 0.2},
    {"N2": 0.01, "He": 0.05},
)


def test_inner_ear_against_an_ode_solver() -> None:
    dive = Exposure.start("air").switch("trimix 17/48").travel(depth=56, minutes=3).stay(22)
    dive = dive.travel(depth=20, minutes=4).switch("nitrox 48").stay(15)
    ds = risk.inner_ear(dive, EAR)
    pieces = dive.pieces()
    for gas in ("N2", "He"):
        dry = pieces.inert_pressure(gas)
        y = np.full(3, dry[0][0] * (101.325 - 6.266) / 101.325)
        a, b = EAR.rates(gas)
        for s, minutes in enumerate(pieces.duration):
            low, high = (
                d[s] * (p[s] - 6.266) / p[s]
                for d, p in zip(dry, (pieces.start_pressure, pieces.end_pressure), strict=True)
            )

            def slope(t, y, a=a, b=b, low=low, high=high, minutes=minutes):
                drive = low + (high - low) * t / minutes
                return a @ y + b @ np.array([drive, drive])

            y = solve_ivp(slope, (0.0, minutes), y, rtol=1e-11, atol=1e-11, method="DOP853").y[:, -1]
        ours = ds.room_pressure.sel(inert_gas=gas).isel(time=-1)
        np.testing.assert_allclose(ours, y, rtol=1e-8, atol=1e-8)


def test_inner_ear_rests_in_equilibrium_and_may_rise_at_constant_pressure() -> None:
    """Counterdiffusion: after a switch to a nitrogen-rich gas the labyrinth may hold more than before."""
    still = risk.inner_ear(Exposure.start("air").stay(600), EAR)
    np.testing.assert_allclose(still.room_pressure, still.room_pressure[0, 0, 0], rtol=1e-12)
    assert (still.supersaturation < 0.0).all()
    deep = Exposure.start("heliox 16/84").travel(depth=50, minutes=5).stay(6000)
    slow_helium = risk.InnerEar(10.0, 90.0, 30.0, {"N2": 0.6, "He": 0.2}, {}, {}, {})
    switched = risk.inner_ear(deep.switch("air").stay(10).stay(20), slow_helium)
    total = switched.room_pressure.sum("inert_gas").sel(room="labyrinth")
    before, rising = total.sel(time=6005.0).item(), total.sel(time=6015.0).item()
    # Perfusion alone: sum of an uptake and a washout, by hand.
    rest = 601.325 - 6.266
    hand = 0.84 * rest * np.exp(-0.02 * 10) + 0.79 * rest * -np.expm1(-0.06 * 10)
    assert before == pytest.approx(0.84 * rest, rel=1e-6)
    assert rising == pytest.approx(hand, rel=1e-6)
    assert rising > 1.1 * before


@pytest.mark.parametrize(
    ("change", "error", "message"),
    [
        ({"labyrinth": 0.0}, RangeError, "not a volume above zero"),
        ({"perfusion": {"N2": -1.0}}, RangeError, "not a flow of 0 or more"),
        ({"perfusion": {"O2": 1.0}}, UnknownNameError, "unknown inert gas 'O2'"),
    ],
)
def test_what_is_no_ear(change, error, message) -> None:
    given = {**vars(EAR), **change}
    with pytest.raises(error, match=message):
        risk.InnerEar(**given)
