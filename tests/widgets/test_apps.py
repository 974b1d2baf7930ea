"""Every app without a browser: parameters, dataset, picture, messages, export, lines to take along."""

from __future__ import annotations

import asyncio
import base64
import html
import io
import re
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
import xarray as xr

import gasphys as gp
from gasphys import widgets
from gasphys.gas_exchange import calibrate
from gasphys.plots.style import new_figure
from gasphys.quantities import CAUTION
from gasphys.widgets import App, Name, Number

ROOT = Path(__file__).resolve().parents[2]
APPS = [v for v in map(widgets.__dict__.get, widgets.__all__) if isinstance(v, type) and issubclass(v, App)]
APPS.remove(App)

each = pytest.mark.parametrize("make", APPS, ids=lambda one: one.__name__)
each_number = pytest.mark.parametrize(
    ("make", "name"),
    [(one, name) for one in APPS for name, blank in one().blanks.items() if isinstance(blank, Number)],
    ids=lambda one: getattr(one, "__name__", one),
)


def _text(widget: Any) -> str:
    return html.unescape(widget.value)


@pytest.fixture
def patient() -> gp.Person:
    """P-01 of the invented scenario."""
    return calibrate(
        arterial_po2=25.3, fio2=0.40, arterial_pco2=5.2, hemoglobin=12.9, barometric_pressure=101.0
    )


# -- parameters, dataset, picture ------------------------------------------------------------------


@each
def test_the_sentence_names_every_blank_once(make: Callable[[], App]) -> None:
    app = make()
    assert [name for _, name, _ in app.phrases() if name] == list(app.blanks) == list(app.params)


@each
def test_dataset_carries_units_sources_and_caution(make: Callable[[], App]) -> None:
    ds = make().compute()
    assert ds.attrs["comment"] == CAUTION
    assert ds.attrs["references"]
    assert all("long_name" in variable.attrs for variable in ds.data_vars.values())
    assert all("units" in v.attrs for v in ds.data_vars.values() if v.dtype.kind == "f")


@each
def test_every_blank_changes_the_answer(make: Callable[[], App]) -> None:
    for name, blank in make().blanks.items():
        app = make()
        before = app.answer(app.compute())
        if isinstance(blank, Name):
            app.params[name] = next(x for x in blank.offered if x != app.params[name])
        else:
            _, high, step = blank.span(app.units[name])
            now = float(blank.show(app.params[name], app.units[name]))
            moved = now - step if now + step > high else now + step
            app.params[name] = blank.read(repr(moved), app.units[name])
        assert app.answer(app.compute()) != before, name


@each
def test_drawing_again_moves_the_same_artists(make: Callable[[], App]) -> None:
    app = make()
    figure = new_figure(*app.size)
    app.draw(figure, app.compute())
    first = app.png(figure)
    artists = [id(artist) for axes in figure.axes for artist in axes.get_children()]
    name, blank = next((n, b) for n, b in app.blanks.items() if isinstance(b, Number))
    begin = app.params[name]
    app.params[name] = blank.quantity.usual[1]
    app.draw(figure, app.compute())
    assert app.png(figure) != first
    assert [id(artist) for axes in figure.axes for artist in axes.get_children()] == artists
    app.params[name] = begin
    app.draw(figure, app.compute())
    assert app.png(figure) == first


@each
def test_the_standing_figure_carries_the_caution(make: Callable[[], App]) -> None:
    words = " ".join(text.get_text() for text in make().figure().findobj(lambda a: hasattr(a, "get_text")))
    assert CAUTION in " ".join(words.split())


