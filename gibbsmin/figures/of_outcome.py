"""The figures of a run: which species and quantities its scenario asks for, and in which units."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

from gibbsmin.figures.axes import DisplayUnit

if TYPE_CHECKING:
    from gibbsmin.figures import Drawn, Written
    from gibbsmin.outcome import Outcome
    from gibbsmin.scenario.model import Axis, Scenario

_SYMBOLS = {"degC": "\N{DEGREE SIGN}C", "degF": "\N{DEGREE SIGN}F", "1": ""}


def write_outcome_figures(
    outcome: Outcome, folder: Path, *, progress: Callable[[str], None] | None = None
) -> Written:
    """Draw what the outcome's scenario asks for and save it as PNG and SVG in `folder`."""
    from gibbsmin.figures import write_figures

    further = _about_reactions(outcome)
    return write_figures(
        outcome.dataset, folder, progress=progress, further=further, **figure_options(outcome)
    )


def _about_reactions(outcome: Outcome) -> Iterable[Drawn]:
    if outcome.reactions is None:
        return ()
    from gibbsmin.figures.of_reactions import outcome_figures

    return outcome_figures(outcome)


def figure_options(outcome: Outcome) -> dict[str, Any]:
    """The options of `gibbsmin.figures.figures_of` that belong to an outcome."""
    from gibbsmin.figures import key_species

    scenario, dataset = outcome.scenario, outcome.dataset
    wanted = scenario.results
    asked: set[str] = set()
    for results in (wanted.conversions, wanted.yields, wanted.selectivities, wanted.ratios):
        asked.update(result.name for result in results)
    asked.update(f"dew point of {name}" for name in wanted.dew_points)
    # The variable's own name may differ (NetCDF takes no slash); its long_name is what the scenario says.
    quantities = [
        str(name)
        for name, array in dataset.data_vars.items()
        if "description" in array.attrs and array.attrs["long_name"] in asked
    ]
    known = set(map(str, dataset["species"].values))
    return {
        "key": key_species(dataset, [name for name in wanted.key_species if name in known]),
        "quantities": quantities,
        "dry": wanted.dry_basis,
        "units": display_units(scenario),
        "title": scenario.title,
        "line_pressures": wanted.line_pressures,
    }


def count_figures(outcome: Outcome) -> int:
    """How many pictures `write_outcome_figures` will make or leave out, for a progress bar."""
    from gibbsmin.figures import shown_phases

    options, sizes = figure_options(outcome), outcome.dataset["status"].shape
    maps = len(options["key"]) if sum(size > 1 for size in sizes) >= 2 else 1
    count = 1 + ("dry_mole_fraction" in outcome.dataset) + maps + len(options["quantities"])
    count += len(shown_phases(outcome.dataset))
    if outcome.reactions is not None:
        from gibbsmin.figures.of_reactions import count_outcome_figures

        count += count_outcome_figures(outcome)
    return count


def display_units(scenario: Scenario) -> Mapping[str, DisplayUnit]:
    """How the scenario's axes are shown: in the units in which its file gives them."""
    return {axis.name: _display_unit(axis) for axis in scenario.axes}


def _display_unit(axis: Axis) -> DisplayUnit:
    symbol = _SYMBOLS.get(axis.display_unit, axis.display_unit)
    low, high = min(axis.values), max(axis.values)
    if low == high:
        # One value fixes no scale; the axis is never drawn, and its value is shown as it was written.
        return DisplayUnit(symbol, 1.0, low - axis.display_values[0])
    shown_low = axis.display_values[axis.values.index(low)]
    shown_high = axis.display_values[axis.values.index(high)]
    size = (high - low) / (shown_high - shown_low)
    return DisplayUnit(symbol, size, low - size * shown_low)
