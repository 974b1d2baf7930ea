"""The worksheet as a page to print: plain HTML, no script, nothing loaded, legible in black and white."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from html import escape
from typing import Any

import numpy as np
import xarray as xr

from gasphys.chamber.sheet import LANES, NOT_CONSIDERED, PHASES, clock
from gasphys.constants import ATMOSPHERE
from gasphys.errors import ExposureError
from gasphys.quantities import CAUTION
from gasphys.sources import cite, sources

__all__ = ["worksheet_page", "worksheet_text"]

_STYLE = """
@page { size: A4 portrait; margin: 0; }
* { box-sizing: border-box; }
html { background: #fff; }
body { margin: 0; color: #1a1a1a; font: 7.4pt/1.22 "Liberation Sans", Arial, Helvetica, sans-serif; }
.page { width: 210mm; height: 296.5mm; padding: 9mm 10mm 8mm; display: flex; flex-direction: column;
  page-break-after: always; break-after: page; overflow: hidden; }
.page:last-child { page-break-after: auto; break-after: auto; }
h1 { font-size: 12pt; margin: 0 0 0.6mm; font-weight: 600; }
h2 { font-size: 8pt; margin: 2.2mm 0 0.8mm; border-bottom: 0.3mm solid #1a1a1a; }
.head { display: flex; justify-content: space-between; gap: 6mm; margin-bottom: 1.6mm; }
.head p { margin: 0; }
.head .right { text-align: right; white-space: nowrap; }
.flag { border: 0.6mm solid #1a1a1a; padding: 0.6mm 1.4mm; font-weight: 600; margin-bottom: 1.2mm; }
table { border-collapse: collapse; width: 100%; table-layout: fixed; }
th { text-align: left; font-size: 8pt; border-bottom: 0.5mm solid #7a3b69; padding: 0.4mm 1mm; }
td { vertical-align: top; border-bottom: 0.2mm solid #999; padding: 0.6mm 1mm; overflow-wrap: break-word; }
td.ribbon { position: relative; padding: 0; border-bottom: none; }
td.ribbon svg { position: absolute; inset: 0; width: 100%; height: 100%; }
.when b { font-size: 8.4pt; }
.line { margin-bottom: 0.5mm; }
.line:last-child { margin-bottom: 0; }
.top { display: flex; justify-content: space-between; gap: 1.5mm; align-items: flex-start; }
.box { flex: 0 0 13mm; min-height: 3.8mm; border: 0.3mm solid #1a1a1a; text-align: center; font-weight: 600; }
.attendant .top { display: block; }
.attendant .box { display: block; width: 13mm; }
.outside { font-style: italic; font-size: 6.6pt; }
.dense { font-size: 6.9pt; line-height: 1.16; }
.dense td { padding: 0.35mm 1mm; }
.dense .box { min-height: 3.5mm; }
.tight { font-size: 6.4pt; line-height: 1.12; }
.tight td { padding: 0.2mm 1mm; }
.tight .box { min-height: 3.3mm; }
.tight .line { margin-bottom: 0.2mm; }
.tight .outside { font-size: 6.1pt; }
.dense .box { margin-bottom: 0.4mm; }
.tight .box { margin-bottom: 0.2mm; }
.tight .when b { font-size: 7pt; }
.notes { columns: 2; column-gap: 7mm; }
.notes section { break-inside: avoid; }
.notes h2 { margin-top: 0; }
.notes ul { margin: 0 0 2.4mm; padding-left: 3.4mm; }
.notes li { margin-bottom: 0.5mm; }
.space { flex: 1; border: 0.2mm solid #999; margin-top: 2mm; padding: 0.6mm 1mm; min-height: 8mm; }
.foot { margin-top: auto; padding-top: 1.6mm; font-size: 6.3pt; line-height: 1.18; }
.foot p { margin: 0 0 0.8mm; }
.caution { border-top: 0.5mm solid #7a3b69; padding-top: 0.8mm; font-size: 7pt; font-weight: 600; }
.sign { display: flex; gap: 8mm; margin-top: 5mm; font-size: 7pt; }
.sign div { flex: 1; border-top: 0.3mm solid #1a1a1a; padding-top: 0.5mm; }
@media screen { .page { border-bottom: 1mm dashed #999; } }
"""

_WIDTHS = ("8mm", "31mm", "80mm", "25mm", "46mm")

#: Phases a page holds in the larger type, and in the middle one.
_ROOMY, _DENSE = 8, 13

_HEADS = ("", "time, pressure", "Patient", "Attendant", "Chamber (CO2 surface equivalent)")


def worksheet_page(ds: xr.Dataset) -> str:
    """Return the worksheet as HTML to print.

    Parameters
    ----------
    ds : Dataset
        From :func:`gasphys.chamber.worksheet`.

    Returns
    -------
    str
        A document: the run on the first page (more for long tables), what it rests on on the last.

    Raises
    ------
    ExposureError
        If it is another Dataset.

    Notes
    -----
    A4, black and white. Every text of a user is escaped; nothing is loaded and nothing runs.

    Examples
    --------
    >>> from gasphys.chamber import worksheet
    >>> page = worksheet_page(worksheet("clinical_2_4_atm"))
    >>> page.count('<div class="page">'), page.startswith("<!DOCTYPE html>")
    (2, True)
    """
    if "line_phase" not in ds or "phase" not in ds.dims:
        raise ExposureError("a page needs the Dataset of chamber.worksheet")
    phases = np.arange(ds.sizes["phase"])
    groups = np.array_split(phases, max(1, int(np.ceil(len(phases) / PHASES))))
    total = len(groups) + 1
    pages = [_page(ds, _timeline(ds, group), n, total) for n, group in enumerate(groups, start=1)]
    pages.append(_page(ds, _notes(ds), total, total))
    title = escape(str(ds.attrs["title"]))
    return (
        f'<!DOCTYPE html>\n<html lang="en"><head><meta charset="utf-8"><title>{title}</title>'
        f"<style>{_STYLE}</style></head>\n<body>\n{''.join(pages)}</body></html>\n"
    )


def _page(ds: xr.Dataset, body: str, number: int, total: int) -> str:
    a = ds.attrs
    readings = int(a["readings"])
    state = f"narrowed by {readings} reading{'s' if readings > 1 else ''}" if readings else "before treatment"
    flag = f'<div class="flag">{escape(str(a["flag"]))}</div>' if a.get("flag") else ""
    return (
        f'<div class="page"><div class="head"><div><h1>{escape(str(a["title"]))}</h1>'
        f"<p>patient <b>{escape(str(a['person']))}</b> &nbsp; attendant <b>{escape(str(a['attendant']))}</b> "
        f"&nbsp; {escape(str(a['chamber']))} &nbsp; sheet {state}</p></div>"
        f'<p class="right">page {number} of {total}<br>date ____________ start ________</p></div>'
        f"{flag}{body}{_foot(ds)}</div>\n"
    )


def _foot(ds: xr.Dataset) -> str:
    a = ds.attrs
    keys = [k for k in str(a["references"]).split("; ") if k]
    cited = "; ".join(cite(k) if k in sources() else k for k in keys)
    note = f"; {a['table_note']}" if a.get("table_note") else ""
    return (
        '<div class="foot">'
        f"<p><b>Not considered:</b> {escape('; '.join(NOT_CONSIDERED))}.</p>"
        f"<p><b>Schedule:</b> {escape(str(a['edition']))}; provenance {escape(str(a['provenance']))}"
        f"{escape(note)}. <b>Sources:</b> {escape(cited)}.</p>"
        f'<p class="caution">{escape(CAUTION)}</p>'
        '<div class="sign"><div>physician</div><div>chamber supervisor</div></div></div>'
    )


def _timeline(ds: xr.Dataset, phases: Sequence[int] | Any) -> str:
    most = float(max(ds.start_pressure.max(), ds.end_pressure.max()))
    least = float(min(ds.start_pressure.min(), ds.end_pressure.min()))
    columns = "".join(f'<col style="width:{w}">' for w in _WIDTHS)
    heads = "".join(f"<th>{h}</th>" for h in _HEADS)
    rows = "".join(_row(ds, int(k), least, most) for k in phases)
    head = f"<colgroup>{columns}</colgroup><thead><tr>{heads}</tr></thead>"
    kind = "tight" if len(phases) > _DENSE else "dense" if len(phases) > _ROOMY else "roomy"
    return f'<table class="{kind}">{head}<tbody>{rows}</tbody></table>'


def _row(ds: xr.Dataset, k: int, least: float, most: float) -> str:
    row = ds.isel(phase=k)
    first, last = float(row.start_pressure), float(row.end_pressure)
    x1, x2 = (94.0 - 88.0 * (p - least) / max(most - least, 1e-9) for p in (first, last))
    ribbon = (
        '<svg viewBox="0 0 100 100" preserveAspectRatio="none" aria-hidden="true">'
        f'<polygon points="100,0 {x1:.1f},0 {x2:.1f},100 100,100" fill="#efe4ec"/>'
        f'<polyline points="{x1:.1f},0 {x2:.1f},100" fill="none" stroke="#7a3b69" stroke-width="1.6" '
        'vector-effect="non-scaling-stroke"/></svg>'
    )
    atm = [p / float(ATMOSPHERE) for p in (first, last)]
    steady = abs(first - last) < 1e-6
    pressure = f"{atm[0]:.2f}" if steady else f"{atm[0]:.2f} to {atm[1]:.2f}"
    kilopascals = f"{first:.0f}" if steady else f"{first:.0f} to {last:.0f}"
    when = (
        f'<td class="when"><b>{clock(float(row.phase_start))} to {clock(float(row.phase_end))}</b><br>'
        f"{pressure} atm abs, {kilopascals} kPa<br>{escape(str(row.part.values))}</td>"
    )
    cells = "".join(f'<td class="{lane}">{_cell(ds, k, lane)}</td>' for lane in LANES)
    return f'<tr><td class="ribbon">{ribbon}</td>{when}{cells}</tr>'


def _cell(ds: xr.Dataset, k: int, lane: str) -> str:
    parts = []
    for n in np.flatnonzero((ds.line_phase.values == k) & (ds.lane.values == lane)):
        label, expected, measured, outside = (
            escape(str(ds[c].values[n])) for c in ("label", "expected", "measured", "outside")
        )
        box = f'<span class="box">{measured}</span>' if int(ds.box.values[n]) or measured else ""
        below = f'<div class="outside">{outside}</div>' if outside else ""
        parts.append(
            f'<div class="line"><div class="top"><span>{label} <b>{expected}</b></span>'
            f"{box}</div>{below}</div>"
        )
    return "".join(parts)


def _notes(ds: xr.Dataset) -> str:
    groups: dict[str, list[str]] = {}
    for head, text in zip(ds.note_heading.values, ds.note.values, strict=True):
        if str(head) != "Not considered":  # it stands at the foot of every page
            groups.setdefault(str(head), []).append(str(text))
    found = []
    for head, texts in groups.items():
        items = "".join(f"<li>{escape(t)}</li>" for t in texts)
        found.append(f"<section><h2>{escape(head)}</h2><ul>{items}</ul></section>")
    return f'<div class="notes">{"".join(found)}</div><div class="space">Notes</div>'


def worksheet_text(ds: xr.Dataset) -> str:
    """Return the worksheet in words, for a terminal.

    Parameters
    ----------
    ds : Dataset
        From :func:`gasphys.chamber.worksheet`.

    Returns
    -------
    str
        A block a phase, then what it rests on, then the caution.

    Examples
    --------
    >>> from gasphys.chamber import worksheet
    >>> print(worksheet_text(worksheet("usn_9")).splitlines()[0])
    Worksheet: US Navy Treatment Table 9
    """
    a = ds.attrs
    lines = [str(a["title"]), f"  patient {a['person']}, attendant {a['attendant']}, {a['chamber']}"]
    if a.get("flag"):
        lines += textwrap.wrap(str(a["flag"]).upper(), 100, initial_indent="  ", subsequent_indent="  ")
    for k in range(ds.sizes["phase"]):
        row = ds.isel(phase=k)
        atm = [float(row[c]) / float(ATMOSPHERE) for c in ("start_pressure", "end_pressure")]
        pressure = f"{atm[0]:.2f}" if abs(atm[0] - atm[1]) < 1e-9 else f"{atm[0]:.2f} to {atm[1]:.2f}"
        times = f"{clock(float(row.phase_start))} to {clock(float(row.phase_end))}"
        lines += ["", f"{times}  {pressure} atm abs, {row.part.values}"]
        for lane in LANES:
            for n in np.flatnonzero((ds.line_phase.values == k) & (ds.lane.values == lane)):
                label, expected, measured, outside = (
                    str(ds[c].values[n]) for c in ("label", "expected", "measured", "outside")
                )
                read = f" (read: {measured})" if measured else ""
                note = f"; {outside}" if outside else ""
                text = f"{lane:<10}{label}: {expected}{read}{note}"
                lines += textwrap.wrap(text, 100, initial_indent="  ", subsequent_indent=" " * 14)
    heading = ""
    for head, note in zip(ds.note_heading.values, ds.note.values, strict=True):
        if str(head) != heading:
            heading = str(head)
            lines += ["", heading.upper()]
        lines += textwrap.wrap(str(note), 100, initial_indent="  ", subsequent_indent="    ")
    return "\n".join([*lines, "", *textwrap.wrap(CAUTION, 100)])
