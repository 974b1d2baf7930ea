"""The worksheet of a treatment as a figure: the run on the left, what it rests on on the right."""

from __future__ import annotations

import textwrap
from typing import Any

import numpy as np
import xarray as xr

from gasphys.chamber.sheet import LANES, NOT_CONSIDERED, clock
from gasphys.constants import ATMOSPHERE
from gasphys.errors import ExposureError
from gasphys.plots.style import ACCENT, INK, PALE, caution_line, new_figure

__all__ = ["worksheet_figure"]

#: Left edges and widths in characters of the columns of the run.
_COLUMNS = {"when": (0.045, 24), "patient": (0.215, 58), "attendant": (0.60, 20), "chamber": (0.745, 34)}


def worksheet_figure(ds: xr.Dataset) -> Any:
    """Draw a worksheet: two pages side by side.

    Parameters
    ----------
    ds : Dataset
        From :func:`gasphys.chamber.worksheet`.

    Returns
    -------
    matplotlib.figure.Figure
        The figure.

    Raises
    ------
    ExposureError
        If it is another Dataset.

    Notes
    -----
    For a screen or a record. To write on, print :func:`gasphys.chamber.worksheet_page`.

    Examples
    --------
    >>> from gasphys.chamber import worksheet
    >>> len(worksheet_figure(worksheet("clinical_2_4_atm")).axes)
    2
    """
    if "line_phase" not in ds or "phase" not in ds.dims:
        raise ExposureError("the figure of a worksheet needs the Dataset of chamber.worksheet")
    figure = new_figure(16.5, 11.7)
    left, right = figure.subplots(1, 2)
    for axes in (left, right):
        axes.set_xlim(-0.02, 1.02)
        axes.set_ylim(1.0, -0.02)
        axes.axis("off")
    _run(left, ds)
    _rest(right, ds)
    caution_line(figure)
    return figure


def _run(axes: Any, ds: xr.Dataset) -> None:
    state = f"narrowed by {ds.attrs['readings']} readings" if ds.attrs["readings"] else "before treatment"
    axes.text(0.0, 0.0, str(ds.attrs["title"]), fontsize=12, weight="bold", va="top", color=INK)
    people = f"patient {ds.attrs['person']}, attendant {ds.attrs['attendant']}"
    who = f"{people}, {ds.attrs['chamber']}, sheet {state}"
    axes.text(0.0, 0.022, who, fontsize=8, va="top", color=INK)
    if ds.attrs.get("flag"):
        axes.text(0.0, 0.036, str(ds.attrs["flag"]), fontsize=8, va="top", weight="bold", color=INK)
    rows = [_texts(ds, k) for k in range(ds.sizes["phase"])]
    heights = [max(len(lines) for lines in row.values()) + 0.6 for row in rows]
    step = min(0.94 / (sum(heights) + 2.0), 0.0125)
    size = min(7.2, step * 620.0)
    top = 0.055
    for name, (x, _) in _COLUMNS.items():
        head = "time, pressure" if name == "when" else name.capitalize()
        axes.text(x, top, head, fontsize=8, weight="bold", va="top", color=INK)
    y = top + 0.016
    axes.plot([0.0, 1.0], [y, y], color=ACCENT, linewidth=1.2)
    most, least = float(ds.start_pressure.max()), float(ds.end_pressure.min())
    for k, (row, height) in enumerate(zip(rows, heights, strict=True)):
        below = y + height * step
        ends = [float(ds[c].values[k]) for c in ("start_pressure", "end_pressure")]
        edge = [0.036 - 0.034 * (p - least) / max(most - least, 1e-9) for p in ends]
        axes.fill_betweenx([y, below], edge, [0.036, 0.036], color=PALE, linewidth=0)
        axes.plot(edge, [y, below], color=ACCENT, linewidth=1.4)
        for name, lines in row.items():
            for n, (text, strong) in enumerate(lines):
                weight, style = ("bold", "normal") if strong == "b" else ("normal", strong or "normal")
                how = {"fontsize": size, "va": "top", "weight": weight, "style": style, "color": INK}
                axes.text(_COLUMNS[name][0], y + (n + 0.35) * step, text, **how)
        axes.plot([0.04, 1.0], [below, below], color="#999999", linewidth=0.5)
        y = below


def _texts(ds: xr.Dataset, k: int) -> dict[str, list[tuple[str, str]]]:
    """Wrapped lines of each column of a phase, with how they are set."""
    row = ds.isel(phase=k)
    atm = [float(row[c]) / float(ATMOSPHERE) for c in ("start_pressure", "end_pressure")]
    pressure = f"{atm[0]:.2f}" if abs(atm[0] - atm[1]) < 1e-9 else f"{atm[0]:.2f} to {atm[1]:.2f}"
    found: dict[str, list[tuple[str, str]]] = {
        "when": [
            (f"{clock(float(row.phase_start))} to {clock(float(row.phase_end))}", "b"),
            (f"{pressure} atm abs", ""),
            *((t, "") for t in textwrap.wrap(str(row.part.values), _COLUMNS["when"][1])),
        ]
    }
    for lane in LANES:
        lines: list[tuple[str, str]] = []
        width = _COLUMNS[lane][1]
        for n in np.flatnonzero((ds.line_phase.values == k) & (ds.lane.values == lane)):
            measured = str(ds.measured.values[n])
            box = f" [{measured or '______'}]" if ds.box.values[n] or measured else ""
            text = f"{ds.label.values[n]} {ds.expected.values[n]}{box}"
            lines += [(t, "") for t in textwrap.wrap(text, width)]
            lines += [(t, "italic") for t in textwrap.wrap(str(ds.outside.values[n]), int(width * 1.08))]
        found[lane] = lines
    return found


def _rest(axes: Any, ds: xr.Dataset) -> None:
    lines: list[tuple[str, str]] = []
    heading = ""
    for head, text in zip(ds.note_heading.values, ds.note.values, strict=True):
        if str(head) == "Not considered":
            continue
        if head != heading:
            lines += [("", ""), (str(head), "b")]
            heading = head
        lines += [(t, "") for t in textwrap.wrap(f"- {text}", 118, subsequent_indent="  ")]
    lines += [("", ""), ("Not considered", "b")]
    lines += [(t, "") for t in textwrap.wrap("; ".join(NOT_CONSIDERED), 118)]
    schedule = f"{ds.attrs['edition']}; provenance {ds.attrs['provenance']}; {ds.attrs['table_note']}"
    lines += [("", ""), ("Schedule", "b"), *((t, "") for t in textwrap.wrap(schedule, 118))]
    step = min(0.97 / len(lines), 0.0145)
    for n, (text, weight) in enumerate(lines):
        strong = "bold" if weight else "normal"
        axes.text(0.02, n * step, text, fontsize=7.6, va="top", color=INK, weight=strong)
