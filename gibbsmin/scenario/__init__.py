"""The scenario file as typed data: reading, units, checks with line and column, and what it would compute."""

from __future__ import annotations

from gibbsmin.scenario.loading import load_scenario, parse_scenario
from gibbsmin.scenario.model import Scenario

__all__ = ["Scenario", "load_scenario", "parse_scenario"]
