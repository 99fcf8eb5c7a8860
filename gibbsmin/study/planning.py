"""What a study will compute: arrays, chunks, their digests, and how much disk and memory that takes."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import asdict, dataclass, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gibbsmin.labelled import Labelled
from gibbsmin.outcome.saving import species_digest
from gibbsmin.outcome.wanted import named_results, variable_name
from gibbsmin.solving import solve
from gibbsmin.study.block import derived_results, species_needed
from gibbsmin.study.chunks import NOT_COMPUTED, PHASE_VARIABLES, Chunk, Group
from gibbsmin.study.conditions import conditions_of
from gibbsmin.study.model import Case, Layout, Study
from gibbsmin.study.shards import ArrayPlan, cases_per_part

FloatArray = NDArray[np.float64]

FORM = 1
"""Of the store; raised when the meaning of its files changes, so that older chunks are computed again."""

VALUES_PER_CHUNK = 5_000_000
"""Doubles of the full composition of a chunk: 40 MB, more than a worker holds on to unless all of it is kept."""

MOST_CASES_PER_CHUNK = 16
"""So that small studies still spread over cores, and little is lost when a run is cut off."""

BYTES_OF_A_PROCESS = 240_000_000
"""Measured: resident memory of a worker with all its libraries, Cantera among them, before the first chunk."""

BYTES_PER_CASE = 4_000
"""Measured: a case with its row, apart from feeds and axes of its own."""

_BY_FURTHER = {
    "element potentials": "element_potential",
    "balance residual": "balance_residual",
    "iterations": "iterations",
}


@dataclass(frozen=True)
class Plan:
    """A study cut into chunks. `axes` says per group which axes are dimensions (see `axis_dims`)."""

    study: Study
    groups: tuple[Group, ...]
    chunks: tuple[Chunk, ...]
    version: str
    species_digests: Mapping[str, str]

    @property
    def points(self) -> int:
        return self.study.points

    def cases_of(self, group: Group) -> list[Case]:
        return [case for chunk in self.chunks if chunk.group is group for case in chunk.cases]

    @property
    def disk_bytes(self) -> int:
        """Size of all chunks; the summary and the receipts add some kilobytes a case."""
        return sum(chunk.bytes for chunk in self.chunks) + len(self.study.cases) * BYTES_PER_CASE

    @property
    def worker_bytes(self) -> int:
        """Memory of a worker with the largest chunk.

        What it holds on to of the chunk, the solver's map of one case twice over, results being derived, and files
        being written.
        """
        largest = 0
        for chunk in self.chunks:
            layout = chunk.group.layout
            elements = len({name for each in layout.feed_species for name in each.composition}) + 1
            held = len(species_needed(chunk.group)) + len(layout.kept_species) + 3 + elements
            held += 6 * len(layout.phases)
            if chunk.group.further:
                held += len(layout.species)
            block = chunk.points * (held + 4 * len(chunk.group.derived)) * 8
            one_case = 2 * layout.points * (len(layout.species) + elements + 4) * 8
            largest = max(largest, block + one_case + chunk.bytes)
        return BYTES_OF_A_PROCESS + largest

    def memory_bytes(self, workers: int) -> int:
        """Memory of this process and its workers together; 0 workers: this process alone does the work."""
        own = BYTES_OF_A_PROCESS + len(self.study.cases) * BYTES_PER_CASE
        return own + max(workers, 1) * self.worker_bytes - (BYTES_OF_A_PROCESS if workers == 0 else 0)


def plan_study(study: Study) -> Plan:
    """Cut a study into chunks. Solves one point of each layout to learn the names and units of its results."""
    import gibbsmin

    groups: list[Group] = []
    chunks: list[Chunk] = []
    digests: dict[str, str] = {}
    for number, layout in enumerate(study.layouts):
        cases = study.cases_of(number)
        path = "" if len(study.layouts) == 1 else f"maps_{number + 1}"
        used = {each.name: each for each in layout.used_species}
        digests[path] = species_digest(list(used.values()))
        group = _group(study, layout, path, cases)
        groups.append(group)
        size = group.arrays[0].cases_per_chunk
        for k, first in enumerate(range(0, len(cases), size)):
            part = tuple(cases[first : first + size])
            inputs = _inputs(group, part, gibbsmin.__version__, digests[path])
            chunks.append(Chunk(group, k, part, inputs))
    return Plan(study, tuple(groups), tuple(chunks), gibbsmin.__version__, digests)


def axis_dims(layout: Layout, cases: list[Case]) -> tuple[tuple[str, ...], ...]:
    """Dimensions of the coordinate of each axis.

    ("temperature",): the same values in all cases. ("case",): one value a case, no dimension of its own.
    ("case", "temperature_point"): several, which differ between cases.
    """
    dims: list[tuple[str, ...]] = []
    for k, (axis, size) in enumerate(zip(layout.axes, layout.shape, strict=True)):
        if all(case.axes[k] is cases[0].axes[k] for case in cases):
            dims.append((axis.name,))
        elif size == 1:
            dims.append(("case",))
        else:
            dims.append(("case", f"{axis.name}_point"))
    return tuple(dims)


def point_dims(layout: Layout, cases: list[Case]) -> tuple[tuple[str, ...], tuple[int, ...]]:
    """Names and lengths of the dimensions of a case's points, as stored."""
    kept = [
        (dims[-1], size)
        for dims, size in zip(axis_dims(layout, cases), layout.shape, strict=True)
        if dims != ("case",)
    ]
    return tuple(name for name, _ in kept), tuple(size for _, size in kept)


