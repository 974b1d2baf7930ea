"""The app that compares ascents: its numbers are the planner's; refusals and impossible times are told."""

from __future__ import annotations

import html
from typing import Any

import pytest

from gasphys import Exposure, ascent, widgets
from gasphys.widgets.base import start_values


def _view(app: widgets.AscentsCompared) -> Any:
    app.view  # noqa: B018 (built when it is asked for)
    return app._shown


def _text(widget: Any) -> str:
    return html.unescape(widget.value)


def test_the_answer_is_the_planners() -> None:
    app = widgets.AscentsCompared()
    ds = app.compute()
    bottom = Exposure.start("trimix 17/48").travel(depth=56.0, rate=20.0).stay(19.2)
    answer = app.answer(ds)
    assert answer.startswith("From 56 msw on trimix 17/48, left at 22 min, the surface is reached after ")
    for name in start_values()["ascents_compared"]["models"]:
        plan = ascent.plan(bottom, [("nitrox 48", 20.0), ("oxygen", 6.0)], name)
        assert f"{plan.ascent_time:.1f} min by {name}" in answer
        assert float(ds.ascent_time.sel(model=name)) == plan.ascent_time
    # 0.48 of 301.325 kPa and all of 161.325 kPa: computed by hand.
    assert answer.endswith("PO2 is 144.6 kPa on nitrox 48 at 20 msw and 161.3 kPa on oxygen at 6 msw.")
    assert "they part most at 3 msw, by 2.0 min" in answer


def test_who_refuses_is_told_and_the_others_go_on() -> None:
    view = _view(widgets.AscentsCompared())
    view.entries["second_model"].value = "us_navy_1957"
    assert "us_navy_1957" not in _text(view.answer)
    assert "No ascent: us_navy_1957 refuses this exposure" in _text(view.notes)
    assert "28.2 min by buhlmann_1995_c" in _text(view.answer)
    assert view.message.value == ""


def test_all_refuse() -> None:
    view = _view(widgets.AscentsCompared())
    for name in ("first_model", "second_model", "third_model"):
        view.entries[name].value = "boycott_1908"
    assert "no model plans this ascent" in _text(view.message)
    assert view.answer.value == "No answer for these values."


def test_a_model_named_twice_counts_once() -> None:
    app = widgets.AscentsCompared(second_model="buhlmann_1995_c")
    assert app.chosen() == ["buhlmann_1995_c", "buhlmann_1995_a"]
    assert app.compute().sizes["model"] == 2


def test_a_bottom_left_before_it_is_reached() -> None:
    view = _view(widgets.AscentsCompared())
    view.entries["bottom_time"].value = "2"
    assert "bottom_time = 2 min is not more than the descent, 2.8 min" in _text(view.message)
    assert view.answer.value == "No answer for these values."
    view.entries["bottom_time"].value = "30"
    assert view.message.value == ""
    assert "left at 30 min" in _text(view.answer)


def test_a_bubble_model_beside_the_others() -> None:
    view = _view(widgets.AscentsCompared())
    view.entries["third_model"].value = "yount_hoffman_1986"
    assert "27.2 min by yount_hoffman_1986" in _text(view.answer)
    view.explained.value = "limit_fraction"
    assert "limit_fraction = " in _text(view.working)
    view.explained.value = ""
    view.entries["first_model"].value = "yount_hoffman_1986"
    view.explained.value = "limit_fraction"
    assert "yount_hoffman_1986 has no M-values to work out" in _text(view.message)
    assert "27.2 min by yount_hoffman_1986" in _text(view.answer)


def test_words_that_are_no_model_or_depth() -> None:
    view = _view(widgets.AscentsCompared())
    view.entries["third_model"].value = "buhlmann_1995"
    assert "unknown tissue model 'buhlmann_1995'" in _text(view.message)
    view.entries["third_model"].value = "workman_1965"
    view.entries["depth"].value = "5.6 bar"
    assert "cannot stand here" in _text(view.message)


def test_beyond_what_a_model_was_made_for_is_a_note() -> None:
    app = widgets.AscentsCompared(
        gas="air",
        depth=45.0,
        bottom_time=10.0,
        second_gas="air",
        third_gas="air",
        first_model="thalmann_vval18",
    )
    notes = " ".join(app.notes(app.compute()))
    assert "Beyond the evidence: the ascent is doubtful for a short deep exposure" in notes


@pytest.mark.parametrize("name", ["depth", "bottom_time"])
def test_more_of_it_takes_longer(name: str) -> None:
    app = widgets.AscentsCompared()
    before = app.compute().ascent_time
    app.params[name] *= 1.2
    assert (app.compute().ascent_time > before).all()
