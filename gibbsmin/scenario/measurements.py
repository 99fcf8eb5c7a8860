"""Measured K values and gas analyses from CSV files or from mappings, in any usual units, brought to SI."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from os import PathLike
from typing import TYPE_CHECKING, Any, Literal

from gibbsmin.constants import STANDARD_ATMOSPHERE
from gibbsmin.errors import AmbiguousSpeciesError, Fault, MeasurementError, UnknownSpeciesError
from gibbsmin.reactions.approach import Analysis
from gibbsmin.reactions.equation import Reaction
from gibbsmin.reactions.measured import QUANTITIES, MeasuredConstants, measured_constants
from gibbsmin.scenario.ratios import as_exact
from gibbsmin.scenario.tables import Row, Table, number, parse_table, read_table
from gibbsmin.scenario.units import Kind, UnitFault, find_unit

if TYPE_CHECKING:
    from gibbsmin.species import Species, SpeciesLibrary

TEMPERATURE = ("T", "temperature", "Temperature")
PRESSURE = ("p", "pressure", "Pressure")
UNCERTAINTY = ("u", "uncertainty", "u(K)", "u(ln K)", "u(log10 K)", "standard uncertainty")
_QUANTITY = {
    "K": "K", "Kp": "K", "Kc": "K", "ln K": "ln K", "lnK": "ln K", "ln Kp": "ln K",
    "log10 K": "log10 K", "log10K": "log10 K", "log10 Kp": "log10 K", "log K": "",
}  # fmt: skip
_SAMPLE = ("sample", "name", "Sample")
_NOT_SPECIES = ("basis", "water", "u(water)", "u(T)", *_SAMPLE, *TEMPERATURE, *PRESSURE)
_AMBIENT = as_exact(STANDARD_ATMOSPHERE)


def measured_from_file(
    path: str | PathLike[str], reaction: Reaction, *, unit: str = "", name: str = "", shown_as: str = ""
) -> MeasuredConstants:
    """Measured K from a CSV file with columns T, one of K, ln K, log10 K, and perhaps u (standard uncertainty).

    Args:
        path: the file. Units stand in the headings: `T [degC], K [atm], u`.
        reaction: as the K is defined for.
        unit: of K where the heading has none; it must then be given, be it "1".
        name: of the data set.
        shown_as: name of the file in messages.

    Raises:
        MeasurementError: everything that is wrong with the file, each with its line.
        ReactionError: a unit that does not fit the reaction.
    """
    return measured_from_table(
        read_table(path, shown_as=shown_as), reaction, unit=unit, name=name or str(path)
    )


def measured_from_table(
    table: Table, reaction: Reaction, *, unit: str = "", name: str = ""
) -> MeasuredConstants:
    """As `measured_from_file`, for a table."""
    faults: list[Fault] = []
    T_name = _column(table, TEMPERATURE, "temperature, called T", faults)
    value = next((each for each in table.headings if _QUANTITY.get(each)), None)
    if "log K" in table.headings:
        faults.append(_in_head(table, "'log K' may mean ln K or log10 K; write which"))
    elif value is None:
        faults.append(
            _in_head(table, f"no column holds the constant; call it one of {', '.join(QUANTITIES)}")
        )
    spread = next((each for each in UNCERTAINTY if each in table.headings), None)
    known = {T_name, value, spread}
    odd = [
        each
        for each in table.headings
        if each not in known and each.casefold() not in ("remark", "note", "source")
    ]
    if odd and not faults:
        faults.append(
            _in_head(
                table, f"the column {odd[0]!r} is not understood; allowed: T, K (ln K, log10 K), u, remark"
            )
        )
    to_kelvin = _converter(table, T_name, "temperature", faults)
    own = table.headings[value].unit if value else ""
    if value and not own and not unit and reaction.gas_change:
        faults.append(
            _in_head(
                table,
                f"the unit of K is missing: moles of gas change by {reaction.gas_change}; write for instance "
                f"{value} [atm], or [1] for a K at 1 bar",
            )
        )
    if faults or T_name is None or value is None:
        raise MeasurementError(faults)
    T = [to_kelvin(number(row, T_name, faults)) for row in table.rows]
    K = [number(row, value, faults) for row in table.rows]
    u = [number(row, spread, faults) for row in table.rows] if spread else None
    if faults:
        raise MeasurementError(faults)
    return measured_constants(
        reaction,
        T,
        K,
        uncertainty=u,
        quantity=_QUANTITY[value],
        unit=own or unit or "1",
        name=name,
        places=[row.place for row in table.rows],
    )


def analyses_from_file(
    path: str | PathLike[str],
    library: SpeciesLibrary,
    *,
    basis: Literal["wet", "dry"] | None = None,
    feed: Mapping[str, float] | None = None,
    shown_as: str = "",
) -> tuple[list[Analysis], dict[str, Species]]:
    """Gas analyses from a CSV file, one a row, and the species they name.

    Columns: `T [degC]`, `p [bar]`, one for each species in mole per cent, and perhaps `sample`, `basis` (wet or dry),
    `water` (mole per cent of the wet gas, for a dry analysis), `u(CO)` ... (standard uncertainty), `u(T)` in K.

    Args:
        basis: where the file has no such column.
        feed: species -> amount, to close the water and to check the balance.

    Raises:
        MeasurementError: everything that is wrong with the file, each with its line.
    """
    table = read_table(path, shown_as=shown_as)
    return analyses_from_table(table, library, basis=basis, feed=feed)


def analyses_from_table(
    table: Table,
    library: SpeciesLibrary,
    *,
    basis: Literal["wet", "dry"] | None = None,
    feed: Mapping[str, float] | None = None,
) -> tuple[list[Analysis], dict[str, Species]]:
    """As `analyses_from_file`, for a table."""
    faults: list[Fault] = []
    T_name = _column(table, TEMPERATURE, "temperature, called T", faults)
    p_name = _column(table, PRESSURE, "pressure, called p", faults)
    to_kelvin = _converter(table, T_name, "temperature", faults)
    to_pascal = _converter(table, p_name, "pressure", faults)
    shares = [each for each in table.headings if each not in _NOT_SPECIES and not each.startswith("u(")]
    spreads = [
        each[2:-1] for each in table.headings if each.startswith("u(") and each not in ("u(T)", "u(water)")
    ]
    found: dict[str, Species] = {}
    for each in [*shares, *spreads, *(feed or {}), "H2O"]:
        _look_up(each, library, found, lambda words: faults.append(_in_head(table, words)))
    for each in shares:
        if table.headings[each].unit not in ("", "%", "mol %", "mole per cent", "vol %"):
            faults.append(
                _in_head(table, f"{each}: shares are in mole per cent, not {table.headings[each].unit!r}")
            )
    if "basis" not in table.headings and basis is None:
        faults.append(
            _in_head(table, "say whether the analyses are wet or dry: a column 'basis', or the option")
        )
    analyses = []
    sample = next((each for each in _SAMPLE if each in table.headings), None)
    for count, row in enumerate(table.rows, 1):
        if not T_name or not p_name:
            break
        own = row.cells.get("basis", basis or "wet")
        if own not in ("wet", "dry"):
            faults.append(Fault(f"basis: expected wet or dry, found {own!r}", row.place.file, row.place.line))
            continue
        analyses.append(
            Analysis(
                name=row.cells.get(sample or "", f"sample {count}"),
                temperature=to_kelvin(number(row, T_name, faults)),
                pressure=to_pascal(number(row, p_name, faults)),
                per_cent={each: number(row, each, faults) for each in shares if each in row.cells},
                basis="dry" if own == "dry" else "wet",
                water=number(row, "water", faults) if "water" in row.cells else None,
                feed=feed,
                uncertainty=_uncertainties(row, spreads, faults),
                temperature_uncertainty=number(row, "u(T)", faults) if "u(T)" in row.cells else 0.0,
                place=row.place,
            )
        )
    if faults:
        raise MeasurementError(faults)
    return analyses, found


def _uncertainties(row: Row, spreads: Sequence[str], faults: list[Fault]) -> dict[str, float]:
    found = {each: number(row, f"u({each})", faults) for each in spreads if f"u({each})" in row.cells}
    if "u(water)" in row.cells:
        found["H2O"] = number(row, "u(water)", faults)
    return found


def _look_up(
    name: str, library: SpeciesLibrary, found: dict[str, Species], tell: Callable[[str], Any]
) -> None:
    if name in found:
        return
    try:
        found[name] = library.find(name)
    except (UnknownSpeciesError, AmbiguousSpeciesError) as error:
        tell(str(error))


def _column(table: Table, names: Sequence[str], what: str, faults: list[Fault]) -> str | None:
    found = next((each for each in names if each in table.headings), None)
    if found is None:
        faults.append(_in_head(table, f"no column holds the {what}; found: {', '.join(table.headings)}"))
    return found


def _converter(table: Table, column: str | None, kind: Kind, faults: list[Fault]) -> Callable[[float], float]:
    """From the unit of a column to SI; a fault where the heading has none."""
    if column is None:
        return float
    word = table.headings[column].unit
    if not word:
        example = "degC" if kind == "temperature" else "bar"
        faults.append(_in_head(table, f"the unit of {column} is missing; write {column} [{example}]"))
        return float
    try:
        unit = find_unit(word, kind, ambient=_AMBIENT)
    except UnitFault as fault:
        faults.append(_in_head(table, f"{column}: {fault}"))
        return float

    def convert(value: float) -> float:
        return float(unit.to_si(as_exact(value))) if math.isfinite(value) else value

    return convert


def _in_head(table: Table, message: str) -> Fault:
    return Fault(message, table.place.file, table.place.line)


__all__ = [
    "analyses_from_file",
    "analyses_from_table",
    "measured_from_file",
    "measured_from_table",
    "parse_table",
]
