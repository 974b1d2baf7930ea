"""The worksheet's page in Chromium: two sheets of paper, nothing clipped, legible without color."""

from __future__ import annotations

from pathlib import Path

import pytest
from playwright.sync_api import Browser

import gasphys as gp
from gasphys.chamber import Chamber, Devices, read_readings, worksheet, worksheet_page
from gasphys.quantities import CAUTION
from tests.browser.conftest import ROOT, Seen

DATA = ROOT / "notebooks" / "data"

#: What does not fit, by page; text that is not dark on white; boxes too small to write in.
_MEASURE = """() => [...document.querySelectorAll('.page')].map(page => {
    const foot = page.querySelector('.foot').getBoundingClientRect();
    const body = (page.querySelector('table') || page.querySelector('.notes')).getBoundingClientRect();
    const inner = [...page.querySelectorAll('td, .top, .box, li, p')];
    const pale = inner.filter(e => {
        const [r, g, b] = getComputedStyle(e).color.match(/\\d+/g).map(Number);
        return 0.2126 * r + 0.7152 * g + 0.0722 * b > 60;
    });
    const sheet = page.getBoundingClientRect();
    return {
        over: [page.scrollHeight - page.clientHeight, page.scrollWidth - page.clientWidth],
        gap: foot.top - body.bottom,
        clipped: inner.filter(e => e.scrollWidth > e.clientWidth + 1).length,
        outside: inner.filter(e => e.getBoundingClientRect().right > sheet.right).length,
        pale: pale.length,
        small: [...page.querySelectorAll('.box')].filter(e => {
            const box = e.getBoundingClientRect();
            return box.width < 40 || box.height < 12;
        }).length,
        least: Math.min(...inner.map(e => parseFloat(getComputedStyle(e).fontSize))),
    };
})"""


O24 = str(DATA / "o24.txt")
EXTENDED = {"extensions_deep": 1, "extensions_shallow": 1}


@pytest.mark.parametrize(
    ("name", "more", "read"),
    [
        (O24, {}, False),
        (O24, {}, True),
        ("usn_6", {}, False),
        ("usn_6", EXTENDED, False),
        ("usn_6a", {}, False),
        ("usn_9", {}, False),
    ],
)
def test_two_pages_and_nothing_clipped(
    browser: Browser, seen: Seen, tmp_path: Path, name: str, more: dict[str, int], read: bool
) -> None:
    with gp.validity("ignore"):
        person = gp.Person.from_toml(DATA / "p04.toml")
    readings = read_readings(DATA / "p04_readings.toml") if read else ()
    room, devices = Chamber.from_toml(DATA / "the_unit.toml"), Devices.from_toml(DATA / "p04.toml")
    file = tmp_path / "sheet.html"
    file.write_text(
        worksheet_page(worksheet(name, person, room, devices, readings, **more)), encoding="utf-8"
    )
    page = browser.new_page()
    seen.watch(page)
    page.goto(file.as_uri())
    page.emulate_media(media="print")
    found = page.evaluate(_MEASURE)
    assert len(found) == 2
    for one in found:
        assert one["over"] == [0, 0]
        assert one["gap"] >= 0.0
        assert (one["clipped"], one["outside"], one["pale"], one["small"]) == (0, 0, 0, 0)
        assert one["least"] >= 8.0  # CSS pixels: 6 pt
    printed = page.pdf(prefer_css_page_size=True, print_background=False)
    assert printed.count(b"/Type /Page\n") == 2
    for sheet in page.query_selector_all(".page"):
        assert CAUTION in " ".join(sheet.inner_text().split())
    assert not seen.console
    assert [u for u in seen.outside if not u.startswith("file:")] == []
    page.close()