@each_number
def test_controls_come_from_the_registry(make: Callable[[], App], name: str) -> None:
    app = make()
    quantity, view = app.blanks[name].quantity, _view(app)
    for unit in app.unit_choices(name):
        low, high, step = app.blanks[name].span(unit)
        usual = [gp.convert(end, quantity.unit, unit) for end in quantity.usual]
        assert low <= usual[0] + 1e-9
        assert usual[1] - 1e-9 <= high
        assert usual[0] - low < step
        assert high - usual[1] < step
        assert 20 <= (high - low) / step <= 80
    slider = view.sliders[name]
    assert (slider.min, slider.max, slider.step) == app.blanks[name].span(app.unit_choices(name)[0])
    assert view.entries[name].tooltip == quantity.long_name


# -- the view --------------------------------------------------------------------------------------


def _view(app: App) -> Any:
    app.view  # noqa: B018 (built when it is asked for)
    return app._shown


@each
def test_nothing_is_built_before_it_is_asked_for(make: type[App]) -> None:
    code = (
        f"import sys, gasphys.widgets as w; app = w.{make.__name__}(); ds = app.compute(); "
        "assert not {'ipywidgets', 'IPython', 'sympy'} & set(sys.modules), 1; app.view; "
        "assert 'ipywidgets' in sys.modules; assert 'matplotlib.pyplot' not in sys.modules, 2"
    )
    subprocess.run([sys.executable, "-c", code], check=True, cwd=ROOT)


@each
def test_the_column_is_in_order(make: Callable[[], App]) -> None:
    view = _view(make())
    order = [view.sentence, view.message, view.answer, view.image, view.working, view.caution]
    places = [view.box.children.index(one) for one in order]
    assert places == sorted(places)
    assert _text(view.caution) == CAUTION
    assert bytes(view.image.value).startswith(b"\x89PNG")
    assert view.message.layout.display == "none"


@each_number
def test_an_impossible_entry_shows_its_message_and_no_answer(make: Callable[[], App], name: str) -> None:
    app = make()
    view, good = _view(app), dict(app.params)
    answer = view.answer.value
    quantity = app.blanks[name].quantity
    high = gp.convert(quantity.possible[1], quantity.unit, app.units[name])
    typed = f"{10.0 * high + 1.0:g}"
    begin = view.entries[name].value
    view.entries[name].value = typed
    message = _text(view.message)
    assert message.startswith(f"'{typed}' cannot stand here: {quantity.name} = ")
    assert f"is outside the possible range {quantity.possible[0]:g} to {quantity.possible[1]:g}" in message
    assert view.message.layout.display is None
    assert view.answer.value == "No answer for these values."
    assert view.image.layout.visibility == "hidden"
    assert view.entries[name].value == typed
    assert "gasphys-wrong" in view.entries[name]._dom_classes
    assert app.params == good
    view.entries[name].value = begin
    assert view.answer.value == answer
    assert view.image.layout.visibility == "visible"
    assert view.message.layout.display == "none"
    assert "gasphys-wrong" not in view.entries[name]._dom_classes


@pytest.mark.parametrize(
    ("typed", "message"),
    [
        ("12,9", "write a decimal point, not a comma"),
        ("", "cannot read ''"),
        ("nan", "cannot read 'nan'"),
        ("-1", "outside the possible range 0 to 30 g/dL"),
        ("5 kPa", "measures something else"),
        ("<b>9</b>", "cannot read '<b>9</b>'"),
    ],
)
def test_what_cannot_be_read_says_why(typed: str, message: str) -> None:
    view = _view(widgets.OxygenAtPressure())
    view.entries["hemoglobin"].value = "8"
    view.entries["hemoglobin"].value = typed
    assert message in _text(view.message)
    assert "<b>" not in view.message.value


def test_several_wrong_blanks_are_all_named_until_all_are_right() -> None:
    view = _view(widgets.OxygenAtPressure())
    view.entries["hemoglobin"].value = "99"
    view.entries["gas"].value = "laughing gas"
    assert "hemoglobin = 99" in _text(view.message)
    assert "unknown gas 'laughing gas'" in _text(view.message)
    view.entries["hemoglobin"].value = "9"
    assert "hemoglobin" not in _text(view.message)
    assert "unknown gas" in _text(view.message)
    assert view.answer.value.startswith("No answer")
    view.entries["gas"].value = "air"
    assert view.message.value == ""
    assert view.answer.value.startswith("Alveolar PO2")


