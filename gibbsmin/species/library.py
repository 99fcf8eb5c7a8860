"""Look-up of species by name, alias, CAS number or formula, from an index rather than from all records.

A library knows every species' name, aliases, formula, composition, state and range; the record itself (with
the coefficients) is read when it is first asked for. The rules of a look-up, in order:

1. the name, exactly as written (`CO` is carbon monoxide, `Co` cobalt);
2. an alias or CAS number, whatever its case, spaces and hyphens; a CAS number that a gas and a condensed
   substance share is ambiguous;
3. a formula with a state symbol or a form: `H2O(l)`, `CaO(s)`, `Fe(gamma)`, `H2O(cd)` (all condensed forms);
4. a plain formula: the gas of that composition; of several isomers, the one that is not a radical, if there
   is just one; without such a gas the condensed substance.
"""

from __future__ import annotations

import json
import re
from collections.abc import Collection, Iterable, Iterator, Mapping
from functools import lru_cache
from os import PathLike
from pathlib import Path
from typing import Any, NamedTuple

from gibbsmin.errors import (
    AmbiguousSpeciesError,
    Fault,
    FormulaError,
    SpeciesDataError,
    UnknownSpeciesError,
)
from gibbsmin.shipped_files import species_data_folder
from gibbsmin.species.elements import ATOMIC_NUMBERS, hill_formula
from gibbsmin.species.formula import STATE_SYMBOLS, parse_formula
from gibbsmin.species.record import Species, plain_words
from gibbsmin.species.record_reader import read_file, read_species
from gibbsmin.species.record_store import INDEX_FILE, REBUILD, Place, RecordStore
from gibbsmin.strict_yaml import Document

__all__ = ["IndexEntry", "SpeciesLibrary", "standard_library"]

SUGGESTIONS = 4
"""Names offered when a look-up fails."""

_IN_PARENTHESES = re.compile(r"(?P<base>.+?)\s*\((?P<inside>[^()]+)\)\Z")


class IndexEntry(NamedTuple):
    """What the index knows of a species without reading its record; temperatures in K."""

    name: str
    aliases: tuple[str, ...]
    cas: str | None
    formula: str
    composition: Mapping[str, float]
    charge: int
    state: str
    radical: bool
    lower: float
    upper: float

    @classmethod
    def of(cls, species: Species) -> IndexEntry:
        """The entry of a species that is already read."""
        return cls(
            species.name,
            species.aliases,
            species.cas,
            species.formula,
            species.composition,
            species.charge,
            species.state,
            species.radical,
            species.lower,
            species.upper,
        )


