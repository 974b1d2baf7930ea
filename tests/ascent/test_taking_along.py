"""What one takes along: the list of when to leave, tables in words, CSV, the page to print, pictures."""

from __future__ import annotations

import io
import re
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr

import gasphys as gp
from gasphys import Exposure, ascent, plots
from gasphys.errors import ExposureError, GasphysError, UnitError
from gasphys.quantities import CAUTION

TRIMIX = Exposure.start("trimix 17/48").travel(depth=56.0, rate=20.0).stay(19.2)
GASES = [("nitrox 48", 20.0), ("oxygen", 6.0)]
MODELS = ["buhlmann_1995_c", "workman_1965", "buhlmann_1995_a"]
LOOP = Exposure.start("air").loop("1.3 bar", "trimix 10/60").travel(depth=56.0, minutes=3.0).stay(30.0)
#: Words that the outputs never print, besides three-letter short forms.
NEVER = re.compile(r"runtime|conservatism|\bsafe\b|\b(TTS|NDL|RMV|SAC|GF)\b", re.IGNORECASE)


@pytest.fixture(scope="module")
def found() -> ascent.Comparison:
    return ascent.compare_ascents(TRIMIX, GASES, MODELS)


# -- Words ------------------------------------------------------------------------------------------


def test_the_list_of_when_to_leave(found: ascent.Comparison) -> None:
    plan = found.followed()
    lines = ascent.leave_at_list(plan).splitlines()
    assert lines[0].startswith("ascent by buhlmann_1995_c")
    assert lines[-1] == CAUTION
    shape = re.compile(
        r"wait at (\S+) msw, leave at (\S+) min elapsed; (\S+)-min half-time in control; (.+?); "
        r"one step up is allowed from (\S+)"
    )
    rows = [shape.fullmatch(line) for line in lines[1:-2]]
    assert all(rows)
    stops = plan.stops
    for k, row in enumerate(rows):
        assert row is not None
        assert float(row[1]) == float(stops.depth[k])
        # Instants are rounded up to a tenth, never down.
        assert 0.0 <= float(row[2]) - float(stops.leave_time[k]) < 0.1 + 1e-9
        assert float(row[3]) == float(stops.controlling_half_time[k])
        assert row[4] == str(stops.gas.values[k])
        assert float(row[5]) <= float(row[2])
    assert lines[-2].startswith("surface at 50.3 min elapsed; ascent 28.2 min")
    assert str(plan) == ascent.leave_at_list(plan)
    assert not NEVER.search(str(plan))


def test_breaks_are_in_the_list() -> None:
    rules = ascent.Rules(breaks=ascent.Breaks(6.0, 3.0, "air", "1.3 bar"))
    plan = ascent.plan(TRIMIX, GASES, rules=rules)
    text = ascent.leave_at_list(plan)
    pauses = re.findall(r"break: air from (\S+) to (\S+);", text)
    assert pauses
    for begin, end in pauses:
        assert float(end) - float(begin) <= 3.0 + 0.11
    names = [plan.exposure.gas_name(k) for k in range(len(plan.exposure.part))]
    assert len(pauses) == names.count("air")


def test_one_scenario_only() -> None:
    depth = xr.DataArray([50.0, 56.0], dims="d", attrs={"units": "msw"})
    plan = ascent.plan(Exposure.start("air").travel(depth=depth, rate=20.0).stay(15.0))
    assert str(plan) == repr(plan)
    for ask in (ascent.leave_at_list, ascent.plan_csv, ascent.ascent_sheet):
        with pytest.raises(ExposureError, match="one scenario"):
            ask(plan)


