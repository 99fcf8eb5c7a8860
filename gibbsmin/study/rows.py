"""What the summary says of each case, and the points of it that an independent program solves again."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gibbsmin.study.block import Block, largest
from gibbsmin.study.conditions import feed_atoms

if TYPE_CHECKING:
    from gibbsmin.species import ThermoTable
    from gibbsmin.study.chunks import Chunk


def rows_of(
    chunk: Chunk, block: Block, values: Mapping[str, NDArray[Any]], table: ThermoTable
) -> Iterator[dict[str, Any]]:
    layout = chunk.group.layout
    unsolved = (block.status != 0).sum(axis=1)
    checks = _cross_checks(chunk, block, table)
    ranges: dict[str, NDArray[Any]] = {}
    if "mole_fraction" in values:
        names = [layout.species[k].name for k in layout.kept_species]
        for name in layout.results.key_species:
            ranges[f"mole fraction {name}"] = values["mole_fraction"][..., names.index(name)]
    for k, phase in enumerate(layout.phases):
        ranges[f"activity of {phase.name}"] = values["phase_activity"][..., k]
    for k, phase in enumerate(layout.condensed):
        ranges[f"amount of {phase.name}"] = values["phase_amount"][..., k]
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
            "largest gap per mol of gas": _or_none(block.largest_gap[i]),
            "largest balance residual": _or_none(block.largest_balance[i]),
            "data extrapolated": bool(layout.extrapolate and table.extrapolated(case.temperature).any()),
            **checks[i],
            "seconds": round(float(block.seconds[i]), 6),
        }
        for name, array in ranges.items():
            row[f"{name} lowest"] = _or_none(-largest(-array[i]))
            row[f"{name} highest"] = _or_none(largest(array[i]))
        yield row


def _or_none(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None


def _cross_checks(chunk: Chunk, block: Block, table: ThermoTable) -> list[dict[str, Any]]:
    """For each case: how many points were solved again, and how far the answers differ."""
    found: list[list[tuple[str, float]]] = [[] for _ in chunk.cases]
    if block.checked and not chunk.group.layout.condensed:  # the other program knows gases only
        for (i, _, _), answer in zip(block.checked, _answers(chunk, block, table), strict=True):
            found[i].append(answer)
    statuses = {"confirmed": "confirmed", "differing": "differs", _UNANSWERED: _UNANSWERED}
    rows = []
    for answers in found:
        counts = {name: sum(status == each for each, _ in answers) for name, status in statuses.items()}
        worst = largest(np.array([relative for _, relative in answers])) if answers else float("nan")
        rows.append(
            {"checked points": len(answers), **counts, "largest relative difference": _or_none(worst)}
        )
    return rows


_UNANSWERED = "no independent answer"


def _answers(chunk: Chunk, block: Block, table: ThermoTable) -> Iterator[tuple[str, float]]:
    """Status and largest relative difference of each chosen point.

    Whatever goes wrong in the other program leaves a point without an answer, and the study going.
    """
    from gibbsmin.comparison import Comparison

    compare = None
    for k in range(len(block.checked)):
        try:
            if compare is None:
                points = _chosen_points(chunk, block, table)
                compare = Comparison(points, table, ("point",), chunk.group.layout.tolerance)
            yield compare.agreement((k,))
        except Exception:
            yield _UNANSWERED, float("nan")


def _chosen_points(chunk: Chunk, block: Block, table: ThermoTable) -> xr.Dataset:
    """A data set of scattered points, as the comparison takes it."""
    layout = chunk.group.layout
    cases = [chunk.cases[i] for i, _, _ in block.checked]
    places = [np.unravel_index(point, layout.shape) for _, point, _ in block.checked]
    at = tuple(np.array([(i, point) for i, point, _ in block.checked]).T)
    pairs = list(zip(cases, places, strict=True))
    return xr.Dataset(
        {
            "mole_fraction": (("point", "species"), np.stack([part for _, _, part in block.checked])),
            "gap": ("point", block.gap[at]),
            "gas_amount": ("point", block.gas[at]),
            "status": ("point", block.status[at]),
            "feed_amount": (
                ("point", "feed_species"),
                np.stack([case.feed[place[:-2]] for case, place in pairs]),
            ),
        },
        {
            "temperature": ("point", [case.temperature[place[-2]] for case, place in pairs]),
            "pressure": ("point", [case.pressure[place[-1]] for case, place in pairs]),
            "species": [each.name for each in layout.species],
            "feed_species": [each.name for each in layout.feed_species],
            "feed_atoms": (
                ("feed_species", "element"),
                feed_atoms(layout.feed_species, table),
            ),
        },
    )
