"""A study that is cut off at any moment goes on where it stopped, and ends with the same bytes."""

from __future__ import annotations

import errno
import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

import pytest

from gibbsmin.errors import StudyRefusedError, StudyStoppedError
from gibbsmin.study import load_study, open_study, run_study
from gibbsmin.study import solving as chunk_solving
from gibbsmin.study.locking import folder_lock
from gibbsmin.study.shards import write_whole
from tests.study_cases import STUDY, store_bytes, summary_without_times, write_study

ROOT = Path(__file__).resolve().parents[1]


@pytest.fixture
def study(tmp_path: Path) -> Path:
    return write_study(tmp_path / "files")


@pytest.fixture
def whole(study: Path, tmp_path: Path) -> Path:
    """The folder of an uninterrupted run."""
    run_study(study, tmp_path / "whole", workers=0)
    return tmp_path / "whole"


def told(study: Path, folder: Path, **options: Any) -> tuple[list[str], int]:
    """What a run says it found, and how many chunks it computed."""
    lines: list[str] = []
    run = run_study(study, folder, workers=0, tell=lines.append, **options)
    return lines, run.computed_chunks


def command(*words: str | Path) -> list[str]:
    return [sys.executable, "-m", "gibbsmin", *map(str, words)]


@pytest.mark.skipif(not hasattr(os, "fork"), reason="needs fork")
def test_killed_25_times_at_random_moments_it_ends_with_the_same_bytes(study: Path, tmp_path: Path) -> None:
    study.write_text(
        STUDY.replace("to: 3, step: 1", "to: 10, step: 1"), encoding="utf-8"
    )  # 40 cases, 20 chunks
    run_study(study, tmp_path / "whole", workers=0)
    arguments = [sys.executable, "-m", "tests.study_kills", str(study), str(tmp_path), "25", "20261201"]
    done = subprocess.run(arguments, cwd=ROOT, capture_output=True, text=True, check=True)
    outcome = json.loads(done.stdout)
    assert outcome["kills"] >= 25
    expected = store_bytes(tmp_path / "whole")
    for k in range(1, outcome["rounds"] + 1):
        assert store_bytes(tmp_path / f"round_{k}") == expected
        assert not list((tmp_path / f"round_{k}").rglob("*.unfinished"))
    last = open_study(tmp_path / f"round_{outcome['rounds']}")
    assert summary_without_times(last).equals(summary_without_times(open_study(tmp_path / "whole")))


def run_and_kill(study: Path, folder: Path, after: float) -> None:
    """Start the command with two workers, kill it `after` seconds from the first receipt, and see its workers go."""
    import psutil

    process = subprocess.Popen(
        command("study", study, "--out", folder, "--workers", "2"), cwd=ROOT, stderr=subprocess.DEVNULL
    )
    deadline = time.monotonic() + 60
    before = len(list(folder.glob("receipts/all/*.json")))
    while len(list(folder.glob("receipts/all/*.json"))) <= before and process.poll() is None:
        assert time.monotonic() < deadline
        time.sleep(0.002)
    workers = psutil.Process(process.pid).children(recursive=True) if process.poll() is None else []
    time.sleep(after)
    process.kill()
    process.wait()
    psutil.wait_procs(workers, timeout=20)
    assert not [worker for worker in workers if worker.is_running() and worker.status() != "zombie"]


def test_the_command_with_workers_survives_kill_9(study: Path, whole: Path, tmp_path: Path) -> None:
    folder = tmp_path / "killed"
    run_and_kill(study, folder, 0.0)
    _, computed = told(study, folder)
    assert store_bytes(folder) == store_bytes(whole)
    assert computed < 6


@pytest.mark.slow
def test_the_command_with_workers_survives_25_kills(study: Path, tmp_path: Path) -> None:
    study.write_text(STUDY.replace("to: 3, step: 1", "to: 40, step: 1"), encoding="utf-8")
    run_study(study, tmp_path / "whole", workers=0)
    folder = tmp_path / "killed"
    for k in range(25):
        run_and_kill(study, folder, 0.004 * k)
    told(study, folder)
    assert store_bytes(folder) == store_bytes(tmp_path / "whole")


