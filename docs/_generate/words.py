"""Nomenclature, units, constants, compositions of dry air, references."""

from __future__ import annotations

import tomllib
from collections.abc import Iterable
from importlib import resources
from typing import Any

from _generate.markdown import constants, escape, math, page, quantity_link, source_link, span, table
from gasphys.constants import CONSTANTS
from gasphys.gas import dry_air_standards
from gasphys.person import measurable
from gasphys.quantities import QUANTITIES
from gasphys.sources import sources
from gasphys.units import UNITS

_BASE = ("kg", "m", "s", "K", "mol")


def pages() -> dict[str, str | bytes]:
    """Return the pages of words."""
    return {
        "nomenclature.md": _nomenclature(),
        "units.md": _units(),
        "constants.md": _constants(),
        "references.md": _references(),
        "person.md": _person(),
    }


def _nomenclature() -> str:
    rows = []
    for name, q in QUANTITIES.items():
        unit = f"`{q.unit}`" + (f" ({q.dose_unit})" if q.dose_unit else "")
        rows.append(
            (
                f"[`{name}`]{{#quantity-{name}}}",
                math(q.symbol),
                unit,
                f"{escape(q.long_name)}. {escape(q.meaning)}"
                + (f" Refuses {', '.join(f'`{r}`' for r in q.refuses)}." if q.refuses else ""),
                span(*q.possible),
                span(*q.usual),
            )
        )
    return page(
        "Nomenclature",
        "Every name of an argument, a dataset variable or a control, from `quantities.toml`. One name has "
        "one meaning. *Possible*: a value outside is refused. *Usual*: where sliders and start values lie.",
        table(("name", "symbol", "unit", "meaning", "possible", "usual"), rows),
        anchor="nomenclature-page",
    )


def _dimension(exponents: tuple[int, ...]) -> str:
    parts = [b if e == 1 else f"{b}{e}" for b, e in zip(_BASE, exponents, strict=True) if e]
    return f"`{' '.join(parts) or '1'}`"


def _units() -> str:
    rows = [
        (
            f"`{name}`",
            f"{u.factor:.12g}" + (f" (zero at {u.offset:.6g} K)" if u.offset else ""),
            _dimension(u.dimension),
            escape(u.definition) + (" (a depth: gauge)" if u.gauge else ""),
        )
        for name, u in UNITS.items()
    ]
    return page(
        "Units",
        'What may stand behind a number in text (`"2.4 atm"`), in a file or in `convert`. The factor leads '
        "to the SI base units in the third column. Compound units are written with `/`, `*` or a space: "
        "`mL/dL/mmHg`.",
        "`msw` and `fsw` are pressure *differences*: 18 msw is 180 kPa. The absolute pressure at a depth "
        "comes from {py:func}`gasphys.surroundings.pressure_at_depth`, which also asks for the water and "
        "the pressure "
        'at the surface. A unit with "gauge" in its name is refused; add the surface pressure yourself.',
        table(("unit", "factor to SI", "base units", "definition"), rows),
        anchor="units-page",
    )


def _constant_rows(names: Iterable[str]) -> str:
    every = constants()
    rows = []
    for name in names:
        c = every[name]
        sure = "exact by definition" if c.exact else f"± {c.uncertainty:g}" if c.uncertainty else "not stated"
        rows.append(
            (
                f"[`{name}`]{{#constant-{name.lower()}}}",
                math(c.symbol),
                f"{float(c):.10g} {'' if c.unit == '1' else c.unit}",
                sure,
                escape(c.meaning),
                source_link(c.source),
                f"`{c.provenance}`",
            )
        )
    return table(("name", "symbol", "value", "uncertainty", "meaning", "source", "provenance"), rows)


def _constants() -> str:
    coefficients = [name for name in constants() if name not in CONSTANTS]
    air = [
        (
            f"`{name}`",
            *(f"{row.get(g, 0.0):.6g}" for g in ("oxygen", "argon", "carbon_dioxide", "neon", "helium")),
            escape(row["source"]),
            f"`{row['provenance']}`",
        )
        for name, row in dry_air_standards().items()
    ]
    return page(
        "Constants",
        "Each with its value, source and provenance; derived ones are computed from these. What the "
        "provenance words mean stands in [Conventions](#provenance-words).",
        _constant_rows(CONSTANTS),
        "## Coefficients of single equations",
        _constant_rows(coefficients) if coefficients else "None.",
        "## Dry air\n\n"
        '`Gas.parse("air")` is the trade\'s air, O2 0.21 and N2 0.79, as dose tables and decompression sets '
        "mean it. `Gas.dry_air(standard)` is atmospheric air with argon as its own gas; nitrogen is the "
        "remainder.",
        table(("standard", "O2", "Ar", "CO2", "Ne", "He", "source", "provenance"), air),
        anchor="constants-page",
    )


def _references() -> str:
    rows = [(f"[{key}]{{#source-{key}}}", escape(text)) for key, text in sorted(sources().items())]
    return page(
        "References",
        "Each source has one key. Square brackets at the end say how much of the text was seen: without a "
        "mark, the numbers used here were read in the source or follow from a definition.",
        table(("key", "source"), rows),
        anchor="references-page",
    )


def _person() -> str:
    defaults = person_defaults()
    rows = []
    for name in measurable():
        row, q = defaults[name], QUANTITIES[name]
        rows.append(
            (
                quantity_link(name),
                f"{row['value']:.6g} {'' if q.unit == '1' else q.unit}",
                escape(row["source"]),
                f"`{row['provenance']}`",
            )
        )
    return page(
        "What is assumed of a person",
        "Every field of a {py:class}`~gasphys.person.Person` is optional. What was not measured is assumed "
        "to be as below, and every result says which values were measured and which were assumed.",
        table(("field", "assumed", "why", "provenance"), rows),
        anchor="person-defaults-page",
    )


def person_defaults() -> dict[str, dict[str, Any]]:
    """Return the assumed values of a person, from their data file."""
    text = resources.files("gasphys").joinpath("person_defaults.toml").read_text("utf-8")
    return tomllib.loads(text)
