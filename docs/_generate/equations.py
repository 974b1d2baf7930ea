"""One page for each module that holds equations, every equation traced from its own code."""

from __future__ import annotations

import csv
import re
from importlib import resources
from typing import Any

import sympy

from _generate.markdown import (
    anchor_of,
    escape,
    first_name,
    link,
    math,
    page,
    quantity_link,
    source_link,
    span,
    table,
    tex,
)
from gasphys.equation import EQUATIONS
from gasphys.errors import GasphysError, NotTraceable
from gasphys.gas import FORMULAS, Gas
from gasphys.policy import validity
from gasphys.registry import MODULES, equations

#: Gas of the worked examples that need a mixture.
EXAMPLE_GAS = "trimix 17/48"

TITLES = {
    "laws": "Gas laws and gas volumes",
    "vapor": "Water vapor",
    "surroundings": "Pressure, depth, altitude",
    "real_gas": "Gas density, cylinders, viscosity",
    "lungs": "Alveolar gas",
    "blood": "Oxygen in blood",
    "breathing_gas": "Breathing gas at an instant",
    "breathing": "Breathing dense gas",
    "gas_exchange": "From alveolus to arterial blood",
    "doses": "Oxygen dose, narcosis, carbon dioxide",
    "tissues": "Dissolved gas in tissues",
    "ascent": "Ascents",
    "chamber": "Chamber gas, heat, trapped gas",
    "bubbles": "Bubbles",
    "supply": "Gas supply",
}


def pages() -> dict[str, str | bytes]:
    """Return the equation pages and their index."""
    modules: dict[str, list[str]] = {module.split(".")[0]: [] for module in MODULES}
    for name in equations():
        modules.setdefault(name.split(".")[0], []).append(name)
    modules = {module: names for module, names in modules.items() if names}
    out: dict[str, str | bytes] = {
        f"equations/{module}.md": _module(module, names) for module, names in modules.items()
    }
    out["equations/index.md"] = _index(modules)
    return out


def _index(modules: dict[str, list[str]]) -> str:
    rows = []
    for names in modules.values():
        for name in names:
            f = EQUATIONS[name]
            if "[" not in name:
                rows.append((link(name), f.kind, escape(summary(f)), f"`{f.provenance}`"))
    toctree = "\n".join(modules)
    return page(
        "Equations",
        "Each equation is written once, as code. What is printed on these pages is traced from that code: "
        "the same function is run with symbols instead of numbers. So page and program cannot differ.",
        table(("equation", "kind", "what it gives", "provenance"), rows),
        "The kinds:",
        "formula\n: closed form; printed, differentiated and solved as it stands.\n\nchoice\n: picks one "
        "of several published formulas by name; all of them stand on the page.\n\ninverse\n: found from a "
        "formula, never written a second time, so there is nothing to trace.\n\ntable\n: printed values "
        "and the rule between them; no closed form.",
        f"```{{toctree}}\n:maxdepth: 1\n:hidden:\n\n{toctree}\n```",
        anchor="equations-page",
    )


def _module(module: str, names: list[str]) -> str:
    parts = []
    for name in names:
        if first_name(name) != name:
            continue
        f = EQUATIONS[name]
        level = "###" if "[" in name else "##"
        labels = [key for key, g in EQUATIONS.items() if g is f]
        title = " = ".join(f"`{key.split('.', 1)[1]}`" for key in labels)
        parts.append(f"({anchor_of(name)})=\n{level} {title}")
        parts.append(_body(name, f))
    parts += _files(module)
    return page(
        TITLES.get(module, module.replace("_", " ").capitalize()), *parts, anchor=f"equations-{module}"
    )


def _files(module: str) -> list[str]:
    """Print the data files beside a module: what its tables read."""
    folder = resources.files("gasphys").joinpath(module)
    files = sorted(f.name for f in folder.iterdir() if f.name.endswith(".csv")) if folder.is_dir() else []
    parts = []
    for name in files:
        lines = folder.joinpath(name).read_text("utf-8").splitlines()
        rows = list(csv.reader(line for line in lines if not line.startswith("#")))
        about = " ".join(line.lstrip("# ") for line in lines if line.startswith("#"))
        parts.append(f"## Data: `{name}`\n\n{escape(about)}")
        parts.append(table([escape(h) for h in rows[0]], [[escape(v) for v in row] for row in rows[1:]]))
    return parts


def summary(f: Any) -> str:
    """Return the first line of an equation's docstring."""
    return (f.__doc__ or "").strip().split("\n\n")[0].replace("\n", " ")


