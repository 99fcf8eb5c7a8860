"""Single records out of the species files, by the places that the index states."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import NamedTuple

from gibbsmin.errors import Fault, SpeciesDataError
from gibbsmin.species.record import Species
from gibbsmin.species.record_reader import SourceHeader, read_header, read_records
from gibbsmin.strict_yaml import parse

__all__ = ["INDEX_FILE", "REBUILD", "Place", "RecordStore"]

INDEX_FILE = "index.json"

REBUILD = "run `python -m gibbsmin.species.build_index`"


class Place(NamedTuple):
    file: int
    offset: int
    length: int
    line: int


class RecordStore:
    """Reads single records out of the species files, by the places that the index states."""

    def __init__(
        self, folder: Path, files: Sequence[tuple[str, int, int]], places: Mapping[str, Place]
    ) -> None:
        self.folder = folder
        self.files = files  # path, size in bytes, size of the header in bytes
        self.places = places
        self.loaded: dict[str, Species] = {}
        self.opened: dict[int, tuple[bytes, SourceHeader]] = {}

    def load(self, name: str) -> Species:
        species = self.loaded.get(name)
        if species is None:
            place = self.places[name]
            content, header = self._file(place.file)
            file = self.files[place.file][0]
            text = content[place.offset : place.offset + place.length].decode("utf-8")
            document = parse(text, file, first_line=place.line)
            found, faults = read_records(document, header)
            if document.faults or faults:
                raise SpeciesDataError((*document.faults, *faults))
            if len(found) != 1 or found[0].name != name:
                raise SpeciesDataError(
                    [Fault(f"{INDEX_FILE} does not fit this file; {REBUILD}", file, place.line)]
                )
            species = self.loaded.setdefault(name, found[0])
        return species

    def _file(self, number: int) -> tuple[bytes, SourceHeader]:
        if number not in self.opened:
            path, size, header_size = self.files[number]
            content = (self.folder / path).read_bytes()
            if len(content) != size:
                raise SpeciesDataError([Fault(f"{INDEX_FILE} does not fit this file; {REBUILD}", path)])
            document = parse(content[:header_size].decode("utf-8"), path)
            header, faults = read_header(document)
            if header is None or document.faults or faults:
                raise SpeciesDataError(
                    (*document.faults, *faults) or [Fault("the key 'source' is missing", path)]
                )
            self.opened[number] = content, header
        return self.opened[number]
