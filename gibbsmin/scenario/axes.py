"""The grid: temperature, pressure, and further axes that change the feed."""

from __future__ import annotations

import itertools
import math
from collections.abc import Mapping
from fractions import Fraction
from typing import TYPE_CHECKING, Any, cast

from gibbsmin.scenario.feed import Feed
from gibbsmin.scenario.model import Axis, FeedRatio, FurtherAxis, Measure, RatioTerm
from gibbsmin.scenario.ranges import RANGE_KEYS, AxisValues, read_values
from gibbsmin.scenario.ratios import OXYGEN_DEMAND, FeedEquations, RatioImpossibleError, as_exact
from gibbsmin.scenario.reading import Reading, identifier
from gibbsmin.scenario.structure import FAULTY
from gibbsmin.scenario.units import Quantity, Unit
from gibbsmin.scenario.words import listed
from gibbsmin.strict_yaml import YamlPath

if TYPE_CHECKING:
    from gibbsmin.species import Species

MOST_FEEDS = 10_000
"""Combinations of further-axis values in one scenario; a larger survey is many scenarios."""

RESERVED_NAMES = frozenset(
    """
    temperature pressure species element stream phase reaction point status gap iterations amount
    mole_fraction gas_amount element_potential balance_residual conversion yield selectivity ratio
    equation ln_k reaction_gibbs reaction_enthalpy reaction_entropy reaction_heat_capacity
    shortcut shortcut_error_ln_k shortcut_error_per_cent shortcut_error_kelvin
    alone alone_mole_fraction alone_error alone_reason alone_neglected condensed_activity
    """.split()  # noqa: SIM905  easier to read than twenty quoted words
)
"""Names of the results, which an axis cannot have as well."""

_MEASURES: dict[str, Measure] = {
    "moles of": "moles",
    "atoms of": "atoms",
    "mass of": "mass",
    "oxygen demand of": "oxygen demand",
}
_FURTHER = ("grid", "further axes")


def read_axis(reading: Reading, data: Any, kind: Any) -> Axis | None:
    """The temperature or pressure axis."""
    # The cases of a study share their axes, and a long one in rational numbers takes longer than all the rest.
    key = (repr(data), str(kind), reading.ambient)
    if key in _axes_read:
        return _axes_read[key]
    remarks = len(reading.remarks)
    found = read_values(reading, data, ("grid", kind), kind)
    if found is None:
        return None
    assert found.unit is not None
    axis = Axis(**_axis_fields(kind, found, Fraction(1), "K" if kind == "temperature" else "Pa"))
    if len(reading.remarks) == remarks:  # a remark is due to each scenario that gives cause for it
        if len(_axes_read) >= _AXES_KEPT:
            _axes_read.clear()
        _axes_read[key] = axis
    return axis


_AXES_KEPT = 64
_axes_read: dict[tuple[str, str, Fraction], Axis] = {}


def streams_set_by_axes(reading: Reading, data: Mapping[str, Any]) -> dict[str, str]:
    """Stream -> title of the further axis that changes it; a stream changed twice is a fault."""
    changed: dict[str, str] = {}
    for title, entry in data.items():
        stream, place = _changed_stream(entry, (*_FURTHER, title))
        if stream is None:
            continue
        if stream in changed:
            reading.fault(place, f"the stream {stream!r} is changed by the axis {changed[stream]!r} already")
        else:
            changed[stream] = title
    return changed


def read_further_axes(
    reading: Reading, data: Mapping[str, Any], stream_names: tuple[str, ...], feed: Feed
) -> tuple[FurtherAxis, ...] | None:
    """All further axes, or None after a fault. `stream_names` are those of the file, faulty ones included."""
    names: dict[str, str] = {}
    axes: list[FurtherAxis | None] = []
    for title, entry in data.items():
        place = (*_FURTHER, title)
        name = identifier(title)
        if not name:
            reading.fault(place, f"the axis name {title!r} has no letter or digit", of_key=True)
        elif name.casefold() in RESERVED_NAMES:
            reading.fault(
                place, f"an axis cannot be called {title!r}; the results use that name", of_key=True
            )
        elif name in names:
            reading.fault(
                place, f"the axis {title!r} would be called {name}, as {names[name]!r} is", of_key=True
            )
        names.setdefault(name, title)
        axes.append(_FurtherAxisReader(reading, stream_names, feed, title, name, place).read(entry))
    return None if None in axes else cast("tuple[FurtherAxis, ...]", tuple(axes))


