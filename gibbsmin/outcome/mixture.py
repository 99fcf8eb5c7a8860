"""A solved map as the comparison with single reactions takes it."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr

from gibbsmin.constants import STANDARD_PRESSURE
from gibbsmin.errors import ConditionsError
from gibbsmin.reactions.against_mixture import (
    Comparison,
    FullMixture,
    MixtureTolerance,
    activities,
    compare,
)
from gibbsmin.reactions.equation import Reaction, read_reaction
from gibbsmin.reactions.results import choices_of_shortcuts
from gibbsmin.reactions.subset import Composition, MapConditions, Subset

if TYPE_CHECKING:
    from collections.abc import Mapping

    from gibbsmin.reactions.shortcuts import Shortcut
    from gibbsmin.solving import Conditions, Number
    from gibbsmin.species import Species, SpeciesLibrary


def full_mixture(
    conditions: Conditions, dataset: xr.Dataset, library: SpeciesLibrary, *, feed: Any = None
) -> FullMixture:
    """The solved map in arrays, with the activity of all condensed substances of its elements.

    Args:
        conditions: what was solved, a full grid. dataset: its solution.
        library: where condensed substances are looked for.
        feed: (F, J) exact amounts [mol], instead of the doubles in `conditions`.

    Raises:
        ConditionsError: temperature and pressure do not span a grid.
    """
    if not conditions.is_product or len(conditions.temperature.dims) > 1 or len(conditions.pressure.dims) > 1:
        raise ConditionsError(
            "temperature and pressure", "single reactions are compared on a grid of the two"
        )
    T = conditions.temperature.values.ravel()
    p = conditions.pressure.values.ravel()
    if feed is None:
        feed = conditions.feed.values.reshape(-1, len(conditions.feed_species))
    shape = (len(feed), len(T), len(p))
    # Condensed phases that take part follow the gases in the table.
    table = conditions.table
    gases = [j for j, each in enumerate(table.species) if each.state == "g"]
    names = [str(name) for name in dataset["species"].values]
    amounts = dataset["amount"].values.reshape(*shape, -1)[
        ..., [names.index(table.species[j].name) for j in gases]
    ]
    species = tuple(table.species[j] for j in gases)
    condensed = library.condensed([each for each in table.elements if each != "charge"])
    potentials = dataset["element_potential"].values.reshape(*shape, -1)
    activity, which = activities(species, table.elements, potentials, T, condensed)
    formed = None
    if "phase_amount" in dataset:
        formed = (dataset["phase_amount"] > 0).any("phase").values.reshape(shape)
    return FullMixture(
        MapConditions(
            species,
            table.gibbs_RT(T)[:, gases],
            T,
            np.log(p / STANDARD_PRESSURE),
            conditions.feed_species,
            feed,
        ),
        Composition(amounts, np.asarray(amounts.sum(axis=-1)), dataset["status"].values.reshape(shape)),
        activity,
        which,
        tuple(condensed),
        formed,
    )


def compare_reactions(
    feed: Mapping[str, Number],
    temperature: Number,
    pressure: Number,
    reactions: Sequence[str | Reaction],
    *,
    key_species: Sequence[str],
    conversions: Sequence[str] = (),
    shortcuts: Sequence[Shortcut] = (),
    tolerance: MixtureTolerance | None = None,
    species: Sequence[str | Species] | None = None,
    library: SpeciesLibrary | None = None,
    threads: int | None = None,
) -> list[Comparison]:
    """Some reactions alone against the whole mixture, over a grid of temperature and pressure.

    Args:
        feed, temperature, pressure, species, library, threads: as for `gibbsmin.equilibrium`.
        reactions: equations, or reactions already read; they must be independent.
        key_species, conversions: whose mole fractions and conversions count.
        shortcuts: of these reactions; where a reaction has several, they are compared one after the other.
        tolerance: accepted differences.

    Returns:
        One comparison with the exact K, and one for each choice of shortcuts. Arrays have the shape (feeds,
        temperatures, pressures).

    Raises:
        ReactionError, ConditionsError, UnknownSpeciesError, TemperatureRangeError.

    Example:
        >>> from gibbsmin import compare_reactions
        >>> (found,) = compare_reactions(
        ...     {"CH4": 1, "H2O": 3}, [900.0, 1000.0], [1e5], ["CH4 + H2O = CO + 3 H2"], key_species=["H2"],
        ...     species=["CH4", "H2O", "CO", "CO2", "H2"])
        >>> found.neglected[0].reaction.equation  # doctest: +SKIP
    """
    from gibbsmin.solving import read_conditions, solve
    from gibbsmin.species import standard_library

    library = standard_library() if library is None else library
    read = tuple(
        read_reaction(each, library=library) if isinstance(each, str) else each for each in reactions
    )
    conditions = read_conditions(feed, temperature, pressure, species=species, library=library)
    full = full_mixture(conditions, solve(conditions, threads=threads), library)
    subset = Subset(" and ".join(each.name for each in read), read)
    return compare(
        full,
        subset,
        key_species=key_species,
        conversions=conversions,
        shortcuts=choices_of_shortcuts(subset, shortcuts),
        tolerance=tolerance or MixtureTolerance(),
        threads=threads,
    )
