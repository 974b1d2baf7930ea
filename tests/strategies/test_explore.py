"""Explorations: optima that are known in closed form, fronts by brute force, plans by themselves."""

from __future__ import annotations

import functools

import numpy as np
import pytest
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp
from scipy.optimize import linprog

import gasphys as gp
from gasphys import Exposure, GasphysError, ascent, scenarios, strategies
from gasphys.errors import ExposureError, RangeError, UnknownNameError
from gasphys.limits import load
from gasphys.scenarios import Triangular, Uniform
from gasphys.supply import Cylinder, Demand, Reserve, consumption, stock

LIMITS = {x.id: x for x in load()}
DEMAND = Demand(surface_rate=18.0)
GASES = [("nitrox 48", 20.0), ("oxygen", 6.0)]
DIVES = strategies.Dives(depth=56.0, bottom_time=22.0, gas="trimix 17/48", gases=GASES)


# -- The front ---------------------------------------------------------------------------------------


@settings(max_examples=200, deadline=None)
@given(
    hnp.arrays(
        float,
        st.tuples(st.integers(1, 25), st.integers(1, 4)),
        elements=st.sampled_from([0.0, 1.0, 2.0, np.nan]),
    )
)
def test_front_is_what_comparing_every_pair_gives(values: np.ndarray) -> None:
    known = ~np.isnan(values).any(axis=1)
    expected = []
    for k, row in enumerate(values):
        beaten = any((o <= row).all() and (o < row).any() for j, o in enumerate(values) if known[j])
        expected.append(bool(known[k] and not beaten))
    assert strategies.front(values).tolist() == expected


def test_front_of_two_parabolas_is_what_lies_between_them() -> None:
    """x^2 against (x - 2)^2: 0 to 2, no more and no less (Schaffer 1985, from memory)."""
    found = strategies.explore(
        {"x": Uniform(-3.0, 5.0)},
        {"near": lambda c: c.x**2, "far": lambda c: (c.x - 2.0) ** 2},
        rng=1,
        n=2000,
    )
    x = found.x.values
    np.testing.assert_array_equal(found.front.values, (x >= 0.0) & (x <= 2.0) | (x == x[np.argmin(abs(x))]))


# -- Known optima ------------------------------------------------------------------------------------


@pytest.mark.parametrize("depth", [40.0, 56.0, 70.0])
def test_best_mix_for_oxygen_density_and_narcosis(depth: float) -> None:
    """All three limits are planes in the fractions: a linear program, and here its corner by hand.

    Least helium with PO2 at most 1.4 atm, density at most 6.2 g/L and nitrogen pressure at most that of air
    at 30 msw.
    """
    pressure = 101.325 + 10.0 * depth
    nitrogen = 0.79 * 401.325
    limits = [LIMITS["po2_noaa_2015_working"], LIMITS["density_maximum"]]
    narcosis = {"nitrogen": lambda built: nitrogen - gp.reviews.highest(built, "breathing_gas_n2_pressure")}
    pure = [_density(f, pressure) for f in ("oxygen", "nitrogen", "helium")]
    best = linprog(
        [0.0, 0.0, 1.0],
        A_ub=[[pressure, 0.0, 0.0], pure, [0.0, pressure, 0.0]],
        b_ub=[1.4 * 101.325, LIMITS["density_maximum"].value, nitrogen],
        A_eq=[[1.0, 1.0, 1.0]],
        b_eq=[1.0],
    )
    assert best.success

    def bottom(candidates: xr.Dataset) -> Exposure:
        mix = xr.DataArray(
            np.stack([candidates.o2, 1.0 - candidates.o2 - candidates.helium, candidates.helium], axis=-1),
            dims=("candidate", "gas"),
            coords={"gas": ["O2", "N2", "He"]},
            attrs={"units": "1"},
        )
        return Exposure.start(mix, pressure=pressure).stay(1)

    step = 0.002
    found = strategies.explore(
        {"o2": np.arange(0.05, 0.35, step), "helium": np.arange(0.0, 0.9, step)},
        ["helium_fraction"],
        [*limits, narcosis],
        build=bottom,
        only=lambda c: c.o2 + c.helium <= 1.0,
        block=50_000,
    )
    kept = found.isel(candidate=np.flatnonzero(found.front))
    # The best of the grid lies within one step of the corner, never beyond it.
    assert float(kept.helium_fraction.min()) >= best.x[2] - 1e-9
    assert float(kept.helium_fraction.min()) <= best.x[2] + 2.0 * step
    assert np.all(kept.o2 <= best.x[0] + 1e-9) or np.all(kept.helium_fraction <= best.x[2] + 2.0 * step)
    assert float(found.helium_fraction.where(found.kept).min()) == float(kept.helium_fraction.min())


