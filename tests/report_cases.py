"""Outcomes that the tests of the report share, and the browser that opens it."""

from __future__ import annotations

import os
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import replace
from functools import cache
from importlib import import_module
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr

import gibbsmin
from gibbsmin.outcome import Outcome

HOSTILE = "<script>document.title='taken over'</script><img src=x onerror=\"document.title='taken over'\"><b>bold</b>"

# A small map with three axes of several values; 'Ostrand' and all figures are made up.
SMALL = """\
title: Reforming of a made-up gas, works Ostrand
notes: |
  Figures of a test.

  - One note.
feed:
  gas:
    temperature: 400 degC
    pressure: 20 bar
    mole per cent: {CH4: 90, CO2: 4, N2: rest}
    total: 100 kmol/h
  steam:
    temperature: 400 degC
    amounts: {H2O: 300 kmol/h}
grid:
  temperature: {from: 500 degC, to: 900 degC, step: 50 K}
  pressure: {from: 1 bar, to: 40 bar, points: 7, spacing: logarithmic}
  further axes:
    steam to carbon:
      ratio:
        of: {moles of: H2O, in: steam}
        to: {atoms of: C, in: gas}
        by changing: steam
      values: [2, 3, 4]
species:
  gases: [CH4, CO, CO2, H2, H2O, N2, NH3, C2H6, C2H4, HCN]
results:
  key species: [H2, CO, CH4]
  conversions: [CH4]
  yields:
    hydrogen per methane: {of: H2, from: CH4}
  ratios:
    H2 to CO: {of: H2, to: CO}
cross-check: {sample size: 6}
"""

REACTIONS = (
    SMALL.replace("[2, 3, 4]", "[3]")
    + """\
reactions:
  equations:
    reforming: CH4 + H2O = CO + 3 H2
    shift: CO + H2O = CO2 + H2
  tolerance: {per cent of K: 5}
  shortcuts:
    straight line:
      reaction: shift
      constant enthalpy at: 700 degC
  alone:
    reforming only: [reforming]
  measured:
    laboratory:
      reaction: shift
      table: |
        T [degC], K, u
        500, 5.2, 0.2
        600, 2.7, 0.1
        700, 1.6, 0.08
        800, 1.1, 0.06
"""
)

PHASES = """\
title: Soot beside a made-up gas
feed:
  gas:
    temperature: 400 degC
    amounts: {CH4: 1 mol, CO2: 1 mol, H2O: 0.5 mol}
grid:
  temperature: {from: 500 degC, to: 900 degC, step: 100 K}
  pressure: [1 bar, 5 bar, 20 bar]
species:
  gases: [CH4, CO, CO2, H2, H2O]
  condensed: [graphite]
results:
  key species: [H2, CO]
  boundaries:
    soot limit: {phase: graphite, along: temperature}
cross-check: {points: none}
"""

LARGE = """\
title: A map of ten thousand points
feed:
  gas:
    temperature: 400 degC
    amounts: {CH4: 1 mol, H2O: 3 mol, N2: 0.1 mol}
grid:
  temperature: {from: 400 degC, to: 1000 degC, points: 100}
  pressure: {from: 1 bar, to: 50 bar, points: 100}
species:
  gases: all
  largest carbon number: 3
results:
  conversions: [CH4]
cross-check: {points: none}
"""


@cache
def small_outcome() -> Outcome:
    return _run(SMALL)


@cache
def large_outcome() -> Outcome:
    return _run(LARGE)


@cache
def reactions_outcome() -> Outcome:
    """Two reactions with a shortcut, one against the mixture, and invented measured values."""
    return _run(REACTIONS)


@cache
def phases_outcome() -> Outcome:
    """A gas from which graphite forms over a part of the map."""
    return _run(PHASES)


def line_outcome() -> Outcome:
    """A grid of one axis: lines, but no map."""
    text = SMALL.replace("{from: 1 bar, to: 40 bar, points: 7, spacing: logarithmic}", "5 bar")
    return _run(text.replace("[2, 3, 4]", "[3]"))


def point_outcome() -> Outcome:
    """A single state: neither map nor lines."""
    text = SMALL.replace("{from: 1 bar, to: 40 bar, points: 7, spacing: logarithmic}", "5 bar")
    return _run(
        text.replace("[2, 3, 4]", "[3]").replace("{from: 500 degC, to: 900 degC, step: 50 K}", "800 degC")
    )


def _run(text: str) -> Outcome:
    from gibbsmin.scenario.loading import parse_scenario

    return gibbsmin.run(parse_scenario(text))


def flawed_outcome() -> Outcome:
    """The small outcome with unsolved points, a phase's activity and a boundary, as later layers may bring them."""
    whole = small_outcome()
    dataset = whole.dataset.copy(deep=True)
    hit = {"steam_to_carbon": 1, "temperature": slice(0, 2), "pressure": 3}
    for each in dataset.data_vars.values():
        if each.dtype.kind == "f" and {"temperature", "pressure"} <= set(each.dims):
            each[hit] = np.nan
    dataset["status"][hit] = 4
    grid = dataset["status"].dims
    none = dataset["gas_amount"].values * 0
    phases = {"phase_amount": (none, none), "phase_amount_per_feed": (none, none)}
    phases["phase_activity"] = (none + 0.5, dataset["mole_fraction"].values[..., 0])
    for name, values in phases.items():
        attributes = {"units": "1", "long_name": name.replace("_", " ")}
        dataset[name] = xr.Variable((*grid, "phase"), np.stack(values, axis=-1), attributes)
    dataset = dataset.assign_coords(phase=["C(graphite)", HOSTILE])
    pressures = dataset["pressure"].values
    dataset["onset"] = xr.Variable(
        ("steam_to_carbon", "pressure"),
        np.broadcast_to(900.0 + 50.0 * np.log10(pressures / 1e5), (3, 7)).copy(),
        {"units": "K", "long_name": "carbon begins", "boundary_along": "temperature"},
    )
    return replace(whole, dataset=dataset)


