"""Notebooks in JupyterLab: the app loads, controls change the answer, errors are seen."""

from __future__ import annotations

import re
from collections.abc import Callable
from pathlib import Path
from statistics import median

import pytest
from playwright.sync_api import Download, Page, expect

from gasphys.quantities import CAUTION
from tests.browser.conftest import ROOT, Seen

BLOOD = "what_will_this_patients_blood_carry_at_pressure.ipynb"


def _open(page: Page, lab: str, name: str) -> None:
    """Open a notebook and run all of its cells, by the menu, as a reader would."""
    page.goto(f"{lab}/lab/tree/{name}?reset")
    page.locator(".jp-NotebookPanel .jp-Cell").first.wait_for()
    # Running before the kernel is there would bring up a dialog.
    page.locator("#jp-main-statusbar").get_by_text("Python 3 (ipykernel) | Idle").wait_for()
    page.get_by_role("menuitem", name="Run", exact=True).click()
    page.get_by_role("menuitem", name="Run All Cells", exact=True).click()
    page.locator(".gasphys-picture").wait_for()


@pytest.fixture
def app(page: Page, lab: str) -> Page:
    _open(page, lab, BLOOD)
    expect(page.locator(".gasphys-answer")).to_contain_text("PO2")
    return page


def _answer(page: Page) -> str:
    return page.locator(".gasphys-answer").inner_text()


def _changed(page: Page, before: str) -> str:
    expect(page.locator(".gasphys-answer")).not_to_have_text(before)
    return _answer(page)


def _clean(seen: Seen) -> None:
    assert seen.console == []
    assert seen.outside == []


def test_the_notebook_shows_this_patient(app: Page, seen: Seen, shot: Callable[..., None]) -> None:
    assert "Alveolar PO2 is 231.7 kPa and arterial PO2 183.7 kPa" in _answer(app)
    sentence = " ".join(box.input_value() for box in app.locator(".gasphys-app input[type=text]").all())
    assert sentence == "12.9 5.2 0.7928 oxygen 2.4"
    expect(app.get_by_text(CAUTION).last).to_be_visible()
    expect(app.locator(".gasphys-message")).to_be_hidden()
    shot(app, "start")
    _clean(seen)


def test_every_control_moved_once_changes_the_answer(
    app: Page, seen: Seen, shot: Callable[..., None]
) -> None:
    answer = _answer(app)
    handles = app.locator(".gasphys-app .noUi-handle")
    assert handles.count() == 4
    for k in range(handles.count()):
        handles.nth(k).focus()
        app.keyboard.press("ArrowLeft")
        answer = _changed(app, answer)
    units = app.locator(".gasphys-blank-arterial_pco2 select")
    units.select_option("mmHg")
    answer = _changed(app, answer)
    assert "mmHg" in answer
    gas = app.locator(".gasphys-blank-gas input")
    gas.fill("air")
    gas.press("Enter")
    answer = _changed(app, answer)
    shot(app, "moved")
    app.get_by_role("button", name="Reset").click()
    expect(app.locator(".gasphys-answer")).to_contain_text("Alveolar PO2 is 231.7 kPa")
    assert gas.input_value() == "oxygen"
    _clean(seen)


def test_an_entry_out_of_range_shows_its_message(app: Page, seen: Seen, shot: Callable[..., None]) -> None:
    blank = app.locator(".gasphys-blank-hemoglobin input")
    blank.fill("45")
    blank.press("Enter")
    message = app.locator(".gasphys-message")
    expect(message).to_be_visible()
    expect(message).to_contain_text("hemoglobin = 45 g/dL")
    expect(message).to_contain_text("outside the possible range 0 to 30 g/dL")
    expect(app.locator(".gasphys-answer")).to_have_text("No answer for these values.")
    expect(app.locator(".gasphys-picture")).to_be_hidden()
    shot(app, "message")
    blank.fill("11,5")
    blank.press("Enter")
    expect(message).to_contain_text("write a decimal point, not a comma")
    blank.fill("11.5")
    blank.press("Enter")
    expect(message).to_be_hidden()
    expect(app.locator(".gasphys-picture")).to_be_visible()
    expect(app.locator(".gasphys-answer")).to_contain_text("Alveolar PO2 is 231.7 kPa")
    _clean(seen)


def test_an_error_of_the_code_is_seen(app: Page) -> None:
    """What no entry can bring about: the code fails inside a callback."""
    _run_more(app, "app = gp.widgets.OxygenAtPressure(); app.lines = None; app")
    second = app.locator(".gasphys-app").nth(1)
    second.get_by_role("button", name="Python lines").click()
    expect(second.locator(".gasphys-message")).to_contain_text(
        "Unexpected error, please report it: TypeError"
    )


def _run_more(page: Page, source: str) -> None:
    """Type a further cell under the last and run it."""
    page.locator(".jp-Notebook .jp-Cell").last.click()
    page.keyboard.press("Escape")
    page.keyboard.press("b")
    page.keyboard.press("Enter")
    page.keyboard.insert_text(source)
    page.keyboard.press("Control+Enter")


