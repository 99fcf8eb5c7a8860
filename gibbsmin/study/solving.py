"""One chunk of a study: its cases solved one by one, its files written, its receipt returned.

This is all that runs on a worker, whatever the engine. A case is solved alone, never together with others, so
that its values do not depend on which cases share its chunk. What goes wrong in a case stays in that case.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from functools import lru_cache
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from gibbsmin.constants import STANDARD_PRESSURE
from gibbsmin.grid import GridSolution
from gibbsmin.solving import solve_arrays
from gibbsmin.study.block import Block, values_of
from gibbsmin.study.chunks import STORE, Chunk, FloatArray, Receipt
from gibbsmin.study.conditions import conditions_of, solver_table
from gibbsmin.study.rows import rows_of
from gibbsmin.study.shards import shard, write_whole
from gibbsmin.study.trail import Trail

if TYPE_CHECKING:
    from gibbsmin.species import ThermoTable
    from gibbsmin.study.model import Case, Layout

CaseSolver = Callable[["Layout", "ThermoTable", "Case", int | None], GridSolution]


def solve_case(layout: Layout, table: ThermoTable, case: Case, threads: int | None) -> GridSolution:
    """The map of one case, leading shape (F, nT, nP)."""
    gibbs = _standard_potentials(table, case.temperature.tobytes())
    log_pressure = np.log(case.pressure / STANDARD_PRESSURE)
    return solve_arrays(conditions_of(layout, case), gibbs, log_pressure, threads=threads)


@lru_cache(maxsize=16)
def _standard_potentials(table: ThermoTable, temperature: bytes) -> FloatArray:
    """g/RT of the standard states at temperatures that cases usually share."""
    return table.gibbs_RT(np.frombuffer(temperature))


def solve_chunk(
    chunk: Chunk,
    folder: str,
    run_name: str,
    threads: int | None = 1,
    solver: CaseSolver = solve_case,
) -> Receipt:
    """Solve the cases of a chunk, write its files and then its receipt.

    Args:
        folder: of the study, as this process sees it.
        run_name: of this run, by which a worker's traces of death are told from those of earlier runs.
        threads: for the solver. solver: of one case.

    Raises OSError when the files cannot be written (a full disk).
    """
    home = Path(folder)
    group, layout = chunk.group, chunk.group.layout
    table = solver_table(layout)
    trail = Trail.of(home, chunk.group.path, chunk.number, run_name)
    deadly = trail.deadly_cases()
    block = Block(chunk, table)
    with trail:
        for i, case in enumerate(chunk.cases):
            begun = time.perf_counter()
            if case.number in deadly:
                block.fail(i, "its process died each time this case was being solved")
            else:
                trail.begin(case.number)
                try:
                    block.fill(i, case, solver(layout, table, case, threads))
                except Exception as error:
                    block.fail(i, f"{type(error).__name__}: {error}")
            block.seconds[i] = time.perf_counter() - begun
        trail.begin(None)
        values = dict(values_of(chunk, block, table))
    rows = rows_of(chunk, block, values, table)
    files = {}
    for array in group.arrays:
        path = "/".join(filter(None, [STORE, group.path, array.file_of(chunk.number)]))
        files[path] = write_whole(home / path, shard(array, values[array.name]))
    receipt = Receipt(chunk.inputs, files, tuple(rows))
    write_whole(home / chunk.receipt_file, [receipt.as_json()])
    trail.remove()
    return receipt
