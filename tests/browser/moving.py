"""What a hand does to an app, the same in JupyterLab and on a page."""

from __future__ import annotations

from statistics import median

from playwright.sync_api import Locator, Page, expect

from gasphys.quantities import CAUTION
from gasphys.widgets import App, Name
from gasphys.widgets.base import unit_words

_SLIDER = ".noUi-handle, input[type=range]"


def shown(view: Locator) -> tuple[str, str | None]:
    """Return the answer and the picture."""
    return view.locator(".gasphys-answer").inner_text(), _picture(view).get_attribute("src")


def _picture(view: Locator) -> Locator:
    picture = view.locator(".gasphys-picture")
    return picture if picture.evaluate("e => e.tagName") == "IMG" else picture.locator("img")


def changed(page: Page, view: Locator, before: tuple[str, str | None]) -> None:
    """Wait until answer or picture is another, without a message."""
    for _ in range(600):
        if shown(view) != before:
            break
        page.wait_for_timeout(20)
    assert shown(view) != before
    expect(view.locator(".gasphys-message")).to_be_hidden()


def move_every_control(page: Page, view: Locator, app: App) -> int:
    """Move each control of an app once and put it back; each must change what is shown."""
    expect(view.locator(".gasphys-answer")).not_to_be_empty()
    start, count = shown(view), 0
    for name, blank in app.blanks.items():
        box = view.locator(f".gasphys-blank-{name}")
        entry = box.locator("input[type=text]")
        if isinstance(blank, Name):
            entry.fill(next(x for x in blank.offered if x != app.params[name]))
            entry.press("Enter")
        else:
            _, high, step = blank.span(app.unit_choices(name)[0])
            place = blank.place(app.params[name], app.unit_choices(name)[0])
            slider = box.locator(_SLIDER)
            slider.focus()
            slider.press("ArrowLeft" if place + step > high else "ArrowRight")
        changed(page, view, start)
        view.get_by_role("button", name="Reset").click()
        expect(view.locator(".gasphys-answer")).to_have_text(start[0])
        count += 1
        if len(app.unit_choices(name)) > 1:
            stood = blank.show(app.params[name], app.units[name])
            expect(entry).to_have_value(stood)
            box.locator("select").select_option(unit_words(app.unit_choices(name)[-1]))
            if float(stood):  # nothing is nothing in any unit
                expect(entry).not_to_have_value(stood)
            view.get_by_role("button", name="Reset").click()
            expect(entry).to_have_value(stood)
            count += 1
    return count


def refuse_what_cannot_be(view: Locator, app: App) -> None:
    """Type what no quantity allows: the message says so, and no answer stands."""
    name = next(n for n, blank in app.blanks.items() if not isinstance(blank, Name))
    entry = view.locator(f".gasphys-blank-{name} input[type=text]")
    # What a click on Reset before this still sends would write over what is being typed.
    view.page.wait_for_timeout(500)
    entry.fill("1e30")
    entry.press("Enter")
    message = view.locator(".gasphys-message")
    expect(message).to_be_visible()
    expect(message).to_contain_text("is outside the possible range")
    expect(view.locator(".gasphys-answer")).to_have_text("No answer for these values.")
    expect(view.locator(".gasphys-picture")).to_be_hidden()
    view.get_by_role("button", name="Reset").click()
    expect(message).to_be_hidden()
    expect(view.locator(".gasphys-picture")).to_be_visible()


def warned(view: Locator) -> None:
    """The caution stands under the app."""
    expect(view.get_by_text(CAUTION).last).to_be_visible()


def slider_to_picture(page: Page, view: Locator, times: int = 9) -> tuple[float, float, float]:
    """Return median, least and most milliseconds from key to loaded picture, by the browser's clock."""
    _picture(view).evaluate(
        """img => {
            window.times = [];
            img.addEventListener('load', () => window.times.push(performance.now()));
            document.addEventListener('keydown', () => { window.pressed = performance.now(); }, true);
        }"""
    )
    handle = view.locator(_SLIDER).first
    handle.focus()
    took = []
    for k in range(times):
        done = page.evaluate("() => window.times.length")
        handle.press("ArrowLeft" if k % 2 else "ArrowRight")
        page.wait_for_function(f"() => window.times.length > {done}")
        took.append(page.evaluate("() => window.times.at(-1) - window.pressed"))
    view.get_by_role("button", name="Reset").click()
    return median(took), min(took), max(took)
