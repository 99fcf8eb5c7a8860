"""Labelled results of a run: derived quantities, the outcome as one object, and saving it."""

from __future__ import annotations

from gibbsmin.outcome.outcome import Outcome

__all__ = ["Outcome"]
