"""What is asked about reactions, ready to be worked out: read from a scenario or put together by hand."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from gibbsmin.constants import STANDARD_PRESSURE
from gibbsmin.reactions.against_mixture import MixtureTolerance
from gibbsmin.reactions.approach import Analysis
from gibbsmin.reactions.equation import Reaction
from gibbsmin.reactions.measured import MeasuredConstants
from gibbsmin.reactions.shortcut_error import Tolerance
from gibbsmin.reactions.shortcuts import Shortcut
from gibbsmin.reactions.subset import Subset

if TYPE_CHECKING:
    from gibbsmin.species import Species

ALL_TERMS = (2, 3, 4)


@dataclass(frozen=True)
class ReactionsWanted:
    """Attributes:
    reactions: those with a name.
    shortcuts: to be audited; each knows its reaction.
    subsets: to be compared with the whole mixture, each with every shortcut of its reactions.
    tolerance: of shortcuts. mixture_tolerance: of compositions.
    standard_pressure: Pa, of tabulated ln K. unit: base unit of K in best correlations ("1", "atm", "mol/L").
    terms: numbers of terms of best correlations.
    measured: sets of measured K.
    analyses: gas analyses. analysed: the reactions whose approach is wanted. analysis_species: records of the
        species of the analyses and feeds, by the names used there.
    """

    reactions: tuple[Reaction, ...]
    shortcuts: tuple[Shortcut, ...] = ()
    subsets: tuple[Subset, ...] = ()
    tolerance: Tolerance = field(default_factory=Tolerance)
    mixture_tolerance: MixtureTolerance = field(default_factory=MixtureTolerance)
    standard_pressure: float = STANDARD_PRESSURE
    unit: str = "1"
    terms: tuple[int, ...] = ALL_TERMS
    measured: tuple[MeasuredConstants, ...] = ()
    analyses: tuple[Analysis, ...] = ()
    analysed: tuple[Reaction, ...] = ()
    analysis_species: Mapping[str, Species] = field(default_factory=dict)

    def in_words(self) -> list[str]:
        """What will be worked out, one line each."""
        lines = [f"{each.name}: {each.equation}" for each in self.reactions]
        if self.shortcuts:
            lines.append(f"shortcuts to audit: {', '.join(each.name for each in self.shortcuts)}")
        if self.subsets:
            lines.append(f"alone against the whole map: {', '.join(each.name for each in self.subsets)}")
        lines += [
            f"measured K of {each.reaction.name}, {each.name}: {len(each)} values" for each in self.measured
        ]
        if self.analyses:
            names = ", ".join(each.name for each in self.analysed)
            lines.append(f"approach to equilibrium of {names}: {len(self.analyses)} analyses")
        return lines
