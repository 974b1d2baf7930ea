"""The ipywidgets face of an app: one column, errors in sight, the picture replaced in place."""

from __future__ import annotations

import asyncio
import base64
import html
import threading
import traceback
from collections.abc import Callable
from typing import Any

from gasphys.errors import GasphysError
from gasphys.plots.style import ACCENT, INK, new_figure
from gasphys.quantities import CAUTION
from gasphys.widgets.base import App, Name, unit_words

__all__ = ["View"]

#: Seconds to wait for a further change before computing: what a moving slider sends meanwhile is dropped.
_PAUSE = 0.01

_STYLE = f"""<style>
.gasphys-app {{ max-width: 46rem; color: {INK}; background: white; padding: 0.3rem 0.5rem; }}
.gasphys-app .widget-html-content {{ line-height: 1.45; font-size: 1rem; white-space: normal; color: {INK}; }}
.gasphys-app .widget-html {{ height: auto; }}
.gasphys-app .jupyter-widgets input[type=text], .gasphys-app .jupyter-widgets select {{ font-size: 1rem; }}
.gasphys-answer .widget-html-content {{ font-weight: 600; font-size: 1.1rem; }}
.gasphys-app .gasphys-message .widget-html-content {{ border-left: 4px solid {INK}; padding-left: 0.6rem; }}
.gasphys-app .gasphys-wrong input[type=text] {{ box-shadow: 0 0 0 3px {INK} !important; }}
.gasphys-app .noUi-handle {{ background: {ACCENT}; border-color: {ACCENT}; }}
.gasphys-app img {{ width: 100%; aspect-ratio: var(--gasphys-ratio); }}
.gasphys-app pre {{ font-size: 0.85rem; white-space: pre-wrap; word-break: normal; overflow-wrap: anywhere; }}
.gasphys-table {{ max-height: 22rem; overflow: auto; font-size: 0.85rem; }}
.gasphys-table table {{ border-collapse: collapse; }}
.gasphys-table th, .gasphys-table td {{ padding: 0.1rem 0.5rem; text-align: right; color: {INK};
  background: white; border-bottom: 1px solid #ccc; }}
.gasphys-small .widget-html-content {{ font-size: 0.85rem; }}
</style>"""


