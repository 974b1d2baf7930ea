"""Propagation against Monte Carlo and closed forms; chances of crossing; whose doing the variance is."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import xarray as xr
from scipy import stats

import gasphys as gp
from gasphys import Exposure, GasphysError, review, scenarios, tissues
from gasphys.errors import RangeError, UnknownNameError
from gasphys.limits import Limit, load
from gasphys.scenarios import Normal, Triangular, Uniform

#: Equation, where it is looked at, standard uncertainties: small enough that it is nearly straight.
CASES = {
    "alveolar_po2": (
        gp.lungs.alveolar_po2,
        {"ambient_pressure": 243.18, "fio2": 0.6, "alveolar_pco2": 5.33, "respiratory_exchange_ratio": 0.82},
        {"ambient_pressure": 1.0, "fio2": 0.004, "alveolar_pco2": 0.3, "respiratory_exchange_ratio": 0.03},
    ),
    "o2_content": (
        gp.blood.o2_content.pick(model="severinghaus_1979"),
        {"po2": 12.0, "hemoglobin": 14.0},
        {"po2": 0.15, "hemoglobin": 0.4},
    ),
    "resistive_work": (
        gp.breathing.resistive_work.pick(phases="both"),
        {"ventilation_btps": 60.0, "density_ratio": 3.0, "k1": 0.24, "k2": 0.03},
        {"density_ratio": 0.05, "k1": 0.02, "k2": 0.0015},
    ),
    "boyle_volume": (
        gp.laws.boyle_volume,
        {"volume": 0.06, "initial_pressure": 280.0, "final_pressure": 101.3},
        {"volume": 0.001, "initial_pressure": 2.0, "final_pressure": 0.5},
    ),
    "compartment": (
        gp.tissues.tissue_pressure,
        {
            "initial_tissue_pressure": 74.0,
            "start_inert_pressure": 280.0,
            "end_inert_pressure": 280.0,
            "duration": 20.0,
            "half_time": 27.0,
        },
        {"duration": 0.3, "half_time": 0.6, "start_inert_pressure": 2.0},
    ),
}


@pytest.mark.parametrize("name", CASES)
def test_monte_carlo_agrees_with_exact_derivatives_within_three_standard_errors(name: str) -> None:
    f, values, uncertain = CASES[name]
    n = 20_000
    units = {a.name: a.quantity.unit for a in f.arguments}
    draws = scenarios.sample({k: Normal(values[k], u, units[k]) for k, u in uncertain.items()}, n, rng=11)
    found = f(**(values | {k: draws[k] for k in uncertain}))
    exact = scenarios.propagate(f, values, uncertain)
    spread = float(exact.standard_uncertainty)
    assert float(found.std(ddof=1)) == pytest.approx(spread, abs=3.0 * spread / np.sqrt(2.0 * (n - 1)))
    assert float(found.mean()) == pytest.approx(float(exact.value), abs=3.0 * spread / np.sqrt(n))
    assert float(exact.variance_share.sum()) == pytest.approx(1.0, rel=1e-12)


def test_correlated_inputs_agree_too() -> None:
    """u^2 = a^2 + b^2 + 2 r a b (JCGM 100:2008, equation 13, from memory)."""
    values = {"ambient_pressure": 243.18, "fio2": 1.0, "alveolar_pco2": 5.33}
    uncertain = {"ambient_pressure": 1.0, "alveolar_pco2": 0.4}
    pair = {("ambient_pressure", "alveolar_pco2"): 0.7}
    exact = scenarios.propagate(gp.lungs.alveolar_po2, values, uncertain, correlation=pair)
    # At fio2 1 the slopes are 1 and -1.
    assert float(exact.standard_uncertainty) == pytest.approx(np.sqrt(1.0 + 0.16 - 2 * 0.7 * 0.4), rel=1e-12)
    n = 20_000
    draws = scenarios.sample({k: Normal(values[k], u) for k, u in uncertain.items()}, n, 3, correlation=pair)
    found = gp.lungs.alveolar_po2(draws.ambient_pressure, 1.0, draws.alveolar_pco2)
    spread = float(exact.standard_uncertainty)
    assert float(found.std()) == pytest.approx(spread, abs=3.0 * spread / np.sqrt(2.0 * n))


def test_propagation_broadcasts_and_refuses() -> None:
    pressure = xr.DataArray([101.325, 243.18], dims="p", attrs={"units": "kPa"})
    values = {"ambient_pressure": pressure, "fio2": 0.5, "alveolar_pco2": 5.33}
    found = scenarios.propagate(gp.lungs.alveolar_po2, values, {"fio2": 0.01})
    assert found.standard_uncertainty.dims == ("p",)
    np.testing.assert_allclose(found.variance_share, 1.0, rtol=1e-14)
    for wrong, error in (({"fio": 0.1}, UnknownNameError), ({"fio2": -0.1}, RangeError), ({}, RangeError)):
        with pytest.raises(error):
            scenarios.propagate(gp.lungs.alveolar_po2, values, wrong)


def test_band_of_four_rectangular_inputs() -> None:
    """JCGM 101:2008, 9.2.3 (from memory): +-2 sqrt(3) (2 - (3/5)^(1/4)) = +-3.88 holds 95 of 100 values."""
    n = 2**15
    what = scenarios.sample(dict.fromkeys("abcd", Uniform(-np.sqrt(3), np.sqrt(3))), n, 1, "sobol")
    total = what.a + what.b + what.c + what.d
    low, high = scenarios.bands(total, [0.025, 0.975]).values
    exact = 2.0 * np.sqrt(3.0) * (2.0 - 0.6**0.25)
    assert round(exact, 2) == 3.88
    assert high == pytest.approx(exact, abs=0.03)
    assert low == pytest.approx(-exact, abs=0.03)


def test_quantiles_are_draws_and_a_crossing_that_never_happens_is_late() -> None:
    times = xr.DataArray([np.nan, 3.0, 1.0, np.nan, 2.0], dims="draw", name="first_crossing")
    found = scenarios.bands(times, [0.2, 0.6, 0.8])
    np.testing.assert_array_equal(found, [1.0, 3.0, np.nan])
    ds = scenarios.bands(xr.Dataset({"x": ("draw", [1.0, 2.0]), "word": ("draw", ["a", "b"])}))
    assert list(ds) == ["x"]
    for call in (
        lambda: scenarios.bands(times, [1.5]),
        lambda: scenarios.bands(times, dim="x"),
        lambda: scenarios.bands(xr.Dataset()),
    ):
        with pytest.raises(GasphysError):
            call()


# -- Chances of crossing -----------------------------------------------------------------------------


def po2_limit(value: float) -> Limit:
    return replace(next(x for x in load() if x.id == "po2_training_1995"), value=value, site=True)


def test_chance_of_a_depth_too_deep_is_the_normal_tail() -> None:
    n = 10_000
    depth = scenarios.sample({"depth": Normal(38.0, 1.5)}, n, rng=1).depth
    dive = Exposure.start("nitrox 32").travel(depth=depth, rate=10).stay(5)
    found = scenarios.crossing_chance(
        review(dive, limits=[po2_limit(0.32 * (101.325 + 400.0))]).isel(limit=0)
    )
    exact = stats.norm.sf((40.0 - 38.0) / 1.5)
    last = found.isel(time=-1)
    assert float(last.chance) == pytest.approx(exact, abs=3.0 * np.sqrt(exact * (1 - exact) / n))
    assert float(last.chance_low) < exact < float(last.chance_high)
    k = round(n * float(last.chance))
    interval = stats.binomtest(k, n).proportion_ci(method="wilson")
    assert (float(last.chance_low), float(last.chance_high)) == pytest.approx(tuple(interval), rel=1e-9)


def test_time_of_crossing_at_a_rate_that_is_not_known() -> None:
    """At rate r the limit at 20 msw is crossed at 20/r: the chance by t is P(r >= 20/t)."""
    n = 10_000
    rate = scenarios.sample({"rate": Uniform(5.0, 20.0)}, n, rng=1).rate
    dive = Exposure.start("nitrox 32").travel(depth=40.0, rate=rate)
    row = review(dive, limits=[po2_limit(0.32 * (101.325 + 200.0))]).isel(limit=0)
    at = np.array([0.5, 1.5, 2.0, 3.0, 4.1])
    found = scenarios.crossing_chance(row, at=at)
    exact = np.clip((20.0 - 20.0 / at) / 15.0, 0.0, 1.0)
    np.testing.assert_allclose(found.chance, exact, atol=3.0 * 0.5 / np.sqrt(n))
    assert np.all(np.diff(found.chance) >= 0.0)
    median = 20.0 / 12.5
    assert float(found.crossing_time.sel(quantile=0.5)) == pytest.approx(median, rel=0.02)


def test_draws_that_cannot_be_judged_are_left_out_and_told() -> None:
    depth = xr.DataArray([5.0, 20.0, 40.0, 60.0], dims="draw", attrs={"units": "msw"})
    dive = Exposure.start("nitrox 48").travel(depth=depth, rate=20).stay(170)
    found = review(dive).sel(limit="noaa_cns_single")
    assert found.status.values.tolist() == ["within", "beyond", "not applicable", "not applicable"]
    chance = scenarios.crossing_chance(found)
    assert float(chance.judged_share) == 0.5
    assert float(chance.chance[-1]) == 0.5
    with pytest.raises(GasphysError, match="draws"):
        scenarios.crossing_chance(found.isel(draw=0))


# -- Parameters and models ---------------------------------------------------------------------------


def test_split_of_a_sum_is_exact() -> None:
    """y = m + x: the variance of a sum of independent parts is the sum of theirs."""
    x = xr.DataArray(np.random.default_rng(1).normal(size=50), dims="draw")
    m = xr.DataArray([0.0, 1.0, 5.0], dims="model")
    found = scenarios.variance_split(m + x)
    assert float(found.total_variance) == pytest.approx(float(m.var() + x.var()), rel=1e-12)
    assert float(found.model_share) == pytest.approx(float(m.var() / (m.var() + x.var())), rel=1e-12)
    assert float(found.joint_share) == pytest.approx(0.0, abs=1e-12)
    product = scenarios.variance_split((m - 2.0) * (x - x.mean()))
    assert float(product.parameter_share) == pytest.approx(0.0, abs=1e-12)
    assert float(product.joint_share) == pytest.approx(1.0, rel=1e-12)
    assert np.isnan(scenarios.variance_split(0.0 * (m + x) + 3.3).model_share)
    with pytest.raises(GasphysError):
        scenarios.variance_split(x)


def test_models_and_parameters_of_a_limit() -> None:
    names = ["workman_1965", "buhlmann_1983", "buhlmann_1995_c"]
    what = scenarios.sample(
        {
            "depth": Normal(30.0, 1.0),
            "duration": Uniform(15.0, 25.0),
            "half_time_factor": Triangular(0.8, 1.0, 1.25),
            "rate": Triangular(6.0, 9.0, 18.0),
        },
        400,
        2,
        "sobol",
    )
    dive = Exposure.start("air").travel(depth=what.depth, rate=20).stay(what.duration)
    dive = dive.travel(depth=0, rate=what.rate)
    found = review(dive, limits=scenarios.tissue_limits(names), tissue_factors=what)
    chance = scenarios.crossing_chance(found, across="limit")
    np.testing.assert_allclose(chance.chance_by_model.mean("limit"), chance.chance, rtol=1e-12, atol=1e-15)
    last = chance.isel(time=-1)
    assert float(last.parameter_share + last.model_share + last.joint_share) == pytest.approx(1.0, rel=1e-12)
    assert float(last.chance) == pytest.approx(float((found.status == "beyond").mean()), rel=1e-12)
    # One model only: nothing is the models'.
    one = scenarios.crossing_chance(found.isel(limit=[2]), across="limit").isel(time=-1)
    assert float(one.model_share) == 0.0
    assert float(one.parameter_share) == pytest.approx(1.0, rel=1e-12)


# -- Reviews over draws ------------------------------------------------------------------------------

NUMBERS = ("worst", "margin", "time_of_worst", "first_crossing", "time_beyond")


def test_a_review_of_many_is_that_of_each() -> None:
    n = 16
    what = scenarios.sample(
        {
            "depth": Uniform(15.0, 80.0),
            "duration": Uniform(5.0, 60.0),
            "arterial_pco2": Normal(5.3, 0.4),
            "half_time_factor": Uniform(0.8, 1.2),
            "m_value_a_factor": Uniform(0.8, 1.2),
            "m_value_b_factor": Uniform(0.9, 1.1),
        },
        n,
        rng=1,
    )

    def dive(depth, duration):
        start = Exposure.start("trimix 17/48").travel(depth=depth, rate=20).stay(duration)
        start = start.travel(depth=12, rate=9).switch("nitrox 48").stay(5).travel(depth=6, rate=9)
        return start.switch("oxygen").stay(20).travel(depth=0, minutes=2)

    for role in ("diver", "attendant"):
        many = review(
            dive(what.depth, what.duration),
            gp.Person(arterial_pco2=what.arterial_pco2),
            role,
            tissue_factors=what,
        )
        for k in range(n):
            row = {str(v): float(what[v][k]) for v in what}
            one = review(
                dive(row["depth"], row["duration"]),
                gp.Person(arterial_pco2=row["arterial_pco2"]),
                role,
                tissue_factors=row,
            )
            np.testing.assert_array_equal(many.status.isel(draw=k), one.status)
            for name in NUMBERS:
                np.testing.assert_allclose(many[name].isel(draw=k), one[name], rtol=1e-12, atol=1e-12)


def test_tissue_factors_do_what_a_set_with_other_numbers_does() -> None:
    dive = Exposure.start("air").travel(depth=30, rate=20).stay(25).travel(depth=0, rate=9)
    factors = {"half_time_factor": 0.9, "m_value_a_factor": 1.1, "m_value_b_factor": 0.95}
    found = review(dive, limits=scenarios.tissue_limits(["buhlmann_1995_c"]), tissue_factors=factors)
    own = tissues.load("buhlmann_1995_c")
    other = replace(own, half_time=0.9 * own.half_time, a=1.1 * own.a, b=0.95 * own.b)
    share = tissues.tensions(dive, other).limit_fraction.max()
    assert float(found.worst[0]) == pytest.approx(float(share), rel=1e-12)
    with pytest.raises(GasphysError, match="multiplied"):
        gp.explain(found, "worst", limit="buhlmann_1995_c")


def test_tissues_are_at_the_limit_when_it_is_crossed() -> None:
    """In a stay and on the way up: the model itself, asked for that instant, gives the limit."""
    for share, leave in ((0.8, 8.0), (1.0, 9.0)):
        dive = Exposure.start("air").travel(depth=40, rate=20).stay(20).travel(depth=0, rate=leave).stay(10)
        found = review(dive, limits=scenarios.tissue_limits(["buhlmann_1995_c"], share))
        when = float(found.first_crossing[0])
        there = tissues.tensions(dive, at=[when]).sel(time=when, method="nearest").limit_fraction.max()
        assert float(there) == pytest.approx(share, rel=1e-9)
    # A stay at 6 msw after a dive at 40: over the limit at once, and back under it within the stay.
    dive = Exposure.start("air").travel(depth=40, rate=20).stay(25).travel(depth=6, rate=60).stay(60)
    found = review(dive, limits=scenarios.tissue_limits(["buhlmann_1995_c"]))
    end = float(found.first_crossing[0] + found.time_beyond[0])
    there = tissues.tensions(dive, at=[end]).sel(time=end, method="nearest").limit_fraction.max()
    assert float(there) == pytest.approx(1.0, rel=1e-9)


def test_half_times_scale_with_time() -> None:
    """Every half-time and every minute twice as long leaves each M-value's share as it was."""
    factor = xr.DataArray([1.0, 2.0], dims="draw")
    limits = scenarios.tissue_limits(["workman_1965"])
    dive = Exposure.start("air").travel(depth=30, minutes=1.5 * factor).stay(25 * factor)
    found = review(
        dive.travel(depth=0, minutes=3 * factor), limits=limits, tissue_factors={"half_time_factor": factor}
    )
    assert float(found.worst[0, 1]) == pytest.approx(float(found.worst[0, 0]), rel=1e-9)


def test_factors_by_compartment_and_refusals() -> None:
    names = list(tissues.load("us_navy_1957").compartments)
    factor = xr.DataArray(np.ones(len(names)), dims="compartment", coords={"compartment": names})
    dive = Exposure.start("air").travel(depth=30, rate=20).stay(25)
    limits = scenarios.tissue_limits(["us_navy_1957"])
    same = review(dive, limits=limits, tissue_factors={"m_value_a_factor": factor})
    assert float(same.worst[0]) == pytest.approx(float(review(dive, limits=limits).worst[0]), rel=1e-12)
    for wrong in ({"half_time_factor": 0.0}, {"halftime": 1.0}):
        with pytest.raises(GasphysError):
            review(dive, limits=limits, tissue_factors=wrong)
    serial = scenarios.tissue_limits(["kidd_stubbs_1983"])
    with pytest.raises(GasphysError, match="no half-times"):
        review(dive, limits=serial, tissue_factors={"half_time_factor": 1.1})