class SpeciesLibrary:
    """A set of species that can be looked up. Made by `standard_library`, extended by the `with_` methods."""

    def __init__(
        self, entries: Iterable[IndexEntry], records: RecordStore, added: Mapping[str, Species]
    ) -> None:
        self._entries = {entry.name: entry for entry in entries}
        self._records = records
        self._added = dict(added)
        self._by_alias: dict[str, list[str]] | None = None
        self._by_composition: dict[tuple[str, int], list[str]] | None = None
        self._restricted: dict[str, Species] = {}

    def __len__(self) -> int:
        return len(self._entries)

    def __contains__(self, name: object) -> bool:
        return name in self._entries

    @property
    def entries(self) -> Collection[IndexEntry]:
        """All species as the index knows them, in the order of the files."""
        return self._entries.values()

    @property
    def added(self) -> tuple[str, ...]:
        """Names of the species that were added to or replaced in the standard library."""
        return tuple(self._added)

    # --- one species ----------------------------------------------------------------------------------------

    def find(self, query: str) -> Species:
        """The species of this name, alias, CAS number or formula; the same object every time.

        Raises:
            UnknownSpeciesError: there is none; it carries suggestions.
            AmbiguousSpeciesError: several species share the formula or CAS number; it carries their names.
        """
        text = query.strip()
        if text in self._entries:
            return self._load(text)
        named = self._named(text)
        if named is not None:
            return self._load(named)
        form = self._find_form(text)
        if form is not None:
            return form
        try:
            formula = parse_formula(text)
        except FormulaError:
            raise UnknownSpeciesError(query, self.suggestions(query)) from None
        if formula.state is None:
            for state in ("g", "condensed"):
                chosen = self._choose(text, (formula.hill, formula.charge), state)
                if chosen is not None:
                    return self._load(chosen)
        raise UnknownSpeciesError(query, self.suggestions(query))

    def find_condensed(self, query: str) -> Species:
        """As `find`, but where a gas has the name or formula too, the solid or liquid is meant.

        Raises as `find`; UnknownSpeciesError too when there is only a gas.
        """
        try:
            found = self.find(query)
        except AmbiguousSpeciesError as error:
            condensed = [name for name in error.candidates if self._entries[name].state != "g"]
            if len(condensed) != 1:
                raise
            found = self._load(condensed[0])
        return found if found.state != "g" else self.find(f"{found.formula}(cd)")

    def _named(self, text: str) -> str | None:
        names = self._alias_map().get(plain_words(text))
        if names is None:
            return None
        if len(names) > 1:  # a CAS number does not tell a gas from its condensed substance
            raise AmbiguousSpeciesError(text, names)
        return names[0]

    def _find_form(self, text: str) -> Species | None:
        """`H2O(l)`, `CaO(cd)`, `Fe(gamma)`, `sulfur(l)`; None when the text is nothing of the kind."""
        if text in self._restricted:
            return self._restricted[text]
        match = _IN_PARENTHESES.match(text)
        if match is None:
            return None
        base, inside = match["base"], match["inside"].strip()
        state = "g" if inside == "g" else "condensed"
        name = self._substance(base, state)
        if name is None:
            return None
        species = self._load(name)
        states = {part.strip() for part in inside.split(",")}
        if inside in ("g", "cd") or (len(states) > 1 and states <= set(STATE_SYMBOLS)):
            return species
        try:
            species = species.only(inside)
        except UnknownSpeciesError as error:
            raise UnknownSpeciesError(text, error.suggestions) from None
        # `S(l)` and `sulfur(l)` are one object, as every species is.
        species = self._restricted.setdefault(species.name, species)
        self._restricted[text] = species
        return species

    def _substance(self, base: str, state: str) -> str | None:
        """Name of the substance of a state whose alias or formula is `base`."""
        aliased = [
            name
            for name in self._alias_map().get(plain_words(base), ())
            if self._entries[name].state == state
        ]
        if len(aliased) == 1:
            return aliased[0]
        try:
            formula = parse_formula(base)
        except FormulaError:
            return None
        if formula.state is not None:
            return None
        return self._choose(base, (formula.hill, formula.charge), state)

    def _choose(self, text: str, key: tuple[str, int], state: str) -> str | None:
        names = [name for name in self._composition_map().get(key, ()) if self._entries[name].state == state]
        if len(names) < 2:
            return names[0] if names else None
        if text != key[0]:  # the formula shows structure, so take it at its word
            same = [name for name in names if self._entries[name].formula == text]
            if len(same) == 1:
                return same[0]
        stable = [name for name in names if not self._entries[name].radical]
        if len(stable) == 1:
            return stable[0]
        raise AmbiguousSpeciesError(text, stable or names)

    def suggestions(self, query: str, count: int = SUGGESTIONS) -> tuple[str, ...]:
        """Names nearest to a misspelt one, best first."""
        import difflib  # a quarter of the import time of this module, and only failures need it

        wanted = plain_words(query)
        by_word: dict[str, str] = {}
        for word, names in self._alias_map().items():
            by_word.setdefault(word, names[0])
        for name in self._entries:
            by_word.setdefault(plain_words(name), name)
        alike = {wanted, wanted.replace("0", "o")}
        but_for_case_or_zero = [
            entry
            for entry in self._entries.values()
            if not alike.isdisjoint((plain_words(entry.name), plain_words(entry.formula)))
        ]
        if but_for_case_or_zero:  # co2, c4h10; H20, C02
            gases_first = sorted(but_for_case_or_zero, key=lambda entry: entry.state != "g")
            return tuple(entry.name for entry in gases_first[:count])
        near = difflib.get_close_matches(wanted, by_word, n=2 * count, cutoff=0.7)
        shown = (
            f"{by_word[word]} ({self._spelling(by_word[word], word)})"
            if plain_words(by_word[word]) != word
            else by_word[word]
            for word in near
        )
        return tuple(dict.fromkeys(shown))[:count]

    def _spelling(self, name: str, word: str) -> str:
        entry = self._entries[name]
        return next((alias for alias in entry.aliases if plain_words(alias) == word), word)

    # --- many species ---------------------------------------------------------------------------------------

    def search(self, text: str = "") -> list[IndexEntry]:
        """Entries that match a text, best first: names, then aliases and formulas, then parts of either.

        An empty text matches everything. Nothing is raised when nothing matches.
        """
        wanted = text.strip()
        if not wanted:
            return list(self._entries.values())
        ranked = [
            (rank, number, entry)
            for number, entry in enumerate(self._entries.values())
            if (rank := _rank(entry, wanted, plain_words(wanted))) is not None
        ]
        return [entry for _, _, entry in sorted(ranked, key=lambda item: item[:2])]

    def gases(
        self,
        elements: Iterable[str],
        *,
        exclude: Iterable[str] = (),
        largest_carbon_number: int | None = None,
        ions: bool = False,
        radicals: bool = True,
    ) -> list[Species]:
        """All gases that consist of some of these elements, in the order of the files.

        Args:
            elements: element symbols; `D` (deuterium) counts as an element of its own.
            exclude: names, aliases or formulas to leave out.
            largest_carbon_number: leave out gases with more carbon atoms.
            ions: include charged species and the electron.
            radicals: include species marked as radicals (see `radicals.py` for what that means).

        Raises:
            FormulaError: a symbol that is no element.
            UnknownSpeciesError, AmbiguousSpeciesError: by `exclude`.
        """
        wanted = _element_set(elements)
        excluded = self._names_of(exclude)
        return [
            self._load(entry.name)
            for entry in self._entries.values()
            if entry.state == "g"
            and entry.composition.keys() <= wanted
            and (ions or entry.charge == 0)
            and (radicals or not entry.radical)
            and (largest_carbon_number is None or entry.composition.get("C", 0) <= largest_carbon_number)
            and entry.name not in excluded
        ]

    def condensed(self, elements: Iterable[str], *, exclude: Iterable[str] = ()) -> list[Species]:
        """All pure condensed substances that consist of some of these elements; arguments as for `gases`."""
        wanted = _element_set(elements)
        excluded = self._names_of(exclude)
        return [
            self._load(entry.name)
            for entry in self._entries.values()
            if entry.state == "condensed"
            and entry.composition.keys() <= wanted
            and entry.name not in excluded
        ]

    def _names_of(self, queries: Iterable[str]) -> set[str]:
        if isinstance(queries, str):
            queries = (queries,)
        return {self.find(query).name for query in queries}

    # --- additions ------------------------------------------------------------------------------------------

    def with_records(self, records: Mapping[str, Any] | Iterable[Species]) -> SpeciesLibrary:
        """This library with species added; one that has the name of an old one replaces it.

        Args:
            records: species, or a mapping of the form of a species file (keys `source` and `species`).

        Raises:
            SpeciesDataError: a mapping with faults, all listed.
        """
        if isinstance(records, Mapping):
            species, faults = read_species(Document(dict(records)))
            if faults:
                raise SpeciesDataError(faults)
        else:
            species = list(records)
        added = {**self._added, **{each.name: each for each in species}}
        entries = {**self._entries, **{each.name: IndexEntry.of(each) for each in species}}
        return SpeciesLibrary(entries.values(), self._records, added)

    def with_file(self, path: str | PathLike[str]) -> SpeciesLibrary:
        """This library with the species of a file added. Raises SpeciesDataError, OSError."""
        return self.with_records(read_file(path))

    # --- inner ----------------------------------------------------------------------------------------------

    def _load(self, name: str) -> Species:
        return self._added.get(name) or self._records.load(name)

    def _alias_map(self) -> dict[str, list[str]]:
        if self._by_alias is None:
            names: dict[str, list[str]] = {}
            for entry in self._entries.values():
                for alias in entry.aliases:
                    names.setdefault(plain_words(alias), []).append(entry.name)
                if entry.cas is not None:
                    names.setdefault(plain_words(entry.cas), []).append(entry.name)
            for name in self._added:  # an alias the user gives means the user's species
                for alias in self._entries[name].aliases:
                    names[plain_words(alias)] = [name]
            self._by_alias = names
        return self._by_alias

    def _composition_map(self) -> dict[tuple[str, int], list[str]]:
        if self._by_composition is None:
            names: dict[tuple[str, int], list[str]] = {}
            for entry in self._entries.values():
                names.setdefault((hill_formula(entry.composition), entry.charge), []).append(entry.name)
            self._by_composition = names
        return self._by_composition


