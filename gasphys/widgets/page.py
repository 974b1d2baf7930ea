"""Apps and notebooks as pages of this machine: the view an app has in a notebook, without the notebook.

A small server on 127.0.0.1 holds the widgets; the page mirrors them with the browser's own controls. It
needs no network, loads nothing, and forbids the browser to.
"""

from __future__ import annotations

import ast
import base64
import contextlib
import html
import io
import json
import re
import secrets
import string
import threading
import traceback
from collections import OrderedDict
from collections.abc import Callable, Iterable
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from importlib import resources
from pathlib import Path
from typing import Any

from gasphys.errors import GasphysError
from gasphys.plots.style import ACCENT, INK
from gasphys.widgets.base import App

__all__ = ["Page", "app_page", "notebook_page", "server"]

#: Pages kept; those opened longest ago are forgotten.
_KEPT = 20

#: The browser may load nothing but this page, and may ask nobody but this server.
_POLICY = (
    "default-src 'none'; img-src data:; style-src 'unsafe-inline'; script-src 'unsafe-inline'; "
    "connect-src 'self'; base-uri 'none'; form-action 'none'; frame-ancestors 'none'"
)

#: What a widget is on the page.
_KINDS = {
    "HBox": "row",
    "VBox": "column",
    "HTML": "words",
    "Text": "text",
    "Combobox": "choice",
    "FloatSlider": "slider",
    "Dropdown": "select",
    "Button": "button",
    "Image": "image",
}


class Page:
    """Words and widgets on one page.

    Parameters
    ----------
    title : str
        Title of the page.
    items : iterable
        HTML texts and ipywidgets, from top to bottom.

    Examples
    --------
    >>> import gasphys as gp
    >>> page = Page("Oxygen", ["<p>words</p>", gp.widgets.OxygenAtPressure().view])
    >>> "<title>Oxygen</title>" in page.text()
    True
    """

    def __init__(self, title: str, items: Iterable[Any]) -> None:
        self.title, self.items = title, list(items)
        self.key = secrets.token_urlsafe(12)
        self._widgets: dict[str, Any] = {}
        self._sent: dict[str, dict[str, Any]] = {}

    def text(self) -> str:
        """Return the page as HTML.

        Returns
        -------
        str
            All there is: it loads nothing.
        """
        items = [item if isinstance(item, str) else self._spec(item) for item in self.items]
        # "<" of the content must not end the script.
        content = json.dumps({"page": self.key, "items": items}).replace("<", "\\u003c")
        template = resources.files("gasphys.widgets").joinpath("page.html").read_text(encoding="utf-8")
        return string.Template(template).substitute(
            title=html.escape(self.title), ink=INK, accent=ACCENT, content=content
        )

    def change(self, number: str, value: Any) -> dict[str, dict[str, Any]]:
        """Do what somebody did on the page.

        Parameters
        ----------
        number : str
            Of the widget.
        value : str, float, int or None
            What stands in it now; None for a button.

        Returns
        -------
        dict
            What is to be shown otherwise, by number of the widget.

        Examples
        --------
        >>> import gasphys as gp
        >>> page = Page("Oxygen", [gp.widgets.OxygenAtPressure().view])
        >>> text = page.text()
        >>> page.change("no such widget", 1.0)
        {}
        """
        widget = self._widgets.get(number)
        if widget is None:
            return {}
        kind = _KINDS[type(widget).__name__]
        if kind == "button":
            widget.click()
        elif kind == "select":
            self._sent[number]["value"] = value
            widget.index = int(value)
        elif kind in ("text", "choice", "slider"):
            self._sent[number]["value"] = value
            widget.value = float(value) if kind == "slider" else str(value)
        changed = {}
        for one, widget in self._widgets.items():
            now, before = _state(widget), self._sent[one]
            more = {name: text for name, text in now.items() if text != before[name]}
            if more:
                changed[one], self._sent[one] = more, now
        return changed

    def close(self) -> None:
        """Let go of the widgets, which ipywidgets keeps as long as they are open."""
        for widget in self._widgets.values():
            widget.close()
        self._widgets.clear()

    def _spec(self, widget: Any) -> dict[str, Any]:
        number = str(len(self._widgets))
        self._widgets[number], self._sent[number] = widget, _state(widget)
        return {
            "id": number,
            "kind": _KINDS[type(widget).__name__],
            "state": self._sent[number],
            "children": [self._spec(child) for child in getattr(widget, "children", ())],
        }


