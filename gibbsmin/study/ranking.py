"""Which case is best: the largest (or smallest) of a result over each map, under conditions on every point.

A condition holds point by point, not case by case: the largest hydrogen yield *where* the gas is below 900 degC is
not the largest yield of the cases that stay below it everywhere. So the store is read again, a few cases at a time.
"""

from __future__ import annotations

import operator
import re
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Any, cast

import numpy as np
import xarray as xr

from gibbsmin.constants import STANDARD_ATMOSPHERE
from gibbsmin.errors import ConditionsError
from gibbsmin.scenario.reading import identifier
from gibbsmin.scenario.units import Kind, UnitFault, read_quantity
from gibbsmin.scenario.words import listed, nearest

if TYPE_CHECKING:
    import pandas as pd

    from gibbsmin.study.results import StudyResults

POINTS_AT_ONCE = 2_000_000
"""Points read together: 16 MB for each variable that takes part."""

_COMPARISONS: Mapping[str, Callable[[Any, Any], Any]] = {
    "<=": operator.le,
    ">=": operator.ge,
    "<": operator.lt,
    ">": operator.gt,
}
_CONDITION = re.compile(r"\s*(.+?)\s*(<=|>=|<|>)\s*(.+?)\s*\Z")
_KINDS: Mapping[str, Kind] = {"temperature": "temperature", "pressure": "pressure"}


@dataclass(frozen=True)
class Condition:
    """A limit on a result or a coordinate: `name` `comparison` `value` (SI for temperature and pressure)."""

    name: str
    comparison: str
    value: float

    def holds(self, dataset: xr.Dataset) -> xr.DataArray:
        """Where it does; False where the result is not known."""
        return cast("xr.DataArray", _COMPARISONS[self.comparison](field(dataset, self.name), self.value))


def read_condition(text: str) -> Condition:
    """'temperature <= 900 degC', 'hydrogen yield > 2.5', 'H2O < 0.3'.

    Raises ConditionsError.
    """
    match = _CONDITION.match(text)
    if match is None:
        raise ConditionsError(f"condition {text!r}", "expected a name, one of < <= > >=, and a value")
    name, comparison, written = match.groups()
    kind = _KINDS.get(name)
    try:
        if kind is not None:
            ambient = Fraction(STANDARD_ATMOSPHERE)
            return Condition(name, comparison, float(read_quantity(written, kind, ambient=ambient).si))
        return Condition(name, comparison, float(written))
    except UnitFault as fault:
        raise ConditionsError(f"condition {text!r}", str(fault)) from fault
    except ValueError as error:
        raise ConditionsError(f"condition {text!r}", f"{written!r} is no number") from error


OF_SPECIES = "mole fraction "
"""Before the name of a species; it may be left out where nothing else is called so."""

_ONE_OF: Mapping[str, tuple[str, str]] = {
    OF_SPECIES: ("mole_fraction", "species"),
    "activity of ": ("phase_activity", "phase"),
    "amount of ": ("phase_amount", "phase"),
}
"""How one part of a variable with a further dimension is called."""

_NOT_OF_POINTS = frozenset(["species", "element", "feed_species", "phase"])


def names_of(dataset: xr.Dataset) -> list[str]:
    """What can be ranked by or limited: results, mole fractions, axes and varied quantities."""
    results = [
        str(name)
        for name, array in dataset.data_vars.items()
        if "case" in array.dims and not _NOT_OF_POINTS.intersection(array.dims)
    ]
    parts = [
        f"{words}{name}"
        for words, (variable, dim) in _ONE_OF.items()
        if variable in dataset
        for name in dataset[dim].values
    ]
    coordinates = [
        str(name)
        for name, array in dataset.coords.items()
        if array.dtype.kind in "fiu" and not _NOT_OF_POINTS.intersection(array.dims)
    ]
    return [*results, *parts, *coordinates]


def field(dataset: xr.Dataset, name: str) -> xr.DataArray:
    """A result, the mole fraction of a species, or a coordinate, by name.

    Raises ConditionsError, with what there is, when nothing is called so.
    """
    known = names_of(dataset)
    for own in (name, f"{OF_SPECIES}{name}", identifier(name)):
        if own not in known:
            continue
        if own in dataset.variables:
            return dataset[own]
        words = next(words for words in _ONE_OF if own.startswith(words))
        variable, dim = _ONE_OF[words]
        return dataset[variable].sel({dim: own.removeprefix(words)}, drop=True)
    raise ConditionsError(
        f"result {name!r}", f"there is none; there are {listed(known)}{nearest(name, known)}"
    )


