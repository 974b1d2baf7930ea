"""Every number from memory, and what would settle it."""

from __future__ import annotations

from collections import Counter

from _generate.limits import remembered as remembered_limits
from _generate.markdown import constants, escape, first_name, link, page, table
from _generate.schedules import remembered as remembered_schedules
from _generate.tissue_sets import remembered as remembered_sets
from _generate.words import person_defaults
from gasphys.constants import Constant
from gasphys.equation import EQUATIONS, EquationFunction
from gasphys.gas import dry_air_standards
from gasphys.policy import PROVENANCE
from gasphys.sources import cite

_WEAKEST_FIRST = {word: -rank for rank, word in enumerate(PROVENANCE)}


def pages() -> dict[str, str | bytes]:
    """Return the provenance page."""
    weak = sorted(
        (c for c in constants().values() if c.provenance.startswith("memory")),
        key=lambda c: _WEAKEST_FIRST[c.provenance],
    )
    own = [(name, f) for name, f in EQUATIONS.items() if first_name(name) == name and f.kind != "choice"]
    remembered = sorted(
        ((n, f) for n, f in own if f.provenance.startswith("memory")),
        key=lambda pair: _WEAKEST_FIRST[pair[1].provenance],
    )
    count = Counter(f.provenance for _, f in own)
    count_constants = Counter(c.provenance for c in constants().values())
    parts = [
        "Some numbers in this library were written down from memory because the printed source was not at "
        "hand. They carry a word that says so, the review prints which it used, and "
        '`with gasphys.provenance("secondary"):` refuses all of them. This page lists each one with what it '
        "should be compared to. Whoever has the source can settle a row: see [Adding](#adding-a-constant).",
        table(
            ("word", "equations", "constants"),
            [(f"`{w}`", count.get(w, 0), count_constants.get(w, 0)) for w in PROVENANCE],
        ),
        "## Constants from memory\n\n"
        + table(("compare with", "constants", "provenance", "used by"), _constants(weak, own)),
        "## Equations from memory\n\nAn equation is as weak as the weakest number in it. Where a constant "
        "is the reason, settling the constant settles the equation.\n\n"
        + table(
            ("equation", "provenance", "because of", "compare with"), [_equation(n, f) for n, f in remembered]
        ),
        "## Compositions of air and assumed values of a person from memory\n\n"
        + table(
            ("what", "provenance", "compare with"),
            [
                (f"`{name}`", f"`{row['provenance']}`", escape(row["source"]))
                for name, row in {**dry_air_standards(), **person_defaults()}.items()
                if row["provenance"].startswith("memory")
            ],
        ),
        *remembered_limits(),
        *remembered_schedules(),
        *remembered_sets(),
    ]
    return {
        "provenance.md": page("What would settle each remembered number", *parts, anchor="provenance-page")
    }


def _equation(name: str, f: EquationFunction) -> tuple[str, ...]:
    weak = [c for c in f.constants.values() if c.provenance == f.provenance]
    because = ", ".join(f"[`{c.name}`](#constant-{c.name.lower()})" for c in weak) or "the equation itself"
    return (link(name), f"`{f.provenance}`", because, "; ".join(escape(cite(k)) for k in f.sources))


def _constants(weak: list[Constant], own: list[tuple[str, EquationFunction]]) -> list[tuple[str, ...]]:
    """Return a row for each source and word: whoever holds the source settles them together."""
    groups: dict[tuple[str, str], list[Constant]] = {}
    for c in weak:
        groups.setdefault((c.source, c.provenance), []).append(c)
    rows = []
    for (source, word), members in groups.items():
        names = {c.name for c in members}
        shown = "; ".join(
            f"[`{c.name}`](#constant-{c.name.lower()}) {float(c):.8g} {c.unit}" for c in members
        )
        used = [link(n) for n, f in own if names & set(f.constants)]
        few = ", ".join(used[:4]) + (f" and {len(used) - 4} more" if len(used) > 4 else "")
        rows.append((escape(cite(source)), shown, f"`{word}`", few or "nothing yet"))
    return rows