def _state(widget: Any) -> dict[str, Any]:
    """Return what of a widget shows on the page."""
    kind, layout = _KINDS[type(widget).__name__], widget.layout
    styles = {n: v for n in layout.keys if not n.startswith("_") and (v := getattr(layout, n)) is not None}
    state: dict[str, Any] = {
        "classes": list(widget._dom_classes),
        "style": "; ".join(f"{n.replace('_', '-')}: {v}" for n, v in sorted(styles.items())),
    }
    if kind in ("text", "choice", "slider", "select", "button"):
        state |= {"label": widget.tooltip or "", "description": widget.description}
    if kind in ("words", "text", "choice", "slider"):
        state["value"] = widget.value
    if kind == "slider":
        state |= {"min": widget.min, "max": widget.max, "step": widget.step}
    if kind == "choice":
        state["options"] = list(widget.options)
    if kind == "select":
        state |= {"options": list(widget._options_labels), "value": widget.index}
    if kind == "image":
        state["value"] = base64.b64encode(bytes(widget.value)).decode("ascii")
    return state


def app_page(app: App) -> Page:
    """Return the page of one app.

    Parameters
    ----------
    app : App
        The app.

    Returns
    -------
    Page
        Its name and its view.

    Examples
    --------
    >>> import gasphys as gp
    >>> app_page(gp.widgets.OxygenAtPressure()).title
    'Oxygen at pressure'
    """
    # The name of an equation stays as it is.
    title = app.name if "." in app.name else app.name.replace("_", " ").capitalize()
    return Page(title, [f"<h1>{html.escape(title)}</h1>", app.view])


def notebook_page(path: str | Path) -> Page:
    """Run a notebook and return what it says and shows, without its code.

    Parameters
    ----------
    path : path
        The notebook.

    Returns
    -------
    Page
        Words, apps, pictures, tables and printed text, in order. Of Markdown: headings, paragraphs,
        emphasis, code and links.

    Raises
    ------
    GasphysError
        If the file is no notebook.
    """
    path = Path(path)
    try:
        cells = json.loads(path.read_text(encoding="utf-8"))["cells"]
    except (ValueError, KeyError) as error:
        raise GasphysError(f"{path}: not a notebook ({error})") from None
    space: dict[str, Any] = {"__name__": "__main__"}
    items: list[Any] = []
    with contextlib.chdir(path.parent):
        for cell in cells:
            source = "".join(cell["source"])
            if cell["cell_type"] == "markdown":
                items.append(_words(source))
            elif cell["cell_type"] == "code":
                items += _run(source, space)
    return Page(path.stem.replace("_", " ").capitalize(), items)


def _words(source: str) -> str:
    """Return the little Markdown that notebooks here use as HTML."""
    blocks = []
    for block in re.split(r"\n\s*\n", html.escape(source.strip(), quote=False)):
        # Code is set aside: a star in it is a star.
        codes = re.findall(r"`([^`]+)`", block)
        text = re.sub(r"`[^`]+`", "\0", block)
        text = re.sub(r"\*\*(.+?)\*\*", r"<strong>\1</strong>", text, flags=re.DOTALL)
        text = re.sub(r"\*(.+?)\*", r"<em>\1</em>", text, flags=re.DOTALL)
        text = re.sub(r"\[([^]]+)\]\((https?://[^)\s]+)\)", r'<a href="\2">\1</a>', text)
        for code in codes:
            text = text.replace("\0", f"<code>{code}</code>", 1)
        heading = re.match(r"(#{1,6}) ", text)
        tag = f"h{len(heading[1])}" if heading else "p"
        blocks.append(f"<{tag}>{text.removeprefix(heading[0] if heading else '')}</{tag}>")
    return "\n".join(blocks)


