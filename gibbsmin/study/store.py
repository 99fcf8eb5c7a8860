"""The folder of a study: its Zarr store, receipts, manifest and summary; what is finished and what is not.

    results.zarr/       the data set: metadata and coordinates, and a file for every variable of every chunk
    receipts/           one file a chunk, written last: inputs, files with their SHA-256, a row for each case
    summary.parquet     one row a case
    manifest.json       everything the store consists of and what it was made from
    study.yaml          the study file

A chunk counts as finished if its receipt names the inputs that the plan has now, and every file has the digest
that the receipt says. Nothing else is believed: no file times, no lists kept on the side.
"""

from __future__ import annotations

import json
import os
import shutil
import warnings
from collections.abc import Callable, Iterator, Mapping
from concurrent.futures import ThreadPoolExecutor
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

import numpy as np
import xarray as xr

from gibbsmin.outcome.assembling import RESULT_NAMES
from gibbsmin.scenario.reading import identifier
from gibbsmin.study.chunks import RECEIPTS, STORE, Chunk, Group, Receipt
from gibbsmin.study.conditions import solver_table
from gibbsmin.study.planning import Plan, axis_dims, point_dims
from gibbsmin.study.shards import UNFINISHED, file_digest, write_whole
from gibbsmin.study.trail import TRAILS

MANIFEST = "manifest.json"
SUMMARY = "summary.parquet"
STUDY_FILE = "study.yaml"
PROGRAM = "gibbsmin study"

ChunkState = Literal["finished", "new", "other inputs", "damaged", "failed cases"]


@dataclass(frozen=True)
class Found:
    """What a folder already holds of a plan."""

    receipts: Mapping[int, Receipt]
    states: tuple[ChunkState, ...]

    @classmethod
    def complete(cls, receipts: Mapping[int, Receipt], chunks: int) -> Found:
        """What a folder holds when a run is over."""
        finished: ChunkState = "finished"
        return cls(receipts, (finished,) * chunks)

    def having(self, state: ChunkState) -> int:
        return sum(each == state for each in self.states)

    def in_words(self) -> str:
        """One line for people; '' for a new folder."""
        if all(state == "new" for state in self.states):
            return ""
        parts = [f"found {self.having('finished')} of {len(self.states)} chunks finished"]
        words: dict[ChunkState, str] = {
            "new": "not begun",
            "other inputs": "made from other inputs",
            "damaged": "damaged",
            "failed cases": "with failed cases",
        }
        parts += [f"{self.having(state)} {text}" for state, text in words.items() if self.having(state)]
        again = len(self.states) - self.having("finished") - self.having("new")
        return ", ".join(parts) + ("; these are computed again" if again else "")


def examine(plan: Plan, folder: Path, progress: Callable[[int], None] | None = None) -> Found:
    """Compare every chunk of a plan with what the folder holds, reading all its files.

    `progress` is called with the number of chunks newly examined.
    """
    with ThreadPoolExecutor(min(8, os.cpu_count() or 1)) as pool:  # hashing leaves the interpreter free
        states: list[ChunkState] = []
        receipts: dict[int, Receipt] = {}
        for i, (state, receipt) in enumerate(pool.map(lambda chunk: _state(chunk, folder), plan.chunks)):
            states.append(state)
            if receipt is not None and state == "finished":
                receipts[i] = receipt
            if progress is not None:
                progress(1)
    return Found(receipts, tuple(states))


def _state(chunk: Chunk, folder: Path) -> tuple[ChunkState, Receipt | None]:
    try:
        text = (folder / chunk.receipt_file).read_bytes()
    except OSError:
        return "new", None
    receipt = Receipt.of_json(text)
    if receipt is None:
        return "damaged", None
    if receipt.inputs != chunk.inputs:
        return "other inputs", receipt
    if set(receipt.files) != set(files_of(chunk)) or len(receipt.rows) != len(chunk.cases):
        return "damaged", receipt
    if any(file_digest(folder / path) != digest for path, digest in receipt.files.items()):
        return "damaged", receipt
    return ("failed cases" if receipt.failed else "finished"), receipt


def files_of(chunk: Chunk) -> Iterator[str]:
    """Paths, within the folder, of a chunk's files."""
    for array in chunk.group.arrays:
        yield "/".join(filter(None, [STORE, chunk.group.path, array.file_of(chunk.number)]))


