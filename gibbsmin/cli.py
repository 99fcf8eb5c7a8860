"""The command `gibbsmin`: parse, call one library function, write, choose the exit code.

Exit codes: 0 every point solved and confirmed; 1 some point not solved or not confirmed; 2 the request was
wrong; 3 a defect of this program; 130 stopped by Ctrl-C.

Results go to standard output and files, messages to standard error. Whatever a command needs is imported
inside it, so that `gibbsmin --help` does not wait for numerical libraries.
"""

from __future__ import annotations

import argparse
import os
import sys
import traceback
from collections.abc import Callable, Sequence
from pathlib import Path
from textwrap import fill
from typing import TYPE_CHECKING

from gibbsmin.commands.cases import add_cases
from gibbsmin.commands.reactions import add_approach, add_measured, add_reaction
from gibbsmin.commands.study import add_study
from gibbsmin.errors import FolderExistsError, GibbsminError
from gibbsmin.terminal import accept_any_text, progress_bar, say

if TYPE_CHECKING:
    from gibbsmin.figures import Written
    from gibbsmin.outcome import Outcome
    from gibbsmin.scenario.model import Scenario

CONFIRMED, NOT_CONFIRMED, WRONG_REQUEST, DEFECT, STOPPED, PIPE_CLOSED = 0, 1, 2, 3, 130, 141

_EXIT_CODES = """\
exit codes:
  0    every point was solved and confirmed
  1    some point was not solved, or the cross-check does not confirm it
  2    the request was wrong; nothing was computed
  3    a defect of this program
  130  stopped by Ctrl-C

Equilibrium is a limit, not a rate. Nothing here sizes a relief device or shows that a gas is safe.
"""

_WIDTH = 100  # columns of what a run prints
_SCENARIO = "a scenario file, or the name of a shipped example where no file of that name exists"


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command and return its exit code; `arguments` are those after the program's name."""
    accept_any_text(sys.stdout, sys.stderr)
    given = list(sys.argv[1:] if arguments is None else arguments)
    try:
        options = build_parser(next((word for word in given if word in _COMMANDS), None)).parse_args(given)
        code: int = options.command(options)
        sys.stdout.flush()
        return code
    except SystemExit as exit_:  # argparse has printed help or its complaint
        return exit_.code if isinstance(exit_.code, int) else WRONG_REQUEST
    except KeyboardInterrupt:
        say("stopped")
        return STOPPED
    except BrokenPipeError:
        # The reader has gone (`gibbsmin species | head`); Python must not complain again at exit.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return PIPE_CLOSED
    except (GibbsminError, OSError, MemoryError) as error:
        if "--debug" in given:
            traceback.print_exc()
        say(*_in_words(error))
        return WRONG_REQUEST
    except Exception:
        traceback.print_exc()
        say("gibbsmin: this is a defect of the program, not of the request; please report the lines above")
        return DEFECT


def _in_words(error: BaseException) -> list[str]:
    """One line for each thing that is wrong."""
    if isinstance(error, MemoryError):
        return [
            "gibbsmin: not enough memory; take fewer points (gibbsmin check tells how much a scenario needs)"
        ]
    if isinstance(error, OSError):
        place = f"{error.filename}: " if error.filename else ""
        return [f"gibbsmin: {place}{error.strerror or error}"]
    if isinstance(error, FolderExistsError) and not error.reason:
        return [f"gibbsmin: {error} (--overwrite)"]
    faults = getattr(error, "faults", None)
    return [f"gibbsmin: {line}" for line in (map(str, faults) if faults else str(error).splitlines())]


