"""Sobol indices of functions whose indices are known, and elementary effects of a plane.

Ishigami & Homma 1990 and the product function of Saltelli & Sobol 1995: integrals done here from their
formulas. The third function is Dalton's law, whose variance is two lines of algebra.
"""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from scipy import stats

import gasphys as gp
from gasphys import GasphysError, scenarios
from gasphys.errors import RangeError
from gasphys.scenarios import LogNormal, Normal, Uniform
from gasphys.scenarios.sensitivity import _indices


def within(found: xr.Dataset, name: str, expected: list[float]) -> None:
    low, high = found[f"{name}_low"].values, found[f"{name}_high"].values
    assert np.all(low - 1e-12 <= expected), (name, low, expected)
    assert np.all(expected <= high + 1e-12), (name, high, expected)
    # An interval that is wide enough for anything would prove nothing.
    assert np.all(high - low < 0.12)


def ishigami(x, y, z):
    """sin x + 7 sin^2 y + 0.1 z^4 sin x."""
    return np.sin(x) + 7.0 * np.sin(y) ** 2 + 0.1 * z**4 * np.sin(x)


def test_ishigami() -> None:
    a, b = 7.0, 0.1
    alone_x = 0.5 * (1.0 + b * np.pi**4 / 5.0) ** 2
    alone_y = a**2 / 8.0
    both = b**2 * np.pi**8 * (1.0 / 18.0 - 1.0 / 50.0)
    whole = alone_x + alone_y + both
    assert [round(v / whole, 4) for v in (alone_x, alone_y)] == [0.3139, 0.4424]  # as printed in textbooks
    found = scenarios.sobol(ishigami, dict.fromkeys("xyz", Uniform(-np.pi, np.pi)), 8192, rng=1)
    within(found, "first_order", [alone_x / whole, alone_y / whole, 0.0])
    within(found, "total", [(alone_x + both) / whole, alone_y / whole, both / whole])
    assert float(found.result_standard_deviation) == pytest.approx(np.sqrt(whole), rel=5e-3)


def test_product_function() -> None:
    weights = {"a": 0.0, "b": 1.0, "c": 4.5, "d": 9.0, "e": 99.0}

    def g(**x):
        found = 1.0
        for name, w in weights.items():
            found = found * (abs(4.0 * x[name] - 2.0) + w) / (1.0 + w)
        return found

    part = np.array([1.0 / (3.0 * (1.0 + w) ** 2) for w in weights.values()])
    whole = np.prod(1.0 + part) - 1.0
    total = part * np.prod(1.0 + part) / (1.0 + part) / whole
    found = scenarios.sobol(g, dict.fromkeys(weights, Uniform(0.0, 1.0)), 8192, rng=2)
    within(found, "first_order", part / whole)
    within(found, "total", total)


def test_partial_pressure_of_an_uncertain_gas() -> None:
    """The variance of a product of independent inputs, textbooks of statistics."""
    mean, variance = np.array([0.3, 250.0]), np.array([0.2, 100.0]) ** 2 / 12.0
    whole = np.prod(mean**2 + variance) - np.prod(mean**2)
    alone = variance * mean[::-1] ** 2 / whole
    total = variance * (mean[::-1] ** 2 + variance[::-1]) / whole
    what = {"fraction": Uniform(0.2, 0.4), "total_pressure": Uniform(200.0, 300.0)}
    found = scenarios.sobol(gp.laws.dalton_partial_pressure, what, 8192, rng=3)
    within(found, "first_order", alone)
    within(found, "total", total)
    assert float(found.result_mean) == pytest.approx(75.0, rel=1e-3)
    assert float(found.result_standard_deviation) == pytest.approx(np.sqrt(whole), rel=5e-3)


def test_estimators_are_those_of_scipy() -> None:
    """On the same runs: scipy.stats.sobol_indices, first order of Saltelli 2010, total of Jansen."""
    rng = np.random.default_rng(5)
    n, d = 256, 3
    first, second = rng.normal(size=(2, n, d))
    mixed = [np.where(np.arange(d) == k, second, first) for k in range(d)]

    def f(x):
        return x[:, 0] + x[:, 1] ** 2 * x[:, 2] + 40.0

    rows = np.stack([f(x) for x in (first, second, *mixed)])
    theirs = stats.sobol_indices(
        func={"f_A": rows[0][None], "f_B": rows[1][None], "f_AB": rows[2:, None]}, n=n
    )
    ours = _indices(rows)
    np.testing.assert_allclose(ours[0], np.ravel(theirs.first_order), rtol=1e-10)
    np.testing.assert_allclose(ours[1], np.ravel(theirs.total_order), rtol=1e-10)


