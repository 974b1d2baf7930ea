"""Small pieces of Markdown shared by the generators."""

from __future__ import annotations

import io
import re
from collections.abc import Iterable, Sequence

from matplotlib import rc_context
from matplotlib.figure import Figure

from gasphys.constants import CONSTANTS, Constant
from gasphys.equation import EQUATIONS, EquationFunction

GENERATED = "<!-- Generated at build; edit the data or docs/_generate instead. -->\n"


def page(title: str, *parts: str, anchor: str = "") -> str:
    """Return a page: mark, optional anchor, title, parts."""
    head = f"({anchor})=\n" if anchor else ""
    return "\n\n".join([GENERATED + head + f"# {title}", *(p.strip("\n") for p in parts)]) + "\n"


def cell(value: object) -> str:
    """Return text for one cell of a table."""
    return str(value).replace("\n", " ").replace("|", r"\|").strip()


def table(headers: Sequence[str], rows: Iterable[Sequence[object]]) -> str:
    """Return a table."""
    lines = ["| " + " | ".join(headers) + " |", "|" + " --- |" * len(headers)]
    lines += ["| " + " | ".join(cell(v) for v in row) + " |" for row in rows]
    return "\n".join(lines)


def math(symbol: str) -> str:
    """Return inline math."""
    return f"${symbol}$"


def tex(latex: str) -> str:
    """Drop the ``.0`` of whole numbers, which say nothing in print."""
    return re.sub(r"(?<![\d.])(\d+)\.0(?!\d)", r"\1", latex)


def span(low: float, high: float, unit: str = "") -> str:
    """Return a range."""
    text = f"{low:g} to {high:g}"
    return f"{text} {unit}" if unit not in ("", "1") else text


def escape(text: str) -> str:
    """Return plain text with Markdown's marks made harmless."""
    return re.sub(r"([\\`*_{}\[\]<>$|#])", r"\\\1", text)


def anchor_of(name: str) -> str:
    """Return the anchor of an equation, from its name in the registry."""
    return "equation-" + re.sub(r"[^a-z0-9]+", "-", name.lower()).strip("-")


def link(name: str) -> str:
    """Return a link to an equation by its name in the registry."""
    return f"[`{name}`](#{anchor_of(first_name(name))})"


def first_name(name: str) -> str:
    """Return the first name under which the equation stands: a formula may serve several options."""
    wanted: EquationFunction = EQUATIONS[name]
    return next(key for key, f in EQUATIONS.items() if f is wanted)


def quantity_link(name: str) -> str:
    """Return a link to the row of a quantity."""
    return f"[`{name}`](#quantity-{name})"


def source_link(key: str) -> str:
    """Return a link to a reference."""
    return f"[{key}](#source-{key})"


def constants() -> dict[str, Constant]:
    """Return every constant: those with a name of their own, then the coefficients of equations."""
    found = dict(CONSTANTS)
    for f in EQUATIONS.values():
        for name, constant in f.constants.items():
            found.setdefault(name, constant)
    return found


def svg(figure: Figure) -> bytes:
    """Return a figure as SVG, the same bytes for the same figure."""
    with rc_context({"svg.hashsalt": "gasphys", "svg.fonttype": "path"}):
        buffer = io.BytesIO()
        figure.savefig(buffer, format="svg", metadata={"Date": None})
    return buffer.getvalue()