def _density(gas: str, pressure: float) -> float:
    mix = gp.Gas(**({"oxygen": 0.0} | ({} if gas == "nitrogen" else {gas: 1.0})))
    return float(gp.reviews.highest(Exposure.start(mix, pressure=pressure).stay(1), "gas_density"))


@pytest.mark.parametrize("depth", [18.0, 24.0, 30.0])
def test_longest_dive_without_a_stop_is_the_no_stop_time(depth: float) -> None:
    """The closed form of the no-stop time, by the model that is tested on reaching the surface only."""
    model = "us_navy_1957"
    limit = gp.tissues.no_stop_time(depth, "air", model=model, descent_rate=20.0, ascent_rate=9.0)

    def direct(candidates: xr.Dataset) -> Exposure:
        dive = Exposure.start("air").travel(depth=depth, rate=20).stay(candidates.bottom_time - depth / 20.0)
        return dive.travel(depth=0, rate=9)

    longest = strategies.Objective("longest", lambda dive: dive.duration, larger=True)
    found = strategies.explore(
        {"bottom_time": np.arange(3.0, 120.0, 0.5)}, [longest], scenarios.tissue_limits([model]), build=direct
    )
    best = found.bottom_time.values[found.front.values].item()
    assert best <= limit < best + 0.5


def test_the_longest_overstay_is_what_is_left_of_the_limit() -> None:
    """A limit of 30 min leaves 30 less the bottom time; of a dose, what is left over its rate."""
    dives = strategies.Dives(depth=20.0, gas="nitrox 32")
    found = strategies.explore(
        {"bottom_time": [10.0, 25.0, 29.9, 31.0]},
        [strategies.overstay_margin(15.0, 0.01)],
        {"bottom": lambda b: 30.0 - b.candidates.bottom_time},
        build=dives,
    )
    np.testing.assert_allclose(found.overstay_margin, [15.0, 5.0, 0.1, 0.0], atol=0.01)
    assert np.all(found.overstay_margin <= [15.0, 5.0, 0.1 + 1e-9, 0.0])
    rate = gp.doses.uptd(0.32 * 301.325, 1.0)
    short = strategies.Dives(depth=20.0, gas="nitrox 32", rules=ascent.Rules(ascent_rate=10.0))
    dose = strategies.explore({"bottom_time": [30.0]}, ["uptd"], build=short).uptd.values[0]
    limit = gp.limits.Limit(**{**vars(LIMITS["uptd_day_one"]), "value": dose + 7.0 * rate, "site": True})
    margin = strategies.explore(
        {"bottom_time": [30.0]}, [strategies.overstay_margin(20.0, 0.001)], [limit], build=short
    ).overstay_margin.values[0]
    assert margin == pytest.approx(7.0, abs=0.002)


def test_chance_of_an_overstay_too_long() -> None:
    late = Triangular(0.0, 1.0, 8.0)
    found = strategies.explore(
        {"bottom_time": [20.0, 27.0]},
        [strategies.overstay_chance(late, 12.0, 0.01)],
        {"bottom": lambda b: 30.0 - b.candidates.bottom_time},
        build=strategies.Dives(depth=20.0),
    )
    np.testing.assert_allclose(found.overstay_chance, 1.0 - late.cdf(np.array([10.0, 3.0])), atol=0.005)
    with pytest.raises(GasphysError, match="hard limit"):
        strategies.explore(
            {"bottom_time": [20.0]}, [strategies.overstay_margin()], build=strategies.Dives(depth=20.0)
        )


# -- Plans -------------------------------------------------------------------------------------------

SPACE = {
    "bottom_o2": [0.15, 0.18],
    "bottom_helium": [0.35, 0.5],
    "bottom_time": [15.0, 22.0],
    "gradient_low": [0.5, 0.8],
    "gradient_high": [0.85],
    "switch_depth_1": [18.0, 21.0],
    "switch_o2_1": [0.48, 0.5],
}
ASKED = ("ascent_time", "total_time", "uptd", "gas_density", "noaa_cns_single_fraction", "helium_fraction")
HARD = ("po2_noaa_2015_decompression", "density_maximum")


def objectives() -> list:
    prices = {"helium": 0.04, "oxygen": 0.01}
    return [*ASKED, strategies.gas_volume(DEMAND), strategies.cost(prices, DEMAND), strategies.lost_gas()]


