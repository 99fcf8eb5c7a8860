"""Ways to pose a gas problem in tests: from the package's data, or from Cantera's, which takes them from
elsewhere."""

from __future__ import annotations

import warnings
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np

from tests import reference


@dataclass(frozen=True)
class Case:
    """formula_matrix (E, S), element_amounts (E,) [mol], potentials (S,) = mu0/RT + ln(p/p0)."""

    formula_matrix: np.ndarray
    element_amounts: np.ndarray
    potentials: np.ndarray
    names: tuple[str, ...]
    elements: tuple[str, ...]

    def column(self, name: str) -> int:
        return self.names.index(name)

    def solve(self) -> Any:
        """Through the minimiser; asserts that it calls the point solved."""
        from gibbsmin import minimise
        from gibbsmin.minimiser import Status

        answer = minimise(self.formula_matrix, self.element_amounts, self.potentials)
        status = Status(int(answer.status[0]))
        assert status is Status.SOLVED, status
        return answer

    def judged(self) -> reference.Reference:
        return reference.solve(self.formula_matrix, self.element_amounts.tolist(), self.potentials)

    def mole_fractions(self) -> dict[str, float]:
        answer = self.solve()
        return dict(zip(self.names, np.exp(answer.log_mole_fractions[0]), strict=True))


def assert_agrees(
    answer: Any, judged: reference.Reference, *, least: float = 1e-200, tolerance: float = 1e-9
) -> None:
    """Every mole fraction above `least` within `tolerance` relative; excluded species exactly zero in
    both."""
    log_x = np.ravel(answer.log_mole_fractions)
    excluded = np.isneginf(log_x)
    np.testing.assert_array_equal(excluded, judged.excluded, err_msg="species that the balance excludes")
    assert not np.any(np.ravel(answer.amounts)[judged.excluded])
    compared = ~judged.excluded & (judged.log_mole_fractions > np.log(least))
    np.testing.assert_allclose(log_x[compared], judged.log_mole_fractions[compared], rtol=0, atol=tolerance)
    amounts = np.ravel(answer.amounts)
    present = compared & (judged.amounts > 1e-290)
    np.testing.assert_allclose(amounts[present], judged.amounts[present], rtol=tolerance)


def from_library(
    elements: Sequence[str], feed: Mapping[str, float], temperature: float, pressure: float, **choice: Any
) -> Case:
    """All gases of the elements that have data at temperature [K]; feed as element amounts [mol]; pressure
    [bar]."""
    from gibbsmin.species import standard_library

    species = [s for s in standard_library().gases(elements, **choice) if s.lower <= temperature <= s.upper]
    return from_species(species, feed, temperature, pressure)


def from_species(
    species: Sequence[Any], feed: Mapping[str, float], temperature: float, pressure: float
) -> Case:
    """The given species of the package; see from_library."""
    from gibbsmin.species import ThermoTable

    table = ThermoTable(species)
    potentials = table.gibbs_RT(np.array([temperature]))[0] + np.log(pressure)
    amounts = np.array([float(feed.get(element, 0.0)) for element in table.elements])
    return Case(
        np.asarray(table.formula_matrix),
        amounts,
        potentials,
        tuple(s.name for s in species),
        tuple(table.elements),
    )


@lru_cache(maxsize=1)
def cantera_species() -> dict[str, Any]:
    """The records of Cantera's nasa_gas.yaml by name."""
    import cantera as ct

    return {s.name: s for s in ct.Species.list_from_file("nasa_gas.yaml")}


def cantera_gas(names: Sequence[str]) -> Any:
    """An ideal gas of Cantera of records of nasa_gas.yaml."""
    import cantera as ct

    return ct.Solution(thermo="ideal-gas", species=[cantera_species()[name] for name in names])


def from_cantera(gas: Any, feed: Mapping[str, float], temperature: float, pressure: float) -> Case:
    """A problem with Cantera's own potentials; feed in mol of species, temperature [K], pressure [Pa].

    Element totals are summed as whole multiples where the feed is one, hence exactly stoichiometric feeds
    stay so.
    """
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # outside the data's range, which some cases ask for
        gas.TP = temperature, pressure
        potentials = np.array(gas.standard_gibbs_RT)
    elements = tuple(gas.element_names)
    A = np.array([[gas.n_atoms(k, e) for k in range(gas.n_species)] for e in elements], dtype=float)
    for row, element in enumerate(elements):
        if element == "E":
            A[row] = gas.charges  # atoms of "E" are electrons: the sign differs, the constraint does not
    amounts = sum(amount * A[:, gas.species_index(name)] for name, amount in feed.items())
    keep = np.asarray(A.any(axis=1))
    return Case(
        A[keep],
        np.asarray(amounts)[keep],
        potentials,
        tuple(gas.species_names),
        tuple(e for e, k in zip(elements, keep.tolist(), strict=True) if k),
    )
