"""Reactions in a whole run: data set, summary, files, figures; and the three commands."""

from __future__ import annotations

import csv
import re
from collections.abc import Iterator
from contextlib import redirect_stderr, redirect_stdout
from dataclasses import replace
from functools import cache
from io import StringIO
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr
from matplotlib.figure import Figure

from gibbsmin import load_scenario, run
from gibbsmin.cli import main
from gibbsmin.figures.look import house_look
from gibbsmin.figures.of_outcome import count_figures
from gibbsmin.figures.of_reactions import count_outcome_figures, outcome_figures
from gibbsmin.outcome import Outcome
from gibbsmin.outcome.reactions import reactions_text
from gibbsmin.reactions import ReactionFunctions, Reason, read_reaction
from gibbsmin.scenario import parse_scenario
from gibbsmin.scenario.axes import RESERVED_NAMES
from gibbsmin.scenario.model import CrossCheckWanted
from gibbsmin.shipped_files import scenario_folder
from tests.test_reactions_scenario import SOUND

TEXT = (
    SOUND.replace("step: 100 K", "step: 50 K").replace("[1 bar, 10 bar]", "[1 bar, 5 bar, 20 bar]")
    + "cross-check: {points: none}\n"
)


@cache
def outcome() -> Outcome:
    return run(parse_scenario(TEXT))


def test_data_set_holds_functions_errors_and_comparisons() -> None:
    dataset = outcome().dataset
    T = dataset["temperature"].values
    reforming = read_reaction("CH4 + H2O = CO + 3 H2")
    expected = ReactionFunctions(reforming).ln_K(T) + 2 * np.log(1e5 / 101325)
    np.testing.assert_allclose(dataset["ln_K"].sel(reaction="reforming"), expected, rtol=1e-12)
    assert "101325 Pa" in dataset["ln_K"].attrs["long_name"]
    assert dataset["shortcut_error_per_cent"].sizes == {"shortcut": 6, "temperature": 7}
    error = dataset["alone_error"].sel(species="H2")
    np.testing.assert_allclose(
        error,
        dataset["alone_mole_fraction"].sel(species="H2") - dataset["mole_fraction"].sel(species="H2"),
        atol=1e-15,
    )
    assert list(dataset["alone"].values[:2]) == ["one, K exact", "one, K tangent"]
    both = dataset.sel(alone="both, K exact")
    assert (both["alone_reason"] == Reason.WITHIN).all()
    assert (both["alone_neglected"] == -1).all()
    one = dataset.sel(alone="one, K exact")
    lost = one["alone_reason"] == Reason.NEGLECTED_REACTIONS
    assert lost.any()
    meanings = dataset["alone_neglected"].attrs["flag_meanings"].split()
    assert {meanings[int(code) + 1] for code in np.unique(one["alone_neglected"].values[lost.values])} == {
        "shift"
    }
    np.testing.assert_allclose(
        one["alone_conversion_error_CH4"],
        one["alone_conversion_CH4"] - dataset["conversion of CH4"],
        atol=1e-12,
    )
    for name in dataset.data_vars:
        assert {"units", "long_name"} <= dataset[name].attrs.keys(), name


def unwrapped(text: str) -> str:
    return " ".join(text.split())


def test_text_says_what_a_reader_needs() -> None:
    text = unwrapped(reactions_text(outcome()))
    for words in (
        "so 3 independent reactions",
        "K rises with temperature: the reaction takes up heat",
        "Valid: 200 K",
        "Kp/atm^2",
        "ln K, Delta G and Delta S at a standard pressure of 101325 Pa",
        "spreadsheet, T in K in A1, K in atm^2: =EXP(",
        "Python: K = lambda T: math.exp(",
        "published: ln K = 4577.8/T - 4.33",
        "within 3 % of K and 2 K",
        "one neglects shift (CO + H2O = CO2 + H2): with it as well,",
        "do not use",
        "Measured K: bench",
        "1/T = 0 lies",
        "Curvature: not to be tested with fewer than four values",
        "Third law, Delta H at 298.15 K",
        "combined standard uncertainties",
        "T at which K = Q/degC",
        "Equilibrium is a limit, not a rate",
    ):
        assert words in text, words
    assert max(map(len, outcome().summary().splitlines())) < 175
    assert "One or a few reactions against the whole mixture" in outcome().summary()
    assert "Approach to equilibrium" in outcome().summary()


