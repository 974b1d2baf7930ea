"""A command of ours, run while the page is built: what a page shows is what the program prints."""

from __future__ import annotations

import os
import shlex
import subprocess
import sys
from pathlib import Path
from typing import Any, ClassVar

from docutils import nodes
from docutils.parsers.rst import directives
from sphinx.application import Sphinx
from sphinx.util.docutils import SphinxDirective

ROOT = Path(__file__).resolve().parents[2]


class Command(SphinxDirective):
    """``{command} gasphys ...``: runs ``python -m gasphys ...`` from the project's folder.

    Options: ``lines`` cuts a long output (said so on the page); ``exit`` is the exit code expected.
    """

    required_arguments = 1
    final_argument_whitespace = True
    option_spec: ClassVar[dict[str, Any]] = {
        "lines": directives.positive_int,
        "exit": directives.nonnegative_int,
    }

    def run(self) -> list[nodes.Node]:
        words = shlex.split(self.arguments[0])
        if words[:1] != ["gasphys"]:
            raise self.error("a command begins with the word gasphys")
        path = os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")])
        done = subprocess.run(
            [sys.executable, "-m", *words],
            cwd=ROOT,
            env={**os.environ, "PYTHONPATH": path, "PYTHONIOENCODING": "utf-8", "COLUMNS": "100"},
            capture_output=True,
            encoding="utf-8",
            timeout=300,
            check=False,
        )
        expected = self.options.get("exit", 0)
        if done.returncode != expected:
            raise self.error(
                f"{self.arguments[0]!r} ended with {done.returncode}, not {expected}:\n{done.stderr}"
            )
        shown = (done.stdout + done.stderr).rstrip().splitlines()
        keep = self.options.get("lines", len(shown))
        if len(shown) > keep:
            shown = [*shown[:keep], f"... ({len(shown) - keep} more lines)"]
        text = "\n".join([f"$ python -m {shlex.join(words)}", *shown])
        block = nodes.literal_block(text, text, language="none")
        return [block]


def setup(app: Sphinx) -> dict[str, Any]:
    """Register the directive."""
    app.add_directive("command", Command)
    return {"parallel_read_safe": True, "parallel_write_safe": True}
