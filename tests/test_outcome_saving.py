"""Files of an outcome: complete or not at all, never over something else, the same bytes every time."""

from __future__ import annotations

import csv
import hashlib
import json
import time
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

import gibbsmin
from gibbsmin.errors import FolderExistsError, MissingPackageError
from gibbsmin.outcome import Outcome, composition, saving
from gibbsmin.scenario import parse_scenario

SCENARIO = """\
title: Shift of a test gas
feed:
  raw gas:
    temperature: 350 degC
    amounts: {CO: 1 mol, H2O: 2.5 mol, N2: 0.1 mol}
species:
  gases: [CO, H2O, CO2, H2, N2, CH4]
grid:
  temperature: [200 degC, 300 degC, 400 degC]
  pressure: [1 bar, 30 bar]
results:
  key species: [CO, H2]
  conversions: [CO]
  ratios:
    H2/CO: {of: H2, to: CO}
"""


@pytest.fixture(scope="module")
def outcome() -> Outcome:
    return gibbsmin.run(parse_scenario(SCENARIO))


def contents(folder: Path) -> dict[str, bytes]:
    return {str(path.relative_to(folder)): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


def test_a_saved_outcome_opens_with_one_line_and_is_the_same(outcome: Outcome, tmp_path: Path) -> None:
    folder = outcome.save(tmp_path / "out")
    with xr.open_dataset(folder / "results.nc") as opened:
        xr.testing.assert_identical(opened.load(), outcome.dataset)
        # and the functions for derived results work on what was read back
        np.testing.assert_array_equal(
            composition.conversion(opened, "CO").values, outcome.dataset["conversion of CO"].values
        )


def test_the_same_outcome_gives_the_same_bytes(outcome: Outcome, tmp_path: Path) -> None:
    first = contents(outcome.save(tmp_path / "first", tables=["csv"]))
    time.sleep(1.1)  # a time stamp in whole seconds would show
    again = gibbsmin.run(parse_scenario(SCENARIO), threads=1)
    assert contents(again.save(tmp_path / "second", tables=["csv"])) == first
    assert set(first) == {"results.nc", "results.csv", "crosscheck.csv", "record.json", "scenario.yaml"}


def test_the_record_says_how_it_was_made(outcome: Outcome, tmp_path: Path) -> None:
    folder = outcome.save(tmp_path / "out")
    record = json.loads((folder / "record.json").read_text(encoding="utf-8"))
    assert record["version"] == gibbsmin.__version__
    assert record["scenario SHA-256"] == hashlib.sha256(SCENARIO.encode()).hexdigest()
    assert (folder / "scenario.yaml").read_text(encoding="utf-8") == SCENARIO
    assert record["points"] == 6
    assert record["unsolved points"] == 0
    assert record["cross-check"]["confirmed"] == 6
    for name, digest in record["files"].items():
        assert hashlib.sha256((folder / name).read_bytes()).hexdigest() == digest
    text = (folder / "record.json").read_text(encoding="utf-8")
    assert str(tmp_path) not in text


def test_the_data_digest_follows_the_coefficients_and_not_the_order() -> None:
    from dataclasses import replace

    library = gibbsmin.standard_library()
    species = [library.find("CO"), library.find("H2")]
    digest = saving.species_digest(species)
    assert saving.species_digest(species[::-1]) == digest
    assert saving.species_digest([species[0], replace(species[1], formation_enthalpy=1.0)]) != digest


def test_the_csv_table_holds_every_point_and_every_digit(outcome: Outcome, tmp_path: Path) -> None:
    folder = outcome.save(tmp_path / "out", tables=["csv"])
    with (folder / "results.csv").open(encoding="utf-8", newline="") as stream:
        rows = list(csv.DictReader(stream))
    assert len(rows) == 6
    dataset = outcome.dataset
    for row, (i, k) in zip(rows, np.ndindex(3, 2), strict=True):
        assert float(row["temperature [K]"]) == dataset["temperature"].values[i]
        assert float(row["pressure [Pa]"]) == dataset["pressure"].values[k]
        assert float(row["mole_fraction CO [1]"]) == dataset["mole_fraction"].sel(species="CO").values[i, k]
        assert float(row["H2 to CO [1]"]) == dataset["H2 to CO"].values[i, k]
        assert int(row["status [1]"]) == 0


def test_the_parquet_table_equals_the_csv_table(outcome: Outcome, tmp_path: Path) -> None:
    pytest.importorskip("pyarrow")
    import pandas as pd

    folder = outcome.save(tmp_path / "out", tables=["csv", "parquet"])
    pd.testing.assert_frame_equal(
        pd.read_parquet(folder / "results.parquet"), pd.read_csv(folder / "results.csv"), check_dtype=False
    )


def test_parquet_without_its_package_is_refused_before_any_work(
    outcome: Outcome, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("gibbsmin.outcome.saving.find_spec", lambda _: None)
    monkeypatch.setattr("gibbsmin.running.find_spec", lambda _: None)
    with pytest.raises(MissingPackageError, match="pip install pyarrow"):
        outcome.save(tmp_path / "out", tables=["parquet"])
    assert list(tmp_path.iterdir()) == []
    with pytest.raises(MissingPackageError):
        gibbsmin.run(parse_scenario(SCENARIO + "output:\n  tables: [parquet]\n"))
    with pytest.raises(ValueError, match="tables are csv, parquet, not xlsx"):
        outcome.save(tmp_path / "out", tables=["xlsx"])


def test_the_crosscheck_table_lists_every_checked_point(outcome: Outcome, tmp_path: Path) -> None:
    folder = outcome.save(tmp_path / "out")
    with (folder / "crosscheck.csv").open(encoding="utf-8", newline="") as stream:
        rows = list(csv.DictReader(stream))
    assert [row["status"] for row in rows] == ["confirmed"] * 6
    assert float(rows[0]["temperature"]) == 473.15
    assert all(float(row["relative"]) < 1e-6 for row in rows)


def test_an_existing_folder_is_left_alone(outcome: Outcome, tmp_path: Path) -> None:
    folder = outcome.save(tmp_path / "out")
    before = contents(folder)
    with pytest.raises(FolderExistsError, match="ask for it to be overwritten"):
        outcome.save(folder)
    assert contents(folder) == before


def test_an_empty_folder_counts_as_new(outcome: Outcome, tmp_path: Path) -> None:
    (tmp_path / "out").mkdir()
    assert (outcome.save(tmp_path / "out") / "results.nc").exists()


def test_overwriting_replaces_earlier_results_and_keeps_other_files(outcome: Outcome, tmp_path: Path) -> None:
    folder = outcome.save(tmp_path / "out", tables=["csv"])
    (folder / "my notes.txt").write_text("keep me")
    (folder / "results.nc").write_bytes(b"old")
    outcome.save(folder, overwrite=True)
    assert (folder / "my notes.txt").read_text() == "keep me"
    assert not (folder / "results.csv").exists()  # of the earlier results, and not asked for again
    assert (folder / "results.nc").read_bytes() != b"old"
    assert [path.name for path in tmp_path.iterdir()] == ["out"]


def test_overwriting_never_touches_a_folder_that_is_not_ours(outcome: Outcome, tmp_path: Path) -> None:
    (tmp_path / "thesis.txt").write_text("years of work")
    with pytest.raises(FolderExistsError, match="no earlier results"):
        outcome.save(tmp_path, overwrite=True)
    file = tmp_path / "thesis.txt"
    with pytest.raises(FolderExistsError, match="no folder"):
        outcome.save(file, overwrite=True)
    assert contents(tmp_path) == {"thesis.txt": b"years of work"}


@pytest.mark.parametrize("earlier", [False, True])
def test_a_failure_half_way_leaves_nothing_behind(outcome: Outcome, tmp_path: Path, earlier: bool) -> None:
    if earlier:
        outcome.save(tmp_path / "out")
    before = contents(tmp_path)

    def disk_full(folder: Path) -> None:
        (folder / "picture.png").write_bytes(b"half")
        raise OSError("no space left")

    with pytest.raises(OSError, match="no space left"):
        outcome.save(tmp_path / "out", overwrite=True, further_files=disk_full)
    assert contents(tmp_path) == before
    assert (tmp_path / "out").exists() == earlier


def test_further_files_become_part_of_the_result(outcome: Outcome, tmp_path: Path) -> None:
    def draw(folder: Path) -> None:
        (folder / "figures").mkdir()
        (folder / "figures" / "map.svg").write_text("<svg/>")

    folder = outcome.save(tmp_path / "deep" / "out", further_files=draw)
    record = json.loads((folder / "record.json").read_text(encoding="utf-8"))
    assert "figures/map.svg" in record["files"]
    outcome.save(folder, overwrite=True)
    assert not (folder / "figures").exists() or not list((folder / "figures").iterdir())
