"""Equilibrium composition maps of high-temperature gas processes by Gibbs-energy minimisation.

Names are loaded on first use (PEP 562), so that `import gibbsmin` stays light; the numerical
libraries come in only with the function that needs them.

    >>> import gibbsmin
    >>> result = gibbsmin.equilibrium({"CH4": 1, "H2O": 3}, temperature=1100.0, pressure=20e5)
    >>> float(result.mole_fraction.sel(species="H2"))  # doctest: +SKIP

Equilibrium is a limit, not a rate: a real unit may stay far from it. See the cautions in the README.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from gibbsmin import errors, reactions
    from gibbsmin.minimiser import Status, minimise
    from gibbsmin.outcome import Outcome
    from gibbsmin.outcome.mixture import compare_reactions
    from gibbsmin.running import run
    from gibbsmin.scenario import load_scenario
    from gibbsmin.solving import equilibrium
    from gibbsmin.species import standard_library
    from gibbsmin.study import load_study, open_study, run_study

    __version__: str

_HOME_OF = {
    "Outcome": "gibbsmin.outcome",
    "compare_reactions": "gibbsmin.outcome.mixture",
    "Status": "gibbsmin.minimiser",
    "equilibrium": "gibbsmin.solving",
    "load_scenario": "gibbsmin.scenario",
    "load_study": "gibbsmin.study",
    "minimise": "gibbsmin.minimiser",
    "open_study": "gibbsmin.study",
    "run": "gibbsmin.running",
    "run_study": "gibbsmin.study",
    "standard_library": "gibbsmin.species",
}

_GIVE_DATASETS = frozenset({"equilibrium", "run"})

__all__ = [
    "Outcome",
    "Status",
    "__version__",
    "compare_reactions",
    "equilibrium",
    "errors",
    "load_scenario",
    "load_study",
    "minimise",
    "open_study",
    "reactions",
    "run",
    "run_study",
    "standard_library",
]


def __getattr__(name: str) -> Any:
    value: Any
    if name == "__version__":
        value = _installed_version()
    elif name in ("errors", "reactions"):
        value = import_module(f"gibbsmin.{name}")
    elif name in _HOME_OF:
        value = getattr(import_module(_HOME_OF[name]), name)
        if name in _GIVE_DATASETS:
            import_module("gibbsmin.notebook")  # lets a data set plot itself: dataset.gibbsmin.plot
    else:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    globals()[name] = value  # kept, so that the next access does not come here
    return value


def __dir__() -> list[str]:
    return sorted(__all__)


def _installed_version() -> str:
    from importlib.metadata import PackageNotFoundError, version

    try:
        return version("gibbsmin")
    except PackageNotFoundError:  # a checkout on the path that was never installed
        return "0+unknown"