def test_the_comparison_in_words(found: ascent.Comparison) -> None:
    text = ascent.comparison_text(found)
    assert str(found) == text
    for name, plan in found.plans.items():
        assert re.search(rf"{name} +{plan.ascent_time:.1f}".removesuffix(".0"), text)
    assert "Minutes since leaving the bottom by which each depth is left" in text
    assert "Judged by each model's own published limit" in text
    assert "not comparable in risk" in text
    assert text.splitlines()[-1] == CAUTION
    assert not NEVER.search(text)
    cell = found.judgment.sel(ascent="workman_1965", model="buhlmann_1995_c")
    row = next(
        line for line in text.splitlines() if re.match(r" +workman_1965 +\S+ min, ", line) and "," in line
    )
    assert f"{float(cell.minutes_beyond):.1f} min, {float(cell.worst_ratio):.3f}" in text
    assert row


# -- CSV --------------------------------------------------------------------------------------------


@pytest.mark.parametrize("unit", ["msw", "fsw", "m"])
def test_csv_reads_back_as_the_same_exposure(unit: str) -> None:
    depth = {"msw": 50.0, "fsw": 165.0, "m": 49.0}[unit]
    bottom = Exposure.start("trimix 17/48", depth_unit=unit).travel(depth=depth, minutes=3.0).stay(20.0)
    gases = [("nitrox 48", {"msw": 20.0, "fsw": 66.0, "m": 20.0}[unit])]
    plan = ascent.plan(bottom, gases)
    back = Exposure.from_csv(io.StringIO(ascent.plan_csv(plan, "one, two\nthree")))
    one, two = plan.exposure.pieces(), back.pieces()
    assert back.duration == pytest.approx(plan.total_time, abs=1e-3)
    times = np.linspace(0.0, min(plan.total_time, back.duration) - 1e-3, 200)
    a, b = (e.to_dataset(at=times).ambient_pressure.sel(time=times).values for e in (plan.exposure, back))
    np.testing.assert_allclose(a, b, rtol=0.0, atol=0.05)
    real = one.duration > 0.0
    assert one.fractions["O2"][real].tolist() == pytest.approx(two.fractions["O2"].tolist(), abs=1e-9)


def test_csv_of_a_loop_reads_back() -> None:
    with gp.validity("ignore"):
        plan = ascent.plan(LOOP)
        back = Exposure.from_csv(io.StringIO(ascent.plan_csv(plan)))
    assert set(back.columns["setpoint"].tolist()) == {130.0}
    assert back.duration == pytest.approx(plan.total_time, abs=1e-3)


def test_csv_says_what_it_is(found: ascent.Comparison) -> None:
    text = ascent.plan_csv(found.followed(), "Monday\n12,13")
    lines = text.splitlines()
    assert lines[0] == "# Monday 12,13"
    for words in (
        found.followed().model.edition,
        found.followed().model.digest,
        f"gasphys {gp.__version__}",
        "bottom: 56 msw on trimix 17/48, left at 22 min",
        "Tissues at the start: saturated",
        "Weakest provenance",
        CAUTION,
    ):
        assert any(words in line for line in lines if line.startswith("#")), words
    reasons = [line.rpartition(",")[2] for line in lines if ",leave: " in line]
    assert len(reasons) == found.followed().stops.sizes["stop"]


# -- The page to print ------------------------------------------------------------------------------


class _Page(HTMLParser):
    def __init__(self) -> None:
        super().__init__()
        self.tags: list[str] = []
        self.words: list[str] = []

    def handle_starttag(self, tag: str, attrs: Any) -> None:
        self.tags.append(tag)
        assert not [name for name, _ in attrs if name.startswith("on") or name in ("src", "href")]

    def handle_data(self, data: str) -> None:
        self.words.append(data)


def _read(text: str) -> _Page:
    page = _Page()
    page.feed(text)
    return page


def test_the_page_carries_what_it_must(found: ascent.Comparison) -> None:
    page = _read(found.sheet("workman_1965", "The sound, Monday"))
    text = " ".join(" ".join(page.words).split())
    plan = found.followed("workman_1965")
    for words in (
        "The sound, Monday",
        CAUTION,
        plan.model.edition,
        plan.model.digest,
        f"gasphys {gp.__version__}",
        "56 msw on trimix 17/48, left at 22 min",
        "every 3 msw, the last at 3 msw, whole minutes",
        "Tissues at the start",
        "Not considered: bubbles, work, cold",
        "buhlmann_1995_c 28.2 min",
    ):
        assert words in text, words
    assert page.tags.count("tr") == plan.stops.sizes["stop"] + 2
    assert not NEVER.search(text)


