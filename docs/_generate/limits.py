"""Limits by quantity: authority, edition, for whom, provenance."""

from __future__ import annotations

from _generate.markdown import escape, page, quantity_link, source_link, table
from gasphys.limits import Limit, load
from gasphys.policy import PROVENANCE
from gasphys.quantities import quantity
from gasphys.sources import cite


def pages() -> dict[str, str | bytes]:
    """Return the page of limits."""
    groups: dict[str, list[Limit]] = {}
    for limit in load():
        groups.setdefault(limit.quantity, []).append(limit)
    parts = [
        "```{caution}\nA limit is an agreement of its authority for the people and conditions it names. A "
        "value within it is not thereby harmless. Authorities disagree; all of them are shown.\n```",
        "A review compares an exposure with each of these that fits the role. A site's own limits are "
        "listed before them and can only add: see [A site's file](#limits-site).",
    ]
    for name, limits in groups.items():
        q = quantity(name)
        parts.append(
            f"## {q.long_name[0].upper()}{q.long_name[1:]}\n\n{quantity_link(name)}. {escape(q.meaning)}"
        )
        parts.append(
            table(
                ("limit", "value", "whose, when it holds", "for", "source"),
                [
                    (
                        f"[`{limit.id}`]{{#limit-{limit.id}}} {escape(limit.title)}",
                        _value(limit),
                        escape(f"{limit.authority}, {limit.edition}. {limit.conditions}"),
                        ", ".join(limit.roles),
                        f"{source_link(limit.source)} `{limit.provenance}`",
                    )
                    for limit in sorted(limits, key=lambda limit: limit.value)
                ],
            )
        )
    parts.append(_site())
    return {"limits.md": page("Limits", *parts, anchor="limits-page")}


def _value(limit: Limit) -> str:
    sign = {"<=": "at most", ">=": "at least"}[limit.comparison]
    q = quantity(limit.quantity)
    published = f"{limit.published_value:g} {'' if limit.unit == '1' else limit.unit}".strip()
    if limit.unit == q.unit:
        return f"{sign} {published}"
    return f"{sign} {published} ({limit.value:.5g} {'' if q.unit == '1' else q.unit})".replace(" )", ")")


def _site() -> str:
    return """(limits-site)=
## A site's file

A text file in TOML, one table for each limit, every field below required. `source` may be any words
there. `per_day = true` makes it an allowance for a day: an exposure that lasts longer is not judged by it.

```text
[[limit]]
id = "unit_po2"
title = "Highest PO2 of this unit"
quantity = "breathing_gas_po2"
comparison = "<="
value = 2.5
unit = "atm"
authority = "the unit"
edition = "standing order 4, 2042"
roles = ["patient"]
conditions = "oxygen by hood"
provenance = "read"
source = "standing orders"
```"""


def remembered() -> list[str]:
    """Return the section of the provenance page on limits."""
    order = {word: rank for rank, word in enumerate(PROVENANCE)}
    weak = sorted(
        (x for x in load() if x.provenance.startswith("memory")), key=lambda x: -order[x.provenance]
    )
    return [
        "## Limits from memory\n\n"
        + table(
            ("limit", "value", "provenance", "compare with"),
            [
                (f"[`{x.id}`](#limit-{x.id})", _value(x), f"`{x.provenance}`", escape(cite(x.source)))
                for x in weak
            ],
        )
    ]