def test_a_pressure_without_its_unit_is_guessed() -> None:
    app = widgets.OxygenAtPressure()
    view = _view(app)
    view.unit_choices["ambient_pressure"].value = "kPa"
    assert view.entries["ambient_pressure"].value == "243.2"
    view.entries["ambient_pressure"].value = "2.4"
    assert "'2.4 atm'?" in _text(view.message)


def test_a_depth_is_refused_as_a_pressure() -> None:
    view = _view(widgets.OxygenAtPressure())
    view.entries["ambient_pressure"].value = "14 msw"
    assert "is an absolute pressure and 14 msw is a depth" in _text(view.message)


def test_a_typed_unit_is_converted_to_the_one_shown() -> None:
    app = widgets.OxygenAtPressure()
    view = _view(app)
    view.entries["arterial_pco2"].value = "39 mmHg"
    assert app.params["arterial_pco2"] == pytest.approx(5.19957, abs=1e-5)
    assert view.entries["arterial_pco2"].value == "5.2"
    view.entries["gas"].value = "EAN 48"
    assert view.entries["gas"].value == app.params["gas"] == "nitrox 48"


def test_another_unit_changes_what_is_shown_and_no_parameter() -> None:
    app = widgets.OxygenAtPressure()
    view, before = _view(app), dict(app.params)
    view.unit_choices["arterial_pco2"].value = "mmHg"
    assert app.params == before
    assert view.entries["arterial_pco2"].value == "40"
    # 1737 mmHg: published for 100 % O2 at 2.4 atm, see tests/published/alveolar_gas.csv.
    assert "Alveolar PO2 is 1737 mmHg" in view.answer.value


def test_a_value_off_the_slider_stays_as_typed() -> None:
    app = widgets.OxygenAtPressure()
    view = _view(app)
    view.entries["ambient_pressure"].value = "0.5"
    assert app.params["ambient_pressure"] == pytest.approx(50.6625)
    assert view.sliders["ambient_pressure"].value == 1.0
    assert view.entries["ambient_pressure"].value == "0.5"
    assert "PO2" in view.answer.value


@each
def test_a_slider_put_onto_its_steps_by_the_page_changes_nothing(make: Callable[[], App]) -> None:
    """A page rounds a slider to its steps and sends that back; what was measured must stay."""
    app = make()
    view = _view(app)
    for name, slider in view.sliders.items():
        low, _, step = app.blanks[name].span(app.units[name])
        share = 0.0 if app.blanks[name].whole else 0.4
        app.params[name] = app.blanks[name].read(repr(low + (10.0 + share) * step), app.units[name])
        view._write(name)
        before, typed = dict(app.params), view.entries[name].value
        assert (slider.value - low) / step == pytest.approx(round((slider.value - low) / step), abs=1e-6)
        slider.value += 1e-7 * step
        slider.value += 0.3 * step
        assert app.params == before
        assert view.entries[name].value == typed
        slider.value = low + 12.0 * step
        assert app.params != before


@each
def test_reset_brings_back_the_start(make: Callable[[], App]) -> None:
    app = make()
    view = _view(app)
    before = (dict(app.params), dict(app.units), view.answer.value, bytes(view.image.value))
    for name, choice in view.unit_choices.items():
        choice.value = app.unit_choices(name)[-1]
    for slider in view.sliders.values():
        slider.value = slider.max
    next(iter(view.entries.values())).value = "nonsense"
    view.buttons["Reset"].click()
    assert (dict(app.params), dict(app.units), view.answer.value, bytes(view.image.value)) == before
    assert view.message.value == ""


# -- nothing is lost in a callback -----------------------------------------------------------------