def check_feeds(reading: Reading, axes: tuple[FurtherAxis, ...], feed: Feed) -> None:
    """Every combination of further-axis values must give a feed."""
    combinations = math.prod(len(axis) for axis in axes)
    if combinations > MOST_FEEDS:
        reading.fault(
            _FURTHER,
            f"the further axes give {combinations} feeds, too many for one scenario (at most {MOST_FEEDS})",
        )
        return
    equations = FeedEquations(feed.streams, axes, feed.species)
    impossible: dict[str, tuple[set[Fraction], str]] = {}
    empty: list[Fraction] | None = None
    for values in itertools.product(*(axis.exact_values for axis in axes)):
        try:
            factors = equations.factors(values)
        except RatioImpossibleError as error:
            impossible.setdefault(error.axis, (set(), error.reason))[0].add(error.value)
            continue
        if not any(stream.total * factors.get(name, 1) for name, stream in feed.streams.items()):
            empty = list(values)
    for title, (bad_values, reason) in impossible.items():
        shown = ", ".join(f"{float(each):g}" for each in sorted(bad_values)[:5])
        more = f" and {len(bad_values) - 5} more" if len(bad_values) > 5 else ""
        reading.fault((*_FURTHER, title), f"{title!r} cannot be {shown}{more}: {reason}", of_key=True)
    if empty is not None:
        at = ", ".join(f"{axis.title} = {float(each):g}" for axis, each in zip(axes, empty, strict=True))
        reading.fault(_FURTHER, f"the feed is nothing at {at}", of_key=True)


def _changed_stream(entry: Mapping[str, Any], path: YamlPath) -> tuple[str | None, YamlPath]:
    if "stream" in entry:
        return entry["stream"], (*path, "stream")
    ratio = entry.get("ratio", {})
    return ratio.get("by changing"), (*path, "ratio", "by changing")


def _axis_fields(title: str, found: AxisValues, factor: Fraction, unit: str) -> dict[str, Any]:
    """Fields of an Axis; `factor` turns the values that were read into those of `unit`."""
    display = [found.unit.from_si(value) if found.unit else value for value in found.values]
    exact = tuple(value * factor for value in found.values)
    return {
        "name": identifier(title),
        "title": title,
        "values": tuple(float(value) for value in exact),
        "unit": unit,
        "display_values": tuple(float(value) for value in display),
        "display_unit": found.unit.symbol if found.unit else "1",
        "spacing": found.spacing,
        "exact_values": exact,
    }