def build_parser(command: str | None = None) -> argparse.ArgumentParser:
    """The parser of all commands, with the options of `command` only.

    The help of an option prints the library's own default, and asking the library costs time that the general
    help need not spend.
    """
    parser = argparse.ArgumentParser(
        prog="gibbsmin",
        description="Equilibrium composition of reacting gases over maps of temperature, pressure and feed.",
        epilog=_EXIT_CODES,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("--version", action=_Version)
    parser.add_argument("--debug", action="store_true", help="show where in the program an error arose")
    commands = parser.add_subparsers(title="commands", metavar="COMMAND", required=True)
    for name, (words, add_options) in _COMMANDS.items():
        each = commands.add_parser(name, help=words, description=words[:1].upper() + words[1:] + ".")
        # The same switch after the command's name; a default of its own would undo the one before it.
        each.add_argument("--debug", action="store_true", default=argparse.SUPPRESS, help=argparse.SUPPRESS)
        if name == command:
            add_options(each)
    return parser


class _Version(argparse.Action):
    """Print the version; looked up only when asked for, because reading package metadata takes time."""

    def __init__(self, option_strings: Sequence[str], dest: str) -> None:
        super().__init__(option_strings, dest, nargs=0, help="print the version and exit")

    def __call__(self, parser: argparse.ArgumentParser, *_: object) -> None:
        import gibbsmin

        print(f"gibbsmin {gibbsmin.__version__}")
        parser.exit()


# --- run


def _add_run(parser: argparse.ArgumentParser) -> None:
    from gibbsmin.scenario.model import DEFAULT_SAMPLE_SIZE

    parser.add_argument("scenario", metavar="SCENARIO", help=_SCENARIO)
    parser.add_argument(
        "--out", metavar="FOLDER", help="where to save; default: the scenario's name with -results, here"
    )
    parser.add_argument(
        "--overwrite", action="store_true", help="replace the results of an earlier run in FOLDER"
    )
    parser.add_argument(
        "--crosscheck",
        choices=("sample", "all", "none"),
        help="points to solve again with an independent library; default: what the scenario says, "
        f"or else a sample of {DEFAULT_SAMPLE_SIZE}",
    )
    parser.add_argument(
        "--threads",
        type=_positive,
        metavar="N",
        help="processor cores to use; default: all that are available",
    )
    parser.add_argument(
        "--table", choices=("csv", "parquet"), help="save the results as a plain table as well"
    )
    parser.add_argument("--no-figures", action="store_true", help="draw nothing")
    parser.add_argument("--no-report", action="store_true", help="leave out report.html")
    parser.add_argument("-v", "--verbose", action="store_true", help="say what is being done")
    parser.set_defaults(command=_run)


def _positive(text: str) -> int:
    try:
        number = int(text)
    except ValueError:
        number = 0
    if number < 1:
        raise argparse.ArgumentTypeError(f"expected a whole number of at least 1, found {text!r}")
    return number


def _run(options: argparse.Namespace) -> int:
    from gibbsmin.examples import scenario_file
    from gibbsmin.outcome.saving import check_folder
    from gibbsmin.scenario import load_scenario

    file = scenario_file(options.scenario)
    folder = Path(options.out or f"{file.stem}-results")
    check_folder(folder, options.overwrite)  # before the work, not after it
    scenario = _with_options(load_scenario(file), options)
    tell = say if options.verbose else _silent
    tell(f"{file}: {scenario.points} points, {len(scenario.species)} species")
    from gibbsmin.running import run

    check = scenario.cross_check
    to_check = scenario.points if check.extent == "all" else min(check.sample_size, scenario.points)
    with (
        progress_bar(scenario.points, "solving", "points") as solved,
        progress_bar(to_check, "checking", "points", at_once=False) as checked,
    ):
        outcome = run(scenario, threads=options.threads, progress=solved, check_progress=checked)
    tell(f"saving in {folder}")
    figures = _Figures(outcome, wanted=not options.no_figures)
    outcome.save(folder, overwrite=options.overwrite, further_files=_further_files(outcome, figures, options))
    print(outcome.summary())
    print()
    print("\n".join([*_files(folder), *figures.in_words()]))
    return CONFIRMED if outcome.all_solved and outcome.all_confirmed else NOT_CONFIRMED


def _silent(*_: str) -> None:
    """Says nothing."""


def _with_options(scenario: Scenario, options: argparse.Namespace) -> Scenario:
    """The scenario with what the command line says otherwise."""
    from dataclasses import replace

    if options.crosscheck:
        scenario = replace(scenario, cross_check=replace(scenario.cross_check, extent=options.crosscheck))
    if options.table and options.table not in scenario.output.tables:
        tables = (*scenario.output.tables, options.table)
        scenario = replace(scenario, output=replace(scenario.output, tables=tables))
    return scenario


def _further_files(
    outcome: Outcome, figures: _Figures, options: argparse.Namespace
) -> Callable[[Path], None]:
    """What goes into the folder beside the data: the figures and the report, as far as they are wanted."""

    def write(folder: Path) -> None:
        figures.write(folder)
        if not options.no_report:
            from gibbsmin.report import REPORT_FILE, write_report

            write_report(outcome, folder / REPORT_FILE)

    return write


class _Figures:
    """The figures of an outcome: written when the folder is made, told of when it is there."""

    def __init__(self, outcome: Outcome, *, wanted: bool) -> None:
        self._outcome = outcome
        self._wanted = wanted
        self._written: Written | None = None

    def write(self, folder: Path) -> None:
        if not self._wanted:
            return
        from gibbsmin.figures.of_outcome import count_figures, write_outcome_figures

        with progress_bar(count_figures(self._outcome), "drawing", "figures") as advance:
            self._written = write_outcome_figures(
                self._outcome, folder / "figures", progress=lambda _: advance(1)
            )

    def in_words(self) -> list[str]:
        if self._written is None:
            return []
        names = list(dict.fromkeys(path.stem for path in self._written.files))
        lines = [f"figures/ ({len(names)}, each as PNG and SVG): {', '.join(names)}"] if names else []
        lines += [f"not drawn: {name}: {why}" for name, why in self._written.left_out.items()]
        return [fill(line, _WIDTH, initial_indent="  ", subsequent_indent="    ") for line in lines]


def _files(folder: Path) -> list[str]:
    """What a run has left in its folder, one line each."""
    return [
        f"written to {folder}:",
        *(f"  {path.name}" for path in sorted(folder.iterdir()) if path.is_file()),
    ]


# --- check


def _add_check(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("scenario", metavar="SCENARIO", help=_SCENARIO)
    parser.set_defaults(command=_check)


def _check(options: argparse.Namespace) -> int:
    from gibbsmin.examples import scenario_file
    from gibbsmin.scenario import load_scenario

    print(load_scenario(scenario_file(options.scenario)).describe())
    return CONFIRMED


# --- species


def _add_species(parser: argparse.ArgumentParser) -> None:
    from gibbsmin.species.listing import DEFAULT_TEMPERATURES

    usual = ", ".join(f"{temperature:g}" for temperature in DEFAULT_TEMPERATURES)
    parser.add_argument(
        "query",
        metavar="QUERY",
        nargs="?",
        default="",
        help="a name, formula, alias or CAS number, or part of one",
    )
    parser.add_argument(
        "--temperatures",
        metavar="K",
        nargs="+",
        type=float,
        help=f"temperatures in K at which to show properties; default: {usual}, as far as the data go",
    )
    parser.set_defaults(command=_species)


def _species(options: argparse.Namespace) -> int:
    from gibbsmin.species.listing import list_species

    print(list_species(options.query, temperatures=options.temperatures))
    return CONFIRMED


# --- scenarios


def _add_scenarios(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("names", metavar="NAME", nargs="*", help="print these examples; default: list all")
    parser.add_argument(
        "--copy-to", metavar="FOLDER", help="copy the named examples (all, if none is named) there"
    )
    parser.add_argument("--overwrite", action="store_true", help="replace files of the same name in FOLDER")
    parser.set_defaults(command=_scenarios)


def _scenarios(options: argparse.Namespace) -> int:
    from gibbsmin.examples import example_named, examples, title_of

    files = [example_named(name) for name in options.names] or list(examples().values())
    if options.copy_to is not None:
        for path in copy_files(files, Path(options.copy_to), overwrite=options.overwrite):
            print(path)
    elif options.names:
        print("\n".join(path.read_text(encoding="utf-8") for path in files), end="")
    else:
        width = max(len(path.stem) for path in files)
        print("\n".join(f"{path.stem:<{width}}  {title_of(path)}" for path in files))
    return CONFIRMED


def copy_files(files: Sequence[Path], folder: Path, *, overwrite: bool) -> list[Path]:
    """Copy files into a folder, made if need be; all or, if one would be overwritten unasked, none."""
    import shutil

    targets = [folder / path.name for path in files]
    for target in targets:
        if target.exists() and not overwrite:
            raise FolderExistsError(str(target))
    folder.mkdir(parents=True, exist_ok=True)
    for path, target in zip(files, targets, strict=True):
        shutil.copyfile(path, target)
        _point_at_schema(target)
    return targets


def _point_at_schema(file: Path) -> None:
    """Let a copy's first line, by which editors find the JSON Schema, name the installed one: no path leads there."""
    first, _, rest = file.read_text(encoding="utf-8").partition("\n")
    for package, name in _SCHEMAS.values():
        before, mark, after = first.partition("$schema=")
        if mark and after.endswith(f"{package.replace('.', '/')}/{name}"):
            text = f"{before}{mark}{schema_file(package, name).as_uri()}\n{rest}"
            file.write_text(text, encoding="utf-8")


def schema_file(package: str, name: str) -> Path:
    from importlib.resources import files

    return Path(str(files(package).joinpath(name)))


# --- schema

_SCHEMAS = {
    "scenario": ("gibbsmin.scenario", "schema.json"),
    "study": ("gibbsmin.study", "schema.json"),
    "species": ("gibbsmin.species", "species_file.schema.json"),
}


def _add_schema(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "form", nargs="?", choices=tuple(_SCHEMAS), default="scenario", help="default: %(default)s"
    )
    parser.set_defaults(command=_schema)


def _schema(options: argparse.Namespace) -> int:
    print(schema_file(*_SCHEMAS[options.form]).read_text(encoding="utf-8"), end="")
    return CONFIRMED


_COMMANDS: dict[str, tuple[str, Callable[[argparse.ArgumentParser], None]]] = {
    "run": ("solve a scenario, cross-check it, draw it and save everything in a folder", _add_run),
    "check": ("say whether a scenario is sound and what it would compute", _add_check),
    "study": ("compute many scenarios as one, or what is missing of them", add_study),
    "cases": ("sum up, rank, filter and draw the cases of a study", add_cases),
    "reaction": (
        "K(T) of a reaction, its best short correlations, and the error of given ones",
        add_reaction,
    ),
    "measured": ("reaction enthalpy and entropy from measured K", add_measured),
    "approach": ("approach to equilibrium from gas analyses", add_approach),
    "species": ("list species, or show the data of one", _add_species),
    "scenarios": ("list the example scenarios, print one, or copy them out", _add_scenarios),
    "schema": ("print the JSON Schema of a file form, for editors that check as you type", _add_schema),
}