@pytest.mark.parametrize("failing", ["compute", "draw", "answer", "notes", "png"])
def test_an_unexpected_error_is_shown(failing: str, monkeypatch: pytest.MonkeyPatch) -> None:
    app = widgets.OxygenAtPressure()
    view = _view(app)

    def fail(*args: Any) -> Any:
        raise ZeroDivisionError("the <cause>")

    with monkeypatch.context() as patch:
        patch.setattr(app, failing, fail)
        view.sliders["hemoglobin"].value = 9.0
        assert "Unexpected error, please report it: ZeroDivisionError: the <cause>" in _text(view.message)
        assert "in fail" in _text(view.message)
        assert "<cause>" not in view.message.value
        assert view.answer.value == "No answer for these values."
        assert view.image.layout.visibility == "hidden"
    view.sliders["hemoglobin"].value = 10.0
    assert view.message.value == ""
    assert view.answer.value.startswith("Alveolar PO2")


@pytest.mark.parametrize("method", ["explain", "file", "lines"])
def test_an_error_beside_the_answer_leaves_the_answer(method: str, monkeypatch: pytest.MonkeyPatch) -> None:
    app = widgets.OxygenAtPressure()
    view = _view(app)
    answer = view.answer.value

    def fail(*args: Any) -> Any:
        raise gp.GasphysError("not today")

    monkeypatch.setattr(app, method, fail)
    if method == "explain":
        view.explained.value = "alveolar_po2"
    else:
        view.buttons["CSV file" if method == "file" else "Python lines"].click()
    assert _text(view.message) == "not today"
    assert view.answer.value == answer
    assert view.image.layout.visibility == "visible"


def test_of_many_changes_only_the_last_is_computed(monkeypatch: pytest.MonkeyPatch) -> None:
    app = widgets.OxygenAtPressure()
    view = _view(app)
    computed = []
    compute = app.compute
    monkeypatch.setattr(
        app, "compute", lambda: (computed.append(app.params["ambient_pressure"]), compute())[1]
    )

    async def move() -> None:
        for value in (1.2, 1.5, 2.0, 2.8):
            view.sliders["ambient_pressure"].value = value
        await asyncio.sleep(0.5)

    asyncio.run(move())
    assert computed == [pytest.approx(2.8 * 101.325)]
    assert view.entries["ambient_pressure"].value == "2.8"
    assert "272.1 kPa" in view.answer.value


def test_a_change_while_an_answer_is_awaited_makes_it_void() -> None:
    app = widgets.OxygenAtPressure()
    view = _view(app)

    async def move() -> None:
        view.sliders["hemoglobin"].value = 9.0
        view.entries["hemoglobin"].value = "99"
        await asyncio.sleep(0.3)

    asyncio.run(move())
    assert view.answer.value == "No answer for these values."
    assert "hemoglobin = 99" in _text(view.message)


# -- working, export, lines ------------------------------------------------------------------------


@each
def test_working_of_every_number_ends_in_the_answer(make: Callable[[], App]) -> None:
    app = make()
    view = _view(app)
    assert view.working.value == ""
    for name in app.explained:
        view.explained.value = name
        text = _text(view.working)
        stated = re.search(r"= (\S+) \(stored (\S+)\)", text)
        assert stated
        assert stated[1] == stated[2]
        assert "source:" in text
        assert view.message.value == ""
    view.explained.value = ""
    assert view.working.value == ""


def test_working_follows_the_blanks() -> None:
    view = _view(widgets.OxygenAtPressure(hemoglobin=12.9))
    view.explained.value = "arterial_o2_content"
    assert "hemoglobin    = 12.9 g/dL" in _text(view.working)
    view.entries["hemoglobin"].value = "7.5"
    assert "hemoglobin    = 7.5 g/dL" in _text(view.working)
    view.entries["hemoglobin"].value = "-7.5"
    assert view.working.value == ""


