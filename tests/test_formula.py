"""Formulas as people write them. Rules of writing: IUPAC, Nomenclature of Inorganic Chemistry (2005), IR-4."""

from __future__ import annotations

import itertools
import pickle

import pytest

from gibbsmin.errors import FormulaError
from gibbsmin.species.elements import ATOMIC_NUMBERS, ATOMIC_WEIGHTS, hill_formula, hill_order, molar_mass
from gibbsmin.species.formula import LONGEST_FORMULA, parse_formula, split_state


@pytest.mark.parametrize(
    ("text", "composition", "charge", "state"),
    [
        ("CH4", {"C": 1, "H": 4}, 0, None),
        (" H2O ", {"H": 2, "O": 1}, 0, None),
        ("CO", {"C": 1, "O": 1}, 0, None),
        ("Co", {"Co": 1}, 0, None),
        ("Fe0.947O", {"Fe": 0.947, "O": 1}, 0, None),
        ("Fe.947O", {"Fe": 0.947, "O": 1}, 0, None),
        ("(Fe0.947O)3", {"Fe": 2.841, "O": 3}, 0, None),
        ("Fe2(SO4)3", {"Fe": 2, "S": 3, "O": 12}, 0, None),
        ("[Co(NH3)6]Cl3", {"Co": 1, "N": 6, "H": 18, "Cl": 3}, 0, None),
        ("O(CH)2O", {"O": 2, "C": 2, "H": 2}, 0, None),
        ("CH3C(CH3)2CH3", {"C": 5, "H": 12}, 0, None),
        ("CH2Cl-COOH", {"C": 2, "H": 3, "Cl": 1, "O": 2}, 0, None),
        ("CaSO4*2H2O", {"Ca": 1, "S": 1, "O": 6, "H": 4}, 0, None),
        ("CaSO4\u00b70.5H2O", {"Ca": 1, "S": 1, "O": 4.5, "H": 1}, 0, None),
        ("NO+", {"N": 1, "O": 1}, 1, None),
        ("O2+", {"O": 2}, 1, None),
        ("Be++", {"Be": 1}, 2, None),
        ("SO4--", {"S": 1, "O": 4}, -2, None),
        ("SO4^2-", {"S": 1, "O": 4}, -2, None),
        ("Ca^+2", {"Ca": 1}, 2, None),
        ("H^+", {"H": 1}, 1, None),
        ("e-", {}, -1, None),
        ("D2O", {"D": 2, "O": 1}, 0, None),
        ("H2O(l)", {"H": 2, "O": 1}, 0, "l"),
        ("CaCO3 (cr)", {"Ca": 1, "C": 1, "O": 3}, 0, "cr"),
        ("C(gr)", {"C": 1}, 0, "gr"),
        ("Fe(cd)", {"Fe": 1}, 0, "cd"),
    ],
)
def test_formulas_that_are_read(
    text: str, composition: dict[str, float], charge: int, state: str | None
) -> None:
    formula = parse_formula(text)
    assert dict(formula.composition) == composition
    assert (formula.charge, formula.state) == (charge, state)


@pytest.mark.parametrize(
    ("text", "reason"),
    [
        ("", "it is empty"),
        ("   ", "it is empty"),
        ("ch4", "'c' does not belong"),
        ("XxH", "Xx is no element symbol"),
        ("2H2O", "the count 2 follows nothing"),
        ("H(2)", "the count 2 follows nothing"),
        ("H0", "a count of zero"),
        ("H2(", "'(' is never closed"),
        ("H2)", "')' closes no bracket"),
        ("(H2]", "']' closes no bracket"),
        ("()", "an empty bracket"),
        ("H2O(aq)", "'a' does not belong"),
        ("C2H2 (acetylene)", "' ' does not belong"),
        ("+", "no element in it"),
        ("CaSO4*", "no element in it"),
        ("Na^0+", "a charge of zero"),
        ("H" * (LONGEST_FORMULA + 1), f"longer than {LONGEST_FORMULA} characters"),
    ],
)
def test_formulas_that_are_refused_say_why(text: str, reason: str) -> None:
    with pytest.raises(FormulaError) as caught:
        parse_formula(text)
    assert reason in caught.value.reason
    assert str(caught.value).startswith("cannot read the formula")


def test_the_error_survives_pickling() -> None:
    with pytest.raises(FormulaError) as caught:
        parse_formula("Xx")
    copy = pickle.loads(pickle.dumps(caught.value))
    assert (copy.formula, copy.reason, str(copy)) == ("Xx", caught.value.reason, str(caught.value))


def test_state_symbols_are_told_from_brackets_of_atoms() -> None:
    assert split_state("H2O(l)") == ("H2O", "l")
    assert split_state("Fe(OH)2") == ("Fe(OH)2", None)
    assert split_state("(l)") == ("(l)", None)


def test_hill_order() -> None:
    # Hill, J. Am. Chem. Soc. 22 (1900) 478
    assert hill_order(["O", "H", "C", "Br"]) == ["C", "H", "Br", "O"]
    assert hill_order(["O", "H", "S"]) == ["H", "O", "S"]
    assert hill_formula({"O": 1, "H": 6, "C": 2}) == "C2H6O"
    assert hill_formula({"O": 1, "Fe": 0.947}) == "Fe0.947O"


@pytest.mark.parametrize(
    ("formula", "grams"),
    # IUPAC 2021 abridged weights H 1.0080, C 12.011, N 14.007, O 15.999, S 32.06, added by hand
    [("CH4", 16.043), ("H2O", 18.015), ("CO2", 44.009), ("NH3", 17.031), ("SO2", 64.058)],
)
def test_molar_masses(formula: str, grams: float) -> None:
    assert molar_mass(parse_formula(formula).composition) * 1000 == pytest.approx(grams, abs=1e-9)


def test_an_ion_lacks_or_carries_the_mass_of_its_electrons() -> None:
    # CODATA 2018: electron relative atomic mass 5.485 799 090 65e-4
    atom, cation = molar_mass({"Na": 1}), molar_mass({"Na": 1}, charge=1)
    assert (atom - cation) * 1000 == pytest.approx(5.48579909065e-4, rel=1e-9)
    assert molar_mass({}, charge=-1) * 1000 == pytest.approx(5.48579909065e-4, rel=1e-12)


def test_the_table_of_elements_is_complete() -> None:
    assert sorted(set(ATOMIC_NUMBERS.values())) == list(range(1, 119))
    assert len(ATOMIC_WEIGHTS) == 119  # deuterium beside hydrogen
    stable = [symbol for symbol in ATOMIC_WEIGHTS if ATOMIC_NUMBERS[symbol] <= 83 and symbol != "D"]
    inversions = [
        (first, second)
        for first, second in itertools.pairwise(stable)
        if ATOMIC_WEIGHTS[first] >= ATOMIC_WEIGHTS[second]
    ]
    # The three pairs of the periodic table whose weights fall as the number rises.
    assert inversions == [("Ar", "K"), ("Co", "Ni"), ("Te", "I")]