def hostile_outcome() -> Outcome:
    """Every text from outside that can be hostile is: title, notes, axis, stream, species, remark."""
    whole = small_outcome()
    scenario = whole.scenario
    poisoned = [replace(scenario.species[0], name=HOSTILE, source=HOSTILE), *scenario.species[1:]]
    dataset = whole.dataset.assign_coords(
        species=[HOSTILE, *(str(name) for name in whole.dataset["species"].values[1:])]
    )
    dataset["mole_fraction"].attrs["long_name"] = HOSTILE
    dataset["conversion of CH4"].attrs["long_name"] = HOSTILE
    point = whole.crosscheck.points[0]
    check = replace(
        whole.crosscheck,
        library=HOSTILE,
        points=(
            replace(point, species=HOSTILE, reason=HOSTILE, status="differs"),
            *whole.crosscheck.points[1:],
        ),
    )
    gas, steam = HOSTILE, f"{HOSTILE} steam"
    streams = {
        name: replace(stream, name=name)
        for name, stream in zip((gas, steam), scenario.streams.values(), strict=True)
    }
    ratio = scenario.further_axes[0].ratio
    assert ratio is not None
    ratio = replace(
        ratio,
        numerator=replace(ratio.numerator, streams=(steam,)),
        denominator=replace(ratio.denominator, streams=(gas,)),
    )
    further = replace(scenario.further_axes[0], title=HOSTILE, stream=steam, ratio=ratio)
    asked = replace(
        scenario,
        title=HOSTILE,
        notes=HOSTILE,
        text=HOSTILE,
        remarks=(HOSTILE,),
        streams=streams,
        further_axes=(further,),
        choice=replace(scenario.choice, species=tuple(poisoned), rule=HOSTILE, left_out={HOSTILE: HOSTILE}),
        results=replace(scenario.results, key_species=(HOSTILE, "H2")),
    )
    return replace(whole, scenario=asked, dataset=dataset, crosscheck=check, settings={HOSTILE: HOSTILE})


BROWSER_OPTIONS = [
    "--headless",
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
]


def browser_path() -> str:
    """Where Chromium is. Without one the test is skipped; under CI, which installs it, that is a failure."""
    for name in ("chromium", "chromium-browser", "google-chrome"):
        if path := shutil.which(name):
            return path
    reason = "no Chromium on this machine (Debian: package chromium); the report is not opened in a browser"
    if os.environ.get("CI"):
        pytest.fail(reason)
    pytest.skip(reason)


def needed(name: str, extra: str) -> Any:
    """A module of an optional part. Without it the test is skipped; under CI, which installs it, that is a failure."""
    if os.environ.get("CI"):
        return import_module(name)
    return pytest.importorskip(name, reason=f"{name.split('.')[0]} is not installed (extra {extra!r})")


@contextmanager
def started_browser() -> Iterator[Any]:
    path = browser_path()
    api = needed("playwright.sync_api", "test")
    with api.sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=path, args=BROWSER_OPTIONS)
        try:
            yield browser
        finally:
            browser.close()


class OpenedPage:
    """A report in the browser, with all that it logged, asked for and threw."""

    def __init__(self, browser: Any, file: Path, **options: Any) -> None:
        settings = {"viewport": {"width": 1280, "height": 900}, **options}
        self.context = browser.new_context(**settings)
        self.page = self.context.new_page()
        self.troubles: list[str] = []
        self.requests: list[str] = []
        self.page.on("console", lambda message: self._log(message.type, message.text))
        self.page.on("pageerror", lambda error: self.troubles.append(f"threw {error}"))
        self.page.on("dialog", lambda dialog: self.troubles.append(f"dialog {dialog.message}"))
        self.page.on("request", lambda request: self.requests.append(request.url))
        self.file = file
        self.page.goto(file.as_uri())
        if settings.get("java_script_enabled", True):
            self.page.wait_for_selector("html[data-ready]", timeout=20_000)

    def _log(self, kind: str, text: str) -> None:
        if kind in ("error", "warning"):
            self.troubles.append(f"{kind}: {text}")

    @property
    def foreign_requests(self) -> list[str]:
        """Whatever was asked for beyond the file itself and data that it holds."""
        own = self.file.as_uri()
        return [
            url
            for url in self.requests
            if url.split("#")[0] != own and not url.startswith(("data:", "blob:"))
        ]

    def run(self, script: str, argument: Any = None) -> Any:
        return self.page.evaluate(script, argument)

    def settle(self) -> None:
        """Wait until what a control asked for is drawn."""
        self.run("() => new Promise((done) => requestAnimationFrame(() => requestAnimationFrame(done)))")

    def close(self) -> None:
        self.context.close()
