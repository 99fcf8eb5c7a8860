"""An ideal gas of our species inside Cantera; with cantera_phases.py the only module that imports that library.

Every species gets its coefficients as nine-coefficient polynomials (the seven-coefficient form is a special
case), 1 bar as reference pressure, and a plain number for a name: Cantera's parser gives some characters a
meaning. The polynomials give g/RT itself, so the gas constants on the two sides (their sources differ by
6e-6) play no part.
"""

from __future__ import annotations

import contextlib
import ctypes
import math
import os
import sys
import warnings
from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from gibbsmin.constants import STANDARD_PRESSURE
from gibbsmin.errors import GibbsminError

if TYPE_CHECKING:
    from gibbsmin.species import Species, ThermoTable

FloatArray = NDArray[np.float64]

LIMIT_BELONGS_BELOW = 1.0 + 2e-9
"""At the limit between two intervals our functions take the lower one and Cantera the upper one; moved up by
twice the rounding that ours allow for, the limit belongs to the same interval on both sides."""


class NoAnswerError(GibbsminError):
    """Cantera could not represent the gas or gave no usable answer; the message says why."""


class CanteraGas:
    """The gases of `table` as a Cantera phase.

    Args:
        table: species with their coefficients.
        temperatures: lowest and highest temperature [K] to be asked for; the outermost polynomials are used
            there, as by a table that extrapolates.

    Raises:
        NoAnswerError: Cantera refuses the species.
    """

    def __init__(self, table: ThermoTable, temperatures: tuple[float, float]) -> None:
        import cantera

        symbols = symbols_for(table.elements, cantera.Element.element_symbols)
        try:
            with silenced():
                species = [
                    make_species(cantera, f"s{number}", each, symbols, temperatures)
                    for number, each in enumerate(table.species)
                ]
                self._gas: Any = cantera.Solution(thermo="ideal-gas", kinetics=None, species=species)
        except cantera.CanteraError as error:
            raise NoAnswerError(f"Cantera refuses the species: {gist(error)}") from error
        self._error: type[Exception] = cantera.CanteraError

    @staticmethod
    def library() -> str:
        """Name and version, for records."""
        import cantera

        return f"Cantera {cantera.__version__}"

    def standard_gibbs_RT(self, temperature: float) -> FloatArray:  # noqa: N802 - RT is the divisor
        """mu_j0/RT at 1 bar [1], (S,)."""
        self._gas.TP = temperature, STANDARD_PRESSURE
        return np.asarray(self._gas.standard_gibbs_RT)

    def equilibrate(
        self, temperature: float, pressure: float, fractions: FloatArray, solver: str
    ) -> tuple[FloatArray, str]:
        """Mole fractions at equilibrium (S,), and the solver that was asked.

        Args:
            temperature: K. pressure: Pa. fractions: a composition with the right element totals, (S,).
            solver: "auto", "element_potential", "vcs" or "gibbs".

        Raises:
            NoAnswerError: no convergence, or an answer that is not finite.
        """
        try:
            with silenced():
                self._gas.TPX = temperature, pressure, fractions
                self._gas.equilibrate("TP", solver=solver)
        except self._error as error:
            raise NoAnswerError(f"Cantera's solver {solver} failed: {gist(error)}") from error
        found = np.array(self._gas.X)
        if not np.isfinite(found).all():
            raise NoAnswerError(f"Cantera's solver {solver} returned values that are not finite")
        return found, solver


def make_species(
    cantera: Any, name: str, species: Species, symbols: dict[str, str], temperatures: tuple[float, float]
) -> Any:
    composition = {symbols[element]: count for element, count in species.composition.items()}
    if species.charge:
        composition["E"] = -species.charge
    # Cantera knows one reference pressure for all species; the entropy carries the difference.
    shift = math.log(species.reference_pressure / STANDARD_PRESSURE)
    intervals = species.forms[0].intervals
    limits = [interval.lower * LIMIT_BELONGS_BELOW for interval in intervals]
    limits[0] = min(intervals[0].lower, temperatures[0])
    limits.append(max(intervals[-1].upper, temperatures[1]))
    rows: list[float] = [len(intervals)]
    for number, interval in enumerate(intervals):
        *others, entropy = interval.nine
        rows += [limits[number], limits[number + 1], *others, entropy + shift]
    result = cantera.Species(name, composition, float(species.charge))
    result.thermo = cantera.Nasa9PolyMultiTempRegion(limits[0], limits[-1], STANDARD_PRESSURE, np.array(rows))
    return result


def symbols_for(elements: tuple[str, ...], known: Any) -> dict[str, str]:
    """Symbols by which Cantera knows the elements; an isotope of ours borrows a spare one.

    Only the counts of atoms enter an equilibrium at given temperature and pressure, not their masses.
    """
    spare = (symbol for symbol in reversed(list(known)) if symbol not in elements)
    return {
        element: element if element in known else next(spare) for element in elements if element != "charge"
    }


def gist(error: Exception) -> str:
    """The one line of Cantera's boxed message that says what happened."""
    lines = [line.strip() for line in str(error).splitlines()]
    kept = [line for line in lines if line and not set(line) <= set("*") and "thrown by" not in line]
    return " ".join(kept)[:200] or type(error).__name__


@contextlib.contextmanager
def silenced() -> Iterator[None]:
    """Keep what the C++ library writes to standard output by itself away from our results.

    Its solver vcs announces failures there; the exception says the same, and we keep that.
    """
    with warnings.catch_warnings(), contextlib.ExitStack() as stack:
        warnings.simplefilter("ignore")
        sys.stdout.flush()
        stack.enter_context(contextlib.redirect_stdout(stack.enter_context(open(os.devnull, "w"))))
        try:
            kept = os.dup(1)
        except OSError:  # no standard output at all
            yield
            return
        null = os.open(os.devnull, os.O_WRONLY)
        try:
            os.dup2(null, 1)
            yield
        finally:
            _flush_c_streams()
            os.dup2(kept, 1)
            os.close(null)
            os.close(kept)


def _flush_c_streams() -> None:
    # Text still in the C library's buffer would come out after standard output is restored.
    with contextlib.suppress(OSError, AttributeError, TypeError):
        ctypes.CDLL(None).fflush(None)
