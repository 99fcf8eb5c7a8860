"""Chunks as files: the sharded arrays of Zarr 3, written whole or not at all.

A chunk of the store is one file for one variable of several cases ("shard"). Within it, each case (and each
species) is an inner chunk that a reader can fetch alone. Without compression such a file is nothing but the
values in the order of the inner chunks, followed by the index of their places (offset and length as unsigned
64-bit integers, little endian; all ones for a missing one), see "sharding_indexed" in the Zarr 3 specification,
https://zarr-specs.readthedocs.io/en/latest/v3/codecs/sharding-indexed/. So it goes to disk straight from the
solver's memory, and its digest is known before it is written. Doubles of a map hardly shrink: measured, the
fastest compressors gained a factor of 1.2 and cost as much time as the solving.
"""

from __future__ import annotations

import hashlib
import math
import os
import secrets
from collections.abc import Sequence
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

UNFINISHED = ".unfinished"
"""Ending of files that are being written; one that is found was left by a process that died."""

SMALL_MAP = 8192
"""Points below which the cases of a chunk form one inner chunk, so that the index stays small beside the data."""

_MISSING = np.uint64(2**64 - 1)


@dataclass(frozen=True)
class ArrayPlan:
    """One variable of the store.

    Attributes:
        name: of the variable; `dims` the names of its dimensions, "case" first.
        shape: of the whole array; the last length is that of `extra` where a point has several values.
        dtype: NumPy's name, little endian. `fill`: what stands for a case that was not computed.
        cases_per_chunk, cases_per_part: cases in a file, and in an inner chunk of it.
        extra: dimension beside case and axes ("species"), or "".
        attributes: units, long_name and so on.
    """

    name: str
    dims: tuple[str, ...]
    shape: tuple[int, ...]
    dtype: str
    fill: float | int
    cases_per_chunk: int
    cases_per_part: int
    extra: str
    attributes: dict[str, Any]

    @property
    def extras(self) -> int:
        """Values of one point."""
        return self.shape[-1] if self.extra else 1

    @property
    def points(self) -> int:
        """Points of one case."""
        return math.prod(self.shape[1 : len(self.shape) - bool(self.extra)])

    @property
    def part_shape(self) -> tuple[int, ...]:
        """Shape of an inner chunk."""
        shape = (self.cases_per_part, *self.shape[1:])
        return (*shape[:-1], 1) if self.extra else shape

    @property
    def chunk_shape(self) -> tuple[int, ...]:
        return (self.cases_per_chunk, *self.shape[1:])

    @property
    def chunk_bytes(self) -> int:
        """Size of a full chunk's file."""
        values = self.cases_per_chunk * self.points * self.extras
        parts = self.cases_per_chunk // self.cases_per_part * self.extras
        return values * np.dtype(self.dtype).itemsize + parts * 16

    def file_of(self, chunk: int) -> str:
        """Path of a chunk within the store's group."""
        return "/".join([self.name, "c", str(chunk), *["0"] * (len(self.shape) - 1)])


def cases_per_part(points: int, cases_per_chunk: int) -> int:
    """Cases of an inner chunk: one of a large map, all of the chunk if maps are small."""
    return cases_per_chunk if points < SMALL_MAP else 1


def shard(plan: ArrayPlan, values: NDArray[Any]) -> list[bytes | memoryview]:
    """The content of a chunk's file, in pieces.

    Args:
        values: (cases, points) or (cases, points, extras), at most `plan.cases_per_chunk` cases.
    """
    dtype = np.dtype(plan.dtype).newbyteorder("<")
    cases = len(values)
    whole = values.reshape(cases, plan.points, plan.extras)
    parts = plan.cases_per_chunk // plan.cases_per_part * plan.extras
    if plan.cases_per_part == 1:
        ordered = np.ascontiguousarray(np.moveaxis(whole, 2, 1), dtype=dtype)
        present = cases * plan.extras
    else:
        padded = np.full((plan.extras, plan.cases_per_chunk, plan.points), plan.fill, dtype=dtype)
        padded[:, :cases] = np.moveaxis(whole, 2, 0)
        ordered, present = padded, plan.extras
    index = np.full((parts, 2), _MISSING, dtype="<u8")
    size = ordered.nbytes // max(1, present)
    index[:present, 0] = np.arange(present, dtype=np.uint64) * np.uint64(size)
    index[:present, 1] = size
    return [ordered.reshape(-1).view(np.uint8).data, index.tobytes()]


def write_whole(path: Path, pieces: Sequence[bytes | memoryview]) -> str:
    """Write a file so that it is there complete or not at all; returns its SHA-256.

    A reader, and a process that dies at any moment, meets either the earlier file or the new one. After a power
    cut the file may still be torn, which its digest shows.
    """
    digest = hashlib.sha256()
    draft = path.with_name(f".{path.name}.{secrets.token_hex(8)}{UNFINISHED}")
    path.parent.mkdir(parents=True, exist_ok=True)
    try:
        with draft.open("wb", buffering=0) as stream:
            for piece in pieces:
                digest.update(piece)
                rest = memoryview(piece)
                while len(rest):
                    rest = rest[stream.write(rest) :]
        os.replace(draft, path)
    except BaseException:
        with suppress(OSError):
            draft.unlink(missing_ok=True)
        raise
    return digest.hexdigest()


def file_digest(path: Path) -> str | None:
    """SHA-256 of a file, or None if there is none that can be read."""
    try:
        with path.open("rb") as stream:
            return hashlib.file_digest(stream, "sha256").hexdigest()
    except OSError:
        return None
