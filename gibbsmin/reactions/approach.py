"""Approach to equilibrium from a measured gas analysis.

From the mole fractions y, temperature T and pressure p of a gas: the reaction quotient Q = product (y_i p / 1 bar)^nu_i,
Q/K, and the temperature T_eq at which K would equal Q. The approach is counted so that it is positive where the
reaction as written has not yet gone far enough: T - T_eq for a reaction that takes up heat, T_eq - T for one that gives
it off.

A dry analysis is completed with water that is known, or closed by the element balance against the feed. Uncertainties of
the analysis go through all of this by first-order propagation.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Literal

import numpy as np
from numpy.typing import NDArray

from gibbsmin.constants import STANDARD_PRESSURE
from gibbsmin.errors import Fault, MeasurementError
from gibbsmin.reactions.equation import Reaction
from gibbsmin.reactions.shortcut_error import equivalent_temperature
from gibbsmin.reactions.standard import ReactionFunctions

if TYPE_CHECKING:
    from gibbsmin.species import Species

Array = NDArray[np.float64]

SUM_TOLERANCE = 1.0
"""Per cent by which an analysis may miss 100 before it is called wrong; within, it is brought to 100."""

BALANCE_TOLERANCE = 0.03
"""Part by which an element may miss its balance against the feed. Plant analyses close to 1 or 2 per cent (common
practice, no source)."""

WATER = "H2O"
_STEP = 1e-4  # relative step of the numerical derivatives


@dataclass(frozen=True)
class Analysis:
    """One gas analysis.

    Attributes:
        name: of the sample.
        temperature: K. pressure: Pa.
        per_cent: species name -> mole per cent, in the wet or the dry gas.
        basis: "wet", or "dry": then without water.
        water: mole per cent of water in the wet gas, for a dry analysis where it is known; None to close it by the
            balance against `feed`.
        feed: species name -> amount fed [mol or any other unit of amount], or None.
        uncertainty: species name -> standard uncertainty of `per_cent` (of `water` for water), the same unit.
        temperature_uncertainty: K.
        place: for messages.
    """

    name: str
    temperature: float
    pressure: float
    per_cent: Mapping[str, float]
    basis: Literal["wet", "dry"] = "wet"
    water: float | None = None
    feed: Mapping[str, float] | None = None
    uncertainty: Mapping[str, float] = field(default_factory=dict)
    temperature_uncertainty: float = 0.0
    place: Fault = field(default_factory=lambda: Fault(""))


@dataclass(frozen=True)
class Approach:
    """One reaction at one analysis.

    Attributes:
        ln_Q, ln_K: at 1 bar. ln_Q_error: standard uncertainty.
        equilibrium_temperature: at which K equals Q [K]; NaN where none within the data does.
        approach: K, positive where the reaction falls short (see the module); approach_error: standard uncertainty.
    """

    analysis: Analysis
    reaction: Reaction
    ln_Q: float  # noqa: N815
    ln_Q_error: float  # noqa: N815
    ln_K: float  # noqa: N815
    equilibrium_temperature: float
    approach: float
    approach_error: float

    @property
    def ratio(self) -> float:
        """Q/K."""
        return float(np.exp(self.ln_Q - self.ln_K))

    @property
    def ratio_error(self) -> float:
        """Standard uncertainty of Q/K."""
        return self.ratio * self.ln_Q_error

    @property
    def verdict(self) -> str:
        if abs(self.ln_Q - self.ln_K) <= 2 * self.ln_Q_error:
            return "at equilibrium within its uncertainty"
        return "falls short of equilibrium" if self.ln_Q < self.ln_K else "has gone beyond equilibrium"


@dataclass(frozen=True)
class CompletedAnalysis:
    """An analysis made complete.

    Attributes:
        mole_fraction: species name -> wet mole fraction [1], summing to 1.
        imbalance: element -> (out - in)/in [1] of the balance against the feed; empty without a feed.
    """

    analysis: Analysis
    mole_fraction: Mapping[str, float]
    imbalance: Mapping[str, float]


def complete_analysis(
    analysis: Analysis,
    species: Mapping[str, Species],
    *,
    sum_tolerance: float = SUM_TOLERANCE,
    balance_tolerance: float = BALANCE_TOLERANCE,
) -> CompletedAnalysis:
    """Wet mole fractions of an analysis, checked.

    Args:
        analysis: what was measured.
        species: records of all species named in it, by the names used there.
        sum_tolerance: mole per cent by which the sum may miss 100.
        balance_tolerance: part by which an element may miss the feed.

    Raises:
        MeasurementError: impossible values, a sum far from 100, water that cannot be known, a broken balance; all
            faults at once.
    """
    faults = _faults(analysis, sum_tolerance)
    if faults:
        raise MeasurementError(faults)
    fractions = _wet_fractions(analysis, species, analysis.per_cent, analysis.water)
    if fractions is None:
        raise MeasurementError([_fault(analysis, _no_water(analysis))])
    imbalance = _imbalance(analysis, species, fractions)
    wrong = {element: miss for element, miss in imbalance.items() if abs(miss) > balance_tolerance}
    if wrong:
        missed = ", ".join(f"{element} {100 * miss:+.1f} %" for element, miss in wrong.items())
        raise MeasurementError(
            [
                _fault(
                    analysis,
                    f"the element balance against the feed is broken: {missed} (allowed: "
                    f"{100 * balance_tolerance:g} %); check the analysis, its basis and the feed",
                )
            ]
        )
    return CompletedAnalysis(analysis, fractions, imbalance)


def approaches(
    analyses: Sequence[Analysis],
    reactions: Sequence[Reaction],
    species: Mapping[str, Species],
    *,
    sum_tolerance: float = SUM_TOLERANCE,
    balance_tolerance: float = BALANCE_TOLERANCE,
) -> list[Approach]:
    """Q, Q/K and the temperature approach of every reaction at every analysis.

    Raises:
        MeasurementError: any analysis has a fault, or lacks a species of a reaction; all faults at once.
        TemperatureRangeError: a temperature outside the species data.
    """
    completed = checked_analyses(
        analyses, reactions, species, sum_tolerance=sum_tolerance, balance_tolerance=balance_tolerance
    )
    functions = [ReactionFunctions(each) for each in reactions]
    return [_approach(done, each, species) for done in completed for each in functions]


def checked_analyses(
    analyses: Sequence[Analysis],
    reactions: Sequence[Reaction],
    species: Mapping[str, Species],
    *,
    sum_tolerance: float = SUM_TOLERANCE,
    balance_tolerance: float = BALANCE_TOLERANCE,
) -> list[CompletedAnalysis]:
    """The analyses completed, every fault of any of them raised as one MeasurementError.

    Beyond `complete_analysis` it asks that each holds the gases of every reaction.
    """
    faults: list[Fault] = []
    completed: list[CompletedAnalysis] = []
    for each in analyses:
        try:
            completed.append(
                complete_analysis(
                    each, species, sum_tolerance=sum_tolerance, balance_tolerance=balance_tolerance
                )
            )
        except MeasurementError as error:
            faults += error.faults
            continue
        for reaction in reactions:
            lacking = [
                one.name
                for one in reaction.species
                if one.state == "g" and not _of(completed[-1], one.name, species) > 0
            ]
            if lacking:
                faults.append(
                    _fault(
                        each,
                        f"{', '.join(lacking)} is not in the analysis, so {reaction.name} has no quotient; give its "
                        "share, or the detection limit as an upper bound",
                    )
                )
    if faults:
        raise MeasurementError(faults)
    return completed


def _approach(
    completed: CompletedAnalysis, functions: ReactionFunctions, species: Mapping[str, Species]
) -> Approach:
    analysis, reaction = completed.analysis, functions.reaction
    T = analysis.temperature

    def ln_Q(per_cent: Mapping[str, float], water: float | None) -> float:  # noqa: N802
        fractions = _wet_fractions(analysis, species, per_cent, water)
        assert fractions is not None
        done = CompletedAnalysis(analysis, fractions, {})
        return sum(
            float(nu) * float(np.log(_of(done, one.name, species) * analysis.pressure / STANDARD_PRESSURE))
            for one, nu in zip(reaction.species, reaction.coefficients, strict=True)
            if one.state == "g"
        )

    quotient = ln_Q(analysis.per_cent, analysis.water)
    variance = _variance(analysis, ln_Q)
    ln_K = float(functions.ln_K(T)[0])
    equal = float(equivalent_temperature(functions, T, quotient)[0])
    endothermic = float(functions.enthalpy_R(T)[0]) > 0
    slope = float(functions.enthalpy_R(equal)[0]) / equal**2 if np.isfinite(equal) else np.nan
    error = np.hypot(np.sqrt(variance) / abs(slope), analysis.temperature_uncertainty)
    return Approach(
        analysis,
        reaction,
        quotient,
        float(np.sqrt(variance)),
        ln_K,
        equal,
        T - equal if endothermic else equal - T,
        float(error),
    )


def _variance(
    analysis: Analysis,
    ln_Q: Callable[[Mapping[str, float], float | None], float],
) -> float:
    """Variance of ln Q from the stated uncertainties, by central differences."""
    variance = 0.0
    for name, deviation in analysis.uncertainty.items():
        if name == WATER and analysis.basis == "dry":
            if analysis.water is None:
                continue
            step = max(analysis.water * _STEP, 1e-9)
            difference = ln_Q(analysis.per_cent, analysis.water + step) - ln_Q(
                analysis.per_cent, analysis.water - step
            )
        else:
            value = analysis.per_cent.get(name, 0.0)
            step = value * _STEP
            if step == 0.0:
                continue
            up, down = dict(analysis.per_cent), dict(analysis.per_cent)
            up[name], down[name] = value + step, value - step
            difference = ln_Q(up, analysis.water) - ln_Q(down, analysis.water)
        variance += (difference / (2 * step) * deviation) ** 2
    return variance


def _wet_fractions(
    analysis: Analysis, species: Mapping[str, Species], per_cent: Mapping[str, float], water: float | None
) -> dict[str, float] | None:
    """Mole fractions of the wet gas; None where the water cannot be found."""
    total = sum(per_cent.values())
    fractions = {name: value / total for name, value in per_cent.items()}
    if analysis.basis == "wet":
        return fractions
    if water is None:
        closed = _water_by_balance(analysis, species, fractions)
        if closed is None:
            return None
        share = closed
    else:
        share = water / 100
    return {**{name: x * (1 - share) for name, x in fractions.items()}, WATER: share}


def _water_by_balance(
    analysis: Analysis, species: Mapping[str, Species], dry: Mapping[str, float]
) -> float | None:
    """Mole fraction of water that closes the element balances best, in relative least squares."""
    if analysis.feed is None:
        return None
    fed = _atoms(analysis.feed, species)
    columns = [_atoms(dry, species), {"H": 2.0, "O": 1.0}]
    elements = [element for element, amount in fed.items() if amount > 0]
    matrix = np.array([[column.get(e, 0.0) / fed[e] for column in columns] for e in elements])
    if np.linalg.matrix_rank(matrix) < 2:
        return None
    (gas, water), *_ = np.linalg.lstsq(matrix, np.ones(len(elements)), rcond=None)
    if gas <= 0 or water < 0:
        return None
    return float(water / (gas + water))


def _imbalance(
    analysis: Analysis, species: Mapping[str, Species], wet: Mapping[str, float]
) -> dict[str, float]:
    if analysis.feed is None:
        return {}
    fed, left = _atoms(analysis.feed, species), _atoms(wet, species)
    elements = [element for element in {**fed, **left} if fed.get(element, 0) or left.get(element, 0)]
    known = [element for element in elements if fed.get(element, 0) > 0]
    ratio = np.array([left.get(element, 0.0) / fed[element] for element in known])
    # The amount of gas that fits the balances best, in relative least squares: min sum (n r - 1)^2.
    amount = float(ratio.sum() / (ratio @ ratio)) if ratio.any() else 0.0
    missed = {element: amount * r - 1 for element, r in zip(known, ratio.tolist(), strict=True)}
    return {**missed, **{element: float("inf") for element in elements if element not in known}}


def _atoms(amounts: Mapping[str, float], species: Mapping[str, Species]) -> dict[str, float]:
    total: dict[str, float] = {}
    for name, amount in amounts.items():
        for element, count in species[name].composition.items():
            total[element] = total.get(element, 0.0) + amount * count
    return total


def _of(completed: CompletedAnalysis, name: str, species: Mapping[str, Species]) -> float:
    """Mole fraction of a species by the name of its record, whatever it is called in the analysis."""
    return sum(x for own, x in completed.mole_fraction.items() if species[own].name == name)


def _faults(analysis: Analysis, sum_tolerance: float) -> list[Fault]:
    found: list[str] = []
    for quantity, value in (("temperature", analysis.temperature), ("pressure", analysis.pressure)):
        if not (np.isfinite(value) and value > 0):
            found.append(f"the {quantity} {value:g} is not above zero")
    values = dict(analysis.per_cent)
    for name, value in values.items():
        if not np.isfinite(value) or value < 0:
            found.append(f"{name}: {value:g} per cent is impossible")
    for name, value in analysis.uncertainty.items():
        if not np.isfinite(value) or value < 0:
            found.append(f"{name}: an uncertainty of {value:g} per cent is impossible")
        if name not in values and not (name == WATER and analysis.basis == "dry"):
            found.append(f"{name} has an uncertainty but no value")
    total = sum(values.values())
    if not values:
        found.append("it has no species")
    elif not abs(total - 100) <= sum_tolerance and not any("impossible" in each for each in found):
        found.append(
            f"the shares add up to {total:.6g} per cent, not to 100 within {sum_tolerance:g}; if a species was "
            "not measured, say which takes the rest"
        )
    if analysis.basis == "dry":
        if values.get(WATER):
            found.append("a dry analysis cannot hold water; call it wet, or leave water out")
        if analysis.water is not None and not 0 <= analysis.water < 100:
            found.append(f"water: {analysis.water:g} per cent is impossible")
        if analysis.water is None and analysis.feed is None:
            found.append("the water of a dry analysis must be known, or closed by the balance against a feed")
    elif analysis.water is not None:
        found.append("a wet analysis holds its water already; leave out the other figure")
    if analysis.feed is not None and not any(amount > 0 for amount in analysis.feed.values()):
        found.append("the feed is nothing")
    return [_fault(analysis, each) for each in found]


def _no_water(analysis: Analysis) -> str:
    return (
        "the water of this dry analysis cannot be closed by the balance: the feed and the dry gas leave no amount of "
        "water that fits; check both, or give the water"
    )


def _fault(analysis: Analysis, message: str) -> Fault:
    return Fault(
        f"{analysis.name}: {message}", analysis.place.file, analysis.place.line, analysis.place.column
    )
