"""Everything that the page's charts are drawn from, as one value for JSON."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr

from gibbsmin.figures import key_species
from gibbsmin.figures.axes import is_logarithmic
from gibbsmin.figures.look import LINE_COLOURS
from gibbsmin.outcome.composition import WATER
from gibbsmin.report.boundaries import boundaries
from gibbsmin.report.markup import pretty_name, pretty_words
from gibbsmin.report.packing import packed
from gibbsmin.report.quantities import quantities
from gibbsmin.report.reactions_part import reaction_charts
from gibbsmin.report.thinning import MOST_POINTS, Thinned, thin

if TYPE_CHECKING:
    from gibbsmin.outcome import Outcome
    from gibbsmin.scenario.model import Axis

LEAST_SHOWN = 1e-12  # a species that nowhere exceeds this mole fraction is left to the results file
MOST_SPECIES = 100
_COLOUR_STOPS = 17
# The same hues in the same order, light enough for a dark page.
_DARK_LINE_COLOURS = ("#5a9ff0", "#f08d4f", "#35c49c", "#e6a3ca", "#e7e9ec", "#f2b53a", "#a9dcf7")
_COLOURS = {  # one scale for each kind of quantity; all of them even in lightness and safe for colour-blind eyes
    # Cut off where white writing on it would fade.
    "composition": ("viridis", (0.04, 0.86)),
    "phase": ("viridis", (0.04, 0.86)),
    "result": ("cividis", (0.0, 0.84)),
    "energy": ("cividis", (0.0, 0.84)),
    "property": ("cividis", (0.0, 0.84)),
    "evidence": ("bone_r", (0.08, 0.75)),
    "trust": ("cividis", (0.0, 0.84)),
    "signed": ("PuOr_r", (0.06, 0.94)),
}


class ChartData:
    """What the page shows of an outcome, and how much of it that is.

    Attributes:
        species: names kept, the most abundant first.
        left_out: names that nowhere reach `least`, in the order of the results.
        least: largest mole fraction that any species left out has anywhere.
        thinned: positions kept along each axis.
    """

    def __init__(self, outcome: Outcome, most_points: int = MOST_POINTS) -> None:
        self._outcome = outcome
        dataset = outcome.dataset
        grid = [str(dim) for dim in dataset["status"].dims]
        largest = dataset["mole_fraction"].max(grid).fillna(0.0).values
        names = [str(name) for name in dataset["species"].values]
        order = [int(i) for i in np.argsort(-largest, kind="stable")]
        kept = [i for i in order if largest[i] > LEAST_SHOWN][:MOST_SPECIES] or order[:1]
        self.species = tuple(names[i] for i in kept)
        rest = [i for i in range(len(names)) if i not in set(kept)]
        # Pure condensed phases have an amount but no mole fraction, so there is none that could be small.
        gases = {each.name for each in outcome.scenario.species if each.state == "g"}
        self.left_out = tuple(names[i] for i in rest if names[i] in gases)
        self.least = float(max((largest[i] for i in rest), default=0.0))
        self.thinned: Thinned = thin(dataset["status"].shape, len(kept), most_points)

    def as_json(self) -> dict[str, Any]:
        """The value that the page's script reads."""
        outcome, scenario = self._outcome, self._outcome.scenario
        whole = outcome.dataset
        kept = dict(zip(map(str, whole["status"].dims), self.thinned.kept, strict=True))
        dataset = whole.isel({dim: list(positions) for dim, positions in kept.items()})
        fraction = dataset["mole_fraction"]
        ordered = fraction.sel(species=list(self.species)).transpose(*dataset["status"].dims, "species")
        wanted = [name for name in scenario.results.key_species if name in self.species]
        key = key_species(whole, wanted)
        reactions = outcome.reactions
        return {
            "axes": [_axis(axis, kept[axis.name]) for axis in scenario.axes],
            "ambient": scenario.ambient_pressure,
            "species": [{"name": name, "label": pretty_name(name)} for name in self.species],
            "key": list(key),
            "fractions": packed(ordered.values),
            "dryTotal": _dry_total(dataset),
            "water": WATER,
            "status": [int(code) for code in dataset["status"].values.ravel()],
            "checked": _checked(outcome),
            "quantities": [
                {
                    "name": each.name,
                    "label": each.label,
                    "group": each.group,
                    "kind": each.kind,
                    "unit": each.unit,
                    "flags": list(each.flags),
                    "values": packed(each.values.transpose(*dataset["status"].dims).values),
                }
                for each in quantities(dataset, key)
            ],
            "boundaries": list(boundaries(whole, kept)),
            "reactions": None if reactions is None else reaction_charts(reactions),
            "colours": _colour_scales(),
            "lineColours": {"light": list(LINE_COLOURS), "dark": list(_DARK_LINE_COLOURS)},
        }


def _axis(axis: Axis, kept: tuple[int, ...]) -> dict[str, Any]:
    kind = {"K": "temperature", "Pa": "pressure"}.get(axis.unit, "other")
    factor = axis.display_values[-1] / axis.values[-1] if kind == "other" and axis.values[-1] else 1.0
    return {
        "name": axis.name,
        "title": pretty_words(axis.title),
        "kind": kind,
        "values": [axis.values[i] for i in kept],
        "written": [axis.display_values[i] for i in kept],
        "unit": axis.display_unit,
        "factor": factor,
        "logarithmic": kind != "temperature" and is_logarithmic(axis.array),
    }


def _dry_total(dataset: xr.Dataset) -> str | None:
    """Sum of all mole fractions but water's: summed here in full, since 1 - x(H2O) loses digits in steam."""
    if WATER not in dataset["species"].values:
        return None
    others = dataset["mole_fraction"].sel(species=dataset["species"] != WATER)
    total = others.sum("species", skipna=False).transpose(*dataset["status"].dims)
    return packed(total.values)


def _checked(outcome: Outcome) -> list[dict[str, Any]]:
    """The points of the cross-check, by the values of their axes (they need not be among those shown)."""
    return [
        {"status": point.status, "at": _place(outcome, point.index)} for point in outcome.crosscheck.points
    ]


def _place(outcome: Outcome, index: tuple[int, ...]) -> list[float]:
    return [axis.values[i] for axis, i in zip(outcome.scenario.axes, index, strict=True)]


def _colour_scales() -> Mapping[str, list[str]]:
    from matplotlib import colormaps
    from matplotlib.colors import to_hex

    return {
        kind: [to_hex(colormaps[name](place)) for place in np.linspace(*ends, _COLOUR_STOPS)]
        for kind, (name, ends) in _COLOURS.items()
    }
