"""The shape of the file against the published schema: keys, kinds of value, words, bounds of plain numbers.

`schema.json` is the only place that says which keys exist and what kind of value each takes; editors
complete from it and this module checks against it. It knows only the part of JSON Schema that `schema.json`
uses, and in exchange gives messages that name the place, what was found, what is allowed and the nearest
valid word. What a schema cannot say (units, species, what fits together) is checked by the other modules.
"""

from __future__ import annotations

import json
import math
from functools import cache
from importlib.resources import files
from typing import Any, TypeAlias

from gibbsmin.errors import Fault
from gibbsmin.scenario.words import listed, nearest, shown
from gibbsmin.strict_yaml import Document, YamlPath

Schema: TypeAlias = dict[str, Any]

_KINDS = {
    "object": "a mapping",
    "array": "a list",
    "string": "text",
    "number": "a number",
    "integer": "a whole number",
    "boolean": "true or false",
}


@cache
def schema() -> Schema:
    """The published JSON Schema of the scenario file."""
    loaded: Schema = json.loads(files(__package__).joinpath("schema.json").read_text(encoding="utf-8"))
    return loaded


LARGEST_NUMBER = 10**300
"""Whole numbers beyond it have no float value, or soon lose it."""


class Faulty:
    """Marks a value that has a fault and was taken out."""


FAULTY = Faulty()


def check_structure(document: Document, rules: Schema | None = None) -> tuple[Any, list[Fault]]:
    """Check a document against the schema of the scenario file, or against other `rules` without references.

    Returns the data without its faulty parts, so that the rest can be checked further (a faulty item of a
    list is replaced by `FAULTY`), and the faults.
    """
    faults: list[Fault] = []
    cleaned = _Walk(document, faults).clean(document.data, rules or schema(), ())
    return ({} if cleaned is FAULTY else cleaned), faults


class _Walk:
    def __init__(self, document: Document, faults: list[Fault]) -> None:
        self.document = document
        self.faults = faults

    def clean(self, value: Any, rule: Schema, path: YamlPath) -> Any:
        rule = _resolved(rule)
        branch = _branch(value, rule)
        if branch is None:
            self._fault(
                path, f"expected {_expectation(rule)}, found {shown(value)}{self._nearest(value, rule)}"
            )
            return FAULTY
        if isinstance(value, dict):
            return self._mapping(value, branch, path)
        if isinstance(value, list):
            return self._list(value, branch, path)
        return self._scalar(value, branch, path)

    def _mapping(self, value: dict[str, Any], rule: Schema, path: YamlPath) -> Any:
        properties: Schema = rule.get("properties", {})
        other = rule.get("additionalProperties", True)
        cleaned: dict[str, Any] = {}
        for key, entry in value.items():
            place = (*path, key)
            if key in properties:
                entry_rule = properties[key]
            elif other is False:
                allowed = f"allowed: {listed(properties)}{nearest(key, properties)}"
                self._fault(place, f"unknown key {key!r}{_inside(path)}; {allowed}", of_key=True)
                continue
            else:
                entry_rule = {} if other is True else other
            result = self.clean(entry, entry_rule, place)
            if result is not FAULTY:
                cleaned[key] = result
        for key in rule.get("required", ()):
            if key not in value:
                # at the key that opens the section; the section's value begins only on the next line
                self._fault(path, f"the key {key!r} is missing{_inside(path)}", of_key=True)
        if not value and rule.get("minProperties"):
            self._fault(path, f"nothing is given{_inside(path)}")
        return cleaned

    def _list(self, value: list[Any], rule: Schema, path: YamlPath) -> Any:
        if len(value) < rule.get("minItems", 0):
            self._fault(path, "the list is empty")
            return FAULTY
        # faulty items keep their place, so that the index of the others still leads to their position
        return [self.clean(item, rule.get("items", {}), (*path, i)) for i, item in enumerate(value)]

    def _scalar(self, value: Any, rule: Schema, path: YamlPath) -> Any:
        if isinstance(value, str):
            if len(value.strip()) < rule.get("minLength", 0):
                self._fault(path, "the text is empty")
                return FAULTY
            return value
        if isinstance(value, bool) or not isinstance(value, int | float):
            return value
        if isinstance(value, int) and abs(value) > LARGEST_NUMBER:
            self._fault(path, f"a number of {len(str(value))} digits is too large")
            return FAULTY
        if not math.isfinite(value):
            self._fault(path, f"expected a finite number, found {value}")
            return FAULTY
        if "minimum" in rule and value < rule["minimum"]:
            self._fault(path, f"expected at least {rule['minimum']:g}, found {value:g}")
            return FAULTY
        if "exclusiveMinimum" in rule and value <= rule["exclusiveMinimum"]:
            self._fault(path, f"expected more than {rule['exclusiveMinimum']:g}, found {value:g}")
            return FAULTY
        if "maximum" in rule and value > rule["maximum"]:
            self._fault(path, f"expected at most {rule['maximum']:g}, found {value:g}")
            return FAULTY
        return value

    def _nearest(self, value: Any, rule: Schema) -> str:
        words = [word for each in rule.get("anyOf", [rule]) for word in _resolved(each).get("enum", ())]
        return nearest(value, words) if isinstance(value, str) else ""

    def _fault(self, path: YamlPath, message: str, *, of_key: bool = False) -> None:
        self.faults.append(self.document.fault(path, message, of_key=of_key))


def _resolved(rule: Schema) -> Schema:
    while "$ref" in rule:
        rule = schema()["$defs"][rule["$ref"].removeprefix("#/$defs/")]
    return rule


def _branch(value: Any, rule: Schema) -> Schema | None:
    """The rule, or the one of its alternatives, whose kind of value this is."""
    if "anyOf" in rule:
        branches = (_branch(value, _resolved(each)) for each in rule["anyOf"])
        return next((branch for branch in branches if branch is not None), None)
    if "enum" in rule:
        return rule if isinstance(value, str) and value in rule["enum"] else None
    kinds = rule.get("type")
    if kinds is None:
        return rule
    return rule if any(_is(value, kind) for kind in ([kinds] if isinstance(kinds, str) else kinds)) else None


def _is(value: Any, kind: str) -> bool:
    if kind == "object":
        return isinstance(value, dict)
    if kind == "array":
        return isinstance(value, list)
    if kind == "string":
        return isinstance(value, str)
    if kind == "boolean":
        return isinstance(value, bool)
    if isinstance(value, bool) or not isinstance(value, int | float):
        return False
    return kind == "number" or isinstance(value, int) or value.is_integer()


def _expectation(rule: Schema) -> str:
    parts: list[str] = []
    for each in rule.get("anyOf", [rule]):
        branch = _resolved(each)
        if "enum" in branch:
            parts += [repr(word) for word in branch["enum"]]
        else:
            kinds = branch.get("type", [])
            parts += [_KINDS[kind] for kind in ([kinds] if isinstance(kinds, str) else kinds)]
    return " or ".join([", ".join(parts[:-1]), parts[-1]]) if len(parts) > 1 else parts[0]


def _inside(path: YamlPath) -> str:
    return f" in {': '.join(str(part) for part in path)}" if path else ""
