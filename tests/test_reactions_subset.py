"""Reactions that run alone: conserved quantities, closed forms, given constants; and the comparison with the mixture."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
import xarray as xr
from scipy.optimize import brentq

import gibbsmin
from gibbsmin.errors import ConditionsError, ReactionError
from gibbsmin.reactions import (
    ConstantEnthalpy,
    Correlation,
    FullMixture,
    MapConditions,
    MixtureTolerance,
    Reaction,
    ReactionFunctions,
    Reason,
    Subset,
    compare,
    conserved_rows,
    read_reaction,
    solve_subset,
)
from gibbsmin.reactions.against_mixture import activities
from gibbsmin.reactions.exact import null_space, rank, weights_in
from gibbsmin.reactions.subset import Composition
from gibbsmin.species import ThermoTable, standard_library

LIBRARY = standard_library()
SHIFT = read_reaction("CO + H2O = CO2 + H2", name="shift")
REFORMING = read_reaction("CH4 + H2O = CO + 3 H2", name="reforming")
FIVE = "CH4 H2O CO CO2 H2"
T = np.linspace(600.0, 1300.0, 15)
LOG_P = np.log(np.array([1.0, 8.0, 40.0]))


def conditions(names: str, feed: dict[str, float | Fraction]) -> MapConditions:
    species = tuple(LIBRARY.find(name) for name in names.split())
    fed = tuple(LIBRARY.find(name) for name in feed)
    kind = object if any(isinstance(value, Fraction) for value in feed.values()) else np.float64
    amounts = np.array([list(feed.values())], dtype=kind)
    return MapConditions(species, ThermoTable(species).gibbs_RT(T), T, LOG_P, fed, amounts)


def log_quotient(found: Composition, where: MapConditions, reaction: Reaction) -> np.ndarray:
    """ln Q (1 bar) of a solved map, (F, nT, nP)."""
    names = [each.name for each in where.species]
    log_p = np.log(found.mole_fractions) + LOG_P[:, None]
    return sum(float(nu) * log_p[..., names.index(name)] for name, nu in reaction.stoichiometry.items())  # type: ignore[return-value]


@pytest.mark.parametrize(
    "equations",
    [
        ["CO + H2O = CO2 + H2"],
        ["CH4 + H2O = CO + 3 H2"],
        ["CH4 + H2O = CO + 3 H2", "CO + H2O = CO2 + H2"],
        ["CH4 + 2 H2O = CO2 + 4 H2", "1/2 N2 + 3/2 H2 = NH3"],
        ["2 CO + H2 = C2H2 + O2", "3 C2H2 = C6H6", "CO + 1/2 O2 = CO2"],
    ],
)
def test_conserved_rows_leave_exactly_the_reactions_free(equations: list[str]) -> None:
    names = "CH4 H2O CO CO2 H2 N2 NH3 C2H2 C6H6 O2 Ar"
    species = [LIBRARY.find(name) for name in names.split()]
    reactions = [read_reaction(text) for text in equations]
    rows = conserved_rows(species, reactions)
    stoichiometry = [each.over([s.name for s in species]) for each in reactions]
    assert len(rows) == rank(rows) == len(species) - len(reactions)
    assert all(value.denominator == 1 for row in rows for value in row)
    free = null_space(rows, len(species))
    assert all(weights_in(free, row) is not None for row in stoichiometry)
    assert all(weights_in(stoichiometry, row) is not None for row in free)


def test_shift_alone_is_the_root_of_its_quadratic() -> None:
    """(n_CO2 + x)(n_H2 + x) = K (n_CO - x)(n_H2O - x): pressure and inert gas do not matter."""
    where = conditions("CO H2O CO2 H2 N2 CH4", {"CO": 1.0, "H2O": 2.5, "CO2": 0.25, "N2": 3.0})
    found = solve_subset(where, Subset("shift", (SHIFT,)))
    assert (found.status == 0).all()
    K = np.exp(ReactionFunctions(SHIFT).ln_K(T))
    a, b, c = K - 1, -(K * 3.5 + 0.25), K * 2.5
    x = 2 * c / (-b + np.sqrt(b * b - 4 * a * c))
    expected = np.stack([1 - x, 2.5 - x, 0.25 + x, x, np.full_like(x, 3.0), 0 * x], axis=-1)
    np.testing.assert_allclose(
        found.amounts[0], np.repeat(expected[:, None], 3, axis=1), rtol=1e-10, atol=1e-14
    )


def test_reforming_alone_is_the_root_of_its_own_equation() -> None:
    """One unknown extent, found by bisection of ln Q - ln K: no minimisation involved."""
    where = conditions(FIVE + " N2", {"CH4": 1.0, "H2O": 3.0, "N2": 0.1})
    found = solve_subset(where, Subset("reforming", (REFORMING,)))
    ln_K = ReactionFunctions(REFORMING).ln_K(T)
    for i, j in ((0, 0), (7, 1), (14, 2)):

        def miss(x: float, i: int = i, j: int = j) -> float:
            n = {"CH4": 1 - x, "H2O": 3 - x, "CO": x, "H2": 3 * x}
            total = sum(n.values()) + 0.1
            parts = {name: np.log(n[name] / total) + LOG_P[j] for name in n}
            return float(parts["CO"] + 3 * parts["H2"] - parts["CH4"] - parts["H2O"] - ln_K[i])

        x = brentq(miss, 1e-12, 1 - 1e-12, xtol=1e-15, rtol=1e-14)
        assert found.amounts[0, i, j, 2] == pytest.approx(x, rel=1e-9)
        assert found.amounts[0, i, j, 3] == 0.0  # CO2 takes no part and is not fed


def test_a_spanning_subset_is_the_whole_mixture() -> None:
    feed = {"CH4": 1.0, "H2O": 3.0}
    where = conditions(FIVE, feed)
    found = solve_subset(where, Subset("both", (REFORMING, SHIFT)))
    full = gibbsmin.equilibrium(feed, T, np.exp(LOG_P) * 1e5, species=FIVE.split())
    np.testing.assert_allclose(found.amounts[0], full["amount"].values, rtol=1e-9, atol=1e-15)
    other = Subset(
        "others", (read_reaction("CH4 + 2 H2O = CO2 + 4 H2"), read_reaction("CH4 + CO2 = 2 CO + 2 H2"))
    )
    np.testing.assert_allclose(solve_subset(where, other).amounts, found.amounts, rtol=1e-9, atol=1e-15)


@pytest.mark.parametrize("both", [False, True])
def test_a_shortcut_s_constant_is_what_the_composition_has(both: bool) -> None:
    where = conditions(FIVE + " N2", {"CH4": 1.0, "H2O": 3.0, "H2": 0.1, "N2": 0.1})
    rough = ConstantEnthalpy.from_data(REFORMING, 298.15)
    shortcuts = {"reforming": rough}
    if both:
        shortcuts["shift"] = Correlation.of("ln K = 4577.8/T - 4.33", SHIFT)  # type: ignore[assignment]
    found = solve_subset(where, Subset("both", (REFORMING, SHIFT), shortcuts))
    assert (found.status == 0).all()
    expected = rough.ln_K(T)[:, None]
    np.testing.assert_allclose(
        log_quotient(found, where, REFORMING)[0], np.repeat(expected, 3, axis=1), rtol=1e-10, atol=1e-9
    )
    shift = shortcuts["shift"].ln_K(T) if both else ReactionFunctions(SHIFT).ln_K(T)
    np.testing.assert_allclose(
        log_quotient(found, where, SHIFT)[0], np.repeat(shift[:, None], 3, axis=1), rtol=1e-10, atol=1e-9
    )


def test_exact_fractions_and_decimals_agree() -> None:
    exact = conditions(FIVE, {"CH4": Fraction(1, 3), "H2O": Fraction(1, 3)})
    rounded = conditions(FIVE, {"CH4": 1.0, "H2O": 1.0})
    one = solve_subset(exact, Subset("reforming", (REFORMING,)))
    two = solve_subset(rounded, Subset("reforming", (REFORMING,)))
    np.testing.assert_allclose(one.amounts * 3, two.amounts, rtol=1e-12)


def test_liquid_water_is_fed_as_steam_and_unlisted_gas_is_carried_along() -> None:
    steam = solve_subset(conditions(FIVE, {"CH4": 1.0, "H2O": 3.0}), Subset("r", (REFORMING,)))
    liquid = solve_subset(conditions(FIVE, {"CH4": 1.0, "H2O(l)": 3.0}), Subset("r", (REFORMING,)))
    np.testing.assert_array_equal(steam.amounts, liquid.amounts)
    listed = solve_subset(
        conditions(FIVE + " N2", {"CH4": 1.0, "H2O": 3.0, "N2": 2.0}), Subset("r", (REFORMING,))
    )
    unlisted = solve_subset(conditions(FIVE, {"CH4": 1.0, "H2O": 3.0, "N2": 2.0}), Subset("r", (REFORMING,)))
    np.testing.assert_allclose(unlisted.amounts, listed.amounts[..., :5], rtol=1e-12)
    np.testing.assert_allclose(unlisted.gas, listed.gas, rtol=1e-12)


@pytest.mark.parametrize(
    ("equations", "feed", "words"),
    [
        (["CO + H2O = CO2 + H2", "2 CO + 2 H2O = 2 CO2 + 2 H2"], {"CO": 1}, "no new reaction beside"),
        (["CH4 + CO2 = CH3COOH"], {"CH4": 1}, "CH3COOH is not among the species of the mixture"),
        (["CO + H2O = CO2 + H2"], {"C(gr)": 1, "H2O": 1}, "no gas of the mixture has its composition"),
    ],
)
def test_subsets_that_cannot_be_solved(equations: list[str], feed: dict[str, float], words: str) -> None:
    with pytest.raises(ReactionError) as caught:
        solve_subset(
            conditions(FIVE, feed),  # type: ignore[arg-type]
            Subset("bad", tuple(read_reaction(text) for text in equations)),
        )
    assert words in str(caught.value)


def test_boudouard_alone_deposits_until_its_constant_is_met() -> None:
    """One extent x: n_CO = 1 - 2x, n_CO2 = x, carbon has activity 1. Root by bisection."""
    boudouard = read_reaction("2 CO = C(gr) + CO2", name="boudouard")
    where = conditions("CO CO2 N2", {"CO": 1.0, "N2": 0.2})
    found = solve_subset(where, Subset("b", (boudouard,)))
    assert (found.status == 0).all()
    ln_K = ReactionFunctions(boudouard).ln_K(T)
    for i, j in ((0, 0), (7, 1), (14, 2)):

        def miss(x: float, i: int = i, j: int = j) -> float:
            gas = 1.2 - x
            return float(np.log(x / gas) - 2 * np.log((1 - 2 * x) / gas) - LOG_P[j] - ln_K[i])

        x = brentq(miss, 1e-15, 0.5 - 1e-15, xtol=1e-16, rtol=1e-14)
        assert found.amounts[0, i, j, 1] == pytest.approx(x, rel=1e-9)
        assert found.gas[0, i, j] == pytest.approx(1.2 - x, rel=1e-10)


def test_carbon_fed_is_gasified_until_it_is_gone() -> None:
    gasification = read_reaction("C(gr) + H2O = CO + H2", name="gasification")
    where = conditions("CO H2O H2 CO2", {"C(gr)": 1.0, "H2O": 2.0})
    found = solve_subset(where, Subset("g", (gasification, SHIFT)))
    assert (found.status == 0).all()
    carbon = found.amounts[..., 0] + found.amounts[..., 3]
    assert (carbon <= 1 + 1e-12).all()
    left = carbon < 1 - 1e-9
    assert left.any()
    assert not left.all()
    ln_Q = np.log(found.mole_fractions) + LOG_P[:, None]
    excess = (
        ln_Q[..., 0] + ln_Q[..., 2] - ln_Q[..., 1] - ReactionFunctions(gasification).ln_K(T)[None, :, None]
    )
    np.testing.assert_allclose(excess[left], 0.0, atol=1e-9)
    assert (excess[~left] < 0).all()  # no carbon left to react further


# --- against the mixture -------------------------------------------------------------------------------------


def full_mixture(names: str, feed: dict[str, float], condensed: str = "") -> FullMixture:
    where = conditions(names, feed)  # type: ignore[arg-type]
    solved = gibbsmin.equilibrium(feed, T, np.exp(LOG_P) * 1e5, species=names.split())
    assert (solved["status"] == 0).all()
    amounts = solved["amount"].values[None]
    substances = [LIBRARY.find(name) for name in condensed.split()]
    activity, which = activities(
        where.species,
        [str(e) for e in solved["element"].values],
        solved["element_potential"].values[None],
        T,
        substances,
    )
    return FullMixture(
        where,
        Composition(amounts, amounts.sum(axis=-1), solved["status"].values[None]),
        activity,
        which,
        tuple(substances),
    )


def test_a_spanning_subset_is_trusted_everywhere() -> None:
    (one,) = compare(
        full_mixture(FIVE, {"CH4": 1.0, "H2O": 3.0}),
        Subset("both", (REFORMING, SHIFT)),
        key_species=["H2", "CO"],
        conversions=["CH4"],
    )
    assert one.trusted == 1.0
    assert abs(one.largest.value) < 1e-9
    assert one.temperatures_within().all()
    assert one.neglected == ()


def test_the_neglected_reaction_is_named_with_what_it_moves() -> None:
    full = full_mixture(FIVE, {"CH4": 1.0, "H2O": 3.0})
    (one,) = compare(
        full, Subset("reforming", (REFORMING,)), key_species=["H2", "CO"], known_reactions=[SHIFT]
    )
    assert one.share(Reason.NEGLECTED_REACTIONS) > 0.5
    assert one.share(Reason.K_ERROR) == 0.0
    assert [each.reaction.name for each in one.neglected] == ["shift"]
    # Added to the subset, the shift reaction makes it whole: its change is the whole error.
    np.testing.assert_allclose(
        one.neglected[0].change, np.abs(one.error[..., [4, 2]]).max(axis=-1) / 0.01, rtol=1e-7, atol=1e-9
    )
    assert one.neglected[0].largest.value == pytest.approx(-one.largest.value, rel=1e-7)
    # Without a name it is made up, and means the same.
    (same,) = compare(full, Subset("reforming", (REFORMING,)), key_species=["H2", "CO"])
    assert len(same.neglected) == 1
    assert "CO2" in same.neglected[0].reaction.stoichiometry
    np.testing.assert_allclose(same.neglected[0].change, one.neglected[0].change, rtol=1e-6, atol=1e-8)


def test_an_error_of_the_constant_is_told_from_a_neglected_reaction() -> None:
    full = full_mixture(FIVE, {"CH4": 1.0, "H2O": 3.0})
    exact, rough = compare(
        full,
        Subset("both", (REFORMING, SHIFT)),
        key_species=["H2"],
        conversions=["CH4"],
        shortcuts=[{"reforming": ConstantEnthalpy.from_data(REFORMING, 298.15)}],
    )
    assert (exact.K, rough.K) == ("exact", "constant enthalpy at 298.15 K")
    assert exact.trusted == 1.0
    assert rough.share(Reason.K_ERROR) > 0.5
    assert rough.share(Reason.NEGLECTED_REACTIONS) == 0.0
    beyond = (np.abs(rough.error[..., 4]) > 0.01) | (np.abs(rough.conversion_error["CH4"]) > 0.02)
    np.testing.assert_array_equal(rough.reason == Reason.K_ERROR, beyond)


def test_tolerance_decides() -> None:
    full = full_mixture(FIVE, {"CH4": 1.0, "H2O": 3.0})
    shares = [
        compare(full, Subset("r", (REFORMING,)), key_species=["H2"], tolerance=MixtureTolerance(limit, 1.0))[
            0
        ].trusted
        for limit in (1e-4, 0.02, 0.05, 0.5)
    ]
    assert shares == sorted(shares)
    assert shares[0] < shares[-1] == 1.0


def test_carbon_over_a_dry_gas_is_the_reason_and_its_activity_is_that_of_boudouard() -> None:
    """a_C = K p_CO^2/p_CO2 for 2 CO = C + CO2, which knows nothing of element potentials."""
    full = full_mixture(FIVE, {"CH4": 1.0, "H2O": 1.05}, "C(gr) H2O(cd)")
    boudouard = ReactionFunctions(read_reaction("2 CO = C(gr) + CO2"))
    log_p = np.log(full.composition.mole_fractions) + LOG_P[:, None]
    expected = np.exp(boudouard.ln_K(T)[None, :, None] + 2 * log_p[..., 2] - log_p[..., 3])
    assert (full.activity > 1).any()
    assert (full.activity < 1).any()
    # At 600 K and below 40 bar no liquid can form; graphite is the most active everywhere.
    np.testing.assert_allclose(full.activity, expected, rtol=1e-8)
    (one,) = compare(full, Subset("both", (REFORMING, SHIFT)), key_species=["H2"])
    np.testing.assert_array_equal(one.reason == Reason.CONDENSED_PHASE, full.activity > 1)
    assert one.share(Reason.WITHIN) == pytest.approx(float((full.activity <= 1).mean()))
    # What the deposit would change is told when the reaction is named.
    known = read_reaction("2 CO = C(gr) + CO2", name="deposit")
    (told,) = compare(full, Subset("both", (REFORMING, SHIFT)), key_species=["H2"], known_reactions=[known])
    assert told.neglected[0].reaction.name == "deposit"
    np.testing.assert_array_equal(told.neglected[0].change > 1e-6, full.activity > 1)


def test_absent_elements_and_absent_substances_have_no_activity() -> None:
    activity, which = activities(
        [LIBRARY.find("H2")],
        ["C", "H"],
        np.full((1, 1, 1, 2), np.nan),
        np.array([500.0]),
        [LIBRARY.find("C(gr)")],
    )
    assert activity.item() == 0.0
    assert which.item() == -1


@pytest.mark.parametrize("keys", [[], ["C2H6"]])
def test_key_species_must_be_in_the_mixture(keys: list[str]) -> None:
    with pytest.raises(ReactionError, match="key species"):
        compare(full_mixture(FIVE, {"CH4": 1.0, "H2O": 3.0}), Subset("r", (REFORMING,)), key_species=keys)


# --- in one call ---------------------------------------------------------------------------------------------


def test_comparison_in_one_call() -> None:
    """The same as by hand, from plain Python; a feed that varies is a leading axis."""
    feed = {"CH4": 1.0, "H2O": 3.0}
    exact, rough = gibbsmin.compare_reactions(
        feed,
        T,
        np.exp(LOG_P) * 1e5,
        [REFORMING],
        key_species=["H2", "CO"],
        conversions=["CH4"],
        shortcuts=[ConstantEnthalpy.from_data(REFORMING, 298.15)],
        species=FIVE.split(),
    )
    by_hand = compare(
        full_mixture(FIVE, feed, "C(gr)"),
        Subset("reforming", (REFORMING,)),
        key_species=["H2", "CO"],
        conversions=["CH4"],
        shortcuts=[{"reforming": ConstantEnthalpy.from_data(REFORMING, 298.15)}],
    )
    np.testing.assert_array_equal(exact.reason, by_hand[0].reason)
    np.testing.assert_array_equal(rough.reason, by_hand[1].reason)
    np.testing.assert_allclose(rough.error, by_hand[1].error, atol=1e-12)
    steam = xr.DataArray([1.0, 3.0], dims="steam")
    (found,) = gibbsmin.compare_reactions(
        {"CH4": 1.0, "H2O": steam},
        1000.0,
        1e5,
        ["CO + H2O = CO2 + H2"],
        key_species=["H2"],
        species=FIVE.split(),
    )
    assert found.reason.shape == (2, 1, 1)
    assert found.neglected[0].largest.quantity == "H2"


def test_scattered_points_are_no_map() -> None:
    together = xr.DataArray([900.0, 1000.0], dims="point")
    with pytest.raises(ConditionsError, match="on a grid of the two"):
        gibbsmin.compare_reactions(
            {"CH4": 1.0, "H2O": 3.0},
            together,
            xr.DataArray([1e5, 2e5], dims="point"),
            ["CO + H2O = CO2 + H2"],
            key_species=["H2"],
            species=FIVE.split(),
        )


def test_a_condensed_phase_that_is_there_is_a_reason() -> None:
    full = full_mixture(FIVE, {"CH4": 1.0, "H2O": 3.0}, "C(gr)")
    assert not full.condensing.any()
    formed = np.zeros(full.activity.shape, dtype=bool)
    formed[0, 3, 1] = True
    (one,) = compare(replace(full, formed=formed), Subset("both", (REFORMING, SHIFT)), key_species=["H2"])
    np.testing.assert_array_equal(one.reason == Reason.CONDENSED_PHASE, formed)
