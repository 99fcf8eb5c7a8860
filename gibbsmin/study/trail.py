"""Traces that a worker leaves of the case it is in, so that a case that kills its process is found and left out.

A process that dies (memory, a fault of a library) takes the other cases of its chunk with it, and the engine
starts the chunk anew. The trace of each attempt ends with the case that was being solved; a case on which two
attempts of the same run ended is not tried a third time.
"""

from __future__ import annotations

from pathlib import Path
from types import TracebackType
from typing import TextIO

TRAILS = "trails"
MOST_DEATHS = 2
"""Attempts that may end in the same case. Dask gives a task up after four."""


class Trail:
    """The trace of one chunk. Use as a context while its cases are solved."""

    def __init__(self, path: Path, run_name: str) -> None:
        self._path = path
        self._run_name = run_name
        self._stream: TextIO | None = None

    @classmethod
    def of(cls, folder: Path, group: str, chunk: int, run_name: str) -> Trail:
        return cls(folder / TRAILS / f"{group or 'all'}-{chunk:06d}", run_name)

    def deadly_cases(self) -> frozenset[int]:
        """Numbers of the cases in which enough attempts of this run have ended."""
        ends: list[str] = []
        for line in self._lines():
            run_name, _, case = line.partition(" ")
            if run_name != self._run_name:
                continue
            if case == "attempt":
                ends.append("")
            elif ends:
                ends[-1] = case
        return frozenset(
            int(case) for case in set(ends) if case.isdecimal() and ends.count(case) >= MOST_DEATHS
        )

    def __enter__(self) -> Trail:
        self._path.parent.mkdir(parents=True, exist_ok=True)
        self._stream = self._path.open("a", encoding="ascii", buffering=1)
        self._write("attempt")
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._stream is not None:
            self._stream.close()

    def begin(self, case: int | None) -> None:
        """A case is begun (None: all are done)."""
        self._write("-" if case is None else str(case))

    def remove(self) -> None:
        """The chunk is finished."""
        self._path.unlink(missing_ok=True)

    def _write(self, word: str) -> None:
        assert self._stream is not None
        self._stream.write(f"{self._run_name} {word}\n")

    def _lines(self) -> list[str]:
        try:
            return self._path.read_text(encoding="ascii", errors="replace").splitlines()
        except OSError:
            return []
