"""Every exception the package raises on purpose, as one tree.

GibbsminError
+-- FormulaError             a chemical formula that cannot be read
+-- UnknownSpeciesError      a name that is in no species file (suggestions attached)
+-- AmbiguousSpeciesError    a formula or CAS number that several species share (candidates attached)
+-- SpeciesDataError         a species record or file with faults (all of them attached)
+-- TemperatureRangeError    a temperature outside a species record's validity range
+-- ScenarioError            a scenario file with faults (all of them attached)
+-- ConditionsError          a feed, temperature or pressure that no gas can have
+-- ReactionError            a reaction that cannot be read, does not balance, or does not fit its use
+-- MeasurementError         measured values with faults (all of them attached)
+-- StudyError               a study file with faults (all of them attached)
+-- StudyRefusedError        a study that would not fit the disk, or whose folder is in use or holds something else
+-- StudyStoppedError        a study that could not go on (full disk, cluster lost); the same request resumes it
+-- FolderExistsError        an output folder that would be overwritten without being asked
+-- MissingPackageError      an optional package that the request needs is not installed
+-- ProblemError             arrays handed to the minimiser that do not fit together

Facts are fields, so a caller need not parse the message; all of them survive pickling.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any


class GibbsminError(Exception):
    """Base of all errors that a user can cause and mend."""

    def __reduce__(self) -> tuple[Any, ...]:
        return (_rebuild, (type(self), self.args, self.__dict__))


def _rebuild(kind: type[GibbsminError], args: tuple[Any, ...], fields: dict[str, Any]) -> GibbsminError:
    error = kind.__new__(kind, *args)
    error.args = args
    error.__dict__.update(fields)
    return error


class FormulaError(GibbsminError):
    """A chemical formula cannot be read."""

    def __init__(self, formula: str, reason: str) -> None:
        self.formula = formula
        self.reason = reason
        super().__init__(f"cannot read the formula {formula!r}: {reason}")


class UnknownSpeciesError(GibbsminError):
    """No species of that name, alias or formula."""

    def __init__(self, query: str, suggestions: Sequence[str] = ()) -> None:
        self.query = query
        self.suggestions = tuple(suggestions)
        hint = f"; did you mean {', '.join(self.suggestions)}?" if self.suggestions else ""
        super().__init__(f"no species is called {query!r}{hint}")


class AmbiguousSpeciesError(GibbsminError):
    """Several species share the formula or CAS number that was asked for."""

    def __init__(self, query: str, candidates: Sequence[str]) -> None:
        self.query = query
        self.candidates = tuple(candidates)
        super().__init__(f"{query!r} can mean several species; choose one of {', '.join(self.candidates)}")


@dataclass(frozen=True)
class Fault:
    """One fault in a file: where it is, what was found, and what would have been right."""

    message: str
    file: str = ""
    line: int | None = None
    column: int | None = None

    def __str__(self) -> str:
        place = self.file
        if self.line is not None:
            place += f":{self.line}"
            if self.column is not None:
                place += f":{self.column}"
        return f"{place}: {self.message}" if place else self.message


class _FaultyFileError(GibbsminError):
    def __init__(self, faults: Sequence[Fault]) -> None:
        self.faults = tuple(faults)
        super().__init__("\n".join(str(fault) for fault in self.faults))


class SpeciesDataError(_FaultyFileError):
    """A species record or file has faults; all are listed."""


class ScenarioError(_FaultyFileError):
    """A scenario file has faults; all are listed."""


class MeasurementError(_FaultyFileError):
    """A table of measured values has faults; all are listed."""


class ReactionError(GibbsminError):
    """A reaction cannot be read, does not balance, or does not fit what it is used for."""

    def __init__(self, reaction: str, reason: str) -> None:
        self.reaction = reaction
        self.reason = reason
        super().__init__(f"reaction {reaction!r}: {reason}")


class StudyError(_FaultyFileError):
    """A study file, or a case that it makes, has faults; all are listed."""


class StudyRefusedError(GibbsminError):
    """A study is not begun: it would not fit, or its folder is in use or holds something else.

    `folder` is where it was to be kept.
    """

    def __init__(self, folder: str, reason: str) -> None:
        self.folder = folder
        self.reason = reason
        super().__init__(f"{folder}: {reason}")


class StudyStoppedError(GibbsminError):
    """A study could not go on; what is finished is kept, and the same request goes on from there.

    `finished` of its `chunks` are done.
    """

    def __init__(self, reason: str, finished: int, chunks: int) -> None:
        self.reason = reason
        self.finished = finished
        self.chunks = chunks
        super().__init__(
            f"{reason}; {finished} of {chunks} chunks are finished and kept: once that is mended, "
            "run the same command again and it goes on from there"
        )


class TemperatureRangeError(GibbsminError):
    """A temperature outside the validity range of a species record."""

    def __init__(self, species: str, temperature: float, lower: float, upper: float) -> None:
        self.species = species
        self.temperature = temperature
        self.lower = lower
        self.upper = upper
        super().__init__(
            f"{species}: {temperature:g} K is outside the range {lower:g} to {upper:g} K of its data; "
            "leave the species out, change the temperatures, or allow extrapolation"
        )


class ConditionsError(GibbsminError):
    """A feed, temperature or pressure that no gas can have, or arrays of them that do not fit together.

    `quantity` names it as the caller does ("temperature", "feed", "feed of CH4").
    """

    def __init__(self, quantity: str, reason: str) -> None:
        self.quantity = quantity
        self.reason = reason
        super().__init__(f"{quantity}: {reason}")


class FolderExistsError(GibbsminError):
    """The output folder exists and overwriting was not asked for, or would destroy what is not ours."""

    def __init__(self, folder: str, reason: str = "") -> None:
        self.folder = folder
        self.reason = reason
        remedy = reason or "choose another folder or ask for it to be overwritten"
        super().__init__(f"{folder} exists already; {remedy}")


class MissingPackageError(GibbsminError):
    """An optional package that the request needs is not installed."""

    def __init__(self, package: str, purpose: str) -> None:
        self.package = package
        self.purpose = purpose
        super().__init__(
            f"{purpose} needs the package {package}, which is not installed: pip install {package}"
        )


class ProblemError(GibbsminError):
    """Arrays handed to the minimiser have wrong shapes or values that no gas can have."""
