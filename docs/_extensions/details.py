"""A part of a page that opens on a click; printed and searched like any other."""

from __future__ import annotations

from typing import Any

from docutils import nodes
from sphinx.application import Sphinx
from sphinx.util.docutils import SphinxDirective


class details(nodes.General, nodes.Element):
    """The part; its attribute ``summary`` is the line that always shows."""


class Details(SphinxDirective):
    """``{details} summary`` around any content."""

    has_content = True
    required_arguments = 1
    final_argument_whitespace = True

    def run(self) -> list[nodes.Node]:
        node = details(summary=self.arguments[0])
        self.state.nested_parse(self.content, self.content_offset, node)
        return [node]


def _open(translator: Any, node: details) -> None:
    summary = translator.encode(node["summary"])
    translator.body.append(f"<details><summary>{summary}</summary>\n")


def _close(translator: Any, node: details) -> None:
    translator.body.append("</details>\n")


def setup(app: Sphinx) -> dict[str, Any]:
    """Register node and directive."""
    app.add_node(details, html=(_open, _close))
    app.add_directive("details", Details)
    return {"parallel_read_safe": True, "parallel_write_safe": True}
