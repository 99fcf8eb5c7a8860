"""A species as data: what it is, and the coefficients of its thermodynamic functions.

Objects here are frozen and were checked when read (`record_reader`); they hold no arrays and need no numpy,
so that a look-up stays cheap. `thermo.ThermoTable` turns a list of them into functions of temperature.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

from gibbsmin.errors import UnknownSpeciesError

__all__ = [
    "COEFFICIENT_COUNTS",
    "ROUNDING_GAP",
    "Critical",
    "Form",
    "FormationEnthalpyUncertainty",
    "Interval",
    "Species",
    "plain_words",
]

COEFFICIENT_COUNTS: dict[str, tuple[int, int]] = {"NASA-9": (7, 2), "NASA-7": (5, 2)}
"""Coefficients of the heat capacity and constants of integration, by model."""

ROUNDING_GAP = 0.01
"""K; a gap no wider than this between intervals or forms is one temperature rounded twice (tin: 505.11 and
505.118 K), and the lower interval reaches across it."""


@dataclass(frozen=True)
class Interval:
    """One temperature interval [K] of a form with its coefficients.

    model "NASA-9": coefficients a1 ... a7, b1, b2 of

        cp/R = a1 T^-2 + a2 T^-1 + a3 + a4 T + a5 T^2 + a6 T^3 + a7 T^4
        h/RT = -a1 T^-2 + a2 T^-1 ln T + a3 + a4 T/2 + a5 T^2/3 + a6 T^3/4 + a7 T^4/5 + b1/T
        s/R  = -a1 T^-2/2 - a2 T^-1 + a3 ln T + a4 T + a5 T^2/2 + a6 T^3/3 + a7 T^4/4 + b2

    model "NASA-7": a1 ... a5, b1, b2 of the same with a1 = a2 = 0 left out (cp/R = a1 + a2 T + ... + a5 T^4).

    Source: NASA/TP-2002-211556 (2002), eqs 1 to 3; the shorter form: NASA TM-4513 (1993).
    """

    lower: float
    upper: float
    coefficients: tuple[float, ...]
    model: str = "NASA-9"

    @property
    def nine(self) -> tuple[float, ...]:
        """The coefficients in the nine-coefficient form, whatever the model."""
        return self.coefficients if self.model == "NASA-9" else (0.0, 0.0, *self.coefficients)


@dataclass(frozen=True)
class Form:
    """A gas, a liquid or one crystal form, over the range [K] its data cover."""

    state: str  # "g", "l" or "cr" (IUPAC)
    label: str  # "alpha", "graphite", ...; "" when the state says all
    intervals: tuple[Interval, ...]
    source: str
    lower: float
    upper: float

    @property
    def description(self) -> str:
        """State and label in words: "gas", "liquid", "crystal", "crystal, alpha"."""
        word = {"g": "gas", "l": "liquid", "cr": "crystal"}[self.state]
        return f"{word}, {self.label}" if self.label else word


@dataclass(frozen=True)
class Critical:
    """Critical temperature [K], critical pressure [Pa] and acentric factor [1], None where not known."""

    temperature: float | None = None
    pressure: float | None = None
    acentric_factor: float | None = None
    source: str = ""


@dataclass(frozen=True)
class FormationEnthalpyUncertainty:
    """Half-width of the 95 % interval of an independently evaluated formation enthalpy at 298.15 K [J/mol].

    `value` is that evaluation's own formation enthalpy, which need not equal the record's.
    """

    half_width: float
    value: float
    source: str


@dataclass(frozen=True)
class Species:
    """One species of the data: a gas, or a pure condensed substance with its crystal forms and liquid.

    Energies are in J/mol, temperatures in K, pressures in Pa. `composition` maps element symbol to atoms and
    must not be changed; the charge is apart from it. `molar_mass` [kg/mol] follows from the composition and
    IUPAC's atomic weights. `gas_constant` and `reference_pressure` are those of the source of the
    coefficients: h(T) = h_RT * gas_constant * T, and entropies of a gas refer to `reference_pressure`.
    """

    name: str
    formula: str
    composition: Mapping[str, float] = field(hash=False)
    charge: int
    state: str  # "g" or "condensed"
    radical: bool
    aliases: tuple[str, ...]
    cas: str | None
    molar_mass: float
    formation_enthalpy: float
    gas_constant: float
    reference_pressure: float
    forms: tuple[Form, ...]
    source: str
    uncertainty: FormationEnthalpyUncertainty | None = None
    critical: Critical | None = None
    note: str = ""

    @property
    def lower(self) -> float:
        """Lowest temperature [K] of the data."""
        return self.forms[0].lower

    @property
    def upper(self) -> float:
        """Highest temperature [K] of the data."""
        return self.forms[-1].upper

    @property
    def formation_enthalpy_uncertainty(self) -> float | None:
        """Half-width [J/mol] of the 95 % interval of the formation enthalpy at 298.15 K, where known."""
        return None if self.uncertainty is None else self.uncertainty.half_width

    @property
    def critical_temperature(self) -> float | None:
        """Critical temperature [K], where known."""
        return None if self.critical is None else self.critical.temperature

    @property
    def critical_pressure(self) -> float | None:
        """Critical pressure [Pa], where known."""
        return None if self.critical is None else self.critical.pressure

    @property
    def acentric_factor(self) -> float | None:
        """Acentric factor [1], where known."""
        return None if self.critical is None else self.critical.acentric_factor

    def only(self, form: str) -> Species:
        """This condensed substance restricted to some of its forms, with a name that says so.

        Args:
            form: "l" (liquid), "cr" or "s" (all crystal forms), or the label of one form ("alpha").

        Raises:
            UnknownSpeciesError: there is no such form; the suggestions are the forms there are.
        """
        wanted = plain_words(form)
        state = {"s": "cr"}.get(form, form)
        chosen = tuple(
            each
            for each in self.forms
            if each.state == state or (each.label and plain_words(each.label) == wanted)
        )
        if not chosen or self.state == "g":
            raise UnknownSpeciesError(f"{self.formula}({form})", self.form_names)
        if chosen == self.forms:
            return self
        suffix = state if chosen[0].state == state else chosen[0].label
        return replace(self, name=f"{self.formula}({suffix})", forms=chosen, aliases=())

    @property
    def form_names(self) -> tuple[str, ...]:
        """Names by which single forms of a condensed substance are asked for: "S(alpha)", "S(l)"."""
        if self.state == "g":
            return ()
        return tuple(dict.fromkeys(f"{self.formula}({each.label or each.state})" for each in self.forms))


def plain_words(text: str) -> str:
    """A name without case, spaces, hyphens and underscores, as names are compared."""
    return text.casefold().translate(_NO_SEPARATORS)


_NO_SEPARATORS = str.maketrans("", "", " -_\t")
