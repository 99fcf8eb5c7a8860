"""Whole maps: many points of the same species, cut into chunks and spread over threads."""

from gibbsmin.grid.solution import GridSolution
from gibbsmin.grid.solve import solve_grid, solve_points

__all__ = ["GridSolution", "solve_grid", "solve_points"]
