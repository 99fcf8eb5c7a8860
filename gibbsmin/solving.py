"""From names, temperatures and pressures to a labelled data set of equilibrium compositions.

`equilibrium` reads what a caller gives; `solve` takes conditions that are ready and chooses between the
solver for maps (every feed at every temperature at every pressure) and the one for scattered points.
"""

from __future__ import annotations

from collections import OrderedDict
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr
from numpy.typing import ArrayLike, NDArray

from gibbsmin.constants import STANDARD_PRESSURE
from gibbsmin.decimal_amounts import element_amounts
from gibbsmin.errors import ConditionsError
from gibbsmin.grid import solve_grid, solve_points
from gibbsmin.grid.solution import GridSolution
from gibbsmin.labelled import Labelled, count, joint_sizes, read_number
from gibbsmin.outcome.assembling import RESULT_NAMES, assemble
from gibbsmin.species import ThermoTable, standard_library

if TYPE_CHECKING:
    from gibbsmin.species import Species, SpeciesLibrary

    Number = float | ArrayLike | xr.DataArray
    PhaseNames = str | Sequence[str | Species] | None

FloatArray = NDArray[np.float64]
Progress = Callable[[int], None]

_TABLES_KEPT = 16  # enough for the few species lists one program works with


@dataclass(frozen=True)
class Conditions:
    """What is to be solved, checked and in arrays.

    Attributes:
        table: thermodynamic functions of the S gases, then the K pure condensed phases, that take part.
        feed_species: the J species of the feed.
        feed: amounts [`amount_unit`], dimensions (*feed dimensions, "feed_species").
        feed_composition: atoms per molecule of the feed's species [1], (J, E).
        element_amounts: (F, E), doubles or Fractions, in the order of `table.elements`, times `factor`; F
            counts the feed dimensions' points in C order.
        factor: (F,), see `gibbsmin.decimal_amounts`.
        temperature: K. pressure: Pa.
        coordinates: further coordinates for the data set.
        amount_unit: "mol", or for a rate "mol/h".
        held_back: condensed phases that may not form, but whose activity is wanted.
    """

    table: ThermoTable
    feed_species: tuple[Species, ...]
    feed: Labelled
    feed_composition: FloatArray
    element_amounts: NDArray[Any]
    factor: FloatArray
    temperature: Labelled
    pressure: Labelled
    coordinates: Mapping[str, xr.Variable]
    amount_unit: str = "mol"
    held_back: tuple[Species, ...] = ()

    @property
    def gases(self) -> tuple[Species, ...]:
        return tuple(each for each in self.table.species if each.state == "g")

    @property
    def phases(self) -> tuple[Species, ...]:
        """The pure condensed phases that take part."""
        return tuple(each for each in self.table.species if each.state != "g")

    @property
    def gas_table(self) -> ThermoTable:
        """Thermodynamic functions of the gases alone."""
        return self.table if not self.phases else thermo_table(self.gases, self.table.extrapolate)

    @staticmethod
    def table_of(species: Sequence[Species], extrapolate: bool) -> ThermoTable:
        return thermo_table(species, extrapolate)

    @property
    def feed_sizes(self) -> dict[str, int]:
        sizes = self.feed.sizes
        del sizes["feed_species"]
        return sizes

    @property
    def sizes(self) -> dict[str, int]:
        """Dimension name -> size of the whole result."""
        return {**self.feed_sizes, **self.temperature.sizes, **self.pressure.sizes}

    @property
    def is_product(self) -> bool:
        """Whether feed, temperature and pressure share no dimension, so that they span a full grid."""
        parts = (self.feed_sizes, self.temperature.dims, self.pressure.dims)
        return sum(map(len, parts)) == len(self.sizes)


