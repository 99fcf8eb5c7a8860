"""A file form's reference from its JSON Schema: one section for each mapping, one row for each key."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import yaml

SCHEMAS = {
    "scenario-reference": "gibbsmin/scenario/schema.json",
    "study-reference": "gibbsmin/study/schema.json",
    "species-file-reference": "gibbsmin/species/species_file.schema.json",
}
"""Page -> schema, from the root of the repository."""

Node = dict[str, Any]


def reference(path: Path) -> str:
    """MyST text of all sections of a schema, the whole file first."""
    schema = json.loads(path.read_text(encoding="utf-8"))
    return "\n" + "\n".join(_sections(schema))


def _sections(schema: Node) -> Iterator[str]:
    yield from _section("The whole file", schema, schema)
    seen: set[str] = set()
    waiting = list(_mappings("", schema, schema))
    while waiting:
        title, node = waiting.pop(0)
        # A definition that several places use is told once, where it comes first.
        identity = json.dumps(node, sort_keys=True)
        if identity in seen:
            continue
        seen.add(identity)
        yield from _section(title, node, schema)
        waiting[:0] = _mappings(title, node, schema)


def _section(title: str, node: Node, schema: Node) -> Iterator[str]:
    yield f"\n## {title}\n"
    if words := node.get("description"):
        yield f"{words}\n"
    if conditions := _conditions(node):
        yield f"{conditions}\n"
    required = set(node.get("required", ()))
    rows = [(key, _resolved(each, schema)) for key, each in node.get("properties", {}).items()]
    if rows:
        yield "| key | what it says | allowed | default |"
        yield "|---|---|---|---|"
        for key, each in rows:
            must = " (required)" if key in required else ""
            default = f"`{_yaml(each['default'])}`" if "default" in each else ""
            yield (
                f"| `{key}`{must} | {_cell(each.get('description', each.get('title', '')))} "
                f"| {_cell(_allowed(each, schema))} | {_cell(default)} |"
            )
        yield ""
    free = node.get("additionalProperties")
    if isinstance(free, dict):
        told = _resolved(free, schema)
        yield f"Any other key is a name of your own; its value: {_allowed(told, schema)}.\n"
    for example in node.get("examples", ())[:2]:
        yield f"```yaml\n{yaml.safe_dump(example, sort_keys=False, allow_unicode=True).rstrip()}\n```\n"


def _mappings(title: str, node: Node, schema: Node) -> Iterator[tuple[str, Node]]:
    """The mappings below one, each with its path as a title."""
    for key, each in node.get("properties", {}).items():
        yield from _mapping_or_list(f"{title} › {key}".removeprefix(" › "), each, schema)
    free = node.get("additionalProperties")
    if isinstance(free, dict):
        yield from _mapping_or_list(f"{title} › (name)".removeprefix(" › "), free, schema)


def _mapping_or_list(title: str, node: Node, schema: Node) -> Iterator[tuple[str, Node]]:
    node = _resolved(node, schema)
    if "properties" in node or isinstance(node.get("additionalProperties"), dict):
        yield title, node
    elif isinstance(node.get("items"), dict):
        yield from _mapping_or_list(f"{title} (each)", node["items"], schema)
    for key in ("anyOf", "oneOf"):
        for choice in node.get(key, ()):
            yield from _mapping_or_list(title, choice, schema)


def _resolved(node: Node, schema: Node) -> Node:
    """The node with what its reference says, its own words first."""
    while "$ref" in node:
        target: Any = schema
        for step in node["$ref"].removeprefix("#/").split("/"):
            target = target[step]
        node = {**target, **{key: value for key, value in node.items() if key != "$ref"}}
    return node


def _allowed(node: Node, schema: Node) -> str:
    node = _resolved(node, schema)
    if "enum" in node:
        return ", ".join(f"`{each}`" for each in node["enum"])
    if "const" in node:
        return f"`{node['const']}`"
    for key in ("anyOf", "oneOf"):
        if key in node:
            return " or ".join(dict.fromkeys(_allowed(each, schema) for each in node[key]))
    kind = node.get("type", "mapping" if "properties" in node else "")
    if kind == "array":
        return f"list of {_allowed(node.get('items', {}), schema) or 'values'}"
    words = {"object": "mapping", "string": "text", "boolean": "true or false", "integer": "whole number"}
    kinds = [kind] if isinstance(kind, str) else kind
    text = " or ".join(words.get(each, each) for each in kinds)
    limits = [
        f"{sign} {node[name]}"
        for name, sign in (
            ("minimum", "at least"),
            ("exclusiveMinimum", "above"),
            ("maximum", "at most"),
            ("exclusiveMaximum", "below"),
        )
        if name in node
    ]
    return ", ".join(filter(None, (text, *limits)))


def _conditions(node: Node) -> str:
    """Which keys must or must not come together, as far as the schema says so with `required` alone."""
    told = []
    for key, words in (("oneOf", "Exactly one of these: "), ("anyOf", "At least one of these: ")):
        groups = [each["required"] for each in node.get(key, ()) if set(each) == {"required"}]
        if groups:
            told.append(
                words + "; ".join(" with ".join(f"`{name}`" for name in group) for group in groups) + "."
            )
    return " ".join(told)


def _yaml(value: Any) -> str:
    """A value as one line of YAML, which is how a file would say it."""
    return json.dumps(value).strip('"')


def _cell(text: object) -> str:
    return " ".join(str(text).split()).replace("|", "\\|")
