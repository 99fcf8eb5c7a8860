"""From a study file to a `Study`, or to one error with every fault of the file and of all its cases."""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping
from dataclasses import replace
from functools import cache
from importlib.resources import files
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING, Any

from gibbsmin.errors import ConditionsError, Fault, ScenarioError, StudyError
from gibbsmin.examples import scenario_file
from gibbsmin.scenario.loading import build_scenario
from gibbsmin.scenario.reading import Reading
from gibbsmin.scenario.structure import FAULTY, check_structure
from gibbsmin.scenario.words import listed, nearest
from gibbsmin.shipped_files import scenario_folder
from gibbsmin.strict_yaml import Document, parse_file
from gibbsmin.study.model import DEFAULT_CHECKED_POINTS, Keep, Study
from gibbsmin.study.placing import BETWEEN_KEYS, PlaceFault, changed
from gibbsmin.study.preparing import Preparing
from gibbsmin.study.variations import Quantity, Variant, Variations

if TYPE_CHECKING:
    from gibbsmin.scenario import Scenario
    from gibbsmin.species import SpeciesLibrary

Progress = Callable[[int], None]
_ENDINGS = (".yaml", ".yml")


@cache
def study_schema() -> dict[str, Any]:
    """The published JSON Schema of the study file."""
    loaded: dict[str, Any] = json.loads(
        files(__package__).joinpath("schema.json").read_text(encoding="utf-8")
    )
    return loaded


def load_study(
    path: str | PathLike[str],
    *,
    library: SpeciesLibrary | None = None,
    progress: Progress | None = None,
) -> Study:
    """Read a study file, and read and check the scenario of each of its cases.

    Args:
        path: the YAML file.
        library: species to choose from (default: the standard library).
        progress: called with the number of cases newly checked.

    Raises StudyError with all faults of the file, its tables and its cases.
    """
    file = Path(path)
    try:
        document = parse_file(file)
    except OSError as error:
        raise StudyError([Fault(f"cannot be read: {error.strerror or error}", str(path))]) from error
    data, faults = check_structure(document, study_schema())
    if not isinstance(document.data, dict):
        found = document.faults or faults or (Fault("the file is empty", str(path)),)
        raise StudyError(found)
    if library is None:
        from gibbsmin.species import standard_library

        library = standard_library()
    reading = Reading(document, library)
    reading.faults += [*document.faults, *faults]
    reader = _StudyReader(reading, data, file.parent, progress or (lambda done: None))
    reader.read()
    if reading.faults:
        raise StudyError(
            sorted(dict.fromkeys(reading.faults), key=lambda f: (f.file, f.line or 0, f.column or 0))
        )
    return Study(
        title=data["title"],
        notes=data.get("notes", ""),
        file=str(path),
        text=file.read_text(encoding="utf-8-sig"),
        cases=tuple(reader.prepared.cases),
        layouts=tuple(reader.prepared.layouts),
        quantities=reader.quantities,
        keep=reader.keep,
        checked_points=int(data.get("cross-check", {}).get("points per case", DEFAULT_CHECKED_POINTS)),
        cases_per_chunk=None if "cases per chunk" not in data else int(data["cases per chunk"]),
    )


def study_file(argument: str) -> Path:
    """The file meant by a study argument: a file if there is one, else the shipped study of that name.

    Raises StudyError if it is neither.
    """
    path = Path(argument)
    if path.is_file():
        return path
    shipped = {each.stem: each for each in sorted(scenario_folder().joinpath("studies").glob("*.yaml"))}
    name = argument.removesuffix(".yaml")
    if name in shipped:
        return shipped[name]
    known = f"shipped: {listed(shipped)}{nearest(name, shipped)}"
    raise StudyError([Fault(f"there is no such file and no shipped study of that name; {known}", argument)])