def test_ctrl_c_exits_with_130_and_keeps_what_is_finished(study: Path, whole: Path, tmp_path: Path) -> None:
    folder = tmp_path / "stopped"
    study.write_text(STUDY.replace("to: 3, step: 1", "to: 60, step: 1"), encoding="utf-8")
    process = subprocess.Popen(
        command("study", study, "--out", folder, "--workers", "1"),
        cwd=ROOT,
        stderr=subprocess.PIPE,
        text=True,
    )
    while len(list(folder.glob("receipts/all/*.json"))) < 3 and process.poll() is None:
        time.sleep(0.002)
    process.send_signal(signal.SIGINT)
    _, errors = process.communicate(timeout=60)
    assert (process.returncode, errors.strip()) == (130, "stopped")
    study.write_text(STUDY, encoding="utf-8")
    lines, computed = told(study, folder)
    assert "found" in lines[0]
    assert computed < 6
    assert store_bytes(folder) == store_bytes(whole)


def test_a_second_call_computes_nothing_and_says_so(study: Path, whole: Path) -> None:
    before = store_bytes(whole)
    assert told(study, whole) == (["found 6 of 6 chunks finished"], 0)
    assert store_bytes(whole) == before


@pytest.mark.parametrize("what", ["flipped bit", "cut short", "removed", "torn receipt"])
def test_a_damaged_chunk_is_found_by_its_digest_and_computed_again(
    what: str, study: Path, whole: Path
) -> None:
    before = store_bytes(whole)
    chunk = whole / "results.zarr/mole_fraction/c/3/0/0/0"
    content = bytearray(chunk.read_bytes())
    if what == "flipped bit":
        content[100] ^= 1
        chunk.write_bytes(content)
    elif what == "cut short":
        chunk.write_bytes(content[:-8])
    elif what == "removed":
        chunk.unlink()
    else:
        (whole / "receipts/all/000003.json").write_bytes(b'{"inputs": "0')
    if what != "torn receipt":
        assert list(open_study(whole).damaged_files()) == ["results.zarr/mole_fraction/c/3/0/0/0"]
    lines, computed = told(study, whole)
    assert lines == ["found 5 of 6 chunks finished, 1 damaged; these are computed again"]
    assert computed == 1
    assert store_bytes(whole) == before
    assert not list(open_study(whole).damaged_files())


def test_only_chunks_of_changed_inputs_are_computed_again(study: Path, whole: Path) -> None:
    study.write_text(STUDY.replace("[40, 60, 80, 100]", "[40, 60, 80, 101]"), encoding="utf-8")
    lines, computed = told(study, whole)
    # 3 of 12 cases changed, two to a chunk, the first of them alone in its chunk's second half.
    assert lines == ["found 4 of 6 chunks finished, 2 made from other inputs; these are computed again"]
    assert computed == 2
    run_study(study, whole.parent / "fresh", workers=0)
    assert store_bytes(whole) == store_bytes(whole.parent / "fresh")


