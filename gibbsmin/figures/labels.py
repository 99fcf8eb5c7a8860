"""Words and numbers as a figure prints them: chemical names with subscripts, plain numbers, decades."""

from __future__ import annotations

import math
import re

from gibbsmin.species.elements import ATOMIC_NUMBERS

_COUNT = re.compile(r"(?<=[A-Za-z)\]])(\d+(?:\.\d+)?)")
_CHARGE = re.compile(r"[+-]+$")
_FORMULA = re.compile(
    r"(?:\d-)*(?:\(?[A-Z][a-z]?(?:\d+(?:\.\d+)?)?(?:\)\d*)?)+(?:\((?:g|l|s|cr|gr|am|aq)\))?[+-]?$|^e-$"
)
_WORD = re.compile(r"(?:[A-Za-z0-9()+-]|(?<=\d)\.(?=\d))+")
_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
_MINUS = "\N{MINUS SIGN}"
_SMALLEST_PLAIN, _LARGEST_PLAIN = 1e-3, 1e5  # outside, a number is printed with a power of ten


def plain(text: str) -> str:
    """Text in which a dollar sign is a dollar sign, not the start of a formula."""
    return text.replace("$", r"\$")


def chemical(name: str) -> str:
    """A species name with the subscripts and superscripts of a formula, as matplotlib markup.

    What follows the first blank or comma (the trivial name of an isomer) is left as it stands, and so
    is anything that does not read as a formula.
    """
    head, rest = re.match(r"([^\s,]*)(.*)$", name, re.DOTALL).groups()  # type: ignore[union-attr]
    if not _FORMULA.fullmatch(head):
        return plain(name)
    charge = _CHARGE.search(head)
    markup = _COUNT.sub(r"_{\1}", head[: charge.start()] if charge else head)
    if charge:
        markup += f"^{{{charge[0]}}}"
    return rf"$\mathregular{{{markup}}}$" + plain(rest)


def with_formulas(text: str) -> str:
    """A phrase as matplotlib markup, in which the words that are chemical formulas get their subscripts."""
    return _WORD.sub(lambda word: chemical(word[0]) if _is_formula(word[0]) else word[0], plain(text))


def _is_formula(word: str) -> bool:
    symbols = re.findall(r"[A-Z][a-z]?", word)
    has_count = any(character.isdigit() for character in word)
    return (
        has_count and bool(_FORMULA.fullmatch(word)) and all(symbol in ATOMIC_NUMBERS for symbol in symbols)
    )


def number(value: float, digits: int = 4) -> str:
    """A number in at most `digits` significant digits, as a person would write it: `0.25`, `5×10⁻⁴`."""
    if value == 0:
        return "0"
    if _SMALLEST_PLAIN <= abs(value) < _LARGEST_PLAIN:
        text = f"{value:.{digits}g}"
        if "e" in text:
            text = f"{float(text):.0f}"
        return text.replace("-", _MINUS)
    exponent = math.floor(math.log10(abs(value)))
    mantissa = round(value / 10.0**exponent, digits - 1)
    if abs(mantissa) >= 10:
        mantissa, exponent = mantissa / 10, exponent + 1
    front = "" if mantissa == 1 else f"{mantissa:g}\N{MULTIPLICATION SIGN}"
    return front.replace("-", _MINUS) + "10" + str(exponent).translate(_RAISED)


def file_name(*parts: str) -> str:
    """A file name of letters, digits, `-` and `_` that every operating system takes."""
    return "_".join(filter(None, (re.sub(r"[^A-Za-z0-9+-]+", "_", part).strip("_") for part in parts)))