def rows_of(file: Path) -> list[list[str]]:
    return list(csv.reader(file.read_text(encoding="utf-8").splitlines()))


def test_files_of_a_run(tmp_path: Path) -> None:
    folder = outcome().save(tmp_path / "out")
    assert (folder / "reactions.txt").read_text(encoding="utf-8") == reactions_text(outcome()) + "\n"
    rows = rows_of(folder / "reaction_constants.csv")
    assert len(rows) == 1 + 3 * 7
    assert float(rows[1][2]) == 873.15
    assert len(rows_of(folder / "measured_constants.csv")) == 4
    assert len(rows_of(folder / "approach.csv")) == 2
    with xr.open_dataset(folder / "results.nc") as saved:
        xr.testing.assert_identical(saved.load(), outcome().dataset)


def test_a_run_without_the_section_has_nothing_of_it(tmp_path: Path) -> None:
    plain = run(parse_scenario(TEXT[: TEXT.index("reactions:")] + "cross-check: {points: none}\n"))
    assert plain.reactions is None
    assert "reaction" not in plain.dataset.dims
    folder = plain.save(tmp_path / "out")
    assert not list(folder.glob("*reaction*"))
    assert list(outcome_figures(plain)) == []


def test_one_temperature_is_enough() -> None:
    text = TEXT.replace("{from: 600 degC, to: 900 degC, step: 50 K}", "700 degC")
    found = run(parse_scenario(text))
    assert found.reactions is not None
    assert found.reactions.reactions[0].fits == ()
    assert "700" in reactions_text(found)
    with house_look():
        drawn = list(outcome_figures(found))
    assert len(drawn) == count_outcome_figures(found)


def test_further_axes_are_carried_through() -> None:
    text = TEXT.replace(
        "  pressure: [1 bar, 5 bar, 20 bar]\n",
        "  pressure: [1 bar, 5 bar, 20 bar]\n  further axes:\n    steam to carbon:\n      ratio:\n"
        "        of: {moles of: H2O}\n        to: {moles of: CH4}\n        by changing: steam\n      values: [1, 3]\n",
    ).replace(
        "    amounts: {CH4: 1 mol, H2O: 3 mol, N2: 0.05 mol}\n",
        "    amounts: {CH4: 1 mol, N2: 0.05 mol}\n  steam:\n    amounts: {H2O: 1 mol}\n",
    )
    text = text[: text.index("  outlet analyses:")] + "cross-check: {points: none}\n"
    found = run(parse_scenario(text))
    dataset = found.dataset
    assert dataset["alone_reason"].dims == ("alone", "steam_to_carbon", "temperature", "pressure")
    both = dataset["alone_error"].sel(alone="both, K exact")
    assert float(abs(both).max()) < 1e-9
    # At steam to carbon 1 carbon would form, and the map says so.
    assert (
        dataset["alone_reason"].sel(alone="both, K exact", steam_to_carbon=1) == Reason.CONDENSED_PHASE
    ).any()
    assert "the activity of C(gr) reaches" in unwrapped(reactions_text(found))
    with house_look():
        drawn = list(outcome_figures(found))
    assert all(each.figure is not None for each in drawn if each.name.startswith(("trust", "alone")))


def test_the_shipped_example_runs_and_says_what_its_notes_say() -> None:
    scenario = load_scenario(scenario_folder() / "shift_constants.yaml")
    found = run(replace(scenario, cross_check=CrossCheckWanted(extent="none")))
    assert found.all_solved
    results = found.reactions
    assert results is not None
    by_name = {(each.subset.name, each.K): each for each in results.comparisons}
    assert by_name["reforming only", "exact"].trusted == 0.0
    assert by_name["reforming, shift and ethane", "exact"].trusted == 1.0
    assert {each.verdict for each in results.approaches if each.reaction.name == "reforming"} == {
        "falls short of equilibrium"
    }


# --- figures -------------------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def drawn() -> Iterator[dict[str, Figure]]:
    with house_look():
        found = list(outcome_figures(outcome()))
        assert len(found) == count_outcome_figures(outcome())
        assert count_figures(outcome()) > len(found)
        yield {each.name: each.figure for each in found if each.figure is not None}


