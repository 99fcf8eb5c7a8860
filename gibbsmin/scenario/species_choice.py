"""Which gases and condensed phases take part: lists, or all of some elements within limits."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from gibbsmin.errors import SpeciesDataError
from gibbsmin.scenario.feed import Feed
from gibbsmin.scenario.model import Axis, SpeciesChoice
from gibbsmin.scenario.reading import Reading
from gibbsmin.scenario.structure import FAULTY
from gibbsmin.scenario.words import listed
from gibbsmin.species.elements import ATOMIC_NUMBERS

if TYPE_CHECKING:
    from gibbsmin.species import Species

ROUNDING = 1e-9
"""Relative; a temperature this little beyond a limit is that limit in another unit."""

LIMITS = ("elements", "leave out", "largest carbon number", "ions", "radicals")
"""Keys that only make sense when the gases are not listed one by one."""


def add_own_species(reading: Reading, data: Mapping[str, Any], folder: Path) -> None:
    """Put the scenario's own records, and those of its files, into the library of this reading."""
    for i, name in enumerate(data.get("files", ())):
        if name is FAULTY:
            continue
        place = ("species", "files", i)
        try:
            reading.library = reading.library.with_file(folder / name)
        except OSError as error:
            reading.fault(place, f"cannot read the species file {name!r}: {error.strerror or error}")
        except SpeciesDataError as error:
            reading.fault(place, f"the species file {name!r} has faults, listed below")
            reading.faults.extend(error.faults)
    if "own" in data:
        from gibbsmin.species import read_species

        records, faults = read_species(reading.document, ("species", "own"))
        reading.faults.extend(faults)
        reading.library = reading.library.with_records(records)


def check_names(reading: Reading, data: Mapping[str, Any]) -> None:
    """Faults of the names in this section alone, for when the feed is not sound."""
    for key in ("gases", "leave out", "condensed", "held back"):
        names = data.get(key, ())
        for i, name in enumerate(() if isinstance(names, str) else names):
            if name is not FAULTY:
                reading.species(name, ("species", key, i))


def choose_species(
    reading: Reading, data: Mapping[str, Any], feed: Feed, temperature: Axis | None
) -> SpeciesChoice | None:
    """The gases that take part, or None after a fault. Expects a sound feed."""
    faults_before = len(reading.faults)
    gases = data.get("gases", "all")
    if gases == "all":
        chosen, rule = _all_gases(reading, data, feed)
    else:
        chosen, rule = _listed_gases(reading, data, gases, feed)
    if len(reading.faults) > faults_before:
        return None
    held_back = _phases(reading, data, "held back", feed)
    condensed = _phases(reading, data, "condensed", feed)
    not_wanted = {each.formula for each in held_back}
    for each in condensed if isinstance(data.get("condensed"), list) else ():
        if each.formula in not_wanted:
            reading.fault(
                ("species", "held back"), f"{each.name} cannot be held back and take part", of_key=True
            )
    condensed = [each for each in condensed if each.formula not in not_wanted]
    policy = data.get("outside data range", "stop")
    chosen, left_out = _within_data(reading, chosen, feed, temperature, policy)
    _check_coverage(reading, [*chosen, *condensed], feed)
    if len(reading.faults) > faults_before:
        return None
    if temperature is not None and policy != "extrapolate":
        span = temperature.values[0], temperature.values[-1]
        reading.remarks += _absences([*condensed, *held_back], *span)
    if condensed:
        rule = f"{rule}; beside them {_phase_rule(data, condensed)}"
    return SpeciesChoice(
        tuple(chosen), rule, policy == "extrapolate", left_out, tuple(condensed), tuple(held_back)
    )


def _phase_rule(data: Mapping[str, Any], condensed: Sequence[Species]) -> str:
    names = ", ".join(each.name for each in condensed)
    kind = "all condensed phases" if data["condensed"] == "all" else "the condensed phases"
    return f"{kind} {names}"


def _phases(reading: Reading, data: Mapping[str, Any], key: str, feed: Feed) -> list[Species]:
    """The condensed substances that a key names; in a list a formula means the solid or liquid, not the gas."""
    names = data.get(key, ())
    if names == "all":
        unwanted = set()
        for i, name in enumerate(data.get("leave out", ())):
            species = None if name is FAULTY else reading.species(name, ("species", "leave out", i))
            if species is not None:
                unwanted.add(species.name)
        found = reading.library.condensed(_elements(reading, data, feed, remark=False))
        return [each for each in found if each.name not in unwanted]
    chosen: list[Species] = []
    for i, name in enumerate(names):
        place = ("species", key, i)
        species = None if name is FAULTY else reading.condensed(name, place)
        if species is None:
            continue
        if _named_in(chosen, species):
            reading.fault(place, f"{species.name} is listed twice (here as {name!r})")
        else:
            chosen.append(species)
    return chosen


def _absences(phases: Sequence[Species], low: float, high: float) -> list[str]:
    return [
        f"{each.name} has data from {each.lower:g} to {each.upper:g} K; outside them it counts as absent"
        for each in phases
        if low < each.lower * (1 - ROUNDING) or high > each.upper * (1 + ROUNDING)
    ]


def _named_in(phases: Sequence[Species], species: Species) -> bool:
    return any(each.name == species.name for each in phases)