def test_other_species_data_make_every_chunk_out_of_date(
    study: Path, whole: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("gibbsmin.study.planning.species_digest", lambda species: "other data")
    assert told(study, whole)[1] == 6


def test_another_version_makes_every_chunk_out_of_date(
    study: Path, whole: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("gibbsmin.__version__", "99.0", raising=False)
    assert told(study, whole)[1] == 6


def test_cases_added_at_the_end_leave_the_finished_ones_alone(study: Path, whole: Path) -> None:
    study.write_text(STUDY.replace("60, 80, 100]", "60, 80, 100, 120]"), encoding="utf-8")
    lines, computed = told(study, whole)
    assert lines == ["found 6 of 8 chunks finished, 2 not begun"]
    assert computed == 2
    run_study(study, whole.parent / "fresh", workers=0)
    assert store_bytes(whole) == store_bytes(whole.parent / "fresh")


def test_cases_taken_away_leave_no_trace(study: Path, whole: Path) -> None:
    study.write_text(STUDY.replace("[40, 60, 80, 100]", "[40, 60]"), encoding="utf-8")
    assert told(study, whole)[1] == 0
    run_study(study, whole.parent / "fresh", workers=0)
    assert store_bytes(whole) == store_bytes(whole.parent / "fresh")
    assert len(list((whole / "receipts").rglob("*.json"))) == 3


def test_a_full_disk_stops_the_study_and_the_same_call_goes_on(
    study: Path, whole: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    folder = tmp_path / "full"
    written: list[Path] = []

    def until_full(path: Path, pieces: Any) -> str:
        written.append(path)
        if len(written) > 20:
            raise OSError(errno.ENOSPC, "No space left on device")
        return write_whole(path, pieces)

    with monkeypatch.context() as patch:
        patch.setattr(chunk_solving, "write_whole", until_full)
        with pytest.raises(
            StudyStoppedError, match=r"disk of .* is full; 2 of 6 chunks are finished and kept"
        ) as stop:
            run_study(study, folder, workers=0)
    assert (stop.value.finished, stop.value.chunks) == (2, 6)
    lines, computed = told(study, folder)
    assert lines == ["found 2 of 6 chunks finished, 4 not begun"]
    assert computed == 4
    assert store_bytes(folder) == store_bytes(whole)


def test_a_study_that_does_not_fit_the_disk_is_refused_with_the_numbers(
    study: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    class Usage:
        free = 5_000

    monkeypatch.setattr("gibbsmin.study.running.shutil.disk_usage", lambda folder: Usage)
    with pytest.raises(StudyRefusedError, match=r"take [\d.e-]+ GB, and 5e-06 GB are free"):
        run_study(study, tmp_path / "new", workers=0)
    assert not (tmp_path / "new").exists()


def test_a_second_run_on_the_folder_is_refused(study: Path, whole: Path) -> None:
    with (
        folder_lock(whole),
        pytest.raises(StudyRefusedError, match=rf"is running in this folder \(process {os.getpid()} on"),
    ):
        run_study(study, whole, workers=0)
    assert told(study, whole)[1] == 0  # the lock is free again


def test_the_lock_dies_with_its_process(study: Path, whole: Path) -> None:
    holder = (
        "import sys, time; from pathlib import Path; from gibbsmin.study.locking import folder_lock\n"
        "with folder_lock(Path(sys.argv[1])):\n    print('held', flush=True); time.sleep(60)"
    )
    with subprocess.Popen(
        [sys.executable, "-c", holder, str(whole)], cwd=ROOT, stdout=subprocess.PIPE, text=True
    ) as process:
        assert process.stdout is not None
        assert process.stdout.readline() == "held\n"
        with pytest.raises(StudyRefusedError, match=f"process {process.pid} on"):
            run_study(study, whole, workers=0)
        process.kill()
    assert told(study, whole)[1] == 0


def test_foreign_folders_and_other_studies_are_left_alone(study: Path, whole: Path, tmp_path: Path) -> None:
    foreign = tmp_path / "foreign"
    foreign.mkdir()
    (foreign / "thesis.txt").write_text("all my work")
    with pytest.raises(StudyRefusedError, match="holds other files and no study"):
        run_study(study, foreign, workers=0)
    assert [path.name for path in foreign.iterdir()] == ["thesis.txt"]
    before = store_bytes(whole)
    study.write_text(STUDY.replace("Shift in many ways", "Something else"), encoding="utf-8")
    with pytest.raises(StudyRefusedError, match="holds the study 'Shift in many ways'"):
        run_study(study, whole, workers=0)
    assert store_bytes(whole) == before
    run_study(load_study(study), whole, workers=0, overwrite=True)
    assert open_study(whole).manifest["title"] == "Something else"