def _run(source: str, space: dict[str, Any]) -> list[Any]:
    """Run a cell and return what it prints and the value of its last expression."""
    tree, last = ast.parse(source), None
    if tree.body and isinstance(tree.body[-1], ast.Expr):
        last = ast.Expression(tree.body.pop().value)  # type: ignore[attr-defined]
    printed, value, failed = io.StringIO(), None, False
    with contextlib.redirect_stdout(printed), contextlib.redirect_stderr(printed):
        try:
            exec(compile(tree, "<notebook>", "exec"), space)
            if last is not None:
                value = eval(compile(last, "<notebook>", "eval"), space)
        except Exception:
            failed = True
            traceback.print_exc(limit=-1)
    items: list[Any] = []
    if text := printed.getvalue():
        kind = ' role="alert"' if failed else ""
        items.append(f"<pre{kind}>{html.escape(text)}</pre>")
    return items if value is None else [*items, _shown(value)]


def _shown(value: Any) -> Any:
    """Return a value as a notebook would show it."""
    if isinstance(value, App):
        return value.view
    if hasattr(value, "_repr_png_"):
        content = base64.b64encode(value._repr_png_()).decode("ascii")
        return f'<img alt="picture" src="data:image/png;base64,{content}">'
    if text := getattr(value, "_repr_html_", lambda: None)():
        return text
    return f"<pre>{html.escape(repr(value))}</pre>"


def server(make: Callable[[], Page], port: int = 0) -> ThreadingHTTPServer:
    """Return a server of one page, for this machine alone.

    Parameters
    ----------
    make : callable
        Returns a new page for each reader.
    port : int
        0 takes a free one.

    Returns
    -------
    ThreadingHTTPServer
        Bound to 127.0.0.1; its ``serve_forever`` starts it.

    Raises
    ------
    OSError
        If the port is taken.

    Examples
    --------
    >>> import gasphys as gp
    >>> one = server(lambda: app_page(gp.widgets.OxygenAtPressure()))
    >>> one.server_address[0]
    '127.0.0.1'
    >>> one.server_close()
    """
    pages: OrderedDict[str, Page] = OrderedDict()
    lock = threading.Lock()

    class Handler(BaseHTTPRequestHandler):
        def do_GET(self) -> None:
            if not self._from_here():
                return
            if self.path != "/":
                self._send(404, "text/plain", "there is one page, /")
                return
            try:
                with lock:
                    page = make()
                    pages[page.key] = page
                    while len(pages) > _KEPT:
                        pages.popitem(last=False)[1].close()
                    text = page.text()
            except Exception as error:
                self._send(500, "text/plain", f"{type(error).__name__}: {error}")
                return
            self._send(200, "text/html", text)

        def do_POST(self) -> None:
            body = self.rfile.read(int(self.headers.get("Content-Length") or 0))
            if not self._from_here():
                return
            try:
                asked = json.loads(body)
                with lock:
                    page = pages.get(asked["page"])
                    changed = None if page is None else page.change(str(asked["id"]), asked["value"])
            except Exception as error:
                self._send(400, "text/plain", f"{type(error).__name__}: {error}")
                return
            if changed is None:
                self._send(410, "text/plain", "this page is not known here")
                return
            self._send(200, "application/json", json.dumps(changed))

        def _from_here(self) -> bool:
            """Refuse what another site makes the browser ask."""
            here = f"127.0.0.1:{one.server_port}"
            host, origin = self.headers.get("Host", ""), self.headers.get("Origin")
            if host in (here, here.replace("127.0.0.1", "localhost")) and origin in (None, f"http://{host}"):
                return True
            self._send(403, "text/plain", "for this machine only")
            return False

        def _send(self, status: int, kind: str, text: str) -> None:
            content = text.encode()
            self.send_response(status)
            self.send_header("Content-Type", f"{kind}; charset=utf-8")
            self.send_header("Content-Length", str(len(content)))
            self.send_header("Content-Security-Policy", _POLICY)
            self.send_header("Cache-Control", "no-store")
            self.end_headers()
            # Somebody may close the page before it has come.
            with contextlib.suppress(ConnectionError):
                self.wfile.write(content)

        def log_message(self, *_: Any) -> None:
            """Stay silent."""

    one = ThreadingHTTPServer(("127.0.0.1", port), Handler)
    one.daemon_threads = True
    return one