def forget_unfinished(plan: Plan, folder: Path, found: Found, described: Mapping[str, bytes]) -> None:
    """Remove what does not belong to the plan's finished chunks: torn drafts, chunks of other inputs, trails.

    So a reader never meets values that the manifest does not vouch for, and an interrupted run ends with the same
    files as one that was not. `described` is what `metadata` gives.
    """
    for i, chunk in enumerate(plan.chunks):
        if found.states[i] not in ("finished", "new"):
            (folder / chunk.receipt_file).unlink(missing_ok=True)
    expected = set(described)
    for i, chunk in enumerate(plan.chunks):
        if found.states[i] == "finished":
            expected.update(files_of(chunk))
            expected.add(chunk.receipt_file)
    for top in (STORE, RECEIPTS):
        for path in sorted((folder / top).rglob("*"), reverse=True):
            if path.is_dir():
                with suppress(OSError):  # not empty
                    path.rmdir()
            elif path.relative_to(folder).as_posix() not in expected:
                path.unlink(missing_ok=True)
    for path in folder.glob(f".*{UNFINISHED}"):
        path.unlink(missing_ok=True)
    shutil.rmtree(folder / TRAILS, ignore_errors=True)


def write_metadata(described: Mapping[str, bytes], folder: Path) -> dict[str, str]:
    """Write what describes the arrays; returns path within the folder -> SHA-256."""
    return {path: write_whole(folder / path, [content]) for path, content in described.items()}


def metadata(plan: Plan) -> dict[str, bytes]:
    """Path within the folder -> content of every file of the store that is no chunk of a planned array.

    Made by zarr and xarray in memory, so that the files on disk can be written whole, and only these.
    """
    import zarr
    from zarr.codecs import BytesCodec, ShardingCodec

    content: dict[str, Any] = {}
    store = zarr.storage.MemoryStore(content)
    with warnings.catch_warnings():
        # zarr remarks that consolidated metadata are not yet part of the specification; xarray asks for them.
        warnings.filterwarnings("ignore", message="Consolidated metadata is currently not part")
        if len(plan.groups) > 1:
            zarr.create_group(store, attributes=_attributes(plan))
        for group in plan.groups:
            _coordinates(plan, group).to_zarr(
                store, group=group.path or None, mode="a", zarr_format=3, consolidated=False
            )
            for array in group.arrays:
                zarr.create_array(
                    store,
                    name="/".join(filter(None, [group.path, array.name])),
                    shape=array.shape,
                    dtype=array.dtype,
                    chunks=array.chunk_shape,
                    serializer=ShardingCodec(
                        chunk_shape=array.part_shape, codecs=[BytesCodec()], index_codecs=[BytesCodec()]
                    ),
                    filters=None,
                    compressors=None,
                    fill_value=array.fill,
                    attributes=array.attributes,
                    dimension_names=array.dims,
                )
            if len(plan.groups) > 1:
                zarr.consolidate_metadata(store, path=group.path)
        zarr.consolidate_metadata(store)
    return {f"{STORE}/{path}": buffer.to_bytes() for path, buffer in sorted(content.items())}


def _attributes(plan: Plan) -> dict[str, str]:
    study = plan.study
    attributes = {
        "Conventions": "CF-1.11",
        "title": study.title,
        "source": f"gibbsmin {plan.version}",
        "comment": "Equilibrium is a limit, not a rate. Points whose status is not 0 hold NaN.",
    }
    return {**attributes, "notes": study.notes} if study.notes else attributes


def _coordinates(plan: Plan, group: Group) -> xr.Dataset:
    """Everything small: what the cases are, and the values of the axes."""
    layout, cases = group.layout, plan.cases_of(group)
    taken = {*(array.name for array in group.arrays), *RESULT_NAMES}
    dims_of_axes = axis_dims(layout, cases)
    coordinates: dict[str, Any] = {
        "case": ("case", _text([case.name for case in cases]), {"long_name": "case"}),
        "case_title": ("case", _text([case.title for case in cases]), {"long_name": "title of the scenario"}),
    }
    for k, (axis, dims) in enumerate(zip(layout.axes, dims_of_axes, strict=True)):
        values = np.stack([case.axes[k] for case in cases]) if "case" in dims else cases[0].axes[k]
        attributes = {"units": axis.unit.replace("/h", " h-1"), "long_name": axis.title}
        coordinates[axis.name] = (dims, values[:, 0] if dims == ("case",) else values, attributes)
    if layout.kept_species:
        kept = [layout.species[k] for k in layout.kept_species]
        coordinates["species"] = ("species", _text([each.name for each in kept]), {"long_name": "species"})
        masses = np.array([each.molar_mass for each in kept])
        coordinates["molar_mass"] = ("species", masses, {"units": "kg mol-1", "long_name": "molar mass"})
    if any(array.extra == "element" for array in group.arrays):
        elements = solver_table(layout).elements
        coordinates["element"] = ("element", _text(elements), {"long_name": "element"})
    if layout.phases:
        names = _text([each.name for each in layout.phases])
        coordinates["phase"] = ("phase", names, {"long_name": "condensed phase"})
    names = _text([each.name for each in layout.feed_species])
    coordinates["feed_species"] = ("feed_species", names, {"long_name": "species of the feed"})
    for name, quantity in plan.study.quantities.items():
        values, attributes = _quantity([case.values.get(name) for case in cases], quantity.unit, name)
        own = identifier(name) or "quantity"
        while own in taken or own in coordinates:
            if own in coordinates and np.array_equal(coordinates[own][1], values):
                break  # it is the axis itself
            own += "_varied"
        else:
            coordinates[own] = ("case", values, attributes)
    feed_dims, feed_shape = _feed_dims(plan, group)
    feed = np.stack([case.feed for case in cases]).reshape(len(cases), *feed_shape, -1)
    attributes = {"units": layout.amount_unit.replace("/h", " h-1"), "long_name": "amount in the feed"}
    data = {"feed_amount": (("case", *feed_dims, "feed_species"), feed, attributes)}
    return xr.Dataset(data, coordinates, _attributes(plan))