def test_working_lines_and_files_on_request(app: Page, seen: Seen, shot: Callable[..., None]) -> None:
    app.get_by_label("Show the working of").select_option("alveolar PO2")
    expect(app.locator(".gasphys-working")).to_contain_text("Fenn, Rahn & Otis 1946")
    shot(app, "working")
    app.get_by_role("button", name="Python lines").click()
    expect(app.locator(".gasphys-taken")).to_contain_text("gp.gas_exchange.oxygenation(session, person)")
    shot(app, "lines")
    app.get_by_role("button", name="CSV file").click()
    with app.expect_download() as waiting:
        app.get_by_role("link", name="Save oxygen_at_pressure.csv").click()
    lines = _content(waiting.value).decode().splitlines()
    assert f"# {CAUTION}" in lines
    assert len(lines) > 80
    app.get_by_role("button", name="netCDF file").click()
    with app.expect_download() as waiting:
        app.get_by_role("link", name="Save oxygen_at_pressure.nc").click()
    assert _content(waiting.value).startswith(b"CDF")
    _clean(seen)


def _content(download: Download) -> bytes:
    return Path(download.path()).read_bytes()


def test_the_watch_sees_errors_and_requests_that_leave(page: Page, lab: str, seen: Seen) -> None:
    elsewhere = "http://192.0.2.1/"  # reserved for documentation; the request is stopped here
    page.route(elsewhere, lambda route: route.abort())
    page.goto(f"{lab}/lab")
    page.locator("#jp-main-dock-panel").wait_for()
    assert seen.outside == []
    page.evaluate("console.error('seen'); setTimeout(() => { throw new Error('thrown'); })")
    page.evaluate(f"fetch('{elsewhere}').catch(() => null)")
    assert any("seen" in text for text in seen.console)
    assert any("thrown" in text for text in seen.console)
    assert seen.outside == [elsewhere]


def test_the_picture_does_not_flicker(app: Page) -> None:
    """Its box neither moves nor collapses, and it is the same element, while the slider travels."""
    app.evaluate(
        """() => {
            const picture = document.querySelector('.gasphys-picture');
            const seen = window.boxes = new Set();
            picture.dataset.first = 'yes';
            const look = () => {
                const now = document.querySelector('.gasphys-picture');
                const box = now.getBoundingClientRect();
                const part = [box.x, box.width, box.height].map(Math.round);
                seen.add(JSON.stringify([now.dataset.first, ...part]));
                window.looking = requestAnimationFrame(look);
            };
            look();
        }"""
    )
    handle = app.locator(".gasphys-blank-ambient_pressure .noUi-handle")
    handle.focus()
    for _ in range(12):
        answer = _answer(app)
        app.keyboard.press("ArrowLeft")
        _changed(app, answer)
    boxes = app.evaluate("() => { cancelAnimationFrame(window.looking); return [...window.boxes]; }")
    assert len(boxes) == 1, boxes
    assert boxes[0].startswith('["yes",')


def test_a_swept_slider_ends_on_its_last_value(app: Page) -> None:
    handle = app.locator(".gasphys-blank-ambient_pressure .noUi-handle")
    handle.focus()
    for _ in range(9):
        app.keyboard.press("ArrowLeft", delay=0)
    expect(app.locator(".gasphys-blank-ambient_pressure input")).to_have_value("1.5")
    expect(app.locator(".gasphys-answer")).to_contain_text("Alveolar PO2 is 140.5 kPa")


def test_legible_at_twice_the_size(app: Page, shot: Callable[..., None]) -> None:
    app.set_viewport_size({"width": 640, "height": 1500})
    app.locator(".gasphys-app").scroll_into_view_if_needed()
    wide = app.evaluate(
        """() => {
            const box = document.querySelector('.gasphys-app');
            return [box.scrollWidth, box.clientWidth];
        }"""
    )
    shot(app, "narrow")
    assert wide[0] <= wide[1] + 1


def test_slider_to_new_picture(app: Page, capsys: pytest.CaptureFixture[str]) -> None:
    """Measured, not judged: from the key to the loaded picture, in the browser's own clock."""
    app.evaluate(
        """() => {
            window.times = [];
            const picture = document.querySelector('.gasphys-picture');
            const img = picture.tagName === 'IMG' ? picture : picture.querySelector('img');
            img.addEventListener('load', () => window.times.push(performance.now()));
            document.addEventListener('keydown', () => { window.pressed = performance.now(); }, true);
        }"""
    )
    handle = app.locator(".gasphys-blank-ambient_pressure .noUi-handle")
    handle.focus()
    took = []
    for k in range(24):
        done = app.evaluate("() => window.times.length")
        app.keyboard.press("ArrowLeft" if k < 12 else "ArrowRight")
        app.wait_for_function(f"() => window.times.length > {done}")
        took.append(app.evaluate("() => window.times.at(-1) - window.pressed"))
    assert len(took) == 24
    _run_more(app, "'compute {compute:.0f} ms, draw {draw:.0f} ms'.format(**_.timing)")
    parts = app.locator(".jp-OutputArea-executeResult pre", has_text="compute").inner_text()
    spread = f"median {median(took):.0f} ms, {min(took):.0f} to {max(took):.0f} ms"
    with capsys.disabled():
        print(f"\nslider to new picture: {spread}; {parts}")


@pytest.mark.parametrize("name", sorted(path.name for path in (ROOT / "notebooks").glob("*.ipynb")))
def test_every_notebook_loads(page: Page, lab: str, name: str, seen: Seen, shot: Callable[..., None]) -> None:
    _open(page, lab, name)
    expect(page.locator(".gasphys-answer").first).to_have_text(re.compile(r"\d"))
    assert page.locator("[data-mime-type*='error'], [data-mime-type*='stderr']").count() == 0
    shot(page, Path(name).stem)
    _clean(seen)