def _notes(f: Any) -> str:
    match = re.search(r"\nNotes\n-+\n(.*?)(?=\n\w[\w ]*\n-{3,}\n|\Z)", f.__doc__ or "", re.DOTALL)
    text = match[1].strip() if match else ""
    text = re.sub(r"\n*Provenance: \w+\.\s*$", "", text).strip()
    return (
        f"```{{eval-rst}}\n.. currentmodule:: gasphys.{f.name.split('.')[0]}\n\n{text}\n```" if text else ""
    )


def _body(name: str, f: Any) -> str:
    parts = [escape(summary(f)), _notes(f)]
    if f.kind == "choice":
        parts.append(_members(name, f))
    else:
        parts += [_equation(f), _arguments(f), _constants(f), _example(name, f), _derivatives(f)]
    sources = "; ".join(source_link(key) for key in f.sources)
    if "[" not in name:
        parts.append(f"Code: {{py:func}}`gasphys.{name}`.")
    parts.append(f"Kind: {f.kind}. Provenance: `{f.provenance}`. Sources: {sources}.")
    return "\n\n".join(p for p in parts if p)


def _members(name: str, f: Any) -> str:
    rows = []
    for key, member in f.registry.items():
        label = ",".join(map(str, key if isinstance(key, tuple) else (key,)))
        rows.append(
            (link(f"{name}[{label}]"), member.kind, escape(summary(member)), f"`{member.provenance}`")
        )
    options = " and ".join(f"`{o}=`" for o in f.options)
    return f"Picked by {options}:\n\n" + table(("name", "kind", "what it is", "provenance"), rows)


def _equation(f: Any) -> str:
    try:
        return f"$$\n{tex(f.latex())}\n$$"
    except NotTraceable as reason:
        said = f"Not traced: {escape(str(reason))}."
    if f.kind != "inverse":
        return said
    unknown = next(a for a in f.forward.arguments if a.name == f.unknown)
    said += f" Found as the {_named(unknown)} for which the forward equation gives the wanted value."
    if f.forward.kind != "formula":
        return said
    return f"{said}\n\n$$\n{tex(f.forward.latex())}\n$$"


def _named(a: Any) -> str:
    """Return a link to an argument's quantity, with the argument's own name where it differs."""
    q = a.quantity
    return quantity_link(q.name) if q.name == a.name else f"`{a.name}`, a {quantity_link(q.name)}"


def _arguments(f: Any) -> str:
    rows = []
    for a in f.arguments:
        q = a.quantity
        rows.append(
            (
                _named(a),
                math(q.symbol),
                f"`{q.unit}`",
                escape(q.long_name),
                "required" if a.default is None else f"{a.default:.6g}",
                span(*a.possible),
                _valid(a),
            )
        )
    r = f.result
    rows.append(
        (
            f"gives {quantity_link(r.name)}",
            math(r.symbol),
            f"`{r.unit}`",
            escape(r.long_name),
            "",
            span(*r.possible),
            "",
        )
    )
    return table(("argument", "symbol", "unit", "meaning", "default", "possible", "valid"), rows)


def _valid(a: Any) -> str:
    if a.valid is None:
        return ""
    return "; ".join([span(a.low, a.high), *(escape(reason) for reason in a.valid[2:])])


def _constants(f: Any) -> str:
    if not f.constants:
        return ""
    rows = [
        (
            f"[`{name}`](#constant-{name.lower()})",
            math(c.symbol),
            f"{float(c):.10g} {'' if c.unit == '1' else c.unit}",
            escape(c.meaning),
            source_link(c.source),
            f"`{c.provenance}`",
        )
        for name, c in f.constants.items()
    ]
    return "Constants:\n\n" + table(("constant", "symbol", "value", "meaning", "source", "provenance"), rows)


