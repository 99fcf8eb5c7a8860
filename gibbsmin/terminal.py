"""What the commands need of a terminal: progress bars, messages, and text that any encoding survives."""

from __future__ import annotations

import io
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import NoReturn, TextIO


def say(*lines: str) -> None:
    """A message for the person at the terminal; results never go this way."""
    for line in lines:
        print(line, file=sys.stderr)


def accept_any_text(*streams: TextIO) -> None:
    """Let streams of a narrow encoding show a question mark for what they lack, rather than fail.

    A Windows console or a pipe under the C locale cannot show a subscript or a degree sign.
    """
    for stream in streams:
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="replace")


@contextmanager
def progress_bar(
    total: int, what: str, unit: str, *, at_once: bool = True
) -> Iterator[Callable[[int], None]]:
    """A bar on standard error with rate and time left; silent where that is no terminal.

    Gives a function that is told how many more `unit`s are done; it may be called from any thread. The bar is
    shown `at_once`, or else when the first of them is.
    """
    if not sys.stderr.isatty():
        yield lambda done: None
        return
    from tqdm import tqdm

    def show() -> tqdm[NoReturn]:
        return tqdm(total=total, desc=what, unit=f" {unit}", leave=False, file=sys.stderr)

    bars = [show()] if at_once else []

    def advance(done: int) -> None:
        if not bars:
            bars.append(show())
        bars[0].update(done)

    try:
        yield advance
    finally:
        for bar in bars:
            bar.close()
