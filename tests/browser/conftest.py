"""JupyterLab on this machine and headless Chromium in front of it.

Not part of the default run: `python -m pytest -o addopts= tests/browser`. Nothing here is skipped:
what is missing is an error that says how to get it.
"""

from __future__ import annotations

import json
import os
import shutil
import socket
import subprocess
import sys
import time
import urllib.error
import urllib.request
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

import pytest

try:
    from playwright.sync_api import Browser, ConsoleMessage, Page, Request, expect, sync_playwright
except ModuleNotFoundError as error:
    raise ModuleNotFoundError(
        'The browser tests need Playwright: python -m pip install ".[browser]"'
    ) from error

ROOT = Path(__file__).resolve().parents[2]
#: Where screenshots go; CI may keep the folder.
SHOTS = Path(os.environ.get("GASPHYS_SCREENSHOTS", ROOT / "build" / "screenshots"))
ARGUMENTS = [
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--disable-dev-shm-usage",
]
expect.set_options(timeout=60_000)
LOCAL = {"127.0.0.1", "localhost", ""}
#: A notebook of the tests: every app in the output of one cell, so that none is out of sight.
EVERY_APP = "every_app.ipynb"


def _every_app() -> dict[str, Any]:
    source = (
        "import ipywidgets\n"
        "from gasphys.widgets import opening, EquationPage\n"
        "apps = {name: app() for name, app in opening.APPS.items()}\n"
        "apps['lungs.alveolar_po2'] = EquationPage()\n"
        "for name, app in apps.items():\n"
        "    app.view.add_class('shown-' + name.replace('.', '-'))\n"
        "ipywidgets.VBox([app.view for app in apps.values()])"
    )
    kernel = {"display_name": "Python 3 (ipykernel)", "language": "python", "name": "python3"}
    cell = {
        "cell_type": "code",
        "id": "all",
        "execution_count": None,
        "metadata": {},
        "outputs": [],
        "source": source.splitlines(keepends=True),
    }
    return {"cells": [cell], "metadata": {"kernelspec": kernel}, "nbformat": 4, "nbformat_minor": 5}


@pytest.fixture(scope="session")
def lab(tmp_path_factory: pytest.TempPathFactory) -> Iterator[str]:
    """Start JupyterLab on a copy of the notebooks, with no settings but its own; return its address."""
    home = tmp_path_factory.mktemp("lab")
    shutil.copytree(ROOT / "notebooks", home / "notebooks")
    (home / "notebooks" / EVERY_APP).write_text(json.dumps(_every_app()), encoding="utf-8")
    config = home / "config"
    (config / "labconfig").mkdir(parents=True)
    (config / "labconfig" / "page_config.json").write_text(
        json.dumps({"disabledExtensions": {"@jupyterlab/apputils-extension:announcements": True}})
    )
    paths = [str(ROOT), *filter(None, [os.environ.get("PYTHONPATH")])]
    env = {
        **os.environ,
        "PYTHONPATH": os.pathsep.join(paths),
        "JUPYTER_CONFIG_DIR": str(config),
        "JUPYTER_DATA_DIR": str(home / "data"),
        "JUPYTER_RUNTIME_DIR": str(home / "runtime"),
        "JUPYTERLAB_SETTINGS_DIR": str(home / "settings"),
        "JUPYTERLAB_WORKSPACES_DIR": str(home / "workspaces"),
        "IPYTHONDIR": str(home / "ipython"),
    }
    log = home / "lab.log"
    told = []
    for _ in range(3):  # the port may be taken between asking for it and using it
        port = _free_port()
        with log.open("wb") as out:
            server = subprocess.Popen(
                [
                    sys.executable,
                    *("-m", "jupyterlab", "--no-browser", "--allow-root"),
                    "--ServerApp.token=",
                    "--ServerApp.password=",
                    "--ServerApp.ip=127.0.0.1",
                    f"--ServerApp.port={port}",
                    "--ServerApp.port_retries=0",
                    f"--ServerApp.root_dir={home / 'notebooks'}",
                    "--LabApp.check_for_updates_class=jupyterlab.NeverCheckForUpdate",
                    "--LabApp.extension_manager=readonly",
                ],
                cwd=home,
                env=env,
                stdin=subprocess.DEVNULL,
                stdout=out,
                stderr=subprocess.STDOUT,
            )
        address = f"http://127.0.0.1:{port}"
        try:
            if _answers(f"{address}/api/status", server):
                yield address
                return
        finally:
            _stop(server)
        told.append(log.read_text(encoding="utf-8", errors="replace")[-3000:])
    pytest.fail("JupyterLab did not start:\n" + "\n---\n".join(told), pytrace=False)