@each
def test_netcdf_comes_back_identical(make: Callable[[], App], tmp_path: Path) -> None:
    app = make()
    app.export(tmp_path / "view.nc")
    with xr.open_dataset(tmp_path / "view.nc") as back:
        xr.testing.assert_identical(back.load(), app.compute())


@each
def test_csv_comes_back_equal_with_the_caution(make: Callable[[], App], tmp_path: Path) -> None:
    app, path = make(), tmp_path / "view.csv"
    app.export(path)
    assert f"# {CAUTION}" in path.read_text(encoding="utf-8").splitlines()
    table, ds = pd.read_csv(path, comment="#"), app.compute()
    for column in table.columns:
        name, _, unit = column.rstrip("]").partition(" [")
        assert ds[name].attrs.get("units", "") == unit
        if ds[name].dtype.kind == "U":
            assert table[column].tolist() == ds[name].values.tolist()
            continue
        np.testing.assert_allclose(table[column], ds[name].values, rtol=1e-14, atol=0.0)


@each
def test_another_ending_is_refused(make: Callable[[], App], tmp_path: Path) -> None:
    with pytest.raises(gp.GasphysError, match=r"as \.nc or \.csv, not '\.xlsx'"):
        make().export(tmp_path / "view.xlsx")
    with pytest.raises(gp.GasphysError, match="No such file"):
        make().export(tmp_path / "nowhere" / "view.csv")


@each
def test_links_hold_the_file(make: Callable[[], App]) -> None:
    app = make()
    view = _view(app)
    for button, ending in (("netCDF file", ".nc"), ("CSV file", ".csv")):
        view.buttons[button].click()
        link = re.fullmatch(r'<a download="(.*?)" href="data:.*?;base64,(.*?)">.*</a>', view.taken.value)
        assert link
        assert link[1] == app.name + ending
        assert base64.b64decode(link[2]) == app.file(ending)
    slider = next(iter(view.sliders.values()))
    slider.value = slider.max
    assert view.taken.value == ""


@each
def test_the_table_shows_what_the_csv_file_holds(make: Callable[[], App]) -> None:
    app = make()
    view = _view(app)
    view.buttons["Table"].click()
    shown, table = view.taken.value, app.table(app.compute())
    assert list(map(html.unescape, re.findall("<th>(.*?)</th>", shown))) == list(table.columns)
    cells = np.reshape(re.findall("<td>(.*?)</td>", shown), (len(table), len(table.columns)))
    for k, name in enumerate(table.columns):
        if table[name].dtype.kind == "f":
            np.testing.assert_allclose(cells[:, k].astype(float), table[name], rtol=5e-5, atol=1e-12)


def test_nothing_is_taken_along_without_an_answer() -> None:
    view = _view(widgets.OxygenAtPressure())
    view.entries["hemoglobin"].value = "99"
    for button in ("netCDF file", "CSV file", "Python lines", "Table"):
        view.buttons[button].click()
        assert view.taken.value == ""
        assert "There is nothing to take along." in _text(view.message)


@each
def test_lines_reproduce_the_view(make: Callable[[], App]) -> None:
    app = make()
    view = _view(app)
    for name, choice in view.unit_choices.items():
        choice.value = app.unit_choices(name)[-1]
    for name, blank in app.blanks.items():
        if isinstance(blank, Name):
            view.entries[name].value = blank.offered[0]
        else:  # one step, up or down: the ends need not be possible together
            slider = view.sliders[name]
            slider.value += slider.step if slider.value < slider.max else -slider.step
    view.buttons["Python lines"].click()
    space: dict[str, Any] = {}
    exec(_text(view.taken).removeprefix("<pre>").removesuffix("</pre>"), space)
    ds = app.compute()
    for name in app.explained:
        np.testing.assert_array_equal(space["ds"][name].squeeze().values, ds[name].values)
    file = io.BytesIO()
    space["figure"].savefig(file, format="png")
    assert file.getvalue()[:4] == b"\x89PNG"


