"""Random clouds of scattered points against the same points one by one: whatever neighbours they have.

The judge is `minimise`, which knows no neighbours and is itself compared with extended precision elsewhere.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
import pytest

from gibbsmin.grid import solve_points
from gibbsmin.minimiser import minimise
from gibbsmin.species import ThermoTable, standard_library

ELEMENTS = ["C", "H", "O", "N", "S", "Cl", "F", "Si", "P", "Ar", "Na", "K", "B", "Al", "He"]
MOST_GASES = 150


@dataclass(frozen=True)
class Cloud:
    """n points: formula matrix (E, S), element amounts (n, E), g/RT (n, S), temperatures [K] and ln(p/p0) (n,)."""

    A: Any
    b: Any
    g: Any
    T: Any
    log_p: Any


def clouds(count: int, seed: int) -> Iterator[Cloud]:
    """Random elements, gases, ranges of temperature, sizes and kinds of feed."""
    rng = np.random.default_rng(seed)
    library = standard_library()
    while count:
        elements = list(rng.choice(ELEMENTS, rng.integers(1, 6), replace=False))
        low, high = np.sort(rng.uniform(250.0, 6000.0, 2))
        ions = bool(rng.random() < 0.2)
        found = library.gases(elements, ions=ions, largest_carbon_number=int(rng.integers(1, 5)))
        gases = [each for each in found if each.lower <= low and each.upper >= high]
        if not gases:
            continue
        chosen = rng.choice(len(gases), min(len(gases), MOST_GASES), replace=False)
        table = ThermoTable([gases[k] for k in chosen])
        points = int(rng.choice([70, 300, 1500]))
        T = rng.uniform(low, high, points)
        b = _feeds(rng, points, len(table.species)) @ table.formula_matrix.T
        if "charge" in table.elements:
            b[:, table.elements.index("charge")] = 0.0
        yield Cloud(table.formula_matrix, b, table.gibbs_RT(T), T, rng.uniform(-12.0, 7.0, points))
        count -= 1


def _feeds(rng: np.random.Generator, points: int, species: int) -> Any:
    """(points, species) mol."""
    kind = rng.integers(5)
    if kind == 0:  # everything, over six decades
        return 10.0 ** rng.uniform(-6.0, 0.0, (points, species))
    if kind == 1:  # some species of all, others at every point
        return rng.uniform(0.0, 1.0, (points, species)) * (rng.random((points, species)) < 0.1)
    feed = np.zeros((points, species))
    columns = rng.choice(species, min(int(kind) - 1, species), replace=False)
    if kind == 2:  # one species
        feed[:, columns] = 1.0
    elif kind == 3:  # two in a fixed whole proportion
        feed[:, columns] = rng.integers(1, 4, len(columns)) * rng.uniform(0.1, 10.0, (points, 1))
    else:  # three, one of which may be a trace
        scale = 10.0 ** rng.uniform(-9.0, 0.0, len(columns))
        feed[:, columns] = rng.uniform(0.0, 1.0, (points, len(columns))) * scale
    return feed


def assert_agree(cloud: Cloud) -> None:
    at = np.arange(len(cloud.T))
    scattered = solve_points(cloud.A, cloud.b, cloud.g, cloud.T, cloud.log_p, at, at, at)
    single = minimise(cloud.A, cloud.b, cloud.g + cloud.log_p[:, None])
    np.testing.assert_array_equal(scattered.status, single.status)
    solved = single.solved
    assert ((scattered.amounts == 0.0) == (single.amounts == 0.0))[solved].all()
    visible = (single.amounts > 1e-280) & solved[:, None]
    difference = np.abs(scattered.amounts / np.where(visible, single.amounts, 1.0) - 1.0)[visible]
    # potentials of 1000 round to 1e-13
    assert difference.max(initial=0.0) < 1e-12 * max(1.0, np.abs(cloud.g).max() / 100.0)


def test_random_clouds_agree_with_single_points() -> None:
    for cloud in clouds(25, seed=21):
        assert_agree(cloud)


@pytest.mark.slow
def test_many_random_clouds_agree_with_single_points() -> None:
    for cloud in clouds(600, seed=22):
        assert_agree(cloud)
