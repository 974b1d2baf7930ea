"""Treatment schedules: every row with its provenance, and what the rows add up to."""

from __future__ import annotations

from typing import Any

from _generate.markdown import escape, page, source_link, table
from gasphys.doses import oxygen
from gasphys.policy import PROVENANCE, validity, weakest
from gasphys.schedules import surface_intervals, treatment
from gasphys.schedules.data import read_rows
from gasphys.schedules.tables import segments, tables
from gasphys.sources import cite


def pages() -> dict[str, str | bytes]:
    """Return the page of schedules."""
    parts = [
        "```{caution}\nThese are transcriptions for study, partly from memory. The manual in force "
        "decides; compare every row with it. Which table to use, and whether to extend it, is the "
        "physician's decision.\n```",
        "How the numbers below are counted stands on the page [Schedules](../schedules.md).",
        table(
            ("name", "schedule", "table minutes", "with descent", "weakest provenance"),
            [_line(name, entry) for name, entry in tables().items()],
        ),
    ]
    for name, entry in tables().items():
        parts.append(f"(schedule-{name})=\n## {entry['title']}")
        parts.append(_facts(name, entry))
        parts.append(_steps(name) if entry.get("steps") else _rows(entry["segments"]))
        variants = entry.get("variants", {})
        if variants:
            parts.append("Variants: " + "; ".join(f"`{k}`, {escape(v)}" for k, v in variants.items()) + ".")
        for word in ("deep", "shallow"):
            key = entry.get(f"extension_{word}")
            if key:
                most = entry[f"most_{word}"]
                parts.append(f"Extension at the {word}er stop (`extensions_{word}`), at most {most}:")
                parts.append(_rows(segments()[key]))
        parts.append(_doses(name))
    parts.append(_clinical())
    return {"schedules.md": page("Schedules, row by row", *parts, anchor="schedule-tables-page")}


def _built(name: str) -> Any:
    with validity("ignore"):
        return treatment(name, unverified=True)


def _line(name: str, entry: dict[str, Any]) -> tuple[object, ...]:
    exposure = _built(name)
    return (
        f"[`{name}`](#schedule-{name})",
        escape(entry["title"]),
        f"{exposure.attrs['table_minutes']:g}",
        f"{exposure.duration:g}",
        f"`{exposure.attrs['provenance']}`",
    )


def _facts(name: str, entry: dict[str, Any]) -> str:
    lines = [
        f"Name: `{name}`. Edition: {escape(entry['edition'])}. Clock: {escape(entry['clock'])}. "
        f"Sources: {'; '.join(source_link(k) for k in entry['source'])}."
    ]
    rows = [r for r in read_rows("attendants.csv") if r["table"] == name]
    if rows:
        lines.append("What an attendant owes before the ascent:")
        lines.append(
            table(
                (
                    *("extensions", "altitude, ft", "earlier exposure", "min", "at, fsw", "on the ascent"),
                    *("edition", "provenance"),
                ),
                [_owed(r) for r in rows],
            )
        )
    else:
        lines.append("Attendant: no oxygen rule is known for this schedule; the unit's own applies.")
    intervals = surface_intervals(name)
    if intervals:
        lines.append("At the surface after tending, at least:")
        lines.append(
            table(
                ("before", "h", "edition", "provenance", "note"),
                [
                    (r["next"], r["hours"], r["edition"], f"`{r['provenance']}`", escape(r["note"]))
                    for r in intervals
                ],
            )
        )
    if "unverified" in entry:
        lines.append(f"**Off unless asked for:** {escape(entry['unverified'])}.")
    return "\n\n".join(lines)


def _owed(row: dict[str, str]) -> tuple[object, ...]:
    span = [row[f"extensions_{w}"] for w in ("from", "to")]
    bottom = f"; bottom time {row['bottom_from']}-{row['bottom_to']} min" if row["bottom_to"] else ""
    earlier = "added: in the previous 12 h" if row["exposed"] == "more" else "none"
    return (
        span[0] if span[0] == span[1] else f"{span[0]}-{span[1]}",
        f"{row['altitude_from']}-{row['altitude_to']}",
        earlier + bottom,
        row["minutes"],
        row["depth"],
        row["ascent"],
        escape(f"{row['edition']}; {row['note']}" if row["note"] else row["edition"]),
        f"`{row['provenance']}`",
    )


def _rows(rows: tuple[Any, ...]) -> str:
    return table(
        ("from", "to", "min", "gas", "part", "note", "provenance"),
        [
            (
                *(f"{v} {r.unit}" if v != "surface" else v for v in (r.start, r.end)),
                f"{r.minutes:g}",
                r.gas,
                r.part,
                escape(r.note),
                f"`{r.provenance}`",
            )
            for r in rows
        ],
    )


def _steps(name: str) -> str:
    bands = [r for r in read_rows("stops.csv") if r["table"] == name]
    text = table(
        ("stops, fsw", "every, fsw", "min each", "provenance"),
        [
            (f"{r['deepest']} to {r['shallowest']}", r["step"], r["minutes"], f"`{r['provenance']}`")
            for r in bands
        ],
    )
    stays = [r for r in read_rows("longest_stays.csv") if r["table"] == name]
    if stays:
        text += "\n\nLongest stay at the start:\n\n" + table(
            ("down to, fsw", "min", "provenance"),
            [(r["depth"], r["minutes"].replace("inf", "no maximum"), f"`{r['provenance']}`") for r in stays],
        )
    return text


def _clinical() -> str:
    rows = [
        (
            escape(r["indication"]),
            escape(r["protocol"]),
            f"`{r['provenance']}`",
            escape(f"{r['source']}; {r['qualified']}" if r["qualified"] else r["source"]),
        )
        for r in read_rows("clinical_protocols.csv")
    ]
    return (
        "(clinical-protocols)=\n## What is given in clinics\n\nA list of what was printed, not a "
        "prescription: consensus conferences grade indications and fix no pressure for each. The unit's "
        "protocol is an input; write it as [sentences](../schedules.md#your-own-protocol).\n\n"
        + table(("indication", "pressure and time", "provenance", "source"), rows)
    )


def _doses(name: str) -> str:
    exposure = _built(name)
    words = {
        "oxygen": "oxygen periods of the table's clock",
        "table": "the table's clock, air breaks too",
        "all": "the whole exposure, descent too",
    }
    rows = [
        (text, f"{float(oxygen(exposure, ['uptd'], count=count).dose[0]):.2f}")
        for count, text in words.items()
    ]
    return "Computed from these rows, exponent 5/6, descent on air:\n\n" + table(("counted", "UPTD"), rows)


def remembered() -> list[str]:
    """Return the section of the provenance page on schedules."""
    rows = []
    for name, entry in tables().items():
        extensions = [segments()[entry[k]] for k in ("extension_deep", "extension_shallow") if k in entry]
        words = [r.provenance for r in (*entry["segments"], *(r for group in extensions for r in group))]
        words += [r["provenance"] for r in read_rows("stops.csv") if r["table"] == name]
        weak = [w for w in words if w.startswith("memory")]
        if weak:
            rows.append(
                (
                    f"[`{name}`](#schedule-{name})",
                    f"{len(weak)} of {len(words)}",
                    f"`{weakest(weak)}`",
                    escape("; ".join(cite(k) for k in entry["source"])),
                )
            )
    assert all(r[2].strip("`") in PROVENANCE for r in rows)
    return [
        "## Schedules from memory\n\n"
        + table(("schedule", "rows from memory", "weakest", "compare with"), rows)
    ]
