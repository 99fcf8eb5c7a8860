"""Reactions: K(T), shortcuts and their error, one reaction against the whole mixture, measured K, approach.

    >>> from gibbsmin.reactions import read_reaction, best_fit
    >>> print(best_fit(read_reaction("CO + H2O = CO2 + H2"), 473, 773, terms=2))  # doctest: +SKIP

Pure functions and frozen results: nothing here reads files or draws. Names are loaded on first use.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from gibbsmin.reactions.best_fit import BestFit, best_fit, best_fits
    from gibbsmin.reactions.equation import Reaction, read_reaction
    from gibbsmin.reactions.independence import Coverage, coverage
    from gibbsmin.reactions.shortcut_error import Tolerance, Window, shortcut_errors, windows
    from gibbsmin.reactions.shortcuts import ConstantEnthalpy, ConstantHeatCapacity, Correlation
    from gibbsmin.reactions.standard import StandardFunctions, direction, standard_functions, validity

_HOME_OF = {
    "BestFit": "best_fit",
    "ConstantEnthalpy": "shortcuts",
    "ConstantHeatCapacity": "shortcuts",
    "Correlation": "shortcuts",
    "Coverage": "independence",
    "Reaction": "equation",
    "StandardFunctions": "standard",
    "Tolerance": "shortcut_error",
    "Window": "shortcut_error",
    "best_fit": "best_fit",
    "best_fits": "best_fit",
    "coverage": "independence",
    "direction": "standard",
    "read_reaction": "equation",
    "shortcut_errors": "shortcut_error",
    "standard_functions": "standard",
    "validity": "standard",
    "windows": "shortcut_error",
}

__all__ = [
    "BestFit",
    "ConstantEnthalpy",
    "ConstantHeatCapacity",
    "Correlation",
    "Coverage",
    "Reaction",
    "StandardFunctions",
    "Tolerance",
    "Window",
    "best_fit",
    "best_fits",
    "coverage",
    "direction",
    "read_reaction",
    "shortcut_errors",
    "standard_functions",
    "validity",
    "windows",
]


def __getattr__(name: str) -> Any:
    if name in _HOME_OF:
        return getattr(import_module(f"gibbsmin.reactions.{_HOME_OF[name]}"), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
