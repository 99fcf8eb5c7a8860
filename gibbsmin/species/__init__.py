"""Species: records, look-up and thermodynamic functions.

    >>> from gibbsmin.species import standard_library
    >>> standard_library().find("methane").formula
    'CH4'

`ThermoTable`, which needs numpy, is imported when first used; look-ups need the standard library and PyYAML.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

from gibbsmin.species.formula import Formula, parse_formula
from gibbsmin.species.library import IndexEntry, SpeciesLibrary, standard_library
from gibbsmin.species.record import Critical, Form, FormationEnthalpyUncertainty, Interval, Species
from gibbsmin.species.record_reader import read_file, read_species

if TYPE_CHECKING:
    from gibbsmin.species.thermo import ThermoTable

__all__ = [
    "Critical",
    "Form",
    "FormationEnthalpyUncertainty",
    "Formula",
    "IndexEntry",
    "Interval",
    "Species",
    "SpeciesLibrary",
    "ThermoTable",
    "parse_formula",
    "read_file",
    "read_species",
    "standard_library",
]

_LAZY = {"ThermoTable": "gibbsmin.species.thermo"}


def __getattr__(name: str) -> Any:
    if name in _LAZY:
        return getattr(import_module(_LAZY[name]), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