def equilibrium(
    feed: Mapping[str, Number],
    temperature: Number,
    pressure: Number,
    *,
    species: Sequence[str | Species] | None = None,
    condensed: PhaseNames = None,
    held_back: PhaseNames = None,
    library: SpeciesLibrary | None = None,
    extrapolate: bool = False,
    threads: int | None = None,
    progress: Progress | None = None,
) -> xr.Dataset:
    """Equilibrium composition of an ideal gas, with pure condensed phases if wanted, at temperatures and pressures.

    Plain 1-D arrays of temperature and pressure span a grid with dimensions `temperature` and `pressure`.
    `xarray.DataArray` arguments, feed amounts included, are broadcast by dimension name: what shares a
    dimension varies together, so scattered points are arrays over one common dimension. Scalars add no
    dimension.

    Only the element totals of the feed matter. Its amounts are read as the decimal numbers they print as, so
    0.1 mol C3H8 with 0.5 mol O2 is exactly stoichiometric.

    Args:
        feed: species name, alias or formula -> amount [mol], not negative.
        temperature: K.
        pressure: Pa, absolute.
        species: the gases that may form; default all neutral gases of the feed's elements.
        condensed: pure solids and liquids that may form beside the gas: a name ("graphite"), a list of them, or
            "all", meaning every one in the library made of the feed's elements. A formula that a gas has too
            means the condensed substance. It goes through its crystal forms and liquid by its data, and is absent
            where these end. Default none.
        held_back: condensed phases, named likewise, that may not form but whose activity is to be told.
        library: where names are looked up; default the library that comes with the package.
        extrapolate: use the data outside their temperature range, and flag where.
        threads: number of threads; default the cores this process may use.
        progress: called with the number of points newly done.

    Returns:
        Data set with `mole_fraction` (..., species) [1], `amount` (..., species) [mol], `gas_amount` [mol],
        `element_potential` (..., element) [1] (in units of RT), `status` (CF flags; 0 is solved), `gap` [mol]
        (upper bound on how far G/RT lies above its minimum), `balance_residual` [1], `iterations` [1],
        `feed_amount` (..., feed_species) [mol] and, when extrapolation is allowed, `extrapolated`
        (..., species). Points that could not be solved hold NaN; check `status`. `mole_fraction` is that in the
        gas, NaN where no gas is left.
        With `condensed` or `held_back` also, over the dimension `phase`: `phase_amount` [mol],
        `phase_amount_per_feed` [1], `phase_mass` [kg], `phase_element_fraction` (..., phase, element) [1],
        `phase_activity` [1] (1 where present, below 1 where nothing drives the phase to form) and `phase_form`.

    Raises:
        ConditionsError: feed, temperature or pressure impossible or not fitting together.
        UnknownSpeciesError, AmbiguousSpeciesError: a name that is not found or not unique.
        TemperatureRangeError: a temperature outside a species' data without `extrapolate`.

    Example:
        >>> result = equilibrium({"CH4": 1, "H2O": 3}, [1000, 1100, 1200], [1e5, 20e5])
        >>> result.mole_fraction.sel(species="H2", pressure=20e5)  # doctest: +SKIP
    """
    conditions = read_conditions(
        feed,
        temperature,
        pressure,
        species=species,
        condensed=condensed,
        held_back=held_back,
        library=library,
        extrapolate=extrapolate,
    )
    return solve(conditions, extrapolate=extrapolate, threads=threads, progress=progress)