def _feed_dims(plan: Plan, group: Group) -> tuple[tuple[str, ...], tuple[int, ...]]:
    layout, cases = group.layout, plan.cases_of(group)
    dims, sizes = point_dims(layout, cases)
    conditions = sum(part != ("case",) for part in axis_dims(layout, cases)[-2:])
    return dims[: len(dims) - conditions], sizes[: len(sizes) - conditions]


def _quantity(values: list[Any], unit: str | None, name: str) -> tuple[Any, dict[str, str]]:
    """A varied quantity over the cases: numbers where all are, otherwise text as written."""
    attributes = {"long_name": name}
    if all(value is None or isinstance(value, int | float) for value in values):
        numbers = np.array([np.nan if value is None else value for value in values], dtype=np.float64)
        return numbers, {**attributes, "units": unit or "1"}
    return _text(["" if value is None else str(value) for value in values]), attributes


def _text(words: Any) -> Any:
    """Text of any length: the fixed-length kind has no place in the Zarr 3 specification."""
    return np.array(list(map(str, words)), dtype=object)


# --- the end of a run


def write_summary(plan: Plan, receipts: Mapping[int, Receipt], folder: Path) -> None:
    """One row a case, in the order of the study."""
    import io

    import pyarrow as pa
    import pyarrow.parquet as pq

    rows = summary_rows(plan, receipts)
    columns = dict.fromkeys(name for row in rows for name in row)
    table = pa.table({name: pa.array([row.get(name) for row in rows]) for name in columns})
    content = io.BytesIO()
    pq.write_table(table, content)
    write_whole(folder / SUMMARY, [content.getvalue()])


def summary_rows(plan: Plan, receipts: Mapping[int, Receipt]) -> list[dict[str, Any]]:
    """Rows of the summary: what a case is, then what became of it."""
    headings = quantity_columns(plan)
    rows: list[dict[str, Any]] = []
    for i, chunk in enumerate(plan.chunks):
        for case, outcome in zip(chunk.cases, receipts[i].rows, strict=True):
            # The receipt tells values; what a case is called may have changed since.
            told = {"number": case.number, "case": case.name, "title": case.title}
            values = {heading: case.values.get(name) for name, heading in headings.items()}
            found = {name: value for name, value in outcome.items() if name not in told}
            rows.append({**told, **values, "maps": chunk.group.path or "all", **found})
    _one_type(rows)
    return sorted(rows, key=lambda row: int(row["number"]))


def quantity_columns(plan: Plan) -> dict[str, str]:
    """Varied quantity -> heading of its column in the summary."""
    quantities = plan.study.quantities.items()
    return {name: f"{name} [{each.unit}]" if each.unit else name for name, each in quantities}


def _one_type(rows: list[dict[str, Any]]) -> None:
    """A column of numbers and text becomes text, one of whole and other numbers floats: Parquet has one type."""
    for name in dict.fromkeys(name for row in rows for name in row):
        kinds = {type(row[name]) for row in rows if row.get(name) is not None}
        if len(kinds) > 1:
            convert: type = str if str in kinds else float
            for row in rows:
                if row.get(name) is not None:
                    row[name] = convert(row[name])


def write_manifest(
    plan: Plan, receipts: Mapping[int, Receipt], described: Mapping[str, str], folder: Path
) -> None:
    """What the store consists of and what each chunk was made from. The same study gives the same bytes."""
    study = plan.study
    content = {
        "program": PROGRAM,
        "version": plan.version,
        "title": study.title,
        "cases": len(study.cases),
        "points": study.points,
        "settings": {
            "composition": study.keep.composition,
            "further results": list(study.keep.further),
            "cross-checked points per case": study.checked_points,
        },
        "quantities": list(quantity_columns(plan).values()),
        "species data SHA-256": {path or "all": digest for path, digest in plan.species_digests.items()},
        "metadata": dict(described),
        "chunks": [
            {
                "maps": chunk.group.path or "all",
                "number": chunk.number,
                "inputs SHA-256": chunk.inputs,
                "scenario SHA-256": {case.name: case.digest for case in chunk.cases},
                "files": dict(receipts[i].files),
            }
            for i, chunk in enumerate(plan.chunks)
        ],
    }
    text = json.dumps(content, indent=1, ensure_ascii=False) + "\n"
    write_whole(folder / MANIFEST, [text.encode()])
