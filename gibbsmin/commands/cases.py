"""`gibbsmin cases`: rank, filter and draw the cases of a finished study."""

from __future__ import annotations

import argparse
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import pandas as pd

DEFAULT_SHOWN = 10
_WIDTH = 110


def add_cases(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("folder", metavar="FOLDER", help="of a finished study")
    parser.add_argument(
        "--by", metavar="RESULT", help="rank the cases by this result, species or axis; default: only sum up"
    )
    parser.add_argument("--smallest", action="store_true", help="the smallest value is the best")
    parser.add_argument(
        "--where",
        metavar="CONDITION",
        action="append",
        default=[],
        help="count only points that meet it, such as 'temperature <= 900 degC' or 'H2O < 0.3'; may be repeated",
    )
    parser.add_argument(
        "--most", type=int, default=DEFAULT_SHOWN, metavar="N", help="cases to list; default: %(default)s"
    )
    parser.add_argument("--csv", metavar="FILE", help="write the whole ranking as a table")
    parser.add_argument(
        "--figure", metavar="FILE", help="draw the comparison; the ending says how (png, svg)"
    )
    parser.set_defaults(command=_cases)


def _cases(options: argparse.Namespace) -> int:
    from gibbsmin.errors import ConditionsError
    from gibbsmin.study.ranking import names_of, rank_cases
    from gibbsmin.study.results import open_study

    results = open_study(options.folder)
    code = 0 if results.all_solved and results.all_confirmed else 1
    if options.by is None:
        if wanted := [name for name in ("where", "csv", "figure") if getattr(options, name)]:
            raise ConditionsError(f"--{wanted[0]}", "needs --by, the result to rank the cases by")
        print(results.in_words())
        names = dict.fromkeys(name for dataset in results.datasets.values() for name in names_of(dataset))
        print(f"\nto rank by or to limit: {', '.join(names)}")
        return code
    ranking = rank_cases(results, options.by, smallest=options.smallest, where=options.where)
    print("\n".join(_listed(ranking, options.by, options.most)))
    if options.csv:
        ranking.to_csv(options.csv, index=False, lineterminator="\n")
    if options.figure:
        from gibbsmin.study.comparing import write_comparison

        write_comparison(results, ranking, options.by, Path(options.figure), where=options.where)
    return code


def _listed(ranking: pd.DataFrame, by: str, most: int) -> list[str]:
    """The first cases as a table of text, and a line about those without an allowed point."""
    ranked = ranking[ranking[by].notna()]
    shown = ranked.head(most)
    cells = [["rank", *map(str, shown.columns)]]
    for i, row in enumerate(shown.itertuples(index=False), 1):
        cells.append([str(i), *(f"{value:.6g}" if isinstance(value, float) else str(value) for value in row)])
    widths = [max(len(row[k]) for row in cells) for k in range(len(cells[0]))]
    lines = [
        "  ".join(cell.rjust(width) for cell, width in zip(row, widths, strict=True)).rstrip()
        for row in cells
    ]
    if len(ranked) > len(shown):
        lines.append(f"and {len(ranked) - len(shown)} more")
    if len(ranked) < len(ranking):
        lines.append(
            f"{len(ranking) - len(ranked)} cases have no such result, or no point that meets the conditions"
        )
    return lines