def test_an_unknown_blank_is_refused() -> None:
    with pytest.raises(gp.errors.UnknownNameError, match="nearest: 'hemoglobin'"):
        widgets.OxygenAtPressure(haemoglobin=12.0)
    with pytest.raises(gp.errors.RangeError, match="possible range 0 to 30"):
        widgets.OxygenAtPressure(hemoglobin=45)


# -- a course of oxygen ----------------------------------------------------------------------------


def test_the_course_adds_up_as_published() -> None:
    """2.4 atm abs, 90 min: 273.8 UPTD of oxygen periods, computed; travel and breaks come on top."""
    app = widgets.OxygenCourse()
    ds = app.compute()
    one = gp.doses.oxygen(gp.schedules.treatment("clinical_2_4_atm"), ["uptd"], role="patient")
    assert float(one.dose.values[0]) > 273.8
    np.testing.assert_allclose(ds.uptd.values, one.dose.values[0] * np.arange(1, 41), rtol=1e-12)
    answer = app.answer(ds)
    assert answer.startswith("40 sessions add up to 11781 UPTD if nothing recovers")
    # Two times 294.5 are within 615, four within 1425.
    assert "2 % vital capacity, with session 3" in answer
    assert "10 % vital capacity, with session 5" in answer


@pytest.mark.parametrize("role", ["patient", "diver", "attendant"])
def test_the_risk_of_any_sign_stands_beside_seizure_rates_in_every_role(role: str) -> None:
    view = _view(widgets.OxygenCourse(role=role, schedule="usn_6"))
    notes = _text(view.notes)
    assert "Risk of any nervous system sign in one session" in notes
    assert "not a seizure probability" in notes
    assert re.search(r"seizures in \S+ % to \S+ % of clinics' treatments", notes)
    assert "limits made for others are context only" in notes


def test_a_part_of_a_session_and_unknown_names_are_refused() -> None:
    view = _view(widgets.OxygenCourse())
    view.entries["session_count"].value = "12.5"
    assert "session_count = 12.5 is not a whole number" in _text(view.message)
    view.entries["session_count"].value = "12"
    assert view.answer.value.startswith("12 sessions add up to 3534 UPTD")
    view.entries["role"].value = "nurse"
    assert "unknown role" in _text(view.message)
    view.entries["role"].value = "attendant"
    assert "no oxygen rule for attendants is known for this schedule" in _text(view.message)
    view.entries["schedule"].value = "usn_6"
    assert "UPTD" in view.answer.value


def test_sessions_are_on_weekdays() -> None:
    course = widgets.OxygenCourse().course()
    assert {s.start.weekday() for s in course.sessions} == {0, 1, 2, 3, 4}
    assert str(course.sessions[-1].day) == "2042-04-25"  # the last of 40 in the demo scenario


# -- oxygen at pressure ----------------------------------------------------------------------------


def test_oxygen_at_pressure_answers_as_published() -> None:
    """100 % O2, PACO2 40 mmHg: 673, 1433, 1737, 2041, 2193 mmHg (arithmetic of the alveolar equation)."""
    app = widgets.OxygenAtPressure(arterial_pco2="40 mmHg", gas="oxygen")
    app.units["arterial_pco2"] = "mmHg"
    for pressure, expected in ((1.0, 673), (2.0, 1433), (2.4, 1737), (2.8, 2041), (3.0, 2193)):
        app.params["ambient_pressure"] = pressure * 101.325
        assert f"Alveolar PO2 is {expected} mmHg" in app.answer(app.compute())


def test_oxygen_at_pressure_is_the_model_at_the_chosen_pressure(patient: gp.Person) -> None:
    app = widgets.OxygenAtPressure(patient)
    ds = app.compute().sel(ambient_pressure=243.18)
    model = gp.gas_exchange.oxygenation(
        gp.Exposure.start("oxygen", pressure="2.4 atm").stay(1), patient
    ).isel(time=0)
    for name in app.explained:
        assert float(ds[name]) == float(model[name])
    assert "assumed" in app.notes(app.compute())[0].lower()
    assert "hemoglobin" not in app.notes(app.compute())[0]


