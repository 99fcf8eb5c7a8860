"""The store holds what `run` finds for each case, opens in one line, and can be read in parts."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
import xarray as xr

import gibbsmin
from gibbsmin.errors import StudyRefusedError
from gibbsmin.study import StudyResults, load_study, open_study, run_study
from gibbsmin.study.planning import plan_study
from gibbsmin.study.running import workers_for
from gibbsmin.study.shards import ArrayPlan, shard
from tests.study_cases import SCENARIO, STUDY, write_study

MIXED = """\
title: All kinds of maps
scenarios: [base.yaml, wide.yaml, sulphur.yaml]
base: base.yaml
quantities:
  pressure: {place: grid / pressure, unit: bar}
  hottest: {place: grid / temperature / to, unit: degC}
variations:
  - every combination of: {pressure: [5, 50]}
  - every combination of: {hottest: [450, 550]}
"""
WIDE = SCENARIO.replace(
    "\nspecies:",
    """
  further axes:
    steam to CO:
      ratio: {of: {moles of: H2O}, to: {moles of: CO}, by changing: steam}
      values: [1, 2, 3]
species:""",
)
SULPHUR = SCENARIO.replace("CH4: 1 mol", "CH4: 1 mol, H2S: 1 mol").replace("CH4, H2O]", "CH4, H2O, H2S, COS]")


@pytest.fixture(scope="module")
def results(tmp_path_factory: pytest.TempPathFactory) -> StudyResults:
    folder = tmp_path_factory.mktemp("store")
    study = STUDY + (
        "keep: {composition: all, further results: [heat duty, density, mean molar mass, enthalpy, element potentials, "
        "balance residual, iterations]}\n"
    )
    return run_study(write_study(folder, study), folder / "out", workers=0).results


@pytest.fixture(scope="module")
def mixed(tmp_path_factory: pytest.TempPathFactory) -> StudyResults:
    folder = tmp_path_factory.mktemp("mixed")
    path = write_study(folder, MIXED)
    (folder / "wide.yaml").write_text(WIDE, encoding="utf-8")
    (folder / "sulphur.yaml").write_text(SULPHUR, encoding="utf-8")
    return run_study(path, folder / "out", workers=0).results


def alone(text: str, folder: Path) -> xr.Dataset:
    """One case as `gibbsmin run` computes it."""
    path = folder / "alone.yaml"
    path.write_text(text, encoding="utf-8")
    return gibbsmin.run(gibbsmin.load_scenario(path), threads=1).dataset


def test_every_variable_of_a_case_is_what_run_finds(results: StudyResults, tmp_path: Path) -> None:
    for k, (steam, dioxide) in {0: (40, 1), 7: (80, 2), 11: (100, 3)}.items():
        text = SCENARIO.replace("60 mol", f"{steam} mol").replace("CO2: 5", f"CO2: {dioxide}")
        expected = alone(text, tmp_path)
        case = results.dataset.isel(case=k)
        compared = [str(name) for name in case.data_vars if name in expected]
        assert set(compared) >= {
            "mole_fraction", "gas_amount", "status", "gap", "feed_amount", "conversion of CO", "H2 to CO", "heat_duty",
            "heat_duty_per_feed", "density", "mean_molar_mass", "enthalpy", "element_potential", "balance_residual",
            "iterations",
        }  # fmt: skip
        for name in compared:
            # The same doubles, but for the last bits where one sums in another order.
            np.testing.assert_allclose(
                case[name].values, expected[name].values, rtol=1e-13, atol=1e-300, err_msg=name
            )
            assert case[name].attrs["units"] == expected[name].attrs["units"]
            if name != "status":
                assert case[name].attrs == expected[name].attrs
        assert list(case["species"].values) == list(expected["species"].values)


def test_the_store_opens_in_one_line_with_its_labels(results: StudyResults) -> None:
    dataset = xr.open_zarr(results.folder / "results.zarr", chunks=None)
    assert dataset.sizes == {
        "case": 12, "temperature": 5, "pressure": 3, "species": 6, "element": 4, "feed_species": 6,
    }  # fmt: skip
    assert dataset["steam"].attrs == {"long_name": "steam", "units": "mol"}
    assert dataset["steam"].values.tolist() == [40.0] * 3 + [60.0] * 3 + [80.0] * 3 + [100.0] * 3
    assert dataset["temperature"].attrs["units"] == "K"
    one = dataset["mole_fraction"].sel(case="05", species="H2", temperature=573.15, pressure=20e5)
    assert 0 < float(one) < 1
    assert "not_computed solved" in dataset["status"].attrs["flag_meanings"]
    assert dataset.attrs["title"] == "Shift in many ways"


def test_lazily_with_dask(results: StudyResults) -> None:
    pytest.importorskip("dask")
    lazy = open_study(results.folder, lazy=True).dataset
    assert lazy["mole_fraction"].chunks is not None
    mean = lazy["mole_fraction"].sel(species="CO").mean(("temperature", "pressure")).compute()
    expected = results.dataset["mole_fraction"].sel(species="CO").mean(("temperature", "pressure"))
    np.testing.assert_allclose(mean.values, expected.values, rtol=1e-14)


@pytest.mark.parametrize("cases_per_part", [1, 4])
def test_zarr_reads_the_shards_and_each_part_alone(cases_per_part: int, tmp_path: Path) -> None:
    """The chunk files are written by hand; zarr is the judge, and sees no more of a file than it needs."""
    zarr = pytest.importorskip("zarr")
    from zarr.codecs import BytesCodec, ShardingCodec

    plan = ArrayPlan(
        "x", ("case", "t", "species"), (6, 5, 3), "float64", float("nan"), 4, cases_per_part, "species", {}
    )
    array = zarr.create_array(
        tmp_path / "x", shape=plan.shape, dtype="f8", chunks=plan.chunk_shape, compressors=None, filters=None,
        serializer=ShardingCodec(
            chunk_shape=plan.part_shape, codecs=[BytesCodec()], index_codecs=[BytesCodec()]
        ),
        fill_value=plan.fill,
    )  # fmt: skip
    values = np.random.default_rng(1).random((6, 5, 3))
    for k, part in enumerate((values[:4], values[4:])):
        path = tmp_path / plan.file_of(k)
        path.parent.mkdir(parents=True)
        path.write_bytes(b"".join(shard(plan, part)))
    assert path.stat().st_size <= plan.chunk_bytes
    np.testing.assert_array_equal(array[:], values)
    # Ruin the values of every other species of the first chunk: reading one species does not notice.
    first = tmp_path / plan.file_of(0)
    content = np.frombuffer(first.read_bytes(), dtype="f8").copy()
    ruined = content[:60].reshape(4 // cases_per_part, 3, -1)
    ruined[:, 1:] = 99.0
    first.write_bytes(content.tobytes())
    np.testing.assert_array_equal(array[:4, :, 0], values[:4, :, 0])
    assert (array[:4, :, 1:] == 99.0).all()


def test_the_summary_has_a_row_for_each_case(results: StudyResults) -> None:
    table = pd.read_parquet(results.folder / "summary.parquet")
    dataset = results.dataset
    assert list(table["case"]) == list(dataset["case"].values)
    assert list(table["steam [mol]"]) == [40] * 3 + [60] * 3 + [80] * 3 + [100] * 3
    assert set(table["status"]) == {"solved"}
    for column, array in {
        "conversion of CO": dataset["conversion of CO"],
        "H2 to CO": dataset["H2 to CO"],
        "heat_duty": dataset["heat_duty"],
        "mole fraction H2": dataset["mole_fraction"].sel(species="H2"),
    }.items():
        flat = array.values.reshape(12, -1)
        assert table[f"{column} lowest"].tolist() == flat.min(axis=1).tolist()
        assert table[f"{column} highest"].tolist() == flat.max(axis=1).tolist()
    gap = (dataset["gap"] / dataset["gas_amount"]).values.reshape(12, -1).max(axis=1)
    np.testing.assert_allclose(table["largest gap per mol of gas"], gap, rtol=1e-13)
    assert (table["checked points"] == 1).all()
    assert (table["confirmed"] == 1).all()
    assert (table["seconds"] > 0).all()


CONDENSED = SCENARIO.replace("CH4, H2O]", "CH4, H2O]\n  condensed: [graphite]")
HELD_BACK = CONDENSED.replace("condensed", "held back")


def test_activity_of_a_phase_held_back_is_that_of_the_boudouard_balance(tmp_path: Path) -> None:
    """2 CO = C + CO2 is at equilibrium in the gas: a_C = K x_CO^2 (p/p0) / x_CO2 with K from the species data alone."""
    from gibbsmin.species import ThermoTable, standard_library

    study = STUDY + "keep: {composition: all}\n"
    results = run_study(write_study(tmp_path, study, HELD_BACK), tmp_path / "out", workers=0).results
    dataset, table = results.dataset, results.summary
    library = standard_library()
    g = ThermoTable([library.find(name) for name in ("CO", "CO2", "C(gr)")]).gibbs_RT(
        dataset["temperature"].values
    )
    K = xr.DataArray(np.exp(2 * g[:, 0] - g[:, 1] - g[:, 2]), dims="temperature")
    x = dataset["mole_fraction"]
    expected = K * x.sel(species="CO") ** 2 * (dataset["pressure"] / 1e5) / x.sel(species="CO2")
    found = dataset["phase_activity"].sel(phase="C(gr)")
    np.testing.assert_allclose(found, expected.transpose(*found.dims), rtol=1e-11)
    assert 1e-3 < float(found.min()) < float(found.max()) < 10
    assert (
        table["activity of C(gr) highest"].tolist() == found.max(("temperature", "pressure")).values.tolist()
    )
    # the issue's own question: largest yield under a limit of the carbon activity
    from gibbsmin.study.ranking import rank_cases

    limit = float(found.median())
    ranking = rank_cases(results, "H2", where=[f"activity of C(gr) < {limit!r}"])
    best = x.sel(species="H2").where(found < limit).max(("temperature", "pressure"))
    assert ranking["H2"].dropna().tolist() == sorted(best.values[best.notnull()].tolist(), reverse=True)
    assert 0 < ranking["H2"].notna().sum() < 12


def test_condensed_phases_take_part_as_in_a_run(tmp_path: Path) -> None:
    dry = CONDENSED.replace("60 mol", "1 mol")
    study = (
        STUDY.replace("[40, 60, 80, 100]", "[1, 2]")
        + "keep: {composition: all, further results: [heat duty]}\n"
    )
    results = run_study(write_study(tmp_path, study, dry), tmp_path / "out", workers=0).results
    expected = alone(dry.replace("CO2: 5", "CO2: 1") + "cross-check: {points: none}\n", tmp_path)
    case = results.dataset.isel(case=0)
    for name in (
        "mole_fraction",
        "phase_amount",
        "phase_activity",
        "conversion of CO",
        "heat_duty",
        "gas_amount",
    ):
        np.testing.assert_allclose(case[name], expected[name], rtol=1e-12, atol=1e-300, err_msg=name)
    assert float(case["phase_amount"].max()) > 1
    assert results.summary["amount of C(gr) highest"][0] == float(case["phase_amount"].max())
    assert results.all_solved


def test_a_wrong_answer_is_found_by_the_cross_check(tmp_path: Path) -> None:
    from dataclasses import replace

    from gibbsmin.study.solving import solve_case

    def wrong(layout: Any, table: Any, case: Any, threads: int | None) -> Any:
        solution = solve_case(layout, table, case, threads)
        return (
            replace(solution, amounts=solution.amounts * np.linspace(1.0, 1.01, 6))
            if case.number == 3
            else solution
        )

    run = run_study(write_study(tmp_path), tmp_path / "out", workers=0, solver=wrong)
    assert run.results.summary["differing"].tolist() == [0, 0, 0, 1] + [0] * 8
    assert not run.all_confirmed


def test_trouble_in_the_other_program_leaves_points_unanswered(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def trouble(*_: object) -> None:
        raise ValueError("nothing fits")

    monkeypatch.setattr("gibbsmin.comparison.Comparison.agreement", trouble)
    run = run_study(write_study(tmp_path), tmp_path / "out", workers=0)
    assert run.results.summary["no independent answer"].tolist() == [1] * 12
    assert run.all_solved
    assert run.all_confirmed  # a point without an answer is told, but is no contradiction


def test_the_manifest_ties_chunks_to_what_they_were_made_from(results: StudyResults) -> None:
    manifest = json.loads((results.folder / "manifest.json").read_text(encoding="utf-8"))
    assert manifest["version"] == gibbsmin.__version__
    chunk = manifest["chunks"][2]
    study = load_study(results.folder.parent / "study.yaml")
    assert chunk["scenario SHA-256"] == {case.name: case.digest for case in study.cases[4:6]}
    for path, digest in {**manifest["metadata"], **chunk["files"]}.items():
        assert hashlib.sha256((results.folder / path).read_bytes()).hexdigest() == digest
    recorded = {*manifest["metadata"], *(path for each in manifest["chunks"] for path in each["files"])}
    store = results.folder / "results.zarr"
    assert recorded == {
        path.relative_to(results.folder).as_posix() for path in store.rglob("*") if path.is_file()
    }
    assert set(manifest["species data SHA-256"]) == {"all"}
    assert not list(results.damaged_files())


def test_key_species_only_unless_asked_for_all(tmp_path: Path) -> None:
    few = run_study(write_study(tmp_path), tmp_path / "few", workers=0).results.dataset
    assert set(few["species"].values) == {"H2", "CO"}
    none = run_study(
        write_study(tmp_path, STUDY + "keep: {composition: none}\n"), tmp_path / "none", workers=0
    ).results.dataset
    assert "mole_fraction" not in none
    assert none["conversion of CO"].identical(few["conversion of CO"])


def test_unlike_maps_lie_in_groups_of_one_store(mixed: StudyResults, tmp_path: Path) -> None:
    tree = xr.open_datatree(mixed.folder / "results.zarr", engine="zarr")
    assert {name: sorted(map(str, group["case"].values)) for name, group in tree.children.items()} == {
        "maps_1": ["6", "7", "base"],
        "maps_2": ["wide"],
        "maps_3": ["sulphur"],
        "maps_4": ["4", "5"],
    }
    with pytest.raises(
        ValueError, match="4 kinds of map; take one of datasets: maps_1, maps_2, maps_3, maps_4"
    ):
        _ = mixed.dataset
    assert mixed.datasets["maps_2"]["mole_fraction"].dims == (
        "case", "steam_to_CO", "temperature", "pressure", "species",
    )  # fmt: skip
    # An axis that differs from case to case: a coordinate over the cases, or over them and its own points.
    hottest = mixed.datasets["maps_1"]
    assert hottest["temperature"].dims == ("case", "temperature_point")
    assert hottest["temperature"].sel(case="7").values[-1] == pytest.approx(550 + 273.15)
    single = mixed.datasets["maps_4"]
    assert single["status"].dims == ("case", "temperature")
    assert single["pressure"].values.tolist() == [5e5, 50e5]
    assert single["pressure_varied"].attrs["units"] == "bar"
    expected = alone(SCENARIO.replace("[10 bar, 20 bar, 30 bar]", "50 bar"), tmp_path)
    np.testing.assert_allclose(
        single["mole_fraction"].sel(case="5", species="H2"),
        expected["mole_fraction"].sel(species="H2").isel(pressure=0),
        rtol=1e-13,
    )
    expected = alone(WIDE, tmp_path)
    np.testing.assert_allclose(
        mixed.datasets["maps_2"]["conversion of CO"].isel(case=0), expected["conversion of CO"], rtol=1e-13
    )


def test_unsolved_points_are_counted_not_hidden(tmp_path: Path) -> None:
    """No listed gas can hold 2 O and nothing else beside CO2 and N2: the balance has no solution."""

    def unsolved(layout: Any, table: Any, case: Any, threads: int | None) -> Any:
        from gibbsmin.study.solving import solve_case

        solution = solve_case(layout, table, case, threads)
        solution.status[0, 2, 1] = 4
        for values in (solution.amounts, solution.gap, solution.balance_residual):
            values[0, 2, 1] = np.nan
        return solution

    results = run_study(write_study(tmp_path), tmp_path / "out", workers=0, solver=unsolved).results
    assert set(results.summary["status"]) == {"partly solved"}
    assert set(results.summary["unsolved points"]) == {1}
    assert results.summary["H2 to CO highest"].notna().all()
    assert int(results.dataset["mole_fraction"].isnull().sum()) == 12 * 2
    assert "12 cases with unsolved points:" in results.in_words()


def test_memory_and_disk_are_told_before_the_start(results: StudyResults) -> None:
    plan = plan_study(load_study(results.folder.parent / "study.yaml"))
    stored = sum(
        p.stat().st_size for p in (results.folder / "results.zarr").glob("*/c/*/**/*") if p.is_file()
    )
    assert stored <= plan.disk_bytes
    assert plan.memory_bytes(2) > plan.memory_bytes(0)


def test_a_study_that_does_not_fit_the_memory_is_refused_with_the_numbers(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    plan = plan_study(load_study(write_study(tmp_path)))
    monkeypatch.setattr("gibbsmin.study.running.physical_memory", lambda: 4_000_000_000)
    assert workers_for(plan, 64, plan.chunks) == 6  # as asked, but no more than chunks
    monkeypatch.setattr("gibbsmin.study.running.SMALL_STUDY", 0)
    monkeypatch.setattr("gibbsmin.study.running.available_cores", lambda: 64)
    monkeypatch.setattr("gibbsmin.study.running.physical_memory", lambda: plan.memory_bytes(3))
    assert workers_for(plan, None, plan.chunks) == 3
    monkeypatch.setattr("gibbsmin.study.running.physical_memory", lambda: 100_000_000)
    with pytest.raises(StudyRefusedError, match=r"takes 0\.24 GB of memory, and this machine has 0\.1 GB"):
        run_study(tmp_path / "study.yaml", tmp_path / "out")


@pytest.mark.parametrize("content", [None, "{}", "no json"])
def test_a_folder_without_a_finished_study(content: str | None, tmp_path: Path) -> None:
    if content is not None:
        (tmp_path / "manifest.json").write_text(content, encoding="utf-8")
    with pytest.raises(StudyRefusedError):
        open_study(tmp_path)
