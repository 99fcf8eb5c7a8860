"""How the documentation pages are built: `python -m sphinx -W --keep-going -b html gibbsmin/docs build/docs`.

The pages need nothing but the repository. What can be taken from its source is: references of file forms from
their JSON Schemas, figures from the benchmarks' own files, the guide for contributors from DEVELOPERS.md.
"""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

HERE = Path(__file__).parent
ROOT = HERE.parents[1]
sys.path[:0] = [str(HERE), str(ROOT)]

import measured_figures  # noqa: E402
import schema_reference  # noqa: E402

import gibbsmin  # noqa: E402

project = "gibbsmin"
author = "The gibbsmin developers"
version = release = gibbsmin.__version__

extensions = ["myst_parser", "sphinx.ext.autodoc", "sphinx.ext.napoleon", "mathml_output"]
myst_enable_extensions = ["dollarmath", "deflist", "colon_fence"]
myst_heading_anchors = 3
exclude_patterns = ["measured/*"]
source_suffix = {".md": "markdown"}
html_math_renderer = "mathml"
autodoc_typehints = "signature"
autodoc_member_order = "bysource"
nitpicky = False

html_theme = "furo"
html_title = "gibbsmin"
html_static_path: list[str] = []
html_show_sphinx = False
html_show_copyright = False
html_theme_options = {
    "light_css_variables": {"color-brand-primary": "#0b5d66", "color-brand-content": "#0b5d66"},
    "dark_css_variables": {"color-brand-primary": "#7fd0d3", "color-brand-content": "#7fd0d3"},
}


def _fill_in(app: Any, page: str, source: list[str]) -> None:
    """Add to a page what is made from the repository."""
    if page in schema_reference.SCHEMAS:
        source[0] += schema_reference.reference(ROOT / schema_reference.SCHEMAS[page])
    elif page == "accuracy-and-speed":
        source[0] += measured_figures.figures(HERE / "measured")


def setup(app: Any) -> dict[str, bool]:
    app.connect("source-read", _fill_in)
    return {"parallel_read_safe": True, "parallel_write_safe": True}
