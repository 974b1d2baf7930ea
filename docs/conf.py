"""Sphinx configuration: handwritten pages beside this file, the others generated from the registry."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

HERE = Path(__file__).resolve().parent
sys.path[:0] = [str(HERE), str(HERE / "_extensions"), str(HERE.parent)]

import _generate  # noqa: E402

import gasphys  # noqa: E402
from gasphys.quantities import CAUTION  # noqa: E402

project = "gasphys"
author = copyright = "The gasphys developers"
version = release = gasphys.__version__

extensions = [
    "myst_parser",
    "sphinx.ext.autodoc",
    "sphinx.ext.autosummary",
    "numpydoc",
    "command",
    "details",
    "mathml",
]
source_suffix = {".md": "markdown"}
exclude_patterns = ["_build", "README.md"]
language = "en"

myst_enable_extensions = [
    "attrs_block",
    "attrs_inline",
    "colon_fence",
    "deflist",
    "dollarmath",
    "substitution",
]
myst_heading_anchors = 3
myst_substitutions = {"caution": CAUTION}

add_module_names = False
autodoc_default_options = {"members": True, "no-value": True}
autodoc_member_order = "bysource"
autodoc_typehints = "none"
autosummary_generate = False
numpydoc_show_class_members = False
numpydoc_xref_param_type = False

# Every reference to an object of ours must resolve; types of other libraries are not linked.
nitpicky = True
nitpick_ignore_regex = [("py:.*", r"(?!gasphys\.).*")]

html_theme = "alabaster"
html_title = f"gasphys {release}"
html_math_renderer = "mathml"
html_static_path = ["_static"]
templates_path = ["_templates"]
html_sidebars = {"**": ["about.html", "searchfield.html", "navigation.html"]}
html_theme_options = {
    "description": "Respiratory and decompression physiology under pressure",
    "github_banner": False,
    "github_button": False,
    "fixed_sidebar": False,
    "show_relbar_bottom": True,
}
html_context = {"caution": CAUTION}
html_show_copyright = False
html_show_sphinx = False
html_copy_source = False
html_show_sourcelink = False
pygments_style = "bw"


def setup(app: Any) -> None:
    """Write the generated pages before Sphinx looks for sources."""
    app.connect("builder-inited", lambda app: _generate.write(Path(app.srcdir) / "generated"))
