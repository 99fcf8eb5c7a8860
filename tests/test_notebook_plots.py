"""What a notebook shows of a result: pictures through the data set itself, and the outcome as HTML."""

from __future__ import annotations

import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from matplotlib.text import Text

import gibbsmin
from gibbsmin.notebook import Picture
from gibbsmin.outcome import Outcome
from tests.report_cases import HOSTILE, hostile_outcome, small_outcome

PNG = b"\x89PNG\r\n\x1a\n"


@pytest.fixture(scope="module")
def outcome() -> Outcome:
    return small_outcome()


def texts(picture: Picture) -> str:
    return " | ".join(each.get_text() for each in picture.figure.findobj(Text))


def test_map_of_a_species_shows_itself_and_saves(outcome: Outcome, tmp_path: Path) -> None:
    picture = outcome.dataset.gibbsmin.plot.map("H2", steam_to_carbon=3)
    assert picture._repr_png_().startswith(PNG)
    words = texts(picture)
    assert "Temperature (°C)" in words
    assert "Pressure (bar)" in words
    assert "steam to carbon = 3" in words
    assert picture.save(tmp_path / "map.svg").read_text(encoding="utf-8").startswith("<?xml")


def test_map_of_a_result_in_other_units_has_a_panel_for_each_ratio(outcome: Outcome) -> None:
    picture = outcome.dataset.gibbsmin.plot.map(
        "conversion of CH4", units={"temperature": "K", "pressure": "kPa"}
    )
    words = texts(picture)
    assert "Temperature (K)" in words
    assert "Pressure (kPa)" in words
    assert all(f"steam to carbon = {value}" in words for value in (2, 3, 4))


def test_lines_hold_the_values_of_the_nearest_point(outcome: Outcome) -> None:
    picture = outcome.dataset.gibbsmin.plot.lines("H2", "CO", pressure=2.1e5, steam_to_carbon=2.9)
    curves = {line.get_label(): line.get_ydata() for axes in picture.figure.axes for line in axes.lines}
    nearest = outcome.dataset["mole_fraction"].sel(pressure=2.1e5, steam_to_carbon=2.9, method="nearest")
    np.testing.assert_allclose(curves["H2"], nearest.sel(species="H2"))
    np.testing.assert_allclose(curves["CO"], nearest.sel(species="CO"))


def test_dry_lines_leave_water_out_and_work_without_a_run() -> None:
    gas = gibbsmin.equilibrium(
        {"CO": 1, "H2O": 2},
        temperature=[500.0, 700.0, 900.0],
        pressure=1e5,
        species=["CO", "CO2", "H2", "H2O"],
    )
    picture = gas.gibbsmin.plot.lines(dry=True)
    curves = {line.get_label(): line.get_ydata() for axes in picture.figure.axes for line in axes.lines}
    assert set(curves) == {"CO", "CO2", "H2"}
    np.testing.assert_allclose(sum(curves.values()), 1.0)


def test_wrong_names_are_told_with_near_ones(outcome: Outcome) -> None:
    plot = outcome.dataset.gibbsmin.plot
    with pytest.raises(KeyError, match="did you mean conversion of CH4"):
        plot.map("conversion of CH3")
    with pytest.raises(KeyError, match="no axis is called 'presure'; did you mean pressure"):
        plot.map("H2", presure=1e5)
    with pytest.raises(ValueError, match="two axes with several values"):
        plot.map("H2", pressure=1e5, steam_to_carbon=3)


def test_the_accessor_comes_with_the_functions_that_give_data_sets() -> None:
    program = (
        "import sys, gibbsmin; assert 'xarray' not in sys.modules; gibbsmin.equilibrium;"
        "import xarray; assert hasattr(xarray.Dataset, 'gibbsmin'); assert 'matplotlib' not in sys.modules"
    )
    root = Path(__file__).parents[1]
    subprocess.run([sys.executable, "-c", program], cwd=root, check=True)


def test_an_outcome_shows_verdict_results_and_cautions(outcome: Outcome) -> None:
    html = outcome._repr_html_()
    for words in (
        "works Ostrand",
        "189 of 189 points solved",
        "conversion of CH4",
        "Equilibrium is a limit, not a rate",
    ):
        assert words in html
    assert len(html) < 12_000
    poor = replace(outcome, dataset=outcome.dataset.assign(status=outcome.dataset["status"] * 0 + 4))
    assert "! 0 of 189 points solved" in poor._repr_html_()


def test_hostile_text_stays_text_in_a_notebook() -> None:
    html = hostile_outcome()._repr_html_()
    assert "<script" not in html
    assert "<img" not in html
    assert HOSTILE.replace("&", "&amp;").replace("<", "&lt;").split(">")[0] in html