class _StudyReader:
    def __init__(self, reading: Reading, data: Mapping[str, Any], folder: Path, progress: Progress) -> None:
        self.reading = reading
        self.data = data
        self.folder = folder
        self.progress = progress
        keep = data.get("keep", {})
        further = tuple(dict.fromkeys(each for each in keep.get("further results", ()) if each is not FAULTY))
        self.keep = Keep(keep.get("composition", "key species"), further)
        self.prepared = Preparing(self.keep)
        self.quantities: dict[str, Quantity] = {}
        self._faulty: dict[Fault, list[str]] = {}
        self._names: dict[str, int] = {}

    def read(self) -> None:
        for i, name in enumerate(self.data.get("scenarios", ())):
            if name is not FAULTY:
                for file in self._scenario_files(name, i):
                    self._add_file(file)
        if "variations" in self.data or "base" in self.data:
            self._add_variations()
        elif "quantities" in self.data:
            self.reading.fault(
                ("quantities",), "quantities are named, but there are no variations", of_key=True
            )
        if not self.prepared.cases and not self.reading.faults and not self._faulty:
            self.reading.fault((), "there are no cases: give 'scenarios', or 'base' and 'variations'")
        self._report_faulty()

    def _scenario_files(self, name: str, i: int) -> list[Path]:
        path = self.folder / name
        if path.is_dir():
            found = sorted(each for each in path.iterdir() if each.suffix in _ENDINGS)
            if not found:
                self.reading.fault(("scenarios", i), f"the folder {name!r} holds no scenario file")
            return found
        if not path.is_file():
            self.reading.fault(("scenarios", i), f"there is no scenario file {name!r}")
            return []
        return [path]

    def _add_file(self, file: Path) -> None:
        document = parse_file(file)
        text = file.read_text(encoding="utf-8-sig", errors="replace")
        self._add(file.stem, {}, lambda: self._built(document, text, file.parent), str(file), None)

    def _add_variations(self) -> None:
        for key, other in (("base", "variations"), ("variations", "base")):
            if key not in self.data:
                if key not in (self.reading.document.data or {}):
                    self.reading.fault((other,), f"{other!r} needs {key!r} beside it", of_key=True)
                return
        variations = Variations(self.reading, self.folder)
        variations.read_quantities(self.data.get("quantities", {}))
        faults_before = len(self.reading.faults)
        variants = list(variations.read(self.data["variations"]))
        base = self._base()
        if base is None or len(self.reading.faults) > faults_before:
            return
        document, home = base
        used = dict.fromkeys(name for variant in variants for name in variant.values)
        for name in variations.quantities:
            if name not in used:
                self.reading.fault(("quantities", name), f"{name!r} is not varied anywhere", of_key=True)
        self.quantities = {name: variations.quantities[name] for name in used}
        width = len(str(len(self.prepared.cases) + len(variants)))
        for variant in variants:
            name = variant.name or f"{len(self._names) + 1:0{width}d}"
            self._add(name, variant.values, self._maker(document, home, variant), variant.file, variant.line)

    def _base(self) -> tuple[Document, Path] | None:
        given = self.data["base"]
        file = self.folder / given
        try:
            file = file if file.is_file() else scenario_file(given)
        except ScenarioError as error:
            self.reading.fault(("base",), "; ".join(fault.message for fault in error.faults))
            return None
        document = parse_file(file)
        if not isinstance(document.data, dict):
            self.reading.fault(("base",), f"{given!r} is no scenario")
            self.reading.faults.extend(document.faults)
            return None
        return document, file.parent

    def _maker(self, document: Document, home: Path, variant: Variant) -> Callable[[], Scenario]:
        def make() -> Scenario:
            data = document.data
            for name, value in variant.values.items():
                quantity = self.quantities[name]
                for place in quantity.places:
                    try:
                        data = changed(data, place, quantity.written(value))
                    except PlaceFault as fault:
                        where = f"{name!r} goes to '{BETWEEN_KEYS.join(place)}', but {fault}"
                        raise ScenarioError([Fault(where, variant.file, variant.line)]) from fault
            text = json.dumps(data, ensure_ascii=False)
            # Positions stay those of the base file, where a reader looks for what a value belongs to.
            whole = Document(data, document.file, document.positions, document.key_positions, document.faults)
            return self._built(whole, text, home)

        return make

    def _built(self, document: Document, text: str, home: Path) -> Scenario:
        return build_scenario(document, text, folder=home, library=self.reading.library)

    def _add(
        self,
        name: str,
        values: Mapping[str, Any],
        make: Callable[[], Scenario],
        file: str,
        line: int | None,
    ) -> None:
        if name in self._names:
            self.reading.faults.append(Fault(f"there are two cases called {name!r}", file, line))
        self._names[name] = len(self._names)
        try:
            self.prepared.add(name, values, make())
        except ScenarioError as error:
            for fault in error.faults:
                self._faulty.setdefault(fault, []).append(name)
        except ConditionsError as error:
            self._faulty.setdefault(Fault(str(error), file, line), []).append(name)
        self.progress(1)

    def _report_faulty(self) -> None:
        for fault, cases in self._faulty.items():
            self.reading.faults.append(replace(fault, message=f"{fault.message} ({_in_cases(cases)})"))


def _in_cases(names: list[str]) -> str:
    if len(names) == 1:
        return f"case {names[0]}"
    return f"{len(names)} cases: {', '.join(names[:3])}{' ...' if len(names) > 3 else ''}"
