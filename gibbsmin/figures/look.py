"""The look that all figures share: type, colours, and the hatching that stands for an unsolved point.

Lines use the colour-blind-safe set of Okabe & Ito (Color Universal Design, 2008), without its yellow,
which is too pale on white; maps use viridis, whose lightness rises evenly (Smith & van der Walt,
matplotlib, 2015), so that it also reads in grey.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

import matplotlib

LINE_COLOURS = ("#0072B2", "#D55E00", "#009E73", "#CC79A7", "#000000", "#E69F00", "#56B4E9")
LINE_STYLES = ("solid", (0, (5, 1.6)), (0, (1.4, 1.4)))  # the next style is taken when the colours run out
MAP_COLOURS = "viridis"
INK, FAINT = "#222222", "#6b6b6b"
HATCH = "//////"
HATCH_COLOUR = "#9a9a9a"

_LOOK: dict[Any, Any] = {
    "font.family": "DejaVu Sans",  # travels with matplotlib, so that a figure looks the same everywhere
    "font.size": 8.0,
    "axes.titlesize": 8.0,
    "axes.labelsize": 8.0,
    "axes.edgecolor": FAINT,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.7,
    "axes.unicode_minus": True,
    "xtick.color": INK,
    "ytick.color": INK,
    "xtick.labelsize": 7.5,
    "ytick.labelsize": 7.5,
    "xtick.major.width": 0.7,
    "ytick.major.width": 0.7,
    "text.color": INK,
    "hatch.color": HATCH_COLOUR,
    "hatch.linewidth": 0.5,
    "lines.linewidth": 1.6,
    "mathtext.fontset": "dejavusans",
    "svg.hashsalt": "gibbsmin",  # element ids in SVG would otherwise be random
    "svg.fonttype": "path",
    "savefig.facecolor": "white",
    "figure.facecolor": "white",
}


@contextmanager
def house_look() -> Iterator[None]:
    """Matplotlib's own defaults plus the look above, whatever the user has set, and put back afterwards."""
    with matplotlib.rc_context():
        matplotlib.rcdefaults()
        matplotlib.rcParams.update(_LOOK)
        yield
