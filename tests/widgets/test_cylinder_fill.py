"""The fill as an app: published recipes, what cannot be mixed, the order, hot and settled."""

from __future__ import annotations

import html
from typing import Any

import pytest

from gasphys import widgets
from gasphys.errors import GasphysError, RangeError
from gasphys.supply import partial_pressure_fill


def _view(app: widgets.App) -> Any:
    app.view  # noqa: B018 (built when it is asked for)
    return app._shown


def _text(widget: Any) -> str:
    return html.unescape(widget.value)


def test_it_answers_as_published() -> None:
    """Trimix 18/45 to 200 bar from empty: helium to 84.9, oxygen to 101.5 bar (reference table, computed)."""
    app = widgets.CylinderFill(target="trimix 18/45", target_pressure="200 bar", remainder_pressure=0.0)
    answer = app.answer(app.compute())
    assert "helium at" in answer
    assert "(84.89 settled)" in answer
    assert "(101.5 settled)" in answer
    assert "(200 settled)" in answer
    assert "O2 17.3 %, N2 35.0 %, He 47.7 %" in app.notes(app.compute())[0]


def test_it_is_the_library() -> None:
    app = widgets.CylinderFill()
    ds = app.compute()
    same = partial_pressure_fill(
        "trimix 17/48",
        "220 bar",
        24.0,
        remainder="trimix 17/48",
        remainder_pressure="46 bar",
        filling_temperature=38.0,
    )
    for name in (
        "amount",
        "pressure_after",
        "pressure_after_hot",
        "ideal_pressure_after",
        "ideal_recipe_fraction",
    ):
        assert ds[name].values.tolist() == same[name].values.tolist(), name
    assert ds.attrs["steps"] == "helium, oxygen, air"


def test_a_remainder_that_holds_too_much_says_how_far_to_drain() -> None:
    view = _view(widgets.CylinderFill())
    before = view.answer.value
    view.entries["remainder"].value = "nitrox 48"
    assert "drain the cylinder to 4352 kPa (43.5 bar) absolute or less" in _text(view.message)
    assert view.answer.value == "No answer for these values."
    view.entries["remainder_pressure"].value = "43.5"
    assert "Stop helium at" in view.answer.value
    view.entries["remainder"].value = "trimix 17/48"
    view.entries["remainder_pressure"].value = "46"
    assert view.answer.value == before


def test_another_order_stops_elsewhere_with_the_same_moles() -> None:
    first, second = (widgets.CylinderFill(order=o) for o in ("helium, oxygen, air", "air, helium, oxygen"))
    one, two = first.compute(), second.compute()
    assert first.answer(one).startswith("Stop helium at")
    assert second.answer(two).startswith("Stop air at")
    assert sorted(one.amount.values.round(9)) == sorted(two.amount.values.round(9))
    labels = [t.get_text() for t in second.figure().axes[0].get_yticklabels()]
    assert labels == ["there already", "add air", "add helium", "add oxygen", "wanted", "ideal recipe gives"]


@pytest.mark.parametrize(
    ("start", "error", "match"),
    [
        ({"order": "helium, oxygen"}, GasphysError, "three gases in order"),
        ({"order": "helium, oxygen, ari"}, GasphysError, "unknown gas 'ari'"),
        ({"target": "trimx 17/48"}, GasphysError, "unknown gas"),
        ({"target_pressure": "22 msw"}, GasphysError, "is a depth"),
        ({"water_capacity": -1.0}, RangeError, "water_capacity = -1 L"),
    ],
)
def test_what_cannot_stand_is_refused(start: dict[str, Any], error: type[Exception], match: str) -> None:
    with pytest.raises(error, match=match):
        widgets.CylinderFill(**start)
