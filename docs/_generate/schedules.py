"""Treatment schedules: every row with its provenance, and what the rows add up to."""

from __future__ import annotations

from typing import Any

from _generate.markdown import escape, page, source_link, table
from gasphys.doses import oxygen
from gasphys.policy import PROVENANCE, weakest
from gasphys.schedules import treatment
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
        parts.append(_rows(entry["segments"]))
        for word in ("deep", "shallow"):
            key = entry.get(f"extension_{word}")
            if key:
                most = entry[f"most_{word}"]
                parts.append(f"Extension at the {word}er stop (`extensions_{word}`), at most {most}:")
                parts.append(_rows(segments()[key]))
        parts.append(_doses(name))
    return {"schedules.md": page("Schedules, row by row", *parts, anchor="schedule-tables-page")}


def _line(name: str, entry: dict[str, Any]) -> tuple[object, ...]:
    exposure = treatment(name)
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
    if "attendant_stop_minutes" in entry:
        first, more = entry["attendant_stop_minutes"]
        lines.append(
            f"Attendant: oxygen for the last {first} min at {entry['attendant_depth']} fsw ({more} min "
            f"with more than one "
            f"extension) and on the ascent from there ({source_link(entry['attendant_source'])}, "
            f"`{entry['attendant_provenance']}`). More is owed by an attendant who was under pressure in "
            f"the 12 hours before; "
            "that is not computed."
        )
    else:
        lines.append("Attendant: no rule is known for this schedule; the unit's own applies.")
    return "\n\n".join(lines)


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


def _doses(name: str) -> str:
    exposure = treatment(name)
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
        every = [*entry["segments"], *(r for group in extensions for r in group)]
        weak = [r for r in every if r.provenance.startswith("memory")]
        if weak:
            rows.append(
                (
                    f"[`{name}`](#schedule-{name})",
                    f"{len(weak)} of {len(every)}",
                    f"`{weakest([r.provenance for r in weak])}`",
                    escape("; ".join(cite(k) for k in entry["source"])),
                )
            )
    assert all(r[2].strip("`") in PROVENANCE for r in rows)
    return [
        "## Schedules from memory\n\n"
        + table(("schedule", "rows from memory", "weakest", "compare with"), rows)
    ]
