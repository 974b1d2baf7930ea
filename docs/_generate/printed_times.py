"""Printed no-stop times and stops beside what the sets compute, row by row, from what the tests judge."""

from __future__ import annotations

from _generate.markdown import escape, page, table


def pages() -> dict[str, str | bytes]:
    """Return the page of printed and computed times."""
    try:
        from tests.tissues.printed import TABLES
    except ModuleNotFoundError as error:
        raise RuntimeError(
            "the page of printed times is made from tests/tissues/printed.py; build the docs from a checkout "
            "that has the tests"
        ) from error
    parts = [
        "```{caution}\nComparison data, never output of this library. Do not dive by this page. A bare set "
        "is not the table that goes by its name: tables add rounding, margins and rules.\n```",
        "Each row is a printed time, in minutes, beside what the set computes. The last column says what a "
        "test asks of the row, or why it asks nothing. No constant was tuned on these rows, with the one "
        "exception named below. Most prints are from memory and must still be compared.",
    ]
    for title, note, rows in TABLES:
        lines = rows()
        columns: dict[str, list[str]] = {
            "table": [escape(line.table) for line in lines],
            "dive": [line.depth for line in lines],
            "printed": [line.printed for line in lines],
            "computed": [line.ours for line in lines],
            "how": [escape(line.how) for line in lines],
            "what is asked": [escape(line.verdict) for line in lines],
            "print known": [line.known for line in lines],
        }
        for name in ("table", "how"):  # what is the same in every row stands in the note
            if len(set(columns[name])) == 1:
                del columns[name]
        parts += [f"## {title}", note, table(list(columns), zip(*columns.values(), strict=True))]
    return {"printed_times.md": page("Printed and computed times", *parts, anchor="printed-times-page")}
