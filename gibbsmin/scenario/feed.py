"""The feed: named streams as amounts of species, exact, all in mol or all in mol/h."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import TYPE_CHECKING, Any

from gibbsmin.scenario.model import Stream
from gibbsmin.scenario.ratios import as_exact
from gibbsmin.scenario.reading import Reading
from gibbsmin.scenario.units import Quantity
from gibbsmin.strict_yaml import YamlPath

if TYPE_CHECKING:
    from gibbsmin.species import Species

SUM_TOLERANCE = Fraction(1, 2)
"""Per cent by which the shares of an analysis may miss 100; rounded analyses do, mistakes miss by more."""

COMPOSITIONS = ("mole per cent", "mass per cent")


@dataclass
class Feed:
    """The streams read so far; `sound` is False when one of them had a fault."""

    streams: dict[str, Stream] = field(default_factory=dict)
    species: dict[str, Species] = field(default_factory=dict)
    rate: bool | None = None
    sound: bool = True
    _rate_from: str = ""

    def agree_on_rate(self, reading: Reading, quantity: Quantity, path: YamlPath) -> bool:
        """Amounts per time and plain amounts do not mix; the first one found decides."""
        unit = quantity.unit
        if self.rate is None:
            self.rate, self._rate_from = unit.rate, unit.symbol
        if unit.rate == self.rate:
            return True
        kind, other = ("a rate", "an amount") if unit.rate else ("an amount", "a rate")
        reading.fault(
            path,
            f"{unit.symbol} is {kind}, but the feed began with {other} ({self._rate_from}); "
            "give everything per time, or nothing",
        )
        return False


def read_feed(reading: Reading, data: Mapping[str, Any], set_by_axis: Mapping[str, str]) -> Feed:
    """All streams. `set_by_axis` maps a stream to the title of the further axis that sets its total."""
    feed = Feed()
    for name, entry in data.items():
        stream = _StreamReader(reading, feed, name, set_by_axis.get(name)).read(entry)
        if stream is None:
            feed.sound = False
        else:
            feed.streams[name] = stream
    if feed.sound and feed.streams and not set_by_axis and all(s.total == 0 for s in feed.streams.values()):
        reading.fault(("feed",), "the feed is nothing: every amount is zero", of_key=True)
        feed.sound = False
    return feed


class _StreamReader:
    def __init__(self, reading: Reading, feed: Feed, name: str, axis: str | None) -> None:
        self.reading = reading
        self.feed = feed
        self.name = name
        self.axis = axis
        self.path: YamlPath = ("feed", name)

    def read(self, entry: Mapping[str, Any]) -> Stream | None:
        temperature = self._state(entry, "temperature")
        pressure = self._state(entry, "pressure")
        amounts, unit = self._amounts(entry)
        if amounts is None:
            return None
        if self.axis is not None and sum(amounts.values()) == 0:
            self.reading.fault(
                self.path,
                f"{self.name!r} is nothing, so the axis {self.axis!r} cannot change it",
                of_key=True,
            )
            return None
        return Stream(
            name=self.name,
            amounts=amounts,
            temperature=None if temperature is None else float(temperature.si),
            pressure=None if pressure is None else float(pressure.si),
            display_unit=unit,
            display_temperature_unit="K" if temperature is None else temperature.unit.symbol,
            display_pressure_unit="Pa" if pressure is None else pressure.unit.symbol,
            axis=self.axis,
        )

    def _state(self, entry: Mapping[str, Any], kind: Any) -> Quantity | None:
        if kind not in entry:
            return None
        return self.reading.quantity(entry[kind], kind, (*self.path, kind))

    def _amounts(self, entry: Mapping[str, Any]) -> tuple[dict[str, Fraction] | None, str]:
        ways = [key for key in ("amounts", *COMPOSITIONS) if key in entry]
        if len(ways) != 1:
            if len(ways) > 1 or not any(self._present(key) for key in ("amounts", *COMPOSITIONS)):
                found = " and ".join(repr(way) for way in ways) or "none of them"
                self.reading.fault(
                    self.path,
                    "a stream needs one of 'amounts', 'mole per cent' or 'mass per cent'; "
                    f"{self.name!r} has {found}",
                    of_key=True,
                )
            return None, ""
        if ways == ["amounts"]:
            if "total" in entry:
                self.reading.fault(
                    (*self.path, "total"),
                    "'total' does not go with 'amounts', which add up by themselves",
                    of_key=True,
                )
            return self._from_amounts(entry["amounts"], entry.get("unit"))
        if "unit" in entry:
            self.reading.fault((*self.path, "unit"), "'unit' goes with 'amounts' only", of_key=True)
        return self._from_composition(entry, ways[0])

    def _present(self, key: str) -> bool:
        """Whether the file has the key, be its value sound or not."""
        return (*self.path, key) in self.reading.document.positions

    def _from_amounts(
        self, entry: Mapping[str, Any], unit: str | None
    ) -> tuple[dict[str, Fraction] | None, str]:
        amounts: dict[str, Fraction] = {}
        shown = ""
        sound = True
        for name, value in entry.items():
            place = (*self.path, "amounts", name)
            species = self._species(name, place, amounts)
            quantity = self.reading.quantity(value, "amount", place, unit=unit)
            agrees = quantity is not None and self.feed.agree_on_rate(self.reading, quantity, place)
            if species is None or quantity is None or not agrees:
                sound = False
                continue
            shown = shown or quantity.unit.symbol
            amounts[species.name] = quantity.si / (
                as_exact(species.molar_mass) if quantity.unit.by_mass else 1
            )
        sound = sound and len(amounts) == len(self.reading.document.data["feed"][self.name]["amounts"])
        return (amounts if sound else None), shown

    def _from_composition(self, entry: Mapping[str, Any], way: str) -> tuple[dict[str, Fraction] | None, str]:
        total = None
        if "total" in entry:
            total = self.reading.quantity(entry["total"], "amount", (*self.path, "total"))
            if total is not None and not self.feed.agree_on_rate(self.reading, total, (*self.path, "total")):
                total = None
        elif self.axis is None and not self._present("total"):
            self.reading.fault(
                self.path,
                f"{self.name!r} has a composition but no 'total', and no further axis sets it",
                of_key=True,
            )
        shares = self._shares(entry[way], way)
        if shares is None or (total is None and ("total" in entry or self.axis is None)):
            return None, ""
        if way == "mass per cent":
            shares = _normalised(
                {n: x / as_exact(self.feed.species[n].molar_mass) for n, x in shares.items()}
            )
        if total is None:
            return shares, ""
        molar_mass = sum(x * as_exact(self.feed.species[n].molar_mass) for n, x in shares.items())
        moles = total.si / molar_mass if total.unit.by_mass else total.si
        return {name: share * moles for name, share in shares.items()}, total.unit.symbol

    def _shares(self, entry: Mapping[str, Any], way: str) -> dict[str, Fraction] | None:
        """Shares that add up to one, by moles or mass as given."""
        shares: dict[str, Fraction] = {}
        rest: str | None = None
        sound = True
        for name, value in entry.items():
            place = (*self.path, way, name)
            species = self._species(name, place, shares)
            if species is None:
                sound = False
                continue
            shares[species.name] = Fraction(0)
            if value == "rest":
                if rest is not None:
                    self.reading.fault(place, "'rest' is written twice; only one species can fill up to 100")
                    sound = False
                rest = species.name
            elif value < 0:
                self.reading.fault(place, f"the share {value} of {name} is negative")
                sound = False
            else:
                shares[species.name] = as_exact(value)
        if not sound or len(shares) < len(self.reading.document.data["feed"][self.name][way]):
            return None
        return self._completed(shares, rest, (*self.path, way))

    def _completed(
        self, shares: dict[str, Fraction], rest: str | None, path: YamlPath
    ) -> dict[str, Fraction] | None:
        total = sum(shares.values(), Fraction(0))
        if rest is not None:
            if total > 100:
                self.reading.fault(path, f"nothing is left for 'rest': the others add up to {float(total):g}")
                return None
            shares[rest] = 100 - total
            return _normalised(shares)
        if abs(total - 100) > SUM_TOLERANCE:
            self.reading.fault(
                path,
                f"the shares add up to {float(total):g}, expected 100 within {float(SUM_TOLERANCE):g}; "
                "write 'rest' for one species to let it fill up",
            )
            return None
        if total != 100:
            self.reading.remarks.append(
                f"{self.name}: the shares add up to {float(total):g} and were scaled to 100"
            )
        return _normalised(shares)

    def _species(self, name: str, place: YamlPath, so_far: Mapping[str, Any]) -> Species | None:
        species = self.reading.species(name, place, of_key=True)
        if species is None:
            return None
        if species.name in so_far:
            self.reading.fault(place, f"{species.name} is given twice (here as {name!r})", of_key=True)
            return None
        self.feed.species.setdefault(species.name, species)
        return species


def _normalised(shares: Mapping[str, Fraction]) -> dict[str, Fraction]:
    total = sum(shares.values(), Fraction(0))
    return {name: share / total for name, share in shares.items()}
