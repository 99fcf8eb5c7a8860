"""A finished study, opened: its labelled data set and its summary."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING, Any

import xarray as xr

from gibbsmin.errors import StudyRefusedError
from gibbsmin.study.chunks import STORE
from gibbsmin.study.shards import file_digest
from gibbsmin.study.store import MANIFEST, PROGRAM, SUMMARY

if TYPE_CHECKING:
    import pandas as pd


@dataclass(frozen=True, eq=False)
class StudyResults:
    """What `open_study` gives.

    Attributes:
        folder: of the study.
        manifest: what the store consists of and what it was made from.
        lazy: whether data sets hold Dask arrays.
    """

    folder: Path
    manifest: Mapping[str, Any]
    lazy: bool = False

    @cached_property
    def datasets(self) -> Mapping[str, xr.Dataset]:
        """Data set by name of the maps: "all" where every case has the same axes and species, else "maps_1" ...

        Dimensions: `case`, the axes of the map, `species`. Values are read from disk when they are used.
        """
        paths = {chunk["maps"]: None for chunk in self.manifest["chunks"]}
        return {
            name: xr.open_zarr(
                self.folder / STORE,
                group=None if name == "all" else name,
                chunks={} if self.lazy else None,
                consolidated=True,
            )
            for name in paths
        }

    @property
    def dataset(self) -> xr.Dataset:
        """The data set of a study whose cases all have the same axes and species.

        Raises ValueError where they do not; see `datasets`.
        """
        if len(self.datasets) > 1:
            raise ValueError(
                f"the cases have {len(self.datasets)} kinds of map; take one of datasets: {', '.join(self.datasets)}"
            )
        return next(iter(self.datasets.values()))

    @cached_property
    def summary(self) -> pd.DataFrame:
        """One row a case: quantities, status, evidence, lowest and highest of every result over its map."""
        import pandas as pd

        return pd.read_parquet(self.folder / SUMMARY, engine="pyarrow")

    @property
    def quantity_columns(self) -> tuple[str, ...]:
        """Columns of the summary that hold the varied quantities."""
        return tuple(self.manifest["quantities"])

    @property
    def all_solved(self) -> bool:
        return bool((self.summary["status"] == "solved").all())

    @property
    def all_confirmed(self) -> bool:
        """Whether no checked point differs from the independent program's answer."""
        return bool((self.summary["differing"] == 0).all())

    def damaged_files(self) -> Iterator[str]:
        """Files of the store that are missing or do not have the digest of the manifest; reads all of them."""
        recorded = dict(self.manifest["metadata"])
        for chunk in self.manifest["chunks"]:
            recorded.update(chunk["files"])
        for path, digest in recorded.items():
            if file_digest(self.folder / path) != digest:
                yield path

    def in_words(self) -> str:
        """A few lines for people."""
        table = self.summary
        points, unsolved = int(table["points"].sum()), int(table["unsolved points"].sum())
        lines = [
            str(self.manifest["title"]),
            "",
            f"{len(table):,} cases, {points:,} points; {points - unsolved:,} points solved",
        ]
        if table["largest gap per mol of gas"].notna().any():
            worst = table["largest gap per mol of gas"].max()
            lines[-1] += f", largest gap {worst:.1e} per mol of gas"
        checked = int(table["checked points"].sum())
        if checked:
            lines.append(
                f"cross-check of {checked:,} points: {int(table['confirmed'].sum()):,} confirmed, "
                f"{int(table['differing'].sum()):,} differ, "
                f"{int(table['no independent answer'].sum()):,} without an independent answer"
            )
        else:
            lines.append("cross-check: none, as asked")
        if bool(table["data extrapolated"].any()):
            lines.append("data were used outside their temperature range in some cases: see the summary")
        lines += _named(table, "failed", "failed")
        lines += _named(table, "partly solved", "with unsolved points")
        return "\n".join(lines)


_MOST_NAMED = 5


def _named(table: pd.DataFrame, status: str, words: str) -> list[str]:
    found = table[table["status"] == status]
    lines = [f"{len(found)} cases {words}:"] if len(found) else []
    for row in found.head(_MOST_NAMED).to_dict("records"):
        reason = row["failure"] or f"{row['unsolved points']} of {row['points']} points"
        lines.append(f"  {row['case']}: {reason}")
    if len(found) > _MOST_NAMED:
        lines.append(f"  and {len(found) - _MOST_NAMED} more; the summary lists all")
    return lines


def open_study(folder: str | PathLike[str], *, lazy: bool = False) -> StudyResults:
    """Open the folder of a finished study.

    Args:
        folder: as given to `run_study`.
        lazy: data sets of Dask arrays (needs Dask). Otherwise values are read as they are indexed.

    Raises StudyRefusedError when there is no finished study in it.
    """
    home = Path(folder)
    try:
        manifest = json.loads((home / MANIFEST).read_text(encoding="utf-8"))
    except (OSError, ValueError) as error:
        raise StudyRefusedError(str(folder), "there is no finished study in this folder") from error
    if manifest.get("program") != PROGRAM:
        raise StudyRefusedError(str(folder), f"its {MANIFEST} is not that of a study")
    return StudyResults(home, manifest, lazy)