class _FurtherAxisReader:
    def __init__(
        self,
        reading: Reading,
        stream_names: tuple[str, ...],
        feed: Feed,
        title: str,
        name: str,
        path: YamlPath,
    ) -> None:
        self.reading = reading
        self.stream_names = stream_names
        self.feed = feed
        self.title = title
        self.name = name
        self.path = path

    def read(self, entry: Mapping[str, Any]) -> FurtherAxis | None:
        ways = [key for key in ("stream", "ratio") if (*self.path, key) in self.reading.document.positions]
        if len(ways) != 1:
            found = "both" if ways else "neither"
            self.reading.fault(
                self.path, f"an axis needs one of 'stream' or 'ratio'; found {found}", of_key=True
            )
            return None
        changed, place = _changed_stream(entry, self.path)
        if changed is None:  # a fault of structure, told already
            return None
        sound = self.reading.choice(changed, self.stream_names, "a stream of the feed", place)
        values_given = {key: entry[key] for key in RANGE_KEYS if key in entry}
        is_stream = ways == ["stream"]
        found_values = read_values(self.reading, values_given, self.path, "amount" if is_stream else None)
        ratio = None if is_stream else self._ratio(entry["ratio"])
        if not sound or found_values is None or (ratio is None and not is_stream):
            return None
        if changed not in self.feed.streams:  # the stream has a fault of its own
            return None
        if is_stream:
            return self._stream_axis(changed, found_values)
        return FurtherAxis(
            **_axis_fields(self.title, found_values, Fraction(1), "1"), stream=changed, ratio=ratio
        )

    def _stream_axis(self, stream: str, found: AxisValues) -> FurtherAxis | None:
        unit = found.unit
        assert unit is not None
        if not self._rate_fits(unit):
            return None
        amounts = self.feed.streams[stream].amounts
        factor = Fraction(1)
        if unit.by_mass:
            total = sum(amounts.values(), Fraction(0))
            mass = sum(x * as_exact(self.feed.species[name].molar_mass) for name, x in amounts.items())
            factor = total / mass
        fields = _axis_fields(self.title, found, factor, "mol/h" if unit.rate else "mol")
        return FurtherAxis(**fields, stream=stream)

    def _rate_fits(self, unit: Unit) -> bool:
        return self.feed.agree_on_rate(self.reading, Quantity(Fraction(0), unit), self.path)

    def _ratio(self, entry: Mapping[str, Any]) -> FeedRatio | None:
        if "of" not in entry or "to" not in entry:
            return None
        numerator = self._term(entry["of"], (*self.path, "ratio", "of"))
        denominator = self._term(entry["to"], (*self.path, "ratio", "to"))
        if numerator is None or denominator is None:
            return None
        return FeedRatio(numerator, denominator)

    def _term(self, entry: Mapping[str, Any], path: YamlPath) -> RatioTerm | None:
        given = [key for key in _MEASURES if (*path, key) in self.reading.document.positions]
        if len(given) != 1:
            found = " and ".join(repr(key) for key in given) or "none of them"
            self.reading.fault(
                path, f"needs one of {listed(repr(key) for key in _MEASURES)}; found {found}", of_key=True
            )
            return None
        key = given[0]
        if key not in entry:
            return None
        streams = self._streams(entry, path)
        if streams is None:
            return None
        names = self._names(key, entry[key], (*path, key), streams)
        return None if names is None else RatioTerm(_MEASURES[key], names, streams)

    def _streams(self, entry: Mapping[str, Any], path: YamlPath) -> tuple[str, ...] | None:
        if "in" not in entry:
            return ()
        streams = _several(entry["in"])
        place = (*path, "in")
        sound = [
            self.reading.choice(each, self.stream_names, "a stream of the feed", place) for each in streams
        ]
        return streams if all(sound) else None

    def _names(
        self, key: str, value: Any, path: YamlPath, streams: tuple[str, ...]
    ) -> tuple[str, ...] | None:
        names = _several(value)
        counted = [
            self.feed.streams[each] for each in streams or self.stream_names if each in self.feed.streams
        ]
        present = {name: self.feed.species[name] for stream in counted for name in stream.amounts}
        if key == "oxygen demand of" and not self._burns(present, path):
            return None
        if names == ("everything",) and key != "atoms of":
            return ()
        where = f"in {' or '.join(streams)}" if streams else "in the feed"
        if key == "atoms of":
            elements = dict.fromkeys(element for each in present.values() for element in each.composition)
            if not self.feed.sound:  # a faulty stream may hold the element
                return names
            sound = [self.reading.choice(name, elements, f"an element {where}", path) for name in names]
            return names if all(sound) else None
        resolved: list[str] = []
        for name in names:
            species = self.reading.species(name, path)
            if species is None:
                return None
            if species.name not in present and self.feed.sound:
                self.reading.fault(path, f"{species.name} is not {where}; there: {', '.join(present)}")
                return None
            resolved.append(species.name)
        return tuple(resolved)

    def _burns(self, present: Mapping[str, Species], path: YamlPath) -> bool:
        """Whether the oxygen demand of all these species is defined."""
        for name, species in present.items():
            odd = [element for element in species.composition if element not in OXYGEN_DEMAND]
            if odd:
                self.reading.fault(
                    path, f"the oxygen demand of {name} is not defined: what {odd[0]} burns to is open"
                )
                return False
        return True


def _several(value: Any) -> tuple[str, ...]:
    return (value,) if isinstance(value, str) else tuple(each for each in value if each is not FAULTY)
