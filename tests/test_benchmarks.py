"""The benchmarks run, and what they record is sound; no time is asserted."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from tests.benchmarks.__main__ import BENCHMARKS, main
from tests.benchmarks.cantera_worker import OURS, SOLVERS, IsolatedWorker, feed_of
from tests.benchmarks.measuring import Table, largest_differences, ratio, shown
from tests.population import problem


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    into = tmp_path_factory.mktemp("benchmarks")
    assert main(["--quick", "--into", str(into)]) == 0
    return into


def measured(folder: Path, name: str) -> dict[str, Any]:
    record = json.loads((folder / f"{name}.json").read_text(encoding="utf-8"))
    assert record["quick"] is True
    assert record["machine"]["cores"] >= 1
    figures: dict[str, Any] = record["measured"]
    return figures


def test_dense_map(folder: Path) -> None:
    found = measured(folder, "dense_map")
    assert set(found["solved"].values()) == {found["points"]}
    assert found["difference from minimise"]["largest relative"] < 1e-11
    # Cantera's tolerance is 1e-9 of the element totals: 1e-6 relative at a mole fraction of 1e-6 and above
    # (own measurement, some 1e-8 here)
    assert max(relative for _, relative in found["difference from Cantera"].values()) < 1e-6
    assert len(found["seconds"]) == 6
    assert all(spent > 0 for each in found["seconds"].values() for spent in each)


def test_scattered(folder: Path) -> None:
    for found in measured(folder, "scattered").values():
        assert set(found["solved"].values()) == {found["points"]}
        assert found["difference from minimise"] < 1e-11
        assert found["difference from Cantera"][1] < 1e-5


def test_single_point(folder: Path) -> None:
    found = measured(folder, "single_point")
    for figures in found["by species"].values():
        assert figures["solved"] == found["calls"]
        for name in ("minimise", "equilibrium", "Cantera"):
            assert 0 < figures[name]["median"] <= figures[name]["longest"]


@pytest.mark.parametrize(("name", "cases"), [("species_count", "cases"), ("scaling", "species")])
def test_every_way_solves_every_point(folder: Path, name: str, cases: str) -> None:
    for case in measured(folder, name)[cases]:
        assert case["solved"] == case["points"]
        # stoichiometric feeds leave Cantera's species of 1e-6 off by up to 2.5e-4 (Cantera 3.2.0, own
        # measurement on methane and ethylene flames)
        assert case["difference"][1] < 1e-3


def test_scaling(folder: Path) -> None:
    found = measured(folder, "scaling")
    for kind in ("map points", "scattered points"):
        assert all(case["solved"] == case["points"] for case in found[kind])
    assert [stream["way"] for stream in found["streamed"]] == ["slices", "study"]
    for stream in found["streamed"]:
        assert stream["solved"] == stream["points"] == 2 * 40 * 25
        assert stream["peak MiB"] >= stream["start MiB"] > 0
    # doubles of every species on disk, uncompressed
    slices = found["streamed"][0]
    assert slices["file MiB"] * 2**20 > 8 * slices["points"] * slices["species"]


def test_floor(folder: Path) -> None:
    found = measured(folder, "floor")
    assert found["solved"] == found["points"]
    assert set(found["seconds"]) == {"map", "pass", "pass with the functions at every point"}


def test_scipy(folder: Path) -> None:
    found = measured(folder, "scipy")
    assert found["gibbsmin"]["right"] == found["gibbsmin"]["points"]
    # the majors agree, so both sides minimise the same function
    assert found["SLSQP"]["roughly right"] >= found["SLSQP"]["points"] - 1
    # an energy below the proved minimum would need an element balance that is off
    assert found["SLSQP"]["energy above ours, least"] > -1e-8


def test_robustness(folder: Path) -> None:
    found = measured(folder, "robustness")
    assert found["population"]["by_status"] == {"SOLVED": found["population"]["count"]}
    assert found["population"]["failure_count"] == 0
    beside = found["comparison"]
    posed = beside["problems"] - beside["not posed"]
    assert beside["fates"][OURS] == {"right": posed}
    assert beside["references"] >= 1
    assert beside["worst trace"] < 1e-9
    assert beside["traces off"][OURS] == 0
    for name in SOLVERS:
        assert sum(beside["fates"][name].values()) == posed > 0


def test_tables_and_plots(folder: Path) -> None:
    text = (folder / "tables.md").read_text(encoding="utf-8")
    for name, module in BENCHMARKS.items():
        assert f"### {module.TITLE}" in text
        assert (
            hasattr(module, "plot") == (folder / f"{name}.png").exists() == (folder / f"{name}.svg").exists()
        )
    assert "nan" not in text
    assert main(["--redraw", "--into", str(folder)]) == 0
    assert (folder / "tables.md").read_text(encoding="utf-8") == text


def test_an_unknown_name_is_refused(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as stopped:
        main(["no_such_thing"])
    assert stopped.value.code == 2
    assert "there are dense_map" in capsys.readouterr().err


def test_a_dead_worker_is_replaced() -> None:
    with IsolatedWorker() as worker:
        worker._process.kill()
        worker._process.join()
        answers = worker.solve(1, 1, 20)
        assert set(answers) == {OURS, *SOLVERS}
        assert answers["auto"].log_mole_fractions is not None
        assert worker.solve(1, 1, 20)[OURS].failure == ""


def test_the_feed_for_cantera_has_the_element_totals() -> None:
    for index in range(20):
        case = problem(11, index, most_species=40)
        fractions = feed_of(case)
        atoms = case.formula_matrix @ fractions
        scale = atoms.sum() / case.element_amounts.sum()
        assert abs(atoms - case.element_amounts * scale).max() < 1e-14 * abs(atoms).max()


def test_helpers() -> None:
    assert [shown(each) for each in (None, "a", 1234, 0.0, 12345.6, 0.01234, 1e-9)] == [
        "-",
        "a",
        "1,234",
        "0",
        "12,346",
        "0.0123",
        "1.0e-09",
    ]
    assert ratio([2.0, 4.0], 10, [1.0, 1.0], 100) == pytest.approx(30.0)

    both = largest_differences(np.array([[0.5, 1e-8]]), np.array([[0.4, 2e-8]]))
    assert both == pytest.approx((0.1, 0.2))
    assert "| a | 1 |" in Table("t", ["x", "y"], [["a", 1]]).markdown()
