"""One chunk of a study: its cases solved one by one, its files written, its receipt returned.

This is all that runs on a worker, whatever the engine. A case is solved alone, never together with others, so
that its values do not depend on which cases share its chunk. What goes wrong in a case stays in that case.
"""

from __future__ import annotations

import json
import time
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass
from functools import lru_cache
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gibbsmin.constants import STANDARD_PRESSURE
from gibbsmin.grid import GridSolution, solve_grid
from gibbsmin.outcome import composition, energy
from gibbsmin.outcome.wanted import named_results
from gibbsmin.solving import composition_matrix, thermo_table
from gibbsmin.study.shards import ArrayPlan, shard, write_whole
from gibbsmin.study.trail import Trail

if TYPE_CHECKING:
    from gibbsmin.species import Species, ThermoTable
    from gibbsmin.study.model import Case, Layout

FloatArray = NDArray[np.float64]
CaseSolver = Callable[["Layout", "ThermoTable", "Case", int | None], GridSolution]

NOT_COMPUTED = -1
"""Status of the points of a case that failed as a whole, or was not reached."""

STORE = "results.zarr"
RECEIPTS = "receipts"

FURTHER: Mapping[str, Callable[[xr.Dataset, ThermoTable], xr.DataArray]] = {
    "density": lambda dataset, table: composition.density(dataset),
    "mean molar mass": lambda dataset, table: composition.mean_molar_mass(dataset),
    "enthalpy": energy.mixture_enthalpy,
}
"""Results that the study file may ask for beside those of the scenarios; heat duty is apart (two variables)."""


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


def solve_case(layout: Layout, table: ThermoTable, case: Case, threads: int | None) -> GridSolution:
    """The map of one case, leading shape (F, nT, nP)."""
    gibbs = _gibbs_RT(table, case.temperature.tobytes())
    log_pressure = np.log(case.pressure / STANDARD_PRESSURE)
    return solve_grid(
        table.formula_matrix, case.element_amounts, gibbs, case.temperature, log_pressure, threads=threads
    )


@lru_cache(maxsize=16)
def _gibbs_RT(table: ThermoTable, temperature: bytes) -> FloatArray:
    return table.gibbs_RT(np.frombuffer(temperature))


def solve_chunk(
    chunk: Chunk,
    folder: str,
    run_name: str,
    threads: int | None = 1,
    solver: CaseSolver = solve_case,
) -> Receipt:
    """Solve the cases of a chunk, write its files and then its receipt.

    Args:
        folder: of the study, as this process sees it.
        run_name: of this run, by which a worker's traces of death are told from those of earlier runs.
        threads: for the solver. solver: of one case.

    Raises OSError when the files cannot be written (a full disk).
    """
    home = Path(folder)
    group, layout = chunk.group, chunk.group.layout
    table = thermo_table(layout.species, layout.extrapolate)
    trail = Trail.of(home, chunk.group.path, chunk.number, run_name)
    deadly = trail.deadly_cases()
    block = _Block(layout, table, len(chunk.cases))
    with trail:
        for i, case in enumerate(chunk.cases):
            begun = time.perf_counter()
            if case.number in deadly:
                block.fail(i, "its process died each time this case was being solved")
            else:
                trail.begin(case.number)
                try:
                    block.fill(i, case, solver(layout, table, case, threads))
                except Exception as error:
                    block.fail(i, f"{type(error).__name__}: {error}")
            block.seconds[i] = time.perf_counter() - begun
        trail.begin(None)
        values = dict(_values(chunk, block, table))
    rows = _rows(chunk, block, values, table)
    files = {}
    for array in group.arrays:
        path = "/".join(filter(None, [STORE, group.path, array.file_of(chunk.number)]))
        files[path] = write_whole(home / path, shard(array, values[array.name]))
    receipt = Receipt(chunk.inputs, files, tuple(rows))
    write_whole(home / chunk.receipt_file, [receipt.as_json()])
    trail.remove()
    return receipt


class _Block:
    """Solver results of the cases of a chunk, (B, points, ...)."""

    def __init__(self, layout: Layout, table: ThermoTable, cases: int) -> None:
        points = layout.points
        self.amounts = np.full((cases, points, len(layout.species)), np.nan)
        self.potentials = np.full((cases, points, len(table.elements)), np.nan)
        self.gap = np.full((cases, points), np.nan)
        self.balance = np.full((cases, points), np.nan)
        self.iterations = np.full((cases, points), NOT_COMPUTED, dtype=np.int32)
        self.status = np.full((cases, points), NOT_COMPUTED, dtype=np.int8)
        self.seconds = np.zeros(cases)
        self.failures: dict[int, str] = {}

    def fill(self, i: int, case: Case, solution: GridSolution) -> None:
        feeds = len(case.factor)
        factor = case.factor.reshape(feeds, 1)
        amounts = solution.amounts.reshape(feeds, -1, self.amounts.shape[-1])
        np.divide(amounts, factor[..., None], out=self.amounts[i].reshape(amounts.shape))
        gap = solution.gap.reshape(feeds, -1)
        np.divide(gap, factor, out=self.gap[i].reshape(gap.shape))
        self.potentials[i] = solution.element_potentials.reshape(self.potentials.shape[1:])
        self.balance[i] = solution.balance_residual.ravel()
        self.iterations[i] = solution.iterations.ravel()
        self.status[i] = solution.status.ravel()

    def fail(self, i: int, reason: str) -> None:
        self.failures[i] = reason


