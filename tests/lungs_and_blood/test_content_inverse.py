"""PO2 at a content: exact for every curve, hemoglobin and kind of input; brentq as second opinion."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from scipy.optimize import brentq

import gasphys as gp
from gasphys import blood
from gasphys.blood import oxygen

MMHG = gp.convert(1.0, "mmHg", "kPa")
MODELS = tuple(blood.o2_content.registry)
HEMOGLOBINS = (0.0, 0.4, 3.0, 15.0, 20.0)


@pytest.fixture(autouse=True)
def _quiet():
    with gp.validity("ignore"):
        yield


def _grid(model: str, n: int) -> np.ndarray:
    low = 10.001 if model == "kelman_1966" else 0.1
    return np.concatenate([np.geomspace(low, 3000.0, n), np.linspace(low, 3000.0, n)]) * MMHG


@pytest.mark.parametrize("hemoglobin", HEMOGLOBINS)
@pytest.mark.parametrize("model", MODELS)
def test_strictly_increasing_and_exact_both_ways(model, hemoglobin):
    for count in (200, 20_000):  # bracketed, and by the table of first guesses
        po2 = _grid(model, count)
        content = blood.o2_content(po2, hemoglobin, model, pco2="40 mmHg")
        assert np.all(np.diff(content[:count]) > 0.0)
        assert np.all(np.diff(content[count:]) > 0.0)
        back = blood.po2_at_content(content, hemoglobin, model, pco2="40 mmHg")
        np.testing.assert_allclose(back, po2, rtol=1e-11)


@pytest.mark.parametrize("model", MODELS)
def test_every_state_and_every_shape(model):
    rng = np.random.default_rng(3)
    low = 40.0 if model == "kelman_1966" else 0.1
    po2 = np.exp(rng.uniform(np.log(low), np.log(3000.0), (150, 100))) * MMHG
    state = {
        "hemoglobin": rng.uniform(0.0, 20.0, po2.shape),
        "ph": rng.uniform(6.9, 7.7, (150, 1)),
        "temperature": rng.uniform(25.0, 42.0, (1, 100)),
        "pco2": 6.0,
    }
    content = blood.o2_content(po2, model=model, **state)
    back = blood.po2_at_content(content, model=model, **state)
    assert back.shape == po2.shape
    np.testing.assert_allclose(back, po2, rtol=1e-10)
    fixed = {"hemoglobin": 12.0, "ph": 7.1, "temperature": 33.0, "pco2": 8.0}
    back = blood.po2_at_content(blood.o2_content(po2, model=model, **fixed), model=model, **fixed)
    np.testing.assert_allclose(back, po2, rtol=1e-10)


@pytest.mark.parametrize("model", MODELS)
def test_against_brentq(model):
    f = blood.o2_content.pick(model=model)
    rest = [a.default for a in f.arguments[1:]]
    rng = np.random.default_rng(4)
    low = 1.4 if model == "kelman_1966" else 0.01
    for content in rng.uniform(f.raw(low, *rest), 28.0, 50):
        root = brentq(lambda p, c: f.raw(p, *rest) - c, low, 400.0, args=(content,), xtol=1e-13, rtol=1e-15)
        assert blood.po2_at_content(content, model=model) == pytest.approx(root, rel=1e-11)


def test_without_hemoglobin_what_is_dissolved_is_all():
    assert blood.po2_at_content(3.1, 0.0) == pytest.approx(1000.0 * MMHG, rel=1e-13)
    assert blood.o2_content("1000 mmHg", 0.0) == pytest.approx(3.1, rel=1e-13)
    values = np.linspace(0.0, 90.0, 30_000)
    np.testing.assert_allclose(
        blood.po2_at_content(values, 0.0), blood.po2_for_dissolved_o2(values), rtol=1e-12
    )


def test_kelman_takes_the_polynomial_where_two_pressures_fit():
    # The jump at 10 mmHg goes down: between 0.087 and 0.095 both branches have a root.
    f = blood.o2_content.pick(model="kelman_1966")
    rest = (15.0, 7.4, 37.0, 40.0 * MMHG)
    start = float(oxygen._kelman_start(rest[1:]))
    for content in np.linspace(f.raw(start, *rest), f.raw(start * (1.0 - 1e-9), *rest), 7):
        found = blood.po2_at_content(content, *rest[:1], "kelman_1966", *rest[1:])
        assert found >= start
        assert f.raw(found, *rest) == pytest.approx(content, rel=1e-12)
    below = 0.99 * f.raw(start, *rest)
    found = blood.po2_at_content(below, 15.0, "kelman_1966", *rest[1:])
    assert found < start
    assert f.raw(found, *rest) == pytest.approx(below, rel=1e-12)
    many = np.linspace(0.5, 3.0, 20_000)
    np.testing.assert_allclose(
        blood.po2_at_content(many, 15.0, "kelman_1966"),
        np.concatenate([blood.po2_at_content(part, 15.0, "kelman_1966") for part in np.split(many, 40)]),
        rtol=1e-12,
    )


def test_missing_values_stay_missing_and_labels_stay():
    values = np.linspace(0.0, 29.0, 20_000)
    values[7] = np.nan
    found = blood.po2_at_content(values)
    assert np.flatnonzero(np.isnan(found)).tolist() == [7]
    labelled = xr.DataArray(values.reshape(100, 200), dims=("draw", "time"), attrs={"units": "mL/dL"})
    result = blood.po2_at_content(labelled)
    np.testing.assert_array_equal(result.values.ravel(), found)
    assert result.attrs["units"] == "kPa"
    lazy = blood.po2_at_content(labelled.chunk({"draw": 30}))
    np.testing.assert_allclose(lazy.compute().values, result.values, rtol=1e-11)
    assert blood.po2_at_content(np.array([])).shape == (0,)


def test_beyond_the_table_it_is_still_exact():
    po2 = np.linspace(300.0, 3000.0, 20_000)  # kPa: the table ends at 400
    content = blood.o2_content(po2)
    np.testing.assert_allclose(blood.po2_at_content(content), po2, rtol=1e-12)
    with gp.validity("raise"), pytest.raises(gp.errors.ValidityError, match="400 kPa"):
        blood.po2_at_content(float(content[-1]))
