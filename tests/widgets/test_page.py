"""Apps and notebooks as pages, without a browser: what the server sends, and what it refuses."""

from __future__ import annotations

import base64
import http.client
import json
import re
import threading
from collections.abc import Iterator
from http.server import ThreadingHTTPServer
from pathlib import Path
from typing import Any

import pytest

import gasphys as gp
from gasphys.__main__ import main
from gasphys.quantities import CAUTION, quantity
from gasphys.widgets import opening
from gasphys.widgets import page as page_module
from gasphys.widgets.page import Page, app_page, notebook_page, server


def _content(text: str) -> dict[str, Any]:
    found = re.search(r"^const started = (.*);$", text, re.MULTILINE)
    assert found
    content: dict[str, Any] = json.loads(found[1])
    return content


def _flat(items: list[Any]) -> Iterator[dict[str, Any]]:
    for item in items:
        if isinstance(item, dict):
            yield item
            yield from _flat(item["children"])


def _numbered(page: Page, label: str, kind: str) -> str:
    """Return the number of the one widget of this kind with this label."""
    (found,) = [
        w["id"]
        for w in _flat(_content(page.text())["items"])
        if w["kind"] == kind and label in (w["state"].get("label"), w["state"].get("description"))
    ]
    return str(found)


@pytest.fixture
def oxygen() -> tuple[gp.widgets.OxygenAtPressure, Page]:
    app = gp.widgets.OxygenAtPressure()
    return app, app_page(app)


@pytest.mark.parametrize("name", list(opening.APPS))
def test_the_page_of_an_app_holds_all_of_it_and_loads_nothing(name: str) -> None:
    page = opening.page_of(name)()
    text = page.text()
    assert not re.search(r"""(src|href)=["'](?!data:)|https?://|@import|url\(""", text)
    widgets = list(_flat(_content(text)["items"]))
    words = "\n".join(str(w["state"].get("value", "")) for w in widgets)
    assert CAUTION in words
    app = opening.APPS[name]()
    assert sum(w["kind"] == "slider" for w in widgets) == len(app._shown.sliders if app.view else [])
    (picture,) = [w for w in widgets if w["kind"] == "image"]
    assert base64.b64decode(picture["state"]["value"]).startswith(b"\x89PNG")


def test_a_moved_slider_changes_answer_picture_and_entry(
    oxygen: tuple[gp.widgets.OxygenAtPressure, Page],
) -> None:
    app, page = oxygen
    slider = _numbered(page, "ambient pressure, absolute", "slider")
    changed = page.change(slider, 2.8)
    assert app.params["ambient_pressure"] == pytest.approx(2.8 * 101.325, rel=1e-12)
    values = [state["value"] for state in changed.values() if "value" in state]
    assert "2.8" in values
    assert any("272.1 kPa" in str(v) for v in values)
    # What stood still is not sent again.
    assert len(changed) <= 4
    assert page.change(slider, 2.8) == {}


def test_what_is_typed_comes_back_as_understood(oxygen: tuple[gp.widgets.OxygenAtPressure, Page]) -> None:
    app, page = oxygen
    entry = _numbered(page, "arterial PCO2", "text")
    changed = page.change(entry, "39 mmHg")
    assert changed[entry]["value"] == "5.2"
    # Typed otherwise, meant the same: the entry must not keep what was typed.
    assert page.change(entry, "5.20")[entry]["value"] == "5.2"
    changed = page.change(entry, "9000")
    assert any("outside the possible range" in str(s.get("value")) for s in changed.values())
    assert any("gasphys-wrong" in s.get("classes", ()) for s in changed.values())
    assert app.params["arterial_pco2"] == pytest.approx(5.2, rel=1e-12)


