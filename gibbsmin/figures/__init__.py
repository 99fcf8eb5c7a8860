"""Pictures of a result: maps of the key species, composition along the grid, requested quantities.

`figures_of` makes them one by one, `write_figures` saves them as PNG and SVG. Nothing here touches
matplotlib's global state (pyplot), so that it can be called from any program, thread or notebook.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import chain
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from matplotlib.figure import Figure

from gibbsmin.figures.axes import SI_UNITS, DisplayUnit
from gibbsmin.figures.bars import draw_bars
from gibbsmin.figures.boundary_lines import boundaries_of
from gibbsmin.figures.labels import chemical, file_name, with_formulas
from gibbsmin.figures.lines import draw_lines
from gibbsmin.figures.look import house_look
from gibbsmin.figures.maps import draw_map
from gibbsmin.figures.saving import save_figure

__all__ = [
    "DisplayUnit",
    "Drawn",
    "draw_bars",
    "draw_lines",
    "draw_map",
    "figures_of",
    "key_species",
    "write_figures",
]

MOST_KEY_SPECIES = 7  # where the request names none: as many as there are line colours
SMALLEST_ACTIVITY_DRAWN = 0.01
SMALLEST_KEY_FRACTION = 1e-6  # a species that nowhere exceeds this mole fraction is not chosen by itself


@dataclass(frozen=True)
class Drawn:
    """One entry of the picture list: a figure with its file name, or the reason why there is none."""

    name: str
    figure: Figure | None
    reason: str = ""


def key_species(dataset: xr.Dataset, wanted: Sequence[str] = ()) -> tuple[str, ...]:
    """The species to show: those asked for, or else the most abundant ones by their largest mole fraction."""
    if wanted:
        return tuple(wanted)
    fraction = dataset["mole_fraction"]
    grid = [dim for dim in fraction.dims if dim != "species"]
    largest = fraction.max(dim=grid, skipna=True).fillna(0.0).values
    names = [str(name) for name in dataset["species"].values]
    order = np.argsort(-largest, kind="stable")[:MOST_KEY_SPECIES]
    return tuple(names[i] for i in order if largest[i] > SMALLEST_KEY_FRACTION)


def figures_of(
    dataset: xr.Dataset,
    *,
    key: Sequence[str] = (),
    quantities: Sequence[str] = (),
    dry: bool = False,
    units: Mapping[str, DisplayUnit] = SI_UNITS,
    title: str = "",
    line_pressures: Sequence[float] = (),
) -> Iterator[Drawn]:
    """Every figure that belongs to a result, made one at a time so that memory holds one only.

    Parameters:
        dataset: a result on a grid, with `mole_fraction` (..., species) [1]; NaN where not solved.
        key: species to show; empty for the most abundant ones.
        quantities: names of further variables over the grid (conversions, yields, ratios) to map.
        dry: also draw the composition on a dry basis, from the variable `dry_mole_fraction`.
        units: how temperature, pressure and further axes are shown; SI where not given.
        title: the scenario's own title, printed literally below the heading of each figure.
        line_pressures: pressures of the grid [Pa] at which composition is drawn along temperature;
            empty for the lowest, the middle and the highest.

    Raises ValueError for a result that is not on a grid, KeyError for names that it does not have.
    """
    # Axes drawn in ascending order whatever the order of the request.
    grid = [str(dim) for dim in dataset["mole_fraction"].dims if dim != "species"]
    dataset = dataset.sortby(grid) if all(dim in dataset.coords for dim in grid) else dataset
    names = key_species(dataset, key)
    if not names:
        yield Drawn("composition", None, "no point of the grid is solved")
        return
    common = {"subtitle": title, "units": units}
    over_maps = {**common, "boundaries": boundaries_of(dataset)}
    bases = [("mole_fraction", "composition", "Mole fraction")]
    if dry and "dry_mole_fraction" in dataset:
        bases.append(("dry_mole_fraction", "composition_dry", "Mole fraction in the dry gas"))
    for variable, name, words in bases:
        fields = {each: dataset[variable].sel(species=each) for each in names}
        if variable.startswith("dry"):
            fields.pop("H2O", None)
        yield _composition(fields, name, words, line_pressures, names, common)
    if sum(dataset.sizes[dim] > 1 for dim in grid) < 2:
        yield Drawn("maps", None, "a map needs two axes with several values")
    else:
        for each in names:
            field = dataset["mole_fraction"].sel(species=each)
            label = f"ole fraction of {chemical(each)}"
            yield _map(field, f"map_{file_name(each)}", f"M{label} at equilibrium", f"m{label}", over_maps)
    for phase, variable in shown_phases(dataset):
        yield _phase(dataset, phase, variable, over_maps)
    for quantity in quantities:
        yield _quantity(dataset[quantity], quantity, dataset["status"] == 0, over_maps)


def shown_phases(dataset: xr.Dataset) -> list[tuple[str, str]]:
    """Condensed phases with the variable that is drawn of each: its amount where it forms, else its activity.

    The activity of a phase that is far from forming everywhere is not worth a figure.
    """
    if "phase" not in dataset.coords:
        return []
    shown = []
    for number, name in enumerate(dataset["phase"].values):
        amount, activity = (
            dataset[each].isel(phase=number) for each in ("phase_amount_per_feed", "phase_activity")
        )
        if bool((amount > 0).any()):
            shown.append((str(name), "phase_amount_per_feed"))
        elif bool((activity > SMALLEST_ACTIVITY_DRAWN).any()):
            shown.append((str(name), "phase_activity"))
    return shown


def _phase(dataset: xr.Dataset, phase: str, variable: str, common: Any) -> Drawn:
    own = phase.removesuffix("(cd)")
    label = chemical(own)
    words = f"{label} per mol of feed, mol/mol" if variable.endswith("feed") else f"activity of {label}"
    field = dataset[variable].sel(phase=phase, drop=True)
    name = f"{file_name(own)}_{'amount' if variable.endswith('feed') else 'activity'}"
    return _field(field, name, words[:1].upper() + words[1:], words, common)


def _composition(
    fields: Mapping[str, xr.DataArray],
    name: str,
    words: str,
    line_pressures: Sequence[float],
    colour_order: Sequence[str],
    common: Any,
) -> Drawn:
    title = "Composition at equilibrium"
    first = next(iter(fields.values()))
    if first.size == 1:
        figure = draw_bars(fields, title=title, value_label=words, **common)
        return Drawn(name, figure, "the point is not solved")
    if line_pressures and first.sizes.get("temperature", 1) > 1:
        at = {"pressure": list(line_pressures)}
        fields = {each: field.sel(at, method="nearest") for each, field in fields.items()}
    figure = draw_lines(fields, title=title, value_label=words, colour_order=colour_order, **common)
    return Drawn(name, figure, "no point of the grid is solved")


def _map(field: xr.DataArray, name: str, title: str, label: str, common: Any) -> Drawn:
    figure = draw_map(field, title=title, scale_label=label, **common)
    return Drawn(name, figure, "" if figure else _why_no_map(field))


def _quantity(field: xr.DataArray, name: str, solved: xr.DataArray, common: Any) -> Drawn:
    """A map of a requested quantity or, where the grid is a line, its course along that."""
    words = str(field.attrs.get("long_name", name.replace("_", " ")))
    unit = str(field.attrs.get("units", "1"))
    if unit == "K":  # a temperature, not a difference: no result that can be asked for is one
        shown = common["units"].get("temperature", SI_UNITS["temperature"])
        field, unit, common = shown.show(field), shown.symbol, {**common, "linear": True}
    if bool((solved & field.isnull()).any()):  # a dew point beyond the data of the liquid, say
        common = {**common, "blank_means": "without a value"}
    label = words if unit == "1" else f"{words} ({unit})"
    title = words[:1].upper() + words[1:]
    return _field(field, file_name(name), with_formulas(title), with_formulas(label), common)


def _field(field: xr.DataArray, name: str, title: str, label: str, common: Any) -> Drawn:
    """A map or, where the grid is a line, the course along it; title and label in matplotlib markup."""
    spanned = sum(size > 1 for size in field.sizes.values())
    if spanned >= 2:
        phase_edge = bool((field == 0).any())  # beyond it the amount is a true zero
        return _map(field, f"map_{name}", title, label, {"linear": phase_edge, **common})
    of_lines = {key: value for key, value in common.items() if key in ("subtitle", "units")}
    figure = draw_lines({name: field}, title=title, value_label=label, name_lines=False, **of_lines)
    return Drawn(f"course_{name}", figure, "the grid is a single point" if spanned == 0 else "")


def _why_no_map(field: xr.DataArray) -> str:
    values = field.values[np.isfinite(field.values)]
    if values.size == 0:
        return "no point of the grid is solved"
    return f"practically {values.mean():.4g} everywhere"


@dataclass(frozen=True)
class Written:
    """What `write_figures` did: the files, and for each picture that was not made its name and the reason."""

    files: tuple[Path, ...]
    left_out: Mapping[str, str]


def write_figures(
    dataset: xr.Dataset,
    folder: Path,
    *,
    progress: Callable[[str], None] | None = None,
    further: Iterable[Drawn] = (),
    **options: Any,
) -> Written:
    """Save the figures of a result as PNG and SVG in `folder`, which is made if need be.

    `options` are those of `figures_of`; `further` figures follow them; `progress` is called with the name of each
    picture as it is made or left out. Files of the same names are replaced.
    """
    folder.mkdir(parents=True, exist_ok=True)
    files: list[Path] = []
    left_out: dict[str, str] = {}
    taken: set[str] = set()
    with house_look():
        for drawn in chain(figures_of(dataset, **options), further):
            if progress is not None:
                progress(drawn.name)
            if drawn.figure is None:
                left_out[drawn.name] = drawn.reason
                continue
            files += save_figure(drawn.figure, folder, _free_name(drawn.name, taken))
    return Written(tuple(files), left_out)


def _free_name(name: str, taken: set[str]) -> str:
    """The name, numbered where one that differs only in case is taken: some file systems ignore case."""
    free, count = name, 1
    while free.lower() in taken:
        count += 1
        free = f"{name}_{count}"
    taken.add(free.lower())
    return free
