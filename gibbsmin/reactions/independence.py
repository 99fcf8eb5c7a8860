"""How many reactions a list of species has, and whether a set of reactions covers them.

The number of independent reactions is the number of species less the rank of their formula matrix (Gibbs' rule
of stoichiometry; Smith & Missen, *Chemical Reaction Equilibrium Analysis* (1982), ch. 2). All ranks are exact.
"""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING

from gibbsmin.reactions.equation import Reaction, element_rows, reaction_of
from gibbsmin.reactions.exact import Span, reduced, weights_in, whole

if TYPE_CHECKING:
    from gibbsmin.species import Species


MOST_SHOWN = 10
"""Reactions and species that the text lists; the attributes hold all."""


def _cut(names: Sequence[str]) -> str:
    more = len(names) - MOST_SHOWN
    return ", ".join(names[:MOST_SHOWN]) + (f" and {more} more" if more > 0 else "")


@dataclass(frozen=True)
class Redundant:
    """A reaction that is a combination of earlier ones: `weights` maps their names to factors."""

    reaction: Reaction
    weights: dict[str, Fraction]

    def __str__(self) -> str:
        parts: list[str] = []
        for name, weight in sorted(self.weights.items(), key=lambda item: item[1] < 0):
            sign = "-" if weight < 0 else ("+" if parts else "")
            factor = "" if abs(weight) == 1 else f"{abs(weight)} x "
            parts.append(f"{sign} {factor}{_bracketed(name)}".strip())
        return f"{_bracketed(self.reaction.name)} = {' '.join(parts)}"


def _bracketed(name: str) -> str:
    """A name that is an equation itself in brackets, so that its signs are not taken for those of the sum."""
    return f"({name})" if "=" in name else name


@dataclass(frozen=True)
class Coverage:
    """What a set of reactions says about a list of species.

    Attributes:
        species: the list.
        number: independent reactions that the list has.
        basis: such a set, one reaction for each species that is no component.
        given: the reactions that were asked about.
        independent: those of them that are independent, the first ones taken first.
        redundant: the others, each as a combination of the independent ones before it.
        untouched: species of the list that no given reaction changes although some reaction could.
        inert: species that no reaction of the list can change.
        missing: reactions that would complete the given ones.
    """

    species: tuple[Species, ...]
    number: int
    basis: tuple[Reaction, ...]
    given: tuple[Reaction, ...]
    independent: tuple[Reaction, ...]
    redundant: tuple[Redundant, ...]
    untouched: tuple[str, ...]
    inert: tuple[str, ...]
    missing: tuple[Reaction, ...]

    @property
    def spans(self) -> bool:
        """Whether the given reactions reach every composition that the element balances allow."""
        return len(self.independent) == self.number

    def __str__(self) -> str:
        count = len(self.species)
        lines = [
            f"{count} species, {count - self.number} independent balances, "
            f"so {self.number} independent reactions"
        ]
        if not self.given:
            lines += ["an independent set:", *(f"  {each.equation}" for each in self.basis)]
        else:
            verdict = "it spans them all" if self.spans else f"it leaves {len(self.missing)} out"
            lines.append(f"the set given has {len(self.independent)} independent reactions; {verdict}")
            lines += [f"redundant: {each}" for each in self.redundant]
            if self.untouched:
                lines.append(f"left as fed by the set: {_cut(self.untouched)}")
            if self.missing:
                shown = [f"  {each.equation}" for each in self.missing[:MOST_SHOWN]]
                more = len(self.missing) - len(shown)
                lines += ["it would be complete with:", *shown, *([f"  and {more} more"] if more else [])]
        if self.inert:
            lines.append(f"in no reaction: {_cut(self.inert)}")
        return "\n".join(
            part for line in lines for part in textwrap.wrap(line, 100, subsequent_indent="    ") or [""]
        )


def coverage(
    species: Sequence[Species],
    reactions: Sequence[Reaction] = (),
    *,
    abundance: Sequence[float] | None = None,
) -> Coverage:
    """Compare reactions with a list of species.

    Args:
        species: S different species.
        reactions: any number of reactions among them.
        abundance: (S,) if given, the most abundant species serve as components of the sets that are made up,
            so that each reaction forms one less abundant species from more abundant ones; else the first do.

    Raises:
        ReactionError: a reaction has a species that is not in the list.
    """
    names = [each.name for each in species]
    basis = _formation_reactions(species, abundance)
    independent, redundant = split_redundant(reactions, names)
    span = Span([each.over(names) for each in independent])
    missing = [each for each in basis if span.add(each.over(names))]
    can_change = {name for each in basis for name in each.stoichiometry}
    changed = {name for each in reactions for name in each.stoichiometry}
    return Coverage(
        tuple(species),
        len(basis),
        basis,
        tuple(reactions),
        independent,
        redundant,
        tuple(name for name in names if name in can_change and name not in changed),
        tuple(name for name in names if name not in can_change),
        tuple(missing) if reactions else (),
    )


def split_redundant(
    reactions: Sequence[Reaction], names: Sequence[str]
) -> tuple[tuple[Reaction, ...], tuple[Redundant, ...]]:
    """The reactions that are independent of those before them, and the others as combinations.

    Raises ReactionError for a species that is not among `names`.
    """
    independent: list[Reaction] = []
    redundant: list[Redundant] = []
    rows: list[list[Fraction]] = []
    for each in reactions:
        row = each.over(names)
        weights = weights_in(rows, row)
        if weights is None:
            independent.append(each)
            rows.append(row)
        else:
            by_name = {r.name: w for r, w in zip(independent, weights, strict=True) if w}
            redundant.append(Redundant(each, by_name))
    return tuple(independent), tuple(redundant)


def _formation_reactions(
    species: Sequence[Species], abundance: Sequence[float] | None
) -> tuple[Reaction, ...]:
    """One reaction for each species that is no component, with the components chosen greedily in order."""
    order = list(range(len(species)))
    if abundance is not None:
        order.sort(key=lambda j: -abundance[j])
    ordered = [species[j] for j in order]
    _, rows = element_rows(ordered)
    echelon, pivots = reduced(rows)
    made = []
    # Without abundances in the order of the list; with them the most abundant first.
    for column in sorted(set(range(len(ordered))).difference(pivots)):
        vector = [Fraction(0)] * len(ordered)
        vector[column] = Fraction(1)
        for row, pivot in zip(echelon, pivots, strict=True):
            vector[pivot] = -row[column]
        made.append(reaction_of("", ordered, whole(vector)))
    return tuple(made)
