"""One reaction, or a few, against the whole mixture: how far off, where it may be trusted, and why not elsewhere.

For each subset of reactions the composition it alone would reach is compared with the full minimisation, once with the
exact K and once with each shortcut. At every point outside the tolerance one reason is given:

- a condensed phase: by the potentials of the gas its activity is above 1 (a_k = exp(a_k.pi - g_k)), or it is there; the
  gas-only answers are then not the equilibrium at all, so this reason comes first;
- neglected reactions: already with the exact K the subset is outside;
- the error of K: with the exact K it would be within.

Which neglected reaction matters is found by adding each one to the subset and solving again.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from enum import IntEnum
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from gibbsmin.errors import ReactionError
from gibbsmin.reactions.equation import Reaction
from gibbsmin.reactions.independence import coverage, split_redundant
from gibbsmin.reactions.subset import Composition, MapConditions, Subset, gas_for, solve_subset

if TYPE_CHECKING:
    from gibbsmin.reactions.shortcuts import Shortcut
    from gibbsmin.species import Species

Array = NDArray[np.float64]
Booleans = NDArray[np.bool_]

MOST_CANDIDATES = 8
"""Neglected reactions that are tried; they come in the order of how abundant the species they form is."""

SEPARATOR = " + "
"""Between the names of shortcuts that are used together."""

TRACE = 0.1
"""Species that nowhere reach this share of the tolerance cannot be the reason and are not tried."""


class Reason(IntEnum):
    """Why a point of the map can or cannot be trusted."""

    WITHIN = 0
    K_ERROR = 1
    NEGLECTED_REACTIONS = 2
    CONDENSED_PHASE = 3
    NOT_SOLVED = 4

    @property
    def words(self) -> str:
        return {
            Reason.WITHIN: "within tolerance",
            Reason.K_ERROR: "error of K",
            Reason.NEGLECTED_REACTIONS: "neglected reactions",
            Reason.CONDENSED_PHASE: "condensed phase",
            Reason.NOT_SOLVED: "not solved",
        }[self]


@dataclass(frozen=True)
class MixtureTolerance:
    """Largest accepted difference from the full minimisation: of mole fractions, and of conversions [1]."""

    mole_fraction: float = 0.01
    conversion: float = 0.02

    def __post_init__(self) -> None:
        if not (0 < self.mole_fraction < np.inf and 0 < self.conversion < np.inf):
            raise ReactionError("tolerance", "the accepted differences must be above zero")

    def __str__(self) -> str:
        return f"{self.mole_fraction:g} in mole fractions, {self.conversion:g} in conversions"


@dataclass(frozen=True)
class FullMixture:
    """The full minimisation to compare with.

    Attributes:
        conditions: species, feeds, temperatures and pressures of the map.
        composition: its solution.
        activity: (F, nT, nP) largest activity of any condensed phase that was looked at, 0 where none was.
        most_active: (F, nT, nP) its number in `condensed`, -1 where there is none.
        condensed: the condensed substances looked at.
        formed: (F, nT, nP) whether a condensed phase is there, in a mixture that lets them form; else None.
    """

    conditions: MapConditions
    composition: Composition
    activity: Array
    most_active: NDArray[np.intp]
    condensed: tuple[Species, ...] = ()
    formed: Booleans | None = None

    @property
    def condensing(self) -> Booleans:
        """(F, nT, nP) where a condensed phase is there, or would form if it were let."""
        beyond = self.activity > 1
        return beyond if self.formed is None else beyond | self.formed


@dataclass(frozen=True)
class Largest:
    """The largest difference over a map, measured by the tolerance of the quantity that differs.

    Attributes:
        quantity: a species' name, for its mole fraction, or "conversion of ...".
        value: the difference itself [1], with its sign. ratio: its size over the tolerance.
        place: index of the point (feed, temperature, pressure).
    """

    quantity: str
    value: float
    ratio: float
    place: tuple[int, int, int]

    def __str__(self) -> str:
        return f"{self.quantity} {self.value:+.3f}" if abs(self.value) >= 0.0005 else "below 0.001"


@dataclass(frozen=True)
class Neglected:
    """A reaction that the subset leaves out, and what adding it alone would change.

    Attributes:
        largest: the largest change over the map.
        change: (F, nT, nP) largest change at each point, over its tolerance.
    """

    reaction: Reaction
    largest: Largest
    change: Array


@dataclass(frozen=True)
class Comparison:
    """One subset with one choice of K, against the full mixture.

    Attributes:
        subset: its name. K: "exact" or the names of the shortcuts.
        composition: what the subset alone reaches.
        error: (F, nT, nP, S) mole fraction less that of the full mixture.
        conversion, conversion_error: species -> (F, nT, nP), of the species whose conversion is wanted.
        reason: (F, nT, nP) codes of `Reason`.
        largest: the largest error of a key species or a conversion.
        neglected: reactions left out, those that matter most first.
    """

    subset: Subset
    K: str
    composition: Composition
    error: Array
    conversion: Mapping[str, Array]
    conversion_error: Mapping[str, Array]
    reason: NDArray[np.int8]
    largest: Largest
    neglected: tuple[Neglected, ...]

    @property
    def trusted(self) -> float:
        """Part of the map that is within the tolerance."""
        return float((self.reason == Reason.WITHIN).mean())

    def share(self, reason: Reason) -> float:
        """Part of the map with this reason."""
        return float((self.reason == reason).mean())

    def temperatures_within(self) -> Booleans:
        """(nT,) temperatures at which every feed and pressure is within the tolerance."""
        return np.asarray((self.reason == Reason.WITHIN).all(axis=(0, 2)))


def activities(
    species: Sequence[Species],
    elements: Sequence[str],
    element_potentials: Array,
    temperature: Array,
    condensed: Sequence[Species],
) -> tuple[Array, NDArray[np.intp]]:
    """Largest activity of the condensed substances over a gas, and which one has it.

    Args:
        elements: rows of `element_potentials`. element_potentials: (F, nT, nP, E), of the gas mixture.

    Returns:
        activity (F, nT, nP), 0 where no substance can form, and the number of the substance, -1 for none.
    """
    from gibbsmin.species import ThermoTable

    shape = element_potentials.shape[:-1]
    if not condensed:
        return np.zeros(shape), np.full(shape, -1, dtype=np.intp)
    g = ThermoTable(condensed).gibbs_RT(temperature)  # +inf where it has no data
    order = list(elements)
    atoms = np.zeros((len(order), len(condensed)))
    for k, each in enumerate(condensed):
        for symbol, count in each.composition.items():
            atoms[order.index(symbol), k] = count
    absent = np.isnan(element_potentials)
    log_a = np.nan_to_num(element_potentials) @ atoms - g[None, :, None, :]
    log_a[(absent.astype(np.float64) @ atoms) > 0] = -np.inf
    which = np.argmax(log_a, axis=-1)
    largest = np.take_along_axis(log_a, which[..., None], axis=-1)[..., 0]
    with np.errstate(over="ignore"):
        activity = np.exp(largest)
    return activity, np.where(activity > 0, which, -1)


def compare(
    full: FullMixture,
    subset: Subset,
    *,
    key_species: Sequence[str],
    conversions: Sequence[str] = (),
    shortcuts: Sequence[Mapping[str, Shortcut]] = (),
    tolerance: MixtureTolerance = MixtureTolerance(),
    known_reactions: Sequence[Reaction] = (),
    threads: int | None = None,
) -> list[Comparison]:
    """Compare a subset with the full mixture: with the exact K, and with each choice of shortcuts.

    Args:
        full: the full minimisation.
        subset: the reactions that are taken to run alone.
        key_species: whose mole fractions count, names of species of the mixture.
        conversions: feed species whose conversions count as well.
        shortcuts: choices of shortcuts, each a mapping of reaction name to shortcut.
        tolerance: what is accepted.
        known_reactions: neglected ones that have a name; tried before those that are made up.
        threads: number of threads.

    Raises:
        ReactionError: reactions that depend on each other, condensed species, species that are not in the mixture.
    """
    names = [each.name for each in full.conditions.species]
    unknown = [each for each in key_species if each not in names]
    if unknown or not key_species:
        raise ReactionError(
            subset.name, f"key species {', '.join(unknown) or 'are missing'}: name gases of the mixture"
        )
    judged = _Judged(full, tuple(key_species), tuple(conversions), tolerance)
    exact = solve_subset(full.conditions, subset, threads=threads)
    neglected = _neglected(judged, subset, exact, known_reactions, threads)
    choices = [("exact", exact)]
    for choice in shortcuts:
        label = SEPARATOR.join(dict.fromkeys(each.name for each in choice.values()))
        approximate = Subset(subset.name, subset.reactions, choice)
        choices.append((label, solve_subset(full.conditions, approximate, threads=threads)))
    beyond_with_exact = np.asarray((np.abs(judged.differences(exact, full.composition)) > 1).any(axis=-1))
    return [
        _comparison(judged, subset, label, found, beyond_with_exact, neglected) for label, found in choices
    ]


def conversion_of(conditions: MapConditions, composition: Composition, species: str) -> Array:
    """Conversion of a feed species [1], (F, nT, nP); NaN for feeds without it."""
    fed = np.zeros(len(conditions.feed))
    for j, each in enumerate(conditions.feed_species):
        gas = gas_for(each, conditions.species)
        if gas is not None and gas.name == species:
            fed += conditions.feed[:, j].astype(np.float64)
    names = [each.name for each in conditions.species]
    left = composition.amounts[..., names.index(species)]
    fed_everywhere = fed[:, None, None]
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(fed_everywhere > 0, 1 - left / fed_everywhere, np.nan)


# --- inner ---------------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class _Judged:
    """The quantities by which compositions are judged: mole fractions of key species, and conversions."""

    full: FullMixture
    key_species: tuple[str, ...]
    conversions: tuple[str, ...]
    tolerance: MixtureTolerance

    @property
    def columns(self) -> list[int]:
        names = [each.name for each in self.full.conditions.species]
        return [names.index(each) for each in self.key_species]

    def differences(self, one: Composition, other: Composition) -> Array:
        """One less other of every quantity over its tolerance, (F, nT, nP, quantities)."""
        fractions = one.mole_fractions[..., self.columns] - other.mole_fractions[..., self.columns]
        parts = [fractions / self.tolerance.mole_fraction]
        for name in self.conversions:
            off = conversion_of(self.full.conditions, one, name) - conversion_of(
                self.full.conditions, other, name
            )
            parts.append(np.nan_to_num(off)[..., None] / self.tolerance.conversion)
        return np.concatenate(parts, axis=-1)

    def largest(self, differences: Array) -> Largest:
        """The largest of these differences; unsolved points count as none."""
        size = np.nan_to_num(np.abs(differences))
        place = np.unravel_index(int(np.argmax(size)), size.shape)
        which = int(place[3])
        fraction = which < len(self.key_species)
        scale = self.tolerance.mole_fraction if fraction else self.tolerance.conversion
        quantity = (
            self.key_species[which]
            if fraction
            else f"conversion of {self.conversions[which - len(self.key_species)]}"
        )
        value = float(np.nan_to_num(differences[place])) * scale
        return Largest(quantity, value, float(size[place]), (int(place[0]), int(place[1]), int(place[2])))


def _comparison(
    judged: _Judged,
    subset: Subset,
    label: str,
    found: Composition,
    beyond_with_exact: Booleans,
    neglected: tuple[Neglected, ...],
) -> Comparison:
    full = judged.full
    differences = judged.differences(found, full.composition)
    beyond = (np.abs(differences) > 1).any(axis=-1)
    solved = (found.status == 0) & (full.composition.status == 0)
    reason = np.full(solved.shape, Reason.WITHIN, dtype=np.int8)
    reason[beyond] = Reason.K_ERROR
    reason[beyond & beyond_with_exact] = Reason.NEGLECTED_REACTIONS
    reason[full.condensing] = Reason.CONDENSED_PHASE
    reason[~solved] = Reason.NOT_SOLVED
    converted = {name: conversion_of(full.conditions, found, name) for name in judged.conversions}
    return Comparison(
        subset=subset,
        K=label,
        composition=found,
        error=found.mole_fractions - full.composition.mole_fractions,
        conversion=converted,
        conversion_error={
            name: value - conversion_of(full.conditions, full.composition, name)
            for name, value in converted.items()
        },
        reason=reason,
        largest=judged.largest(differences),
        neglected=neglected,
    )


def _neglected(
    judged: _Judged,
    subset: Subset,
    exact: Composition,
    known: Sequence[Reaction],
    threads: int | None,
) -> tuple[Neglected, ...]:
    conditions = judged.full.conditions
    found = []
    for reaction in _candidates(judged.full, subset, judged.tolerance, known):
        both = solve_subset(conditions, Subset(subset.name, (*subset.reactions, reaction)), threads=threads)
        change = judged.differences(both, exact)
        found.append(
            Neglected(
                reaction, judged.largest(change), np.asarray(np.nan_to_num(np.abs(change)).max(axis=-1))
            )
        )
    return tuple(sorted(found, key=lambda each: -each.largest.ratio))


def _candidates(
    full: FullMixture, subset: Subset, tolerance: MixtureTolerance, known: Sequence[Reaction]
) -> list[Reaction]:
    """Reactions to try beside the subset: known ones, then one for each abundant species that it leaves out."""
    gases = [each for each in full.conditions.species if each.state == "g"]
    position = {each.name: j for j, each in enumerate(full.conditions.species)}
    fraction = full.composition.mole_fractions
    abundance = np.array([np.nanmax(fraction[..., position[each.name]], initial=0.0) for each in gases])
    needed = {name for each in subset.reactions for name in each.stoichiometry}
    needed.update(each.name for each in full.conditions.feed_species)
    worth = [
        j
        for j, each in enumerate(gases)
        if abundance[j] >= TRACE * tolerance.mole_fraction or each.name in needed
    ]
    listed = [gases[j] for j in worth]
    inside = {each.name for each in listed}
    named = [each for each in known if all(one.state != "g" or one.name in inside for one in each.species)]
    phases = {
        one.name: one for each in (*subset.reactions, *named) for one in each.species if one.state != "g"
    }
    listed += phases.values()
    names = [each.name for each in listed]
    # Each known reaction stands for itself, so dependence counts against the subset alone.
    fresh = [each for each in named if not split_redundant([*subset.reactions, each], names)[1]]
    plenty = [*abundance[worth], *(0.0 for _ in phases)]
    covered = coverage(listed, [*subset.reactions, *fresh], abundance=plenty)
    return [*fresh, *covered.missing][:MOST_CANDIDATES]
