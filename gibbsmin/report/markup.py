"""HTML as values: text is escaped unless it is `Markup`, so that nothing from a file can become a tag."""

from __future__ import annotations

import html
import json
import re
from collections.abc import Iterable, Sequence
from typing import Any

from gibbsmin.figures.labels import chemical, with_formulas

_VOID = frozenset({"br", "meta", "input", "link", "col", "hr", "img"})
_SUBSCRIPTS = str.maketrans("0123456789.", "₀₁₂₃₄₅₆₇₈₉.")
_RAISED = str.maketrans("+-0123456789", "⁺⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
_FORMULA_MARKUP = re.compile(r"\$\\mathregular\{((?:[^{}]|\{[^{}]*\})*)\}\$")


class Markup(str):
    """A piece of finished HTML."""

    __slots__ = ()


def tag(name: str, /, *children: object, **attributes: object) -> Markup:
    """An element; children that are no `Markup` are escaped, None among them is left out.

    Attribute names are written with underscores for hyphens, and a trailing one where Python reserves the
    word (`class_`). An attribute of None or False is left out, one of True has no value.
    """
    words = [name]
    for key, value in attributes.items():
        if value is None or value is False:
            continue
        plain = key.rstrip("_").replace("_", "-")
        words.append(plain if value is True else f'{plain}="{html.escape(str(value))}"')
    start = f"<{' '.join(words)}>"
    return Markup(start if name in _VOID else f"{start}{joined(children)}</{name}>")


def joined(children: Iterable[object]) -> Markup:
    """Children one after another; lists and tuples are unfolded."""
    return Markup("".join(_written(child) for child in children))


def _written(child: object) -> str:
    if child is None:
        return ""
    if isinstance(child, Markup):
        return str(child)
    if isinstance(child, list | tuple):
        return str(joined(child))
    return html.escape(str(child))


def embedded_json(value: Any) -> Markup:
    """JSON for a script element: no text of it can end the element or open a comment."""
    text = json.dumps(value, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    return Markup(text.replace("<", "\\u003c").replace("\u2028", "\\u2028").replace("\u2029", "\\u2029"))


def pretty_name(name: str) -> str:
    """A species name with the subscripts of its formula, as plain text: CH₄, NH₄⁺; other names as they are."""
    return _as_plain_text(chemical(name))


def pretty_words(text: str) -> str:
    """A phrase in which the words that are chemical formulas have their subscripts: conversion of CH₄."""
    return _as_plain_text(with_formulas(text))


def _as_plain_text(markup: str) -> str:
    return _FORMULA_MARKUP.sub(lambda found: _with_small_digits(found[1]), markup).replace(r"\$", "$")


def _with_small_digits(formula: str) -> str:
    formula = re.sub(r"_\{(.*?)\}", lambda found: found[1].translate(_SUBSCRIPTS), formula)
    return re.sub(r"\^\{(.*?)\}", lambda found: found[1].translate(_RAISED), formula)


def table(
    caption: object,
    headings: Sequence[object],
    rows: Iterable[Sequence[object]],
    *,
    words: Sequence[int] = (),
    class_: str = "",
) -> Markup:
    """A table whose first cell of each row is its heading, in a box that scrolls sideways where it must.

    `words` are the columns of text; all others hold numbers and are set flush right.
    """
    texts = {0, *words}

    def kind(column: int) -> str | None:
        return None if column in texts else "number"

    head = [tag("th", heading, scope="col", class_=kind(i)) for i, heading in enumerate(headings)]
    body = [
        tag(
            "tr",
            tag("th", row[0], scope="row"),
            [tag("td", cell, class_=kind(i)) for i, cell in enumerate(row) if i > 0],
        )
        for row in rows
    ]
    content = tag("table", tag("caption", caption), tag("thead", tag("tr", head)), tag("tbody", body))
    # Whatever scrolls must be within reach of the keyboard.
    return tag(
        "div",
        content,
        class_=f"table-box {class_}".strip(),
        tabindex="0",
        role="region",
        aria_label=re.sub(r"<[^>]*>", "", str(caption)) if isinstance(caption, Markup) else caption,
    )


def facts(pairs: Iterable[tuple[object, object]]) -> Markup:
    """A description list of short facts."""
    return tag("dl", [tag("div", tag("dt", term), tag("dd", told)) for term, told in pairs], class_="facts")


def bullets(lines: Iterable[object]) -> Markup:
    return tag("ul", [tag("li", line) for line in lines])


def paragraphs(text: str) -> Markup:
    """Text of a file: blank lines part paragraphs, lines that begin with a hyphen become a list."""
    blocks: list[Markup] = []
    for block in re.split(r"\n\s*\n", text.strip()):
        parts = re.split(r"(?m)^\s*-\s+", block)
        if lead := " ".join(parts[0].split()):
            blocks.append(tag("p", lead))
        if len(parts) > 1:
            blocks.append(bullets(" ".join(part.split()) for part in parts[1:]))
    return joined(blocks)
