"""The figures of the answers about reactions: which there are, their names and files."""

from __future__ import annotations

import textwrap
from collections.abc import Callable, Iterator, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from gibbsmin.figures import Drawn
from gibbsmin.figures.axes import DisplayUnit
from gibbsmin.figures.constants import draw_constants, draw_measured, draw_residuals
from gibbsmin.figures.labels import chemical, file_name, plain
from gibbsmin.figures.look import house_look
from gibbsmin.figures.maps import draw_map
from gibbsmin.figures.saving import save_figure
from gibbsmin.figures.trust import draw_shortcut_errors, draw_side_by_side, draw_trust
from gibbsmin.reactions.results import MeasuredSummary, ReactionResults
from gibbsmin.reactions.text import KELVIN, TemperatureUnit

if TYPE_CHECKING:
    from gibbsmin.outcome import Outcome

_LEGEND_WIDTH = 23  # characters of a name in a legend
_SYMBOLS = {"degC": "\N{DEGREE SIGN}C", "degF": "\N{DEGREE SIGN}F"}


def reaction_figures(
    results: ReactionResults, *, unit: TemperatureUnit = KELVIN, title: str = ""
) -> Iterator[Drawn]:
    """Figures that need no map: ln K against 1/T, errors of shortcuts, measured values."""
    T = results.temperature
    low, high = float(T.min()), float(T.max())
    shown = DisplayUnit(_SYMBOLS.get(unit.symbol, unit.symbol), unit.size, unit.zero)
    for each in results.reactions:
        name = each.reaction.name
        measured = [one for one in results.measured if one.data.reaction.name == name]
        shortcuts = [one for one in results.shortcuts if one.shortcut.reaction.name == name]
        values = [float(t) for one in measured for t in one.data.temperature]
        span = min([low, *values]), max([high, *values])
        if span[0] < span[1]:
            figure = draw_constants(
                each.reaction,
                *span,
                shortcuts=[one.shortcut for one in shortcuts],
                measured=measured,
                subtitle=title,
            )
            yield Drawn(f"constant_{file_name(name)}", figure)
        if shortcuts:
            figure_of_errors = draw_shortcut_errors(
                shortcuts, results.wanted.tolerance, unit=shown, subtitle=title
            )
            yield Drawn(f"shortcuts_{file_name(name)}", figure_of_errors, "the grid has one temperature")
    yield from measured_figures(results.measured)


def measured_figures(measured: Sequence[MeasuredSummary]) -> Iterator[Drawn]:
    """For each set of measured K: line, band and intercept; residuals and third law."""
    for each in measured:
        name = file_name(each.data.name)
        yield Drawn(f"measured_{name}", draw_measured(each))
        yield Drawn(f"residuals_{name}", draw_residuals(each))


def comparison_figures(outcome: Outcome) -> Iterator[Drawn]:
    """For each set of reactions alone: composition beside the full one, trust maps, maps of the largest error."""
    from gibbsmin.figures.of_outcome import display_units

    results, dataset, scenario = outcome.reactions, outcome.dataset, outcome.scenario
    if results is None or not results.comparisons:
        return
    units = display_units(scenario)
    subsets = dict.fromkeys(each.subset.name for each in results.comparisons)
    for subset in subsets:
        members = [(k, each) for k, each in enumerate(results.comparisons) if each.subset.name == subset]
        choices = {
            _legend(each.K): dataset["alone_mole_fraction"].isel(alone=k, drop=True) for k, each in members
        }
        side = draw_side_by_side(
            dataset["mole_fraction"],
            choices,
            results.key_species,
            title=f"Composition: {plain(subset)} alone, and in full",
            subtitle=scenario.title,
            units=units,
            pressures=scenario.results.line_pressures,
        )
        yield Drawn(f"alone_{file_name(subset)}", side, "the grid has one temperature")
        for count, (k, each) in enumerate(members):
            words = "exact K" if each.K == "exact" else f"K by {each.K}"
            ending = file_name(subset, "exact" if count == 0 else f"shortcuts_{count}")
            reason = dataset["alone_reason"].isel(alone=k, drop=True)
            figure = draw_trust(
                reason,
                title=f"Trust map: {plain(subset)} alone",
                subtitle=f"{words}; {scenario.title}",
                units=units,
            )
            yield Drawn(f"trust_{ending}", figure, "a map needs two axes with several values")
            yield _error_map(outcome, k, ending, words)
            for name in each.conversion:
                yield _conversion_map(outcome, k, name, ending, words)


