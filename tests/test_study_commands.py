"""The commands `study` and `cases`, run in this process: what they print, and their exit codes."""

from __future__ import annotations

import errno
from pathlib import Path

import pytest

import gibbsmin
from gibbsmin.cli import main
from gibbsmin.study import open_study
from tests.study_cases import STUDY, write_study


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    return tmp_path


def test_a_study_from_the_command_line(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    write_study(here)
    assert main(["study", "study.yaml", "--workers", "1"]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert out.startswith("Shift in many ways\n\n12 cases, 180 points; 180 points solved, largest gap ")
    assert "cross-check of 12 points: 12 confirmed, 0 differ, 0 without an independent answer" in out
    assert "kept in study-results: results.zarr, summary.parquet, manifest.json" in out
    assert main(["study", "study.yaml"]) == 0
    assert capsys.readouterr().err == "found 6 of 6 chunks finished\n"


def test_the_shipped_study_in_seconds(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["study", "well_gas_survey", "--out", "wells"]) == 0
    assert "200 cases, 2,200 points; 2,200 points solved" in capsys.readouterr().out
    assert len(gibbsmin.open_study("wells").summary) == 200
    command = [
        "cases",
        "wells",
        "--by",
        "hydrogen yield",
        "--where",
        "temperature <= 850 degC",
        "--most",
        "2",
    ]
    assert main([*command, "--csv", "ranking.csv", "--figure", "comparison.png"]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert len(lines) == 4
    assert lines[1].split()[:2] == ["1", "Eskel"]
    assert lines[-1] == "and 198 more"
    assert len(Path("ranking.csv").read_text().splitlines()) == 201
    assert Path("comparison.png").read_bytes().startswith(b"\x89PNG")


def test_a_dry_run_tells_and_computes_nothing(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    write_study(here)
    assert main(["study", "study.yaml", "--dry-run"]) == 0
    out = capsys.readouterr().out
    assert "12 cases, 180 points, in 6 chunks" in out
    assert "12 cases of 5 temperature x 3 pressure, 6 gases" in out
    assert "kept: status, gas_amount, gap, mole_fraction, conversion of CO, H2 to CO" in out
    assert "GB free" in out
    assert "memory: at most" in out
    assert out.endswith("nothing is computed yet\n")
    assert not Path("study-results").exists()


def test_faults_are_listed_and_nothing_is_computed(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    write_study(here, STUDY.replace("unit: mol}", "unit: mool}"))
    assert main(["study", "study.yaml"]) == 2
    lines = capsys.readouterr().err.splitlines()
    assert [line.partition(" 'mool' is not a unit of amount; ")[0] for line in lines] == [
        "gibbsmin: base.yaml:5:32:",
        "gibbsmin: base.yaml:8:20:",
    ]
    assert all(line.endswith("(12 cases: 01, 02, 03 ...)") for line in lines)
    assert not Path("study-results").exists()


def test_a_full_disk_ends_with_1_and_says_how_to_go_on(
    here: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    def full(*_: object) -> None:
        raise OSError(errno.ENOSPC, "No space left on device")

    write_study(here)
    monkeypatch.setattr("gibbsmin.study.solving.write_whole", full)
    assert main(["study", "study.yaml", "--workers", "1"]) == 1
    message = capsys.readouterr().err
    assert "study-results is full; 0 of 6 chunks are finished and kept" in message
    assert "run the same command again" in message


def test_a_failed_case_ends_with_1(
    here: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    def fails(*_: object) -> None:
        raise ArithmeticError("no luck")

    monkeypatch.setattr("gibbsmin.study.running.run_study.__kwdefaults__", {
        **(gibbsmin.run_study.__kwdefaults__ or {}), "solver": fails,
    })  # fmt: skip
    write_study(here)
    assert main(["study", "study.yaml", "--workers", "1"]) == 1
    assert "12 cases failed:\n  01: ArithmeticError: no luck" in capsys.readouterr().out
    assert main(["cases", "study-results"]) == 1


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["study", "nowhere"], "no such file and no shipped study of that name; shipped: well_gas_survey"),
        (["cases", "nowhere"], "there is no finished study in this folder"),
        (["study", "study.yaml", "--cluster", "nonsense"], "nonsense: no Dask scheduler answers there"),
    ],
)
def test_wrong_requests_end_with_2(
    arguments: list[str], message: str, here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    write_study(here)
    assert main(arguments) == 2
    assert message in capsys.readouterr().err


def test_cases_sums_up_and_names_what_can_be_ranked(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    write_study(here)
    gibbsmin.run_study("study.yaml", "out", workers=0)
    assert main(["cases", "out"]) == 0
    assert "to rank by or to limit: conversion of CO, " in capsys.readouterr().out
    assert main(["cases", "out", "--where", "H2 < 1"]) == 2
    assert "--where: needs --by" in capsys.readouterr().err
    assert main(["cases", "out", "--by", "H2", "--where", "steam > 60", "--most", "1"]) == 0
    out = capsys.readouterr().out
    assert "6 cases have no such result, or no point that meets the conditions" in out
    assert open_study("out").all_solved


def test_the_schema_of_the_study_file_is_printed(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["schema", "study"]) == 0
    assert '"title": "gibbsmin study"' in capsys.readouterr().out
