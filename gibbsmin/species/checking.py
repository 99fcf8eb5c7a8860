"""Walking through plain data while collecting faults: the parts that do not know what a species is."""

from __future__ import annotations

import math
from collections.abc import Iterable
from typing import Any

from gibbsmin.errors import Fault
from gibbsmin.strict_yaml import Document, YamlPath

__all__ = ["Checker", "found_text"]


class Checker:
    """Walks plain data and collects faults; a method that meets one returns None or leaves the part out."""

    def __init__(self, document: Document) -> None:
        self.document = document
        self.faults: list[Fault] = []

    def fault(self, path: YamlPath, message: str, *, of_key: bool = False) -> None:
        """Note a fault at the value (or key) of `path`."""
        self.faults.append(self.document.fault(path, message, of_key=of_key))

    def mapping(
        self, path: YamlPath, *, required: Iterable[str] = (), optional: Iterable[str] = ()
    ) -> dict[str, Any] | None:
        """The mapping at `path`, or None; missing and unknown keys are faults, but the mapping is returned."""
        value = self.at(path)
        if not isinstance(value, dict):
            self.fault(
                path, f"expected a mapping with the keys {', '.join(required)}; found {found_text(value)}"
            )
            return None
        required, allowed = tuple(required), (*required, *optional)
        for key in value:
            if key not in allowed:
                hint = _hint(str(key), allowed)
                self.fault(
                    (*path, key), f"unknown key {key!r}{hint}; allowed: {', '.join(allowed)}", of_key=True
                )
        for key in required:
            if key not in value:
                self.fault(path, f"the key {key!r} is missing")
        return value

    def number(self, path: YamlPath, value: Any, *, positive: bool = False) -> float | None:
        """A finite number (above 0 if `positive`), or None after a fault."""
        if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
            self.fault(path, f"expected a number, found {found_text(value)}")
            return None
        if positive and value <= 0:
            self.fault(path, f"expected a number above 0, found {value}")
            return None
        return float(value)

    def text(self, path: YamlPath, value: Any) -> str | None:
        """Text that is not blank, or None after a fault."""
        if not isinstance(value, str) or not value.strip():
            self.fault(path, f"expected text, found {found_text(value)}")
            return None
        return value

    def at(self, path: YamlPath) -> Any:
        """What the document holds at `path`, or None."""
        value = self.document.data
        for step in path:
            try:
                value = value[step]
            except (KeyError, IndexError, TypeError):
                return None
        return value


def found_text(value: Any) -> str:
    """A value as a fault message shows it, never long."""
    if isinstance(value, str):
        return repr(value if len(value) <= 40 else value[:37] + "...")
    if isinstance(value, dict):
        return "a mapping"
    if isinstance(value, list):
        return f"a list of {len(value)}"
    return "nothing" if value is None else repr(value)


def _hint(word: str, allowed: Iterable[str]) -> str:
    import difflib  # only faulty files need it

    near = difflib.get_close_matches(word, list(allowed), n=1)
    return f"; did you mean {near[0]!r}?" if near else ""
