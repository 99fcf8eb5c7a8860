"""An outcome as files: NetCDF, tables, and the record of how it was made.

No clock time, machine name or path goes into any file, so the same run gives the same bytes.
"""

from __future__ import annotations

import csv
import errno
import hashlib
import json
import os
import shutil
import tempfile
from collections.abc import Callable, Sequence
from dataclasses import asdict, fields
from importlib.util import find_spec
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import xarray as xr

from gibbsmin.errors import FolderExistsError, MissingPackageError
from gibbsmin.outcome.composition import amount_at_equilibrium

if TYPE_CHECKING:
    import pandas as pd

    from gibbsmin.crosscheck import CrossCheck
    from gibbsmin.outcome import Outcome
    from gibbsmin.species import Species

DATA_FILE = "results.nc"
RECORD_FILE = "record.json"
CROSSCHECK_FILE = "crosscheck.csv"
BOUNDARIES_FILE = "boundaries.csv"
SCENARIO_FILE = "scenario.yaml"
TABLE_FILES = {"csv": "results.csv", "parquet": "results.parquet"}
_PROGRAM = "gibbsmin"
_BY_SPECIES = ("mole_fraction", "feed_amount", "phase_amount", "phase_activity")


def save(
    outcome: Outcome,
    folder: Path,
    overwrite: bool = False,
    *,
    tables: Sequence[str] | None = None,
    further_files: Callable[[Path], object] | None = None,
) -> Path:
    """See `Outcome.save`."""
    wanted = tuple(outcome.scenario.output.tables if tables is None else tables)
    if unknown := set(wanted).difference(TABLE_FILES):
        raise ValueError(f"tables are {', '.join(TABLE_FILES)}, not {', '.join(sorted(unknown))}")
    if "parquet" in wanted and find_spec("pyarrow") is None:
        raise MissingPackageError("pyarrow", "writing a Parquet table")
    check_folder(folder, overwrite)
    folder.parent.mkdir(parents=True, exist_ok=True)
    # Beside the final place, so that the last step is a rename within one file system.
    try:
        draft = Path(tempfile.mkdtemp(prefix=f".{folder.name}.", suffix=".unfinished", dir=folder.parent))
    except OSError as error:  # told of the folder asked for, not of the draft
        raise OSError(error.errno, error.strerror, str(folder)) from error
    try:
        write_netcdf(outcome.dataset, draft / DATA_FILE)
        for kind in wanted:
            write_table(outcome.dataset, draft / TABLE_FILES[kind], kind)
        write_crosscheck(outcome.crosscheck, draft / CROSSCHECK_FILE)
        if outcome.boundaries:
            from gibbsmin.boundaries import boundary_table

            boundary_table(outcome.boundaries, draft / BOUNDARIES_FILE)
        if outcome.reactions is not None:
            from gibbsmin.outcome.reactions import write_reactions

            write_reactions(outcome, draft)
        # newline="" keeps the line ends of the source, so that the copy has the digest of the original
        (draft / SCENARIO_FILE).write_text(outcome.scenario.text, encoding="utf-8", newline="")
        if further_files is not None:
            further_files(draft)
        made = {
            path.relative_to(draft).as_posix(): _digest(path.read_bytes())
            for path in sorted(draft.rglob("*"))
            if path.is_file()
        }
        _write_json({**record(outcome), "files": made}, draft / RECORD_FILE)
        draft.chmod(0o755)  # mkdtemp makes it private
        _put_in_place(draft, folder)
    finally:
        shutil.rmtree(draft, ignore_errors=True)
    return folder


def check_folder(folder: Path, overwrite: bool) -> None:
    """Whether results may go to `folder`: it is new or empty, or overwriting is asked for and it holds
    results.

    Worth calling before a long run.

    Raises:
        FolderExistsError: otherwise.
        OSError: nothing can be written where the folder is to be.
    """
    _require_writable(folder.parent)
    if not folder.exists() and not folder.is_symlink():
        return
    if not folder.is_dir():
        raise FolderExistsError(str(folder), "it is no folder; choose another name")
    if not any(folder.iterdir()):
        return
    if not overwrite:
        raise FolderExistsError(str(folder))
    if _earlier_files(folder) is None:
        raise FolderExistsError(
            str(folder),
            "it holds other files and no earlier results, so it is not overwritten; choose another folder",
        )


def _require_writable(folder: Path) -> None:
    """Raise OSError unless `folder`, or the nearest one above it that exists, can take a new entry."""
    existing = next(each for each in (folder, *folder.absolute().parents) if each.exists())
    if not existing.is_dir():
        raise NotADirectoryError(errno.ENOTDIR, os.strerror(errno.ENOTDIR), str(existing))
    if not os.access(existing, os.W_OK | os.X_OK):
        raise PermissionError(errno.EACCES, os.strerror(errno.EACCES), str(existing))


def write_netcdf(dataset: xr.Dataset, path: Path) -> None:
    """Write a NetCDF-4 file that `xarray.open_dataset` gives back as it was."""
    # NaN as fill value would mark every floating variable; the data say NaN themselves.
    encoding = {
        str(name): {"_FillValue": None}
        for name, variable in dataset.variables.items()
        if variable.dtype.kind == "f"
    }
    dataset.to_netcdf(path, engine="netcdf4", format="NETCDF4", encoding=encoding)


