"""Figures that benchmarks measured, as tables: every JSON file of a folder, whatever it holds.

A benchmark leaves a mapping: entries with a plain value are facts, and a list of mappings is a table. Nothing is
computed here, so that a page cannot say more than its files.
"""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

NOTHING = (
    "\nNo measured figures are in this copy of the pages. `python -m tests.benchmarks --help` says how to measure; "
    "JSON files in `gibbsmin/docs/measured/` appear here when the pages are built.\n"
)


def tables(folder: Path) -> str:
    """MyST text with a section for each file, in the order of their names."""
    files = sorted(folder.glob("*.json"))
    if not files:
        return NOTHING
    return "\n".join(line for path in files for line in _section(path))


def _section(path: Path) -> Iterator[str]:
    content = json.loads(path.read_text(encoding="utf-8"))
    title = str(content.pop("title", path.stem.replace("_", " "))) if isinstance(content, dict) else path.stem
    yield f"\n## {title[:1].upper()}{title[1:]}\n"
    yield from _block(content, "")


def _block(content: Any, heading: str) -> Iterator[str]:
    if _is_table(content):
        yield from _table(content, heading)
    elif isinstance(content, dict):
        facts = {key: value for key, value in content.items() if not isinstance(value, dict | list)}
        if heading:
            yield f"\n**{heading}**\n"
        if facts:
            yield from _rows(
                ["quantity", "value"], [[_words(key), _figure(value)] for key, value in facts.items()]
            )
        for key, value in content.items():
            if isinstance(value, dict | list):
                yield from _block(value, _words(key))
    elif isinstance(content, list) and content:
        yield f"\n{heading}: {', '.join(map(_figure, content))}\n"


def _is_table(content: Any) -> bool:
    return isinstance(content, list) and bool(content) and all(isinstance(row, dict) for row in content)


def _table(rows: list[dict[str, Any]], heading: str) -> Iterator[str]:
    if heading:
        yield f"\n**{heading}**\n"
    columns = list(dict.fromkeys(key for row in rows for key in row if not isinstance(row[key], dict | list)))
    yield from _rows(list(map(_words, columns)), [[_figure(row.get(key)) for key in columns] for row in rows])


def _rows(columns: list[str], rows: list[list[str]]) -> Iterator[str]:
    yield ""
    yield f"| {' | '.join(columns)} |"
    yield f"|{'---|' * len(columns)}"
    yield from (f"| {' | '.join(row)} |" for row in rows)
    yield ""


def _words(key: str) -> str:
    return str(key).replace("_", " ").replace("|", "\\|")


def _figure(value: Any) -> str:
    if value is None:
        return ""
    if isinstance(value, float):
        return f"{value:.3g}"
    if isinstance(value, int) and not isinstance(value, bool):
        return f"{value:,}"
    return str(value).replace("|", "\\|").replace("\n", " ")