def _values(chunk: Chunk, block: _Block, table: ThermoTable) -> Iterator[tuple[str, NDArray[Any]]]:
    """Every stored variable, (B, points) or (B, points, extras)."""
    group, layout = chunk.group, chunk.group.layout
    gas = block.amounts.sum(axis=-1)
    yield "gas_amount", gas
    yield "status", block.status
    yield "gap", block.gap
    yield "balance_residual", block.balance
    yield "iterations", block.iterations
    yield "element_potential", block.potentials
    with np.errstate(invalid="ignore", divide="ignore"):
        if group.array("mole_fraction") is not None:
            kept = list(layout.kept_species)
            every = len(kept) == len(layout.species)
            yield "mole_fraction", (block.amounts if every else block.amounts[..., kept]) / gas[..., None]
        if group.derived:
            dataset = _block_dataset(chunk, block, gas)
            fed = _fed_enthalpy(chunk)
            found = derived_results(dataset, layout, group.further, table, fed)
            shape = (len(chunk.cases), *layout.shape)
            for name, (_, array) in zip(group.derived, found, strict=True):
                order = [dim for dim in ("case", *_axis_dims(layout)) if dim in array.dims]
                sizes = [n if dim in order else 1 for dim, n in zip(("case", *_axis_dims(layout)), shape, strict=True)]
                values = array.transpose(*order).values.reshape(sizes)
                yield name, np.broadcast_to(values, shape).reshape(len(chunk.cases), -1)


def derived_results(
    dataset: xr.Dataset,
    layout: Layout,
    further: Sequence[str],
    table: ThermoTable,
    fed: xr.DataArray | None,
) -> Iterator[tuple[str, xr.DataArray]]:
    """Results beside the composition, always in the same order: those of the scenarios by name, then `further`."""
    yield from named_results(dataset, layout.results)
    for name in further:
        if name in FURTHER:
            yield name, FURTHER[name](dataset, table)
    if "heat duty" in further and fed is not None:
        for name, array in energy.heat_duty(dataset, table, fed).data_vars.items():
            yield str(name), array


def _axis_dims(layout: Layout) -> tuple[str, ...]:
    """Dimension names that no coordinate has, since an axis may differ from case to case."""
    return tuple(f"{axis.name} point" for axis in layout.axes)


def _block_dataset(chunk: Chunk, block: _Block, gas: FloatArray) -> xr.Dataset:
    """As much of the data set of `gibbsmin.equilibrium` as derived results need, with a dimension "case" more."""
    layout, cases = chunk.group.layout, chunk.cases
    axes = _axis_dims(layout)
    points = ("case", *axes)
    shape = (len(cases), *layout.shape)
    feed = np.stack([case.feed for case in cases])
    table = thermo_table(layout.species, layout.extrapolate)
    units = {"units": layout.amount_unit.replace("/h", " h-1")}
    variables: dict[str, Any] = {
        "amount": ((*points, "species"), block.amounts.reshape(*shape, -1), units),
        "gas_amount": (points, gas.reshape(shape)),
        "feed_amount": (("case", *axes[:-2], "feed_species"), feed, units),
    }
    if any(name in chunk.group.further for name in FURTHER):
        fractions = block.amounts / gas[..., None]
        variables["mole_fraction"] = ((*points, "species"), fractions.reshape(*shape, -1))
    coordinates = {
        "temperature": (("case", axes[-2]), np.stack([case.temperature for case in cases])),
        "pressure": (("case", axes[-1]), np.stack([case.pressure for case in cases])),
        "species": [each.name for each in layout.species],
        "feed_species": [each.name for each in layout.feed_species],
        "element": list(table.elements),
        "atoms": (("species", "element"), np.array(table.formula_matrix).T),
        "feed_atoms": (("feed_species", "element"), feed_atoms(layout.feed_species, table)),
        "molar_mass": (("species",), np.array([each.molar_mass for each in layout.species])),
    }
    return xr.Dataset(variables, coordinates)


def feed_atoms(feed_species: Sequence[Species], table: ThermoTable) -> FloatArray:
    """Atoms of the table's elements in each species of the feed, (J, E)."""
    return composition_matrix(feed_species, table.elements, [])


