"""Any equation of the registry has a page: it begins with an answer and reproduces itself."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import gasphys as gp
from gasphys.plots.equation_curve import EquationCurve
from gasphys.plots.style import new_figure
from gasphys.quantities import CAUTION
from gasphys.widgets import EquationPage

NAMES = list(gp.equations())


#: At no place of the usual ranges, taken together, is there a result.
NO_START = ("bubbles.closed_nucleus_radius",)


def _view(app: EquationPage) -> Any:
    app.view  # noqa: B018 (built when it is asked for)
    return app._shown


@pytest.mark.parametrize("topic", sorted({name.split(".")[0] for name in NAMES}))
def test_every_equation_begins_with_an_answer_and_its_lines_give_the_same(topic: str) -> None:
    for name in (n for n in NAMES if n.split(".")[0] == topic and n not in NO_START):
        app = EquationPage(name)
        ds, result = app.compute(), app.equation.result
        answer = app.answer(ds)
        assert answer.lower().startswith(f"{result.long_name.lower()} is "), name
        assert not answer.startswith(f"{result.long_name} is no value"), name
        assert ds.attrs["comment"] == CAUTION
        space: dict[str, Any] = {}
        exec(app.lines(), space)
        np.testing.assert_array_equal(space["ds"][result.name].values, ds[result.name].values, name)
        axis = app._against().name
        there = ds[result.name].sel({axis: ds.attrs["chosen_value"]})
        with gp.validity("ignore"):
            alone = float(app.formula()(**app._inputs()))
        assert float(there) == pytest.approx(alone, rel=1e-12, abs=1e-15), name
        assert app.explain(ds, result.name).startswith(f"{result.name} = "), name


def test_the_answer_is_the_published_one() -> None:
    """1737 mmHg: 100 % O2 at 2.4 atm and a PCO2 of 40 mmHg, see tests/published/alveolar_gas.csv."""
    app = EquationPage(
        "lungs.alveolar_po2",
        ambient_pressure="2.4 atm",
        fio2=1.0,
        alveolar_pco2="40 mmHg",
        result_unit="mmHg",
    )
    assert app.answer(app.compute()).startswith("Alveolar PO2 is 1737 mmHg;")


def test_a_choice_asks_for_the_formula_and_says_what_it_does_not_use() -> None:
    app = EquationPage("blood.o2_saturation", po2="26.8 mmHg")
    view = _view(app)
    values = set()
    for name in app.members:
        view.entries["formula"].value = name
        assert view.message.value == ""
        f = gp.equations()[name]
        expected = f(**{a.name: app.params[a.name] for a in f.arguments})
        ds = app.compute()
        assert float(ds.o2_saturation.sel(po2=app.params["po2"])) == pytest.approx(float(expected), rel=1e-12)
        values.add(float(expected))
    assert len(values) == len(app.members) >= 4
    view.entries["formula"].value = "blood.o2_saturation[severinghaus_1979]"
    assert "Not used by this formula: base_excess" in view.notes.value
    view.entries["against"].value = "base_excess"
    assert "does not use base_excess; draw it against one of: po2, ph, temperature" in view.message.value


def test_formulas_of_other_quantities_have_their_own_page() -> None:
    """Feet and meters of water must not stand in one blank."""
    app = EquationPage("surroundings.depth_at_pressure")
    assert "surroundings.depth_at_pressure[msw]" in app.members
    assert "surroundings.depth_at_pressure[fsw]" not in app.members
    feet = EquationPage("surroundings.depth_at_pressure[fsw]", ambient_pressure="2 atm")
    assert "is 33 fsw;" in feet.answer(feet.compute())


def test_what_has_no_result_says_why() -> None:
    view = _view(EquationPage("surroundings.altitude_at_pressure"))
    assert view.answer.value.startswith("Geometric altitude")
    view.entries["ambient_pressure"].value = "300"
    assert "no altitude gives ambient_pressure = 300 kPa" in view.message.value
    assert view.answer.value == "No answer for these values."
    view = _view(EquationPage("lungs.alveolar_po2"))
    view.entries["against"].value = "weather"
    assert "unknown argument" in view.message.value


def test_the_curve_is_the_result_and_dotted_beyond_its_range() -> None:
    app = EquationPage("vapor.enhancement_factor", ambient_pressure="1 atm")
    ds = app.compute()
    picture = EquationCurve(new_figure())
    picture.update(*app._drawn(ds), **app._axes())
    solid, dotted = (np.asarray(one.get_ydata()) for one in (picture.solid, picture.dotted))
    valid = ds["valid"].values == 1
    # The equation was made for 50 to 110 kPa.
    np.testing.assert_array_equal(valid, ds.ambient_pressure.values <= 110.0)
    assert valid.any()
    assert not valid.all()
    np.testing.assert_array_equal(np.where(valid, solid, dotted), ds["enhancement_factor"].values)
    assert np.isnan(solid[~valid]).all()
    assert np.isnan(dotted[valid]).all()
    assert picture.at.get_text() == "101.3 kPa"
    with pytest.raises(gp.GasphysError, match="is not among the values of ambient_pressure"):
        picture.update(ds["enhancement_factor"], 1.23456)


def test_an_unknown_equation_is_refused() -> None:
    with pytest.raises(gp.errors.UnknownNameError, match=r"nearest: 'laws\.boyle_volume'"):
        EquationPage("laws.boyle_volumes")
