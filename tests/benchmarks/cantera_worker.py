"""Problems of the population solved by Cantera's solvers and by ours, in a process that may die.

A crash or a hang of native code would take the whole benchmark along; here it costs one answer.
"""

from __future__ import annotations

import multiprocessing
import time
from dataclasses import dataclass
from multiprocessing.connection import Connection
from types import TracebackType
from typing import Any

import numpy as np
from scipy.optimize import nnls

from tests import reference
from tests.population import Problem, problem

OURS = "gibbsmin"
SOLVERS = ("auto", "element_potential", "gibbs", "vcs")
LONGEST = 60.0  # s that one call may take
BUILDING = 60.0  # s that drawing and posing a problem may take besides


@dataclass(frozen=True)
class Answer:
    """log_mole_fractions (S,), or the kind of `failure` ("no answer", "crash", "hang")."""

    log_mole_fractions: np.ndarray | None
    seconds: float
    failure: str = ""


class IsolatedWorker:
    """Asks a process of its own, and replaces it when it dies or hangs."""

    def __enter__(self) -> IsolatedWorker:
        self._start()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._stop()

    def solve(self, seed: int, index: int, most_species: int) -> dict[str, Answer]:
        """Answers by contender; OURS alone if the problem cannot be posed to Cantera."""
        answers: dict[str, Answer] = {}
        left = [OURS, *SOLVERS]
        while left:
            self._ask((seed, index, most_species, left))
            while left:
                if not self._connection.poll(LONGEST + BUILDING):
                    answers[left.pop(0)] = Answer(None, LONGEST, "hang")
                    self._restart()
                    break
                try:
                    received = self._connection.recv()
                except (EOFError, OSError):
                    answers[left.pop(0)] = Answer(None, np.nan, "crash")
                    self._restart()
                    break
                if received is None:  # cannot be posed
                    left = []
                    break
                answers[left.pop(0)] = received
        return answers

    def _ask(self, question: tuple[int, int, int, list[str]]) -> None:
        try:
            self._connection.send(question)
        except OSError:  # it died since the last answer
            self._restart()
            self._connection.send(question)

    def _start(self) -> None:
        context = multiprocessing.get_context("spawn")
        self._connection, theirs = context.Pipe()
        self._process = context.Process(target=_serve, args=(theirs,), daemon=True)
        self._process.start()
        theirs.close()

    def _stop(self) -> None:
        self._connection.close()
        self._process.join(5.0)
        if self._process.is_alive():
            self._process.kill()
            self._process.join()

    def _restart(self) -> None:
        self._process.kill()
        self._stop()
        self._start()


def _serve(connection: Connection[Any, Any]) -> None:
    """Answer (seed, index, most_species, contenders) with one Answer a contender, or None."""
    from threadpoolctl import threadpool_limits

    threadpool_limits(1, user_api="blas")
    warm = problem(1, 0)
    _ours(warm)
    while True:
        try:
            seed, index, most_species, contenders = connection.recv()
        except EOFError:
            return
        case = problem(seed, index, most_species=most_species)
        posed: PosedToCantera | None = None
        for name in contenders:
            if name == OURS:
                connection.send(_ours(case))
                continue
            if posed is None:
                posed = PosedToCantera.of(case)
                if posed is None:
                    connection.send(None)
                    break
            connection.send(posed.solve(name))


def _ours(case: Problem) -> Answer:
    from gibbsmin import minimise

    begin = time.perf_counter()
    try:
        found = minimise(case.formula_matrix, case.element_amounts, case.potentials)
    except Exception:  # whatever it raises is no answer
        return Answer(None, time.perf_counter() - begin, "no answer")
    spent = time.perf_counter() - begin
    if not found.solved[0]:
        return Answer(None, spent, "no answer")
    return Answer(found.log_mole_fractions[0], spent)


class PosedToCantera:
    """A problem as a Cantera phase with the same potentials, and a feed with exactly its element totals."""

    def __init__(self, phase: Any, case: Problem, fractions: np.ndarray) -> None:
        self._phase, self._case, self._fractions = phase, case, fractions

    @classmethod
    def of(cls, case: Problem) -> PosedToCantera | None:
        """None where Cantera refuses the species or sees other potentials."""
        from gibbsmin.cantera_gas import CanteraGas, NoAnswerError
        from gibbsmin.comparison import SAME_DATA
        from gibbsmin.species import ThermoTable, standard_library

        library = standard_library()
        table = ThermoTable([library.find(name) for name in case.names], extrapolate=True)
        try:
            gas = CanteraGas(table, (case.temperature, case.temperature))
        except NoAnswerError:
            return None
        expected = case.potentials - np.log(case.pressure)
        theirs = gas.standard_gibbs_RT(case.temperature)
        if not (np.abs(theirs - expected) <= SAME_DATA * np.maximum(1.0, np.abs(expected))).all():
            return None
        return cls(gas._gas, case, feed_of(case))

    def solve(self, solver: str) -> Answer:
        """By one of Cantera's solvers; guarding standard output is not part of the time."""
        from gibbsmin.cantera_gas import silenced

        case, phase = self._case, self._phase
        failure = ""
        with silenced():
            begin = time.perf_counter()
            try:
                phase.TPX = case.temperature, case.pressure * 1e5, self._fractions
                phase.equilibrate("TP", solver=solver)
            except Exception:  # whatever it raises is no answer
                failure = "no answer"
            spent = time.perf_counter() - begin
        if failure:
            return Answer(None, spent, failure)
        with np.errstate(divide="ignore", invalid="ignore"):
            return Answer(np.log(phase.X), spent)


def feed_of(case: Problem) -> np.ndarray:
    """Mole fractions (S,) of few neutral species with exactly the element totals of the problem.

    For the kind "dense", whose feed holds every species, a mixture of all that may be present. Totals that only
    rounding keeps from being feasible are met to rounding.
    """
    rows = [row for row, name in enumerate(case.elements) if name not in ("charge", "all atoms")]
    charges = case.formula_matrix[case.elements.index("charge")] if "charge" in case.elements else None
    neutral = np.arange(len(case.members)) if charges is None else np.flatnonzero(charges == 0)
    exact = [[reference.exact(v) for v in case.formula_matrix[row, neutral]] for row in rows]
    totals = [reference.exact(case.element_amounts[row]) for row in rows]
    out = np.zeros(len(case.members))
    try:
        tableau = reference._feasible_tableau(exact, totals)
    except reference.InfeasibleError:
        out[neutral] = nnls(case.formula_matrix[rows][:, neutral], case.element_amounts[rows])[0]
        out /= out.sum()
        return out
    vertex = reference.interior_point(tableau) if case.kind == "dense" else tableau.vertex()
    total = sum(vertex)
    out[neutral] = [float(value / total) for value in vertex]
    return out
