"""`gibbsmin reaction`, `gibbsmin measured` and `gibbsmin approach`: single reactions without a scenario."""

from __future__ import annotations

import argparse
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from gibbsmin.reactions.shortcuts import Shortcut
    from gibbsmin.reactions.text import TemperatureUnit

DEFAULT_FROM, DEFAULT_TO = "300 K", "1500 K"
DEFAULT_PER_CENT = 5.0
_POINTS = 9
_EQUATION = "such as 'CO + H2O = CO2 + H2'; fractions and state symbols are allowed"
_UNIT = "unit of K: 1 (at 1 bar), bar, atm, Pa, kPa, MPa, torr, psi, mol/L, mol/m3 ...; its power follows"


def add_reaction(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("equation", metavar="EQUATION", help=_EQUATION)
    parser.add_argument(
        "--from",
        dest="low",
        metavar="T",
        default=DEFAULT_FROM,
        help="lowest temperature; default: %(default)s",
    )
    parser.add_argument(
        "--to", dest="high", metavar="T", default=DEFAULT_TO, help="highest temperature; default: %(default)s"
    )
    parser.add_argument("--unit-of-K", dest="unit", metavar="UNIT", default="1", help=_UNIT)
    parser.add_argument(
        "--standard-pressure", metavar="P", default="1 bar", help="of tabulated ln K; default: %(default)s"
    )
    parser.add_argument(
        "--correlation",
        metavar="TEXT",
        action="append",
        default=[],
        help="audit a correlation, such as 'ln K = 4577.8/T - 4.33', K in the unit of --unit-of-K; may be repeated",
    )
    parser.add_argument(
        "--constant-enthalpy-at",
        metavar="T",
        action="append",
        default=[],
        help="audit the straight line of ln K over 1/T that touches at T; may be repeated",
    )
    parser.add_argument(
        "--constant-heat-capacity-at",
        metavar="T",
        action="append",
        default=[],
        help="audit the same with the Delta Cp of T; may be repeated",
    )
    parser.add_argument(
        "--per-cent-of-K",
        dest="per_cent",
        type=float,
        metavar="X",
        help=f"accepted error of K; default: {DEFAULT_PER_CENT:g}, unless --kelvin is given",
    )
    parser.add_argument("--kelvin", type=float, metavar="X", help="accepted equivalent temperature error")
    parser.add_argument(
        "--among",
        metavar="SPECIES",
        nargs="+",
        default=[],
        help="say how many independent reactions these species have, and whether the given ones span them",
    )
    parser.add_argument(
        "--beside",
        metavar="EQUATION",
        action="append",
        default=[],
        help="a further reaction of the set for --among; may be repeated",
    )
    _add_figures(parser)
    parser.set_defaults(command=_reaction)


def add_measured(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("equation", metavar="EQUATION", help=_EQUATION)
    parser.add_argument(
        "file",
        metavar="FILE",
        help="CSV with the columns T [unit]; K [unit], ln K or log10 K; and perhaps u, its standard uncertainty",
    )
    parser.add_argument(
        "--unit-of-K", dest="unit", metavar="UNIT", default="", help=f"{_UNIT}; where the heading has none"
    )
    _add_figures(parser)
    parser.set_defaults(command=_measured)


def add_approach(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "file",
        metavar="FILE",
        help="CSV with the columns T [unit], p [unit], one for each species in mole per cent, and perhaps sample, "
        "basis, water, u(CO) ..., u(T)",
    )
    parser.add_argument(
        "--reaction",
        metavar="EQUATION",
        action="append",
        required=True,
        help=f"{_EQUATION}; may be repeated, and named: 'shift: CO + H2O = CO2 + H2'",
    )
    parser.add_argument(
        "--basis", choices=("wet", "dry"), help="of the analyses, where the file has no such column"
    )
    parser.add_argument(
        "--feed",
        metavar="SPECIES=AMOUNT",
        nargs="+",
        default=[],
        help="amounts fed, in any one molar unit: closes the water of dry analyses and checks the balance",
    )
    parser.set_defaults(command=_approach)


def _add_figures(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--figures", metavar="FOLDER", help="draw into this folder, as PNG and SVG")


def _reaction(options: argparse.Namespace) -> int:
    import numpy as np

    from gibbsmin.reactions.equation import read_reaction
    from gibbsmin.reactions.report import reaction_text, shortcuts_text
    from gibbsmin.reactions.results import work_out
    from gibbsmin.reactions.shortcut_error import Tolerance
    from gibbsmin.reactions.wanted import ReactionsWanted

    low, unit = _temperature(options.low, "--from")
    high, _ = _temperature(options.high, "--to")
    reaction = read_reaction(options.equation)
    per_cent = options.per_cent
    if per_cent is None and options.kelvin is None:
        per_cent = DEFAULT_PER_CENT
    wanted = ReactionsWanted(
        (reaction,),
        shortcuts=tuple(_shortcuts(options)),
        tolerance=Tolerance(per_cent, options.kelvin),
        standard_pressure=_pressure(options.standard_pressure),
        unit=options.unit,
    )
    set_in_words = _coverage(options)
    results = work_out(wanted, np.linspace(min(low, high), max(low, high), _POINTS if low != high else 1))
    if set_in_words:
        print(f"{set_in_words}\n")
    print(reaction_text(results.reactions[0], wanted.tolerance, unit))
    if results.shortcuts:
        print()
        print(shortcuts_text(results.shortcuts, wanted.tolerance, unit))
    if options.figures:
        from gibbsmin.figures.of_reactions import write_reaction_figures

        _told(write_reaction_figures(results, Path(options.figures), unit=unit))
    return 0


def _coverage(options: argparse.Namespace) -> str:
    from gibbsmin.errors import ConditionsError
    from gibbsmin.reactions.equation import read_reaction
    from gibbsmin.reactions.independence import coverage
    from gibbsmin.species import standard_library

    if not options.among:
        if options.beside:
            raise ConditionsError("--beside", "needs --among, the species of the mixture")
        return ""
    library = standard_library()
    species = {each.name: each for each in map(library.find, options.among)}
    return str(
        coverage(
            list(species.values()), [read_reaction(each) for each in (options.equation, *options.beside)]
        )
    )


def _shortcuts(options: argparse.Namespace) -> list[Shortcut]:
    from gibbsmin.reactions.equation import read_reaction
    from gibbsmin.reactions.shortcuts import ConstantEnthalpy, ConstantHeatCapacity, Correlation

    reaction = read_reaction(options.equation)
    found: list[Shortcut] = [
        Correlation.of(text, reaction, unit=options.unit) for text in options.correlation
    ]
    for text in options.constant_enthalpy_at:
        T, _ = _temperature(text, "--constant-enthalpy-at")
        found.append(ConstantEnthalpy.from_data(reaction, T, name=f"constant enthalpy at {text}"))
    for text in options.constant_heat_capacity_at:
        T, _ = _temperature(text, "--constant-heat-capacity-at")
        found.append(ConstantHeatCapacity.from_data(reaction, T, name=f"constant heat capacity at {text}"))
    return found


def _measured(options: argparse.Namespace) -> int:
    from gibbsmin.reactions.equation import read_reaction
    from gibbsmin.reactions.measured_text import measured_text
    from gibbsmin.reactions.results import MeasuredSummary
    from gibbsmin.reactions.second_law_analysis import second_law
    from gibbsmin.reactions.third_law_analysis import third_law
    from gibbsmin.scenario.measurements import measured_from_file

    data = measured_from_file(
        options.file, read_reaction(options.equation), unit=options.unit, name=Path(options.file).name
    )
    summary = MeasuredSummary(data, second_law(data), third_law(data))
    print(measured_text(summary))
    if options.figures:
        from gibbsmin.figures.of_reactions import write_measured_figures

        _told(write_measured_figures([summary], Path(options.figures)))
    return 0


def _approach(options: argparse.Namespace) -> int:
    from gibbsmin.reactions.approach import approaches
    from gibbsmin.reactions.equation import read_reaction
    from gibbsmin.reactions.measured_text import approach_text
    from gibbsmin.reactions.text import CELSIUS
    from gibbsmin.scenario.measurements import analyses_from_file
    from gibbsmin.species import standard_library

    reactions = []
    for text in options.reaction:
        name, colon, equation = text.partition(":")
        reactions.append(read_reaction(equation if colon else text, name=name if colon else ""))
    analyses, species = analyses_from_file(
        options.file, standard_library(), basis=options.basis, feed=_feed(options.feed) or None
    )
    print(approach_text(approaches(analyses, reactions, species), CELSIUS))
    return 0


def _feed(words: list[str]) -> dict[str, float]:
    from gibbsmin.errors import ConditionsError

    feed: dict[str, float] = {}
    for word in words:
        name, _, amount = word.partition("=")
        try:
            feed[name.strip()] = float(amount)
        except ValueError:
            raise ConditionsError(
                "--feed", f"expected SPECIES=AMOUNT, such as CH4=1; found {word!r}"
            ) from None
    return feed


def _temperature(text: str, option: str) -> tuple[float, TemperatureUnit]:
    """K, and the unit that was written."""
    from gibbsmin.errors import ConditionsError
    from gibbsmin.reactions.text import TEMPERATURE_UNITS

    quantity = _quantity(text, "temperature", option)
    if quantity[0] <= 0:
        raise ConditionsError(option, f"{text} is not above absolute zero")
    return quantity[0], TEMPERATURE_UNITS[quantity[1]]


def _pressure(text: str) -> float:
    return _quantity(text, "pressure", "--standard-pressure")[0]


def _quantity(text: str, kind: str, option: str) -> tuple[float, str]:
    from gibbsmin.constants import STANDARD_ATMOSPHERE
    from gibbsmin.errors import ConditionsError
    from gibbsmin.scenario.ratios import as_exact
    from gibbsmin.scenario.units import UnitFault, read_quantity

    try:
        found = read_quantity(text, kind, ambient=as_exact(STANDARD_ATMOSPHERE))  # type: ignore[arg-type]
    except UnitFault as fault:
        raise ConditionsError(option, str(fault)) from None
    return float(found.si), found.unit.symbol


def _told(files: list[Path]) -> None:
    print()
    print("\n".join(f"drawn: {path}" for path in files))
