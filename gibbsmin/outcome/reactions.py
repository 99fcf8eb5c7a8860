"""The reactions of a scenario, worked out on its solved map; as variables of the data set, as text and as tables."""

from __future__ import annotations

import csv
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr

from gibbsmin.outcome.mixture import full_mixture
from gibbsmin.reactions.against_mixture import Comparison, FullMixture, Reason
from gibbsmin.reactions.report import report_text
from gibbsmin.reactions.results import ReactionResults, work_out
from gibbsmin.reactions.text import TEMPERATURE_UNITS, TemperatureUnit

if TYPE_CHECKING:
    from gibbsmin.outcome import Outcome
    from gibbsmin.scenario import Scenario
    from gibbsmin.solving import Conditions

REPORT_FILE = "reactions.txt"
CONSTANTS_FILE = "reaction_constants.csv"
MEASURED_FILE = "measured_constants.csv"
APPROACH_FILE = "approach.csv"

_MOST_KEYS = 5  # species that count where the scenario names none


def reaction_results(
    scenario: Scenario, conditions: Conditions, dataset: xr.Dataset, *, threads: int | None = None
) -> ReactionResults | None:
    """What the scenario asks about reactions, or None when it asks nothing."""
    wanted = scenario.reactions
    if wanted is None:
        return None
    exact = scenario.exact_feed_amounts()
    feed = np.stack(
        [np.asarray(exact[name], dtype=object).ravel() for name in scenario.feed_species], axis=-1
    )
    full = full_mixture(conditions, dataset, scenario.library, feed=feed)
    return work_out(
        wanted,
        scenario.temperature.array,
        full=full,
        key_species=scenario.results.key_species or _most_abundant(full),
        conversions=[each.species for each in scenario.results.conversions],
        extrapolate=scenario.extrapolate,
        threads=threads,
    )


def add_reactions(dataset: xr.Dataset, results: ReactionResults | None) -> xr.Dataset:
    """The data set with ln K and the other functions, errors of shortcuts, and the comparisons with the map."""
    if results is None:
        return dataset
    return dataset.assign_coords(_coordinates(results)).assign(
        {**_functions(results), **_shortcuts(results), **_comparisons(results, dataset)}
    )


def reactions_text(outcome: Outcome) -> str:
    """The whole report about reactions, in the temperature unit of the scenario."""
    results, scenario = outcome.reactions, outcome.scenario
    if results is None:
        return ""
    return report_text(results, unit=temperature_unit(scenario), place=lambda index: _place(index, scenario))


def temperature_unit(scenario: Scenario) -> TemperatureUnit:
    return TEMPERATURE_UNITS[scenario.temperature.display_unit]


def summary_lines(outcome: Outcome) -> list[str]:
    """The verdict table and the approaches, for the summary of a run."""
    from gibbsmin.reactions.measured_text import approach_text
    from gibbsmin.reactions.verdict import verdict_text

    results, scenario = outcome.reactions, outcome.scenario
    if results is None:
        return []
    unit = temperature_unit(scenario)
    blocks = []
    if results.comparisons and results.full is not None:
        blocks.append(
            verdict_text(
                results.comparisons,
                results.full,
                str(results.wanted.mixture_tolerance),
                unit,
                lambda index: _place(index, scenario),
            )
        )
    if results.approaches:
        blocks.append(approach_text(results.approaches, unit))
    return "\n\n".join([*blocks, f"all about reactions: {REPORT_FILE}"]).splitlines()


def write_reactions(outcome: Outcome, folder: Path) -> None:
    """The report as text, and tables of constants, measured values and approaches as CSV; nothing without them."""
    results = outcome.reactions
    if results is None:
        return
    (folder / REPORT_FILE).write_text(reactions_text(outcome) + "\n", encoding="utf-8", newline="")
    _write_csv(folder / CONSTANTS_FILE, _constants_rows(results))
    if results.measured:
        _write_csv(folder / MEASURED_FILE, _measured_rows(results))
    if results.approaches:
        _write_csv(folder / APPROACH_FILE, _approach_rows(results))


# --- variables -----------------------------------------------------------------------------------------------


def _coordinates(results: ReactionResults) -> dict[str, xr.Variable]:
    made = {"reaction": _names("reaction", [each.reaction.name for each in results.reactions], "reaction")}
    made["equation"] = xr.Variable(
        ("reaction",),
        np.array([each.reaction.equation for each in results.reactions], dtype=np.str_),
        {"long_name": "equation of the reaction"},
    )
    if results.shortcuts:
        names = [each.shortcut.name for each in results.shortcuts]
        made["shortcut"] = _names("shortcut", names, "short form of ln K")
    if results.comparisons:
        names = [f"{each.subset.name}, K {each.K}" for each in results.comparisons]
        made["alone"] = _names("alone", names, "reactions that run alone, and their K")
    return made


