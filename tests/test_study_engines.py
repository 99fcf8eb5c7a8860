"""The same bytes from every engine; a case that fails or kills its process is reported, and nothing else suffers."""

from __future__ import annotations

import os
import signal
import sys
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest

from gibbsmin.errors import MissingPackageError
from gibbsmin.study import open_study, run_study
from tests.study_cases import (
    STUDY,
    breaks_off_at_the_fifth,
    dies_at_the_fifth,
    dies_at_two,
    fails_at_the_fifth,
    slow,
    store_bytes,
    summary_without_times,
    write_study,
)


@pytest.fixture
def study(tmp_path: Path) -> Path:
    return write_study(tmp_path / "files")


@pytest.fixture
def whole(study: Path, tmp_path: Path) -> Path:
    """The folder of a run in one process."""
    run_study(study, tmp_path / "whole", workers=0)
    return tmp_path / "whole"


@pytest.fixture(scope="module")
def client() -> Iterator[Any]:
    """Two processes that talk over TCP to a scheduler in this one."""
    distributed = pytest.importorskip("distributed")
    with (
        distributed.LocalCluster(
            n_workers=2,
            threads_per_worker=1,
            processes=True,
            protocol="tcp://",
            dashboard_address="127.0.0.1:0",
        ) as cluster,
        distributed.Client(cluster) as client,
    ):
        yield client


def test_processes_give_the_same_bytes(study: Path, whole: Path, tmp_path: Path) -> None:
    run = run_study(study, tmp_path / "two", workers=2)
    assert store_bytes(tmp_path / "two") == store_bytes(whole)
    assert summary_without_times(run.results).equals(summary_without_times(open_study(whole)))


@pytest.mark.parametrize("size", [1, 5, 12])
def test_values_do_not_depend_on_the_chunks(size: int, study: Path, whole: Path, tmp_path: Path) -> None:
    study.write_text(STUDY.replace("cases per chunk: 2", f"cases per chunk: {size}"), encoding="utf-8")
    other = run_study(study, tmp_path / "other", workers=0).results
    one = open_study(whole)
    assert other.dataset.identical(one.dataset)
    assert summary_without_times(other).equals(summary_without_times(one))


def test_a_cluster_over_tcp_gives_the_same_bytes(
    study: Path, whole: Path, tmp_path: Path, client: Any
) -> None:
    address = client.scheduler_info()["address"]
    assert address.startswith("tcp://")
    done: list[tuple[int, int]] = []
    run_study(study, tmp_path / "cluster", cluster=address, progress=lambda *each: done.append(each))
    assert store_bytes(tmp_path / "cluster") == store_bytes(whole)
    assert [sum(each) for each in zip(*done, strict=True)] == [12, 12 * 15]


def test_a_worker_killed_in_the_middle_loses_nothing(
    study: Path, whole: Path, tmp_path: Path, client: Any
) -> None:
    folder = tmp_path / "cluster"
    failures: list[BaseException] = []

    def compute() -> None:
        try:
            run_study(study, folder, cluster=client, solver=slow)
        except BaseException as error:
            failures.append(error)

    workers = client.run(os.getpid)
    thread = threading.Thread(target=compute)
    thread.start()
    wait_for(lambda: len(list(folder.glob("receipts/all/*.json"))) >= 2)
    killed = next(iter(workers.values()))
    os.kill(killed, signal.SIGKILL)
    thread.join(timeout=120)
    assert not failures
    assert not thread.is_alive()
    assert killed not in client.run(os.getpid).values()
    assert store_bytes(folder) == store_bytes(whole)


def wait_for(condition: Callable[[], bool]) -> None:
    deadline = time.monotonic() + 60
    while not condition():
        assert time.monotonic() < deadline
        time.sleep(0.005)


def check_the_rest(folder: Path, whole: Path, failed: dict[int, str]) -> None:
    """All cases but the failed ones have the values of an undisturbed run."""
    broken, sound = open_study(folder), open_study(whole)
    table = broken.summary
    assert list(table["status"]) == ["failed" if k in failed else "solved" for k in range(12)]
    for k, reason in failed.items():
        assert reason in table["failure"][k]
        part = broken.dataset.isel(case=k)
        assert bool((part["status"] == -1).all())
        assert bool(part["mole_fraction"].isnull().all())
    kept = [k for k in range(12) if k not in failed]
    assert broken.dataset.isel(case=kept).identical(sound.dataset.isel(case=kept))
    assert not broken.all_solved


def test_a_case_that_fails_stays_alone_and_is_tried_again_by_the_next_run(
    study: Path, whole: Path, tmp_path: Path
) -> None:
    folder = tmp_path / "broken"
    run_study(study, folder, workers=0, solver=fails_at_the_fifth)
    check_the_rest(folder, whole, {4: "ArithmeticError: no luck with this one"})
    assert "1 cases failed:" in open_study(folder).in_words()
    lines: list[str] = []
    run = run_study(study, folder, workers=0, tell=lines.append)
    assert lines == ["found 5 of 6 chunks finished, 1 with failed cases; these are computed again"]
    assert run.computed_chunks == 1
    assert store_bytes(folder) == store_bytes(whole)


def test_nothing_is_kept_of_a_case_that_breaks_off(study: Path, whole: Path, tmp_path: Path) -> None:
    run_study(study, tmp_path / "broken", workers=0, solver=breaks_off_at_the_fifth)
    check_the_rest(tmp_path / "broken", whole, {4: "ValueError"})
    assert open_study(tmp_path / "broken").summary["checked points"].tolist() == [1] * 4 + [0] + [1] * 7


def test_a_case_that_kills_its_process_is_left_out(study: Path, whole: Path, tmp_path: Path) -> None:
    run_study(study, tmp_path / "broken", workers=2, solver=dies_at_the_fifth)
    check_the_rest(tmp_path / "broken", whole, {4: "its process died each time"})


def test_cases_that_kill_every_worker_of_a_cluster_are_reported(
    study: Path, whole: Path, tmp_path: Path, client: Any
) -> None:
    run_study(study, tmp_path / "broken", cluster=client, solver=dies_at_two)
    check_the_rest(tmp_path / "broken", whole, {4: "its process died", 5: "its process died"})


def test_a_cluster_without_distributed_names_the_package(
    study: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setitem(sys.modules, "distributed", None)
    with pytest.raises(MissingPackageError, match="pip install distributed"):
        run_study(study, tmp_path / "new", cluster="tcp://localhost:1")
