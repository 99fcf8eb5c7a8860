"""The study file: the cases it makes, and every fault of the file, its tables and its cases in one message."""

from __future__ import annotations

import itertools
import json
from pathlib import Path
from typing import Any

import jsonschema
import numpy as np
import pytest

from gibbsmin.errors import StudyError
from gibbsmin.scenario import load_scenario
from gibbsmin.shipped_files import scenario_folder
from gibbsmin.study import Study, load_study
from gibbsmin.study.reading import study_schema
from tests.study_cases import SCENARIO, STUDY, write_study

HEAD = STUDY.partition("variations:")[0]


def study_of(folder: Path, variations: str, head: str = HEAD) -> Study:
    return load_study(write_study(folder, head + variations))


def faults_of(folder: Path, study: str) -> list[str]:
    """Faults as line: message."""
    path = write_study(folder, study)
    with pytest.raises(StudyError) as error:
        load_study(path)
    return [f"{Path(fault.file).name}:{fault.line}: {fault.message}" for fault in error.value.faults]


def test_every_combination_in_the_order_of_the_file(tmp_path: Path) -> None:
    study = load_study(write_study(tmp_path))
    wanted = itertools.product([40, 60, 80, 100], [1, 2, 3])
    assert [tuple(case.values.values()) for case in study.cases] == list(wanted)
    assert [case.name for case in study.cases] == [f"{k:02d}" for k in range(1, 13)]
    assert study.points == 12 * 15
    # values arrive where they belong: mol of CO2 and H2O in the feed
    names = [each.name for each in study.layouts[0].feed_species]
    feed = np.array([case.feed for case in study.cases])
    assert feed[:, names.index("H2O")].tolist() == [case.values["steam"] for case in study.cases]
    assert feed[:, names.index("CO2")].tolist() == [case.values["carbon dioxide"] for case in study.cases]
    assert (feed[:, names.index("CO")] == 30).all()


def test_cases_of_one_map_share_their_axes(tmp_path: Path) -> None:
    study = load_study(write_study(tmp_path))
    assert len(study.layouts) == 1
    assert all(case.temperature is study.cases[0].temperature for case in study.cases)


def test_rows_of_a_table_with_units_and_names(tmp_path: Path) -> None:
    (tmp_path / "wells.csv").write_text(
        "case,steam,feed / raw gas / amounts / CO2 [kmol]\nEast,60,0.002\nWest,0.07 kmol,0.003\n",
        encoding="utf-8",
    )
    study = study_of(tmp_path, "variations:\n  - rows of: wells.csv\n", HEAD.partition("  carbon dioxide")[0])
    assert [case.name for case in study.cases] == ["East", "West"]
    names = [each.name for each in study.layouts[0].feed_species]
    feed = np.array([case.feed for case in study.cases])
    assert feed[:, names.index("H2O")].tolist() == [60, 70]
    assert feed[:, names.index("CO2")].tolist() == [2, 3]


def test_parts_of_one_entry_are_combined(tmp_path: Path) -> None:
    (tmp_path / "wells.csv").write_text("case,carbon dioxide\nEast,2\nWest,3\n", encoding="utf-8")
    study = study_of(
        tmp_path, "variations:\n  - rows of: wells.csv\n    every combination of: {steam: [50, 70]}\n"
    )
    assert [(case.name, *case.values.values()) for case in study.cases] == [
        ("East 1", 2, 50),
        ("East 2", 2, 70),
        ("West 1", 3, 50),
        ("West 2", 3, 70),
    ]


SAMPLE = """\
variations:
  - sample:
      method: {method}
      size: {size}
      seed: {seed}
      quantities:
        steam: {{from: 40, to: 80}}
        carbon dioxide: {{distribution: normal, mean: 5, standard deviation: 1, from: 3, to: 8}}
"""


