"""Reactions as text: what is read, what is refused with which words; exact independence of sets of reactions."""

from __future__ import annotations

import pickle
import random
from fractions import Fraction

import pytest

from gibbsmin.errors import ReactionError
from gibbsmin.reactions import coverage, read_reaction
from gibbsmin.reactions.exact import Span, null_space, rank, weights_in, whole
from gibbsmin.species import Species, standard_library

LIBRARY = standard_library()


def species(names: str) -> list[Species]:
    return [LIBRARY.find(name) for name in names.split()]


@pytest.mark.parametrize(
    ("text", "equation", "gas_change"),
    [
        ("CH4 + H2O = CO + 3 H2", "CH4 + H2O = CO + 3 H2", 2),
        ("CH4+H2O=CO+3H2", "CH4 + H2O = CO + 3 H2", 2),
        ("1/2 N2 + 3/2 H2 <=> NH3", "1/2 N2 + 3/2 H2 = NH3", -1),
        ("\u00bd N2 + 1 1/2 H2 \u21cc NH3", "1/2 N2 + 3/2 H2 = NH3", -1),
        ("0.5 N2 + 1.5*H2 -> NH3", "1/2 N2 + 3/2 H2 = NH3", -1),
        ("C(gr) + CO2(g) = 2 CO(g)", "C(gr) + CO2 = 2 CO", 1),
        ("CaCO3(s) \u2192 CaO(s) + CO2", "CaCO3(cr) = CaO(cr) + CO2", 1),
        ("H2O(l) = H2O(g)", "H2O(l) = H2O", 1),
        ("NO+ + e- = NO", "NO+ + e- = NO", -1),
        ("CH2=CH2 + H2 = C2H6", "C2H4 + H2 = C2H6", -1),
        ("1,3-butadiene + H2 = 1-butene", "C4H6 (1,3-butadiene) + H2 = C4H8 (1-butene)", -1),
        ("methane + 2 O2 = carbon dioxide + 2 water", "CH4 + 2 O2 = CO2 + 2 H2O", 0),
        ("H2 + O2 + Ar = H2O2 + Ar", "H2 + O2 = H2O2", -1),  # a bystander cancels
        ("H2 + H2 + O2 = 2 H2O", "2 H2 + O2 = 2 H2O", -1),
        ("Fe0.947O(s) + CO = 0.947 Fe(cr) + CO2", "Fe0.947O(cr) + CO = 947/1000 Fe(cr) + CO2", 0),
    ],
)
def test_reads_what_chemists_write(text: str, equation: str, gas_change: float) -> None:
    reaction = read_reaction(text)
    assert reaction.equation == equation
    assert reaction.gas_change == Fraction(gas_change).limit_denominator(10)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("CH4 + H2O = CO + 2 H2", "H: 6 on the left, 4 on the right, so 2 missing on the right"),
        ("CH4 + H2O = CO + 2 H2", "balanced it would be CH4 + H2O = CO + 3 H2"),
        ("N2 + H2 = NH3", "N: 2 on the left, 1 on the right, so 1 missing on the right; H: 2 on the left"),
        ("N2 + H2 = NH3", "balanced it would be N2 + 3 H2 = 2 NH3"),
        ("1/2 O2 + CO = 3/2 CO2", "C: 1 on the left, 3/2 on the right, so 1/2 missing on the left"),
        ("NO+ = NO", "charge: 1 on the left, 0 on the right"),
        ("C + O2 = CO2", "C can mean the gas or a condensed phase; write C(g) or C(gr)"),
        ("CO + H2O", "no '=' between its two sides"),
        ("", "it is empty"),
        ("= H2", "nothing stands on the left side"),
        ("CH4 + = CO", "a term is missing beside a '+'"),
        ("H2 = 2", "no species follows the number '2'"),
        ("0 H2 + O2 = O2", "zero; leave the term out"),
        ("1/0 H2 = H2", "divides by zero"),
        ("H2 = H2", "nothing reacts"),
        ("CO + H2Oo = CO2", "no species is called 'H2Oo'"),
        ("H2O(aq) = H2O", "no species is called 'H2O(aq)'"),
        ("H2 = H2 = H2", "one '=' with blanks"),
        ("H2 +" * 400, "longer than"),
    ],
)
def test_refuses_with_place_and_remedy(text: str, words: str) -> None:
    with pytest.raises(ReactionError) as caught:
        read_reaction(text)
    assert words in str(caught.value)