def texts(figure: Figure) -> str:
    figure.canvas.draw()
    return "\n".join(each.get_text() for each in figure.findobj(lambda artist: hasattr(artist, "get_text")))


def test_constant_is_drawn_over_the_inverse_temperature(drawn: dict[str, Figure]) -> None:
    figure = drawn["constant_reforming"]
    axes = figure.axes[0]
    x, y = axes.lines[0].get_data()
    np.testing.assert_allclose(
        y, ReactionFunctions(read_reaction("CH4 + H2O = CO + 3 H2")).ln_K(1e3 / np.asarray(x))
    )
    words = texts(figure)
    assert "Temperature (°C)" in words
    assert "1000 K / $T$" in words
    assert "800" in words
    assert "tangent" in words
    assert "secant" in words
    assert "tangent" not in texts(drawn["constant_shift"])
    assert "measured: bench" in texts(drawn["constant_shift"])


def test_errors_of_shortcuts_carry_their_tolerance(drawn: dict[str, Figure]) -> None:
    per_cent, kelvin = drawn["shortcuts_reforming"].axes
    for axes, accepted in ((per_cent, 3.0), (kelvin, 2.0)):
        (band,) = axes.patches
        assert band.get_extents().transformed(axes.transData.inverted()).height == pytest.approx(2 * accepted)
        assert axes.get_ylim()[1] <= 1.05 * 4 * accepted + 1e-9


def test_extrapolation_is_shown_for_what_it_is(drawn: dict[str, Figure]) -> None:
    figure = drawn["measured_bench"]
    far = figure.axes[1]
    assert far.get_xlim()[0] == 0.0
    words = texts(figure)
    assert "extrapolated: Δ$S$ =" in words
    assert "not measured here" in words
    assert "widths of the data from their middle" in words
    dashed = [line for line in far.lines if line.get_linestyle() == "--"]
    data_from = 1e3 / 733.15
    assert dashed
    assert max(float(np.max(line.get_xdata())) for line in dashed) <= data_from + 1e-9


def test_trust_map_shows_the_codes(drawn: dict[str, Figure]) -> None:
    figure = drawn["trust_one_exact"]
    mesh = figure.axes[0].collections[0]
    codes = (
        outcome()
        .dataset["alone_reason"]
        .sel(alone="one, K exact")
        .transpose("pressure", "temperature")
        .values
    )
    np.testing.assert_array_equal(np.asarray(mesh.get_array()).reshape(codes.shape), codes)
    assert "neglected reactions" in texts(figure)
    assert "error of K" not in texts(figure)


def test_compositions_stand_side_by_side(drawn: dict[str, Figure]) -> None:
    figure = drawn["alone_one"]
    words = texts(figure)
    assert "whole mixture" in words
    assert "exact K" in words
    first = figure.axes[0].lines[0]
    expected = outcome().dataset["mole_fraction"].sel(species="H2").isel(pressure=0)
    np.testing.assert_allclose(first.get_ydata(), expected)


# --- commands ------------------------------------------------------------------------------------------------


def command(*arguments: str) -> tuple[int, str, str]:
    out, err = StringIO(), StringIO()
    with redirect_stdout(out), redirect_stderr(err):
        code = main(list(arguments))
    return code, out.getvalue(), err.getvalue()


def test_reaction_command(tmp_path: Path) -> None:
    code, out, err = command(
        "reaction", "CO + H2O = CO2 + H2", "--from", "200 degC", "--to", "500 degC",
        "--correlation", "ln K = 4577.8/T - 4.33", "--constant-enthalpy-at", "25 degC", "--kelvin", "5",
        "--figures", str(tmp_path / "figures"),
    )  # fmt: skip
    assert (code, err) == (0, "")
    assert "largest error 0.0178 in ln K" in out
    assert re.search(
        r"ln K = 4577.8/T - 4.33 +CO \+ H2O = CO2 \+ H2 +-0.119 +-11.2 % +200 degC +\+5.6 K", out
    )
    assert len(list((tmp_path / "figures").iterdir())) == 4


