"""Chemical formulas as people write them, read into element counts, charge and state.

What is understood:

- element symbols with whole or decimal counts: `CH4`, `Fe0.947O`;
- nested brackets, round or square, with counts: `Fe2(SO4)3`, `[Co(NH3)6]Cl3`;
- bonds written out and added molecules: `CH2Br-COOH`, `CaSO4*2H2O` (also with a raised dot);
- charges at the end, as signs or after a caret: `NO+`, `Be++`, `SO4--`, `SO4^2-`; a number directly before a
  sign is a count (`O2+` is the ion of O2), never a charge;
- the electron, `e-`;
- an IUPAC state symbol at the end: `H2O(l)`, `C(gr)`, `CaCO3(cr)`. IUPAC, *Quantities, Units and Symbols in
  Physical Chemistry*, 3rd ed. (2007), section 2.10.1: g gas, l liquid, s solid, cr crystalline, cd condensed
  phase (solid or liquid), vit vitreous; gr for graphite is CODATA's.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import lru_cache

from gibbsmin.errors import FormulaError
from gibbsmin.species.elements import ATOMIC_NUMBERS, hill_formula

__all__ = ["STATE_SYMBOLS", "Formula", "parse_formula", "split_state"]

STATE_SYMBOLS = ("g", "l", "s", "cr", "cd", "vit", "gr")

LONGEST_FORMULA = 200
"""Characters; the longest of the shipped data has fewer than 30."""

_STATE = re.compile(r"\s*\((" + "|".join(STATE_SYMBOLS) + r")\)\Z")
_CARET_CHARGE = re.compile(r"\^(?:(\d*)([+-])|([+-])(\d+))\Z")
_SIGNS = re.compile(r"(\++|-+)\Z")
_TOKEN = re.compile(
    r"(?P<element>[A-Z][a-z]?)|(?P<count>\d+(?:\.\d+)?|\.\d+)|(?P<open>[(\[])|(?P<close>[)\]])"
    r"|(?P<bond>[-=])"
)
_JOIN = re.compile(r"[*·•]")
_NUMBER = re.compile(r"\d+(?:\.\d+)?")
_PAIRS = {")": "(", "]": "["}


@dataclass(frozen=True)
class Formula:
    """A formula that was read: element counts, charge (elementary charges), state symbol if it has one."""

    text: str
    composition: Mapping[str, float] = field(hash=False)
    charge: int = 0
    state: str | None = None

    @property
    def hill(self) -> str:
        """The sum formula in Hill order, without charge and state."""
        return hill_formula(self.composition)


def split_state(text: str) -> tuple[str, str | None]:
    """A formula without its state symbol, and the symbol: `H2O(l)` gives ("H2O", "l")."""
    match = _STATE.search(text)
    if match is None or match.start() == 0:
        return text, None
    return text[: match.start()], match[1]


@lru_cache(maxsize=4096)
def parse_formula(text: str) -> Formula:
    """Read a formula. Raises FormulaError saying what is wrong and where."""
    stripped = text.strip()
    if not stripped:
        raise FormulaError(text, "it is empty")
    if len(stripped) > LONGEST_FORMULA:
        raise FormulaError(text[:30] + "...", f"it is longer than {LONGEST_FORMULA} characters")
    body, state = split_state(stripped)
    body, charge = _split_charge(text, body)
    composition = {} if body == "e" and charge == -1 else _composition(text, body)
    return Formula(stripped, composition, charge, state)


def _split_charge(text: str, body: str) -> tuple[str, int]:
    caret = _CARET_CHARGE.search(body)
    if caret:
        size = int(caret[1] or caret[4] or 1)
        sign = caret[2] or caret[3]
        if size == 0:
            raise FormulaError(text, "a charge of zero; leave it out")
        return body[: caret.start()], size if sign == "+" else -size
    signs = _SIGNS.search(body)
    if signs:
        size = len(signs[0])
        return body[: signs.start()], size if signs[0][0] == "+" else -size
    return body, 0


def _composition(text: str, body: str) -> dict[str, float]:
    total: dict[str, float] = {}
    for number, part in enumerate(_JOIN.split(body)):
        leading = _NUMBER.match(part) if number > 0 else None  # only an added molecule may carry a count
        factor, rest = (float(leading[0]), part[leading.end() :]) if leading else (1.0, part)
        _add(total, _read_molecule(text, rest), factor)
    return total


def _read_molecule(text: str, body: str) -> dict[str, float]:
    groups: list[dict[str, float]] = [{}]
    brackets: list[str] = []
    last: dict[str, float] | None = None  # what a count that follows multiplies
    position = 0
    while position < len(body):
        token = _TOKEN.match(body, position)
        if token is None:
            raise FormulaError(text, f"{body[position]!r} does not belong in a formula")
        kind, word = token.lastgroup, token[0]
        position = token.end()
        if kind == "count":
            if last is None:
                raise FormulaError(text, f"the count {word} follows nothing that can be counted")
            number = float(word)
            if number == 0.0:
                raise FormulaError(text, "a count of zero")
            _add(groups[-1], last, number - 1.0)
            last = None
        elif kind == "element":
            if word not in ATOMIC_NUMBERS:
                raise FormulaError(text, f"{word} is no element symbol")
            last = {word: 1.0}
            _add(groups[-1], last, 1.0)
        elif kind == "open":
            brackets.append(word)
            groups.append({})
            last = None
        elif kind == "close":
            if not brackets or brackets.pop() != _PAIRS[word]:
                raise FormulaError(text, f"{word!r} closes no bracket")
            last = groups.pop()
            if not last:
                raise FormulaError(text, "an empty bracket")
            _add(groups[-1], last, 1.0)
        else:
            last = None
    if brackets:
        raise FormulaError(text, f"{brackets[-1]!r} is never closed")
    if not groups[0]:
        raise FormulaError(text, "no element in it")
    return groups[0]


def _add(total: dict[str, float], part: Mapping[str, float], factor: float) -> None:
    # Counts are decimal numbers of few digits; rounding keeps 3 * 0.947 from reading 2.8409999999999997.
    for symbol, count in part.items():
        total[symbol] = round(total.get(symbol, 0.0) + factor * count, 12)
