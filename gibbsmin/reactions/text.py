"""What the texts about reactions share: tables, headings, temperatures in the reader's unit."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from dataclasses import dataclass

from gibbsmin.reactions.shortcut_error import Window

WIDTH = 100


@dataclass(frozen=True)
class TemperatureUnit:
    """How temperatures are shown: shown = (T - zero) / size."""

    symbol: str = "K"
    size: float = 1.0
    zero: float = 0.0

    def show(self, T: float, digits: int = 6) -> str:
        return f"{(T - self.zero) / self.size:.{digits}g}"

    def span(self, window: Window) -> str:
        return f"{self._round(window.lower)} to {self._round(window.upper)} {self.symbol}"

    def _round(self, T: float) -> str:
        return f"{(T - self.zero) / self.size:.0f}"


KELVIN = TemperatureUnit()
CELSIUS = TemperatureUnit("degC", 1.0, 273.15)
FAHRENHEIT = TemperatureUnit("degF", 5 / 9, 273.15 - 32 * 5 / 9)
TEMPERATURE_UNITS = {each.symbol: each for each in (KELVIN, CELSIUS, FAHRENHEIT)}


def table(rows: Sequence[Sequence[str]], left: Sequence[int] = (0,)) -> list[str]:
    """Rows as aligned lines; columns in `left` are set to the left, the last one always."""
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    last = len(widths) - 1
    return [
        "  ".join(
            cell.ljust(width) if i in left or (i == last and last > 6) else cell.rjust(width)
            for i, (cell, width) in enumerate(zip(row, widths, strict=True))
        ).rstrip()
        for row in rows
    ]


def headed(title: str, body: str) -> str:
    """A block of text under its title."""
    return f"{title}\n{'-' * min(len(title), WIDTH)}\n{body}"


def wrapped(text: str) -> str:
    """One paragraph in lines of at most `WIDTH` columns, the further ones indented."""
    indent = text[: len(text) - len(text.lstrip())]
    return "\n".join(textwrap.wrap(text, WIDTH, subsequent_indent=indent + "  ", break_long_words=False))