def read_conditions(
    feed: Mapping[str, Number],
    temperature: Number,
    pressure: Number,
    *,
    species: Sequence[str | Species] | None = None,
    condensed: PhaseNames = None,
    held_back: PhaseNames = None,
    library: SpeciesLibrary | None = None,
    extrapolate: bool = False,
) -> Conditions:
    """Arguments of `equilibrium`, looked up, checked and labelled. Raises as that does."""
    library = standard_library() if library is None else library
    T = _positive(read_number(temperature, "temperature", "temperature"), "temperature", "K")
    p = _positive(read_number(pressure, "pressure", "pressure"), "pressure", "Pa")
    found, amounts = _read_feed(feed, library)
    sizes = joint_sizes([*amounts, T, p])
    if reserved := RESULT_NAMES.intersection(sizes):
        raise ConditionsError(
            f"dimension {min(reserved)!r}", "this name belongs to the results; choose another"
        )
    feed_sizes = joint_sizes(amounts)
    values = np.stack([each.spread_over(feed_sizes) for each in amounts], axis=-1)
    _require_some_feed(values)

    present = [
        one for one, total in zip(found, values.reshape(-1, len(found)).sum(axis=0), strict=True) if total > 0
    ]
    chosen = _default_species(present, library) if species is None else _named_species(species, library)
    phases = _named_phases(condensed, "condensed", present, library)
    held = _named_phases(held_back, "held_back", present, library)
    if twice := {each.name for each in phases}.intersection(each.name for each in held):
        raise ConditionsError("held_back", f"{min(twice)} cannot be held back and take part")
    table = thermo_table([*chosen, *phases], extrapolate)
    composition = composition_matrix(found, table.elements, present)
    scaled, factor = element_amounts(values.reshape(-1, len(found)), composition)
    coordinates = {
        name: variable
        for part in (*amounts, T, p)
        for name, variable in part.coordinates.items()
        if name not in ("temperature", "pressure") and name not in RESULT_NAMES
    }
    labelled_feed = Labelled((*feed_sizes, "feed_species"), values)
    return Conditions(
        table,
        tuple(found),
        labelled_feed,
        composition,
        scaled,
        factor,
        T,
        p,
        coordinates,
        held_back=tuple(held),
    )


def solve(
    conditions: Conditions,
    *,
    extrapolate: bool = False,
    threads: int | None = None,
    progress: Progress | None = None,
) -> xr.Dataset:
    """Solve prepared conditions; the data set is the one `equilibrium` describes."""
    table = conditions.table
    T = conditions.temperature.values.ravel()
    gibbs = table.gibbs_RT(T)
    log_pressure = np.log(conditions.pressure.values.ravel() / STANDARD_PRESSURE)
    solution = solve_arrays(conditions, gibbs, log_pressure, threads=threads, progress=progress)
    extrapolated = (
        conditions.gas_table.extrapolated(T).reshape(*conditions.temperature.values.shape, -1)
        if extrapolate
        else None
    )
    return assemble(conditions, solution, extrapolated)


def solve_arrays(
    conditions: Conditions,
    gibbs: FloatArray,
    log_pressure: FloatArray,
    *,
    threads: int | None = None,
    progress: Progress | None = None,
) -> GridSolution:
    """The solver for maps or the one for scattered points.

    Args:
        gibbs: g/RT of gases and phases, (nT, S + K); +inf where a phase is not to be considered.
        log_pressure: ln(p / 1 bar), (nP,).
    """
    T = conditions.temperature.values.ravel()
    common = (conditions.table.formula_matrix, conditions.element_amounts, gibbs)
    condensed = np.array([each.state != "g" for each in conditions.table.species])
    options: dict[str, Any] = {"threads": threads, "progress": progress}
    if condensed.any():
        options["condensed"] = condensed
    if conditions.is_product:
        return solve_grid(*common, T, log_pressure, **options)
    return solve_points(*common, T, log_pressure, *_point_indices(conditions), **options)


def _point_indices(conditions: Conditions) -> tuple[NDArray[np.intp], NDArray[np.intp], NDArray[np.intp]]:
    """Which feed, temperature and pressure every point of the result has, each (N,) in C order."""

    def numbered(sizes: Mapping[str, int]) -> NDArray[np.intp]:
        own = Labelled(tuple(sizes), np.arange(count(sizes)).reshape(tuple(sizes.values())))
        return np.ascontiguousarray(own.spread_over(conditions.sizes)).ravel()

    return (
        numbered(conditions.feed_sizes),
        numbered(conditions.temperature.sizes),
        numbered(conditions.pressure.sizes),
    )


def composition_matrix(
    found: Sequence[Species], elements: Sequence[str], present: Sequence[Species] | None = None
) -> FloatArray:
    """Atoms of each of `elements` ("charge" among them) per molecule, (len(found), len(elements)).

    Raises:
        ConditionsError: a species of `present` (default all) has an element that is not in `elements`.
    """
    for each in found if present is None else present:
        names = {*each.composition, *(["charge"] if each.charge else [])}
        if missing := sorted(names.difference(elements)):
            raise ConditionsError(
                f"feed of {each.name}", f"none of the listed species contains {', '.join(missing)}; list one"
            )
    return np.array(
        [
            [
                float(each.charge if element == "charge" else each.composition.get(element, 0))
                for element in elements
            ]
            for each in found
        ]
    )


