"""The section `reactions`: equations, shortcuts, subsets to compare, measured K and gas analyses."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeVar

from gibbsmin.constants import GAS_CONSTANT
from gibbsmin.errors import MeasurementError, ReactionError, TemperatureRangeError
from gibbsmin.reactions.against_mixture import MixtureTolerance
from gibbsmin.reactions.approach import Analysis, checked_analyses
from gibbsmin.reactions.constant_units import ConstantUnit
from gibbsmin.reactions.equation import Reaction, read_reaction
from gibbsmin.reactions.independence import split_redundant
from gibbsmin.reactions.measured import MeasuredConstants
from gibbsmin.reactions.shortcut_error import Tolerance
from gibbsmin.reactions.shortcuts import ConstantEnthalpy, ConstantHeatCapacity, Correlation, Shortcut
from gibbsmin.reactions.standard import ReactionFunctions, validity
from gibbsmin.reactions.subset import Subset, gas_for
from gibbsmin.reactions.wanted import ReactionsWanted
from gibbsmin.scenario.feed import Feed
from gibbsmin.scenario.measurements import analyses_from_table, measured_from_table
from gibbsmin.scenario.model import Axis, FurtherAxis, SpeciesChoice
from gibbsmin.scenario.reading import Reading
from gibbsmin.scenario.structure import FAULTY
from gibbsmin.scenario.tables import Table, parse_table, read_table
from gibbsmin.strict_yaml import YamlPath

if TYPE_CHECKING:
    from gibbsmin.species import Species

Found = TypeVar("Found")

_WAYS = ("constant enthalpy at", "constant enthalpy through", "constant heat capacity at", "correlation")
_ENERGY_UNITS = {"J/mol": 1.0, "kJ/mol": 1e3, "cal/mol": 4.184, "kcal/mol": 4184.0}
SECTION = "reactions"


def read_reactions(
    reading: Reading,
    data: Mapping[str, Any],
    choice: SpeciesChoice | None,
    feed: Feed | None,
    temperature: Axis | None,
    further_axes: Sequence[FurtherAxis],
    folder: Path,
) -> ReactionsWanted | None:
    """What the section asks for; faults are recorded, so the value counts only when there are none.

    `choice`, `feed` and `temperature` are None where they have faults of their own; what needs them is then not checked.
    """
    reader = _Reader(reading, choice, feed, temperature, bool(further_axes), folder)
    return reader.read(data)


class _Reader:
    def __init__(
        self,
        reading: Reading,
        choice: SpeciesChoice | None,
        feed: Feed | None,
        temperature: Axis | None,
        feed_varies: bool,
        folder: Path,
    ) -> None:
        self.reading = reading
        self.choice = choice
        self.feed = feed
        self.temperature = temperature
        self.feed_varies = feed_varies
        self.folder = folder
        self.reactions: dict[str, Reaction] = {}

    def read(self, data: Mapping[str, Any]) -> ReactionsWanted | None:
        self._equations(data.get("equations", {}))
        tolerances = self._tolerances(data.get("tolerance", {}))
        unit = self._unit(data.get("unit of K", "1"))
        pressure = self._standard_pressure(data)
        shortcuts = self._shortcuts(data.get("shortcuts", {}))
        subsets = self._subsets(data.get("alone", {}))
        measured = self._measured(data.get("measured", {}))
        analyses, analysed, species = self._analyses(data.get("outlet analyses", {}))
        if self.reading.faults or tolerances is None or unit is None or pressure is None:
            return None
        return ReactionsWanted(
            reactions=tuple(self.reactions.values()),
            shortcuts=tuple(shortcuts),
            subsets=tuple(subsets),
            tolerance=tolerances[0],
            mixture_tolerance=tolerances[1],
            standard_pressure=pressure,
            unit=unit,
            measured=tuple(measured),
            analyses=tuple(analyses),
            analysed=tuple(analysed),
            analysis_species=species,
        )

    # --- reactions ------------------------------------------------------------------------------------------

    def _equations(self, data: Mapping[str, Any]) -> None:
        for name, text in data.items():
            path = (SECTION, "equations", name)

            def read(name: str = name, text: str = text) -> Reaction:
                return read_reaction(text, name=name, library=self.reading.library)

            reaction = self._tried(read, path)
            if reaction is None:
                continue
            self.reactions[name] = reaction
            if self.choice is None or self.choice.extrapolate or self.temperature is None:
                continue
            limits = self._tried(lambda reaction=reaction: validity(reaction), path)  # type: ignore[misc]
            low, high = self.temperature.values[0], self.temperature.values[-1]
            if limits is not None and not (
                limits.lower * (1 - 1e-9) <= low and high <= limits.upper * (1 + 1e-9)
            ):
                self.reading.fault(
                    path, f"the grid goes from {low:g} to {high:g} K, the data of this reaction only {limits}"
                )

    def _reaction(self, name: Any, path: YamlPath) -> Reaction | None:
        if name is FAULTY or name is None:
            return None
        if name in self.reactions:
            return self.reactions[name]
        whole = self.reading.document.data[SECTION].get("equations")
        known = list(whole) if isinstance(whole, dict) else list(self.reactions)
        if name not in known:  # else its own fault has been told
            self.reading.choice(name, known, "one of the reactions", path)
        return None

    def _tolerances(self, data: Mapping[str, Any]) -> tuple[Tolerance, MixtureTolerance] | None:
        per_cent, kelvin = data.get("per cent of K"), data.get("kelvin")
        if per_cent is None and kelvin is None:
            per_cent = Tolerance().per_cent_of_K
        default = MixtureTolerance()
        return (
            Tolerance(
                None if per_cent is None else float(per_cent), None if kelvin is None else float(kelvin)
            ),
            MixtureTolerance(
                float(data.get("mole fraction", default.mole_fraction)),
                float(data.get("conversion", default.conversion)),
            ),
        )

    def _unit(self, text: str) -> str | None:
        path = (SECTION, "unit of K")
        for reaction in self.reactions.values():
            found = self._tried(
                lambda reaction=reaction: ConstantUnit.of(text, reaction.gas_change, reaction=reaction.name),  # type: ignore[misc]
                path,
            )
            if found is None:
                return None
        return text

    def _standard_pressure(self, data: Mapping[str, Any]) -> float | None:
        if "standard pressure" not in data:
            return ReactionsWanted(()).standard_pressure
        path = (SECTION, "standard pressure")
        quantity = self.reading.quantity(data["standard pressure"], "pressure", path)
        if quantity is None:
            return None
        if quantity.unit.symbol.endswith("(g)"):
            self.reading.fault(path, "a standard pressure is absolute")
            return None
        return float(quantity.si)

    # --- shortcuts ------------------------------------------------------------------------------------------

    def _shortcuts(self, data: Mapping[str, Any]) -> list[Shortcut]:
        found = []
        for name, entry in data.items():
            path = (SECTION, "shortcuts", name)
            ways = [way for way in _WAYS if way in entry]
            if len(ways) != 1:
                told = " and ".join(map(repr, ways)) or "none"
                self.reading.fault(
                    path, f"needs one of {', '.join(map(repr, _WAYS))}; found {told}", of_key=True
                )
                continue
            reaction = self._reaction(entry.get("reaction"), (*path, "reaction"))
            if reaction is None:
                continue
            shortcut = self._shortcut(name, ways[0], entry, reaction, path)
            if shortcut is not None:
                found.append(shortcut)
        return found

    def _shortcut(
        self, name: str, way: str, entry: Mapping[str, Any], reaction: Reaction, path: YamlPath
    ) -> Shortcut | None:
        place = (*path, way)
        allowed = {"constant enthalpy at": ("K", "enthalpy"), "constant enthalpy through": ("K",)}.get(
            way, ()
        )
        for key in ("K", "enthalpy"):
            if key in entry and key not in allowed:
                self.reading.fault((*path, key), f"{key!r} does not go with {way!r}", of_key=True)
                return None
        unit = entry.get("unit", "1")
        if way == "correlation":
            return self._tried(lambda: Correlation.of(entry[way], reaction, unit=unit, name=name), place)
        if way == "constant enthalpy through":
            return self._secant(name, entry, reaction, unit, path)
        T = self.reading.quantity(entry[way], "temperature", place)
        if T is None:
            return None
        reference = float(T.si)
        if way == "constant heat capacity at":
            return self._tried(lambda: ConstantHeatCapacity.from_data(reaction, reference, name=name), place)
        given = [key for key in ("K", "enthalpy") if (*path, key) in self.reading.document.positions]
        if not given:
            return self._tried(lambda: ConstantEnthalpy.from_data(reaction, reference, name=name), place)
        if len(given) == 1:
            self.reading.fault(
                path, f"{given[0]!r} is given alone; give K and enthalpy, or neither", of_key=True
            )
            return None
        if not {"K", "enthalpy"} <= entry.keys():  # a fault of structure, told already
            return None
        ln_K = self._constants([entry["K"]], [reference], reaction, unit, (*path, "K"))
        enthalpy = self._energy(entry["enthalpy"], (*path, "enthalpy"))
        if ln_K is None or enthalpy is None:
            return None
        return ConstantEnthalpy(name, reaction, reference, ln_K[0], enthalpy / GAS_CONSTANT)

    def _secant(
        self, name: str, entry: Mapping[str, Any], reaction: Reaction, unit: str, path: YamlPath
    ) -> Shortcut | None:
        way = "constant enthalpy through"
        place = (*path, way)
        items = [each for each in entry[way] if each is not FAULTY]
        if len(items) != 2:
            self.reading.fault(place, f"needs two temperatures, found {len(items)}")
            return None
        quantities = [self.reading.quantity(each, "temperature", (*place, i)) for i, each in enumerate(items)]
        T = [float(each.si) for each in quantities if each is not None]
        if len(T) != 2:
            return None
        ln_K: list[float] | None = None
        if "K" in entry:
            values = entry["K"] if isinstance(entry["K"], list) else [entry["K"]]
            if len(values) != 2:
                self.reading.fault((*path, "K"), f"needs two values of K, found {len(values)}")
                return None
            ln_K = self._constants(values, T, reaction, unit, (*path, "K"))
            if ln_K is None:
                return None
        pair = None if ln_K is None else (ln_K[0], ln_K[1])
        return self._tried(
            lambda: ConstantEnthalpy.through(reaction, T[0], T[1], ln_K=pair, name=name), place
        )

    def _constants(
        self, values: Sequence[Any], T: Sequence[float], reaction: Reaction, unit: str, path: YamlPath
    ) -> list[float] | None:
        import math

        for value in values:
            if isinstance(value, bool) or not isinstance(value, int | float) or not value > 0:
                self.reading.fault(path, f"K must be a number above zero, found {value!r}")
                return None
        chosen = self._tried(lambda: ConstantUnit.of(unit, reaction.gas_change, reaction=reaction.name), path)
        if chosen is None:
            return None
        return [
            float(chosen.to_standard(math.log(value), reaction.gas_change, t))
            for value, t in zip(values, T, strict=True)
        ]

    def _energy(self, text: Any, path: YamlPath) -> float | None:
        number, _, unit = str(text).strip().partition(" ")
        factor = _ENERGY_UNITS.get(unit.strip())
        try:
            value = float(number)
        except ValueError:
            factor = None
        if factor is None:
            self.reading.fault(
                path, f"expected a number with one of the units {', '.join(_ENERGY_UNITS)}, found {text!r}"
            )
            return None
        return value * factor

    # --- subsets --------------------------------------------------------------------------------------------

    def _subsets(self, data: Mapping[str, Any]) -> list[Subset]:
        found = []
        for name, members in data.items():
            path = (SECTION, "alone", name)
            reactions = [self._reaction(each, (*path, i)) for i, each in enumerate(members)]
            sound = [each for each in reactions if each is not None]
            if len(sound) != len(members):
                continue
            if self.choice is not None and self._unfit(sound, self.choice.species, path):
                continue
            found.append(Subset(name, tuple(sound)))
        return found

    def _unfit(self, reactions: Sequence[Reaction], gases: Sequence[Species], path: YamlPath) -> bool:
        names = [each.name for each in gases]
        names += [one.name for each in reactions for one in each.species if one.state != "g"]
        for each in reactions:
            missing = [name for name in each.stoichiometry if name not in names]
            if missing:
                self.reading.fault(
                    path, f"{each.name}: {', '.join(missing)} is not among the gases of this scenario"
                )
                return True
        for fed in () if self.feed is None else self.feed.species.values():
            if fed.name not in names and gas_for(fed, gases) is None:
                self.reading.fault(
                    path,
                    f"the feed holds {fed.name}, which takes no part in these reactions and which no gas stands for",
                )
                return True
        _, redundant = split_redundant(reactions, list(dict.fromkeys(names)))
        if redundant:
            self.reading.fault(path, f"the reactions depend on each other: {redundant[0]}; leave one out")
        return bool(redundant)

    # --- measured values ------------------------------------------------------------------------------------

    def _measured(self, data: Mapping[str, Any]) -> list[MeasuredConstants]:
        found = []
        for name, entry in data.items():
            path = (SECTION, "measured", name)
            reaction = self._reaction(entry.get("reaction"), (*path, "reaction"))
            table = self._table(entry, path)
            if reaction is None or table is None:
                continue

            def read(
                table: Table = table, reaction: Reaction = reaction, entry: Any = entry, name: str = name
            ) -> MeasuredConstants:
                return measured_from_table(table, reaction, unit=entry.get("unit", ""), name=name)

            values = self._tried(read, path)
            if values is not None:
                self._inside_data(reaction, values.temperature.tolist(), path)
                found.append(values)
        return found

    def _analyses(self, data: Mapping[str, Any]) -> tuple[list[Analysis], list[Reaction], dict[str, Species]]:
        if not data:
            return [], [], {}
        path = (SECTION, "outlet analyses")
        names = data.get("reactions", list(self.reactions))
        reactions = [self._reaction(each, (*path, "reactions", i)) for i, each in enumerate(names)]
        table = self._table(data, path)
        if table is None:
            return [], [], {}
        feed = self._analysis_feed(data, path)

        def read() -> tuple[list[Analysis], dict[str, Species]]:
            return analyses_from_table(table, self.reading.library, basis=data.get("basis"), feed=feed)

        found = self._tried(read, path)
        analyses, species = found if found is not None else ([], {})
        known = [each for each in reactions if each is not None]
        if self.feed is not None:
            self._tried(lambda: checked_analyses(analyses, known, species), path)
        for each in known:
            self._inside_data(each, [one.temperature for one in analyses], path)
        return analyses, known, species

    def _inside_data(self, reaction: Reaction, temperatures: Sequence[float], path: YamlPath) -> None:
        sound = [T for T in temperatures if 0 < T < float("inf")]
        if sound:
            self._tried(lambda: ReactionFunctions(reaction).ln_K(sound), path)

    def _analysis_feed(self, data: Mapping[str, Any], path: YamlPath) -> dict[str, float] | None:
        """The feed that goes with the analyses: its own, or the scenario's where that does not vary."""
        if "feed" in data:
            return {name: float(amount) for name, amount in data["feed"].items()}
        if self.feed_varies or self.feed is None:
            return None
        total: dict[str, float] = {}
        for stream in self.feed.streams.values():
            for name, amount in stream.amounts.items():
                total[name] = total.get(name, 0.0) + float(amount)
        return total

    def _table(self, entry: Mapping[str, Any], path: YamlPath) -> Table | None:
        given = [key for key in ("file", "table") if key in entry]
        if len(given) != 1:
            told = "both" if given else "neither"
            self.reading.fault(path, f"give the values as 'file' or as 'table'; found {told}", of_key=True)
            return None
        place = (*path, given[0])
        if given == ["file"]:
            return self._tried(lambda: read_table(self.folder / entry["file"], shown_as=entry["file"]), place)
        line = (self.reading.document.position(place) or (0, 0))[0]
        # The text of a block begins on the line below its indicator.
        return self._tried(
            lambda: parse_table(entry["table"], self.reading.document.file, first_line=line + 1), place
        )

    def _tried(self, make: Callable[[], Found], path: YamlPath) -> Found | None:
        """What `make` gives, or None after its error has become a fault at `path`."""
        try:
            return make()
        except MeasurementError as error:
            for each in error.faults:
                if each.line is None and not each.file:
                    self.reading.fault(path, each.message)
                else:
                    self.reading.faults.append(each)
        except ReactionError as error:
            self.reading.fault(path, error.reason)
        except TemperatureRangeError as error:
            self.reading.fault(path, str(error))
        return None