def _functions(results: ReactionResults) -> dict[str, xr.Variable]:
    p = results.wanted.standard_pressure
    kinds = {
        "ln_K": ("ln_K", "1", f"natural logarithm of K at a standard pressure of {p:.6g} Pa"),
        "reaction_gibbs": (
            "gibbs",
            "J mol-1",
            f"Gibbs energy of reaction at a standard pressure of {p:.6g} Pa",
        ),
        "reaction_enthalpy": ("enthalpy", "J mol-1", "enthalpy of reaction"),
        "reaction_entropy": (
            "entropy",
            "J mol-1 K-1",
            f"entropy of reaction at a standard pressure of {p:.6g} Pa",
        ),
        "reaction_heat_capacity": ("heat_capacity", "J mol-1 K-1", "heat capacity of reaction"),
    }
    return {
        name: xr.Variable(
            ("reaction", "temperature"),
            np.stack([getattr(each.functions, field) for each in results.reactions]),
            {"units": units, "long_name": words},
        )
        for name, (field, units, words) in kinds.items()
    }


def _shortcuts(results: ReactionResults) -> dict[str, xr.Variable]:
    if not results.shortcuts:
        return {}
    kinds = {
        "shortcut_error_ln_K": ("ln_K", "1", "ln K of the shortcut less ln K"),
        "shortcut_error_per_cent": ("per_cent", "%", "error of the shortcut in per cent of K"),
        "shortcut_error_kelvin": ("kelvin", "K", "equivalent temperature error of the shortcut"),
    }
    return {
        name: xr.Variable(
            ("shortcut", "temperature"),
            np.stack([getattr(each.errors, field) for each in results.shortcuts]),
            {"units": units, "long_name": words},
        )
        for name, (field, units, words) in kinds.items()
    }


def _comparisons(results: ReactionResults, dataset: xr.Dataset) -> dict[str, xr.Variable]:
    if not results.comparisons or results.full is None:
        return {}
    dims, shape = dataset["status"].dims, dataset["status"].shape
    position = {str(name): j for j, name in enumerate(dataset["species"].values)}
    columns = [position[each.name] for each in results.full.conditions.species]

    def by_species(arrays: Iterable[Any]) -> Any:
        out = np.full((len(results.comparisons), *shape, len(position)), np.nan)
        for k, array in enumerate(arrays):
            out[k, ..., columns] = np.moveaxis(array.reshape(*shape, -1), -1, 0)
        return out

    compared = results.comparisons
    conversions = list(compared[0].conversion)
    neglected = list(dict.fromkeys(one.reaction.name for each in compared for one in each.neglected))
    found = {
        "alone_neglected": xr.Variable(
            ("alone", *dims),
            np.stack([_main_neglected(each, neglected).reshape(shape) for each in compared]),
            {
                "units": "1",
                "long_name": "reaction that changes most where it is added to those alone; -1 where none is missed",
                "flag_values": np.arange(-1, len(neglected), dtype=np.int16),
                "flag_meanings": " ".join(["none", *(name.replace(" ", "_") for name in neglected)]),
            },
        ),
        "alone_mole_fraction": xr.Variable(
            ("alone", *dims, "species"),
            by_species(each.composition.mole_fractions for each in compared),
            {"units": "1", "long_name": "mole fraction that these reactions alone reach"},
        ),
        "alone_error": xr.Variable(
            ("alone", *dims, "species"),
            by_species(each.error for each in compared),
            {
                "units": "1",
                "long_name": "mole fraction by these reactions alone less that of the whole mixture",
            },
        ),
        "alone_reason": xr.Variable(
            ("alone", *dims),
            np.stack([each.reason.reshape(shape) for each in compared]),
            {
                "units": "1",
                "long_name": "whether these reactions alone may be trusted, and why not",
                "flag_values": np.array([each.value for each in Reason], dtype=np.int8),
                "flag_meanings": " ".join(each.name.lower() for each in Reason),
            },
        ),
        "condensed_activity": xr.Variable(
            dims,
            results.full.activity.reshape(shape),
            {"units": "1", "long_name": "largest activity of a condensed phase over the gas"},
        ),
    }
    for kind, words in (
        ("conversion", "conversion that these reactions alone reach"),
        ("conversion_error", "conversion by these reactions alone less that of the whole mixture"),
    ):
        for name in conversions:
            variable = conversion_variable(kind, name)
            values = np.stack([getattr(each, kind)[name].reshape(shape) for each in compared])
            found[variable] = xr.Variable(
                ("alone", *dims), values, {"units": "1", "long_name": f"{words}, {name}"}
            )
    return found


