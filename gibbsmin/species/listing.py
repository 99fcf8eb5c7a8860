"""Species as text: a list of matches, and one record in full. Functions return strings and print nothing."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from math import inf
from textwrap import fill

from gibbsmin.errors import AmbiguousSpeciesError, TemperatureRangeError, UnknownSpeciesError
from gibbsmin.species.library import IndexEntry, SpeciesLibrary, standard_library
from gibbsmin.species.record import Species

__all__ = ["DEFAULT_TEMPERATURES", "list_species", "match_list", "record_view"]

DEFAULT_TEMPERATURES = (298.15, 400.0, 500.0, 600.0, 800.0, 1000.0, 1200.0, 1500.0, 2000.0, 3000.0)
"""K; those outside a species' data are left out of its view."""

WIDTH = 100
_LABEL = 24
_LONGEST_NAME = 30
_ALIASES_SHOWN = 3


def list_species(
    query: str = "", *, temperatures: Sequence[float] | None = None, library: SpeciesLibrary | None = None
) -> str:
    """What `gibbsmin species QUERY` shows: the record if the query names one species, else the matches.

    Args:
        query: a name, alias, CAS number or formula, or a part of one; empty for all species.
        temperatures: K; the rows of the property table (default `DEFAULT_TEMPERATURES`).
        library: where to look (default the standard library).

    Raises:
        UnknownSpeciesError: nothing matches; it carries suggestions.
        TemperatureRangeError: a temperature that was asked for is not above 0 K and finite, or is outside the
            data of the gas.
    """
    library = standard_library() if library is None else library
    if not query.strip():
        return match_list(library.search())
    try:
        species = library.find(query)
    except AmbiguousSpeciesError as error:
        candidates = set(error.candidates)
        return match_list(entry for entry in library.entries if entry.name in candidates)
    except UnknownSpeciesError:
        matches = library.search(query)
        if not matches:
            raise
        return match_list(matches)
    text = record_view(species, temperatures)
    relatives = [entry.name for entry in library.entries if _is_relative(entry, species)]
    if relatives:
        text += "\n\n" + fill("See also: " + ", ".join(relatives), WIDTH, subsequent_indent="  ")
    return text


def _is_relative(entry: IndexEntry, species: Species) -> bool:
    """Whether the entry is an isomer of the species or its substance in another state."""
    return (
        entry.composition == species.composition
        and entry.charge == species.charge
        and (entry.name != species.name and (entry.state == "g" or species.state == "g"))
    )


def match_list(entries: Iterable[IndexEntry]) -> str:
    """A table of species, one a line, and their number."""
    rows = [
        (
            entry.name,
            "gas" if entry.state == "g" else "condensed",
            f"{entry.lower:g} to {entry.upper:g}",
            "radical" if entry.radical else ("ion" if entry.charge else ""),
            ", ".join(entry.aliases[:_ALIASES_SHOWN]),
        )
        for entry in entries
    ]
    head = ("name", "state", "range / K", "", "also called")
    widths = [max(len(row[place]) for row in [head, *rows]) for place in range(4)]
    widths[0] = min(widths[0], _LONGEST_NAME)
    lines = [
        (
            "  ".join(f"{cell:<{width}}" for cell, width in zip(row, widths, strict=False)) + "  " + row[4]
        ).rstrip()
        for row in [head, *rows]
    ]
    count = f"{len(rows)} species" if len(rows) != 1 else "1 species"
    return "\n".join([*lines, "", count])


def record_view(species: Species, temperatures: Sequence[float] | None = None) -> str:
    """One species in full: identity, source, range, uncertainty, and a table of its properties.

    Args:
        species: the species.
        temperatures: K, rows of the table; default those of `DEFAULT_TEMPERATURES` within the data.

    Raises:
        TemperatureRangeError: one of `temperatures` is not above 0 K and finite, or is outside the data of a
            gas. A condensed substance shows "no data" there.
    """
    lines = [species.name, "=" * len(species.name)]
    lines += [_field(label, text) for label, text in _facts(species) if text]
    lines += ["", *_property_table(species, temperatures)]
    return "\n".join(lines)


