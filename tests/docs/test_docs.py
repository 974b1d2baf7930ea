"""The documentation builds without a warning, covers everything public, and its examples run."""

from __future__ import annotations

import importlib
import inspect
import os
import re
import subprocess
import sys
from html.parser import HTMLParser
from pathlib import Path
from urllib.parse import unquote, urlsplit

import pytest

import gasphys as gp

ROOT = Path(__file__).resolve().parents[2]
DOCS = ROOT / "docs"
sys.path.insert(0, str(DOCS))

from _generate import examples  # noqa: E402
from _generate.markdown import anchor_of, first_name  # noqa: E402


class _Page(HTMLParser):
    """What a page links to, what it would load, and its anchors."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.links: list[str] = []
        self.loads: list[str] = []
        self.ids: set[str] = set()
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        found = dict(attrs)
        if found.get("id"):
            self.ids.add(str(found["id"]))
        if tag == "a" and found.get("href"):
            self.links.append(str(found["href"]))
        if tag == "link" and found.get("rel") not in (
            "canonical",
            "next",
            "prev",
            "index",
            "search",
            "author",
        ):
            self.loads.append(str(found.get("href")))
        self.loads += [str(found[k]) for k in ("src", "srcset", "data", "poster") if found.get(k)]
        if found.get("style"):
            self.loads += re.findall(r"url\(([^)]*)\)", str(found["style"]))


@pytest.fixture(scope="session")
def built(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Build everything from clean, warnings as errors."""
    out = tmp_path_factory.mktemp("docs")
    done = subprocess.run(
        [sys.executable, "-m", "sphinx", "-W", "--keep-going", "-q", "-E", "-b", "html", str(DOCS), str(out)],
        cwd=ROOT,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
        capture_output=True,
        encoding="utf-8",
        check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr
    return out


@pytest.fixture(scope="session")
def pages(built: Path) -> dict[str, _Page]:
    return {
        p.relative_to(built).as_posix(): _Page(p.read_text(encoding="utf-8"))
        for p in sorted(built.rglob("*.html"))
    }


def _public() -> list[str]:
    """Return the dotted name of every public function and class."""
    found = []
    for name in sorted({*gp._MODULES, *gp._NAMES.values()}):
        module = importlib.import_module(f"gasphys.{name}")
        for public in module.__all__:
            if callable(getattr(module, public)) and not isinstance(getattr(module, public), dict):
                found.append(f"gasphys.{name}.{public}")
    return found


def test_every_public_function_has_an_entry(pages: dict[str, _Page]) -> None:
    ids = {name: page.ids for name, page in pages.items() if name.startswith("generated/api/")}
    names = _public()
    assert len(names) > 50
    missing = [n for n in names if n not in ids.get(f"generated/api/{n.split('.')[1]}.html", set())]
    assert not missing


def test_every_public_method_has_an_entry(pages: dict[str, _Page]) -> None:
    ids = set().union(*(page.ids for name, page in pages.items() if name.startswith("generated/api/")))
    missing = []
    for name in _public():
        module, _, short = name.rpartition(".")
        one = getattr(importlib.import_module(module), short)
        if inspect.isclass(one):
            own = [
                m
                for m, v in vars(one).items()
                if not m.startswith("_") and callable(getattr(one, m)) and v.__doc__
            ]
            missing += [f"{name}.{m}" for m in own if f"{name}.{m}" not in ids]
    assert not missing


@pytest.fixture(scope="session")
def anchors() -> dict[str, str]:
    """Return the anchor of every equation by its name."""
    return {name: anchor_of(first_name(name)) for name in gp.equations()}


def test_every_equation_is_on_a_page(pages: dict[str, _Page], anchors: dict[str, str]) -> None:
    for name, anchor in anchors.items():
        # A choice may pass on to an equation of another subject: it stands on that one's page.
        own = first_name(name).split(".")[0]
        assert anchor in pages[f"generated/equations/{own}.html"].ids, name


def test_every_formula_is_traced_and_drawn(built: Path, anchors: dict[str, str]) -> None:
    formulas = {anchor for name, anchor in anchors.items() if gp.equations()[name].kind == "formula"}
    drawn = set()
    for path in (built / "generated/equations").glob("*.html"):
        sections = re.split(r'id="(equation-[a-z0-9-]+)"', path.read_text(encoding="utf-8"))
        for anchor, section in zip(sections[1::2], sections[2::2], strict=True):
            # Before the table of arguments; derivatives come after it.
            if '<div class="equation">' in section.split("<table")[0]:
                drawn.add(anchor)
    assert formulas <= drawn, formulas - drawn


def test_no_latex_is_left_in_a_page(built: Path) -> None:
    for path in built.rglob("*.html"):
        drawn = re.findall(r"<math.*?</math>", path.read_text(encoding="utf-8"), re.DOTALL)
        left = [m for m in drawn if "\\" in m or "<mi>&</mi>" in m]
        assert not left, f"{path.name}: {left[0][:200]}"


def test_links_between_pages_resolve(pages: dict[str, _Page]) -> None:
    broken = []
    for name, page in pages.items():
        for link in page.links:
            parts = urlsplit(link)
            if parts.scheme or parts.netloc:
                continue
            target = (
                os.path.normpath(os.path.join(os.path.dirname(name), unquote(parts.path)))
                if parts.path
                else name
            )
            if target not in pages or (parts.fragment and unquote(parts.fragment) not in pages[target].ids):
                broken.append(f"{name}: {link}")
    assert not broken


def test_no_page_asks_the_network_for_anything(built: Path, pages: dict[str, _Page]) -> None:
    for name, page in pages.items():
        outside = [v for v in page.loads if urlsplit(v).netloc or urlsplit(v).scheme in ("http", "https")]
        assert not outside, f"{name}: {outside}"
    for path in built.rglob("*.css"):
        text = path.read_text(encoding="utf-8")
        assert not re.search(r"(@import|url\()\s*[\"']?(https?:)?//", text), path.name


def test_every_page_carries_the_caution(built: Path) -> None:
    words = gp.quantities.CAUTION.split(".")[0]
    for path in sorted(built.rglob("*.html")):
        assert words in path.read_text(encoding="utf-8"), path.name


@pytest.mark.parametrize("path", examples.handwritten(), ids=lambda p: p.relative_to(DOCS).as_posix())
def test_examples_of_a_page_run(path: Path) -> None:
    examples.run(path)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("```python\n>>> 1 + 1\n3\n```\n", "line 2"),
        ("words\n\n```python\n1 + 1\n```\n", "line 4: a python block begins with >>>"),
    ],
)
def test_an_example_that_is_wrong_or_unchecked_ends_the_build(
    text: str, message: str, tmp_path: Path
) -> None:
    page = tmp_path / "page.md"
    page.write_text(text, encoding="utf-8")
    with pytest.raises(RuntimeError, match=message):
        examples.run(page)
