"""Small phrases that the fault messages share."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from typing import Any

MOST_WORDS_LISTED = 20
"""Longer lists of allowed words are cut; nobody reads them."""


def nearest(word: str, allowed: Iterable[str]) -> str:
    """'; did you mean ...?' for the allowed word most like `word`, or nothing."""
    by_folded = {each.casefold(): each for each in allowed}
    found = difflib.get_close_matches(word.casefold(), by_folded, n=1, cutoff=0.6)
    return f"; did you mean {by_folded[found[0]]!r}?" if found else ""


def listed(words: Iterable[str]) -> str:
    """Words with commas between, a long list cut short."""
    everything = list(words)
    shown = ", ".join(everything[:MOST_WORDS_LISTED])
    left = len(everything) - MOST_WORDS_LISTED
    return f"{shown} and {left} more" if left > 0 else shown


def shown(value: Any) -> str:
    """A value of the file as the message quotes it."""
    if value is None:
        return "nothing"
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, dict):
        return "a mapping"
    if isinstance(value, list):
        return "a list"
    if isinstance(value, str):
        text = value if len(value) <= 60 else value[:57] + "..."
        return repr(text)
    return f"{value!r}"
