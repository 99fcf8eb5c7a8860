"""Where a varied value goes: a place in a scenario, written as its keys with ' / ' between them."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, TypeAlias

from gibbsmin.scenario.words import listed, nearest

BETWEEN_KEYS = " / "
Place: TypeAlias = tuple[str, ...]


class PlaceFault(ValueError):  # noqa: N818  caught at once and turned into a Fault with its line
    """A place that the scenario does not have; the message says which key is missing and what there is."""


def read_place(text: str) -> Place:
    """'grid / pressure' as ('grid', 'pressure')."""
    return tuple(key.strip() for key in text.split(BETWEEN_KEYS))


def changed(data: Any, place: Place, value: Any) -> Any:
    """The scenario's data with `value` at `place`; what lies off the way there is shared, not copied.

    The last key may be new; those before it must be there. A number picks an item of a list.

    Raises PlaceFault.
    """
    key, *rest = place
    if isinstance(data, list):
        if not key.isdecimal() or not int(key) < len(data):
            raise PlaceFault(f"{key!r} is no item of a list of {len(data)}; items count from 0")
        at = int(key)
        return [*data[:at], changed(data[at], tuple(rest), value) if rest else value, *data[at + 1 :]]
    if not isinstance(data, Mapping):
        raise PlaceFault(f"there is nothing inside {data!r} that could be called {key!r}")
    if not rest:
        return {**data, key: value}
    if key not in data:
        raise PlaceFault(f"the base scenario has no {key!r} here; there: {listed(data)}{nearest(key, data)}")
    return {**data, key: changed(data[key], tuple(rest), value)}
