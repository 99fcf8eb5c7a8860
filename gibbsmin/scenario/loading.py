"""From a scenario file to a `Scenario`, or to one error with every fault of the file in it."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping, Sequence
from fractions import Fraction
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING, Any

from gibbsmin.errors import Fault, ScenarioError
from gibbsmin.scenario.axes import check_feeds, read_axis, read_further_axes, streams_set_by_axes
from gibbsmin.scenario.feed import Feed, read_feed
from gibbsmin.scenario.model import Axis, FurtherAxis, Scenario, SpeciesChoice
from gibbsmin.scenario.reading import Reading
from gibbsmin.scenario.species_choice import add_own_species, check_names, choose_species
from gibbsmin.scenario.structure import check_structure
from gibbsmin.scenario.wanted import read_cross_check, read_output, read_results
from gibbsmin.strict_yaml import Document, parse

if TYPE_CHECKING:
    from gibbsmin.reactions.wanted import ReactionsWanted
    from gibbsmin.species import SpeciesLibrary

LARGEST_FILE = 10_000_000
"""Bytes; a scenario is a few thousand, and a results file opened by mistake should fail at once."""


def load_scenario(path: str | PathLike[str], *, library: SpeciesLibrary | None = None) -> Scenario:
    """Read a scenario file.

    Args:
        path: the YAML file.
        library: species to choose from (default: the standard library).

    Raises ScenarioError, with all faults, when the file cannot be read or is not sound.
    """
    file = str(path)
    try:
        raw = Path(path).read_bytes()
    except OSError as error:
        raise ScenarioError([Fault(f"cannot be read: {error.strerror or error}", file)]) from error
    if len(raw) > LARGEST_FILE:
        raise ScenarioError([Fault(f"is no scenario: {len(raw)} bytes (at most {LARGEST_FILE})", file)])
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        raise ScenarioError([Fault("the file is not UTF-8 text here", file, line)]) from error
    return parse_scenario(text, file=file, library=library)


def parse_scenario(
    text: str,
    *,
    file: str = "",
    folder: str | PathLike[str] | None = None,
    library: SpeciesLibrary | None = None,
) -> Scenario:
    """As `load_scenario`, for text.

    Args:
        text: the YAML text.
        file: its name in messages.
        folder: where species files named in it are looked for (default: beside `file`).
        library: species to choose from (default: the standard library).

    Raises ScenarioError with all faults.
    """
    return build_scenario(parse(text, file), text, folder=folder, library=library)


def build_scenario(
    document: Document,
    text: str,
    *,
    folder: str | PathLike[str] | None = None,
    library: SpeciesLibrary | None = None,
) -> Scenario:
    """As `parse_scenario`, for a document read (or made) already; `text` is what the scenario keeps of it."""
    file = document.file
    if document.data is None and not document.faults:
        raise ScenarioError([Fault("the file is empty", file)])
    data, faults = check_structure(document)
    if not isinstance(document.data, dict):
        raise ScenarioError([*document.faults, *(faults if document.data is not None else ())])
    if library is None:
        from gibbsmin.species import standard_library

        library = standard_library()
    reading = Reading(document, library)
    reading.faults += [*document.faults, *faults]
    home = Path(folder) if folder is not None else Path(file).parent
    scenario = _assemble(reading, data, text, home)
    if scenario is None or reading.faults:
        in_order = sorted(
            dict.fromkeys(reading.faults), key=lambda each: (each.file, each.line or 0, each.column or 0)
        )
        raise ScenarioError(in_order)
    return scenario


def _assemble(reading: Reading, data: Mapping[str, Any], text: str, folder: Path) -> Scenario | None:
    """The scenario, or None when faults leave too little of it; checks as much as can be checked."""
    if "ambient pressure" in data:
        ambient = reading.quantity(data["ambient pressure"], "pressure", ("ambient pressure",))
        if ambient is not None and ambient.unit.symbol.endswith("(g)"):
            reading.fault(
                ("ambient pressure",),
                "the ambient pressure is what gauge pressures start from; give it as an absolute pressure",
            )
        elif ambient is not None:
            reading.ambient = ambient.si
    wanted_species = data.get("species", {})
    add_own_species(reading, wanted_species, folder)
    grid = data.get("grid", {})
    temperature = read_axis(reading, grid["temperature"], "temperature") if "temperature" in grid else None
    pressure = read_axis(reading, grid["pressure"], "pressure") if "pressure" in grid else None

    further = grid.get("further axes", {})
    streams = data.get("feed", {})
    feed = read_feed(reading, streams, streams_set_by_axes(reading, further))
    whole = reading.document.data.get("feed")
    feed.sound = feed.sound and isinstance(whole, dict) and len(streams) == len(whole)
    further_axes = read_further_axes(reading, further, tuple(streams), feed)
    wanted_results = data.get("results", {})
    if not feed.sound or not feed.streams:
        check_names(reading, wanted_species)
        read_results(reading, wanted_results, None, None, pressure)
        _reactions(reading, data, None, None, temperature, (), folder)
        return None
    _check_feed(reading, feed)
    if further_axes is not None and not reading.faults:
        check_feeds(reading, further_axes, feed)
    choice = choose_species(reading, wanted_species, feed, temperature)
    axes = [each for each in (*(further_axes or ()), temperature, pressure) if each is not None]
    results = read_results(reading, wanted_results, feed, choice, pressure, axes)
    reactions = _reactions(reading, data, choice, feed, temperature, further_axes or (), folder)
    if choice is None or reading.faults or temperature is None or pressure is None or further_axes is None:
        return None
    return Scenario(
        title=data["title"],
        notes=data.get("notes", ""),
        file=reading.document.file,
        text=text,
        digest=hashlib.sha256(text.encode()).hexdigest(),
        streams=feed.streams,
        rate=bool(feed.rate),
        temperature=temperature,
        pressure=pressure,
        further_axes=further_axes,
        choice=choice,
        feed_species=feed.species,
        library=reading.library,
        results=results,
        cross_check=read_cross_check(data.get("cross-check", {})),
        output=read_output(data.get("output", {})),
        ambient_pressure=float(reading.ambient),
        remarks=tuple(reading.remarks),
        positions=reading.document.positions,
        reactions=reactions,
    )


def _reactions(
    reading: Reading,
    data: Mapping[str, Any],
    choice: SpeciesChoice | None,
    feed: Feed | None,
    temperature: Axis | None,
    further_axes: Sequence[FurtherAxis],
    folder: Path,
) -> ReactionsWanted | None:
    """What the file asks about reactions; choice, feed and axis are None where they have faults of their own."""
    if "reactions" not in data:
        return None
    from gibbsmin.scenario.reactions import read_reactions  # scenarios without reactions need none of it

    return read_reactions(reading, data["reactions"], choice, feed, temperature, further_axes, folder)


def _check_feed(reading: Reading, feed: Feed) -> None:
    """Each stream on its own: neutral, and within the data of its species at its own temperature."""
    for name, stream in feed.streams.items():
        charge = sum((x * feed.species[s].charge for s, x in stream.amounts.items()), Fraction(0))
        if charge:
            reading.fault(("feed", name), f"{name!r} carries a charge; a stream must be neutral", of_key=True)
        if stream.temperature is None:
            reading.remarks.append(f"{name}: no temperature is given, so no heat duty is worked out")
            continue
        for each in (feed.species[s] for s in stream.amounts):
            if not each.lower <= stream.temperature <= each.upper:
                reading.fault(
                    ("feed", name, "temperature"),
                    f"{stream.temperature:g} K is outside the data of {each.name}, "
                    f"{each.lower:g} to {each.upper:g} K",
                )
