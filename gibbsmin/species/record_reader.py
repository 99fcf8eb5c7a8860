"""Species files and records read into `Species`, with every fault listed.

The form of a file is described in `species_data/README.md` and, for editors, in `species_file.schema.json`
beside this module. The checks here go further than a schema can: ranges that are reversed or overlap, a
formula that disagrees with the composition, a molar mass that does not follow from it, names used twice.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from os import PathLike
from typing import Any

from gibbsmin.errors import Fault, FormulaError, SpeciesDataError
from gibbsmin.species.checking import Checker, found_text
from gibbsmin.species.elements import ATOMIC_NUMBERS, molar_mass
from gibbsmin.species.formula import parse_formula
from gibbsmin.species.radicals import is_radical
from gibbsmin.species.record import (
    COEFFICIENT_COUNTS,
    ROUNDING_GAP,
    Critical,
    Form,
    FormationEnthalpyUncertainty,
    Interval,
    Species,
    plain_words,
)
from gibbsmin.strict_yaml import Document, YamlPath, parse_file

__all__ = ["MOLAR_MASS_TOLERANCE", "SourceHeader", "read_file", "read_header", "read_species"]

MOLAR_MASS_TOLERANCE = 5e-4
"""Relative; standard atomic weights were revised by up to this since the editions that sources used."""

OVERLAP_ALLOWED = 150.0
"""K by which the ranges of successive forms may overlap; `thermo` places the transition."""

UNITS = {
    "temperature": "K",
    "pressure": "Pa",
    "enthalpy": "J/mol",
    "gas_constant": "J/(mol K)",
    "molar_mass": "g/mol",
}

_STATES = ("g", "l", "cr", "condensed")


@dataclass(frozen=True)
class SourceHeader:
    """What a whole file shares: the publication, its gas constant [J/(mol K)] and reference pressure [Pa]."""

    citation: str
    gas_constant: float
    reference_pressure: float


def read_file(path: str | PathLike[str], *, shown_as: str | None = None) -> list[Species]:
    """All species of a file. Raises SpeciesDataError with every fault, OSError when it cannot be read."""
    document = parse_file(path, shown_as=shown_as)
    if document.data is None and document.faults:
        raise SpeciesDataError(document.faults)
    species, faults = read_species(document)
    if document.faults or faults:
        raise SpeciesDataError((*document.faults, *faults))
    return species


def read_species(document: Document, path: YamlPath = ()) -> tuple[list[Species], list[Fault]]:
    """The species of a mapping with the keys `source`, `units` (optional) and `species` found at `path`.

    Serves a species file (path ()) as well as a section of another file. Returns the species that are sound
    and all faults; faults of the YAML itself stay with the document.
    """
    reader = _Reader(document)
    section = reader.mapping(path, required=("source", "species"), optional=("units",))
    if section is None:
        return [], reader.faults
    header = reader.header(path, section)
    species = reader.records((*path, "species"), section.get("species"), header)
    return species, sorted(reader.faults, key=lambda fault: (fault.line or 0, fault.column or 0))


def read_header(document: Document) -> tuple[SourceHeader | None, list[Fault]]:
    """The header of a file, without its species."""
    reader = _Reader(document)
    data = document.data if isinstance(document.data, dict) else {}
    return reader.header((), data), reader.faults


def read_records(document: Document, header: SourceHeader) -> tuple[list[Species], list[Fault]]:
    """The species of a document that is the list of records alone (an excerpt of a file)."""
    reader = _Reader(document)
    return reader.records((), document.data, header), reader.faults


class _Reader(Checker):
    """Reads the parts of a species file into objects; what has a fault is left out."""

    # --- header -----------------------------------------------------------------------------------------

    def header(self, path: YamlPath, section: Mapping[str, Any]) -> SourceHeader | None:
        if "units" in section and section["units"] != UNITS:
            expected = ", ".join(f"{key}: {unit}" for key, unit in UNITS.items())
            self.fault((*path, "units"), f"only these units are read: {{{expected}}}")
        if "source" not in section:
            return None
        here = (*path, "source")
        source = self.mapping(here, required=("citation", "gas_constant", "reference_pressure"))
        if source is None:
            return None
        known = {
            key: source[key] for key in ("citation", "gas_constant", "reference_pressure") if key in source
        }
        citation = self.text((*here, "citation"), known["citation"]) if "citation" in known else None
        constant, pressure = (
            self.number((*here, key), known[key], positive=True) if key in known else None
            for key in ("gas_constant", "reference_pressure")
        )
        if constant is not None and not 8.3 < constant < 8.33:
            self.fault((*here, "gas_constant"), f"{constant} is not the gas constant in J/(mol K)")
            return None
        if citation is None or constant is None or pressure is None:
            return None
        return SourceHeader(citation, constant, pressure)

    # --- records ----------------------------------------------------------------------------------------

    def records(self, path: YamlPath, value: Any, header: SourceHeader | None) -> list[Species]:
        if not isinstance(value, list):
            if value is not None or self.at(path) is not None:
                self.fault(path, f"expected a list of species, found {found_text(value)}")
            return []
        found: list[Species] = []
        names: dict[str, int] = {}
        for number in range(len(value)):
            here = (*path, number)
            species = self.record(here, header)
            if species is None:
                continue
            first = names.setdefault(species.name, number)
            if first != number:
                self.fault(
                    (*here, "name"),
                    f"{species.name} is in the list twice (entries {first + 1}, {number + 1})",
                )
                continue
            found.append(species)
        return found

    def record(self, path: YamlPath, header: SourceHeader | None) -> Species | None:
        faults_before = len(self.faults)
        record = self.mapping(
            path,
            required=("name", "formula", "composition", "state", "formation_enthalpy", "forms"),
            optional=(
                "charge",
                "radical",
                "aliases",
                "cas",
                "molar_mass",
                "formation_enthalpy_uncertainty",
                "critical",
                "note",
            ),
        )
        if record is None:
            return None
        name = self.text((*path, "name"), record["name"]) if "name" in record else None
        composition = self.composition((*path, "composition"), record.get("composition"))
        charge = record.get("charge", 0)
        if isinstance(charge, bool) or not isinstance(charge, int):
            self.fault((*path, "charge"), f"expected a whole number, found {found_text(charge)}")
            charge = 0
        state = record.get("state")
        if "state" in record and state not in ("g", "condensed"):
            self.fault((*path, "state"), f"expected g or condensed, found {found_text(state)}")
        formula = self.text((*path, "formula"), record["formula"]) if "formula" in record else None
        if formula is not None and composition is not None:
            self.check_formula((*path, "formula"), formula, composition, charge)
        radical = record.get("radical")
        if radical is not None and not isinstance(radical, bool):
            self.fault((*path, "radical"), f"expected true or false, found {found_text(radical)}")
        aliases = self.aliases((*path, "aliases"), record.get("aliases", []))
        cas = self.cas((*path, "cas"), record.get("cas"))
        mass = None
        if composition is not None and (composition or charge == -1):
            mass = molar_mass(composition, charge)
            self.check_mass((*path, "molar_mass"), record.get("molar_mass"), mass)
        enthalpy = None
        if "formation_enthalpy" in record:
            enthalpy = self.number((*path, "formation_enthalpy"), record["formation_enthalpy"])
        forms = self.forms((*path, "forms"), record["forms"], state) if "forms" in record else ()
        uncertainty = self.uncertainty((*path, "formation_enthalpy_uncertainty"), record)
        critical = self.critical((*path, "critical"), record)
        note = self.text((*path, "note"), record["note"]) if "note" in record else ""
        if len(self.faults) > faults_before or header is None:
            return None
        assert name is not None
        assert formula is not None
        assert composition is not None
        assert mass is not None
        assert enthalpy is not None
        codes = "; ".join(dict.fromkeys(form.source for form in forms))
        return Species(
            name=name,
            formula=formula,
            composition=composition,
            charge=charge,
            state=str(state),
            radical=(
                state == "g" and is_radical(formula, composition, charge) if radical is None else radical
            ),
            aliases=tuple(aliases),
            cas=cas,
            molar_mass=mass,
            formation_enthalpy=enthalpy,
            gas_constant=header.gas_constant,
            reference_pressure=header.reference_pressure,
            forms=forms,
            source=f"{header.citation} [{codes}]" if codes else header.citation,
            uncertainty=uncertainty,
            critical=critical,
            note=note or "",
        )

    def composition(self, path: YamlPath, value: Any) -> dict[str, float] | None:
        if value is None and self.at(path) is None:
            return None  # the missing key is a fault already
        if not isinstance(value, dict):
            self.fault(path, f"expected element symbols with counts, found {found_text(value)}")
            return None
        composition: dict[str, float] = {}
        sound = True
        for symbol, count in value.items():
            if symbol not in ATOMIC_NUMBERS:
                self.fault((*path, symbol), f"{symbol!r} is no element symbol", of_key=True)
                sound = False
            number = self.number((*path, symbol), count, positive=True)
            if number is None:
                sound = False
            else:
                composition[symbol] = number
        return composition if sound else None

    def check_formula(self, path: YamlPath, text: str, composition: Mapping[str, float], charge: int) -> None:
        try:
            formula = parse_formula(text)
        except FormulaError as error:
            self.fault(path, str(error))
            return
        if formula.state is not None:
            self.fault(path, f"the state belongs under the key state, not in the formula {text}")
        if dict(formula.composition) != dict(composition):
            self.fault(
                path,
                f"{text} holds {_counts(formula.composition)}, the composition says {_counts(composition)}",
            )
        if formula.charge != charge:
            self.fault(path, f"{text} has the charge {formula.charge:+d}, the key charge says {charge:+d}")

    def check_mass(self, path: YamlPath, stated: Any, mass: float) -> None:
        if stated is None:
            return
        number = self.number(path, stated, positive=True)
        if number is not None and abs(number / 1000.0 / mass - 1.0) > MOLAR_MASS_TOLERANCE:
            self.fault(
                path,
                f"{number} g/mol does not follow from the composition, which gives {mass * 1000:.6g} g/mol",
            )

    def aliases(self, path: YamlPath, value: Any) -> list[str]:
        if not isinstance(value, list):
            self.fault(path, f"expected a list of names, found {found_text(value)}")
            return []
        found: list[str] = []
        for number, entry in enumerate(value):
            text = self.text((*path, number), entry)
            if text is None:
                continue
            if plain_words(text) in map(plain_words, found):
                self.fault((*path, number), f"the alias {text!r} is in the list twice")
            found.append(text)
        return found

    def cas(self, path: YamlPath, value: Any) -> str | None:
        if value is None:
            return None
        if not isinstance(value, str) or not _is_cas(value):
            self.fault(path, f"{found_text(value)} is no CAS number (its check digit must fit)")
            return None
        return value

    def forms(self, path: YamlPath, value: Any, state: Any) -> tuple[Form, ...]:
        if not isinstance(value, list) or not value:
            self.fault(path, f"expected a list of forms, found {found_text(value)}")
            return ()
        if state == "g" and len(value) > 1:
            self.fault(path, f"a gas has one form, found {len(value)}")
        forms = [
            form for number in range(len(value)) if (form := self.form((*path, number), state)) is not None
        ]
        if len(forms) < len(value):
            return ()
        seen: set[tuple[str, str]] = set()
        for number, form in enumerate(forms):
            if (form.state, form.label) in seen:
                self.fault(
                    (*path, number), f"a second form {form.description}; give each form a label of its own"
                )
            seen.add((form.state, form.label))
        for number in range(1, len(forms)):
            below, above = forms[number - 1], forms[number]
            if above.lower < below.lower or above.upper < below.upper:
                self.fault((*path, number), "forms must follow each other by rising temperature")
            elif below.upper - above.lower > OVERLAP_ALLOWED:
                self.fault(
                    (*path, number),
                    f"the range from {above.lower:g} K overlaps that of the form before it, up to "
                    f"{below.upper:g} K, by more than {OVERLAP_ALLOWED:g} K; "
                    "independent polymorphs are entries of their own",
                )
        return tuple(forms)

    def form(self, path: YamlPath, state: Any) -> Form | None:
        faults_before = len(self.faults)
        entry = self.mapping(path, required=("state", "source", "intervals"), optional=("label", "model"))
        if entry is None:
            return None
        own_state = entry.get("state")
        # Without a state of the species that makes sense, its forms are not judged by it.
        allowed = {"g": ("g",), "condensed": ("cr", "l")}.get(str(state), ("g", "cr", "l"))
        if "state" in entry and own_state not in allowed:
            self.fault((*path, "state"), f"expected {' or '.join(allowed)}, found {found_text(own_state)}")
        label = self.text((*path, "label"), entry["label"]) if "label" in entry else ""
        source = self.text((*path, "source"), entry["source"]) if "source" in entry else None
        model = entry.get("model", "NASA-9")
        if model not in COEFFICIENT_COUNTS:
            self.fault(
                (*path, "model"), f"expected {' or '.join(COEFFICIENT_COUNTS)}, found {found_text(model)}"
            )
            return None
        intervals = self.intervals((*path, "intervals"), entry.get("intervals"), model)
        if len(self.faults) > faults_before or not intervals:
            return None
        return Form(
            str(own_state), label or "", intervals, source or "", intervals[0].lower, intervals[-1].upper
        )

    def intervals(self, path: YamlPath, value: Any, model: str) -> tuple[Interval, ...]:
        if not isinstance(value, list) or not value:
            if self.at(path) is not None:
                self.fault(path, f"expected a list of intervals, found {found_text(value)}")
            return ()
        found = [
            each
            for number in range(len(value))
            if (each := self.interval((*path, number), model)) is not None
        ]
        if len(found) == len(value):
            for number in range(1, len(found)):
                if not 0.0 <= found[number].lower - found[number - 1].upper <= ROUNDING_GAP:
                    self.fault(
                        (*path, number, "range"),
                        f"begins at {found[number].lower:g} K where the interval before it ends at "
                        f"{found[number - 1].upper:g} K; intervals of one form must join",
                    )
        return tuple(found)

    def interval(self, path: YamlPath, model: str) -> Interval | None:
        faults_before = len(self.faults)
        entry = self.mapping(path, required=("range", "heat_capacity", "integration"))
        if entry is None:
            return None
        counts = dict(zip(("heat_capacity", "integration"), COEFFICIENT_COUNTS[model], strict=True))
        rows = {
            key: self.row((*path, key), entry[key], count)
            for key, count in {"range": 2, **counts}.items()
            if key in entry
        }
        if "range" in rows and len(rows["range"]) == 2:
            lower, upper = rows["range"]
            if not 0.0 < lower < upper:
                self.fault(
                    (*path, "range"),
                    f"expected two rising temperatures above 0 K, found {lower:g}, {upper:g}",
                )
        if len(self.faults) > faults_before:
            return None
        lower, upper = rows["range"]
        return Interval(lower, upper, (*rows["heat_capacity"], *rows["integration"]), model)

    def row(self, path: YamlPath, value: Any, count: int) -> tuple[float, ...]:
        if not isinstance(value, list) or len(value) != count:
            self.fault(path, f"expected {count} numbers, found {found_text(value)}")
            return ()
        numbers = [self.number((*path, place), entry) for place, entry in enumerate(value)]
        return tuple(number for number in numbers if number is not None)

    def uncertainty(self, path: YamlPath, record: Mapping[str, Any]) -> FormationEnthalpyUncertainty | None:
        if path[-1] not in record:
            return None
        entry = self.mapping(path, required=("half_width", "value", "source"))
        if entry is None or not {"half_width", "value", "source"} <= entry.keys():
            return None
        half_width = self.number((*path, "half_width"), entry["half_width"])
        value = self.number((*path, "value"), entry["value"])
        source = self.text((*path, "source"), entry["source"])
        if half_width is not None and half_width < 0:
            self.fault((*path, "half_width"), f"expected a number not below 0, found {half_width}")
        if half_width is None or value is None or source is None:
            return None
        return FormationEnthalpyUncertainty(half_width, value, source)

    def critical(self, path: YamlPath, record: Mapping[str, Any]) -> Critical | None:
        if path[-1] not in record:
            return None
        entry = self.mapping(
            path, required=("source",), optional=("temperature", "pressure", "acentric_factor")
        )
        if entry is None or "source" not in entry:
            return None
        source = self.text((*path, "source"), entry["source"])
        temperature, pressure = (
            self.number((*path, key), entry[key], positive=True) if key in entry else None
            for key in ("temperature", "pressure")
        )
        factor = (
            self.number((*path, "acentric_factor"), entry["acentric_factor"])
            if "acentric_factor" in entry
            else None
        )
        return Critical(temperature, pressure, factor, source or "")


def _counts(composition: Mapping[str, float]) -> str:
    return " ".join(f"{symbol} {count:g}" for symbol, count in composition.items()) or "no atoms"


def _is_cas(text: str) -> bool:
    parts = text.split("-")
    if len(parts) != 3 or not all(part.isascii() and part.isdigit() for part in parts):
        return False
    if not 2 <= len(parts[0]) <= 7 or len(parts[1]) != 2 or len(parts[2]) != 1:
        return False
    digits = (parts[0] + parts[1])[::-1]
    return sum(place * int(digit) for place, digit in enumerate(digits, start=1)) % 10 == int(parts[2])
