"""Every shipped record: joins of its intervals and forms, formation enthalpy, integrals of the heat capacity.

Source of the records and of the printed formation enthalpies: NASA/TP-2002-211556 (2002). Exceptions are named with
their figures; they are flaws of the source, told in species_data/README.md.
"""

from __future__ import annotations

from functools import cache
from itertools import pairwise

import numpy as np
import pytest

from gibbsmin.species import Form, Interval, Species, ThermoTable, standard_library

LIBRARY = standard_library()
R = 8.314510  # J/(mol K), of the source
FUNCTIONS = ("gibbs_RT", "enthalpy_RT", "entropy_R", "heat_capacity_R")

# Steps of g/RT above 1e-4 within one form: (species, form, temperature): step
UNEVEN_JOINS = {
    ("NaCN(cd)", "II", 245.9): 5.995e-4,
    ("NaCN(cd)", "II", 286.3): 3.691e-4,
    ("NaCN(cd)", "II", 287.7): 1.782e-2,
    ("NaCN(cd)", "III", 290.4): 3.042e-3,
    ("NaCN(cd)", "III", 293.15): 3.067e-2,
    ("TiB2(cd)", "", 2300.0): 3.324e-4,
    ("AlOCl", "", 1000.0): 3.088e-4,
    ("Na2S(cd)", "", 700.0): 1.625e-4,
}
# Steps of g/RT above 3e-5 between two forms
UNEVEN_TRANSITIONS = {"NaCN(cd)": 1.319e-2, "H2O(cd)": 2.718e-4, "TiB2(cd)": 1.399e-4}
# Steps of cp/R above 0.01 within one form: lambda points, and two small flaws of the source
LAMBDA_POINTS = {"Fe3O4(cd)": (850.0, 13.106), "Fe2O3(cd)": (960.0, 6.691)}
UNEVEN_HEAT_CAPACITIES = {"Rb2SO4(cd)": (800.0, 0.0207), "Al4C3(cd)": (300.0, 0.0116)}


@cache
def all_species() -> tuple[Species, ...]:
    return tuple(LIBRARY.find(entry.name) for entry in LIBRARY.entries)


def single(interval: Interval) -> ThermoTable:
    """A table of one interval alone, so that both sides of a limit can be asked for."""
    form = Form("g", "", (interval,), "", interval.lower, interval.upper)
    pattern = LIBRARY.find("Ar")
    species = Species(**{**pattern.__dict__, "forms": (form,)})
    return ThermoTable([species], extrapolate=True)


def step(below: Interval, above: Interval, T: float) -> dict[str, float]:
    tables = single(below), single(above)
    return {
        name: float(getattr(tables[1], name)([T])[0, 0] - getattr(tables[0], name)([T])[0, 0])
        for name in FUNCTIONS
    }


@cache
def steps_within_forms() -> dict[tuple[str, str, float], dict[str, float]]:
    return {
        (species.name, form.label, below.upper): step(below, above, below.upper)
        for species in all_species()
        for form in species.forms
        for below, above in pairwise(form.intervals)
    }


def test_there_are_as_many_joins_as_the_source_has() -> None:
    # 3,766 intervals of 2,023 records make 1,743 joins; joining records at lambda points adds 10, and AlN none.
    assert len(steps_within_forms()) == 1743 + 10


def test_gibbs_energies_join_but_for_eight_named_places() -> None:
    uneven = {
        place: abs(found["gibbs_RT"])
        for place, found in steps_within_forms().items()
        if abs(found["gibbs_RT"]) > 1e-4
    }
    assert uneven == {place: pytest.approx(size, rel=1e-3) for place, size in UNEVEN_JOINS.items()}


def test_enthalpies_join_where_gibbs_energies_do() -> None:
    allowed = 1.5e-3  # the largest: NaCN 1.3e-3; next AlOCl 9e-4 and Cr 4e-4 at its lambda point
    assert max(abs(found["enthalpy_RT"]) for found in steps_within_forms().values()) < allowed
    others = [
        abs(found["enthalpy_RT"])
        for place, found in steps_within_forms().items()
        if place not in UNEVEN_JOINS and place[0] != "Cr(cd)"
    ]
    assert max(others) < 1e-4


def test_heat_capacities_join_but_at_lambda_points() -> None:
    uneven = {
        name: (T, abs(found["heat_capacity_R"]))
        for (name, _, T), found in steps_within_forms().items()
        if abs(found["heat_capacity_R"]) > 0.01
    }
    expected = {**LAMBDA_POINTS, **UNEVEN_HEAT_CAPACITIES}
    assert uneven == {name: (T, pytest.approx(size, rel=0.01)) for name, (T, size) in expected.items()}


def test_gibbs_energies_of_successive_forms_meet_at_the_transition() -> None:
    uneven = {}
    for species in all_species():
        table = ThermoTable([species])
        for below, above in pairwise(species.forms):
            if above.lower - below.upper > 1.0:
                continue  # Mg(OH)2: no data between
            # The transition is where form_index changes; both forms are evaluated there.
            low, high = min(below.upper, above.lower) - 0.5, max(below.upper, above.lower) + 0.5
            for _ in range(60):
                middle = (low + high) / 2
                if table.form_index([middle])[0, 0] < species.forms.index(above):
                    low = middle
                else:
                    high = middle
            size = abs(step(below.intervals[-1], above.intervals[0], low)["gibbs_RT"])
            if size > 3e-5:
                uneven[species.name] = size
    assert uneven == {name: pytest.approx(size, rel=2e-3) for name, size in UNEVEN_TRANSITIONS.items()}


