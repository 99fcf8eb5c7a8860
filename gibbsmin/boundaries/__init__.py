"""Where something happens along an axis of the grid: a phase begins to form, a result takes a given value."""

from __future__ import annotations

from gibbsmin.boundaries.crossings import Crossings, find_crossings
from gibbsmin.boundaries.results import Boundary, add_boundaries, boundary_table
from gibbsmin.boundaries.tracing import trace_boundaries

__all__ = [
    "Boundary",
    "Crossings",
    "add_boundaries",
    "boundary_table",
    "find_crossings",
    "trace_boundaries",
]
