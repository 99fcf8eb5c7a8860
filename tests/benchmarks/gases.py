"""The gases and feeds that the benchmarks share."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np
from numpy.typing import NDArray

from gibbsmin.constants import STANDARD_PRESSURE
from gibbsmin.decimal_amounts import element_amounts
from gibbsmin.species import Species, ThermoTable, standard_library

Floats = NDArray[np.float64]

METHANE_IN_AIR = {"lean": 0.8, "rich": 1.25, "exactly stoichiometric": 1.0}
"""Equivalence ratios; oxygen amounts 2.5, 1.6 and 2 mol per mol of methane are exact decimals."""

OTHER_ELEMENTS = ("S", "Cl", "F", "Ar", "Na", "K")
OTHER_FEED = {"SO2": 0.01, "HCl": 0.01, "HF": 0.01, "Ar": 0.01, "NaCl": 0.01, "KCl": 0.01}
"""Fully burnt already, so that they leave the stoichiometry alone."""

LOWEST, HIGHEST = 600.0, 3000.0  # K; all gases used here have data there
LOWEST_BAR, HIGHEST_BAR = 0.1, 100.0


@dataclass(frozen=True)
class Feeds:
    """Feeds of one list of gases: amounts (F, J) mol of the species `names`, which are among the gases."""

    table: ThermoTable
    names: tuple[str, ...]
    amounts: Floats

    @cached_property
    def columns(self) -> list[int]:
        all_names = [each.name for each in self.table.species]
        return [all_names.index(name) for name in self.names]

    @cached_property
    def element_amounts(self) -> Floats:
        """(F, E), whole numbers where the amounts are decimals: proportional to the true ones."""
        return element_amounts(self.amounts, self.table.formula_matrix[:, self.columns].T)[0]

    @cached_property
    def fractions(self) -> Floats:
        """Mole fractions of the feeds among the gases, (F, S)."""
        out = np.zeros((len(self.amounts), len(self.table.species)))
        out[:, self.columns] = self.amounts / self.amounts.sum(axis=1, keepdims=True)
        return out


@dataclass(frozen=True)
class Map:
    """Every temperature [K] at every pressure [Pa]."""

    temperature: Floats
    pressure: Floats

    @property
    def log_pressure(self) -> Floats:
        return np.log(self.pressure / STANDARD_PRESSURE)

    @property
    def points(self) -> int:
        return len(self.temperature) * len(self.pressure)

    def flat(self) -> tuple[Floats, Floats]:
        """Temperature and pressure of every point, pressures running faster, (N,) each."""
        T, p = np.meshgrid(self.temperature, self.pressure, indexing="ij")
        return T.ravel(), p.ravel()


@lru_cache(maxsize=1)
def reforming_gases() -> ThermoTable:
    """48 gases of C, H, O and N: all of the library's with at most two carbons that are not radicals."""
    return ThermoTable(
        standard_library().gases(["C", "H", "O", "N"], largest_carbon_number=2, radicals=False)
    )


def reforming_feed() -> Feeds:
    """Methane with three times as much steam and a little nitrogen."""
    return single_feed(reforming_gases(), {"CH4": 1.0, "H2O": 3.0, "N2": 0.05})


def reforming_map(temperatures: int = 901, pressures: int = 111) -> Map:
    """600 to 1500 K (1 K apart if there are 901) and 1 to 100 bar."""
    return Map(np.linspace(600.0, 1500.0, temperatures), np.geomspace(1e5, 1e7, pressures))


SCATTERED_FEEDS: dict[str, dict[str, tuple[float, float]]] = {
    "any": {
        "CH4": (0.0, 1.0),
        "H2O": (0.0, 4.0),
        "CO2": (0.0, 1.0),
        "C2H6": (0.0, 0.2),
        "N2": (0.0, 1.0),
        "H2": (0.0, 0.5),
        "O2": (0.0, 0.4),
    },
    "reformer": {
        "CH4": (1.0, 1.0),
        "H2O": (1.5, 5.0),
        "CO2": (0.0, 0.5),
        "C2H6": (0.0, 0.1),
        "N2": (0.01, 0.2),
        "H2": (0.02, 0.3),
    },
}
"""mol, even within limits. "any" goes from feeds without oxygen to such without carbon, "reformer" stays within
what a steam reformer may be fed (common practice, no source)."""


def scattered_reforming(count: int, kind: str = "any", seed: int = 5) -> tuple[Feeds, Floats, Floats]:
    """Random feeds, each with its temperature [K] and pressure [Pa], (count,)."""
    rng = np.random.default_rng(seed)
    limits = np.array(list(SCATTERED_FEEDS[kind].values()))
    amounts = rng.uniform(limits[:, 0], limits[:, 1], (count, len(limits)))
    T = rng.uniform(600.0, 1500.0, count)
    p = np.exp(rng.uniform(np.log(1e5), np.log(1e7), count))
    return Feeds(reforming_gases(), tuple(SCATTERED_FEEDS[kind]), amounts), T, p


@lru_cache(maxsize=16)
def combustion_gases(count: int) -> ThermoTable:
    """The `count` smallest gases of C, H, O and N (beyond 158 of ten elements), the feed's among them."""
    elements = ["C", "H", "O", "N"]
    first = ["CH4", "O2", "N2", "CO2", "H2O"]
    library = standard_library()
    gases = library.gases(elements)
    if count > len(gases):
        gases = library.gases([*elements, *OTHER_ELEMENTS])
        first += list(OTHER_FEED)
    others = sorted((each for each in gases if each.name not in first), key=_size)
    chosen = [library.find(name) for name in first] + others
    if count > len(chosen):
        raise ValueError(f"the library has {len(chosen)} gases of these elements, fewer than {count}")
    return ThermoTable(chosen[:count])


def combustion_feed(table: ThermoTable, equivalence_ratio: float) -> Feeds:
    """Methane in air; with gases of ten elements also a little of each of the other six."""
    oxygen = {0.8: 2.5, 1.0: 2.0, 1.25: 1.6}[equivalence_ratio]
    feed = {"CH4": 1.0, "O2": oxygen, "N2": {2.5: 9.4, 2.0: 7.52, 1.6: 6.016}[oxygen]}
    if "K" in table.elements:
        feed.update(OTHER_FEED)
    return single_feed(table, feed)


def combustion_map(temperatures: int, pressures: int) -> Map:
    return Map(
        np.linspace(LOWEST, HIGHEST, temperatures),
        np.geomspace(LOWEST_BAR * 1e5, HIGHEST_BAR * 1e5, pressures),
    )


def scattered_combustion(count: int, seed: int = 7) -> tuple[Floats, Floats]:
    """Random temperatures [K] and pressures [Pa], (count,) each."""
    rng = np.random.default_rng(seed)
    T = rng.uniform(LOWEST, HIGHEST, count)
    return T, np.exp(rng.uniform(np.log(LOWEST_BAR * 1e5), np.log(HIGHEST_BAR * 1e5), count))


def single_feed(table: ThermoTable, feed: Mapping[str, float]) -> Feeds:
    return Feeds(table, tuple(feed), np.array([list(feed.values())]))


def names_of(species: Sequence[Species]) -> list[str]:
    return [each.name for each in species]


def _size(species: Species) -> tuple[float, str]:
    return sum(species.composition.values()), species.name