@functools.cache
def explored(block: int = 500, run: str = "one") -> xr.Dataset:
    return strategies.explore(SPACE, objectives(), HARD, 1, build=DIVES, block=block, where=run)


def test_every_candidate_is_the_plan_made_alone() -> None:
    found = explored()
    assert found.sizes["candidate"] == 2**6
    for k in range(0, 64, 7):
        row = {n: float(found[n][k]) for n in SPACE}
        mix = gp.Gas(oxygen=row["bottom_o2"], helium=row["bottom_helium"])
        dive = Exposure.start(mix).travel(depth=56.0, rate=20.0).stay(row["bottom_time"] - 2.8)
        up = [(gp.Gas(oxygen=row["switch_o2_1"]), row["switch_depth_1"]), ("oxygen", 6.0)]
        rules = ascent.Rules(gradient_low=row["gradient_low"], gradient_high=row["gradient_high"])
        plan = ascent.plan(dive, up, rules=rules)
        assert float(found.ascent_time[k]) == pytest.approx(plan.ascent_time, rel=1e-12)
        assert float(found.total_time[k]) == pytest.approx(plan.total_time, rel=1e-12)
        dose = gp.doses.oxygen(plan.exposure, ["uptd"]).dose.item()
        assert float(found.uptd[k]) == pytest.approx(dose, rel=1e-11)
        judged = gp.review(plan.exposure)
        for name in HARD:
            one = judged.sel(limit=name)
            assert str(found.status.sel(limit=name)[k].values) == str(one.status.values)
            assert float(found.margin.sel(limit=name)[k]) == pytest.approx(
                float(one.margin), rel=1e-9, abs=1e-9
            )
        top = float(judged.worst.sel(limit="density_maximum"))
        assert float(found.gas_density[k]) == pytest.approx(top, rel=1e-12)
        used = consumption(plan.exposure, DEMAND).free_gas_used.isel(time=-1)
        # Free gas of a mixture is not quite ideal.
        assert float(found.gas_volume[k]) == pytest.approx(float(used.sum()), rel=1e-3)
        paid = sum(
            float(used.sel(supply_gas=str(g)))
            * (0.04 * gp.Gas.parse(g).helium + 0.01 * gp.Gas.parse(g).oxygen)
            for g in used.supply_gas.values
        )
        assert float(found.cost[k]) == pytest.approx(paid, rel=1e-3)
        lost = [ascent.plan(dive, up, rules=rules, without=g).ascent_time for g, _ in up]
        assert float(found.lost_gas_minutes[k]) == pytest.approx(max(lost) - plan.ascent_time, rel=1e-9)


@pytest.mark.parametrize(("block", "run"), [(3, "one"), (10, "threads"), (40, "processes")])
def test_blocks_and_threads_change_nothing(block: int, run: str) -> None:
    one, other = explored(), explored(block, run)
    for name in one.data_vars:
        if one[name].dtype.kind == "f":
            np.testing.assert_allclose(other[name], one[name], rtol=1e-12, atol=1e-12, err_msg=str(name))
        else:
            np.testing.assert_array_equal(other[name], one[name])


def test_front_is_kept_and_not_dominated() -> None:
    found = explored()
    names = [n for n in found.data_vars if "better" in found[n].attrs]
    assert len(names) == 9
    values = np.stack([found[n].values for n in names], axis=-1)
    on = found.front.values
    assert 0 < on.sum() < found.kept.sum() <= 64
    for k in np.flatnonzero(found.kept):
        beaten = any(
            (values[j] <= values[k]).all() and (values[j] < values[k]).any() for j in np.flatnonzero(on)
        )
        assert bool(on[k]) == (not beaten)
    assert not np.any(on & ~found.kept.values)
    np.testing.assert_array_equal(found.kept, (found.status == "within").all("limit"))


def test_gas_in_cylinders_is_a_hard_limit_and_its_loss_an_objective() -> None:
    tanks = [
        Cylinder("trimix 17/48", 12.0, "220 bar", count=2),
        Cylinder("nitrox 48", 11.0, "200 bar"),
        Cylinder("oxygen", 7.0, "150 bar"),
    ]
    reserve = Reserve(pressure="50 bar")
    found = strategies.explore(
        {"bottom_time": [15.0, 25.0, 40.0]},
        [strategies.lost_gas_left(tanks, DEMAND), "ascent_time"],
        {"gas left": strategies.gas_left(tanks, DEMAND, reserve)},
        build=strategies.Dives(depth=56.0, gas="trimix 17/48", gases=GASES),
    )
    for k, time in enumerate((15.0, 25.0, 40.0)):
        dive = Exposure.start("trimix 17/48").travel(depth=56.0, rate=20.0).stay(time - 2.8)
        plan = ascent.plan(dive, GASES)
        least = stock(plan, tanks, reserve, DEMAND).margin_to_reserve.min().item()
        assert float(found.margin[0, k]) == pytest.approx(least, rel=1e-9)
        plans = [plan, *(ascent.plan(dive, GASES, without=g) for g, _ in GASES)]
        lost = min(stock(p, tanks, None, DEMAND).margin_to_reserve.min().item() for p in plans)
        assert float(found.lost_gas_left[k]) == pytest.approx(lost, rel=1e-9)
    assert found.kept.values.tolist() == [bool(m >= 0.0) for m in found.margin[0]]
    assert len(set(found.kept.values)) == 2