def review_margin(depth, duration, half_time_factor):
    dive = gp.Exposure.start("air").travel(depth=depth, rate=20).stay(duration).travel(depth=0, rate=9)
    limits = scenarios.tissue_limits(["buhlmann_1995_c", "us_navy_1957"])
    found = gp.review(dive, limits=limits, tissue_factors={"half_time_factor": half_time_factor})
    return found.margin.rename("margin of the tissues")


WHAT = {"depth": Normal(30.0, 1.0), "duration": Uniform(15.0, 25.0), "half_time_factor": LogNormal(1.0, 1.1)}


def test_any_number_of_a_review_with_its_further_dimensions() -> None:
    found = scenarios.sobol(review_margin, WHAT, 256, rng=1)
    assert found.total.dims == ("parameter", "limit")
    assert found.limit.values.tolist() == ["buhlmann_1995_c", "us_navy_1957"]
    one = found.sel(limit="buhlmann_1995_c")
    assert scenarios.ranking_text(one).splitlines()[2].startswith("duration")
    assert "margin of the tissues" in found.attrs["title"]
    parts = scenarios.sobol(review_margin, WHAT, 256, rng=1, at_once=100)
    for name in ("first_order", "total", "total_low"):
        np.testing.assert_allclose(parts[name], found[name], rtol=1e-9, atol=1e-12)
    with pytest.raises(GasphysError, match="pick one number"):
        scenarios.ranking_text(found)


def test_what_does_not_vary_has_no_index_and_what_is_not_finite_is_refused() -> None:
    found = scenarios.sobol(lambda x: 0.0 * x + 3.7, {"x": Uniform(0.0, 1.0)}, 64, rng=1)
    assert np.isnan(found.total).all()
    with pytest.raises(GasphysError, match="not finite"):
        scenarios.sobol(lambda x: x.where(x > 0.1), {"x": Uniform(0.0, 1.0)}, 64, rng=1)
    with pytest.raises(TypeError, match="draw"):
        scenarios.sobol(lambda x: 1.0, {"x": Uniform(0.0, 1.0)}, 64, rng=1)
    with pytest.raises(RangeError, match="confidence"):
        scenarios.sobol(lambda x: x, {"x": Uniform(0.0, 1.0)}, 64, rng=1, confidence=1.0)


def test_elementary_effects_of_a_plane_are_its_slopes() -> None:
    what = {"x": Uniform(0.0, 1.0), "y": Uniform(-2.0, 2.0), "z": Uniform(0.0, 10.0)}
    found = scenarios.elementary_effects(lambda x, y, z: 3.0 * x - 2.0 * y + 0.0 * z, what, 12, rng=1)
    np.testing.assert_allclose(found.mean_effect, [3.0, -8.0, 0.0], rtol=1e-12, atol=1e-12)
    np.testing.assert_allclose(found.mean_absolute_effect, [3.0, 8.0, 0.0], rtol=1e-12, atol=1e-12)
    np.testing.assert_allclose(found.effect_deviation, 0.0, atol=1e-12)


def test_elementary_effects_of_a_product_have_the_mean_of_their_slopes() -> None:
    """Levels 0, 1/3, 2/3, 1 are equally frequent: the effect of x is y, of mean 1/2 and variance 5/36."""
    what = {"x": Uniform(0.0, 1.0), "y": Uniform(0.0, 1.0)}
    n = 4000
    found = scenarios.elementary_effects(lambda x, y: x * y, what, n, rng=1)
    spread = np.sqrt(5.0 / 36.0)
    np.testing.assert_allclose(found.mean_absolute_effect, 0.5, atol=3.0 * spread / np.sqrt(n))
    np.testing.assert_allclose(found.effect_deviation, spread, rtol=0.03)


def test_an_end_in_name_only_is_left_out() -> None:
    """A log-normal input reaches 0 with probability 0: its effect is over 99 % of it."""
    found = scenarios.elementary_effects(lambda x: x, {"x": LogNormal(1.0, 1.1)}, 8, rng=1, levels=2)
    low, high = LogNormal(1.0, 1.1).ppf(np.array([0.005, 0.995]))
    np.testing.assert_allclose(found.mean_effect, high - low, rtol=1e-9)


def test_screening_agrees_with_the_indices_on_what_matters() -> None:
    one = scenarios.sobol(review_margin, WHAT, 256, rng=1).isel(limit=0)
    two = scenarios.elementary_effects(review_margin, WHAT, 20, rng=1).isel(limit=0)
    assert np.argsort(one.total.values).tolist() == np.argsort(two.mean_absolute_effect.values).tolist()
    for wrong in ({"trajectories": 1}, {"trajectories": 4, "levels": 3}):
        with pytest.raises(RangeError):
            scenarios.elementary_effects(review_margin, WHAT, rng=1, **wrong)