def _free_port() -> int:
    with socket.socket() as one:
        one.bind(("127.0.0.1", 0))
        return int(one.getsockname()[1])


def _answers(address: str, server: subprocess.Popen[bytes]) -> bool:
    end = time.monotonic() + 120.0
    while time.monotonic() < end and server.poll() is None:
        try:
            with urllib.request.urlopen(address, timeout=5) as answer:
                return bool(answer.status == 200)
        except (urllib.error.URLError, OSError):
            time.sleep(0.3)
    return False


def _stop(server: subprocess.Popen[bytes]) -> None:
    server.terminate()
    try:
        server.wait(timeout=30)
    except subprocess.TimeoutExpired:
        server.kill()
        server.wait(timeout=30)


@pytest.fixture(scope="session")
def browser() -> Iterator[Browser]:
    """Start the machine's Chromium."""
    path = shutil.which("chromium") or shutil.which("chromium-browser")
    if path is None:
        pytest.fail("Chromium is not installed: apt-get update && apt-get install -y chromium", pytrace=False)
    with sync_playwright() as playwright:
        one = playwright.chromium.launch(executable_path=path, args=ARGUMENTS, timeout=120_000)
        yield one
        one.close()


@dataclass
class Seen:
    """What went on behind a page."""

    console: list[str] = field(default_factory=list)
    outside: list[str] = field(default_factory=list)

    def watch(self, page: Page) -> None:
        """Collect console errors, exceptions and requests that leave the machine."""

        def console(message: ConsoleMessage) -> None:
            if message.type == "error":
                self.console.append(f"{message.text} ({message.location})")

        def request(one: Request) -> None:
            parts = urlsplit(one.url)
            if parts.scheme not in ("data", "blob") and parts.hostname not in LOCAL:
                self.outside.append(one.url)

        page.on("console", console)
        page.on("pageerror", lambda error: self.console.append(str(error)))
        page.on("request", request)


@pytest.fixture
def seen() -> Seen:
    return Seen()


@contextmanager
def opened(browser: Browser, seen: Seen, **more: Any) -> Iterator[Page]:
    """Open an empty page of a new profile; kernels it started are ended with it."""
    context = browser.new_context(viewport={"width": 1280, "height": 1500}, accept_downloads=True, **more)
    context.set_default_timeout(90_000)
    one = context.new_page()
    seen.watch(one)
    yield one
    if "/lab" in one.url:
        assert one.evaluate(_END_KERNELS) == 0
    context.close()


@pytest.fixture
def page(browser: Browser, seen: Seen, shot: Any) -> Iterator[Page]:
    """Open an empty page; how it ends is kept as a screenshot."""
    with opened(browser, seen) as one:
        yield one
        shot(one, "end")


#: The next test of this notebook begins with a kernel of its own.
_END_KERNELS = """async () => {
    const path = decodeURIComponent(location.pathname.split('/lab/tree/')[1] || '');
    const mine = async () => (await (await fetch('/api/sessions')).json()).filter(one => one.path === path);
    const token = (document.cookie.match(/_xsrf=([^;]*)/) || [])[1];
    const headers = {'X-XSRFToken': token};
    for (const one of await mine()) {
        await fetch('/api/sessions/' + one.id, {method: 'DELETE', headers});
    }
    return (await mine()).length;
}"""


@pytest.fixture
def shot(request: pytest.FixtureRequest) -> Any:
    """Return a function that takes a screenshot named after the test."""
    SHOTS.mkdir(parents=True, exist_ok=True)

    def take(page: Page, what: str) -> None:
        name = "".join(c if c.isalnum() or c in "_." else "_" for c in f"{request.node.name}_{what}")
        page.screenshot(path=SHOTS / f"{name}.png", full_page="/lab" not in page.url)

    return take
