"""Values of one axis: a single value, a list, or a range with a step, a number of points or a factor.

Linear ranges are formed in rational numbers, so 2.5 to 4 by 0.1 has the value 3.3 and not 3.3000000000000003.
Inner points of a logarithmic range are rounded to nine digits, so that they do not depend on the machine's
logarithm in their last bits.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from gibbsmin.scenario.model import Spacing
from gibbsmin.scenario.ratios import as_exact
from gibbsmin.scenario.reading import Reading, out_of_bounds
from gibbsmin.scenario.structure import FAULTY
from gibbsmin.scenario.units import Kind, Quantity, Unit, UnitFault, split_quantity
from gibbsmin.strict_yaml import YamlPath

MOST_VALUES = 100_000
"""Values on one axis; more is a slip of the pen (a step in the wrong unit)."""

RANGE_KEYS = ("values", "from", "to", "step", "points", "factor", "spacing", "unit")

_DIFFERENCE: dict[Kind, Kind] = {
    "temperature": "temperature difference",
    "pressure": "pressure difference",
    "amount": "amount",
}


@dataclass(frozen=True)
class AxisValues:
    """Values in SI, ascending and distinct; `unit` is None for a ratio."""

    values: tuple[Fraction, ...]
    unit: Unit | None
    spacing: Spacing


def read_values(reading: Reading, value: Any, path: YamlPath, kind: Kind | None) -> AxisValues | None:
    """Values of an axis at `path`, or None after a fault. `kind` is None for a ratio, a plain number."""
    return _AxisReader(reading, kind).read(value, path)


class _AxisReader:
    def __init__(self, reading: Reading, kind: Kind | None) -> None:
        self.reading = reading
        self.kind = kind

    def read(self, value: Any, path: YamlPath) -> AxisValues | None:
        if not isinstance(value, Mapping):
            return self._list(value, path, None)
        if self.kind is None and "unit" in value:
            self.reading.fault((*path, "unit"), "a ratio has no unit", of_key=True)
            return None
        if "values" in value:
            clash = [key for key in RANGE_KEYS[1:-1] if key in value]
            if clash:
                self.reading.fault((*path, clash[0]), f"{clash[0]!r} does not go with 'values'", of_key=True)
                return None
            return self._list(value["values"], (*path, "values"), value.get("unit"))
        if "from" not in value and "to" not in value:
            self.reading.fault(path, "no values are given; give 'values', or 'from' and 'to'", of_key=True)
            return None
        return self._range(value, path)

    def _list(self, value: Any, path: YamlPath, unit: str | None) -> AxisValues | None:
        items = list(enumerate(value)) if isinstance(value, list) else [(None, value)]
        found: list[Quantity | Fraction] = []
        seen: dict[Fraction, Any] = {}
        sound = True
        for i, item in items:
            place = path if i is None else (*path, i)
            quantity = None if item is FAULTY else self._value(item, place, unit)
            if quantity is None:
                sound = False
            elif _si(quantity) in seen:
                self.reading.fault(place, f"{item} is listed twice (already as {seen[_si(quantity)]})")
                sound = False
            else:
                seen[_si(quantity)] = item
                found.append(quantity)
        if not sound:
            return None
        if len(found) > MOST_VALUES:
            self.reading.fault(path, f"{len(found)} values are too many for one axis (at most {MOST_VALUES})")
            return None
        return AxisValues(tuple(sorted(_si(each) for each in found)), _unit(found[0]), "list")

    def _range(self, value: Mapping[str, Any], path: YamlPath) -> AxisValues | None:
        if not self._keys_fit(value, path):
            return None
        unit = value.get("unit")
        first = self._value(value["from"], (*path, "from"), unit)
        last = self._value(value["to"], (*path, "to"), unit)
        if first is None or last is None:
            return None
        low, high = _si(first), _si(last)
        if low >= high:
            self.reading.fault(
                (*path, "to"),
                f"the range must ascend, but 'to' ({value['to']}) is not above 'from' ({value['from']})",
            )
            return None
        logarithmic = value.get("spacing") == "logarithmic" or "factor" in value
        if logarithmic and low <= 0:
            self.reading.fault((*path, "from"), "a logarithmic range cannot start at zero")
            return None
        if "step" in value:
            values = self._by_step(value, path, first, last)
        elif "factor" in value:
            values = self._by_factor(value, path, low, high)
        else:
            values = self._by_points(value, path, low, high, logarithmic)
        if values is None:
            return None
        return AxisValues(values, _unit(first), "logarithmic" if logarithmic else "linear")

    def _keys_fit(self, value: Mapping[str, Any], path: YamlPath) -> bool:
        missing = [key for key in ("from", "to") if key not in value]
        if missing:
            self.reading.fault(path, f"a range needs 'from' and 'to'; {missing[0]!r} is missing", of_key=True)
            return False
        given = [key for key in ("step", "points", "factor") if key in value]
        if len(given) != 1:
            found = " and ".join(repr(key) for key in given) or "none of them"
            self.reading.fault(
                path, f"a range needs one of 'step', 'points' or 'factor'; found {found}", of_key=True
            )
            return False
        if given == ["step"] and value.get("spacing") == "logarithmic":
            self.reading.fault(
                (*path, "step"), "a logarithmic range takes 'points' or 'factor', not 'step'", of_key=True
            )
            return False
        if given == ["factor"] and value.get("spacing") == "linear":
            self.reading.fault(
                (*path, "factor"), "a linear range takes 'points' or 'step', not 'factor'", of_key=True
            )
            return False
        return True

    def _by_step(
        self, value: Mapping[str, Any], path: YamlPath, first: Quantity | Fraction, last: Quantity | Fraction
    ) -> tuple[Fraction, ...] | None:
        place = (*path, "step")
        step: Quantity | Fraction | None
        if isinstance(first, Quantity):
            step = self._difference(value["step"], place, value.get("unit") or first.unit.symbol)
        else:
            step = self._value(value["step"], place, None)
        if step is None:
            return None
        width, size = _si(last) - _si(first), _si(step)
        if size <= 0:
            self.reading.fault(place, f"the step must be more than zero, found {value['step']}")
            return None
        if size > width:
            self.reading.fault(
                place,
                f"the step ({value['step']}) is larger than the range from {value['from']} to {value['to']}",
            )
            return None
        steps = width // size
        if steps >= MOST_VALUES:
            self.reading.fault(
                place, f"the step gives {steps + 1} values, too many for one axis (at most {MOST_VALUES})"
            )
            return None
        values = tuple(_si(first) + i * size for i in range(int(steps) + 1))
        if values[-1] != _si(last):
            end = values[-1] if not isinstance(first, Quantity) else first.unit.from_si(values[-1])
            self.reading.remarks.append(
                f"{_title(path)}: {value['to']} is no whole number of steps from {value['from']}; "
                f"the last value is {float(end):g}"
            )
        return values

    def _by_points(
        self, value: Mapping[str, Any], path: YamlPath, low: Fraction, high: Fraction, logarithmic: bool
    ) -> tuple[Fraction, ...] | None:
        points = int(value["points"])
        if points > MOST_VALUES:
            self.reading.fault(
                (*path, "points"), f"{points} values are too many for one axis (at most {MOST_VALUES})"
            )
            return None
        steps = points - 1
        if not logarithmic:
            return tuple(low + (high - low) * i / steps for i in range(points))
        ratio = math.log(high / low)
        inner = tuple(_rounded(float(low) * math.exp(ratio * i / steps)) for i in range(1, steps))
        return self._distinct((low, *inner, high), (*path, "points"))

    def _by_factor(
        self, value: Mapping[str, Any], path: YamlPath, low: Fraction, high: Fraction
    ) -> tuple[Fraction, ...] | None:
        place = (*path, "factor")
        factor = float(value["factor"])
        # the small addition lets 1, 2, 4, 8 reach 8 although the logarithms are rounded
        steps = math.floor(math.log(high / low) / math.log(factor) + 1e-9)
        if steps < 1:
            self.reading.fault(place, f"the factor ({value['factor']}) leads beyond {value['to']} at once")
            return None
        if steps >= MOST_VALUES:
            self.reading.fault(
                place, f"the factor gives {steps + 1} values, too many for one axis (at most {MOST_VALUES})"
            )
            return None
        exact = as_exact(factor)
        values = [low]
        for i in range(1, steps + 1):
            # exact powers while they are short (1, 2, 4 ...), else rounded like the inner points above
            power = exact**i if steps < 40 else as_exact(factor**i)
            values.append(low * power if steps < 40 else _rounded(float(low * power)))
        return self._distinct(tuple(values), place)

    def _distinct(self, values: tuple[Fraction, ...], place: YamlPath) -> tuple[Fraction, ...] | None:
        if len({float(each) for each in values}) < len(values):
            self.reading.fault(place, "the values lie so close together that some are the same number")
            return None
        return values

    def _value(self, item: Any, path: YamlPath, unit: str | None) -> Quantity | Fraction | None:
        if self.kind is not None:
            return self.reading.quantity(item, self.kind, path, unit=unit)
        number, word = _plain(item)
        if number is None or word:
            self.reading.fault(path, f"expected a plain number (a ratio has no unit), found {item!r}")
            return None
        problem = out_of_bounds(number, None)
        if problem:
            self.reading.fault(path, f"the ratio {item} {problem}")
            return None
        return number

    def _difference(self, item: Any, path: YamlPath, unit: str) -> Quantity | None:
        assert self.kind is not None
        return self.reading.quantity(
            item, _DIFFERENCE[self.kind], path, unit=None if isinstance(item, str) else unit
        )


def _plain(item: Any) -> tuple[Fraction | None, str]:
    try:
        return split_quantity(item)
    except UnitFault:
        return None, ""


def _si(value: Quantity | Fraction) -> Fraction:
    return value.si if isinstance(value, Quantity) else value


def _unit(value: Quantity | Fraction) -> Unit | None:
    return value.unit if isinstance(value, Quantity) else None


def _rounded(value: float) -> Fraction:
    return as_exact(float(f"{value:.9g}"))


def _title(path: YamlPath) -> str:
    return str(path[-1])