def test_entropy_never_falls_at_a_transition_on_heating() -> None:
    """Second law: the form that takes over above a transition has the higher entropy, to the flaws of the joins."""
    falls = {}
    for species in all_species():
        for below, above in pairwise(species.forms):
            T = min(below.upper, above.upper)
            change = step(below.intervals[-1], above.intervals[0], T)["entropy_R"]
            if change < -1e-5:
                falls[species.name] = change
    assert falls == {}


def test_enthalpies_at_298_15_k_reproduce_the_printed_formation_enthalpies() -> None:
    """0.01 J/mol for gases; for condensed substances, whose coefficients cancel more, but four within 0.05 J/mol."""
    worst_gas, condensed = 0.0, {}
    for species in all_species():
        h = float(ThermoTable([species]).enthalpy_RT([298.15])[0, 0]) * species.gas_constant * 298.15
        error = abs(h - species.formation_enthalpy)
        if species.state == "g":
            worst_gas = max(worst_gas, error)
        elif error > 0.05:
            condensed[species.name] = error
    assert worst_gas < 0.01
    assert condensed == {
        "Hg(cd)": pytest.approx(0.533, abs=1e-3),
        "U3O8(cd)": pytest.approx(0.308, abs=1e-3),
        "FeOCl(cd)": pytest.approx(0.166, abs=1e-3),
        "H2O(cd)": pytest.approx(0.088, abs=1e-3),
    }


def test_elements_in_their_reference_states_have_no_formation_enthalpy() -> None:
    # The reference elements of the source ("Ref-Elm"); IUPAC: h = 0 at 298.15 K by definition.
    for name in (
        "H2",
        "O2",
        "N2",
        "F2",
        "Cl2",
        "Ar",
        "He",
        "C(gr)",
        "S(cd)",
        "Fe(cd)",
        "Br2(cd)",
        "I2(cd)",
        "Hg(cd)",
        "e-",
    ):
        assert LIBRARY.find(name).formation_enthalpy == 0.0


def test_enthalpy_and_entropy_are_the_integrals_of_the_heat_capacity() -> None:
    """Gauss-Legendre quadrature of cp and cp/T over every interval of every record, against the polynomials.

    The tolerance is 2e-11 of the largest single term, which is rounding: terms of lambda-point records reach 1e5.
    """
    nodes, weights = np.polynomial.legendre.leggauss(24)
    powers = np.arange(-2.0, 5.0)
    intervals = [i for species in all_species() for form in species.forms for i in form.intervals]
    assert len(intervals) == 3766
    for interval in intervals:
        table = single(interval)
        # Substituting x = ln T makes the integrands smooth over wide intervals.
        low, high = np.log(interval.lower), np.log(interval.upper)
        x = (low + high) / 2 + (high - low) / 2 * nodes
        w = weights * (high - low) / 2
        cp = table.heat_capacity_R(np.exp(x))[:, 0]
        ends = np.array([interval.lower, interval.upper])
        h = table.enthalpy_RT(ends)[:, 0] * ends
        s = table.entropy_R(ends)[:, 0]
        largest = np.abs(np.array(interval.nine[:7]) * ends[:, np.newaxis] ** powers).max()
        scale = max(1.0, largest, np.abs(s).max())
        assert abs(np.dot(w, cp * np.exp(x)) - (h[1] - h[0])) < 2e-11 * scale * interval.upper
        assert abs(np.dot(w, cp) - (s[1] - s[0])) < 2e-11 * scale


def test_heat_capacities_are_positive_and_entropies_rise() -> None:
    """Third law and stability: cp > 0 for every species over its range (checked at 40 temperatures each)."""
    negative = []
    for species in all_species():
        table = ThermoTable([species])
        T = np.geomspace(species.lower, species.upper, 40)
        cp = table.heat_capacity_R(T)[:, 0]
        if (cp[np.isfinite(cp)] <= 0).any():
            negative.append(species.name)
    assert negative == []


def test_monatomic_gases_have_the_heat_capacity_of_translation() -> None:
    # Statistical mechanics: cp/R = 5/2 without electronic excitation.
    names = ["He", "Ne", "Ar", "Kr", "Xe", "H", "e-"]
    table = ThermoTable([LIBRARY.find(name) for name in names])
    np.testing.assert_allclose(table.heat_capacity_R([298.15, 1000.0]), 2.5, rtol=1e-9)


@pytest.mark.parametrize("name", ["He", "Ne", "Ar", "Kr", "Xe"])
def test_entropies_of_noble_gases_follow_sackur_and_tetrode(name: str) -> None:
    """s/R = 5/2 + ln[(2 pi m k T / h^2)^(3/2) k T / p] at 1 bar (CODATA 2018 constants); to 1e-4, since the source
    used older constants and atomic weights."""
    species = LIBRARY.find(name)
    k, planck, avogadro = 1.380649e-23, 6.62607015e-34, 6.02214076e23
    T = 298.15
    mass = species.molar_mass / avogadro
    expected = 2.5 + np.log((2 * np.pi * mass * k * T / planck**2) ** 1.5 * k * T / 1e5)
    assert ThermoTable([species]).entropy_R([T])[0, 0] == pytest.approx(expected, abs=1e-4)