def test_gradients_come_with_the_evidence_against_them() -> None:
    plan = ascent.plan(TRIMIX, GASES, rules=ascent.Rules(gradient_low=0.5, gradient_high=0.9))
    assert "No trial supports gradients" in ascent.ascent_sheet(plan)
    assert "No trial supports gradients" not in ascent.ascent_sheet(ascent.plan(TRIMIX, GASES))


def test_words_of_the_user_are_plain_text(found: ascent.Comparison) -> None:
    evil = '</title><script>alert(1)</script><img src=x onerror="alert(2)">&amp;'
    page = _read(found.sheet(None, evil))
    assert not {"script", "img", "link", "iframe"} & set(page.tags)
    assert evil in "".join(page.words)
    plan = ascent.plan(gp.Exposure.join([TRIMIX]), GASES)
    noted = _read(ascent.ascent_sheet(_with_history(plan, evil)))
    assert not {"script", "img"} & set(noted.tags)
    assert evil in "".join(noted.words)


def _with_history(plan: ascent.Plan, text: str) -> ascent.Plan:
    from dataclasses import replace

    return replace(plan, exposure=replace(plan.exposure, history=(text, *plan.exposure.history)))


def test_saving(tmp_path: Path, found: ascent.Comparison) -> None:
    plan = found.followed()
    ascent.save_plan(plan, tmp_path / "a.csv", "x")
    assert (tmp_path / "a.csv").read_text(encoding="utf-8") == ascent.plan_csv(plan, "x")
    with pytest.raises(GasphysError, match=r"as \.csv or \.html, not '\.pdf'"):
        ascent.save_plan(plan, tmp_path / "a.pdf")
    with pytest.raises(GasphysError, match="No such file"):
        ascent.save_plan(plan, tmp_path / "nowhere" / "a.csv")


# -- Pictures ---------------------------------------------------------------------------------------


def _words(figure: Any) -> str:
    return " ".join(" ".join(t.get_text() for t in figure.findobj(lambda a: hasattr(a, "get_text"))).split())


def test_ascents_are_rising_lines_through_their_stops(found: ascent.Comparison) -> None:
    ds = found.to_dataset(judged=False)
    figure = plots.ascents_figure(ds)
    (axes,) = figure.axes
    lines = [line for line in axes.get_lines() if len(line.get_xdata()) > 2]
    assert len(lines) == 3
    for line, plan in zip(lines, found.plans.values(), strict=True):
        depth, minutes = line.get_xdata(), line.get_ydata()
        real = ~np.isnan(depth)
        assert (np.diff(minutes[real]) >= 0.0).all()
        assert (np.diff(depth[real]) <= 0.0).all()
        assert minutes[real][-1] == pytest.approx(plan.ascent_time)
        for k in range(plan.stops.sizes["stop"]):
            there = minutes[real][depth[real] == float(plan.stops.depth[k])]
            assert there[-1] - there[0] == pytest.approx(float(plan.stops.duration[k]))
    left, right = axes.get_xlim()
    assert left > right  # the bottom stands left
    words = _words(figure)
    assert CAUTION in words
    for name, plan in found.plans.items():
        assert f"{name}, {plan.ascent_time:.0f} min" in words
    assert "They part most at 3 msw: 2.0 min" in words
    assert not NEVER.search(words)


def test_names_stand_apart_and_inside(found: ascent.Comparison) -> None:
    figure = plots.ascents_figure(found.to_dataset(judged=False))
    from matplotlib.backends.backend_agg import FigureCanvasAgg

    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    width, height = canvas.get_width_height()
    labels = [t for t in figure.axes[0].texts if t.get_text()]
    boxes = [t.get_window_extent() for t in labels]
    assert len(boxes) == 3
    for box in boxes:
        assert min(box.x0, box.y0) >= 0.0
        assert box.x1 <= width
        assert box.y1 <= height
    for k, one in enumerate(boxes):
        assert not any(one.overlaps(other) for other in boxes[k + 1 :])


