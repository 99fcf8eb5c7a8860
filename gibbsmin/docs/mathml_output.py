"""Mathematics as MathML: browsers draw it themselves, so the pages fetch and run nothing."""

from __future__ import annotations

from typing import Any

from docutils import nodes
from latex2mathml.converter import convert


def _inline(writer: Any, node: nodes.Element) -> None:
    writer.body.append(convert(node.astext()))
    raise nodes.SkipNode


def _displayed(writer: Any, node: nodes.Element) -> None:
    writer.body.append(f'<div class="math">{convert(node.astext(), display="block")}</div>')
    raise nodes.SkipNode


def setup(app: Any) -> dict[str, bool]:
    app.add_html_math_renderer("mathml", (_inline, None), (_displayed, None))
    return {"parallel_read_safe": True, "parallel_write_safe": True}
