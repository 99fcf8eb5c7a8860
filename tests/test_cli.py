"""The command in-process: what it prints, where, what it writes, and its exit codes.

Exit codes, messages and files are the project's own; how a command behaves is common practice, no source.
"""

from __future__ import annotations

import io
import json
import subprocess
import sys
from pathlib import Path
from urllib.parse import urlsplit
from urllib.request import url2pathname

import numpy as np
import pytest
import xarray as xr

import gibbsmin
from gibbsmin import cli
from gibbsmin.cli import main
from gibbsmin.examples import examples
from gibbsmin.outcome import Outcome

ROOT = Path(__file__).parents[1]  # so that a checkout that is not installed is found by other processes

SMALL = """\
title: Shift of a made-up gas
feed:
  gas:
    temperature: 350 degC
    amounts: {CO: 1 mol, H2O: 2 mol, N2: 0.5 mol}
grid:
  temperature: {from: 300 degC, to: 500 degC, step: 50 K}
  pressure: {from: 1 bar, to: 20 bar, points: 4, spacing: logarithmic}
species:
  gases: [CO, CO2, H2, H2O, N2, CH4]
results:
  key species: [H2, CO]
  conversions: [CO]
  ratios:
    H2/CO: {of: H2, to: CO}
cross-check: {sample size: 4}
"""

WRONG = """\
title: Two faults
feed:
  gas:
    amounts: {CO: 1 mol, HO2O: 2 mol}
grid:
  temperature: 300 degrees
  pressure: 1 bar
"""


