"""A gas beside pure condensed phases inside Cantera, with what its solver for several phases needs to be asked fairly.

- Every pure phase has an explicit density. Without one Cantera takes 0.001 kg/m3, and the potential of the phase at
  any pressure but the reference one is meaningless. It is set so high that pressure does not matter, as in ours.
- Gases and phases of an element that is not fed are left out: they alone make its solvers fail.
- A phase enters in the form that its data give at the temperature, and not at all where they give none.
- The solver `gibbs` is asked first and `auto` second.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from gibbsmin.cantera_gas import LIMIT_BELONGS_BELOW, NoAnswerError, gist, make_species, silenced, symbols_for
from gibbsmin.constants import STANDARD_PRESSURE

if TYPE_CHECKING:
    from gibbsmin.species import Form, Species, ThermoTable

FloatArray = NDArray[np.float64]
Mask = NDArray[np.bool_]

DENSITY = 1e15  # kg/m3; at 1000 bar the pressure term of a phase of 0.1 kg/mol is then some 1e-12 RT
SOLVERS = ("gibbs", "auto")


class CanteraMixtures:
    """The gases and phases of `table` as Cantera mixtures, one for each set of species that is asked for.

    Args:
        table: gases first, then condensed phases.
        temperatures: lowest and highest temperature [K] to be asked for.

    Raises:
        NoAnswerError: Cantera refuses a species.
    """

    def __init__(self, table: ThermoTable, temperatures: tuple[float, float]) -> None:
        import cantera

        self._cantera: Any = cantera
        self._table = table
        self._temperatures = temperatures
        self._symbols = symbols_for(table.elements, cantera.Element.element_symbols)
        self._mixtures: dict[tuple[bytes, bytes], tuple[Any, list[Any]]] = {}
        self._species: list[Any] = []
        try:
            with silenced():
                for number, each in enumerate(table.species):
                    if each.state == "g":
                        self._species.append(
                            make_species(cantera, f"s{number}", each, self._symbols, temperatures)
                        )
        except cantera.CanteraError as error:
            raise NoAnswerError(f"Cantera refuses the species: {gist(error)}") from error

    def standard_gibbs_RT(self, temperature: float, taken: Mask) -> FloatArray:  # noqa: N802 - RT is the divisor
        """mu_0/RT at 1 bar of the species that are `taken` (S + K,), in their order."""
        _, phases = self._mixture(temperature, taken)
        values = []
        for phase in phases:
            phase.TP = temperature, STANDARD_PRESSURE
            values.append(np.asarray(phase.standard_gibbs_RT))
        return np.concatenate(values)

    def equilibrate(
        self, temperature: float, pressure: float, amounts: FloatArray, taken: Mask, solver: str
    ) -> FloatArray:
        """Amounts at equilibrium [mol], (S + K,), zero for what is not taken.

        Args:
            temperature: K. pressure: Pa. amounts: with the right element totals [mol], (S + K,).
            taken: which species there are, (S + K,); a gas at least.
            solver: "gibbs", "auto" or "vcs".

        Raises:
            NoAnswerError: no convergence, or an answer that is not finite.
        """
        mixture, _ = self._mixture(temperature, taken)
        try:
            with silenced():
                mixture.T, mixture.P = temperature, pressure
                mixture.species_moles = amounts[taken] / 1000.0  # Cantera counts in kmol
                mixture.equilibrate("TP", solver=solver)
                found = np.array(mixture.species_moles) * 1000.0
        except (self._cantera.CanteraError, ValueError) as error:
            raise NoAnswerError(f"Cantera's solver {solver} failed: {gist(error)}") from error
        if not np.isfinite(found).all():
            raise NoAnswerError(f"Cantera's solver {solver} returned values that are not finite")
        result = np.zeros(len(taken))
        result[taken] = found
        return result

    def _mixture(self, temperature: float, taken: Mask) -> tuple[Any, list[Any]]:
        forms = self._table.form_index(np.array([temperature]))[0]
        key = (taken.tobytes(), forms[taken].tobytes())
        if key not in self._mixtures:
            gases = [self._species[i] for i in np.flatnonzero(taken) if i < len(self._species)]
            try:
                with silenced():
                    gas = self._cantera.Solution(thermo="ideal-gas", kinetics=None, species=gases)
                    phases = [
                        self._pure_phase(int(i), self._table.species[i], int(forms[i]))
                        for i in np.flatnonzero(taken)
                        if i >= len(self._species)
                    ]
                    mixture = self._cantera.Mixture([(each, 0.0) for each in (gas, *phases)])
            except self._cantera.CanteraError as error:
                raise NoAnswerError(f"Cantera refuses the mixture: {gist(error)}") from error
            self._mixtures[key] = mixture, [gas, *phases]
        return self._mixtures[key]

    def _pure_phase(self, number: int, species: Species, form: int) -> Any:
        text = phase_text(f"s{number}", species, species.forms[form], self._symbols, self._temperatures)
        return self._cantera.Solution(yaml=text)


def phase_text(
    name: str, species: Species, form: Form, symbols: dict[str, str], temperatures: tuple[float, float]
) -> str:
    """A pure phase in Cantera's own format, with its density."""
    limits = [form.intervals[0].lower, *(each.lower * LIMIT_BELONGS_BELOW for each in form.intervals[1:])]
    limits[0] = min(limits[0], temperatures[0])
    limits.append(max(form.upper * LIMIT_BELONGS_BELOW, temperatures[1]))
    atoms = ", ".join(f"{symbols[element]}: {count!r}" for element, count in species.composition.items())
    data = ", ".join("[" + ", ".join(map(repr, each.nine)) + "]" for each in form.intervals)
    return f"""
phases:
- name: {name}
  thermo: fixed-stoichiometry
  species: [{name}]
  density: {DENSITY!r}
species:
- name: {name}
  composition: {{{atoms}}}
  thermo:
    model: NASA9
    reference-pressure: {STANDARD_PRESSURE!r}
    temperature-ranges: [{", ".join(map(repr, limits))}]
    data: [{data}]
"""
