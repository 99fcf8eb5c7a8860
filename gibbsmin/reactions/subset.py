"""The composition that some reactions alone would reach, by the same minimiser as the whole mixture.

A mixture in which only the reactions nu_1 ... nu_r run conserves every w with w.nu_i = 0, not only the elements. A
full-rank matrix of such w in place of the formula matrix makes the minimisation one of these reactions only: its null
space is exactly their stoichiometry. Rows are found in exact arithmetic; the element balances come first, because
they bound all amounts, which the minimiser needs.

A shortcut's K is brought in by shifting the potentials: with N (S, r) the stoichiometric numbers and e (r,) the errors
ln K_shortcut - ln K of its reactions, mu/RT + delta with N^T delta = -e gives exactly those constants. The shift of
least norm is taken; others differ by conserved quantities and change nothing.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from gibbsmin.decimal_amounts import element_amounts, element_amounts_of_fractions
from gibbsmin.errors import ReactionError
from gibbsmin.grid import solve_grid
from gibbsmin.reactions.equation import Reaction, element_rows
from gibbsmin.reactions.exact import Row, Span, null_space, whole
from gibbsmin.reactions.independence import split_redundant

if TYPE_CHECKING:
    from gibbsmin.reactions.shortcuts import Shortcut
    from gibbsmin.species import Species

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Subset:
    """Reactions that run while all others stand still.

    Attributes:
        name: for tables and figures.
        reactions: independent of each other.
        shortcuts: reaction name -> shortcut that stands for its K; reactions without one have their exact K.
    """

    name: str
    reactions: tuple[Reaction, ...]
    shortcuts: Mapping[str, Shortcut] | None = None


@dataclass(frozen=True)
class MapConditions:
    """Where a mixture is solved: F feeds of J species, at nT temperatures [K] and nP values of ln(p/1 bar)."""

    species: tuple[Species, ...]
    gibbs_RT: Array  # noqa: N815  (nT, S)
    temperature: Array
    log_pressure: Array
    feed_species: tuple[Species, ...]
    feed: NDArray[Any]  # (F, J) mol, doubles or Fractions


@dataclass(frozen=True)
class Composition:
    """Amounts and status of a solved map: amounts (F, nT, nP, S) [mol], gas (F, nT, nP) [mol], status."""

    amounts: Array
    gas: Array
    status: NDArray[np.int8]

    @property
    def mole_fractions(self) -> Array:
        """(F, nT, nP, S) [1]; NaN where not solved."""
        with np.errstate(invalid="ignore", divide="ignore"):
            return np.asarray(self.amounts / self.gas[..., None])


def conserved_rows(species: Sequence[Species], reactions: Sequence[Reaction]) -> list[Row]:
    """Whole-number rows, S - r of them and independent, that all reactions conserve; element balances first.

    Raises:
        ReactionError: the reactions depend on each other, or one has a species that is not in the list.
    """
    names = [each.name for each in species]
    _, redundant = split_redundant(reactions, names)
    for each in redundant:
        raise ReactionError(
            each.reaction.name,
            f"it is no new reaction beside {', '.join(each.weights)}; leave one of them out",
        )
    stoichiometry = [each.over(names) for each in reactions]
    rows: list[Row] = []
    span = Span()
    conserved = null_space(stoichiometry, len(names)) if stoichiometry else _identity(len(names))
    for row in [*element_rows(species)[1], *conserved]:
        if len(rows) == len(names) - len(reactions):
            break
        if span.add(row):
            rows.append(whole(row))
    return rows


def solve_subset(conditions: MapConditions, subset: Subset, *, threads: int | None = None) -> Composition:
    """The composition at which the reactions of the subset, and no others, are at equilibrium.

    What takes part: the species of the reactions and of the feed. Condensed species of the reactions are pure phases
    beside the gas. Feed species that are not in the mixture's list are carried along as inert gas.

    Raises:
        ReactionError: see `conserved_rows`; or a gas of a reaction is not in the mixture, or a condensed species of the
            feed neither reacts nor has a gas to stand for it.
    """
    phases = {one.name: one for each in subset.reactions for one in each.species if one.state != "g"}
    names = [each.name for each in conditions.species]
    for each in subset.reactions:
        each.over([*names, *phases])
    fed = fed_species(conditions, phases)
    reacting = {name for each in subset.reactions for name in each.stoichiometry}
    present = reacting.union(each.name for each in fed)
    listed = [j for j, name in enumerate(names) if name in present]
    unlisted = list(
        {each.name: each for each in fed if each.name not in names and each.state == "g"}.values()
    )
    part = [*(conditions.species[j] for j in listed), *unlisted, *phases.values()]
    rows = conserved_rows(part, subset.reactions)
    matrix = np.array([[float(value) for value in row] for row in rows])
    position = {each.name: k for k, each in enumerate(part)}
    composition = np.ascontiguousarray(matrix[:, [position[each.name] for each in fed]].T)
    exact = conditions.feed.dtype == object
    scaled, factor = (element_amounts_of_fractions if exact else element_amounts)(
        conditions.feed, composition
    )
    T = conditions.temperature
    gibbs = np.concatenate(
        [conditions.gibbs_RT[:, listed], np.zeros((len(T), len(unlisted))), _phase_gibbs(phases, T)], axis=1
    )
    gibbs = gibbs + _shift(T, subset, part)
    mask = np.array([each.state != "g" for each in part]) if phases else None
    solution = solve_grid(matrix, scaled, gibbs, T, conditions.log_pressure, condensed=mask, threads=threads)
    found = solution.amounts / factor[:, None, None, None]
    amounts = np.zeros((*found.shape[:-1], len(names)))
    amounts[..., listed] = found[..., : len(listed)]
    amounts[solution.status != 0] = np.nan
    gas = found[..., : len(part) - len(phases)].sum(axis=-1)
    return Composition(amounts, np.asarray(gas), solution.status)


def fed_species(
    conditions: MapConditions, phases: Mapping[str, Species] | None = None
) -> tuple[Species, ...]:
    """The feed's species; a condensed one that does not react is stood in for by the listed gas of its composition.

    So liquid water counts as steam. `phases` are the condensed species that react.

    Raises:
        ReactionError: there is no such gas.
    """
    found = []
    for each in conditions.feed_species:
        stand_in = each if each.name in (phases or {}) else gas_for(each, conditions.species)
        if stand_in is None:
            raise ReactionError(
                each.name,
                "the feed holds it, it takes no part in these reactions, and no gas of the mixture has its composition "
                "to stand for it",
            )
        found.append(stand_in)
    return tuple(found)


def gas_for(species: Species, mixture: Sequence[Species]) -> Species | None:
    """The species itself if it is a gas, else the gas molecule of the mixture that has its composition, or None."""
    if species.state == "g":
        return species
    if sum(species.composition.values()) == 1:  # graphite is not stood in for by carbon atoms
        return None
    same = (
        other
        for other in mixture
        if other.state == "g" and other.composition == species.composition and other.charge == species.charge
    )
    return next(same, None)


def _phase_gibbs(phases: Mapping[str, Species], T: Array) -> Array:
    """g/RT of pure phases (nT, K); +inf where they have no data."""
    from gibbsmin.species import ThermoTable

    if not phases:
        return np.zeros((len(T), 0))
    return ThermoTable(list(phases.values())).gibbs_RT(T)


def _shift(T: Array, subset: Subset, part: Sequence[Species]) -> Array:
    """Shift of g/RT (nT, s) that gives each reaction the K of its shortcut."""
    from gibbsmin.reactions.standard import ReactionFunctions

    if not subset.shortcuts:
        return np.zeros((len(T), len(part)))
    names = [each.name for each in part]
    N = np.array([[float(nu) for nu in each.over(names)] for each in subset.reactions]).T
    error = np.zeros((len(T), len(subset.reactions)))
    for k, each in enumerate(subset.reactions):
        shortcut = subset.shortcuts.get(each.name)
        if shortcut is not None:
            exact = ReactionFunctions(each, extrapolate=True).ln_K(T)
            error[:, k] = shortcut.ln_K(T) - exact
    return np.asarray(-(error @ np.linalg.pinv(N)))


def _identity(size: int) -> list[Row]:
    return [[Fraction(int(i == j)) for j in range(size)] for i in range(size)]
