"""What the benchmarks measured: the tables and plots that `python -m tests.benchmarks` makes of its raw figures.

Nothing is computed here, so that a page cannot say more than the files.
"""

from __future__ import annotations

from pathlib import Path

COMMAND = "python -m tests.benchmarks --into gibbsmin/docs/measured"
NOTHING = (
    "\nNo measured figures are in this copy of the pages. `{command}` measures them and leaves tables and plots where "
    "these pages find them.\n"
)
TABLES = "tables.md"


def figures(folder: Path) -> str:
    """MyST text: the benchmarks' tables with their headings one level up, then the plots."""
    tables = folder / TABLES
    if not tables.exists():
        return NOTHING.format(command=COMMAND)
    lines = tables.read_text(encoding="utf-8").splitlines()
    text = "\n".join(line.removeprefix("#") if line.startswith("###") else line for line in lines)
    plots = [
        f"![{path.stem.replace('_', ' ')}]({folder.name}/{path.name})"
        for path in sorted(folder.glob("*.svg"))
    ]
    if plots:
        text += "\n\n## Plots\n\n" + "\n\n".join(plots)
    return f"\n{text}\n"
