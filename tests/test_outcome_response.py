"""The response of a composition to its potentials: against closed forms and finite differences."""

from __future__ import annotations

import numpy as np
import pytest

import gibbsmin
from gibbsmin.outcome.response import abundant_components, composition_response, in_components
from gibbsmin.species import ThermoTable

PRESSURE = 1e5


def table(names: list[str]) -> ThermoTable:
    library = gibbsmin.standard_library()
    return ThermoTable([library.find(name) for name in names])


def test_dissociating_steam_follows_the_closed_form() -> None:
    # 2 H2O = 2 H2 + O2 in nearly pure steam: x_O2 = (K/4)^(1/3) and so, by van 't Hoff's equation,
    # d ln x_O2 / d ln T = Delta H / (3 R T), at 300 K for amounts of some 1e-27.
    names = ["H2O", "H2", "O2"]
    T = 300.0
    gas = gibbsmin.equilibrium({"H2O": 1}, T, PRESSURE, species=names)
    functions = table(names)
    h = functions.enthalpy_RT([T])[0]
    response, total = composition_response(functions.formula_matrix, gas["amount"].values, -h)
    reaction = 2 * h[1] + h[2] - 2 * h[0]
    assert float(gas["mole_fraction"].sel(species="O2")) < 1e-25
    np.testing.assert_allclose(response[0, 1:] - total[0], reaction / 3, rtol=1e-12)


@pytest.mark.parametrize(
    ("feed", "T"), [({"CH4": 1, "H2O": 3}, 1050.0), ({"CH4": 1, "O2": 2}, 700.0), ({"H2O": 1}, 2500.0)]
)
def test_response_to_temperature_agrees_with_finite_differences(feed: dict[str, float], T: float) -> None:
    step = 1e-4
    temperatures = T * np.exp([-2 * step, -step, step, 2 * step])
    near = gibbsmin.equilibrium(feed, temperatures, PRESSURE)
    here = gibbsmin.equilibrium(feed, T, PRESSURE)
    functions = table(here["species"].values.tolist())
    response, total = composition_response(
        functions.formula_matrix, here["amount"].values, -functions.enthalpy_RT([T])
    )
    possible = here["amount"].values > 0  # smaller than the smallest double, or excluded by the balance
    logarithm = np.log(near["amount"].values[:, possible])
    difference = (8 * (logarithm[2] - logarithm[1]) - (logarithm[3] - logarithm[0])) / (12 * step)
    np.testing.assert_allclose(response[0, possible], difference, rtol=1e-7, atol=1e-7)
    gas = np.log(near["gas_amount"].values)
    np.testing.assert_allclose(
        total[0], (8 * (gas[2] - gas[1]) - (gas[3] - gas[0])) / (12 * step), rtol=1e-7, atol=1e-9
    )


def test_response_to_pressure_of_a_dissociation() -> None:
    # N2O4 = 2 NO2 with the degree of dissociation a: K/p = 4 a^2/(1 - a^2), hence
    # d a/d ln p = -a (1 - a^2)/2 (closed form)
    names = ["N2O4", "NO2"]
    gas = gibbsmin.equilibrium({"N2O4": 1}, 330.0, PRESSURE, species=names)
    a = 1 - float(gas["amount"].sel(species="N2O4"))
    response, _ = composition_response(table(names).formula_matrix, gas["amount"].values, np.ones(2))
    assert 0.1 < a < 0.9
    np.testing.assert_allclose(-(1 - a) * response[0, 0], -a * (1 - a**2) / 2, rtol=1e-11)


def test_elements_are_conserved_to_rounding() -> None:
    gas = gibbsmin.equilibrium({"CH4": 1, "O2": 1.2, "N2": 4}, [600.0, 1500.0, 3000.0], [1e3, 1e7])
    functions = table(gas["species"].values.tolist())
    n = gas["amount"].values.reshape(-1, gas.sizes["species"])
    h = np.repeat(functions.enthalpy_RT(gas["temperature"].values), 2, axis=0)
    response, total = composition_response(functions.formula_matrix, n, -h)
    change = (n * response) @ functions.formula_matrix.T
    # d ln n comes from terms of some 100 (h/RT), so 100 times the rounding of the element totals is due
    assert (np.abs(change) <= 100 * 1e-15 * (n @ functions.formula_matrix.T)).all()
    np.testing.assert_allclose((n * response).sum(axis=1), n.sum(axis=1) * total, rtol=1e-9, atol=1e-12)


def test_excluded_species_and_unsolved_points() -> None:
    A = np.array([[1.0, 0.0, 1.0, 0.0], [0.0, 1.0, 1.0, 2.0]])
    n = np.array([[1.0, 2.0, 0.5, 0.0], [np.nan] * 4, [1.0, 0.0, 0.0, 0.0]])
    response, total = composition_response(A, n, np.array([1.0, 2.0, 3.0, 4.0]))
    assert response[0, 3] == 0.0
    assert np.isfinite(response[0]).all()
    assert np.isnan(response[1]).all()
    assert np.isnan(total[1])
    # One species that cannot react: its amount is fixed.
    np.testing.assert_allclose(response[2], 0.0, atol=1e-15)


def test_components_are_the_most_abundant_independent_species() -> None:
    A = np.array([[2.0, 2.0, 0.0], [1.0, 0.0, 2.0]])  # H2O, H2, O2
    components = abundant_components(A, np.array([1.0, 1e-27, 5e-28]))
    assert components.tolist() == [0, 1]
    np.testing.assert_array_equal(in_components(A, components), [[1, 0, 2], [0, 1, -2]])