@lru_cache(maxsize=1)
def standard_library() -> SpeciesLibrary:
    """The species that travel with the package. Reads the index only; records follow when asked for.

    Raises SpeciesDataError when the index is missing or unreadable.
    """
    return _read_library(species_data_folder())


def _read_library(folder: Path) -> SpeciesLibrary:
    try:
        index = json.loads((folder / INDEX_FILE).read_text(encoding="utf-8"))
    except FileNotFoundError:
        raise SpeciesDataError(
            [Fault(f"the index of the species is missing; {REBUILD}", INDEX_FILE)]
        ) from None
    except ValueError:
        raise SpeciesDataError(
            [Fault(f"the index of the species is not readable; {REBUILD}", INDEX_FILE)]
        ) from None
    entries: list[IndexEntry] = []
    places: dict[str, Place] = {}
    for row in index["species"]:
        entry = IndexEntry(*row[:10])
        entries.append(entry)
        places[entry.name] = Place(*row[10:])
    files = [(path, size, header) for path, size, header in index["files"]]
    return SpeciesLibrary(entries, RecordStore(folder, files, places), {})


def _element_set(elements: Iterable[str]) -> set[str]:
    wanted = {elements} if isinstance(elements, str) else set(elements)
    for symbol in sorted(wanted):
        if symbol not in ATOMIC_NUMBERS:
            raise FormulaError(symbol, "not the symbol of an element")
    return wanted


def _rank(entry: IndexEntry, text: str, word: str) -> int | None:
    if entry.name == text:
        return 0
    words = [plain_words(alias) for alias in _all_names(entry)]
    if entry.formula == text or word in words or entry.cas == text:
        return 1
    if hill_formula(entry.composition) == text:
        return 2
    if entry.formula.startswith(text) or any(each.startswith(word) for each in words):
        return 3
    if text in entry.name or (len(word) > 2 and any(word in each for each in words)):
        return 4
    return None


def _all_names(entry: IndexEntry) -> Iterator[str]:
    yield entry.name
    yield from entry.aliases