def test_loops_with_a_set_point_of_the_space() -> None:
    dives = strategies.Dives(depth=56.0, bottom_time=22.0, gas="trimix 17/48", setpoint="1.2 bar")
    demand = Demand(surface_rate=18.0, o2_uptake_stpd=1.2)
    found = strategies.explore(
        {"setpoint": [100.0, 130.0]},
        [
            "ascent_time",
            "breathing_gas_po2",
            strategies.gas_volume(demand),
            strategies.cost({"oxygen": 1.0}, demand),
        ],
        build=dives,
    )
    for k, held in enumerate((100.0, 130.0)):
        with gp.validity("ignore"):  # the diluent's own PO2 is above the lower set-point
            dive = Exposure.start("trimix 17/48").loop(held, "trimix 17/48")
            dive = dive.travel(depth=56.0, rate=20).stay(19.2)
            plan = ascent.plan(dive)
        assert float(found.ascent_time[k]) == pytest.approx(plan.ascent_time, rel=1e-12)
        assert float(found.breathing_gas_po2[k]) == pytest.approx(held, rel=1e-12)
        used = consumption(plan.exposure, demand).free_gas_used.isel(time=-1)
        assert float(found.gas_volume[k]) == pytest.approx(float(used.sum()), rel=1e-3)
        paid = float(used.sel(supply_gas="oxygen")) + 0.17 * float(used.sel(supply_gas="trimix 17/48"))
        assert float(found.cost[k]) == pytest.approx(paid, rel=1e-3)


# -- Chance, progress, an early end ------------------------------------------------------------------


def test_one_seed_gives_one_exploration() -> None:
    space = {"bottom_time": Uniform(10.0, 25.0), "depth": [30.0, 40.0]}
    one, two, other = (
        strategies.explore(space, ["ascent_time"], rng=seed, n=16, build=strategies.Dives())
        for seed in (1, 1, 2)
    )
    assert one.identical(two)
    assert not one.bottom_time.equals(other.bottom_time)
    assert set(one.depth.values) == {30.0, 40.0}
    assert one.attrs["seed"] == "1"


def test_an_early_end_keeps_what_is_done() -> None:
    seen: list[tuple[int, int]] = []
    whole = strategies.explore({"x": np.arange(100.0)}, {"y": lambda c: (c.x - 7.0) ** 2}, block=10)
    found = strategies.explore(
        {"x": np.arange(100.0)},
        {"y": lambda c: (c.x - 7.0) ** 2},
        block=10,
        progress=lambda done, of: seen.append((done, of)),
        cancel=lambda: len(seen) >= 3,
    )
    assert seen == [(10, 100), (20, 100), (30, 100)]
    assert found.attrs["cancelled"] == "yes"
    assert found.attrs["evaluated"] == 30
    assert found.equals(whole.isel(candidate=slice(30)).assign(front=found.front))
    assert found.x.values[found.front.values].tolist() == [7.0]
    assert whole.attrs["cancelled"] == "no"


# -- Why ---------------------------------------------------------------------------------------------