@pytest.fixture
def work(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """An empty working directory."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


@pytest.fixture
def small(work: Path) -> Path:
    path = work / "small.yaml"
    path.write_text(SMALL, encoding="utf-8")
    return path


def files_in(folder: Path) -> set[str]:
    return {path.relative_to(folder).as_posix() for path in folder.rglob("*") if path.is_file()}


# --- run


def test_run_solves_confirms_draws_and_saves(small: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["run", "small.yaml"]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    lines = out.splitlines()
    assert lines[0] == "Shift of a made-up gas"
    assert any(line.startswith("solved 20 of 20 points") for line in lines)
    assert "written to small-results:" in lines
    folder = Path("small-results")
    names = ["composition", "composition_dry", "map_H2", "map_CO", "map_conversion_of_CO", "map_H2_to_CO"]
    data = {"results.nc", "record.json", "crosscheck.csv", "scenario.yaml", "report.html"}
    figures = {f"figures/{name}.{ending}" for name in names for ending in ("png", "svg")}
    assert files_in(folder) == data | figures
    told = " ".join(out.partition("written to")[2].split())
    assert f"figures/ (6, each as PNG and SVG): {', '.join(names)}" in told
    assert all(name in told for name in data)
    assert max(map(len, lines)) <= 100
    with xr.open_dataset(folder / "results.nc") as dataset:
        assert dataset.sizes["temperature"] == 5
        assert (dataset.status == 0).all()


def test_the_same_request_gives_the_same_bytes(small: Path) -> None:
    assert main(["run", "small.yaml", "--out", "one"]) == 0
    assert main(["run", "small.yaml", "--out", "other"]) == 0
    assert files_in(Path("one")) == files_in(Path("other"))
    for name in files_in(Path("one")):
        assert Path("one", name).read_bytes() == Path("other", name).read_bytes(), name


def test_an_existing_folder_is_left_alone_unless_asked(
    small: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["run", "small.yaml", "--out", "here", "--no-figures"]) == 0
    before = Path("here/results.nc").read_bytes()
    small.write_text(SMALL.replace("CO: 1 mol", "CO: 3 mol"), encoding="utf-8")
    capsys.readouterr()
    assert main(["run", "small.yaml", "--out", "here"]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err.count("\n") == 1
    assert err.startswith("gibbsmin: here exists already")
    assert err.endswith("(--overwrite)\n")
    assert Path("here/results.nc").read_bytes() == before
    assert main(["run", "small.yaml", "--out", "here", "--overwrite", "--no-figures"]) == 0
    assert Path("here/results.nc").read_bytes() != before


def test_a_folder_with_other_files_is_never_overwritten(
    small: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    Path("mine").mkdir()
    Path("mine/letter.txt").write_text("dear", encoding="utf-8")
    assert main(["run", "small.yaml", "--out", "mine", "--overwrite"]) == 2
    assert files_in(Path("mine")) == {"letter.txt"}
    err = capsys.readouterr().err
    assert err.startswith("gibbsmin: mine exists already; it holds other files")
    assert "--overwrite" not in err


def test_options_of_run_change_what_is_done(small: Path, capsys: pytest.CaptureFixture[str]) -> None:
    options = ["--no-figures", "--crosscheck", "all", "--table", "csv", "--threads", "1", "--verbose"]
    assert main(["run", "small.yaml", *options]) == 0
    out, err = capsys.readouterr()
    folder = Path("small-results")
    assert not (folder / "figures").exists()
    assert len((folder / "results.csv").read_text(encoding="utf-8").splitlines()) == 1 + 20
    record = json.loads((folder / "record.json").read_text(encoding="utf-8"))
    assert record["cross-check"]["points"] == 20
    assert err.splitlines() == ["small.yaml: 20 points, 6 species", "saving in small-results"]
    assert "results.csv" in out
    assert main(["run", "small.yaml", "--out", "none", "--no-figures", "--crosscheck", "none"]) == 0
    record = json.loads(Path("none/record.json").read_text(encoding="utf-8"))
    assert record["cross-check"]["points"] == 0


def test_threads_reach_the_solver(small: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from gibbsmin import running

    asked: list[int | None] = []
    original = running.run

    def spy(scenario: object, *, threads: int | None, **others: object) -> Outcome:
        asked.append(threads)
        return original(scenario, threads=threads, **others)  # type: ignore[arg-type]

    monkeypatch.setattr(running, "run", spy)
    assert main(["run", "small.yaml", "--no-figures", "--threads", "1"]) == 0
    assert main(["run", "small.yaml", "--no-figures", "--out", "b"]) == 0
    assert asked == [1, None]


def spoil(monkeypatch: pytest.MonkeyPatch, how: object) -> None:
    """Let the run end in an outcome that `how` has changed."""
    from gibbsmin import running

    original = running.run
    monkeypatch.setattr(running, "run", lambda *a, **k: how(original(*a, **k)))  # type: ignore[operator]


def test_an_unsolved_point_gives_exit_code_1_and_is_told(
    small: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    def lose_a_point(outcome: Outcome) -> Outcome:
        from dataclasses import replace

        dataset = outcome.dataset.copy(deep=True)
        dataset["status"][2, 1] = 1
        for name in ("mole_fraction", "dry_mole_fraction", "amount", "gas_amount"):
            dataset[name][2, 1] = np.nan
        return replace(outcome, dataset=dataset)

    spoil(monkeypatch, lose_a_point)
    assert main(["run", "small.yaml"]) == 1
    assert "solved 19 of 20 points" in capsys.readouterr().out
    assert "1 of 20 points not solved" in Path("small-results/figures/map_H2.svg").read_text(encoding="utf-8")


def test_a_point_that_the_cross_check_denies_gives_exit_code_1(
    small: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def deny(outcome: Outcome) -> Outcome:
        from dataclasses import replace

        check = outcome.crosscheck
        first = replace(check.points[0], status="differs", relative=1e-3)
        return replace(outcome, crosscheck=replace(check, points=(first, *check.points[1:])))

    spoil(monkeypatch, deny)
    assert main(["run", "small.yaml", "--no-figures"]) == 1


def test_ctrl_c_ends_without_a_traceback_and_leaves_nothing(
    small: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    def interrupt(*_: object, **__: object) -> Outcome:
        raise KeyboardInterrupt

    monkeypatch.setattr("gibbsmin.figures.of_outcome.write_outcome_figures", interrupt)
    assert main(["run", "small.yaml"]) == 130
    out, err = capsys.readouterr()
    assert (out, err) == ("", "stopped\n")
    assert [path.name for path in small.parent.iterdir()] == ["small.yaml"]


@pytest.mark.skipif(sys.platform == "win32", reason="Windows sends no interrupt to one process alone")
def test_an_interrupt_while_libraries_load_ends_as_cleanly(small: Path) -> None:
    code = (
        "import os, signal, sys, importlib.abc\n"
        "class Finder(importlib.abc.MetaPathFinder):\n"
        "    def find_spec(self, name, path, target=None):\n"
        "        if name == 'gibbsmin.running': os.kill(os.getpid(), signal.SIGINT)\n"
        "sys.meta_path.insert(0, Finder())\n"
        "from gibbsmin.cli import main\n"
        "sys.exit(main(['run', *sys.argv[1:]]))"
    )
    command = [sys.executable, "-c", code, str(small), "--out", str(small.parent / "results")]
    done = subprocess.run(command, check=False, capture_output=True, cwd=ROOT)
    assert (done.returncode, done.stdout, done.stderr.decode().split()) == (130, b"", ["stopped"])
    assert [path.name for path in small.parent.iterdir()] == ["small.yaml"]


def test_a_run_without_key_species_draws_the_most_abundant(small: Path) -> None:
    small.write_text(SMALL.replace("  key species: [H2, CO]\n", ""), encoding="utf-8")
    assert main(["run", "small.yaml"]) == 0
    drawn = {path.stem for path in Path("small-results/figures").iterdir()}
    assert {"map_CO2", "map_H2", "map_H2O", "map_N2"} <= drawn


def test_a_defect_is_called_one(
    small: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    spoil(monkeypatch, lambda outcome: 1 / 0)
    assert main(["run", "small.yaml"]) == 3
    err = capsys.readouterr().err
    assert "ZeroDivisionError" in err
    assert "a defect of the program" in err


def test_a_single_point_is_told_without_empty_places(small: Path, capsys: pytest.CaptureFixture[str]) -> None:
    text = SMALL.replace("{from: 300 degC, to: 500 degC, step: 50 K}", "[300 degC]")
    small.write_text(
        text.replace("{from: 1 bar, to: 20 bar, points: 4, spacing: logarithmic}", "[1 bar]"),
        encoding="utf-8",
    )
    assert main(["run", "small.yaml", "--no-figures"]) == 0
    said = capsys.readouterr().out
    assert "solved 1 of 1 points" in said
    assert ", )" not in said


# --- wrong requests


@pytest.mark.parametrize("command", ["run", "check"])
def test_a_missing_file_gets_one_line(work: Path, command: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main([command, "folder/absent.yaml"]) == 2
    assert capsys.readouterr() == ("", "gibbsmin: folder/absent.yaml: there is no such file\n")


def test_a_name_close_to_an_example_is_suggested(work: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["check", "steam_refroming"]) == 2
    err = capsys.readouterr().err
    problem = "there is no such file and no such example"
    assert err == f"gibbsmin: steam_refroming: {problem}; did you mean steam_reforming?\n"


def test_a_folder_is_no_scenario(work: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (work / "steam_reforming").mkdir()
    assert main(["check", "steam_reforming"]) == 2
    assert capsys.readouterr().err == "gibbsmin: steam_reforming: is a folder, not a scenario file\n"


def test_a_folder_that_cannot_be_made_is_told_before_any_work(
    small: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr("gibbsmin.running.run", lambda *_, **__: pytest.fail("computed all the same"))
    assert main(["run", "small.yaml", "--out", "small.yaml/below"]) == 2
    assert capsys.readouterr() == ("", "gibbsmin: small.yaml: Not a directory\n")
    monkeypatch.setattr("os.access", lambda *_, **__: False)
    assert main(["run", "small.yaml", "--out", "closed/below"]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert "Permission denied" in err


@pytest.mark.parametrize("command", ["run", "check"])
def test_every_fault_of_a_file_is_told_with_its_place(
    work: Path, command: str, capsys: pytest.CaptureFixture[str]
) -> None:
    (work / "wrong.yaml").write_text(WRONG, encoding="utf-8")
    assert main([command, "wrong.yaml"]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    lines = err.splitlines()
    assert len(lines) == 2
    assert all(line.startswith("gibbsmin: wrong.yaml:") for line in lines)
    assert any("wrong.yaml:4:" in line and "HO2O" in line for line in lines)
    assert any("wrong.yaml:6:" in line and "degrees" in line for line in lines)
    assert "Traceback" not in err
    assert not (work / "wrong-results").exists()


def test_debug_shows_where_an_error_arose(work: Path, capsys: pytest.CaptureFixture[str]) -> None:
    for arguments in (["--debug", "check", "absent"], ["check", "absent", "--debug"]):
        assert main(arguments) == 2
        err = capsys.readouterr().err
        assert "Traceback" in err
        assert err.splitlines()[-1].startswith("gibbsmin: absent: ")


@pytest.mark.parametrize(
    ("arguments", "told"),
    [
        ([], "COMMAND"),
        (["fly"], "invalid choice"),
        (["run"], "SCENARIO"),
        (["run", "x", "--threads", "0"], "expected a whole number of at least 1, found '0'"),
        (["run", "x", "--threads", "two"], "found 'two'"),
        (["run", "x", "--crosscheck", "some"], "invalid choice"),
        (["run", "x", "--table", "xls"], "invalid choice"),
    ],
)
def test_a_wrong_command_line_gives_exit_code_2(
    arguments: list[str], told: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(arguments) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert told in err


def test_a_file_that_cannot_be_written_gets_one_line(small: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["run", "small.yaml", "--no-figures", "--out", "small.yaml/inside"]) == 2
    err = capsys.readouterr().err
    assert err.count("\n") == 1
    assert "small.yaml" in err


# --- the other commands


def test_check_says_what_a_scenario_would_compute(small: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["check", "small.yaml"]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert out.startswith("Shift of a made-up gas\n")
    assert "20 points" in out
    assert "Gases: 6" in out
    assert [path.name for path in small.parent.iterdir()] == ["small.yaml"]


def test_an_example_is_found_by_its_name_from_any_folder(
    work: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    title = "Steam reforming of natural gas, hydrogen plant Halvern"
    for name in ("steam_reforming", "steam-reforming", "steam_reforming.yaml"):
        assert main(["check", name]) == 0
        assert capsys.readouterr().out.startswith(title)


def test_a_file_of_the_name_goes_before_the_example(small: Path, capsys: pytest.CaptureFixture[str]) -> None:
    small.rename("steam_reforming.yaml")
    assert main(["check", "steam_reforming.yaml"]) == 0
    assert capsys.readouterr().out.startswith("Shift of a made-up gas")


def test_examples_are_listed_with_their_titles(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["scenarios"]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert [line.split()[0] for line in lines] == list(examples())
    assert len(lines) >= 6
    assert all(len(line.split()) > 2 for line in lines)


def test_an_example_is_printed_as_it_is(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["scenarios", "steam_reforming"]) == 0
    assert capsys.readouterr().out == examples()["steam_reforming"].read_text(encoding="utf-8")


def test_examples_are_copied_out_and_nothing_is_overwritten(
    work: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["scenarios", "steam_reforming", "--copy-to", "mine"]) == 0
    assert capsys.readouterr().out == f"{Path('mine/steam_reforming.yaml')}\n"
    Path("mine/steam_reforming.yaml").write_text("changed", encoding="utf-8")
    assert main(["scenarios", "--copy-to", "mine"]) == 2
    assert files_in(Path("mine")) == {"steam_reforming.yaml"}  # all or none
    assert Path("mine/steam_reforming.yaml").read_text(encoding="utf-8") == "changed"
    assert main(["scenarios", "--copy-to", "mine", "--overwrite"]) == 0
    assert files_in(Path("mine")) == {path.name for path in examples().values()}


def test_a_copied_example_leads_editors_to_the_installed_schema(work: Path) -> None:
    assert main(["scenarios", "steam_reforming", "--copy-to", "mine"]) == 0
    copy = Path("mine/steam_reforming.yaml").read_text(encoding="utf-8").splitlines()
    original = examples()["steam_reforming"].read_text(encoding="utf-8").splitlines()
    assert copy[1:] == original[1:]
    address = copy[0].partition("$schema=")[2]
    assert address.startswith("file:")
    assert json.loads(Path(url2pathname(urlsplit(address).path)).read_text(encoding="utf-8"))["$schema"]


def test_an_unknown_example_is_refused(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["scenarios", "steam_reformign"]) == 2
    assert capsys.readouterr().err == (
        "gibbsmin: steam_reformign: is no example; did you mean steam_reforming?\n"
    )


@pytest.mark.parametrize("form", ["scenario", "species"])
def test_schemas_are_printed_as_json(form: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["schema", form]) == 0
    schema = json.loads(capsys.readouterr().out)
    assert "json-schema.org" in schema["$schema"]
    assert form in schema["title"].lower()


def test_the_schema_is_that_of_a_scenario_by_default(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["schema"]) == 0
    assert "grid" in json.loads(capsys.readouterr().out)["properties"]


def test_species_are_listed_and_shown(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["species", "methanol"]) == 0
    assert "CH3OH" in capsys.readouterr().out
    assert main(["species", "CH4", "--temperatures", "300", "1000"]) == 0
    shown = capsys.readouterr().out
    assert "300" in shown
    assert "1000" in shown


def test_an_unknown_species_gets_one_line(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["species", "unobtainium"]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err.count("\n") == 1
    assert "unobtainium" in err


# --- the program itself


def test_version(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["--version"]) == 0
    assert capsys.readouterr().out == f"gibbsmin {gibbsmin.__version__}\n"


def test_help_names_every_command_and_exit_code(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["--help"]) == 0
    out = capsys.readouterr().out
    for word in (
        "run",
        "check",
        "species",
        "scenarios",
        "schema",
        "130",
        "Equilibrium is a limit, not a rate",
    ):
        assert word in out


def test_defaults_in_the_help_are_those_of_the_library(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr("gibbsmin.scenario.model.DEFAULT_SAMPLE_SIZE", 123)
    assert main(["run", "--help"]) == 0
    assert "sample of 123" in " ".join(capsys.readouterr().out.split())


def test_help_loads_no_numerical_library() -> None:
    code = (
        "import sys; from gibbsmin.cli import main; main(['--help']);"
        "sys.exit(any(name in sys.modules for name in ('numpy', 'xarray', 'pint', 'matplotlib', 'cantera')))"
    )
    assert (
        subprocess.run([sys.executable, "-c", code], check=False, capture_output=True, cwd=ROOT).returncode
        == 0
    )


def test_the_package_is_a_command() -> None:
    done = subprocess.run(
        [sys.executable, "-m", "gibbsmin", "--version"], check=False, capture_output=True, cwd=ROOT
    )
    assert done.returncode == 0
    assert done.stdout.decode().strip() == f"gibbsmin {gibbsmin.__version__}"


def test_a_terminal_without_utf_8_gets_question_marks_not_a_failure(
    small: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    small.write_text(SMALL.replace("made-up", "made-up \N{DEGREE SIGN} \N{SUBSCRIPT TWO}"), encoding="utf-8")
    raw = io.BytesIO()
    monkeypatch.setattr(sys, "stdout", io.TextIOWrapper(raw, encoding="ascii"))
    assert main(["check", "small.yaml"]) == 0
    sys.stdout.flush()
    assert raw.getvalue().startswith(b"Shift of a made-up ? ? gas")


def test_a_reader_that_stops_reading_is_no_error() -> None:
    code = "import sys; from gibbsmin.cli import main; sys.exit(main(['scenarios', 'steam_reforming']))"
    process = subprocess.Popen(
        [sys.executable, "-c", code], stdout=subprocess.PIPE, stderr=subprocess.PIPE, cwd=ROOT
    )
    assert process.stdout is not None
    assert process.stderr is not None
    process.stdout.close()
    errors = process.stderr.read()
    process.stderr.close()
    assert process.wait() == cli.PIPE_CLOSED
    assert errors == b""


class FakeTerminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def test_progress_is_shown_on_a_terminal_only(small: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    terminal = FakeTerminal()
    monkeypatch.setattr(sys, "stderr", terminal)
    assert main(["run", "small.yaml"]) == 0
    shown = terminal.getvalue()
    assert all(stage in shown for stage in ("solving", "checking", "drawing"))
    assert "points/s" in shown
    assert "0/20 [" in shown  # points
    assert "6/6" in shown  # figures
    plain = io.StringIO()
    monkeypatch.setattr(sys, "stderr", plain)
    assert main(["run", "small.yaml", "--no-figures", "--out", "again"]) == 0
    assert plain.getvalue() == ""