def rank_cases(
    results: StudyResults,
    by: str,
    *,
    smallest: bool = False,
    where: Sequence[str | Condition] = (),
) -> pd.DataFrame:
    """Cases from best to worst by a result.

    Args:
        results: as `open_study` gives them.
        by: a result, a species (its mole fraction), or a coordinate.
        smallest: the smallest value is the best.
        where: conditions that a point must meet, as text or as `read_condition` gives them.

    Returns:
        One row a case, best first: `case`, the value under the name `by`, the axes at the best point,
        `points allowed` (share of the map that meets the conditions), and the varied quantities. Cases without
        such a point, or without such a result, come last, with NaN.

    Raises:
        ConditionsError: a name that no case has, or a condition that cannot be read.
    """
    import pandas as pd

    conditions = [read_condition(each) if isinstance(each, str) else each for each in where]
    asked = [by, *(each.name for each in conditions)]
    with_all = [dataset for dataset in results.datasets.values() if has(dataset, asked)]
    if not with_all:
        for dataset in results.datasets.values():
            for name in asked:
                field(dataset, name)  # raises and says what there is
    rows = [
        row
        for dataset in results.datasets.values()
        for row in (
            (row for part in _parts(dataset) for row in _best_points(part, by, smallest, conditions))
            if has(dataset, asked)
            else ({"case": str(case), by: float("nan")} for case in dataset["case"].values)
        )
    ]
    table = pd.DataFrame(rows)
    quantities = results.summary.set_index("case")[list(results.quantity_columns)]
    # An axis that is varied itself stands under the quantity's name already.
    table = table.drop(columns=[name for name in quantities if name in table and name != by])
    table = table.join(quantities.drop(columns=by, errors="ignore"), on="case")
    order = table[by].to_numpy() * (1.0 if smallest else -1.0)
    return table.iloc[np.argsort(order, kind="stable")].reset_index(drop=True)


def has(dataset: xr.Dataset, names: Sequence[str]) -> bool:
    """Whether a kind of map has all these results; another one may not."""
    try:
        for name in names:
            field(dataset, name)
    except ConditionsError:
        return False
    return True


def _parts(dataset: xr.Dataset) -> Iterator[xr.Dataset]:
    """The data set a few cases at a time."""
    cases = dataset.sizes["case"]
    points = max(1, dataset["status"].size // cases)
    step = max(1, POINTS_AT_ONCE // points)
    for first in range(0, cases, step):
        yield dataset.isel(case=slice(first, first + step))


def _best_points(
    dataset: xr.Dataset, by: str, smallest: bool, conditions: Sequence[Condition]
) -> Iterator[dict[str, Any]]:
    solved = dataset["status"] == 0
    allowed = solved
    for condition in conditions:
        allowed = allowed & condition.holds(dataset)
    allowed = allowed.transpose(*solved.dims)
    values = field(dataset, by).broadcast_like(solved).transpose(*solved.dims).where(allowed).values
    cases = values.shape[0]
    flat = values.reshape(cases, -1)
    order = np.where(np.isnan(flat), np.inf, flat if smallest else -flat)
    best = order.argmin(axis=1)
    share = allowed.values.reshape(cases, -1).mean(axis=1)
    axes = [str(name) for name in dataset.coords if _is_axis(dataset, str(name))]
    for i in range(cases):
        place = dict(zip(solved.dims[1:], np.unravel_index(int(best[i]), values.shape[1:]), strict=True))
        known = not np.isnan(flat[i, best[i]])
        at = {
            axis: float(dataset[axis].isel({d: i if d == "case" else place[d] for d in dataset[axis].dims}))
            if known
            else float("nan")
            for axis in axes
            if axis != by
        }
        yield {
            "case": str(dataset["case"].values[i]),
            by: float(flat[i, best[i]]),
            **at,
            "points allowed": float(share[i]),
        }


def _is_axis(dataset: xr.Dataset, name: str) -> bool:
    """Whether a coordinate is one of the map: temperature, pressure, or an axis of the scenarios."""
    array = dataset[name]
    of_points = set(dataset["status"].dims) - {"case"}
    is_number = array.dtype.kind in "fiu"
    return is_number and (name in _KINDS or bool(of_points.intersection(array.dims)))
