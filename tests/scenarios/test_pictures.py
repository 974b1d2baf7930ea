"""Pictures and tables of uncertainty say what the datasets say."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

import gasphys as gp
from gasphys import GasphysError, scenarios
from gasphys.plots import limit_chance_figure, sensitivity_figure
from gasphys.quantities import CAUTION
from gasphys.scenarios import Normal, Uniform


def words(figure) -> str:
    from matplotlib.text import Text

    return "\n".join(t.get_text() for t in figure.findobj(Text)).replace("\n", " ")


def chance(models: bool) -> xr.Dataset:
    times = np.array([[5.0, 6.0, 7.0, np.nan], [4.0, 5.0, np.nan, np.nan]])
    first = xr.DataArray(
        times, dims=("model", "draw"), coords={"model": ["one_model", "another"]}, name="first_crossing"
    )
    return scenarios.crossing_chance(first if models else first.isel(model=0, drop=True), at=np.arange(11.0))


def test_chance_of_one_model() -> None:
    figure = limit_chance_figure(chance(False))
    (axes,) = figure.axes
    curve = axes.lines[0].get_ydata()
    np.testing.assert_allclose(curve, [0, 0, 0, 0, 0, 25, 50, 75, 75, 75, 75], rtol=1e-12)
    assert "half have crossed by 6.0 min" in words(figure)
    assert CAUTION in words(figure)


def test_chance_of_models_with_their_shares_under_it() -> None:
    ds = chance(True)
    figure = limit_chance_figure(ds)
    top, below = figure.axes
    for text in ("one model", "another", "all models", "parameters", "4 draws"):
        assert text in words(figure)
    np.testing.assert_allclose(top.lines[0].get_ydata()[-1], 62.5, rtol=1e-12)
    # Three areas, one on the other, up to 100 where there is a variance and nowhere else.
    assert len(below.collections) == 3
    heights = [c.get_datalim(below.transData).y1 for c in below.collections]
    assert heights[-1] == pytest.approx(100.0, rel=1e-9)
    assert below.collections[0].get_datalim(below.transData).x0 >= 4.0


def test_wrong_datasets_are_refused() -> None:
    for wrong in (xr.Dataset(), chance(False).expand_dims(limit=2)):
        with pytest.raises(GasphysError):
            limit_chance_figure(wrong)
        with pytest.raises(GasphysError):
            sensitivity_figure(wrong)


@pytest.mark.parametrize("screening", [False, True])
def test_inputs_stand_by_weight(screening: bool) -> None:
    what = {"fraction": Uniform(0.2, 0.4), "total_pressure": Normal(250.0, 5.0)}
    if screening:
        ds = scenarios.elementary_effects(gp.laws.dalton_partial_pressure, what, 10, rng=1)
    else:
        ds = scenarios.sobol(gp.laws.dalton_partial_pressure, what, 256, rng=1)
    (axes,) = sensitivity_figure(ds).axes
    names = [t.get_text() for t in axes.get_yticklabels()]
    assert names[-1] == "mole fraction" or "fraction" in names[-1]
    width = max(p.get_width() for p in axes.patches)
    key, scale = ("mean_absolute_effect", 1.0) if screening else ("total", 100.0)
    assert width == pytest.approx(scale * float(ds[key].max()), rel=1e-12)
    text = scenarios.ranking_text(ds)
    assert text.index("fraction") < text.index("total_pressure")
    assert ("mean absolute effect" in text) == screening