def _cases_per_chunk(study: Study, layout: Layout) -> int:
    if study.cases_per_chunk is not None:
        return study.cases_per_chunk
    fitting = VALUES_PER_CHUNK // (layout.points * len(layout.species))
    return max(1, min(fitting, MOST_CASES_PER_CHUNK))


def _group(study: Study, layout: Layout, path: str, cases: list[Case]) -> Group:
    template = _template(layout, cases[0])
    per_chunk = _cases_per_chunk(study, layout)
    dims, shape = point_dims(layout, cases)
    arrays: list[ArrayPlan] = []

    def add(name: str, attributes: Mapping[str, Any], extra: str = "", extras: int = 0, **more: Any) -> None:
        arrays.append(
            ArrayPlan(
                name=name,
                dims=("case", *dims, *([extra] if extra else [])),
                shape=(len(cases), *shape, *([extras] if extra else [])),
                dtype=more.get("dtype", "float64"),
                fill=more.get("fill", float("nan")),
                cases_per_chunk=per_chunk,
                cases_per_part=cases_per_part(layout.points, per_chunk),
                extra=extra,
                attributes=_plain(attributes),
            )
        )

    add("status", _status_attributes(template), dtype="int8", fill=NOT_COMPUTED)
    for name in ("gas_amount", "gap"):
        add(name, template[name].attrs)
    if layout.kept_species:
        add("mole_fraction", template["mole_fraction"].attrs, "species", len(layout.kept_species))
    if layout.phases:
        for name in PHASE_VARIABLES:
            add(name, template[name].attrs, "phase", len(layout.phases))
    for word, name in _BY_FURTHER.items():
        if word not in study.keep.further:
            continue
        if name == "element_potential":
            add(name, template[name].attrs, "element", template.sizes["element"])
        elif name == "iterations":
            add(name, template[name].attrs, dtype="int32", fill=NOT_COMPUTED)
        else:
            add(name, template[name].attrs)
    further = tuple(word for word in study.keep.further if word not in _BY_FURTHER)
    derived: list[str] = []
    for own, attributes in _derived(template, layout, cases, further):
        derived.append(own)
        add(own, attributes)
    return Group(layout, path, tuple(arrays), tuple(derived), further, study.checked_points)


def _template(layout: Layout, case: Case) -> xr.Dataset:
    """The first point of a case, as `gibbsmin.equilibrium` gives it."""
    whole = conditions_of(layout, case)
    conditions = replace(
        whole,
        feed=Labelled(("feed_species",), case.feed.reshape(-1, len(layout.feed_species))[0]),
        element_amounts=case.element_amounts[:1],
        factor=case.factor[:1],
        temperature=Labelled((), case.temperature[0]),
        pressure=Labelled((), case.pressure[0]),
    )
    return solve(conditions, extrapolate=layout.extrapolate, threads=1)


def _derived(
    template: xr.Dataset, layout: Layout, cases: list[Case], further: tuple[str, ...]
) -> list[tuple[str, dict[str, Any]]]:
    """Name in the store and attributes of every derived result."""
    fed = None
    if "heat duty" in further and all(case.fed_enthalpy is not None for case in cases):
        first = cases[0].fed_enthalpy
        assert first is not None
        fed = xr.DataArray(float(first.ravel()[0]))
    found: list[tuple[str, dict[str, Any]]] = []
    named = template
    asked_for = sum(1 for _ in named_results(template, layout.results))
    for name, array in derived_results(template, layout, further, fed):
        if len(found) < asked_for:
            own = variable_name(name, named)
            attributes = {**array.attrs, "long_name": name, "description": array.attrs["long_name"]}
        else:
            own, attributes = str(array.name), dict(array.attrs)
        named = named.assign({own: array.variable})
        found.append((own, attributes))
    return found


def _status_attributes(template: xr.Dataset) -> dict[str, Any]:
    attributes = dict(template["status"].attrs)
    values = [NOT_COMPUTED, *np.asarray(attributes["flag_values"]).tolist()]
    words = f"not_computed {attributes['flag_meanings']}"
    return {**attributes, "flag_values": values, "flag_meanings": words}


def _plain(attributes: Mapping[str, Any]) -> dict[str, Any]:
    """Attributes as JSON holds them."""
    return {
        name: value.tolist() if isinstance(value, np.ndarray | np.generic) else value
        for name, value in attributes.items()
    }


def _inputs(group: Group, cases: tuple[Case, ...], version: str, species: str) -> str:
    """SHA-256 of everything that decides the bytes of a chunk and its rows."""
    layout = group.layout
    content = {
        "form": FORM,
        "version": version,
        "species data": species,
        "species": [each.name for each in layout.species],
        "condensed": [each.name for each in layout.condensed],
        "held back": [each.name for each in layout.held_back],
        "feed species": [each.name for each in layout.feed_species],
        "cases": [case.digest for case in cases],
        "shape": layout.shape,
        "amount unit": layout.amount_unit,
        "extrapolate": layout.extrapolate,
        "tolerance": layout.tolerance,
        "results": asdict(layout.results),
        "checked points": group.checked_points,
        "arrays": [
            [array.name, array.dtype, array.extras, array.cases_per_chunk, array.cases_per_part]
            for array in group.arrays
        ],
        "kept species": layout.kept_species,
    }
    return hashlib.sha256(json.dumps(content, sort_keys=True).encode()).hexdigest()
