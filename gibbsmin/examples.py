"""The example scenarios that travel with the package, and what a scenario named on the command line means."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from pathlib import Path

from gibbsmin.errors import Fault, ScenarioError
from gibbsmin.shipped_files import scenario_folder

_ENDINGS = (".yaml", ".yml")


def examples() -> Mapping[str, Path]:
    """Name (the file's name without its ending) -> file of each example, in alphabetical order."""
    return {path.stem: path for path in sorted(scenario_folder().glob("*.yaml"))}


def title_of(path: Path) -> str:
    """The title that a scenario file gives itself, or "" if it has none that can be read."""
    import yaml

    try:
        content = yaml.safe_load(path.read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError, yaml.YAMLError):
        return ""
    return str(content.get("title", "")) if isinstance(content, dict) else ""


def example_named(name: str) -> Path:
    """The file of an example. Raises ScenarioError, with the nearest names, if there is none."""
    path = examples().get(_plain(name))
    if path is None:
        raise ScenarioError([Fault(f"is no example{_nearest(name)}", name)])
    return path


def scenario_file(argument: str) -> Path:
    """The file meant by a scenario argument: a file if there is one, else the shipped example of that name.

    Raises ScenarioError if it is neither.
    """
    path = Path(argument)
    if path.is_file():
        return path
    if path.is_dir():
        raise ScenarioError([Fault("is a folder, not a scenario file", argument)])
    if path.name != argument:
        raise ScenarioError([Fault("there is no such file", argument)])
    example = examples().get(_plain(argument))
    if example is None:
        raise ScenarioError(
            [Fault(f"there is no such file and no such example{_nearest(argument)}", argument)]
        )
    return example


def _nearest(name: str) -> str:
    near = difflib.get_close_matches(_plain(name), examples(), n=3, cutoff=0.75)
    if near:
        return f"; did you mean {' or '.join(near)}?"
    return "; the command `gibbsmin scenarios` lists the examples"


def _plain(name: str) -> str:
    """The name as the examples spell theirs: no ending, words joined by underscores."""
    for ending in _ENDINGS:
        name = name.removesuffix(ending)
    return name.replace("-", "_").replace(" ", "_")
