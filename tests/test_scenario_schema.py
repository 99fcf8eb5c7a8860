"""The published schema: valid itself, complete, and agreeing with what the reader accepts."""

from __future__ import annotations

import copy
import json
from collections.abc import Iterator
from typing import Any

import jsonschema
import pytest

from gibbsmin.errors import ScenarioError
from gibbsmin.scenario import parse_scenario
from gibbsmin.scenario.structure import check_structure, schema
from gibbsmin.strict_yaml import parse
from tests.test_scenario_faults import SOUND

VALIDATOR = jsonschema.Draft202012Validator(schema())

JUNK: list[Any] = [
    None,
    5,
    -1.5,
    1e300,
    True,
    "",
    "x",
    "rest",
    "5 K",
    [],
    [1],
    ["x", "x"],
    {},
    {"x": 1},
    {"of": "x"},
    10**350,
    5e-324,
    "1e999 bar",
    "1e-999 kmol/h",
    "1e20 kmol/h",
    "850 degC",
]

FULL = SOUND.replace(
    "  gases: [CH4, H2O, CO, CO2, H2, N2, O2]\n",
    "  gases: all\n  elements: [C, H, O, N]\n  leave out: [CH3OH]\n  largest carbon number: 1\n"
    "  ions: false\n  radicals: false\n  outside data range: stop\n",
).replace("title: Faults\n", "title: Faults\nnotes: none\nambient pressure: 1 atm\n")


def paths(value: Any, path: tuple[Any, ...] = ()) -> Iterator[tuple[Any, ...]]:
    if path:
        yield path
    items = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    for key, entry in items:
        yield from paths(entry, (*path, key))


def variants() -> Iterator[Any]:
    """The full scenario with every value in turn replaced by junk, taken out, or given a strange key."""
    whole = parse(FULL).data
    for path in paths(whole):
        for junk in [*JUNK, "take out", "add"]:
            changed = copy.deepcopy(whole)
            parent = changed
            for key in path[:-1]:
                parent = parent[key]
            if junk == "take out":
                del parent[path[-1]]
            elif junk == "add":
                if not isinstance(parent[path[-1]], dict):
                    continue
                parent[path[-1]]["strange"] = "x"
            else:
                parent[path[-1]] = junk
            yield changed


def test_the_schema_is_valid() -> None:
    jsonschema.Draft202012Validator.check_schema(schema())


def test_every_key_has_a_title_and_a_description() -> None:
    def missing(rule: Any, where: str) -> Iterator[str]:
        if isinstance(rule, dict):
            for key, entry in rule.get("properties", {}).items():
                target = entry
                if "$ref" in entry:
                    target = {**schema()["$defs"][entry["$ref"].removeprefix("#/$defs/")], **entry}
                if not {"title", "description"} <= target.keys():
                    yield f"{where}: {key}"
            for key, entry in rule.items():
                yield from missing(entry, f"{where}/{key}")

    assert list(missing(schema(), "")) == []


def test_structure_check_agrees_with_the_schema_and_nothing_else_escapes() -> None:
    """Two routes to one verdict, an independent validator and ours; and only ScenarioError comes out."""
    seen = {True: 0, False: 0}
    for variant in variants():
        text = json.dumps(variant, indent=1)  # JSON is YAML, and several times as quick to write
        document = parse(text)
        _, faults = check_structure(document)
        valid = VALIDATOR.is_valid(document.data)
        # JSON Schema knows no largest number; we refuse what no float can hold
        too_large = any("digits is too large" in fault.message for fault in faults)
        assert too_large or valid == (not faults), (text, faults)
        seen[valid] += 1
        try:
            parse_scenario(text)
        except ScenarioError as error:
            for fault in error.faults:
                assert fault.message
                assert fault.line is not None, fault
        else:
            assert valid, text
    assert seen[True] > 200, seen
    assert seen[False] > 800, seen


@pytest.mark.parametrize("text", [SOUND, FULL])
def test_sound_files_are_valid(text: str) -> None:
    assert not list(VALIDATOR.iter_errors(parse(text).data))
    parse_scenario(text)
