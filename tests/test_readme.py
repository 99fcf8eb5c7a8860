"""What the README shows is what the program prints. The project's own text: no outside source."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

import gibbsmin
from gibbsmin.scenario import parse_scenario
from gibbsmin.shipped_files import scenario_folder

README = (Path(__file__).parents[1] / "README.md").read_text(encoding="utf-8")


def blocks(language: str) -> list[str]:
    return re.findall(rf"```{language}\n(.*?)```", README, re.DOTALL)


def test_the_output_shown_is_that_of_the_example() -> None:
    """All of it but the last digits of the evidence, which are rounding errors and differ between machines."""
    outcome = gibbsmin.run(gibbsmin.load_scenario(scenario_folder() / "steam_reforming.yaml"))
    (shown,) = blocks("text")
    shown_results, shown_evidence = shown.strip().rsplit("\n\n", 1)
    assert outcome.summary().startswith(shown_results + "\n")
    solved, check, largest = shown_evidence.splitlines()
    assert re.match(
        r"solved 2160 of 2160 points; largest gap \S+ per mol of gas, largest balance error", solved
    )
    assert check in outcome.summary()
    assert re.match(r"  largest relative difference \S+ \(", largest)


def test_the_scenario_shown_is_sound() -> None:
    (text,) = blocks("yaml")
    assert parse_scenario(text).points == 31 * 3


def test_the_python_shown_runs(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(scenario_folder().parent)
    names: dict[str, object] = {}
    exec("\n".join(blocks("python")), names)
    assert names["gas"].sizes["temperature"] == 3  # type: ignore[attr-defined]
