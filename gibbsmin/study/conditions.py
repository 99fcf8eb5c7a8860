"""Cases and layouts as the solver takes them: its tables and its conditions."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from gibbsmin.labelled import Labelled
from gibbsmin.solving import Conditions, composition_matrix, thermo_table

if TYPE_CHECKING:
    from gibbsmin.species import Species, ThermoTable
    from gibbsmin.study.chunks import FloatArray
    from gibbsmin.study.model import Case, Layout


def conditions_of(layout: Layout, case: Case) -> Conditions:
    """A case as the solver takes it."""
    table = solver_table(layout)
    dims = tuple(axis.name for axis in layout.axes)
    return Conditions(
        table=table,
        feed_species=layout.feed_species,
        feed=Labelled((*dims[:-2], "feed_species"), case.feed),
        feed_composition=feed_atoms(layout.feed_species, table),
        element_amounts=case.element_amounts,
        factor=case.factor,
        temperature=Labelled((dims[-2],), case.temperature),
        pressure=Labelled((dims[-1],), case.pressure),
        coordinates={},
        amount_unit=layout.amount_unit,
        held_back=layout.held_back,
    )


def solver_table(layout: Layout) -> ThermoTable:
    """Gases first, then the condensed phases that take part."""
    return thermo_table([*layout.species, *layout.condensed], layout.extrapolate)


def gas_table(layout: Layout) -> ThermoTable:
    return thermo_table(layout.species, layout.extrapolate)


def feed_atoms(feed_species: Sequence[Species], table: ThermoTable) -> FloatArray:
    """Atoms of the table's elements in each species of the feed, (J, E)."""
    return composition_matrix(feed_species, table.elements, [])
