"""The documentation pages: they build without a warning, and say what the repository says."""

from __future__ import annotations

import importlib.util
import json
import re
import subprocess
import sys
from pathlib import Path
from types import ModuleType

import pytest
import yaml

from tests.report_cases import needed

ROOT = Path(__file__).parents[1]
DOCS = ROOT / "gibbsmin" / "docs"


def module(name: str) -> ModuleType:
    """One of the helpers beside the pages, which are no package."""
    spec = importlib.util.spec_from_file_location(name, DOCS / f"{name}.py")
    assert spec is not None
    assert spec.loader is not None
    loaded = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(loaded)
    return loaded


@pytest.fixture(scope="module")
def built(tmp_path_factory: pytest.TempPathFactory) -> Path:
    for package in ("sphinx", "myst_parser", "furo", "latex2mathml"):
        needed(package, "docs")
    folder = tmp_path_factory.mktemp("pages")
    command = [
        sys.executable,
        "-m",
        "sphinx",
        "-W",
        "--keep-going",
        "-q",
        "-b",
        "html",
        str(DOCS),
        str(folder),
    ]
    done = subprocess.run(command, capture_output=True, text=True, cwd=ROOT, check=False)
    assert done.stderr == ""
    assert done.returncode == 0
    return folder


def test_pages_build_without_warnings_and_link_to_nothing_outside(built: Path) -> None:
    pages = sorted(path.stem for path in built.glob("*.html"))
    for name in ("index", "getting-started", "scenario-reference", "theory", "cautions", "contributing"):
        assert name in pages
    for page in built.glob("*.html"):
        loaded = re.findall(
            r"<(?:script|link|img)[^>]+(?:src|href)=\"(https?:[^\"]+)\"", page.read_text("utf-8")
        )
        assert loaded == [], page.name
    theory = (built / "theory.html").read_text(encoding="utf-8")
    assert theory.count("<math") > 20
    assert "Guide for contributors" in (built / "contributing.html").read_text(encoding="utf-8")


def test_every_key_of_the_schema_is_in_the_reference() -> None:
    reference = module("schema_reference")
    for page, schema in reference.SCHEMAS.items():
        text = reference.reference(ROOT / schema)
        keys: set[str] = set()

        def collect(node: object, keys: set[str] = keys) -> None:
            if isinstance(node, dict):
                keys.update(node.get("properties", {}))
                for value in node.values():
                    collect(value, keys)
            elif isinstance(node, list):
                for value in node:
                    collect(value, keys)

        collect(json.loads((ROOT / schema).read_text(encoding="utf-8")))
        missing = [key for key in sorted(keys) if f"| `{key}`" not in text]
        assert missing == [], page


def test_reference_tells_defaults_limits_and_required_keys() -> None:
    text = module("schema_reference").reference(ROOT / "gibbsmin" / "scenario" / "schema.json")
    assert "| `title` (required) |" in text
    assert "`sample`, `all`, `none` | `sample` |" in text
    assert "whole number, at least 1 | `50` |" in text
    assert "| true or false | `true` |" in text


def test_the_scenario_of_the_first_page_is_sound() -> None:
    from gibbsmin.scenario.loading import parse_scenario

    page = (DOCS / "getting-started.md").read_text(encoding="utf-8")
    block = next(each for each in re.findall(r"```yaml\n(.*?)```", page, re.DOTALL) if "feed:" in each)
    scenario = parse_scenario(block)
    assert scenario.points == 31 * 3
    assert yaml.safe_load(block)["title"] == scenario.title


def test_measured_figures_are_those_of_the_benchmarks(tmp_path: Path) -> None:
    measured = module("measured_figures")
    assert "No measured figures" in measured.figures(tmp_path)
    assert "--into" in benchmark_help()
    (tmp_path / "tables.md").write_text(
        "### Dense map\n\n| a | b |\n|---|---|\n| 1 | 2 |\n", encoding="utf-8"
    )
    (tmp_path / "dense_map.svg").write_text("<svg xmlns='http://www.w3.org/2000/svg'/>", encoding="utf-8")
    text = measured.figures(tmp_path)
    assert "\n## Dense map\n" in text
    assert "| 1 | 2 |" in text
    assert f"![dense map]({tmp_path.name}/dense_map.svg)" in text


def benchmark_help() -> str:
    """The option that the page names must exist."""
    return (ROOT / "tests" / "benchmarks" / "__main__.py").read_text(encoding="utf-8")


def test_the_wheel_leaves_the_sources_of_pages_out() -> None:
    import tomllib

    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    assert "gibbsmin/docs" in project["tool"]["hatch"]["build"]["targets"]["wheel"]["exclude"]