def thermo_table(species: Sequence[Species], extrapolate: bool) -> ThermoTable:
    """A `ThermoTable` of these species, kept for the next call with the same ones."""
    # Species hold mappings and cannot be hashed; the table keeps them alive, so their ids stay theirs.
    key = (tuple(map(id, species)), extrapolate)
    if key in _tables:
        _tables.move_to_end(key)
    else:
        _tables[key] = ThermoTable(species, extrapolate=extrapolate)
        while len(_tables) > _TABLES_KEPT:
            _tables.popitem(last=False)
    return _tables[key]


_tables: OrderedDict[tuple[tuple[int, ...], bool], ThermoTable] = OrderedDict()


def _read_feed(feed: Mapping[str, Number], library: SpeciesLibrary) -> tuple[list[Species], list[Labelled]]:
    if not isinstance(feed, Mapping):
        raise ConditionsError(
            "feed", f"expected a mapping of species name to mol, found {type(feed).__name__}"
        )
    if not feed:
        raise ConditionsError("feed", "it is empty; name at least one species and its amount in mol")
    found: list[Species] = []
    amounts: list[Labelled] = []
    for name, value in feed.items():
        species = library.find(name)
        if any(species.name == other.name for other in found):
            raise ConditionsError(
                f"feed of {name}", f"{species.name} is named twice; give it once with the sum"
            )
        amount = read_number(value, f"feed of {name}", None)
        if (amount.values < 0).any():
            raise ConditionsError(f"feed of {name}", f"{amount.values.min():g} mol is negative")
        found.append(species)
        amounts.append(amount)
    return found, amounts


def _require_some_feed(values: FloatArray) -> None:
    empty = int((values.sum(axis=-1) == 0).sum())
    if empty:
        feeds = values[..., 0].size
        where = "it is empty" if feeds == 1 else f"it is empty at {empty} of its {feeds} points"
        raise ConditionsError("feed", f"{where}; at least one amount must be above zero")


def _positive(number: Labelled, quantity: str, unit: str) -> Labelled:
    if not (number.values > 0).all():
        raise ConditionsError(quantity, f"{number.values.min():g} {unit} is not above zero")
    return number


def _default_species(present: Sequence[Species], library: SpeciesLibrary) -> list[Species]:
    elements = dict.fromkeys(element for each in present for element in each.composition)
    species = list(library.gases(list(elements), ions=any(each.charge for each in present)))
    if not species:
        raise ConditionsError("species", f"the library has no gas of {', '.join(elements)}")
    return species


def _named_species(names: Sequence[str | Species], library: SpeciesLibrary) -> list[Species]:
    if isinstance(names, str):
        raise ConditionsError("species", f"expected a list of names, found the text {names!r}")
    chosen: list[Species] = []
    for name in names:
        species = library.find(name) if isinstance(name, str) else name
        if species.state != "g":
            raise ConditionsError(
                "species", f"{species.name} is a condensed substance; only gases can form here"
            )
        if not any(species.name == other.name for other in chosen):
            chosen.append(species)
    if not chosen:
        raise ConditionsError("species", "the list is empty")
    return chosen


def _named_phases(
    names: PhaseNames, argument: str, present: Sequence[Species], library: SpeciesLibrary
) -> list[Species]:
    if names is None:
        return []
    if names == "all":
        return list(library.condensed({element for each in present for element in each.composition}))
    chosen: list[Species] = []
    for name in [names] if isinstance(names, str) else names:
        species = library.find_condensed(name) if isinstance(name, str) else name
        if species.state == "g":
            raise ConditionsError(argument, f"{species.name} is a gas; name solids and liquids here")
        if not any(species.name == other.name for other in chosen):
            chosen.append(species)
    return chosen