def test_buttons_and_choices_work(oxygen: tuple[gp.widgets.OxygenAtPressure, Page]) -> None:
    app, page = oxygen
    changed = page.change(_numbered(page, "unit of arterial_pco2", "select"), 1)
    assert any("mmHg" in str(s.get("value")) for s in changed.values())
    changed = page.change(_numbered(page, "CSV file", "button"), None)
    assert any("download=" in str(s.get("value")) for s in changed.values())
    changed = page.change(_numbered(page, "Table", "button"), None)
    assert any("<th>ambient_pressure [kPa]</th>" in str(s.get("value")) for s in changed.values())
    page.change(_numbered(page, "Reset", "button"), None)
    assert app.units["arterial_pco2"] == "kPa"


# -- notebooks -------------------------------------------------------------------------------------


def _notebook(tmp_path: Path, *sources: str) -> Path:
    cells = [{"cell_type": "code", "source": source} for source in sources]
    path = tmp_path / "one_two.ipynb"
    words = {"cell_type": "markdown", "source": ["# Is it?\n", "\n", "*yes*, **not `a*b*c`**, 1 < 2"]}
    path.write_text(json.dumps({"cells": [words, *cells]}), encoding="utf-8")
    return path


def test_a_notebook_shows_words_and_values_without_its_code(tmp_path: Path) -> None:
    (tmp_path / "here.txt").write_text("from the folder", encoding="utf-8")
    page = notebook_page(
        _notebook(
            tmp_path,
            "import pathlib\nimport gasphys as gp\nsecret_name = pathlib.Path('here.txt').read_text()",
            "print(secret_name); 1 + 1",
            "gp.widgets.OxygenAtPressure()",
            "gp.plots.style.new_figure()",
            "1 / 0",
        )
    )
    assert page.title == "One two"
    texts = [item for item in page.items if isinstance(item, str)]
    assert "<h1>Is it?</h1>" in texts[0]
    assert "<p><em>yes</em>, <strong>not <code>a*b*c</code></strong>, 1 &lt; 2</p>" in texts[0]
    assert "<pre>from the folder\n</pre>" in texts
    assert "<pre>2</pre>" in texts
    assert any(text.startswith('<img alt="picture" src="data:image/png;base64,') for text in texts)
    assert 'role="alert"' in texts[-1]
    assert "ZeroDivisionError" in texts[-1]
    assert len(page.items) == len(texts) + 1
    assert "secret_name" not in page.text()


def test_what_is_no_notebook_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "not.ipynb"
    path.write_text("{}", encoding="utf-8")
    with pytest.raises(gp.GasphysError, match="not a notebook"):
        notebook_page(path)


# -- the server ------------------------------------------------------------------------------------


@pytest.fixture
def running() -> Iterator[ThreadingHTTPServer]:
    one = server(lambda: app_page(gp.widgets.OxygenAtPressure()))
    thread = threading.Thread(target=one.serve_forever, daemon=True)
    thread.start()
    yield one
    one.shutdown()
    one.server_close()
    thread.join()


def _ask(
    running: ThreadingHTTPServer, method: str, path: str, body: Any = None, **headers: str
) -> tuple[int, str, str]:
    connection = http.client.HTTPConnection("127.0.0.1", running.server_port, timeout=60)
    connection.request(method, path, None if body is None else json.dumps(body), headers)
    answer = connection.getresponse()
    text = answer.read().decode()
    policy = answer.headers["Content-Security-Policy"]
    connection.close()
    return answer.status, text, policy


def test_each_reader_has_a_page_of_their_own(running: ThreadingHTTPServer) -> None:
    texts = [_ask(running, "GET", "/")[1] for _ in range(2)]
    first, second = (_content(text) for text in texts)
    assert first["page"] != second["page"]
    entry = next(
        w["id"]
        for w in _flat(first["items"])
        if w["state"].get("label") == quantity("hemoglobin").long_name and w["kind"] == "text"
    )
    asked = {"page": first["page"], "id": entry, "value": "9"}
    status, text, _ = _ask(running, "POST", "/", asked)
    assert status == 200
    assert any("PO2" in str(s.get("value")) for s in json.loads(text).values())
    # The other page still stands at its start: what was typed there first is typed here anew.
    status, text, _ = _ask(running, "POST", "/", {**asked, "page": second["page"]})
    assert any("PO2" in str(s.get("value")) for s in json.loads(text).values())


