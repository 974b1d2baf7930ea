"""Apps and notebooks as pages: every control by mouse and keys, no code, nothing from the network."""

from __future__ import annotations

import re
import subprocess
import sys
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest
from playwright.sync_api import Browser, Page, expect

from gasphys.quantities import CAUTION
from gasphys.widgets import App, EquationPage
from gasphys.widgets.opening import APPS
from gasphys.widgets.page import app_page, server
from tests.browser.conftest import ROOT, Seen, opened
from tests.browser.moving import move_every_control, refuse_what_cannot_be, slider_to_picture, warned

MAKE: dict[str, Callable[[], App]] = {**APPS, "lungs.alveolar_po2": EquationPage}
each = pytest.mark.parametrize("name", list(MAKE))


@contextmanager
def _serving(make: Callable[[], App]) -> Iterator[tuple[str, list[App]]]:
    """Serve an app; also the apps made for each reader."""
    apps: list[App] = []

    def one() -> Any:
        apps.append(make())
        return app_page(apps[-1])

    running = server(one)
    thread = threading.Thread(target=running.serve_forever, daemon=True)
    thread.start()
    try:
        yield f"http://127.0.0.1:{running.server_port}/", apps
    finally:
        running.shutdown()
        running.server_close()
        thread.join()


def _clean(seen: Seen) -> None:
    assert seen.console == []
    assert seen.outside == []


@each
def test_every_control_changes_what_is_shown(
    page: Page, seen: Seen, shot: Callable[..., None], capsys: pytest.CaptureFixture[str], name: str
) -> None:
    with _serving(MAKE[name]) as (address, apps):
        page.set_viewport_size({"width": 900, "height": 1100})
        page.goto(address)
        view = page.locator(".gasphys-app")
        expect(view.locator(".gasphys-answer")).to_have_text(re.compile(r"\d"))
        warned(view)
        shot(page, "start")
        app = MAKE[name]()
        assert move_every_control(page, view, app) >= len(app.blanks)
        refuse_what_cannot_be(view, app)
        took = slider_to_picture(page, view)
        timing = apps[0].timing
    _clean(seen)
    rest = took[0] - timing["compute"] - timing["draw"]
    with capsys.disabled():
        print(
            f"\n{name}, page, slider to picture: median {took[0]:.0f} ms, {took[1]:.0f} to {took[2]:.0f}; "
            f"compute {timing['compute']:.0f}, draw {timing['draw']:.0f}, transfer about {rest:.0f} ms"
        )


@each
def test_legible_at_twice_the_size(
    browser: Browser, seen: Seen, shot: Callable[..., None], name: str
) -> None:
    """200 % zoom of a page 1280 wide: 640 CSS pixels, each two of the screen's."""
    with _serving(MAKE[name]) as (address, _), opened(browser, seen, device_scale_factor=2) as page:
        page.set_viewport_size({"width": 640, "height": 900})
        page.goto(address)
        expect(page.locator(".gasphys-answer")).to_have_text(re.compile(r"\d"))
        wide = page.evaluate(
            "() => document.documentElement.scrollWidth - document.documentElement.clientWidth"
        )
        shot(page, "zoom")
        assert wide <= 0


def _focused(page: Page) -> str:
    return str(
        page.evaluate(
            "() => document.activeElement.getAttribute('aria-label') || document.activeElement.innerText"
        )
    )


def _tab_to(page: Page, label: str) -> None:
    for _ in range(40):
        page.keyboard.press("Tab")
        if _focused(page) == label and page.evaluate("() => document.activeElement.type") != "range":
            return
    raise AssertionError(f"no key leads to {label!r}")


@pytest.fixture
def opened_by_command() -> Iterator[str]:
    """Run the command as a person would, and read the address it prints."""
    command = [sys.executable, "-m", "gasphys", "open", "patient_at_pressure", "--no-browser"]
    running = subprocess.Popen(command, cwd=ROOT, stdout=subprocess.PIPE, text=True)
    assert running.stdout is not None
    line = running.stdout.readline()
    found = re.search(r"http://127\.0\.0\.1:\d+/", line)
    assert found, line
    yield found[0]
    running.terminate()
    running.wait(timeout=30)
    running.stdout.close()


def test_the_walk_of_a_physician_by_keys_alone(
    page: Page, seen: Seen, shot: Callable[..., None], opened_by_command: str
) -> None:
    """This patient's arterial PO2 range at 2.4 atm abs, from five numbers of a bedside sample.

    P-03 of the invented scenario; expected values from the library itself, which other tests compare
    with publications.
    """
    import gasphys as gp

    page.set_viewport_size({"width": 900, "height": 1100})
    page.goto(opened_by_command)
    expect(page.locator(".gasphys-answer")).to_have_text(re.compile(r"\d"))
    typed = {
        "hemoglobin concentration": "3.4",
        "inspired O2 fraction of dry gas": "60 %",
        "barometric pressure, absolute": "101",
        "arterial PO2 of the bedside sample": "41.5",
        "arterial PCO2": "33 mmHg",
        "ambient pressure, absolute": "2.4",
    }
    for label, text in typed.items():
        _tab_to(page, label)
        page.keyboard.type(text)  # what stood there is selected
    page.keyboard.press("Enter")
    person = gp.Person.from_sample(
        hemoglobin=3.4, fio2=0.6, barometric_pressure=101.0, arterial_po2=41.5, arterial_pco2="33 mmHg"
    )
    both = gp.gas_exchange.oxygenation(
        gp.Exposure.start("oxygen", pressure="2.4 atm").stay(1), person, "both"
    ).isel(time=0)
    ends = sorted(float(both.arterial_po2.sel(model=m)) for m in ("ratio", "shunt"))
    answer = page.locator(".gasphys-answer")
    expect(answer).to_contain_text(f"from {ends[0]:.1f} kPa")
    expect(answer).to_contain_text(f"to {ends[1]:.1f} kPa")
    expect(page.get_by_text(CAUTION).last).to_be_visible()
    shot(page, "answer")
    # A slip is told, and the way back is a key away.
    _tab_to(page, "Reset")
    page.keyboard.press("Enter")
    expect(answer).to_contain_text("from 183.7 kPa")
    _clean(seen)


def test_a_page_whose_server_has_ended_says_so(page: Page) -> None:
    with _serving(MAKE["oxygen_at_pressure"]) as (address, _):
        page.goto(address)
        expect(page.locator(".gasphys-answer")).to_have_text(re.compile(r"\d"))
    page.locator("input[type=range]").first.press("ArrowLeft")
    expect(page.locator("#stopped")).to_contain_text("has no answer from gasphys any more")


@pytest.mark.parametrize("name", sorted(path.stem for path in (ROOT / "notebooks").glob("*.ipynb")))
def test_every_notebook_as_a_page(page: Page, seen: Seen, shot: Callable[..., None], name: str) -> None:
    from gasphys.widgets.opening import page_of

    running = server(page_of(name))
    thread = threading.Thread(target=running.serve_forever, daemon=True)
    thread.start()
    try:
        page.set_viewport_size({"width": 900, "height": 1100})
        page.goto(f"http://127.0.0.1:{running.server_port}/")
        expect(page.locator("h1").first).to_be_visible()
        assert page.locator("pre[role=alert]").count() == 0
        assert "import gasphys" not in page.locator("main").inner_text()
        assert Path(ROOT / "notebooks" / f"{name}.ipynb").exists()
        shot(page, "page")
    finally:
        running.shutdown()
        running.server_close()
        thread.join()
    _clean(seen)