def test_reaction_command_counts_independent_reactions() -> None:
    code, out, _ = command(
        "reaction", "CO + H2O = CO2 + H2", "--among", "CH4", "H2O", "CO", "CO2", "H2", "N2",
        "--beside", "CH4 + H2O = CO + 3 H2", "--beside", "CH4 + 2 H2O = CO2 + 4 H2",
    )  # fmt: skip
    assert code == 0
    assert "6 species, 4 independent balances, so 2 independent reactions" in out
    assert "the set given has 2 independent reactions; it spans them all" in out
    assert (
        "redundant: (CH4 + 2 H2O = CO2 + 4 H2) = (CO + H2O = CO2 + H2) + (CH4 + H2O = CO + 3 H2)"
        in unwrapped(out)
    )


def test_measured_command(tmp_path: Path) -> None:
    file = tmp_path / "n2o4.csv"
    file.write_text("T [degC], Kp [atm]\n25, 0.1426\n35, 0.3183\n45, 0.6706\n", encoding="utf-8")
    code, out, err = command("measured", "N2O4 = 2 NO2", str(file), "--figures", str(tmp_path / "figures"))
    assert (code, err) == (0, "")
    assert "61.052 +- 0.17" in out
    assert "sign of a" in out
    assert len(list((tmp_path / "figures").iterdir())) == 4


def test_approach_command(tmp_path: Path) -> None:
    file = tmp_path / "outlet.csv"
    file.write_text(
        "sample, T [degC], p [bar], H2, CO, CO2, CH4, N2\ntube, 838, 24.1, 71.4, 12.15, 9.2, 6.97, 0.28\n",
        encoding="utf-8",
    )
    code, out, err = command(
        "approach", str(file), "--reaction", "reforming: CH4 + H2O = CO + 3 H2", "--basis", "dry",
        "--feed", "CH4=960", "C2H6=20", "N2=10", "CO2=10", "H2O=3000",
    )  # fmt: skip
    assert (code, err) == (0, "")
    assert re.search(r"tube +reforming +838 +0.7243 +823.5 +\+14.5 +falls short", out)


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["reaction", "CO + H2O = CO2"], "does not balance; H: 2 on the left, 0 on the right"),
        (["reaction", "CO + H2O = CO2 + H2", "--from", "200"], "--from: '200' has no unit"),
        (
            ["reaction", "CO + H2O = CO2 + H2", "--to", "-300 degC"],
            "--to: -300 degC is not above absolute zero",
        ),
        (["reaction", "CO + H2O = CO2 + H2", "--from", "100 K"], "CO: 100 K is outside the range 200"),
        (["reaction", "CO + H2O = CO2 + H2", "--unit-of-K", "inch"], "no unit of an equilibrium constant"),
        (["reaction", "CO + H2O = CO2 + H2", "--kelvin", "-1"], "above zero"),
        (["reaction", "CO + H2O = CO2 + H2", "--beside", "N2O4 = 2 NO2"], "--beside: needs --among"),
        (["reaction", "CO + H2O = CO2 + H2", "--among", "CO", "H2O"], "CO2, H2 is not among the species"),
        (["measured", "N2O4 = 2 NO2", "nowhere.csv"], "nowhere.csv: cannot be read"),
        (["approach", "nowhere.csv", "--reaction", "N2O4 = 2 NO2"], "nowhere.csv: cannot be read"),
        (
            ["approach", "nowhere.csv", "--reaction", "N2O4 = 2 NO2", "--feed", "CO"],
            "expected SPECIES=AMOUNT",
        ),
    ],
)
def test_wrong_requests_end_with_one_message(arguments: list[str], words: str, monkeypatch: Any) -> None:
    code, out, err = command(*arguments)
    assert code == 2
    assert out == ""
    assert words in err
    assert len(err.splitlines()) == 1


def test_no_axis_takes_a_name_of_these_results() -> None:
    made = set(outcome().dataset.variables) - set(
        run(parse_scenario(TEXT.split("reactions:\n  equations")[0])).dataset.variables
    )
    assert {"ln_K", "alone_reason", "shortcut"} <= made
    fixed = {str(name) for name in made if not str(name).startswith("alone_conversion")}
    assert {name.casefold() for name in fixed} <= RESERVED_NAMES
