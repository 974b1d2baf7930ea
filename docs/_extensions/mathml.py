"""Equations as MathML: the browser draws them, nothing is fetched when a page is opened."""

from __future__ import annotations

from typing import Any

from docutils import nodes
from latex2mathml.converter import convert
from sphinx.application import Sphinx


def mathml(latex: str, display: str) -> str:
    """Return LaTeX as MathML; aligned lines become a table, and tables keep fractions large."""
    latex = latex.replace(r"\begin{aligned}", r"\begin{array}{rl}").replace(r"\end{aligned}", r"\end{array}")
    return str(convert(latex, display=display)).replace("<mtable", '<mtable displaystyle="true"')


def _inline(translator: Any, node: nodes.math) -> None:
    translator.body.append(mathml(node.astext(), "inline"))
    raise nodes.SkipNode


def _block(translator: Any, node: nodes.math_block) -> None:
    translator.body.append(translator.starttag(node, "div", CLASS="equation"))
    translator.body.append(mathml(node.astext(), "block"))
    translator.body.append("</div>\n")
    raise nodes.SkipNode


def setup(app: Sphinx) -> dict[str, Any]:
    """Offer the renderer under the name that ``conf.py`` picks."""
    app.add_html_math_renderer("mathml", (_inline, None), (_block, None))
    return {"parallel_read_safe": True, "parallel_write_safe": True}