def _facts(species: Species) -> list[tuple[str, str]]:
    state = "gas" if species.state == "g" else "pure condensed substance"
    marks = [
        text for text, is_so in (("ion", species.charge), ("marked as a radical", species.radical)) if is_so
    ]
    composition = " ".join(f"{symbol} {count:g}" for symbol, count in species.composition.items())
    facts = [
        ("formula", species.formula),
        ("also called", ", ".join(species.aliases)),
        ("CAS number", species.cas or ""),
        ("state", ", ".join([state, *marks])),
        ("atoms", composition + (f", charge {species.charge:+d}" if species.charge else "")),
        ("molar mass", f"{species.molar_mass * 1000:.6g} g/mol"),
        ("formation enthalpy", f"{species.formation_enthalpy / 1000:.3f} kJ/mol at 298.15 K"),
    ]
    if species.uncertainty is not None:
        evaluated = species.uncertainty
        difference = (species.formation_enthalpy - evaluated.value) / 1000
        facts.append(
            (
                "evaluated elsewhere",
                f"({evaluated.value / 1000:.3f} +/- {evaluated.half_width / 1000:.3f}) kJ/mol (95 %), "
                f"{evaluated.source}; the record lies {difference:+.3f} kJ/mol from it",
            )
        )
    if species.critical is not None:
        critical = species.critical
        parts = [
            f"Tc = {critical.temperature:g} K" if critical.temperature is not None else "",
            f"pc = {critical.pressure / 1e5:g} bar" if critical.pressure is not None else "",
            f"acentric factor {critical.acentric_factor:g}" if critical.acentric_factor is not None else "",
        ]
        facts.append(("critical point", ", ".join(filter(None, parts)) + f" ({critical.source})"))
    facts.append(("data", f"{species.lower:g} to {species.upper:g} K"))
    if species.state != "g":
        facts += [("", f"{form.description}: {form.lower:g} to {form.upper:g} K") for form in species.forms]
    facts += [
        ("source", species.source),
        (
            "basis of the source",
            f"R = {species.gas_constant:.10g} J/(mol K), "
            f"standard pressure {species.reference_pressure / 1e5:g} bar",
        ),
        ("note", species.note),
    ]
    return facts


def _field(label: str, text: str) -> str:
    return fill(
        text,
        WIDTH,
        initial_indent=f"{label:<{_LABEL}}",
        subsequent_indent=" " * _LABEL,
        break_on_hyphens=False,
        break_long_words=False,
    )


def _property_table(species: Species, temperatures: Sequence[float] | None) -> list[str]:
    from gibbsmin.species.thermo import ThermoTable  # numpy is needed from here on

    if temperatures is None:
        temperatures = [T for T in DEFAULT_TEMPERATURES if species.lower <= T <= species.upper]
    for T in temperatures:
        if not 0.0 < T < inf:
            raise TemperatureRangeError(species.name, T, species.lower, species.upper)
    table = ThermoTable([species])
    heads = [("T", "cp", "h", "s", "g"), ("K", "J/(mol K)", "kJ/mol", "J/(mol K)", "kJ/mol")]
    lines = ["".join(f"{head:>14}" for head in row) for row in heads]
    if not temperatures:
        return ["Properties: no temperature of the table lies within the data."]
    R = species.gas_constant
    columns = zip(
        temperatures,
        table.heat_capacity_R(temperatures)[:, 0] * R,
        table.enthalpy_RT(temperatures)[:, 0] * R,
        table.entropy_R(temperatures)[:, 0] * R,
        table.gibbs_RT(temperatures)[:, 0] * R,
        table.form_index(temperatures)[:, 0].tolist(),
        strict=True,
    )
    for T, cp, h_T, s, g_T, form in columns:
        if form < 0:
            lines.append(f"{T:>14.7g}{'no data':>14}")
            continue
        values = (cp, h_T * T / 1000, s, g_T * T / 1000)
        row = f"{T:>14.7g}" + "".join(f"{_without_negative_zero(value):>14.3f}" for value in values)
        if len(species.forms) > 1:
            row += "  " + species.forms[form].description
        lines.append(row)
    lines += [
        "",
        "h is relative to the elements in their reference states at 298.15 K; g = h - T s; s at 1 bar.",
    ]
    return lines


def _without_negative_zero(value: float) -> float:
    return 0.0 if abs(value) < 0.0005 else value
