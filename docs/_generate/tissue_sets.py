"""Parameter sets of dissolved-gas models: what each publication's numbers are for, and the numbers."""

from __future__ import annotations

import numpy as np

from _generate.markdown import escape, page, table
from gasphys.policy import weakest
from gasphys.sources import cite, sources
from gasphys.tissues import TissueSet, load, models


def pages() -> dict[str, str | bytes]:
    """Return the page of parameter sets."""
    sets = [load(name) for name in models()]
    parts = [
        "```{caution}\nA set is a way of computing, fitted or chosen by its authors. Keeping within it "
        "does not keep anybody from decompression illness. Sets disagree; that is why there are "
        "several.\n```",
        "One file for each publication. Numbers are shown in kPa and minutes whatever the unit of the "
        "print. What they are used for stands on the page [Dissolved gas](../models/dissolved_gas.md).",
        table(
            ("name", "set", "gases", "compartments", "weakest provenance"),
            [
                (
                    f"[`{one.name}`](#set-{one.name})",
                    escape(one.title),
                    ", ".join(one.inert_gases),
                    len(one.compartments),
                    f"`{_weakest(one)}`",
                )
                for one in sets
            ],
        ),
    ]
    for one in sets:
        parts += [f"(set-{one.name})=\n## {escape(one.title)}", _facts(one), _numbers(one)]
    return {"sets.md": page("Parameter sets", *parts, anchor="sets-page")}


def _weakest(one: TissueSet) -> str:
    return weakest(list(one.provenance_of.values()))


def _facts(one: TissueSet) -> str:
    source = cite(one.source) if one.source in sources() else one.source
    tested = " and ".join(word.replace("_", " ") for word in one.tested) or "never: there is none"
    convention = ", ".join(f"{k.replace('_', ' ')} {v:.5g}" for k, v in one.convention.items() if v)
    known = ", ".join(f"{k} `{v}`" for k, v in one.provenance_of.items())
    lines = {
        f"`{one.name}`": f"{one.edition}. {source}",
        "Depth": one.depth,
        "Gases": ", ".join(one.inert_gases) + ("; air only" if one.air_only else ""),
        "Uptake": f"{one.kinetics.replace('_', '-')}; alveolar convention {one.alveolar}; {convention}",
        "Start": one.start,
        "Limit tested": f"{tested}; on the way: {one.on_the_way}",
        "Refuses": one.refuses,
        "Does not claim": one.does_not_claim,
        "Evidence": one.evidence,
    }
    rows = [(k, escape(v)) for k, v in lines.items() if v]
    return table(("", "what the file says"), [*rows, ("Provenance", known)])


def _numbers(one: TissueSet) -> str:
    headers, columns = ["compartment"], []
    for k, gas in enumerate(one.inert_gases):
        for title, values in (("half-time, min", one.half_time), ("a, kPa", one.a), ("b", one.b)):
            if not np.isnan(values[:, k]).all():
                headers.append(f"{gas} {title}")
                columns.append(values[:, k])
    rows = [
        (name, *("" if np.isnan(c[i]) else f"{c[i]:.6g}" for c in columns))
        for i, name in enumerate(one.compartments)
    ]
    return table(headers, rows)


def remembered() -> list[str]:
    """Return the section of the provenance page on parameter sets."""
    rows = [
        (
            f"[`{one.name}`](#set-{one.name})",
            ", ".join(k for k, v in one.provenance_of.items() if v.startswith("memory")),
            f"`{_weakest(one)}`",
            escape(cite(one.source) if one.source in sources() else one.source),
        )
        for one in map(load, models())
        if _weakest(one).startswith("memory")
    ]
    return [
        "## Parameter sets from memory\n\n" + table(("set", "numbers of", "weakest", "compare with"), rows)
    ]