def _error_map(outcome: Outcome, k: int, ending: str, words: str) -> Drawn:
    from gibbsmin.figures.of_outcome import display_units

    assert outcome.reactions is not None
    each = outcome.reactions.comparisons[k]
    keys = outcome.reactions.key_species
    error = outcome.dataset["alone_error"].isel(alone=k, drop=True)
    worst = max(keys, key=lambda name: float(abs(error.sel(species=name)).max()))
    figure = draw_map(
        error.sel(species=worst, drop=True),
        title=f"Error of {chemical(worst)}: {plain(each.subset.name)} alone",
        subtitle=f"{words}; {outcome.scenario.title}",
        scale_label=f"mole fraction of {chemical(worst)}, alone less full",
        units=display_units(outcome.scenario),
    )
    return Drawn(f"error_{ending}", figure, "practically the same everywhere, or no map")


def _conversion_map(outcome: Outcome, k: int, name: str, ending: str, words: str) -> Drawn:
    from gibbsmin.figures.of_outcome import display_units
    from gibbsmin.outcome.reactions import conversion_variable

    assert outcome.reactions is not None
    each = outcome.reactions.comparisons[k]
    error = outcome.dataset[conversion_variable("conversion_error", name)].isel(alone=k, drop=True)
    figure = draw_map(
        error,
        title=f"Error of the conversion of {chemical(name)}: {plain(each.subset.name)} alone",
        subtitle=f"{words}; {outcome.scenario.title}",
        scale_label=f"conversion of {chemical(name)}, alone less full",
        units=display_units(outcome.scenario),
    )
    return Drawn(
        f"error_conversion_{file_name(name)}_{ending}", figure, "practically the same everywhere, or no map"
    )


def outcome_figures(outcome: Outcome) -> Iterator[Drawn]:
    """All figures about the reactions of a run; none where it asks for none."""
    from gibbsmin.outcome.reactions import temperature_unit

    if outcome.reactions is not None:
        unit, title = temperature_unit(outcome.scenario), outcome.scenario.title
        yield from reaction_figures(outcome.reactions, unit=unit, title=title)
        yield from comparison_figures(outcome)


def count_outcome_figures(outcome: Outcome) -> int:
    """How many entries `outcome_figures` has."""
    results = outcome.reactions
    if results is None:
        return 0
    several = results.temperature.min() < results.temperature.max()
    audited = {each.shortcut.reaction.name for each in results.shortcuts}
    measured = {each.data.reaction.name for each in results.measured}
    curves = sum(bool(several or each.reaction.name in measured) for each in results.reactions)
    subsets = {each.subset.name for each in results.comparisons}
    maps = sum(2 + len(each.conversion) for each in results.comparisons)
    return curves + len(audited) + 2 * len(results.measured) + len(subsets) + maps


def write_reaction_figures(
    results: ReactionResults, folder: Path, *, unit: TemperatureUnit = KELVIN
) -> list[Path]:
    """The figures that need no map, into a folder that is made if need be."""
    return _write(lambda: reaction_figures(results, unit=unit), folder)


def write_measured_figures(measured: Sequence[MeasuredSummary], folder: Path) -> list[Path]:
    """The figures of measured K, into a folder that is made if need be."""
    return _write(lambda: measured_figures(measured), folder)


def _write(figures: Callable[[], Iterator[Drawn]], folder: Path) -> list[Path]:
    folder.mkdir(parents=True, exist_ok=True)
    files: list[Path] = []
    with house_look():
        for drawn in figures():
            if drawn.figure is not None:
                files += save_figure(drawn.figure, folder, drawn.name)
    return files


def _legend(K: str) -> str:
    words = "exact K" if K == "exact" else K
    return "\n".join(textwrap.wrap(words, _LEGEND_WIDTH))
