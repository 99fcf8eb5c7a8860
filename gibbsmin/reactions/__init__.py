"""Reactions: K(T), shortcuts and their error, one reaction against the whole mixture, measured K, approach.

    >>> from gibbsmin.reactions import read_reaction, best_fit
    >>> print(best_fit(read_reaction("CO + H2O = CO2 + H2"), 473, 773, terms=2))  # doctest: +SKIP

Pure functions and frozen results: nothing here reads files or draws. Names are loaded on first use.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from gibbsmin.reactions.against_mixture import Comparison, FullMixture, MixtureTolerance, Reason, compare
    from gibbsmin.reactions.approach import Analysis, Approach, approaches, complete_analysis
    from gibbsmin.reactions.best_correlation import BestFit, best_fit, best_fits
    from gibbsmin.reactions.equation import Reaction, read_reaction
    from gibbsmin.reactions.independence import Coverage, coverage
    from gibbsmin.reactions.measured import MeasuredConstants, measured_constants
    from gibbsmin.reactions.second_law_analysis import SecondLaw, second_law
    from gibbsmin.reactions.shortcut_error import Tolerance, Window, shortcut_errors, windows
    from gibbsmin.reactions.shortcuts import ConstantEnthalpy, ConstantHeatCapacity, Correlation
    from gibbsmin.reactions.standard import (
        ReactionFunctions,
        StandardFunctions,
        direction,
        standard_functions,
        validity,
    )
    from gibbsmin.reactions.subset import MapConditions, Subset, conserved_rows, solve_subset
    from gibbsmin.reactions.third_law_analysis import ThirdLaw, third_law

_HOME_OF = {
    "Analysis": "approach",
    "Approach": "approach",
    "BestFit": "best_correlation",
    "Comparison": "against_mixture",
    "ConstantEnthalpy": "shortcuts",
    "ConstantHeatCapacity": "shortcuts",
    "Correlation": "shortcuts",
    "Coverage": "independence",
    "FullMixture": "against_mixture",
    "MapConditions": "subset",
    "MeasuredConstants": "measured",
    "MixtureTolerance": "against_mixture",
    "Reaction": "equation",
    "ReactionFunctions": "standard",
    "Reason": "against_mixture",
    "SecondLaw": "second_law_analysis",
    "StandardFunctions": "standard",
    "Subset": "subset",
    "ThirdLaw": "third_law_analysis",
    "Tolerance": "shortcut_error",
    "Window": "shortcut_error",
    "approaches": "approach",
    "best_fit": "best_correlation",
    "best_fits": "best_correlation",
    "compare": "against_mixture",
    "complete_analysis": "approach",
    "conserved_rows": "subset",
    "coverage": "independence",
    "direction": "standard",
    "measured_constants": "measured",
    "read_reaction": "equation",
    "second_law": "second_law_analysis",
    "shortcut_errors": "shortcut_error",
    "solve_subset": "subset",
    "standard_functions": "standard",
    "third_law": "third_law_analysis",
    "validity": "standard",
    "windows": "shortcut_error",
}

__all__ = [
    "Analysis",
    "Approach",
    "BestFit",
    "Comparison",
    "ConstantEnthalpy",
    "ConstantHeatCapacity",
    "Correlation",
    "Coverage",
    "FullMixture",
    "MapConditions",
    "MeasuredConstants",
    "MixtureTolerance",
    "Reaction",
    "ReactionFunctions",
    "Reason",
    "SecondLaw",
    "StandardFunctions",
    "Subset",
    "ThirdLaw",
    "Tolerance",
    "Window",
    "approaches",
    "best_fit",
    "best_fits",
    "compare",
    "complete_analysis",
    "conserved_rows",
    "coverage",
    "direction",
    "measured_constants",
    "read_reaction",
    "second_law",
    "shortcut_errors",
    "solve_subset",
    "standard_functions",
    "third_law",
    "validity",
    "windows",
]


def __getattr__(name: str) -> Any:
    if name in _HOME_OF:
        return getattr(import_module(f"gibbsmin.reactions.{_HOME_OF[name]}"), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
