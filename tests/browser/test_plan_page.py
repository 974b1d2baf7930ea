"""The printed plan: one page of paper, however many stops."""

from __future__ import annotations

import re
from pathlib import Path

from playwright.sync_api import Browser

from gasphys import Exposure, ascent

GASES = [("nitrox 48", 20.0), ("oxygen", 6.0)]


def test_one_page_of_paper_however_many_stops(browser: Browser, tmp_path: Path) -> None:
    dive = Exposure.start("trimix 17/48").travel(depth=56.0, rate=20.0).stay(19.2)
    bottom = Exposure.start("trimix 12/60").travel(depth=100.0, rate=20.0).stay(35.0)
    rules = ascent.Rules(
        gradient_low=0.2, gradient_high=0.7, breaks=ascent.Breaks(15.0, 5.0, "air", "1.3 bar")
    )
    many = ascent.plan(bottom, [("trimix 25/30", 50.0), *GASES], rules=rules)
    assert many.stops.sizes["stop"] > 20
    for name, plan in {"few": ascent.plan(dive, GASES), "many": many}.items():
        written = tmp_path / f"{name}.html"
        ascent.save_plan(plan, written, "The sound")
        page = browser.new_page()
        page.goto(written.as_uri())
        paper = page.pdf(prefer_css_page_size=True, print_background=True)
        page.close()
        assert len(re.findall(rb"/Type\s*/Page[^s]", paper)) == 1, name
