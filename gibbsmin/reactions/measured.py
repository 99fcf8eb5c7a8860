"""Measured equilibrium constants as they come from a notebook or a paper, made into ln K at 1 bar."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import isfinite, log

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gibbsmin.errors import Fault, MeasurementError
from gibbsmin.reactions.constant_units import ConstantUnit
from gibbsmin.reactions.equation import Reaction

Array = NDArray[np.float64]

QUANTITIES = ("K", "ln K", "log10 K")
FEWEST = 3
"""Values; two parameters and one degree of freedom."""


@dataclass(frozen=True)
class MeasuredConstants:
    """Measured K(T) of one reaction.

    Attributes:
        name: of the data set. reaction: what was measured.
        temperature: K, (n,). ln_K: at 1 bar [1], (n,).
        uncertainty: standard uncertainty of ln K [1], (n,), or None where none is given.
        unit: in which K was given. labels: what each value is called in messages, e.g. its line.
    """

    name: str
    reaction: Reaction
    temperature: Array
    ln_K: Array  # noqa: N815
    uncertainty: Array | None
    unit: ConstantUnit
    labels: tuple[str, ...]

    def __len__(self) -> int:
        return len(self.temperature)


def measured_constants(
    reaction: Reaction,
    temperature: ArrayLike,
    values: ArrayLike,
    *,
    uncertainty: ArrayLike | None = None,
    quantity: str = "K",
    unit: str = "1",
    name: str = "",
    places: Sequence[Fault] = (),
) -> MeasuredConstants:
    """Check measured values and bring them to ln K at 1 bar.

    Args:
        reaction: as the K is defined for.
        temperature: K, (n,).
        values: (n,) of `quantity`: "K", "ln K" or "log10 K".
        uncertainty: (n,) standard uncertainty of `quantity` itself, or None.
        unit: of K (see `constant_units`): "1" at 1 bar, "atm", "bar^2", "mol/L" ...
        name: of the data set.
        places: a fault for each value, whose place is used in messages (default: value 1, 2, ...).

    Raises:
        MeasurementError: K not above zero, T not above zero, too few values, all temperatures equal ... all at once.
        ReactionError: a unit that does not fit.

    Example:
        >>> from gibbsmin.reactions import read_reaction
        >>> data = measured_constants(read_reaction("I2 = 2 I"), [900, 1000, 1100], [3e-4, 3e-3, 2e-2], unit="atm")
        >>> len(data)
        3
    """
    if quantity not in QUANTITIES:
        raise MeasurementError([Fault(f"{quantity!r} is not one of {', '.join(QUANTITIES)}")])
    T, y = (np.atleast_1d(np.asarray(each, dtype=np.float64)) for each in (temperature, values))
    u = None if uncertainty is None else np.broadcast_to(np.asarray(uncertainty, dtype=np.float64), y.shape)
    where = list(places) or [Fault(f"value {i + 1}") for i in range(len(T))]
    faults = _faults(T, y, u, quantity, where, named=bool(places))
    if faults:
        raise MeasurementError(faults)
    chosen = ConstantUnit.of(unit, reaction.gas_change, reaction=reaction.name)
    factor = {"K": 1.0, "ln K": 1.0, "log10 K": log(10.0)}[quantity]
    natural = np.log(y) if quantity == "K" else y * factor
    spread = None if u is None else (u / y if quantity == "K" else u * factor)
    labels = tuple(f"line {each.line}" if each.line else f"value {i + 1}" for i, each in enumerate(where))
    return MeasuredConstants(
        name or reaction.name,
        reaction,
        T,
        chosen.to_standard(natural, reaction.gas_change, T),
        spread,
        chosen,
        labels,
    )


def _faults(
    T: Array, y: Array, u: Array | None, quantity: str, where: Sequence[Fault], *, named: bool
) -> list[Fault]:
    if T.ndim != 1 or T.shape != y.shape:
        return [Fault(f"{T.size} temperatures do not go with {y.size} values")]
    faults: list[Fault] = []

    def add(index: int, message: str) -> None:
        place = where[index]
        text = message if named else f"{place.message}: {message}"
        faults.append(Fault(text, place.file, place.line, place.column))

    for i in range(len(T)):
        if not isfinite(T[i]) or T[i] <= 0:
            add(i, f"a temperature of {T[i]:g} K is not above absolute zero; is its unit right?")
        if not isfinite(y[i]):
            add(i, f"{quantity} is not a finite number")
        elif quantity == "K" and y[i] <= 0:
            add(i, f"K = {y[i]:g} is not above zero; leave the value out, or give ln K or log10 K as such")
        if u is not None and not (isfinite(u[i]) and u[i] > 0):
            add(i, f"the uncertainty {u[i]:g} is not above zero; give one for every value, or none at all")
    if len(T) < FEWEST:
        faults.append(
            Fault(
                f"{len(T)} values are too few: Delta H and Delta S with an uncertainty take at least {FEWEST}",
                where[0].file if where else "",
                where[0].line if where else None,
            )
        )
    elif len(np.unique(T)) < 2:
        faults.append(
            Fault(
                f"all values are at {T[0]:g} K; without a second temperature there is no Delta H",
                where[0].file if where else "",
                where[0].line if where else None,
            )
        )
    return faults
