"""Run a study again and again, killed at random moments, until it has been killed often enough and is finished.

`python -m tests.study_kills STUDY FOLDER KILLS SEED` prints how often the process was killed and in how many rounds
(a round ends with a finished study; the next begins in a new folder). The libraries are loaded once and each run is
a fork, so that a run costs milliseconds and most kills hit it at work.
"""

from __future__ import annotations

import json
import os
import random
import signal
import sys
import time
from pathlib import Path

from gibbsmin.study import load_study, run_study

LONGEST = 0.7  # of the time that a whole run takes; kills come earlier than that
NEVER = 300.0


def killed(study_file: str, folder: Path, after: float) -> bool:
    """Whether a run in a fork was killed `after` seconds, rather than finished before."""
    child = os.fork()
    if child == 0:
        status = 1
        try:
            run_study(load_study(study_file), folder, workers=0)
            status = 0
        finally:
            os._exit(status)
    deadline = time.monotonic() + after
    while time.monotonic() < deadline:
        done, status = os.waitpid(child, os.WNOHANG)
        if done:
            assert status == 0, f"a run failed with {status}"
            return False
        time.sleep(0.001)
    os.kill(child, signal.SIGKILL)
    _, status = os.waitpid(child, 0)
    return os.WIFSIGNALED(status)


def main() -> None:
    study, home, wanted, seed = sys.argv[1], Path(sys.argv[2]), int(sys.argv[3]), int(sys.argv[4])
    generator = random.Random(seed)
    # Libraries and species data are loaded once for all forks.
    run_study(load_study(study), home / "first", workers=0)
    begun = time.monotonic()
    assert not killed(study, home / "timed", NEVER)
    longest = LONGEST * (time.monotonic() - begun)
    kills, rounds = 0, 0
    while kills < wanted:
        rounds += 1
        folder = home / f"round_{rounds}"
        while killed(study, folder, generator.uniform(0.0, longest) if kills < wanted else NEVER):
            kills += 1
    print(json.dumps({"kills": kills, "rounds": rounds, "longest": longest}))


if __name__ == "__main__":
    main()
