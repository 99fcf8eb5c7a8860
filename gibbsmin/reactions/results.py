"""Everything that was asked about reactions, worked out in one go."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gibbsmin.reactions.against_mixture import Comparison, FullMixture, compare
from gibbsmin.reactions.approach import Approach, approaches
from gibbsmin.reactions.best_correlation import BestFit, best_fits
from gibbsmin.reactions.equation import Reaction
from gibbsmin.reactions.independence import Coverage, coverage
from gibbsmin.reactions.measured import MeasuredConstants
from gibbsmin.reactions.second_law_analysis import SecondLaw, second_law
from gibbsmin.reactions.shortcut_error import ShortcutErrors, Window, shortcut_errors, windows
from gibbsmin.reactions.shortcuts import Shortcut
from gibbsmin.reactions.standard import StandardFunctions, direction, standard_functions
from gibbsmin.reactions.subset import Subset
from gibbsmin.reactions.third_law_analysis import ThirdLaw, third_law
from gibbsmin.reactions.wanted import ReactionsWanted

Array = NDArray[np.float64]

DIRECTION_POINTS = 101  # temperatures at which the sign of Delta H is looked at


@dataclass(frozen=True)
class ReactionSummary:
    """One reaction over the temperatures of interest.

    Attributes:
        functions: ln K, Delta G, H, S and Cp at the temperatures asked for.
        direction: which way K goes, and why. fits: best correlations; none for a single temperature.
    """

    reaction: Reaction
    functions: StandardFunctions
    direction: str
    fits: tuple[BestFit, ...]


@dataclass(frozen=True)
class ShortcutSummary:
    """One shortcut: its errors at the temperatures asked for, and where it keeps the tolerance between them."""

    shortcut: Shortcut
    errors: ShortcutErrors
    windows: tuple[Window, ...]


@dataclass(frozen=True)
class MeasuredSummary:
    """One set of measured K: second and third law."""

    data: MeasuredConstants
    second: SecondLaw
    third: ThirdLaw


@dataclass(frozen=True)
class ReactionResults:
    """All answers.

    Attributes:
        temperature: K, (nT,), where functions and errors are given.
        coverage: of the mixture by the named reactions; None without a mixture.
        full: the mixture that was compared with, or None.
        key_species: whose mole fractions counted in the comparisons.
    """

    wanted: ReactionsWanted
    temperature: Array
    reactions: tuple[ReactionSummary, ...]
    shortcuts: tuple[ShortcutSummary, ...]
    coverage: Coverage | None
    full: FullMixture | None
    key_species: tuple[str, ...]
    comparisons: tuple[Comparison, ...]
    measured: tuple[MeasuredSummary, ...]
    approaches: tuple[Approach, ...]


def work_out(
    wanted: ReactionsWanted,
    temperature: Sequence[float] | Array,
    *,
    full: FullMixture | None = None,
    key_species: Sequence[str] = (),
    conversions: Sequence[str] = (),
    extrapolate: bool = False,
    threads: int | None = None,
) -> ReactionResults:
    """Answer everything that is wanted.

    Args:
        wanted: what.
        temperature: K, where functions and errors are tabulated; their range is the window of shortcuts and fits.
        full: the solved mixture; needed for the comparisons of `wanted.subsets`.
        key_species, conversions: species whose mole fractions and conversions count in them.
        extrapolate: use species data beyond their range.

    Raises:
        ReactionError, MeasurementError, TemperatureRangeError: as the single functions do.
    """
    T = np.atleast_1d(np.asarray(temperature, dtype=np.float64))
    low, high = float(T.min()), float(T.max())
    return ReactionResults(
        wanted=wanted,
        temperature=T,
        reactions=tuple(_reaction(each, wanted, T, extrapolate) for each in wanted.reactions),
        shortcuts=tuple(
            ShortcutSummary(
                each,
                shortcut_errors(each, T, extrapolate=extrapolate),
                tuple(windows(each, wanted.tolerance, low, high, extrapolate=extrapolate))
                if low < high
                else (),
            )
            for each in wanted.shortcuts
        ),
        coverage=_coverage(wanted.reactions, full),
        full=full,
        key_species=tuple(key_species),
        comparisons=_comparisons(wanted, full, key_species, conversions, threads),
        measured=tuple(MeasuredSummary(each, second_law(each), third_law(each)) for each in wanted.measured),
        approaches=tuple(approaches(wanted.analyses, wanted.analysed, wanted.analysis_species)),
    )


def choices_of_shortcuts(subset: Subset, shortcuts: Sequence[Shortcut]) -> list[Mapping[str, Shortcut]]:
    """The first shortcut of every reaction of the subset together, then the second ones, and so on."""
    by_reaction: dict[str, list[Shortcut]] = {}
    for each in shortcuts:
        if any(each.reaction.name == own.name for own in subset.reactions):
            by_reaction.setdefault(each.reaction.name, []).append(each)
    most = max(map(len, by_reaction.values()), default=0)
    return [{name: row[rank] for name, row in by_reaction.items() if rank < len(row)} for rank in range(most)]


def _reaction(reaction: Reaction, wanted: ReactionsWanted, T: Array, extrapolate: bool) -> ReactionSummary:
    low, high = float(T.min()), float(T.max())
    several = low < high
    return ReactionSummary(
        reaction,
        standard_functions(reaction, T, standard_pressure=wanted.standard_pressure, extrapolate=extrapolate),
        direction(
            reaction, np.linspace(low, high, DIRECTION_POINTS if several else 1), extrapolate=extrapolate
        ),
        tuple(
            best_fits(reaction, low, high, terms=wanted.terms, unit=wanted.unit, extrapolate=extrapolate)
            if several
            else ()
        ),
    )


def _coverage(reactions: Sequence[Reaction], full: FullMixture | None) -> Coverage | None:
    """Over the gases of the mixture, and the condensed substances that the reactions name."""
    if full is None:
        return None
    species = {each.name: each for each in full.conditions.species}
    for reaction in reactions:
        species.update({each.name: each for each in reaction.species})
    positions = {each.name: j for j, each in enumerate(full.conditions.species)}
    fraction = full.composition.mole_fractions
    abundance = [
        float(np.nanmax(fraction[..., positions[name]], initial=0.0)) if name in positions else 0.0
        for name in species
    ]
    return coverage(list(species.values()), reactions, abundance=abundance)


def _comparisons(
    wanted: ReactionsWanted,
    full: FullMixture | None,
    key_species: Sequence[str],
    conversions: Sequence[str],
    threads: int | None,
) -> tuple[Comparison, ...]:
    if full is None:
        return ()
    return tuple(
        comparison
        for subset in wanted.subsets
        for comparison in compare(
            full,
            subset,
            key_species=key_species,
            conversions=conversions,
            shortcuts=choices_of_shortcuts(subset, wanted.shortcuts),
            tolerance=wanted.mixture_tolerance,
            known_reactions=wanted.reactions,
            threads=threads,
        )
    )