def _fed_enthalpy(chunk: Chunk) -> xr.DataArray | None:
    parts = [case.fed_enthalpy for case in chunk.cases]
    if any(part is None for part in parts):
        return None
    return xr.DataArray(np.stack([part for part in parts if part is not None]), dims=("case", *_axis_dims(chunk.group.layout)[:-2]))


# --- one row a case


def _rows(
    chunk: Chunk, block: _Block, values: Mapping[str, NDArray[Any]], table: ThermoTable
) -> Iterator[dict[str, Any]]:
    layout = chunk.group.layout
    gas = values["gas_amount"]
    unsolved = (block.status != 0).sum(axis=1)
    with np.errstate(invalid="ignore"):
        gap = block.gap / gas
    checks = _cross_checks(chunk, block, gas, table)
    ranges: dict[str, NDArray[Any]] = {}
    if "mole_fraction" in values:
        names = [layout.species[k].name for k in layout.kept_species]
        for name in layout.results.key_species:
            ranges[f"mole fraction {name}"] = values["mole_fraction"][..., names.index(name)]
    ranges.update({name: values[name] for name in chunk.group.derived})
    for i, case in enumerate(chunk.cases):
        failure = block.failures.get(i, "")
        bad = int(unsolved[i])
        row: dict[str, Any] = {
            "number": case.number,
            "case": case.name,
            "title": case.title,
            "status": "failed" if failure else "solved" if bad == 0 else "partly solved",
            "failure": failure,
            "points": layout.points,
            "unsolved points": bad,
            "largest gap per mol of gas": _largest(gap[i]),
            "largest balance residual": _largest(block.balance[i]),
            "data extrapolated": bool(layout.extrapolate and table.extrapolated(case.temperature).any()),
            **checks[i],
            "seconds": round(float(block.seconds[i]), 6),
        }
        for name, array in ranges.items():
            row[f"{name} lowest"] = _least(array[i])
            row[f"{name} highest"] = _largest(array[i])
        yield row


def _largest(values: NDArray[Any]) -> float | None:
    finite = values[np.isfinite(values)]
    return float(finite.max()) if finite.size else None


def _least(values: NDArray[Any]) -> float | None:
    finite = values[np.isfinite(values)]
    return float(finite.min()) if finite.size else None


def _cross_checks(
    chunk: Chunk, block: _Block, gas: FloatArray, table: ThermoTable
) -> list[dict[str, Any]]:
    """For each case: how many points were solved again, and how far the answers differ."""
    layout, count = chunk.group.layout, chunk.group.checked_points
    chosen = [
        (i, int(point))
        for i, case in enumerate(chunk.cases)
        for point in _checked_points(case, layout.points, count)
        if block.status[i, point] == 0
    ]
    found: list[list[Any]] = [[] for _ in chunk.cases]
    if chosen:
        from gibbsmin.comparison import Comparison

        compare = Comparison(_chosen_points(chunk, block, gas, chosen), table, ("point",), layout.tolerance)
        for k, (i, _) in enumerate(chosen):
            found[i].append(compare.at((k,)))
    columns = {"confirmed": "confirmed", "differing": "differs", "no independent answer": "no independent answer"}
    return [
        {
            "checked points": len(points),
            **{name: sum(point.status == status for point in points) for name, status in columns.items()},
            "largest relative difference": _largest(np.array([point.relative for point in points])),
        }
        for points in found
    ]


def _checked_points(case: Case, points: int, count: int) -> NDArray[np.intp]:
    """Points to check: random, but those of a case do not depend on anything else."""
    generator = np.random.default_rng(int(case.digest[:16], 16))
    return np.sort(generator.choice(points, size=min(count, points), replace=False))


def _chosen_points(
    chunk: Chunk, block: _Block, gas: FloatArray, chosen: Sequence[tuple[int, int]]
) -> xr.Dataset:
    """A data set of scattered points, as the comparison takes it."""
    layout = chunk.group.layout
    at = tuple(np.array(chosen).T)
    places = [np.unravel_index(point, layout.shape) for _, point in chosen]
    cases = [chunk.cases[i] for i, _ in chosen]
    feeds = [case.feed[place[:-2]] for case, place in zip(cases, places, strict=True)]
    table = thermo_table(layout.species, layout.extrapolate)
    return xr.Dataset(
        {
            "mole_fraction": (("point", "species"), block.amounts[at] / gas[at][:, None]),
            "gap": ("point", block.gap[at]),
            "gas_amount": ("point", gas[at]),
            "status": ("point", block.status[at]),
            "feed_amount": (("point", "feed_species"), np.stack(feeds)),
        },
        {
            "temperature": (
                "point",
                [case.temperature[place[-2]] for case, place in zip(cases, places, strict=True)],
            ),
            "pressure": ("point", [case.pressure[place[-1]] for case, place in zip(cases, places, strict=True)]),
            "species": [each.name for each in layout.species],
            "feed_species": [each.name for each in layout.feed_species],
            "feed_atoms": (("feed_species", "element"), feed_atoms(layout.feed_species, table)),
        },
    )
