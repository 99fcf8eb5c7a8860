"""Builds the index of the shipped species: `python -m gibbsmin.species.build_index`.

The index (`species_data/index.json`) lets a look-up find one record among all files without parsing them. It
holds nothing that is not in the files, and a test compares the two. Run this after any change to the files;
it checks every record on the way and names every fault.
"""

from __future__ import annotations

import json
import sys
from collections import defaultdict
from pathlib import Path
from typing import Any

from gibbsmin.errors import Fault, SpeciesDataError
from gibbsmin.shipped_files import species_data_folder
from gibbsmin.species.library import IndexEntry
from gibbsmin.species.record import Species, plain_words
from gibbsmin.species.record_reader import read_species
from gibbsmin.species.record_store import INDEX_FILE
from gibbsmin.strict_yaml import parse

__all__ = ["index_text", "main"]

_RECORD_START = b"\n- name:"

_ABOUT = (
    "Generated from the YAML files of this folder by `python -m gibbsmin.species.build_index`; do not edit. "
    "A file row is path, bytes, bytes before its first record; a species row is name, aliases, CAS number, "
    "formula, composition, charge, state, radical, lowest and highest temperature in K, file number, byte "
    "offset, bytes, line."
)


def index_text(folder: Path) -> str:
    """The index of all species files of a folder, as text.

    Raises SpeciesDataError with the faults of all files, names that two species share among them.
    """
    files: list[list[Any]] = []
    rows: list[list[Any]] = []
    faults: list[Fault] = []
    meaning: defaultdict[str, list[str]] = defaultdict(list)
    for path in sorted(folder.glob("*/*.yaml")):
        shown = path.relative_to(folder).as_posix()
        content = path.read_bytes()
        species, found = _read(content, shown)
        faults += found
        places = _places(content)
        if not found and len(places) != len(species):
            faults.append(
                Fault(f"found {len(places)} lines that begin '- name:' for {len(species)} records", shown)
            )
            continue
        for each, place in zip(species, places, strict=False):
            entry = IndexEntry.of(each)
            rows.append([*entry._replace(composition=_whole(entry.composition)), len(files), *place])
            meaning[each.name].append(each.name)
            for alias in each.aliases:
                meaning[plain_words(alias)].append(each.name)
        files.append([shown, len(content), places[0][0] if places else len(content)])
    faults += [
        Fault(f"{word!r} means several species: {', '.join(names)}")
        for word, names in meaning.items()
        if len(names) > 1
    ]
    if faults:
        raise SpeciesDataError(faults)
    return _one_row_a_line(files, rows)


def _read(content: bytes, shown: str) -> tuple[list[Species], list[Fault]]:
    document = parse(content.decode("utf-8"), shown)
    if document.faults:
        return [], list(document.faults)
    return read_species(document)


def _places(content: bytes) -> list[tuple[int, int, int]]:
    """Offset, length and first line of every record."""
    starts: list[int] = []
    position = content.find(_RECORD_START)
    while position >= 0:
        starts.append(position + 1)
        position = content.find(_RECORD_START, position + 1)
    ends = [*starts[1:], len(content)]
    return [
        (start, end - start, content.count(b"\n", 0, start) + 1)
        for start, end in zip(starts, ends, strict=True)
    ]


def _whole(composition: Any) -> dict[str, float]:
    return {symbol: int(count) if count == int(count) else count for symbol, count in composition.items()}


def _one_row_a_line(files: list[list[Any]], rows: list[list[Any]]) -> str:
    def lines(values: list[list[Any]]) -> str:
        return ",\n".join(json.dumps(value, ensure_ascii=False, separators=(",", ":")) for value in values)

    about = json.dumps(_ABOUT)
    return f'{{"about":{about},\n"files":[\n{lines(files)}\n],\n"species":[\n{lines(rows)}\n]}}\n'


def main() -> int:
    """Write the index of the shipped species. Returns 0, or 1 when a file has faults."""
    folder = species_data_folder()
    try:
        text = index_text(folder)
    except SpeciesDataError as error:
        print(error, file=sys.stderr)
        return 1
    (folder / INDEX_FILE).write_text(text, encoding="utf-8", newline="\n")
    return 0


if __name__ == "__main__":
    sys.exit(main())
