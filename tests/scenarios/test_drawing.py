"""Grids and draws: bounds, layers, correlation, and that an input takes them wherever it stands."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from scipy import stats

import gasphys as gp
from gasphys import GasphysError, Person, scenarios
from gasphys.errors import RangeError, UnitError, UnknownNameError
from gasphys.scenarios import Choice, LogNormal, Normal, Triangular, Uniform


def test_grid_has_a_dimension_for_each_name() -> None:
    what = scenarios.grid({"ambient_pressure": [101.325, 243.18], "fio2": [0.21, 0.4, 1.0]})
    found = gp.lungs.alveolar_po2(what["ambient_pressure"], what["fio2"], 5.33)
    assert found.dims == ("ambient_pressure", "fio2")
    for p in what.ambient_pressure.values:
        for f in what.fio2.values:
            one = float(found.sel(ambient_pressure=p, fio2=f))
            assert one == pytest.approx(gp.lungs.alveolar_po2(float(p), float(f), 5.33), rel=1e-14)


def test_grid_reads_units_and_refuses_what_is_not_possible() -> None:
    given = xr.DataArray([1.0, 2.4], dims="x", attrs={"units": "atm"})
    what = scenarios.grid({"ambient_pressure": given, "gas": ["air", "oxygen"]})
    np.testing.assert_allclose(what.ambient_pressure, [101.325, 243.18], rtol=1e-14)
    assert what.gas.values.tolist() == ["air", "oxygen"]
    for wrong in ({"fio2": [0.2, 1.2]}, {"fio2": []}, {}):
        with pytest.raises(RangeError):
            scenarios.grid(wrong)


@pytest.mark.parametrize("method", ["random", "latin_hypercube", "sobol"])
def test_draws_have_the_moments_of_the_distribution_cut_off_at_the_possible_range(method: str) -> None:
    """Truncated normal in closed form, by scipy."""
    n = 4096
    what = scenarios.sample({"fio2": Normal(0.95, 0.04)}, n, rng=1, method=method)
    low, high = gp.quantities.quantity("fio2").possible
    cut = stats.truncnorm((low - 0.95) / 0.04, (high - 0.95) / 0.04, 0.95, 0.04)
    values = what.fio2.values
    assert values.max() <= high
    assert abs(values.mean() - cut.mean()) < 3.0 * cut.std() / np.sqrt(n)
    assert stats.kstest(values, cut.cdf).pvalue > 1e-3
    assert what.fio2.attrs["left_out"] == pytest.approx(stats.norm.sf((high - 0.95) / 0.04), rel=1e-9)


@pytest.mark.parametrize(
    ("given", "same"),
    [
        (Normal(5.0, 0.5), stats.norm(5.0, 0.5)),
        (Uniform(4.0, 6.0), stats.uniform(4.0, 2.0)),
        (Triangular(4.0, 5.0, 7.0), stats.triang(1.0 / 3.0, 4.0, 3.0)),
        (LogNormal(5.0, 1.2), stats.lognorm(np.log(1.2), scale=5.0)),
    ],
)
def test_distributions_are_those_of_scipy(given, same) -> None:
    ours = scenarios.sample({"alveolar_pco2": given}, 64, rng=3)
    theirs = scenarios.sample({"alveolar_pco2": same}, 64, rng=3)
    np.testing.assert_allclose(ours.alveolar_pco2, theirs.alveolar_pco2, rtol=1e-12)


def test_a_unit_of_the_distribution_is_read() -> None:
    kpa = scenarios.sample({"arterial_pco2": Normal(40.0, 3.0, "mmHg")}, 32, rng=5).arterial_pco2
    mmhg = scenarios.sample({"x": Normal(40.0, 3.0)}, 32, rng=5).x
    np.testing.assert_allclose(kpa, gp.convert(mmhg.values, "mmHg", "kPa"), rtol=1e-12)
    assert kpa.units == "kPa"
    with pytest.raises(UnitError, match="arterial_pco2"):
        scenarios.sample({"arterial_pco2": Normal(40.0, 3.0, "min")}, 4)


def test_latin_hypercube_draws_one_in_each_layer() -> None:
    what = scenarios.sample({"x": Uniform(0.0, 1.0), "y": Uniform(0.0, 1.0)}, 50, 2, "latin_hypercube")
    for name in "xy":
        assert sorted(np.floor(50 * what[name].values)) == list(range(50))


def test_choice_follows_its_weights() -> None:
    values = scenarios.sample({"x": Choice([1.0, 5.0], [1, 3])}, 4096, 2, "sobol").x.values
    assert (values == 5.0).mean() == pytest.approx(0.75, abs=1e-3)
    assert Choice([1.0, 5.0], [1, 3]).cdf(np.array([0.0, 1.0, 5.0])).tolist() == [0.0, 0.25, 1.0]


@pytest.mark.parametrize("r", [-0.8, 0.3, 0.95])
def test_rank_correlation_is_that_of_the_gaussian_copula(r: float) -> None:
    """6/pi asin(r/2), textbooks on copulas (from memory)."""
    n = 20_000
    what = scenarios.sample(
        {"arterial_pco2": LogNormal(5.3, 1.1), "fio2": Uniform(0.3, 0.6), "hemoglobin": Normal(14, 1)},
        n,
        rng=4,
        correlation={("arterial_pco2", "fio2"): r},
    )
    found = stats.spearmanr(what.arterial_pco2, what.fio2).statistic
    assert found == pytest.approx(6.0 / np.pi * np.arcsin(0.5 * r), abs=3.0 / np.sqrt(n))
    assert abs(stats.spearmanr(what.fio2, what.hemoglobin).statistic) < 3.0 / np.sqrt(n)
    assert stats.kstest(what.fio2.values, stats.uniform(0.3, 0.3).cdf).pvalue > 1e-3


def test_one_seed_gives_one_sample() -> None:
    what = {"fio2": Uniform(0.2, 0.4)}
    for method in ("random", "latin_hypercube", "sobol"):
        one = scenarios.sample(what, 20, np.random.default_rng(7), method)
        assert one.identical(scenarios.sample(what, 20, 7, method))
        assert not one.equals(scenarios.sample(what, 20, 8, method))


@pytest.mark.parametrize(
    ("call", "error"),
    [
        (lambda: scenarios.sample({}, 3), RangeError),
        (lambda: scenarios.sample({"fio2": Uniform(0.2, 0.4)}, 0), RangeError),
        (lambda: scenarios.sample({"fio2": Uniform(0.2, 0.4)}, 3, method="sobel"), UnknownNameError),
        (lambda: scenarios.sample({"fio2": Normal(2.0, 0.1)}, 3), RangeError),
        (lambda: scenarios.sample({"fio2": 0.3}, 3), TypeError),
        (lambda: Normal(1.0, 0.0), RangeError),
        (lambda: Normal(np.nan, 1.0), RangeError),
        (lambda: LogNormal(1.0, 1.0), RangeError),
        (lambda: LogNormal(-1.0, 2.0), RangeError),
        (lambda: Uniform(1.0, 1.0), RangeError),
        (lambda: Triangular(1.0, 0.0, 2.0), RangeError),
        (lambda: Choice([]), RangeError),
        (lambda: Choice([1.0], [-1.0]), RangeError),
    ],
)
def test_refusals(call, error) -> None:
    with pytest.raises(error):
        call()


@pytest.mark.parametrize(
    "correlation",
    [
        {("x", "y"): 0.9, ("y", "z"): 0.9, ("x", "z"): -0.9},
        {("x", "x"): 0.5},
        {("x", "y"): 1.5},
        {("x", "y"): 0.5, ("y", "x"): 0.4},
        {("x", "fio"): 0.5},
    ],
)
def test_contradictory_correlations_are_refused(correlation) -> None:
    what = dict.fromkeys("xyz", Uniform(0.0, 1.0))
    with pytest.raises(GasphysError):
        scenarios.sample(what, 5, 1, correlation=correlation)


def test_draws_stand_wherever_the_input_does() -> None:
    """Equation, exposure, person, model, dose, plan and review take them as one run is written."""
    what = scenarios.sample(
        {"depth": Normal(30.0, 1.0), "duration": Uniform(15.0, 25.0), "arterial_pco2": Normal(5.3, 0.3)}, 6, 1
    )
    dive = gp.Exposure.start("air").travel(depth=what.depth, rate=20).stay(what.duration)
    person = Person(arterial_pco2=what.arterial_pco2)
    plan = gp.ascent.plan(dive)
    up = plan.exposure
    whole = {
        "model": gp.tissues.tensions(dive).final,
        "oxygenation": gp.gas_exchange.oxygenation(dive, person).arterial_po2.isel(point=-1),
        "dose": gp.doses.oxygen(up, ["uptd"]).dose,
        "plan": plan.ascent_time,
        "review": gp.review(up, person).worst.sel(limit="alveolar_po2_maximal_apnea"),
    }
    for k in range(6):
        one = (
            gp.Exposure.start("air").travel(depth=float(what.depth[k]), rate=20).stay(float(what.duration[k]))
        )
        alone = Person(arterial_pco2=float(what.arterial_pco2[k]))
        planned = gp.ascent.plan(one)
        single = {
            "model": gp.tissues.tensions(one).final.values,
            "oxygenation": gp.gas_exchange.oxygenation(one, alone).arterial_po2.values[-1],
            # The batch cuts its ways up into more pieces: the same pieces, for the last digits.
            "dose": gp.doses.oxygen(up.pick(draw=k), ["uptd"]).dose.values,
            "plan": planned.ascent_time,
            "review": gp.review(planned.exposure, alone).worst.sel(limit="alveolar_po2_maximal_apnea").values,
        }
        for name, expected in single.items():
            got = whole[name].sel(draw=k).values
            np.testing.assert_allclose(got, expected, rtol=1e-12, err_msg=name)


def test_each_runs_what_takes_one_value() -> None:
    what = scenarios.grid({"gas": ["trimix 17/48", "air"], "ambient_pressure": [700.0, 400.0]})
    found = scenarios.each(lambda gas, ambient_pressure: gp.real_gas.density(ambient_pressure, gas), what)
    assert found.dims == ("gas", "ambient_pressure")
    assert float(found.sel(gas="air", ambient_pressure=400.0)) == gp.real_gas.density(400.0, "air")
    drawn = scenarios.sample({"depth": Uniform(20.0, 40.0)}, 3, 1)
    ds = scenarios.each(lambda depth: gp.review(gp.Exposure.start("air").travel(depth=depth, rate=9)), drawn)
    assert ds.worst.dims == ("draw", "limit")
    top = ds.worst.sel(limit="po2_osha") / 0.21
    np.testing.assert_allclose(top, 101.325 + 10.0 * drawn.depth, rtol=1e-12)
