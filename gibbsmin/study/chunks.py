"""What a study hands out and gets back: chunks of cases, what they share, and receipts."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from gibbsmin.study.shards import ArrayPlan

if TYPE_CHECKING:
    from gibbsmin.study.model import Case, Layout

FloatArray = NDArray[np.float64]

NOT_COMPUTED = -1
"""Status of the points of a case that failed as a whole, or was not reached."""

STORE = "results.zarr"
RECEIPTS = "receipts"

PHASE_VARIABLES = ("phase_amount", "phase_activity")


@dataclass(frozen=True)
class Group:
    """What all chunks of one layout share. `path` is that of the Zarr group within the store, "" for its root."""

    layout: Layout
    path: str
    arrays: tuple[ArrayPlan, ...]
    derived: tuple[str, ...]
    further: tuple[str, ...]
    checked_points: int

    def array(self, name: str) -> ArrayPlan | None:
        return next((array for array in self.arrays if array.name == name), None)


@dataclass(frozen=True)
class Chunk:
    """Some cases of one group, computed together. `inputs` is the digest of everything that decides the values."""

    group: Group
    number: int
    cases: tuple[Case, ...]
    inputs: str

    @property
    def points(self) -> int:
        return len(self.cases) * self.group.layout.points

    @property
    def receipt_file(self) -> str:
        return f"{RECEIPTS}/{self.group.path or 'all'}/{self.number:06d}.json"

    @property
    def bytes(self) -> int:
        return sum(array.chunk_bytes for array in self.group.arrays)


@dataclass(frozen=True)
class Receipt:
    """What became of a chunk: its files with their SHA-256, and a row for each case."""

    inputs: str
    files: Mapping[str, str]
    rows: tuple[Mapping[str, Any], ...]

    @property
    def failed(self) -> int:
        return sum(row["status"] == "failed" for row in self.rows)

    def as_json(self) -> bytes:
        return (json.dumps(asdict(self), indent=1, ensure_ascii=False, allow_nan=False) + "\n").encode()

    @staticmethod
    def of_json(text: bytes) -> Receipt | None:
        """The receipt, or None if the text is none (torn by a power cut, say)."""
        try:
            content = json.loads(text)
            return Receipt(content["inputs"], dict(content["files"]), tuple(content["rows"]))
        except (ValueError, KeyError, TypeError):
            return None
