"""Quick pictures of a result in a notebook: `dataset.gibbsmin.plot.map("H2")`.

The names are there once `gibbsmin.equilibrium` or `gibbsmin.run` was used; for a results file opened by xarray
alone, `import gibbsmin.notebook` registers them. The drawing is that of `gibbsmin.figures`.
"""

from __future__ import annotations

import io
from collections.abc import Mapping
from dataclasses import dataclass
from difflib import get_close_matches
from pathlib import Path
from typing import TYPE_CHECKING, Literal

import xarray as xr

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.figure import Figure

    from gibbsmin.figures.axes import DisplayUnit

DEFAULT_UNITS: Mapping[str, str] = {"temperature": "degC", "pressure": "bar"}
_RESOLUTION = 150  # dots per inch on the screen


@dataclass(frozen=True)
class Picture:
    """A drawn figure that a notebook shows by itself.

    Attributes:
        figure: matplotlib's figure, to change or to save.
    """

    figure: Figure

    def save(self, path: str | Path) -> Path:
        """Save the figure; the ending of the name says in which format (png, svg, pdf)."""
        from gibbsmin.figures.look import house_look

        with house_look():
            self.figure.savefig(path, dpi=_RESOLUTION)
        return Path(path)

    def _repr_png_(self) -> bytes:
        from gibbsmin.figures.look import house_look

        stream = io.BytesIO()
        with house_look():
            self.figure.savefig(stream, format="png", dpi=_RESOLUTION)
        return stream.getvalue()


@xr.register_dataset_accessor("gibbsmin")  # type: ignore[no-untyped-call]
class GibbsminAccessor:
    """What a data set of equilibrium compositions can do in a notebook; see `Plots`."""

    def __init__(self, dataset: xr.Dataset) -> None:
        self._dataset = dataset

    @property
    def plot(self) -> Plots:
        return Plots(self._dataset)


class Plots:
    """Pictures of a data set of `gibbsmin.equilibrium` on a grid, or of `gibbsmin.run`.

    Both methods take a value for any axis by its name (`pressure=20e5`, `steam_to_carbon=3`), in the unit of the
    data set; the nearest point of the grid is shown, and the picture says which. `units` are those of the axes
    as drawn, with the spellings of a scenario file ("degC", "K", "bar", "kPa").
    """

    def __init__(self, dataset: xr.Dataset) -> None:
        self._dataset = dataset

    def map(
        self, quantity: str, *, dry: bool = False, units: Mapping[str, str] = DEFAULT_UNITS, **held: float
    ) -> Picture:
        """A contour map of a species' mole fraction or of any result over the grid.

        Args:
            quantity: name of a species, or of a variable ("conversion of CH4", "heat_duty").
            dry: mole fraction in the gas without its water.
            units: of temperature and pressure as drawn.
            held: axis = value, to show one value of it instead of panels for several.

        Raises:
            KeyError: there is no such quantity or axis; close names are told.
            ValueError: there is no map: fewer than two axes with several values, or the same value everywhere.
        """
        from gibbsmin.figures import draw_map
        from gibbsmin.figures.labels import with_formulas
        from gibbsmin.figures.look import house_look

        field = self._at(self._field(quantity, dry), held)
        words = with_formulas(str(field.attrs["long_name"]))
        unit = str(field.attrs.get("units", "1"))
        label = words if unit == "1" else f"{words} ({unit})"
        with house_look():
            figure = draw_map(
                field, title=words[:1].upper() + words[1:], scale_label=label, units=_display_units(units)
            )
        if figure is None:
            raise ValueError(
                f"no map of {quantity!r}: it needs two axes with several values and a result that changes over them"
            )
        return Picture(figure)

    def lines(
        self,
        *species: str,
        dry: bool = False,
        units: Mapping[str, str] = DEFAULT_UNITS,
        **held: float,
    ) -> Picture:
        """Mole fractions along the first axis with several values, as a rule temperature.

        Args:
            species: names; none for the most abundant ones.
            dry: mole fractions in the gas without its water.
            units: of temperature and pressure as drawn.
            held: axis = value, to show one value of it instead of panels for several.

        Raises:
            KeyError: there is no such species or axis; close names are told.
            ValueError: no axis has several values.
        """
        from gibbsmin.figures import draw_lines, key_species
        from gibbsmin.figures.look import house_look
        from gibbsmin.outcome.composition import WATER

        names = species or tuple(name for name in key_species(self._dataset) if not (dry and name == WATER))
        fields = {name: self._at(self._field(name, dry), held) for name in names}
        with house_look():
            figure = draw_lines(
                fields,
                title="Composition at equilibrium",
                value_label="Mole fraction in the dry gas" if dry else "Mole fraction",
                units=_display_units(units),
            )
        if figure is None:
            raise ValueError("no lines: no axis has several values, or no point is solved")
        return Picture(figure)

    def _field(self, quantity: str, dry: bool) -> xr.DataArray:
        dataset = self._dataset
        species = [str(name) for name in dataset["species"].values]
        if quantity in species:
            fractions = _dry_fractions(dataset) if dry else dataset["mole_fraction"]
            field = fractions.sel(species=quantity, drop=True)
            basis = " in the dry gas" if dry else ""
            return field.assign_attrs(long_name=f"mole fraction of {quantity}{basis}")
        grid = set(dataset["status"].dims)
        variables = [str(name) for name, each in dataset.data_vars.items() if set(each.dims) == grid]
        if quantity in variables:
            field = dataset[quantity].transpose(*dataset["status"].dims)
            return field.assign_attrs(long_name=field.attrs.get("long_name", quantity))
        raise KeyError(_unknown("species or result over the grid", quantity, [*species, *variables]))

    def _at(self, field: xr.DataArray, held: Mapping[str, float]) -> xr.DataArray:
        axes = [str(dim) for dim in field.dims]
        for name in held:
            if name not in axes:
                raise KeyError(_unknown("axis", name, axes))
        # Lists keep the dimension, so that the picture can say at which value it was taken.
        return field.sel({name: [value] for name, value in held.items()}, method="nearest")


def _dry_fractions(dataset: xr.Dataset) -> xr.DataArray:
    if "dry_mole_fraction" in dataset:
        return dataset["dry_mole_fraction"]
    from gibbsmin.outcome.composition import dry_mole_fractions

    return dry_mole_fractions(dataset)


def _display_units(wanted: Mapping[str, str]) -> Mapping[str, DisplayUnit]:
    from fractions import Fraction

    from gibbsmin.constants import STANDARD_ATMOSPHERE
    from gibbsmin.figures.axes import DisplayUnit
    from gibbsmin.scenario.units import find_unit

    shown: dict[str, DisplayUnit] = {}
    kinds: tuple[Literal["temperature", "pressure"], ...] = ("temperature", "pressure")
    for kind in kinds:
        word = wanted.get(kind, DEFAULT_UNITS[kind])
        unit = find_unit(word, kind, ambient=Fraction(STANDARD_ATMOSPHERE))
        shown[kind] = DisplayUnit(word.replace("deg", "°"), float(unit.scale), float(unit.offset))
    return shown


def _unknown(what: str, name: str, known: Sequence[str]) -> str:
    close = get_close_matches(name, known, n=3)
    hint = f"; did you mean {', '.join(close)}?" if close else f"; there are {', '.join(known[:12])}"
    return f"no {what} is called {name!r}{hint}"


__all__ = ["GibbsminAccessor", "Picture", "Plots"]