def test_control_path_shows_every_model_and_its_caveat(found: ascent.Comparison) -> None:
    ds = found.control("workman_1965")
    figure = plots.control_path_figure(ds)
    top, below = figure.axes
    assert top.get_yscale() == "log"
    words = _words(figure)
    assert CAUTION in words
    assert "following the ascent of workman_1965" in words
    assert "Shares of different models are not comparable in risk" in words
    for name in MODELS:
        assert name in words
    waits = [line for line in below.get_lines() if len(line.get_xdata()) == ds.sizes["time"]]
    for line, name in zip(waits, MODELS, strict=True):
        np.testing.assert_array_equal(line.get_ydata(), ds.wait.sel(model=name).values)
    # The stroke is as wide as the share in use: the widest belongs to the largest share.
    widths = [line.get_linewidth() for line in top.get_lines()]
    assert max(widths) > 4.0


def test_other_datasets_are_refused(found: ascent.Comparison) -> None:
    for draw in (plots.ascents_figure, plots.control_path_figure):
        with pytest.raises(ExposureError):
            draw(found.judgment)


# -- What is read -----------------------------------------------------------------------------------


def test_gases_in_words() -> None:
    from gasphys.ascent.reading import breaks_from_text, gas_from_text, rate_from_text

    assert gas_from_text("nitrox 48@20")[1] == "20"
    assert gas_from_text("Oxygen From 1.6 bar")[1] == "1.6 bar"
    loop, depth = gas_from_text("loop 1.3 bar on trimix 10/60 from 56 msw")
    assert (str(loop), depth) == ("loop at 130 kPa, diluent trimix 10/60", "56 msw")
    assert breaks_from_text("5 min on air every 20 min from 1.4 bar") == ascent.Breaks(
        20.0, 5.0, "air", 140.0
    )
    assert rate_from_text("9, 3 above 6") == {6.0: 9.0, 0.0: 3.0}
    for read, text in (
        (gas_from_text, "nitrox 48"),
        (gas_from_text, "@20"),
        (gas_from_text, "nitrox 48 from deep"),
        (breaks_from_text, "air every now and then"),
        (breaks_from_text, "x min on air every 20 min from 1.4 bar"),
        (rate_from_text, "fast"),
        (rate_from_text, "9, 3"),
        (rate_from_text, "nan"),
    ):
        with pytest.raises(UnitError):
            read(text)


def test_a_log_is_cut_where_it_leaves_its_bottom() -> None:
    from gasphys.ascent.reading import until_leaving

    log = (
        TRIMIX.travel(depth=55.3, rate=20.0)
        .stay(2.0)
        .travel(depth=21.0, rate=9.0)
        .switch("nitrox 48")
        .stay(1.0)
        .travel(depth=6.0, rate=9.0)
        .switch("oxygen")
        .stay(5.0)
        .travel(depth=0.0, rate=9.0)
    )
    bottom, gases = until_leaving(log)
    assert bottom.duration == pytest.approx(TRIMIX.duration + 0.7 / 20.0 + 2.0)
    assert [(str(g), d) for g, d in gases] == [("nitrox 48", 21.0), ("oxygen", 6.0)]
    early, same = until_leaving(log, 10.0)
    assert early.duration == pytest.approx(10.0)
    assert early.pressure == pytest.approx(661.325)
    assert [str(g) for g, _ in same] == ["nitrox 48", "oxygen"]
    for wrong in (-1.0, 1e6, float("nan")):
        with pytest.raises(ExposureError, match="the ascent cannot begin at"):
            until_leaving(log, wrong)
    with pytest.raises(GasphysError, match="at the surface"):
        until_leaving(log, log.duration)