def conversion_variable(kind: str, species: str) -> str:
    """Name of the variable that holds the conversion, or its error, that reactions alone reach."""
    return f"alone_{kind}_{species.replace('/', ' ')}"


def _main_neglected(comparison: Comparison, names: Sequence[str]) -> Any:
    """Number of the neglected reaction that matters most, where neglect is the reason; -1 elsewhere."""
    codes = np.full(comparison.reason.shape, -1, dtype=np.int16)
    if comparison.neglected:
        change = np.stack([each.change for each in comparison.neglected])
        numbers = np.array([names.index(each.reaction.name) for each in comparison.neglected], dtype=np.int16)
        lost = comparison.reason == Reason.NEGLECTED_REACTIONS
        codes[lost] = numbers[np.argmax(change, axis=0)][lost]
    return codes


def _names(dim: str, names: Sequence[str], long_name: str) -> xr.Variable:
    return xr.Variable((dim,), np.array(list(names), dtype=np.str_), {"long_name": long_name})


# --- tables --------------------------------------------------------------------------------------------------


def _constants_rows(results: ReactionResults) -> list[list[Any]]:
    p = results.wanted.standard_pressure
    head = [
        "reaction",
        "equation",
        "temperature [K]",
        f"ln K at {p:.6g} Pa",
        "Delta G [J/mol]",
        "Delta H [J/mol]",
        "Delta S [J/(mol K)]",
        "Delta Cp [J/(mol K)]",
    ]
    rows: list[list[Any]] = [head]
    for each in results.reactions:
        f = each.functions
        for i, T in enumerate(f.temperature.tolist()):
            values = (f.ln_K[i], f.gibbs[i], f.enthalpy[i], f.entropy[i], f.heat_capacity[i])
            rows.append([each.reaction.name, each.reaction.equation, T, *map(float, values)])
    return rows


def _measured_rows(results: ReactionResults) -> list[list[Any]]:
    rows: list[list[Any]] = [
        [
            "data set",
            "value",
            "temperature [K]",
            "ln K at 1 bar",
            "residual of ln K",
            "studentised residual",
            "leverage",
            "Cook's distance",
            "Delta H(298.15 K) by the third law [J/mol]",
        ]
    ]
    for each in results.measured:
        for i, residual in enumerate(each.second.residuals):
            rows.append(
                [
                    each.data.name,
                    residual.label,
                    residual.temperature,
                    float(each.data.ln_K[i]),
                    residual.residual,
                    residual.studentised,
                    residual.leverage,
                    residual.cooks_distance,
                    float(each.third.enthalpies[i]),
                ]
            )
    return rows


def _approach_rows(results: ReactionResults) -> list[list[Any]]:
    rows: list[list[Any]] = [
        [
            "sample",
            "reaction",
            "temperature [K]",
            "pressure [Pa]",
            "ln Q",
            "standard uncertainty of ln Q",
            "ln K",
            "Q/K",
            "temperature at which K = Q [K]",
            "approach [K]",
            "standard uncertainty of the approach [K]",
            "verdict",
        ]
    ]
    for each in results.approaches:
        sample = each.analysis
        rows.append(
            [
                sample.name,
                each.reaction.name,
                sample.temperature,
                sample.pressure,
                each.ln_Q,
                each.ln_Q_error,
                each.ln_K,
                each.ratio,
                each.equilibrium_temperature,
                each.approach,
                each.approach_error,
                each.verdict,
            ]
        )
    return rows


def _write_csv(path: Path, rows: Sequence[Sequence[Any]]) -> None:
    with path.open("w", encoding="utf-8", newline="") as stream:
        csv.writer(stream, lineterminator="\n").writerows(rows)


def _place(index: tuple[int, int, int], scenario: Scenario) -> str:
    from gibbsmin.outcome.summary import in_words

    feed = np.unravel_index(index[0], scenario.feed_shape) if scenario.feed_shape else ()
    return in_words([*(int(i) for i in feed), index[1], index[2]], scenario)


def _most_abundant(full: FullMixture) -> list[str]:
    largest = np.nanmax(full.composition.mole_fractions, axis=(0, 1, 2), initial=0.0)
    order = np.argsort(-largest, kind="stable")[:_MOST_KEYS]
    return [full.conditions.species[int(j)].name for j in order]