def _listed_gases(
    reading: Reading, data: Mapping[str, Any], names: Sequence[Any], feed: Feed
) -> tuple[list[Species], str]:
    for key in LIMITS:
        if key in data:
            reading.fault(
                ("species", key),
                f"{key!r} goes with 'gases: all', but the gases are listed one by one",
                of_key=True,
            )
    chosen: dict[str, Species] = {}
    complete = True
    for i, name in enumerate(names):
        place = ("species", "gases", i)
        species = None if name is FAULTY else reading.species(name, place)
        if species is None:
            complete = False
        elif species.state != "g":
            reading.fault(place, f"{species.name} is a condensed substance; only gases can be listed here")
            complete = False
        elif species.name in chosen:
            reading.fault(place, f"{species.name} is listed twice (here as {name!r})")
        else:
            chosen[species.name] = species
    if complete:
        for name, species in feed.species.items():
            if species.state == "g" and name not in chosen:
                reading.fault(
                    ("species", "gases"),
                    f"{name} is fed but not listed; list it, or leave it out of the feed",
                )
    return list(chosen.values()), "the gases that the file lists"


def _all_gases(reading: Reading, data: Mapping[str, Any], feed: Feed) -> tuple[list[Species], str]:
    elements = _elements(reading, data, feed)
    unwanted: dict[str, int] = {}
    for i, name in enumerate(data.get("leave out", ())):
        species = None if name is FAULTY else reading.species(name, ("species", "leave out", i))
        if species is not None:
            unwanted[species.name] = i
            if species.name in feed.species:
                reading.fault(("species", "leave out", i), f"{species.name} is fed, so it cannot be left out")
    carbon = data.get("largest carbon number")
    ions, radicals = data.get("ions", False), data.get("radicals", True)
    found = reading.library.gases(
        elements,
        largest_carbon_number=None if carbon is None else int(carbon),
        ions=ions,
        radicals=radicals,
    )
    names = {species.name for species in found}
    if data.get("condensed") == "all":
        names |= {species.name for species in reading.library.condensed(elements)}
    for name, i in unwanted.items():
        if name not in names:
            reading.remarks.append(f"leave out: {data['leave out'][i]} would not take part anyway")
    # what is fed takes part, whatever the limits say; in front, where a reader of the results looks first
    fed = [species for species in feed.species.values() if species.state == "g"]
    added = [species.name for species in fed if species.name not in names]
    if added:
        part = "takes part" if len(added) == 1 else "take part"
        reading.remarks.append(f"species: {', '.join(added)} {part} beyond the limits because fed")
    fed_names = {species.name for species in fed}
    rest = [s for s in found if s.name not in fed_names and s.name not in unwanted]
    limits = [f"at most {carbon} carbon {'atom' if carbon == 1 else 'atoms'}"] if carbon is not None else []
    limits += [] if ions else ["no ions"]
    limits += [] if radicals else ["no radicals"]
    limits += [f"without {', '.join(unwanted)}"] if unwanted else []
    return fed + rest, f"all gases of {', '.join(elements)}" + (f" ({'; '.join(limits)})" if limits else "")


def _elements(reading: Reading, data: Mapping[str, Any], feed: Feed, *, remark: bool = True) -> list[str]:
    of_feed = list(dict.fromkeys(e for species in feed.species.values() for e in species.composition))
    if "elements" not in data:
        return of_feed
    given: list[str] = []
    for i, element in enumerate(data["elements"]):
        if element is FAULTY or element in given:
            continue
        if reading.choice(element, ATOMIC_NUMBERS, "the symbol of an element", ("species", "elements", i)):
            given.append(element)
    idle = [each for each in given if each not in of_feed]
    if idle and remark:
        reading.remarks.append(f"elements: no stream holds {', '.join(idle)}, so its gases stay at zero")
    missing = [each for each in of_feed if each not in given]
    if missing and remark:
        reading.fault(
            ("species", "elements"), f"the feed holds {', '.join(missing)}, which is not listed here"
        )
    return given


def _within_data(
    reading: Reading, chosen: list[Species], feed: Feed, temperature: Axis | None, policy: str
) -> tuple[list[Species], dict[str, str]]:
    if temperature is None or policy == "extrapolate":
        return chosen, {}
    low, high = temperature.values[0], temperature.values[-1]
    outside = [s for s in chosen if low < s.lower or high > s.upper]
    if not outside:
        return chosen, {}
    reasons = {s.name: f"its data cover {s.lower:g} to {s.upper:g} K" for s in outside}
    if policy == "leave out":
        for name in reasons:
            if name in feed.species:
                reading.fault(
                    ("species", "outside data range"),
                    f"{name} is fed, so it cannot be left out; {reasons[name]}",
                )
        return [s for s in chosen if s.name not in reasons], reasons
    names = listed(f"{name} ({reason})" for name, reason in reasons.items())
    reading.fault(
        ("grid", "temperature"),
        f"the temperatures, {low:g} to {high:g} K, go beyond the data of {names}; change them, or "
        "set 'outside data range' under 'species' to 'leave out' or 'extrapolate'",
    )
    return chosen, {}


def _check_coverage(reading: Reading, chosen: list[Species], feed: Feed) -> None:
    """Every element of the feed needs a gas or phase to go into."""
    covered = {element for species in chosen for element in species.composition}
    for element in dict.fromkeys(e for s in feed.species.values() for e in s.composition):
        if element not in covered:
            brings = ", ".join(name for name, s in feed.species.items() if element in s.composition)
            reading.fault(("feed",), f"no gas that takes part contains {element}, which {brings} brings in")
