"""One page to print: an ascent as a list of when to leave, what it was made from, what speaks against it."""

from __future__ import annotations

import html
from typing import TYPE_CHECKING

from gasphys.ascent.planner import Plan
from gasphys.ascent.texts import _elapsed, _up, assumptions, inputs, stops_of
from gasphys.quantities import CAUTION
from gasphys.sources import cite, sources

if TYPE_CHECKING:
    from gasphys.ascent.comparing import Comparison

__all__ = ["ascent_sheet"]

_STYLE = """
@page { size: A4; margin: 12mm 14mm; }
* { box-sizing: border-box; }
body { font: 10pt/1.32 "DejaVu Sans", "Liberation Sans", Arial, sans-serif; color: #1a1a1a; background: white;
       margin: 0 auto; max-width: 186mm; }
h1 { font-size: 15pt; margin: 0 0 1mm; overflow-wrap: anywhere; }
h2 { font-size: 10.5pt; margin: 4mm 0 1mm; }
p { margin: 0 0 1.5mm; }
.caution { border: 1.2pt solid #7a3b69; padding: 1.5mm 2.5mm; margin: 2mm 0 3mm; font-weight: 600; }
table { border-collapse: collapse; width: 100%; }
th, td { text-align: left; padding: 0.9mm 2mm; border-bottom: 0.5pt solid #888; vertical-align: top; }
th { border-bottom: 1.2pt solid #1a1a1a; font-size: 9pt; }
td.number { text-align: right; font-variant-numeric: tabular-nums; white-space: nowrap; }
th.number { text-align: right; }
td.why { white-space: nowrap; }
td.leave { font-weight: 700; font-size: 11.5pt; }
td.box { border: 0.8pt solid #1a1a1a; width: 22mm; }
dl { display: grid; grid-template-columns: 34mm 1fr; margin: 0; font-size: 9pt; row-gap: 0.4mm; }
dt { color: #444; } dd { margin: 0; overflow-wrap: anywhere; }
.small { font-size: 8pt; }
.many td, .many th { padding: 0.15mm 2mm; font-size: 7.5pt; line-height: 1.12; }
.many td.leave { font-size: 8pt; }
.many ~ h2 { margin-top: 2mm; } .many ~ dl { font-size: 7.5pt; line-height: 1.15; }
.many ~ .small { font-size: 7pt; line-height: 1.15; margin-bottom: 0.5mm; }
@media screen { body { padding: 8mm 0; } }
@media print { tr, .caution { break-inside: avoid; } }
"""

#: From this many stops on the rows are set close, so that one page holds them.
_CLOSE = 13


def ascent_sheet(plan: Plan, title: str = "", compared: Comparison | None = None) -> str:
    """Return an ascent as one HTML page with a style for printing on A4.

    Parameters
    ----------
    plan : Plan
        One scenario.
    title : str
        Words for the top; plain text.
    compared : Comparison, optional
        How long other models' ascents are from the same bottom.

    Returns
    -------
    str
        HTML that needs no other file.

    Raises
    ------
    ExposureError
        If the plan holds several scenarios.

    Examples
    --------
    >>> from gasphys import Exposure, ascent
    >>> found = ascent.plan(Exposure.start("air").travel(depth=40, rate=20).stay(20))
    >>> "&lt;b&gt;" in ascent_sheet(found, "<b>")
    True
    """
    e, unit, model = html.escape, plan.exposure.depth_unit, plan.model
    stops = stops_of(plan)
    rows = []
    for stop in stops:
        more = f"<br>breaks: {e('; '.join(stop.breaks))}" if stop.breaks else ""
        rows.append(
            f'<tr><td class="number">{stop.depth:g}</td>'
            f'<td class="number leave">{_elapsed(_up(stop.leave))}</td>'
            f'<td class="number">{_elapsed(stop.minutes)}</td><td>{e(stop.gas)}{more}</td>'
            f'<td class="why">{e(stop.control.removesuffix(" in control"))}</td>'
            f'<td class="number">{_elapsed(_up(stop.allowed))}</td>'
            '<td class="box"></td></tr>'
        )
    rows.append(
        f'<tr><td>surface</td><td class="number leave">{_elapsed(_up(plan.total_time))}</td>'
        "<td></td><td></td>"
        f'<td class="why">ascent {_elapsed(plan.ascent_time)} min</td><td></td><td class="box"></td></tr>'
    )
    numbered = 'class="number"'
    head = "".join(
        f"<th {numbered if wide else ''}>{e(text)}</th>"
        for text, wide in (
            (f"wait at, {unit}", True),
            ("leave at, min elapsed", True),
            ("minutes", True),
            ("gas", False),
            ("in control", False),
            ("one step up allowed from", True),
            ("left at", False),
        )
    )
    facts = {**inputs(plan), "model": f"{model.name}: {model.title}; edition {model.edition}"}
    if model.variant:
        facts["variant"] = model.variant
    facts["source"] = cite(model.source) if model.source in sources() else model.source
    facts["made by"] = str(plan.stops.attrs["source"])
    history = [text for text in plan.exposure.history if not text.startswith("ascent planned by")]
    if history:
        facts["about the record"] = "; ".join(history[:4]) + (
            f"; and {len(history) - 4} more" if len(history) > 4 else ""
        )
    parts = [
        f"<h1>{e(title or 'Ascent')}</h1>",
        f'<p class="caution">{e(CAUTION)}</p>',
        f'<table class="{"many" if len(stops) >= _CLOSE else "few"}"><thead><tr>{head}</tr></thead>'
        f"<tbody>{''.join(rows)}</tbody></table>",
        *(_others(plan, compared) if compared is not None else []),
        "<h2>Made from</h2>",
        "<dl>" + "".join(f"<dt>{e(k)}</dt><dd>{e(v)}</dd>" for k, v in facts.items()) + "</dl>",
        "<h2>Assumed, and what speaks against it</h2>",
        *(f'<p class="small">{e(text)}</p>' for text in assumptions(plan)),
    ]
    return (
        '<!doctype html>\n<html lang="en"><head><meta charset="utf-8">'
        f"<title>{e(title or 'Ascent')}</title><style>{_STYLE}</style></head>\n<body>\n"
        + "\n".join(parts)
        + "\n</body></html>\n"
    )


def _others(plan: Plan, compared: Comparison) -> list[str]:
    """Return how long the ascents of other models are, as one sentence."""
    times = [
        f"{html.escape(name)} {_elapsed(one.ascent_time)} min"
        for name, one in compared.plans.items()
        if name != plan.model.name
    ]
    if not times:
        return []
    return [f'<p class="small">The same bottom by other models: {", ".join(times)}.</p>']
