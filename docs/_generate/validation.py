"""Published numbers beside ours, from the rows the tests run on, and one picture of the deviations."""

from __future__ import annotations

from collections import Counter
from typing import Any

from matplotlib.figure import Figure

from _generate.markdown import escape, link, page, svg, table
from gasphys.plots.style import ACCENT
from gasphys.registry import equations

TITLES = {
    "common_practice.csv": "Facts of the trade",
    "misprints.csv": "Printed numbers that are wrong",
}


def _rows() -> list[dict[str, Any]]:
    try:
        from tests.published.table import table as published
    except ModuleNotFoundError as error:
        raise RuntimeError(
            "the validation page is made from tests/published/table.py; build the docs from a checkout "
            "that has the tests"
        ) from error
    return published()


def pages() -> dict[str, str | bytes]:
    """Return the validation page and its picture."""
    rows = _rows()
    values = [r for r in rows if r["kind"] == "value"]
    files: dict[str, list[dict[str, Any]]] = {}
    for row in rows:
        files.setdefault(row["file"], []).append(row)
    misprints = files.pop("misprints.csv", [])
    count = Counter(r["provenance"] for r in values)
    parts = [
        "Each row is a printed number, the call that should give it, and what the call gives. A row agrees "
        "when the difference is at most half a unit of the last printed digit, or the tolerance stated. "
        "The same rows run as tests.",
        "What a row is worth depends on its provenance. *computed* rows are arithmetic on a stated "
        "formula: they show that the formula is typed right, not that it describes a body. *memory* rows "
        "must still be compared with the print. Only *read* and *secondary* rows are numbers somebody else "
        "published and we saw.",
        table(("provenance of the row", "rows"), [(f"`{word}`", n) for word, n in sorted(count.items())]),
        _verdict(values),
        "![Deviation of every row as a share of what is allowed](validation.svg)",
        "The picture shows each row's deviation as a share of the allowed one. A ring is computed from a "
        "formula, a disk is a number read in a source or seen quoted, a cross is from memory, a bar is "
        "common practice.",
    ]
    for name, group in files.items():
        parts.append(f"## {TITLES.get(name, name.removesuffix('.csv').replace('_', ' ').capitalize())}")
        parts.append(_table(group))
    if misprints:
        parts.append(f"## {TITLES['misprints.csv']}")
        parts.append(
            "These stand in print and are not reproduced. A test checks that we *differ* from each, so "
            "that nobody repairs the code to match them."
        )
        parts.append(_table(misprints))
    return {
        "validation.md": page("Validation", *parts, anchor="validation-page"),
        "validation.svg": _picture(files),
    }


def _verdict(values: list[dict[str, Any]]) -> str:
    missed = [escape(r["id"]) for r in values if not r["agrees"]]
    if not missed:
        return f"{len(values)} rows, all agree."
    return f"**{len(missed)} of {len(values)} rows do not agree**: {', '.join(missed)}."


def _table(rows: list[dict[str, Any]]) -> str:
    known = equations()
    return table(
        ("equation and inputs", "printed", "ours", "share of allowed", "source"),
        [
            (
                f"{link(r['equation']) if r['equation'] in known else '`' + r['equation'] + '`'} "
                f"{escape(r['inputs'])}",
                f"{r['expected']} {'' if r['unit'] == '1' else r['unit']}",
                f"{r['ours']:.7g}",
                f"{_share(r):.2f}",
                escape("; ".join(v for v in (r["source"], r["page_or_equation"], r["note"]) if v))
                + f" `{r['provenance']}`",
            )
            for r in rows
        ],
    )


def _share(row: dict[str, Any]) -> float:
    """Return the deviation as a share of the allowed one."""
    return row["deviation"] / row["allowed"] if row["allowed"] else 0.0


def _mark(provenance: str) -> dict[str, Any]:
    if provenance == "computed":
        return {"marker": "o", "facecolors": "none", "edgecolors": ACCENT}
    if provenance in ("read", "secondary"):
        return {"marker": "o", "color": ACCENT}
    if provenance == "common_practice":
        return {"marker": "|", "color": "black"}
    return {"marker": "x", "color": "black"}


def _picture(files: dict[str, list[dict[str, Any]]]) -> bytes:
    labels = [TITLES.get(name, name.removesuffix(".csv").replace("_", " ")) for name in files]
    figure = Figure(figsize=(8.0, 0.6 + 0.36 * len(files)), layout="constrained")
    axes = figure.add_subplot()
    for y, rows in enumerate(files.values()):
        for k, r in enumerate(rows):
            # Spread the rows of a file over its band so that equal deviations stay visible.
            height = y - 0.32 + 0.64 * (k + 0.5) / len(rows)
            axes.scatter(_share(r), height, s=22, linewidths=1.0, **_mark(r["provenance"]))
    for edge in (-1.0, 1.0):
        axes.axvline(edge, color="black", linewidth=1.0, linestyle="--")
    axes.axvline(0.0, color="0.7", linewidth=0.8)
    axes.set_yticks(range(len(files)), labels)
    axes.set_ylim(len(files) - 0.5, -0.5)
    axes.set_xlim(-1.15, 1.15)
    axes.set_xlabel("deviation / allowed deviation [1]")
    axes.spines[["top", "right", "left"]].set_visible(False)
    axes.tick_params(left=False)
    return svg(figure)
