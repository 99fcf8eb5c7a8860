"""The outcome of a run as one object."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import xarray as xr

    from gibbsmin.boundaries import Boundary
    from gibbsmin.crosscheck import CrossCheck
    from gibbsmin.reactions.results import ReactionResults
    from gibbsmin.scenario import Scenario


@dataclass(frozen=True, eq=False)
class Outcome:
    """Everything a run found out.

    Attributes:
        scenario: what was asked.
        dataset: composition, evidence and derived results at every point, with units and long names.
        crosscheck: the comparison with an independent program.
        settings: what else decided the numbers.
        reactions: answers about single reactions, where the scenario asks for some.
        boundaries: where phases begin to form or results take given values, as far as the scenario asks.
    """

    scenario: Scenario
    dataset: xr.Dataset
    crosscheck: CrossCheck
    settings: Mapping[str, Any]
    reactions: ReactionResults | None = None
    boundaries: tuple[Boundary, ...] = ()

    @property
    def points(self) -> int:
        """Number of points asked for."""
        return int(self.dataset["status"].size)

    @property
    def unsolved(self) -> int:
        """Number of points without a proven solution."""
        return int((self.dataset["status"] != 0).sum())

    @property
    def all_solved(self) -> bool:
        return self.unsolved == 0

    @property
    def all_confirmed(self) -> bool:
        """Whether no checked point differs from the independent program's answer."""
        return self.crosscheck.all_confirmed

    def summary(self) -> str:
        """A few lines and a table for people: what was solved, key results, evidence, cautions."""
        from gibbsmin.outcome.summary import summary_text

        return summary_text(self)

    def save(
        self,
        folder: str | PathLike[str],
        overwrite: bool = False,
        *,
        tables: Sequence[str] | None = None,
        further_files: Callable[[Path], object] | None = None,
    ) -> Path:
        """Write the results into a new folder: it appears complete or not at all.

        `results.nc` (NetCDF; `xarray.open_dataset` opens it), tables on request, `crosscheck.csv`,
        `boundaries.csv` where boundaries are wanted, the
        scenario's text and `record.json`, which says how all of it was made. The same outcome gives the same
        bytes.

        Args:
            folder: where to write; its parents are made.
            overwrite: replace the results of an earlier run in that folder. Other files there stay.
            tables: "csv", "parquet" or both; default what the scenario asks for.
            further_files: called with a folder to write more files into (figures); they become part of the
                result.

        Returns:
            the folder.

        Raises:
            FolderExistsError: the folder holds something, and overwriting was not asked for or it holds no
                results.
            MissingPackageError: a Parquet table is wanted and pyarrow is not installed.
        """
        from gibbsmin.outcome.saving import save

        return save(self, Path(folder), overwrite, tables=tables, further_files=further_files)

    def _repr_html_(self) -> str:
        from gibbsmin.outcome.summary import summary_html

        return summary_html(self)
