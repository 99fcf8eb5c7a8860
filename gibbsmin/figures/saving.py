"""Figures to files, the same bytes for the same figure: no date, no program name, no random ids."""

from __future__ import annotations

import warnings
from pathlib import Path

from matplotlib.figure import Figure

PNG_DOTS_PER_INCH = 160
FORMATS = ("png", "svg")


def save_figure(figure: Figure, folder: Path, name: str) -> list[Path]:
    """Write `name`.png and `name`.svg into an existing folder and return their paths.

    Call it within the look the figure was made in (`gibbsmin.figures.look.house_look`).
    """
    written = []
    for ending in FORMATS:
        path = folder / f"{name}.{ending}"
        metadata = {"Software": None} if ending == "png" else {"Date": None, "Creator": None}
        with warnings.catch_warnings():
            # A title in a script that the font lacks shows boxes; that is no reason to fail a run.
            warnings.filterwarnings("ignore", message=r"Glyph .* missing from font")
            figure.savefig(path, dpi=PNG_DOTS_PER_INCH, metadata=metadata)
        written.append(path)
    return written
