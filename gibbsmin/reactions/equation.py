"""Reactions as chemists write them: `CH4 + H2O = CO + 3 H2`, `C(gr) + 1/2 O2 = CO`, `H2O(l) -> H2O(g)`.

Coefficients are whole numbers, decimals or fractions and are kept exactly. Species are looked up in a library
by name, alias or formula; a state symbol chooses between a gas and a condensed substance.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import TYPE_CHECKING

from gibbsmin.errors import AmbiguousSpeciesError, ReactionError, UnknownSpeciesError
from gibbsmin.reactions.exact import Row, as_fraction, null_space, whole

if TYPE_CHECKING:
    from gibbsmin.species import Species, SpeciesLibrary

_ARROWS = ("<=>", "<->", "-->", "\u21cc", "\u21c4", "\u2194", "\u2192", "->", "=>", "=")
_COEFFICIENT = re.compile(
    r"(?:(?P<whole>\d+)\s+(?=\d+/))?(?P<number>\d+\s*/\s*\d+|\d+\.\d*|\.\d+|\d+)\s*[*\u00b7]?\s*(?P<rest>.*)\Z",
    re.DOTALL,
)
_LOCANT = re.compile(r"\d+(?:,\d+)*-")  # 1,3-butadiene, 2-butene: a name, not two of something
_VULGAR = {"\u00bd": "1/2", "\u2153": "1/3", "\u2154": "2/3", "\u00bc": "1/4", "\u00be": "3/4"}
LONGEST_EQUATION = 1000
"""Characters; what is longer is no equation but a file in the wrong place."""


@dataclass(frozen=True)
class Reaction:
    """A balanced reaction.

    Attributes:
        name: how tables and figures call it.
        species: those that take part, in the order of first mention.
        coefficients: their stoichiometric numbers, negative for what is used up.
    """

    name: str
    species: tuple[Species, ...]
    coefficients: tuple[Fraction, ...]

    @cached_property
    def stoichiometry(self) -> Mapping[str, Fraction]:
        """Species name -> stoichiometric number."""
        return dict(zip((each.name for each in self.species), self.coefficients, strict=True))

    @cached_property
    def equation(self) -> str:
        """The reaction in the names of the data: `CO + H2O = CO2 + H2`."""
        return equation_text(self.stoichiometry)

    @cached_property
    def gas_change(self) -> Fraction:
        """Moles of gas formed less moles of gas used up, the exponent of pressure in Kp."""
        return sum(
            (nu for each, nu in zip(self.species, self.coefficients, strict=True) if each.state == "g"),
            Fraction(0),
        )

    def over(self, names: Sequence[str]) -> Row:
        """Stoichiometric numbers over a list of species names. Raises ReactionError if one is not there."""
        missing = [name for name in self.stoichiometry if name not in names]
        if missing:
            raise ReactionError(
                self.name,
                f"{', '.join(missing)} is not among the species of the mixture: {_some(names)}",
            )
        return [self.stoichiometry.get(name, Fraction(0)) for name in names]

    def __str__(self) -> str:
        return self.equation


def read_reaction(text: str, *, name: str = "", library: SpeciesLibrary | None = None) -> Reaction:
    """Read and check a reaction.

    Args:
        text: the equation; sides are parted by `=` or an arrow, terms by `+`.
        name: how to call it (default: the equation itself).
        library: where species are looked up (default: the standard library).

    Raises:
        ReactionError: not readable, a species is unknown or ambiguous, or a side is short of an element; the
            message then names the element and the difference.

    Example:
        >>> read_reaction("CH4 + 2 H2O = CO2 + 4 H2").gas_change
        Fraction(2, 1)
    """
    if library is None:
        from gibbsmin.species import standard_library

        library = standard_library()
    shown = text.strip()
    if len(shown) > LONGEST_EQUATION:
        raise ReactionError(shown[:40] + "...", f"it is longer than {LONGEST_EQUATION} characters")
    total: dict[str, Fraction] = {}
    found: dict[str, Species] = {}
    for sign, side in zip((-1, 1), _sides(shown), strict=True):
        for term in _terms(shown, side):
            coefficient, species = _term(shown, term, library)
            found[species.name] = species
            total[species.name] = total.get(species.name, Fraction(0)) + sign * coefficient
    kept = [species for species in found.values() if total[species.name]]
    if not kept:
        raise ReactionError(shown, "both sides are the same; nothing reacts")
    reaction = Reaction(name.strip() or shown, tuple(kept), tuple(total[species.name] for species in kept))
    _require_balance(reaction, shown)
    return reaction


def reaction_of(name: str, species: Iterable[Species], coefficients: Iterable[Fraction]) -> Reaction:
    """A reaction from stoichiometric numbers, zeros left out; the name defaults to the equation."""
    pairs = [(each, nu) for each, nu in zip(species, coefficients, strict=True) if nu]
    made = Reaction(name, tuple(each for each, _ in pairs), tuple(nu for _, nu in pairs))
    _require_balance(made, name or made.equation)
    return made if name else Reaction(made.equation, made.species, made.coefficients)


def equation_text(stoichiometry: Mapping[str, Fraction]) -> str:
    """`CO + 1/2 O2 = CO2` of stoichiometric numbers."""

    def side(sign: int) -> str:
        terms = [(abs(nu), name) for name, nu in stoichiometry.items() if nu * sign > 0]
        return " + ".join(name if nu == 1 else f"{nu} {name}" for nu, name in terms) or "nothing"

    return f"{side(-1)} = {side(1)}"


def element_rows(species: Sequence[Species]) -> tuple[list[str], list[Row]]:
    """Elements (and "charge", if any species has one) and their exact formula matrix, one row each."""
    elements = list(dict.fromkeys(symbol for each in species for symbol in each.composition))
    rows = [[as_fraction(each.composition.get(symbol, 0)) for each in species] for symbol in elements]
    if any(each.charge for each in species):
        elements.append("charge")
        rows.append([Fraction(each.charge) for each in species])
    return elements, rows


# --- reading -------------------------------------------------------------------------------------------------


def _sides(text: str) -> tuple[str, str]:
    if not text:
        raise ReactionError(text, "it is empty; write it as CO + H2O = CO2 + H2")
    for arrow in _ARROWS:
        parts = text.split(arrow)
        if len(parts) > 2:  # a double bond written out: CH2=CH2 + H2 = C2H6
            parts = text.split(f" {arrow} ")
        if len(parts) == 2:
            left, right = (part.strip() for part in parts)
            if not left or not right:
                side = "left" if not left else "right"
                raise ReactionError(text, f"nothing stands on the {side} side")
            return left, right
        if arrow in text:
            raise ReactionError(text, f"it needs one {arrow!r} with blanks around it between its two sides")
    raise ReactionError(text, "it has no '=' between its two sides; write it as CO + H2O = CO2 + H2")


def _terms(text: str, side: str) -> list[str]:
    """The terms of one side. A `+` parts terms unless nothing or another `+` follows: then it is a charge."""
    terms, start, depth = [], 0, 0
    for position, character in enumerate(side):
        depth += {"(": 1, ")": -1}.get(character, 0)
        rest = side[position + 1 :].lstrip()
        if character == "+" and depth == 0 and rest and not rest.startswith("+"):
            terms.append(side[start:position].strip())
            start = position + 1
    terms.append(side[start:].strip())
    if not all(terms) or side.endswith((" +", "\t+")):
        raise ReactionError(text, "a term is missing beside a '+'")
    return terms


def _term(text: str, term: str, library: SpeciesLibrary) -> tuple[Fraction, Species]:
    for sign, digits in _VULGAR.items():
        term = term.replace(sign, f" {digits} ").strip()
    match = None if _LOCANT.match(term) else _COEFFICIENT.match(term)
    if match is None:
        return Fraction(1), _species(text, term, library)
    try:
        coefficient = Fraction(match["number"].replace(" ", "")) + int(match["whole"] or 0)
    except ZeroDivisionError:
        raise ReactionError(text, f"the coefficient of {term!r} divides by zero") from None
    if not coefficient:
        raise ReactionError(text, f"the coefficient of {term!r} is zero; leave the term out")
    if not match["rest"]:
        raise ReactionError(text, f"no species follows the number {term!r}")
    return coefficient, _species(text, match["rest"].strip(), library)


def _species(text: str, query: str, library: SpeciesLibrary) -> Species:
    try:
        species = library.find(query)
    except (UnknownSpeciesError, AmbiguousSpeciesError) as error:
        raise ReactionError(text, str(error)) from None
    if species.state == "g" and query == species.name and _is_atom(species):
        # "C" in a chemist's equation is graphite as a rule; the data know a gas of that name.
        solids = [each.name for each in library.condensed(species.composition) if _is_atom(each)]
        if solids:
            raise ReactionError(
                text, f"{query} can mean the gas or a condensed phase; write {query}(g) or {solids[0]}"
            )
    return species


def _is_atom(species: Species) -> bool:
    return sum(species.composition.values()) == 1 and not species.charge


# --- balance -------------------------------------------------------------------------------------------------


def _require_balance(reaction: Reaction, shown: str) -> None:
    elements, rows = element_rows(reaction.species)
    faults = []
    for element, row in zip(elements, rows, strict=True):
        products = [a * nu for a, nu in zip(row, reaction.coefficients, strict=True)]
        left, right = -sum(x for x in products if x < 0), sum(x for x in products if x > 0)
        if element == "charge":
            charges = list(zip(row, reaction.coefficients, strict=True))
            left = sum((-a * nu for a, nu in charges if nu < 0), Fraction(0))
            right = sum((a * nu for a, nu in charges if nu > 0), Fraction(0))
        if left != right:
            short = "left" if left < right else "right"
            faults.append(
                f"{element}: {left} on the left, {right} on the right, "
                f"so {abs(left - right)} missing on the {short}"
            )
    if faults:
        raise ReactionError(shown, f"it does not balance; {'; '.join(faults)}{_remedy(reaction, rows)}")


def _remedy(reaction: Reaction, rows: list[Row]) -> str:
    """The balanced equation, where the species on their sides allow exactly one."""
    basis = null_space(rows, len(reaction.species))
    if len(basis) != 1:
        return ""
    vector = whole(basis[0])
    if vector[0] * reaction.coefficients[0] < 0:
        vector = [-value for value in vector]
    if any(a * b <= 0 for a, b in zip(vector, reaction.coefficients, strict=True)):
        return ""
    names = [each.name for each in reaction.species]
    return f"; balanced it would be {equation_text(dict(zip(names, vector, strict=True)))}"


def _some(names: Sequence[str], most: int = 12) -> str:
    more = len(names) - most
    return ", ".join(names[:most]) + (f" and {more} more" if more > 0 else "")