class View:
    """The widgets of one app.

    Parameters
    ----------
    app : App
        What is shown; the view writes its ``params`` and ``units``.

    Attributes
    ----------
    box
        The outermost widget.

    Examples
    --------
    >>> import gasphys as gp
    >>> View(gp.widgets.OxygenAtPressure()).answer.value[:25]
    'Alveolar PO2 is 231.6 kPa'
    """

    def __init__(self, app: App) -> None:
        import ipywidgets as ipw

        self.app = app
        self.figure = new_figure(*app.size)
        self._lock = threading.RLock()
        self._writing = False
        self._asked = 0
        self._wrong: dict[str, str] = {}
        self._parked: dict[str, float] = {}
        self._ds: Any = None

        width, height = app.size
        style = _STYLE.replace("var(--gasphys-ratio)", f"{width:g} / {height:g}")
        self.entries: dict[str, Any] = {}
        self.sliders: dict[str, Any] = {}
        self.unit_choices: dict[str, Any] = {}
        self.sentence = ipw.HBox(
            self._sentence(), layout=ipw.Layout(flex_flow="row wrap", align_items="flex-start")
        )
        self.message = self._html("gasphys-message")
        self.message.layout.display = "none"
        self.answer = self._html("gasphys-answer")
        self.notes = self._html("gasphys-small")
        self.image = ipw.Image(format="png", layout=ipw.Layout(width="100%", margin="0"))
        self.image.add_class("gasphys-picture")
        self.explained = ipw.Dropdown(
            options=[("nothing", ""), *((words, name) for name, words in app.explained.items())],
            description="Show the working of",
            style={"description_width": "initial"},
            layout=ipw.Layout(width="20rem", max_width="100%", margin="2px 0"),
        )
        self.working = self._html("gasphys-working")
        self.buttons = {
            words: ipw.Button(description=words, layout=ipw.Layout(width="auto"))
            for words in ("Table", "Python lines", "netCDF file", "CSV file", "Reset")
        }
        self.taken = self._html("gasphys-taken")
        self.caution = self._html("gasphys-small")
        self.caution.value = html.escape(CAUTION)
        self.box = ipw.VBox(
            [
                ipw.HTML(style, layout=ipw.Layout(display="none")),
                self.sentence,
                self.message,
                self.answer,
                self.notes,
                self.image,
                self.explained,
                self.working,
                ipw.HBox(list(self.buttons.values()), layout=ipw.Layout(flex_flow="row wrap")),
                self.taken,
                self.caution,
            ]
        )
        self.box.add_class("gasphys-app")

        for name in app.blanks:
            self._write(name)
            self.entries[name].observe(self._guarded(self._typed, name), "value")
            if name in self.sliders:
                self.sliders[name].observe(self._guarded(self._slid, name), "value")
            if name in self.unit_choices:
                self.unit_choices[name].observe(self._guarded(self._unit_chosen, name), "value")
        self.explained.observe(self._guarded(self._explain), "value")
        self.buttons["Table"].on_click(self._guarded(self._take_table))
        self.buttons["Python lines"].on_click(self._guarded(self._take_lines))
        self.buttons["netCDF file"].on_click(self._guarded(self._take_file, ".nc", "application/x-netcdf"))
        self.buttons["CSV file"].on_click(self._guarded(self._take_file, ".csv", "text/csv"))
        self.buttons["Reset"].on_click(self._guarded(self._reset))
        self._guarded(self._refresh, self._asked)()

    # -- building ----------------------------------------------------------------------------

    def _html(self, name: str) -> Any:
        import ipywidgets as ipw

        one = ipw.HTML()
        one.add_class(name)
        return one

    def _sentence(self) -> list[Any]:
        import ipywidgets as ipw

        items: list[Any] = []
        for words, name, mark in self.app.phrases():
            if words:
                text = ipw.HTML(html.escape(words), layout=ipw.Layout(margin="2px 4px 2px 0"))
                text.add_class("gasphys-words")
                items.append(text)
            if name:
                items.append(self._blank(name, mark))
        return items

    def _blank(self, name: str, mark: str) -> Any:
        """Return what is typed into, the unit and the mark after it, and the slider under them."""
        import ipywidgets as ipw

        blank, choices = self.app.blanks[name], self.app.unit_choices(name)
        row: list[Any]
        if isinstance(blank, Name):
            entry = ipw.Combobox(options=list(blank.offered), continuous_update=False, tooltip=name)
            entry.layout.width = f"{max(8.0, 0.62 * max(map(len, blank.offered)) + 1.0):.1f}rem"
        else:
            entry = ipw.Text(continuous_update=False, tooltip=blank.quantity.long_name)
            entry.layout.width = "6rem"
        row = [entry]
        self.entries[name] = entry
        if len(choices) > 1:
            shown = [(unit_words(one), one) for one in choices]
            width = f"{max(5.0, 0.6 * max(len(words) for words, _ in shown) + 2.4):.1f}rem"
            unit = ipw.Dropdown(options=shown, layout=ipw.Layout(width=width), tooltip=f"unit of {name}")
            self.unit_choices[name] = unit
            row.append(unit)
            after = mark
        else:
            after = ("" if choices[0] in ("", "1") else f" {choices[0]}") + mark
        if after:
            words = ipw.HTML(html.escape(after), layout=ipw.Layout(margin="2px 4px 2px 0"))
            words.add_class("gasphys-words")
            row.append(words)
        column = [ipw.HBox(row)]
        if not isinstance(blank, Name):
            low, high, step = blank.span(self._slider_unit(name))
            slider = ipw.FloatSlider(
                min=low,
                max=high,
                step=step,
                readout=False,
                tooltip=blank.quantity.long_name,
                layout=ipw.Layout(width="auto", margin="0 8px 0 0"),
            )
            self.sliders[name] = slider
            column.append(slider)
        box = ipw.VBox(column, layout=ipw.Layout(margin="0 4px 0 0"))
        box.add_class(f"gasphys-blank-{name}")
        return box

    def _slider_unit(self, name: str) -> str:
        """Return the unit a slider counts in, whatever the blank shows: a page that is told new ends of a
        slider sends back values of its own.
        """
        return self.app.unit_choices(name)[0]

    def _write(self, name: str) -> None:
        """Show a parameter in its blank, slider and unit, without asking for a new picture."""
        blank, unit, value = self.app.blanks[name], self.app.units[name], self.app.params[name]
        self._writing = True
        try:
            self.entries[name].value = blank.show(value, unit)
            if name in self.unit_choices:
                self.unit_choices[name].value = unit
            if not isinstance(blank, Name):
                self._parked[name] = blank.place(value, self._slider_unit(name))
                self.sliders[name].value = self._parked[name]
        finally:
            self._writing = False
        self._right(name)

    # -- what the user does ------------------------------------------------------------------

    def _guarded(self, do: Callable[..., None], *first: Any) -> Callable[..., None]:
        """Return a callback that shows every error: one raised inside would be lost."""

        def run(*args: Any) -> None:
            with self._lock:
                if self._writing:
                    return
                try:
                    do(*first)
                except GasphysError as error:
                    self._tell(str(error))
                except Exception as error:
                    self._tell(
                        f"Unexpected error, please report it: {type(error).__name__}: {error}",
                        traceback.format_exc(),
                    )

        return run

    def _typed(self, name: str) -> None:
        blank, text = self.app.blanks[name], self.entries[name].value
        try:
            value = blank.read(text, self.app.units[name])
        except GasphysError as error:
            self._wrong[name] = f"{text!r} cannot stand here: {error}"
            self.entries[name].add_class("gasphys-wrong")
            self._refuse()
            return
        self.app.params[name] = value
        self._write(name)
        self._ask()

    def _slid(self, name: str) -> None:
        slider = self.sliders[name]
        # The page puts a slider onto its steps by itself: that must not change what stands in the blank.
        if abs(slider.value - self._parked[name]) < 0.5 * slider.step:
            return
        blank: Any = self.app.blanks[name]  # a number
        unit = self._slider_unit(name)
        self.app.params[name] = blank.read(blank.at_place(slider.value, unit), unit)
        self._write(name)
        self._ask()

    def _unit_chosen(self, name: str) -> None:
        self.app.units[name] = self.unit_choices[name].value
        self._write(name)
        self._ask()

    def _reset(self) -> None:
        self.app.reset()
        for name in self.app.blanks:
            self._write(name)
        self._ask()

    def _right(self, name: str) -> None:
        self._wrong.pop(name, None)
        self.entries[name].remove_class("gasphys-wrong")

    # -- what is shown -----------------------------------------------------------------------

    def _ask(self) -> None:
        """Ask for a new picture; of several askings in short time only the last is answered."""
        self._asked += 1
        refresh = self._guarded(self._refresh, self._asked)
        try:
            loop = asyncio.get_running_loop()
        except RuntimeError:  # no event loop: nothing can come in between
            refresh()
        else:
            loop.call_later(_PAUSE, refresh)

    def _refresh(self, asked: int) -> None:
        if asked != self._asked:
            return
        if self._wrong:
            self._refuse()
            return
        try:
            self._ds, png = self.app.picture(self.figure)
            answer, notes = self.app.answer(self._ds), self.app.notes(self._ds)
        except Exception:
            self._clear()
            raise
        self.image.value = png
        self.image.layout.visibility = "visible"
        self.answer.value = html.escape(answer)
        self.notes.value = "<br>".join(html.escape(note) for note in notes)
        self._tell("")
        self.taken.value = ""
        self._explain()

    def _tell(self, text: str, trace: str = "") -> None:
        """Show a message; an empty one removes it."""
        more = f"<details><summary>where</summary><pre>{html.escape(trace)}</pre></details>" if trace else ""
        self.message.value = html.escape(text).replace("\n", "<br>") + more
        self.message.layout.display = None if text else "none"

    def _refuse(self) -> None:
        """Show what is wrong with the blanks."""
        self._clear()
        self._tell("\n".join(self._wrong.values()))

    def _clear(self) -> None:
        """Remove the answer and all that belongs to it: none of it holds for what stands in the blanks."""
        self._ds = None
        self.answer.value = "No answer for these values."
        self.notes.value = self.working.value = self.taken.value = ""
        self.image.layout.visibility = "hidden"

    def _explain(self) -> None:
        if self._ds is None or not self.explained.value:
            self.working.value = ""
        else:
            self.working.value = f"<pre>{html.escape(self.app.explain(self._ds, self.explained.value))}</pre>"

    def _take_table(self) -> None:
        self._need_answer()
        table = self.app.table(self._ds).to_html(index=False, border=0, float_format=lambda x: f"{x:.5g}")
        self.taken.value = f'<div class="gasphys-table" tabindex="0">{table}</div>'

    def _take_lines(self) -> None:
        self._need_answer()
        self.taken.value = f"<pre>{html.escape(self.app.lines())}</pre>"

    def _take_file(self, ending: str, kind: str) -> None:
        self._need_answer()
        content = base64.b64encode(self.app.file(ending)).decode("ascii")
        name = f"{self.app.name}{ending}"
        self.taken.value = f'<a download="{name}" href="data:{kind};base64,{content}">Save {name}</a>'

    def _need_answer(self) -> None:
        if self._ds is None:
            raise GasphysError("\n".join([*self._wrong.values(), "There is nothing to take along."]))