#: Inputs that must fit together where the middles of their ranges do not.
EXAMPLES = {
    "chamber.pressurization_gas": {
        "volume": 18000.0,
        "initial_pressure": 101.325,
        "final_pressure": 243.18,
    },
    "chamber.compressor_flow": {
        "volume": 18000.0,
        "initial_pressure": 101.325,
        "final_pressure": 243.18,
        "duration": 10.0,
        "air_flow": 300.0,
    },
    "chamber.cylinders_needed": {
        "free_gas_volume": 28000.0,
        "water_capacity": 50.0,
        "cylinder_pressure": 20000.0,
        "reserve_pressure": 2000.0,
        "compressibility": 1.0,
    },
    "bubbles.closed_nucleus_pressure": {
        "radius": 0.2537,
        "onset_radius": 0.33473,
        "onset_pressure": 932.19,
        "onset_tension": 101.325,
        "surface_tension": 0.0179,
        "skin_compression": 0.257,
    },
    "bubbles.trapped_gas_pressure": {"radius": 0.2537, "onset_radius": 0.33473, "onset_tension": 101.325},
    "bubbles.boyle_pressure": {"gradient": 45.0, "initial_gradient": 60.0, "initial_pressure": 350.0},
    "bubbles.counterdiffusion_tension": {
        "leaving_pressure": 300.0,
        "arriving_pressure": 300.0,
        "duration": 20.0,
        "leaving_half_time": 27.0,
        "arriving_half_time": 10.2,
    },
    "bubbles.counterdiffusion_peak_time": {
        "leaving_pressure": 300.0,
        "arriving_pressure": 300.0,
        "leaving_half_time": 27.0,
        "arriving_half_time": 10.2,
    },
    "bubbles.surface_excess_time": {
        "helium_pressure": 30.0,
        "nitrogen_pressure": 90.0,
        "inspired_nitrogen_pressure": 75.1,
        "helium_half_time": 15.1,
        "nitrogen_half_time": 40.0,
    },
    "bubbles.composition_rate": {
        "bubble_fraction": 0.6,
        "own_inflow": 5e5,
        "all_inflow": 7e5,
        "radius": 20.0,
        "bubble_pressure": 110.0,
    },
    "bubbles.gas_inflow": {
        "radius": 10.0,
        "tissue_gas_pressure": 200.0,
        "bubble_gas_pressure": 120.0,
        "diffusivity": 2e-9,
        "solubility": 0.0144,
        "boundary_term": 0.1,
    },
    "bubbles.squared_radius_rate": {
        "radius": 10.0,
        "bubble_inflow": 1.4e6,
        "ambient_pressure": 101.325,
        "ambient_rate": 0.0,
        "surface_tension": 0.05,
        "tissue_modulus": 0.0,
        "metabolic_pressure": 18.0,
    },
    "tissues.time_to_tissue_pressure": {
        "initial_tissue_pressure": 80.0,
        "inert_pressure": 220.0,
        "tissue_pressure": 170.0,
        "half_time": 40.0,
    },
}

#: Where in its usual range an argument of a change is taken; all others at the middle.
_SHARE = {"start": 0.75, "initial": 0.75, "end": 0.25, "final": 0.25}


def example_inputs(f: Any) -> dict[str, float]:
    """Return inputs of everyday size: defaults where there are any, mid of the usual range otherwise."""
    if f.name in EXAMPLES:
        return EXAMPLES[f.name]
    if f.kind == "inverse":
        forward = example_inputs(f.forward)
        given = f.arguments[0]
        with validity("ignore"):
            wanted = float(f"{f.forward(**forward):.6g}")
        if not given.low <= wanted <= given.high:
            wanted = _everyday(given)
        return {given.name: wanted, **{a.name: forward[a.name] for a in f.arguments[1:]}}
    gas = Gas.parse(EXAMPLE_GAS)
    fields = {field: gas.fraction(formula) for formula, field in FORMULAS.items()}
    mixture = {"oxygen", "nitrogen"} <= {a.name for a in f.arguments}
    inputs = {}
    for a in f.arguments:
        if a.default is not None:
            inputs[a.name] = a.default
        elif mixture and a.name in fields:
            inputs[a.name] = fields[a.name]
        else:
            inputs[a.name] = _everyday(a)
    return inputs


def _everyday(a: Any) -> float:
    """Return a value of the usual range that the equation is valid for."""
    low, high = a.quantity.usual
    low, high = max(low, a.low), min(high, a.high)
    if not low <= high:
        low, high = a.low, a.high
    share = _SHARE.get(a.name.split("_")[0], 0.5)
    return float(f"{low + (high - low) * share:.3g}")


def _example(name: str, f: Any) -> str:
    inputs = example_inputs(f)
    try:
        with validity("raise"):
            text = str(f.working(**inputs))
    except GasphysError as error:
        raise RuntimeError(f"{name}: no worked example of {inputs}; give it inputs in EXAMPLES") from error
    return f"Worked, with inputs of everyday size (not advice):\n\n```text\n{text}\n```"


#: Operations in a traced equation beyond which its derivatives fill pages and help nobody.
_LONG = 60


def _derivatives(f: Any) -> str:
    if f.kind == "inverse":
        return "The derivative is 1 over that of the forward equation, exactly."
    if f.kind == "table":
        return ""
    traced = f.symbolic()
    # What stands for itself (an inverse, a long formula) counts as long: its derivative writes it out.
    if traced.count_ops() > _LONG or any(hasattr(one, "_imp_") for one in traced.atoms(sympy.Function)):
        return (
            "The derivatives are too long to print; `derivative(name)` gives each, traced from the same code."
        )
    lines = [f"$$\n{tex(f.derivative(a.name).latex())}\n$$" for a in f.arguments]
    return "````{details} Derivatives, traced from the same code\n\n" + "\n\n".join(lines) + "\n\n````"
