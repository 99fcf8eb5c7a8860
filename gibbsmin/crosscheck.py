"""The same points solved again by an independent program: the equilibrium solver of the Cantera library.

Cantera gets the same species, the same coefficients and the same reference pressure, so only the solving is
compared. For species above a mole fraction of 1e-6 a relative agreement of 1e-6 is asked for: Cantera's own
answers scatter by more than 1e-7 in one case in a hundred, so asking for less than 1e-6 would test Cantera.

Nothing is hidden. A point where the two differ is listed with what each answer's own residuals say about it;
a point for which Cantera has no answer is listed as such, with the reason.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np
import xarray as xr

from gibbsmin.comparison import THRESHOLD, CheckedPoint, CheckStatus, Comparison
from gibbsmin.outcome.composition import amount_at_equilibrium

if TYPE_CHECKING:
    from gibbsmin.comparison_phases import PhaseComparison
    from gibbsmin.species import ThermoTable

Extent = Literal["sample", "all", "none"]

TOLERANCE = 1e-6  # relative, see above
SAMPLE_SIZE = 50
SEED = 20020902  # any fixed number: the same run checks the same points

STATUS_CODES: dict[CheckStatus, int] = {"confirmed": 1, "differs": 2, "no independent answer": 3}
NOT_CHECKED = 0

__all__ = ["THRESHOLD", "CheckedPoint", "CrossCheck", "choose_points", "cross_check"]


@dataclass(frozen=True)
class CrossCheck:
    """Outcome of the cross-check of a run.

    Attributes:
        extent: how the points were chosen.
        tolerance: largest accepted relative difference [1].
        library: name and version of the independent program; "" when nothing was asked of it.
        dims: dimension names that `CheckedPoint.index` goes with.
        points: every checked point, in the order of the grid.
        unsolved: points of the grid that our solver did not solve, so that there is nothing to compare.
        data_difference: largest difference found between the standard potentials on both sides [RT].
    """

    extent: Extent
    tolerance: float
    library: str
    dims: tuple[str, ...]
    points: tuple[CheckedPoint, ...]
    unsolved: int = 0
    data_difference: float = 0.0

    def having(self, status: CheckStatus) -> tuple[CheckedPoint, ...]:
        """The points of one status."""
        return tuple(point for point in self.points if point.status == status)

    @property
    def confirmed(self) -> int:
        return len(self.having("confirmed"))

    @property
    def differing(self) -> int:
        return len(self.having("differs"))

    @property
    def unanswered(self) -> int:
        return len(self.having("no independent answer"))

    @property
    def worst(self) -> CheckedPoint | None:
        """The point of the largest relative difference, or None if no point has an independent answer."""
        answered = [point for point in self.points if point.status != "no independent answer"]
        return max(answered, key=lambda point: point.relative, default=None)

    @property
    def all_confirmed(self) -> bool:
        """False when any point differs; one without an independent answer is listed but does not count."""
        return self.differing == 0

    def add_to(self, dataset: xr.Dataset) -> xr.Dataset:
        """The data set with `crosscheck_status` (CF flags) and `crosscheck_difference` [1] added."""
        shape = tuple(dataset.sizes[dim] for dim in self.dims)
        status = np.full(shape, NOT_CHECKED, dtype=np.int8)
        difference = np.full(shape, np.nan)
        for point in self.points:
            status[point.index] = STATUS_CODES[point.status]
            difference[point.index] = point.relative
        words = ["not_checked", *(name.replace(" ", "_") for name in STATUS_CODES)]
        return dataset.assign(
            crosscheck_status=xr.Variable(
                self.dims,
                status,
                {
                    "units": "1",
                    "long_name": "outcome of the cross-check",
                    "flag_values": np.array([NOT_CHECKED, *STATUS_CODES.values()], dtype=np.int8),
                    "flag_meanings": " ".join(words),
                },
            ),
            crosscheck_difference=xr.Variable(
                self.dims,
                difference,
                {
                    "units": "1",
                    "long_name": "largest relative difference of a mole fraction in the cross-check",
                },
            ),
        )


def cross_check(
    dataset: xr.Dataset,
    table: ThermoTable,
    *,
    extent: Extent = "sample",
    sample_size: int = SAMPLE_SIZE,
    tolerance: float = TOLERANCE,
    seed: int = SEED,
    progress: Callable[[int], None] | None = None,
) -> CrossCheck:
    """Solve points of a data set again with Cantera and compare.

    Args:
        dataset: as `gibbsmin.equilibrium` returns it.
        table: thermodynamic functions of its gases, then of the condensed phases that take part, in that order.
        extent: "sample" (corners of the grid, largest gaps, and random others), "all" or "none".
        sample_size: number of points of a sample; the corners are checked even if they are more.
        tolerance: largest accepted relative difference of a mole fraction.
        seed: of the random choice.
        progress: called with the number of points newly checked.
    """
    dims = tuple(str(dim) for dim in dataset["status"].dims)
    if extent == "none":
        return CrossCheck(extent, tolerance, "", dims, ())
    solved = dataset["status"].values == 0
    chosen = choose_points(dataset, extent, sample_size, seed)
    comparison: Comparison | PhaseComparison
    if any(each.state != "g" for each in table.species):
        from gibbsmin.comparison_phases import PhaseComparison

        comparison = PhaseComparison(dataset, table, dims, tolerance)
    else:
        comparison = Comparison(dataset, table, dims, tolerance)
    points = []
    for index in chosen:
        points.append(comparison.at(index))
        if progress is not None:
            progress(1)
    return CrossCheck(
        extent,
        tolerance,
        comparison.library,
        dims,
        tuple(points),
        int(solved.size - solved.sum()),
        comparison.data_difference,
    )


def choose_points(dataset: xr.Dataset, extent: Extent, sample_size: int, seed: int) -> list[tuple[int, ...]]:
    """Indices of the points to check, among the solved ones, in the order of the grid.

    A sample takes the corners of the grid, then a quarter of its size by the largest gap per mol of gas, and
    fills up at random.
    """
    status = dataset["status"].values
    solved = np.flatnonzero(status.ravel() == 0)
    if extent == "all" or solved.size <= sample_size:
        picked = solved
    else:
        ends = [np.unique([0, size - 1]) for size in status.shape]
        corners = np.ravel_multi_index(np.meshgrid(*ends, indexing="ij"), status.shape).ravel()
        gap = (dataset["gap"].values / amount_at_equilibrium(dataset).values).ravel()[solved]
        widest = solved[np.argsort(-gap, kind="stable")[: max(1, sample_size // 4)]]
        certain = np.union1d(corners[np.isin(corners, solved)], widest)
        others = np.setdiff1d(solved, certain)
        missing = max(0, min(sample_size - certain.size, others.size))
        drawn = np.random.default_rng(seed).choice(others, size=missing, replace=False)
        picked = np.union1d(certain, drawn)
    places = np.unravel_index(picked, status.shape) if status.shape else ()
    return list(zip(*(axis.tolist() for axis in places), strict=True)) if places else [()] * len(picked)