def test_oxygen_at_pressure_draws_the_chosen_pressure_wherever_it_is() -> None:
    for pressure, low, high in (
        (243.18, 101.325, 303.975),
        (50.0, 25.33125, 303.975),
        (700.0, 101.325, 1215.9),
    ):
        grid = widgets.OxygenAtPressure(ambient_pressure=pressure).pressures()
        assert pressure in grid
        assert (grid[0], grid[-1]) == (low, high)
    assert widgets.OxygenAtPressure(ambient_pressure=20000.0).pressures()[-1] == 20000.0


def test_oxygen_at_pressure_tells_where_the_ratio_does_not_carry_over(patient: gp.Person) -> None:
    inside = widgets.OxygenAtPressure(patient)
    ds = inside.compute()
    assert not any("Beyond the evidence" in note for note in inside.notes(ds))
    assert ds["arterial_po2_valid"].values.all()
    deep = widgets.OxygenAtPressure(patient, ambient_pressure="4 atm")
    ds = deep.compute()
    assert ds["arterial_po2_valid"].values[[0, -1]].tolist() == [1, 0]
    assert "alveolar PO2 393.8 kPa is outside 0 to" in deep.notes(ds)[0]
    low = widgets.OxygenAtPressure(arterial_alveolar_ratio=0.52)
    ds = low.compute()
    assert not ds["arterial_po2_valid"].values.any()
    assert "0.52 is outside 0.75 to 1" in low.notes(ds)[0]
    assert "Weaver & Howe 1994" in low.notes(ds)[0]
    figure = new_figure()
    low.draw(figure, ds)
    solid, dotted = low._pictures[figure].lines["arterial_po2"]
    assert np.isnan(solid.get_ydata()).all()
    assert not np.isnan(dotted.get_ydata()).any()


def test_oxygen_at_pressure_gives_the_range_of_both_models() -> None:
    with gp.validity("ignore"):
        ill = gp.Person.from_sample(arterial_po2=25.9, fio2=0.6, arterial_pco2=6.4, barometric_pressure=101.0)
    app = widgets.OxygenAtPressure(ill, ambient_pressure="2.4 atm")
    both = gp.gas_exchange.oxygenation(
        gp.Exposure.start("oxygen", pressure="2.4 atm").stay(1), ill, "both"
    ).isel(time=0)
    ratio, shunt = (float(both.arterial_po2.sel(model=m)) for m in ("ratio", "shunt"))
    text = app.answer(app.compute())
    assert f"arterial PO2 {ratio:.1f} kPa" in text
    assert f"constant shunt of 0.11 gives {shunt:.1f} kPa" in text
    assert "arterial_po2_from_shunt" in app.explain(app.compute(), "arterial_po2_by_shunt")
    # A changed blank is no longer what the sample told; without a sample there is no shunt to tell.
    app.params["arterial_alveolar_ratio"] = 0.8
    assert "shunt" not in app.answer(app.compute())
    plain = widgets.OxygenAtPressure()
    assert "shunt" not in plain.answer(plain.compute())


def test_oxygen_at_pressure_labels_do_not_cover_each_other() -> None:
    for gas in ("air", "nitrox 48", "oxygen"):
        app = widgets.OxygenAtPressure(gas=gas)
        figure = new_figure(*app.size)
        app.draw(figure, app.compute())
        app.png(figure)
        boxes = [label.get_window_extent() for label in app._pictures[figure].labels.values()]
        for k, one in enumerate(boxes):
            assert not any(one.overlaps(other) for other in boxes[k + 1 :])
            assert one.x1 <= figure.bbox.x1