@pytest.mark.parametrize("method", ["latin hypercube", "sobol"])
def test_samples_fill_their_ranges_evenly_and_repeat_with_their_seed(method: str, tmp_path: Path) -> None:
    def drawn(seed: int) -> Any:
        study = study_of(tmp_path, SAMPLE.format(method=method, size=64, seed=seed))
        return np.array([list(case.values.values()) for case in study.cases], dtype=float)

    first = drawn(1)
    assert np.array_equal(first, drawn(1))
    assert not np.array_equal(first, drawn(2))
    # Both methods put exactly one of 64 samples in each 64th of a range (definition of either design).
    assert sorted(np.floor((first[:, 0] - 40) / 40 * 64).astype(int).tolist()) == list(range(64))
    assert first[:, 1].min() >= 3
    assert first[:, 1].max() <= 8
    assert (
        abs(first[:, 1].mean() - 5.07) < 0.05
    )  # 5 + (phi(2) - phi(3)) / (Phi(3) - Phi(-2)), normal cut at -2, +3


def test_scenario_files_and_folders_as_they_are(tmp_path: Path) -> None:
    folder = tmp_path / "plants"
    folder.mkdir()
    (folder / "b.yaml").write_text(SCENARIO, encoding="utf-8")
    (folder / "a.yaml").write_text(SCENARIO.replace("points: 5", "points: 4"), encoding="utf-8")
    study = load_study(write_study(tmp_path, "title: Plants\nscenarios: [plants, base.yaml]\n"))
    assert [case.name for case in study.cases] == ["a", "b", "base"]
    assert [case.layout for case in study.cases] == [0, 1, 1]
    assert study.cases[0].digest == load_scenario(folder / "a.yaml").digest


def test_all_faults_of_the_file_at_once(tmp_path: Path) -> None:
    study = """\
title: Wrong
base: base.yaml
quantitys: {}
quantities:
  steam: {place: feed / steam / amounts / H2O, unit: mol}
  idle: {place: grid / pressure}
variations:
  - every combination of: {stem: [1], steam: [1, 1]}
  - rows of: none.csv
  - sample:
      method: sobol
      size: 12
      quantities:
        steam: {distribution: normal, from: 1}
keep: {composition: some}
"""
    assert faults_of(tmp_path, study) == [
        "study.yaml:3: unknown key 'quantitys'; allowed: title, notes, scenarios, base, quantities, variations, keep, "
        "cross-check, cases per chunk; did you mean 'quantities'?",
        "study.yaml:8: 'stem' is neither a quantity of this study nor a place of the scenario (such as "
        "'grid / pressure'); defined: steam, idle; did you mean 'steam'?",
        "study.yaml:8: a value of 'steam' is listed twice",
        "study.yaml:9: cannot read the table 'none.csv': No such file or directory",
        "study.yaml:12: a Sobol sample is balanced only if its size is a power of two; take 8 or 16",
        "study.yaml:14: a normal distribution needs 'mean' and 'standard deviation'",
        "study.yaml:15: expected 'key species', 'all' or 'none', found 'some'",
    ]


def test_faults_of_a_table_with_their_lines(tmp_path: Path) -> None:
    tmp_path.mkdir(exist_ok=True)
    (tmp_path / "wells.csv").write_text("steam,stean,steam\n1,2,3\n1,2\n,2,3\n", encoding="utf-8")
    assert faults_of(tmp_path, HEAD + "variations:\n  - rows of: wells.csv\n") == [
        "wells.csv:1: column 2: 'stean' is neither a quantity of this study nor a place of the scenario (such as "
        "'grid / pressure'); defined: steam, carbon dioxide; did you mean 'steam'?",
        "wells.csv:1: column 3: the column 'steam' is there twice",
        "wells.csv:3: 2 cells, but the heading has 3",
        "wells.csv:4: the cell of 'steam' is empty",
    ]


def test_faults_of_cases_name_the_cases_and_the_line_of_the_scenario(tmp_path: Path) -> None:
    study = HEAD + "variations:\n  - every combination of: {steam: [-1, 50, 60 m], carbon dioxide: [1, 2]}\n"
    found = faults_of(tmp_path, study)
    assert found[0] == "base.yaml:8: -1 mol is negative (2 cases: 1, 2)"
    assert found[1].startswith("base.yaml:8: 'm' is not a unit of amount; allowed: mol, kmol")
    assert found[1].endswith("(2 cases: 5, 6)")
    assert len(found) == 2