def as_table(dataset: xr.Dataset) -> pd.DataFrame:
    """One row a point: coordinates, mole fractions, feed, amounts and activities of phases, single-valued results.

    Column headings carry the unit: "temperature [K]", "mole_fraction H2 [1]". Amounts by species are left
    out, they are the mole fraction times `gas_amount`; element potentials and dry fractions are in the NetCDF
    file alone.
    """
    import pandas as pd

    points = dataset["status"]
    shape = points.shape
    columns: dict[str, Any] = {}
    for name in (*points.dims, "temperature", "pressure"):
        if name in dataset.coords:
            coordinate = dataset[name]
            columns[_heading(str(name), coordinate)] = _over_points(coordinate, points)
    for name, array in dataset.data_vars.items():
        further = [dim for dim in array.dims if dim not in points.dims]
        if not further:
            columns[_heading(str(name), array)] = _over_points(array, points)
        elif len(further) == 1 and name in _BY_SPECIES:
            for label in dataset[further[0]].values:
                part = array.sel({further[0]: label})
                columns[_heading(f"{name} {label}", array)] = _over_points(part, points)
    return pd.DataFrame(
        {heading: np.broadcast_to(values, shape).ravel() for heading, values in columns.items()}
    )


def write_table(dataset: xr.Dataset, path: Path, kind: str) -> None:
    """Write `as_table` as CSV (shortest decimals that give the same doubles) or Parquet."""
    table = as_table(dataset)
    if kind == "csv":
        table.to_csv(path, index=False, lineterminator="\n")
    else:
        table.to_parquet(path, engine="pyarrow", index=False)


def write_crosscheck(check: CrossCheck, path: Path) -> None:
    """One row a checked point; a heading and no row when nothing was checked."""
    from gibbsmin.comparison import CheckedPoint

    shown = [field.name for field in fields(CheckedPoint) if field.name not in ("index", "place")]
    places = list(dict(check.points[0].place)) if check.points else []
    with path.open("w", encoding="utf-8", newline="") as stream:
        writer = csv.writer(stream, lineterminator="\n")
        writer.writerow([*places, *shown])
        for point in check.points:
            writer.writerow([*dict(point.place).values(), *(getattr(point, name) for name in shown)])


def record(outcome: Outcome) -> dict[str, Any]:
    """How the results were made: version, digests of scenario and data, settings, evidence."""
    import gibbsmin

    dataset, check, scenario = outcome.dataset, outcome.crosscheck, outcome.scenario
    used = {each.name: each for each in (*scenario.species, *scenario.feed_species.values())}
    worst = check.worst
    return {
        "program": _PROGRAM,
        "version": gibbsmin.__version__,
        "title": scenario.title,
        "scenario SHA-256": scenario.digest,
        "species data SHA-256": species_digest(list(used.values())),
        "species": list(used),
        "settings": dict(outcome.settings),
        "points": outcome.points,
        "unsolved points": outcome.unsolved,
        "largest gap per mol of gas": _largest(dataset["gap"] / amount_at_equilibrium(dataset)),
        "largest balance residual": _largest(dataset["balance_residual"]),
        "remarks": list(scenario.remarks),
        "cross-check": {
            "by": check.library,
            "extent": check.extent,
            "tolerance": check.tolerance,
            "points": len(check.points),
            "confirmed": check.confirmed,
            "differing": check.differing,
            "no independent answer": check.unanswered,
            "largest relative difference": None if worst is None else worst.relative,
            "at": None if worst is None else dict(worst.place),
            "species": None if worst is None else worst.species,
            "largest difference of the standard potentials": check.data_difference,
        },
    }


def species_digest(species: Sequence[Species]) -> str:
    """SHA-256 (hex) of species records as canonical JSON, in the order of their names."""
    records = [asdict(each) for each in sorted(species, key=lambda each: each.name)]
    return _digest(json.dumps(records, sort_keys=True, ensure_ascii=True, default=dict).encode())


def _put_in_place(draft: Path, folder: Path) -> None:
    """Make the finished draft the folder. At no moment is there a folder with half of the results."""
    if folder.exists() and not any(folder.iterdir()):
        folder.rmdir()
    if not folder.exists():
        os.replace(draft, folder)
        return
    earlier = _earlier_files(folder) or set()
    retired = draft.with_suffix(".replaced")
    os.replace(folder, retired)
    os.replace(draft, folder)
    for path in sorted(retired.rglob("*")):
        relative = path.relative_to(retired)
        place = folder / relative
        if path.is_file() and relative.as_posix() not in earlier and not place.exists():
            place.parent.mkdir(parents=True, exist_ok=True)
            os.replace(path, place)
    shutil.rmtree(retired)


def _earlier_files(folder: Path) -> set[str] | None:
    """Files that the results in `folder` consist of, by their own record; None if there is no such record."""
    try:
        content = json.loads((folder / RECORD_FILE).read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return None
    if not isinstance(content, dict) or content.get("program") != _PROGRAM:
        return None
    return {RECORD_FILE, *content.get("files", ())}


def _over_points(array: xr.DataArray, points: xr.DataArray) -> Any:
    order = [dim for dim in points.dims if dim in array.dims]
    shape = [points.sizes[dim] if dim in order else 1 for dim in points.dims]
    return array.transpose(*order).values.reshape(shape)


def _heading(name: str, array: xr.DataArray) -> str:
    units = array.attrs.get("units", "")
    return f"{name} [{units}]" if units else name


def _largest(array: xr.DataArray) -> float | None:
    values = array.values[np.isfinite(array.values)]
    return float(values.max()) if values.size else None


def _digest(content: bytes) -> str:
    return hashlib.sha256(content).hexdigest()


def _write_json(content: dict[str, Any], path: Path) -> None:
    text = json.dumps(content, indent=2, ensure_ascii=False, allow_nan=False)
    path.write_text(text + "\n", encoding="utf-8", newline="")