def test_rational_algebra() -> None:
    third = Fraction(1, 3)
    rows = [[third, Fraction(1)], [Fraction(1), Fraction(3)]]
    assert rank(rows) == 1  # in doubles 3 * (1/3) need not be 1
    assert null_space(rows, 2) == [[Fraction(-3), Fraction(1)]]
    assert weights_in(rows[:1], [Fraction(2), Fraction(6)]) == [Fraction(6)]
    assert weights_in(rows[:1], [Fraction(2), Fraction(5)]) is None
    assert whole([Fraction(1, 2), Fraction(-3, 4), Fraction(0)]) == [2, -3, 0]


def test_number_and_basis_of_independent_reactions() -> None:
    found = coverage(species("CH4 H2O CO CO2 H2 N2 C2H6"))
    assert found.number == 3  # 7 species, rank 4
    assert rank([each.over([s.name for s in found.species]) for each in found.basis]) == 3
    assert found.inert == ("N2",)
    assert "3 independent reactions" in str(found)


def test_redundant_set_is_named_with_its_combination() -> None:
    shift = read_reaction("CO + H2O = CO2 + H2", name="shift")
    partial = read_reaction("CH4 + H2O = CO + 3 H2", name="reforming")
    total = read_reaction("CH4 + 2 H2O = CO2 + 4 H2", name="total")
    found = coverage(species("CH4 H2O CO CO2 H2 N2 C2H6"), [shift, partial, total])
    assert [str(each) for each in found.redundant] == ["total = shift + reforming"]
    assert not found.spans
    assert found.untouched == ("C2H6",)
    assert len(found.missing) == 1
    assert "C2H6" in found.missing[0].stoichiometry
    assert coverage(species("CH4 H2O CO CO2 H2"), [shift, partial]).spans


def test_half_of_a_reaction_is_the_same_reaction() -> None:
    one = read_reaction("N2 + 3 H2 = 2 NH3", name="whole")
    half = read_reaction("1/2 N2 + 3/2 H2 = NH3", name="half")
    assert str(coverage(species("N2 H2 NH3"), [one, half]).redundant[0]) == "half = 1/2 x whole"


def test_abundant_species_become_components() -> None:
    found = coverage(species("CH4 H2O CO CO2 H2"), abundance=[1e-9, 0.4, 1e-6, 0.1, 0.5])
    formed = {each.equation for each in found.basis}
    assert formed == {"4 H2 + CO2 = 2 H2O + CH4", "H2 + CO2 = H2O + CO"}


def test_species_outside_the_list_is_refused() -> None:
    with pytest.raises(ReactionError, match="CO2 is not among the species of the mixture"):
        coverage(species("CO H2O H2"), [read_reaction("CO + H2O = CO2 + H2")])


def test_span_grows_by_rank() -> None:
    """Vectors added one by one against the rank of all of them together, on seeded matrices of low rank."""
    rng = random.Random(7)
    for _ in range(60):
        size, count = rng.randint(1, 7), rng.randint(1, 9)
        rows = [[Fraction(rng.randint(-2, 2), rng.randint(1, 3)) for _ in range(size)] for _ in range(count)]
        rows += [[a + 2 * b for a, b in zip(rows[0], rows[-1], strict=True)]]
        span = Span()
        added = [span.add(row) for row in rows]
        for last in range(len(rows)):
            assert added[last] == (rank(rows[: last + 1]) > rank(rows[:last]))
        assert len(span) == rank(rows) == sum(added)


def test_errors_survive_pickling() -> None:
    with pytest.raises(ReactionError) as caught:
        read_reaction("CO + H2O = CO2")
    again = pickle.loads(pickle.dumps(caught.value))
    assert (str(again), again.reaction) == (str(caught.value), "CO + H2O = CO2")
