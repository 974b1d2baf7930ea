"""Notebooks in JupyterLab: the app loads, controls change the answer, errors are seen."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from playwright.sync_api import Browser, Download, Page, expect

from gasphys.quantities import CAUTION
from gasphys.widgets import App, EquationPage
from gasphys.widgets.opening import APPS
from tests.browser.conftest import EVERY_APP, ROOT, Seen, opened
from tests.browser.moving import move_every_control, refuse_what_cannot_be, slider_to_picture, warned

BLOOD = "what_will_this_patients_blood_carry_at_pressure.ipynb"
MAKE: dict[str, Callable[[], App]] = {**APPS, "lungs.alveolar_po2": EquationPage}


def _open(page: Page, lab: str, name: str) -> None:
    """Open a notebook and run all of its cells, by the menu, as a reader would."""
    page.goto(f"{lab}/lab/tree/{name}?reset")
    page.locator(".jp-NotebookPanel .jp-Cell").first.wait_for()
    # Running before the kernel is there would bring up a dialog.
    page.locator("#jp-main-statusbar").get_by_text("Python 3 (ipykernel) | Idle").wait_for()
    page.get_by_role("menuitem", name="Run", exact=True).click()
    page.get_by_role("menuitem", name="Run All Cells", exact=True).click()


@pytest.fixture(scope="module")
def heard() -> Seen:
    return Seen()


@pytest.fixture(scope="module")
def blood(browser: Browser, lab: str, heard: Seen) -> Iterator[Page]:
    """The patient's notebook, run once for all tests of it."""
    with opened(browser, heard) as page:
        _open(page, lab, BLOOD)
        page.locator(".gasphys-picture").first.wait_for()
        yield page


@pytest.fixture
def app(blood: Page) -> Page:
    """The notebook with its app as at the start."""
    blood.bring_to_front()
    blood.set_viewport_size({"width": 1280, "height": 1500})
    blood.locator(".gasphys-app").first.get_by_role("button", name="Reset").click()
    expect(blood.locator(".gasphys-answer").first).to_contain_text("from 183.7 kPa")
    return blood


@pytest.fixture(scope="module")
def every_app(browser: Browser, lab: str, heard: Seen) -> Iterator[Page]:
    with opened(browser, heard) as page:
        _open(page, lab, EVERY_APP)
        page.locator(".gasphys-picture").nth(len(MAKE) - 1).wait_for()
        yield page


@pytest.mark.parametrize("name", list(MAKE))
def test_every_control_of_every_app(
    every_app: Page, heard: Seen, shot: Callable[..., None], capsys: pytest.CaptureFixture[str], name: str
) -> None:
    every_app.bring_to_front()
    view = every_app.locator(f".shown-{name.replace('.', '-')}")
    view.scroll_into_view_if_needed()
    warned(view)
    shot(every_app, "start")
    app = MAKE[name]()
    assert move_every_control(every_app, view, app) >= len(app.blanks)
    refuse_what_cannot_be(view, app)
    took = slider_to_picture(every_app, view)
    with capsys.disabled():
        print(f"\n{name}, JupyterLab, to picture: median {took[0]:.0f} ms, {took[1]:.0f} to {took[2]:.0f}")
    _clean(heard)


def _answer(page: Page) -> str:
    return page.locator(".gasphys-answer").inner_text()


def _changed(page: Page, before: str) -> str:
    expect(page.locator(".gasphys-answer")).not_to_have_text(before)
    return _answer(page)


def _clean(seen: Seen) -> None:
    assert seen.console == []
    assert seen.outside == []


def test_the_notebook_shows_this_patient(app: Page, heard: Seen, shot: Callable[..., None]) -> None:
    assert "from 183.7 kPa (arterial/alveolar ratio 0.793 held) to 223.8 kPa" in _answer(app)
    sentence = " ".join(box.input_value() for box in app.locator(".gasphys-app input[type=text]").all())
    assert sentence == "12.9 0.4 101 25.3 5.2 oxygen 2.4"
    expect(app.get_by_text(CAUTION).last).to_be_visible()
    expect(app.locator(".gasphys-message")).to_be_hidden()
    shot(app, "start")
    _clean(heard)


def test_an_entry_out_of_range_shows_its_message(app: Page, heard: Seen, shot: Callable[..., None]) -> None:
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
    expect(app.locator(".gasphys-answer")).to_contain_text("alveolar PO2 is 231.7 kPa")
    _clean(heard)


def test_an_error_of_the_code_is_seen(every_app: Page) -> None:
    """What no entry can bring about: the code fails inside a callback."""
    _run_more(every_app, "broken = EquationPage(); broken.lines = None; broken")
    expect(every_app.locator(".gasphys-app")).to_have_count(len(MAKE) + 1)
    last = every_app.locator(".gasphys-app").last
    last.get_by_role("button", name="Python lines").click()
    expect(last.locator(".gasphys-message")).to_contain_text("Unexpected error, please report it: TypeError")


def _run_more(page: Page, source: str) -> None:
    """Type a further cell under the last and run it."""
    page.locator(".jp-Notebook .jp-Cell").last.click()
    page.keyboard.press("Escape")
    page.keyboard.press("b")
    page.keyboard.press("Enter")
    page.keyboard.insert_text(source)
    page.keyboard.press("Control+Enter")


def test_working_lines_and_files_on_request(app: Page, heard: Seen, shot: Callable[..., None]) -> None:
    app.get_by_label("Show the working of").select_option("alveolar PO2")
    expect(app.locator(".gasphys-working")).to_contain_text("Fenn, Rahn & Otis 1946")
    shot(app, "working")
    app.get_by_role("button", name="Python lines").click()
    expect(app.locator(".gasphys-taken")).to_contain_text("gp.gas_exchange.oxygenation(session, person)")
    shot(app, "lines")
    app.get_by_role("button", name="CSV file").click()
    with app.expect_download() as waiting:
        app.get_by_role("link", name="Save patient_at_pressure.csv").click()
    lines = _content(waiting.value).decode().splitlines()
    assert f"# {CAUTION}" in lines
    assert len(lines) > 80
    app.get_by_role("button", name="netCDF file").click()
    with app.expect_download() as waiting:
        app.get_by_role("link", name="Save patient_at_pressure.nc").click()
    assert _content(waiting.value).startswith(b"CDF")
    _clean(heard)


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
    expect(app.locator(".gasphys-answer")).to_contain_text("alveolar PO2 is 140.5 kPa")


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


#: Each is run once in JupyterLab, one by the tests above; tests/notebooks scans what the others print.
WITH_APPS = [
    p.name
    for p in sorted((ROOT / "notebooks").glob("*.ipynb"))
    if "gp.widgets." in p.read_text("utf-8") and p.name != BLOOD
]


@pytest.mark.parametrize("name", WITH_APPS)
def test_every_notebook_with_an_app_loads(
    page: Page, lab: str, name: str, seen: Seen, shot: Callable[..., None]
) -> None:
    _open(page, lab, name)
    expect(page.locator(".gasphys-answer").first).to_have_text(re.compile(r"\d"))
    assert page.locator("[data-mime-type*='error'], [data-mime-type*='stderr']").count() == 0
    shot(page, Path(name).stem)
    _clean(seen)