def test_a_place_that_the_scenario_lacks(tmp_path: Path) -> None:
    study = HEAD.replace("feed / steam", "feed / stem") + STUDY[len(HEAD) :]
    assert faults_of(tmp_path, study) == [
        "study.yaml:7: 'steam' goes to 'feed / stem / amounts / H2O', but the base scenario has no 'stem' here; there: "
        "raw gas, steam; did you mean 'steam'? (12 cases: 01, 02, 03 ...)"
    ]


@pytest.mark.parametrize(
    ("study", "fault"),
    [
        (
            "title: Nothing\n",
            "study.yaml:1: there are no cases: give 'scenarios', or 'base' and 'variations'",
        ),
        ("title: Half\nbase: base.yaml\n", "study.yaml:2: 'base' needs 'variations' beside it"),
        ("title: Gone\nscenarios: [gone.yaml]\n", "study.yaml:2: there is no scenario file 'gone.yaml'"),
        ("title: Twice\nscenarios: [base.yaml, base.yaml]\n", "there are two cases called 'base'"),
        ("- a list\n", "study.yaml:1: expected a mapping, found a list"),
    ],
)
def test_files_that_make_no_study(study: str, fault: str, tmp_path: Path) -> None:
    assert any(fault in found for found in faults_of(tmp_path, study))


@pytest.mark.parametrize(
    ("given", "fault"),
    [
        ("{from: 2, to: 1}", "'from' (2) must be below 'to' (1)"),
        (
            "{distribution: logarithmic, from: 0, to: 1}",
            "a logarithmic distribution starts above zero, not at 0",
        ),
        (
            "{distribution: triangular, from: 0, most likely: 3, to: 1}",
            "'most likely' (3) lies outside 0 to 1",
        ),
        ("{distribution: uniform, from: 0, to: 1, mean: 2}", "a uniform distribution takes no 'mean'"),
        (
            "{distribution: normal, mean: 0, standard deviation: 1, from: 50, to: 60}",
            "next to nothing of the distribution lies between 50 and 60",
        ),
    ],
)
def test_distributions_that_cannot_be(given: str, fault: str, tmp_path: Path) -> None:
    sample = (
        f"variations:\n  - sample: {{method: latin hypercube, size: 4, quantities: {{steam: {given}}}}}\n"
    )
    assert faults_of(tmp_path, HEAD + sample) == [f"study.yaml:7: {fault}"]


def test_the_schema_is_valid_and_accepts_the_examples(tmp_path: Path) -> None:
    import yaml

    jsonschema.Draft202012Validator.check_schema(study_schema())
    validator = jsonschema.Draft202012Validator(study_schema())
    for text in (STUDY, HEAD + SAMPLE.format(method="sobol", size=8, seed=1)):
        assert not list(validator.iter_errors(yaml.safe_load(text)))
    assert list(validator.iter_errors({"title": "x", "cases": 1}))


def test_every_key_of_the_schema_is_described() -> None:
    def undescribed(rule: Any, where: str) -> list[str]:
        found = []
        if isinstance(rule, dict):
            for key, entry in rule.get("properties", {}).items():
                found += [] if {"title", "description"} <= entry.keys() else [f"{where}/{key}"]
            for key, entry in rule.items():
                found += undescribed(entry, f"{where}/{key}")
        elif isinstance(rule, list):
            for entry in rule:
                found += undescribed(entry, where)
        return found

    assert undescribed(study_schema(), "") == []


def test_the_shipped_study_has_200_cases() -> None:
    study = load_study(scenario_folder() / "studies" / "well_gas_survey.yaml")
    assert len(study.cases) == 200
    assert len({case.name for case in study.cases}) == 200
    assert len(study.layouts) == 1


def test_case_digests_are_those_of_the_scenario_they_solve(tmp_path: Path) -> None:
    """A case computed on its own from its text has the same digest, so a chunk can be traced to a scenario."""
    from gibbsmin.scenario import parse_scenario
    from gibbsmin.strict_yaml import parse

    study = load_study(write_study(tmp_path))
    data = parse(SCENARIO).data
    data["feed"]["steam"]["amounts"]["H2O"] = "40 mol"
    data["feed"]["raw gas"]["amounts"]["CO2"] = "1 mol"
    assert parse_scenario(json.dumps(data)).digest == study.cases[0].digest