def test_why_one_dominates_another() -> None:
    found = strategies.explore(
        {"x": [0.0, 1.0, 2.0, 3.0, 5.0, 9.0]},
        {
            "near": lambda c: c.x**2,
            "far": lambda c: (c.x - 2.0) ** 2,
            "more": strategies.Objective("more", lambda c: 0.0 * c.x, larger=True, unit="min"),
        },
        {"small": lambda c: 8.0 - c.x},
    )
    assert "neither dominates: 0 is better in near, 2 in far" in strategies.why(found, 0, 2)
    text = strategies.why(found, 3, 1)
    assert text.splitlines()[0] == "1 dominates 3: better in near, worse in nothing"
    assert "1 is better by 8" in text
    assert "far" in text
    assert "equal" in text
    assert strategies.why(found, 1, 5).startswith("1 keeps the hard limits, 5 does not")
    assert "small (beyond, 1 beyond)" in strategies.why(found, 1, 5)
    assert strategies.why(found, 2, 2).startswith("2 and 2 are equal")
    with pytest.raises(GasphysError, match="no candidate"):
        strategies.why(found, 0, 77)
    nothing = strategies.explore({"x": [1.0, 2.0]}, {"y": lambda c: np.where(c.x > 1.5, np.nan, 1.0)})
    assert strategies.why(nothing, 0, 1).startswith("0 and 1 cannot be compared")
    assert nothing.front.values.tolist() == [True, False]
    assert "no answer" in str(nothing.reason[1].values)


def test_what_cannot_be_planned_is_told_and_takes_no_part() -> None:
    dives = strategies.Dives(depth=56.0, bottom_time=22.0, gas="trimix 17/48", model="us_navy_1957")
    found = strategies.explore({"gradient_low": [0.9, 1.0]}, ["ascent_time"], build=dives)
    assert not found.front.any()
    assert all("us_navy_1957" in str(r) for r in found.reason.values)


def test_what_is_not_judged_does_not_count_as_kept() -> None:
    dives = strategies.Dives(depth=30.0, gas="nitrox 48")
    found = strategies.explore(
        {"bottom_time": [10.0, 20.0]}, ["ascent_time"], ["noaa_cns_single"], build=dives
    )
    assert set(found.status.values.ravel()) == {"not applicable"}
    assert not found.kept.any()


@pytest.mark.parametrize(
    ("call", "error"),
    [
        (lambda: strategies.explore({}, ["uptd"]), RangeError),
        (lambda: strategies.explore({"x": []}, {"y": lambda c: c.x}), RangeError),
        (lambda: strategies.explore({"x": [1.0]}, {}), RangeError),
        (lambda: strategies.explore({"x": [1.0]}, ["uptds"]), UnknownNameError),
        (lambda: strategies.explore({"x": [1.0]}, {"y": lambda c: c.x}, ["po2_noa"]), UnknownNameError),
        (lambda: strategies.explore({"x": [1.0]}, {"y": lambda c: c.x}, ["po2_osha"]), ExposureError),
        (lambda: strategies.explore({"x": Uniform(0, 1)}, {"y": lambda c: c.x}), RangeError),
        (lambda: strategies.explore({"x": [1.0]}, {"y": lambda c: [1.0, 2.0]}), RangeError),
        (lambda: strategies.explore({"x": [1.0]}, {"y": lambda c: c.x}, only=lambda c: c.x > 2), RangeError),
        (lambda: strategies.explore({"x": [1.0]}, {"y": lambda c: c.x}, block=0), RangeError),
        (lambda: strategies.explore({"x": [1.0]}, {"y": lambda c: c.x}, where="thread"), UnknownNameError),
        (
            lambda: strategies.explore({"x": [1.0]}, ["uptd"], build=strategies.Dives(depth=30)),
            UnknownNameError,
        ),
        (lambda: strategies.explore({"depth": [30.0]}, ["uptd"], build=strategies.Dives()), RangeError),
        (
            lambda: strategies.explore({"bottom_time": [1.0]}, ["uptd"], build=strategies.Dives(depth=30.0)),
            RangeError,
        ),
        (
            lambda: strategies.explore(
                {"bottom_o2": [0.5], "bottom_helium": [0.6]},
                ["uptd"],
                build=strategies.Dives(depth=30.0, bottom_time=10.0),
            ),
            RangeError,
        ),
        (lambda: strategies.cost({"heliums": 1.0}, DEMAND), UnknownNameError),
        (lambda: strategies.cost({"helium": -1.0}, DEMAND), RangeError),
        (lambda: strategies.overstay_margin(0.0), RangeError),
        (lambda: strategies.explore({"x": [1.0]}, ["uptd", "uptd"]), RangeError),
    ],
)
def test_refusals(call, error) -> None:
    with pytest.raises(error):
        call()


def test_draws_of_scenarios_are_the_space_of_both() -> None:
    """One distribution means the same in a sample and in a space."""
    one = strategies.explore({"fio2": scenarios.Normal(0.95, 0.04)}, {"y": lambda c: c.fio2}, rng=3, n=64)
    two = scenarios.sample({"fio2": scenarios.Normal(0.95, 0.04)}, 64, 3, "sobol")
    np.testing.assert_array_equal(one.fio2, two.fio2)
    assert one.fio2.attrs["units"] == "1"