def test_pages_opened_long_ago_are_forgotten(
    running: ThreadingHTTPServer, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(page_module, "_KEPT", 1)
    first, second = (_content(_ask(running, "GET", "/")[1])["page"] for _ in range(2))
    asked = {"page": first, "id": "no such widget", "value": 1.0}
    assert _ask(running, "POST", "/", asked)[0] == 410
    assert _ask(running, "POST", "/", {**asked, "page": second})[:2] == (200, "{}")


def test_the_browser_is_told_to_load_nothing(running: ThreadingHTTPServer) -> None:
    _, _, policy = _ask(running, "GET", "/")
    assert policy.startswith("default-src 'none'; ")
    assert "http" not in policy


def test_others_are_refused(running: ThreadingHTTPServer) -> None:
    key = _content(_ask(running, "GET", "/")[1])["page"]
    asked = {"page": key, "id": "3", "value": "9"}
    assert running.server_address[0] == "127.0.0.1"
    assert _ask(running, "GET", "/", Host="example.org")[0] == 403
    assert _ask(running, "POST", "/", asked, Origin="http://example.org")[0] == 403
    assert _ask(running, "POST", "/", {**asked, "page": "guessed"})[0] == 410
    assert _ask(running, "POST", "/", [1])[0] == 400
    assert _ask(running, "GET", "/etc/passwd")[0] == 404


# -- the command -----------------------------------------------------------------------------------


def test_open_without_a_name_lists_what_there_is(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["open"]) == 0
    printed = capsys.readouterr().out
    assert all(f"  {name} " in printed for name in opening.APPS)
    assert all(f"  {name}\n" in printed for name in opening.notebooks())
    assert opening.notebooks()


def test_an_unknown_name_is_refused_in_short(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["open", "patience_at_pressure"]) == 2
    told = capsys.readouterr().err
    assert told.count("\n") == 1
    assert "nothing named 'patience_at_pressure' to open; nearest: 'patient_at_pressure'" in told
    assert len(told) < 300


def test_every_app_is_listed_once() -> None:
    apps = {v for v in vars(gp.widgets).values() if isinstance(v, type) and issubclass(v, gp.widgets.App)}
    assert set(opening.APPS.values()) == apps - {gp.widgets.App, gp.widgets.EquationPage}


@pytest.mark.parametrize("name", ["patient", "blood.o2_content", "how_much_oxygen"])
def test_the_beginning_of_a_name_will_do(name: str) -> None:
    assert opening.page_of(name)


def test_a_notebook_opens_in_jupyterlab_without_asking_the_network(monkeypatch: pytest.MonkeyPatch) -> None:
    begun: list[tuple[list[str], dict[str, str]]] = []

    class Begun:
        def __init__(self, command: list[str], env: dict[str, str]) -> None:
            begun.append((command, env))

        def __enter__(self) -> Begun:
            return self

        def __exit__(self, *_: Any) -> None:
            pass

        def wait(self) -> int:
            return 0

    monkeypatch.setattr(opening.importlib.util, "find_spec", lambda name: name)
    monkeypatch.setattr(opening.subprocess, "Popen", Begun)
    assert opening.open_name("how_much_oxygen", browser=False, port=9123) == 0
    ((command, env),) = begun
    assert command[1:3] == ["-m", "jupyterlab"]
    assert "--LabApp.default_url=/lab/tree/how_much_oxygen_does_the_course_add_up_to.ipynb" in command
    assert {"--LabApp.news_url=None", "--LabApp.extension_manager=readonly", "--no-browser"} <= set(command)
    assert "--LabApp.check_for_updates_class=jupyterlab.NeverCheckForUpdate" in command
    assert "--port=9123" in command
    assert str(Path(gp.__file__).parents[1]) in env["PYTHONPATH"]


def test_without_jupyterlab_the_way_out_is_told(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(opening.importlib.util, "find_spec", lambda name: None)
    with pytest.raises(gp.GasphysError, match=r'pip install "\.\[notebooks\]".*--page'):
        opening.open_name("how_much_oxygen")
