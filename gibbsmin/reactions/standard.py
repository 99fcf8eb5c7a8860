"""K(T) and the standard functions of a reaction, from the species data.

    ln K = -sum nu_j g_j/RT      Delta H = sum nu_j h_j      Delta S = sum nu_j s_j      Delta Cp = sum nu_j cp_j

with gases at the standard pressure and pure condensed substances in the form that their data hold stable at T.
Energies come in J/mol with the gas constant of each species' own source, so they print as that source has them.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gibbsmin.constants import GAS_CONSTANT, STANDARD_PRESSURE
from gibbsmin.errors import ReactionError, TemperatureRangeError
from gibbsmin.reactions.constant_units import ConstantUnit
from gibbsmin.reactions.equation import Reaction

if TYPE_CHECKING:
    from gibbsmin.species import ThermoTable

Array = NDArray[np.float64]

_NO_HEAT = 50.0  # J/mol, below which a reaction is said to give off or take up no heat


@dataclass(frozen=True)
class Transition:
    """A change of form of a condensed substance inside the range: at `temperature` [K]."""

    species: str
    temperature: float
    below: str
    above: str

    def __str__(self) -> str:
        return f"{self.species} goes from {self.below} to {self.above} at {self.temperature:.6g} K"


@dataclass(frozen=True)
class Validity:
    """Temperatures [K] for which all species of a reaction have data, and who sets the limits."""

    lower: float
    upper: float
    lower_species: str
    upper_species: str
    transitions: tuple[Transition, ...]

    def __str__(self) -> str:
        words = f"{self.lower:g} K (data of {self.lower_species}) to {self.upper:g} K (data of {self.upper_species})"
        return "; ".join([words, *map(str, self.transitions)])


@dataclass(frozen=True)
class StandardFunctions:
    """Functions of one reaction at temperatures T, all of shape (nT,).

    Attributes:
        temperature: K.
        ln_K: natural logarithm of K [1] at the standard pressure.
        gibbs, enthalpy: J/mol; entropy, heat_capacity: J/(mol K), per mole of reaction as written.
        standard_pressure: Pa.
        extrapolated: where a species' data are used beyond their range.
    """

    reaction: Reaction
    temperature: Array
    ln_K: Array  # noqa: N815
    gibbs: Array
    enthalpy: Array
    entropy: Array
    heat_capacity: Array
    standard_pressure: float
    extrapolated: NDArray[np.bool_]

    def Kp(self, unit: str) -> Array:  # noqa: N802
        """Kp in a pressure or Kc in a concentration unit (see `constant_units`), (nT,)."""
        nu = self.reaction.gas_change
        standard = self.ln_K + float(nu) * np.log(self.standard_pressure / STANDARD_PRESSURE)
        chosen = ConstantUnit.of(unit, nu, reaction=self.reaction.name)
        return np.asarray(np.exp(chosen.from_standard(standard, nu, self.temperature)))


class ReactionFunctions:
    """ln K and its derivatives of one reaction as functions of temperature, at 1 bar.

    Args:
        reaction: the reaction.
        extrapolate: use the data beyond their range instead of raising TemperatureRangeError.
    """

    def __init__(self, reaction: Reaction, *, extrapolate: bool = False) -> None:
        self.reaction = reaction
        self.extrapolate = extrapolate
        self._nu = np.array([float(nu) for nu in reaction.coefficients])
        constants = {each.gas_constant for each in reaction.species}
        self.gas_constant = constants.pop() if len(constants) == 1 else GAS_CONSTANT
        """J/(mol K), of the source of the data where all species share one."""

    @cached_property
    def table(self) -> ThermoTable:
        from gibbsmin.species import ThermoTable

        return ThermoTable(self.reaction.species, extrapolate=self.extrapolate)

    def ln_K(self, T: ArrayLike) -> Array:  # noqa: N802
        """ln K [1] at 1 bar, (nT,). Raises TemperatureRangeError outside the data of any species."""
        T = self._checked(T)
        return np.asarray(-(self.table.gibbs_RT(T) @ self._nu))

    def enthalpy_R(self, T: ArrayLike) -> Array:  # noqa: N802
        """Delta H / R [K], (nT,); d ln K / dT is this over T^2."""
        T = self._checked(T)
        return np.asarray((self.table.enthalpy_RT(T) @ self._nu) * T)

    def entropy_R(self, T: ArrayLike) -> Array:  # noqa: N802
        """Delta S / R [1] at 1 bar, (nT,)."""
        return np.asarray(self.table.entropy_R(self._checked(T)) @ self._nu)

    def heat_capacity_R(self, T: ArrayLike) -> Array:  # noqa: N802
        """Delta Cp / R [1], (nT,)."""
        return np.asarray(self.table.heat_capacity_R(self._checked(T)) @ self._nu)

    @cached_property
    def validity(self) -> Validity:
        return validity(self.reaction)

    def _checked(self, T: ArrayLike) -> Array:
        T = np.atleast_1d(np.asarray(T, dtype=np.float64))
        if T.size and (not np.isfinite(T).all() or not (T > 0).all()):
            raise ReactionError(self.reaction.name, "temperatures must be finite and above 0 K")
        if not self.extrapolate and T.size:
            # ThermoTable raises for gases only; a condensed substance beyond its data is absent there.
            for each in self.reaction.species:
                for wrong in (float(T.min()), float(T.max())):
                    if not each.lower * (1 - 1e-9) <= wrong <= each.upper * (1 + 1e-9):
                        raise TemperatureRangeError(each.name, wrong, each.lower, each.upper)
        return T


def validity(reaction: Reaction) -> Validity:
    """Range of a reaction from the records of its species. Raises ReactionError where they do not overlap."""
    low = max(reaction.species, key=lambda each: each.lower)
    high = min(reaction.species, key=lambda each: each.upper)
    if low.lower >= high.upper:
        raise ReactionError(
            reaction.name,
            f"no temperature has data for all its species: {high.name} ends at {high.upper:g} K, "
            f"{low.name} begins at {low.lower:g} K",
        )
    transitions = [
        Transition(each.name, above.lower, below.description, above.description)
        for each in reaction.species
        for below, above in zip(each.forms, each.forms[1:], strict=False)
        if low.lower < above.lower < high.upper
    ]
    transitions.sort(key=lambda each: each.temperature)
    return Validity(low.lower, high.upper, low.name, high.name, tuple(transitions))


def standard_functions(
    reaction: Reaction,
    T: ArrayLike,
    *,
    standard_pressure: float = STANDARD_PRESSURE,
    extrapolate: bool = False,
) -> StandardFunctions:
    """ln K, Delta G, H, S and Cp of a reaction.

    Args:
        reaction: as `read_reaction` gives it.
        T: K, scalar or (nT,).
        standard_pressure: Pa; the standard state of gases. 1 bar unless the use says otherwise.
        extrapolate: use data beyond their range and flag where.

    Raises:
        TemperatureRangeError: T outside the data of a species without `extrapolate`.
        ReactionError: T or the standard pressure is not above zero.

    Example:
        >>> from gibbsmin.reactions import read_reaction, standard_functions
        >>> shift = standard_functions(read_reaction("CO + H2O = CO2 + H2"), 700.0)
        >>> round(float(shift.enthalpy[0]) / 1000, 1)
        -37.9
    """
    if not (np.isfinite(standard_pressure) and standard_pressure > 0):
        raise ReactionError(
            reaction.name, f"a standard pressure of {standard_pressure:g} Pa is not above zero"
        )
    functions = ReactionFunctions(reaction, extrapolate=extrapolate)
    T = functions._checked(T)
    table = functions.table
    nu_R = np.array(
        [
            float(nu) * each.gas_constant
            for nu, each in zip(reaction.coefficients, reaction.species, strict=True)
        ]
    )
    shift = float(reaction.gas_change) * np.log(STANDARD_PRESSURE / standard_pressure)
    entropy = table.entropy_R(T) @ nu_R + functions.gas_constant * shift
    enthalpy = (table.enthalpy_RT(T) @ nu_R) * T
    return StandardFunctions(
        reaction,
        T,
        functions.ln_K(T) + shift,
        (table.gibbs_RT(T) @ nu_R) * T - functions.gas_constant * T * shift,
        enthalpy,
        entropy,
        table.heat_capacity_R(T) @ nu_R,
        standard_pressure,
        np.asarray(table.extrapolated(T).any(axis=1)),
    )


def direction(reaction: Reaction, T: ArrayLike, *, extrapolate: bool = False) -> str:
    """Which way K goes with temperature over the range of T [K], and why, as one sentence.

    d ln K / dT = Delta H / (R T^2): the sign of Delta H decides (van 't Hoff).
    """
    functions = standard_functions(reaction, T, extrapolate=extrapolate)
    T, H = functions.temperature, functions.enthalpy
    low, high = int(np.argmin(T)), int(np.argmax(T))
    span = f"{H[low] / 1e3:.4g} kJ/mol at {T[low]:g} K" + (
        f", {H[high] / 1e3:.4g} at {T[high]:g} K" if high != low else ""
    )
    if (np.abs(H) < _NO_HEAT).all():
        return f"K hardly changes with temperature: the reaction has next to no heat (Delta H = {span})"
    if (H > 0).all():
        return f"K rises with temperature: the reaction takes up heat (Delta H = {span})"
    if (H < 0).all():
        return f"K falls with temperature: the reaction gives off heat (Delta H = {span})"
    order = np.argsort(T)
    turns = _sign_changes(T[order], H[order])
    return (
        f"K turns at {', '.join(f'{each:.0f}' for each in turns)} K, where Delta H changes sign "
        f"(Delta H = {span})"
    )


def _sign_changes(T: Array, values: Array) -> Sequence[float]:
    at = np.flatnonzero(np.sign(values[:-1]) * np.sign(values[1:]) < 0)
    return [float(T[i] - values[i] * (T[i + 1] - T[i]) / (values[i + 1] - values[i])) for i in at]
