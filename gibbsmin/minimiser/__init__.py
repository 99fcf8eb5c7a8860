"""Minimisation of the Gibbs energy: arrays in, arrays out; no species names, units, files or printing."""

from gibbsmin.minimiser.certificate import optimality_gap
from gibbsmin.minimiser.minimise import minimise
from gibbsmin.minimiser.result import Minimum, Status

__all__ = ["Minimum", "Status", "minimise", "optimality_gap"]
