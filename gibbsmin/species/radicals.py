"""Which species of the data count as radicals: the rule, and the departures from it.

A user who leaves radicals out wants the molecules that can be sampled, stored or shipped, so the mark is
wider than chemistry's word. A gas is marked when

1. it has an odd number of electrons, unless it holds a transition metal, a lanthanide or an actinide, whose
   open d and f shells make that count meaningless (FeCl3 vapour is odd and perfectly stable); or
2. it is listed in `REACTIVE`: free atoms of non-metals, carbenes and their relatives, bare clusters and
   triplet fragments, all with an even number of electrons;

and is not listed in `STABLE`: odd or open-shell molecules that plants meet as ordinary gases, and vapours of
metals. The mark is written into each record; this module gives the default for a record that leaves it out,
and tests compare the shipped records with it.
"""

from __future__ import annotations

from collections.abc import Mapping

from gibbsmin.species.elements import ATOMIC_NUMBERS

__all__ = ["REACTIVE", "STABLE", "has_odd_electron", "is_radical"]

# fmt: off
_ATOMS = ("C", "O", "S", "Si", "Ge")
_BARE_CLUSTERS = (
    "C2", "C3", "C4", "C5", "B2", "B2C", "BN", "AlN", "LiN", "Si2", "Si3", "SiC", "SiC2", "Si2C",
)
_CARBENES = (
    "CH2", "CHF", "CHCl", "CF2", "CFCl", "CCl2", "CBr2", "CI2", "SiH2", "SiHF", "SiHCl", "BH", "BH3", "B2H2",
)
_TRIPLETS = ("C2O", "CNN", "NCN", "HCCN", "NH", "ND", "NF", "PH", "PF", "PCl", "SO")
# fmt: on

REACTIVE = frozenset((*_ATOMS, *_BARE_CLUSTERS, *_CARBENES, *_TRIPLETS))
"""Gases marked although their electrons are even in number. `C2H2 (vinylidene)`, which shares its formula
with acetylene, is marked in its record. O2 and S2 have two unpaired electrons, but are ordinary gases."""

STABLE = frozenset(["NO", "NO2", "ClO2", "Li", "Na", "K", "Rb", "Cs", "Cu", "Ag", "Al", "Ga", "In"])
"""Gases not marked although their electrons are odd in number."""


def has_odd_electron(composition: Mapping[str, float], charge: int) -> bool:
    """Whether the number of electrons is odd, for species without open d and f shells (else False)."""
    if any(_has_open_inner_shell(ATOMIC_NUMBERS[symbol]) for symbol in composition):
        return False
    electrons = sum(ATOMIC_NUMBERS[symbol] * count for symbol, count in composition.items()) - charge
    return electrons % 2 == 1


def is_radical(formula: str, composition: Mapping[str, float], charge: int) -> bool:
    """The mark that the rule above gives a gas of this formula."""
    if formula in STABLE or not composition:  # the electron is no radical
        return False
    return formula in REACTIVE or has_odd_electron(composition, charge)


def _has_open_inner_shell(number: int) -> bool:
    """Groups 3 to 11 and the lanthanides and actinides."""
    return 21 <= number <= 29 or 39 <= number <= 47 or 57 <= number <= 79 or 89 <= number <= 111
