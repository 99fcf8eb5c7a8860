"""Ranking under conditions against the same done by hand on the whole data set; the figure shows what it should."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from matplotlib.collections import PathCollection

from gibbsmin.errors import ConditionsError
from gibbsmin.figures.look import house_look
from gibbsmin.study import StudyResults, run_study
from gibbsmin.study.comparing import draw_comparison, write_comparison
from gibbsmin.study.ranking import Condition, rank_cases, read_condition
from tests.study_cases import SCENARIO, write_study


@pytest.fixture(scope="module")
def results(tmp_path_factory: pytest.TempPathFactory) -> StudyResults:
    folder = tmp_path_factory.mktemp("ranking")
    return run_study(write_study(folder), folder / "out", workers=0).results


def test_best_point_of_each_case_where_the_conditions_hold(results: StudyResults) -> None:
    ranking = rank_cases(results, "H2 to CO", where=["temperature >= 400 degC", "CO > 0.0045", "steam < 90"])
    dataset = results.dataset.load()
    expected = {}
    for k, case in enumerate(dataset["case"].values):
        best = (np.nan, np.nan, np.nan)
        for i, T in enumerate(dataset["temperature"].values):
            for j, p in enumerate(dataset["pressure"].values):
                point = dataset.isel(case=k, temperature=i, pressure=j)
                value = float(point["H2 to CO"])
                allowed = T >= 673.15 and float(point["mole_fraction"].sel(species="CO")) > 0.0045
                if allowed and float(point["steam"]) < 90 and not value <= best[0]:
                    best = (value, T, p)
        expected[str(case)] = best
    found = {
        row["case"]: (row["H2 to CO"], row["temperature"], row["pressure"])
        for row in ranking.to_dict("records")
    }
    assert {name: np.nan_to_num(best).tolist() for name, best in found.items()} == {
        name: np.nan_to_num(best).tolist() for name, best in expected.items()
    }
    values = ranking["H2 to CO"].to_numpy()
    solved = values[~np.isnan(values)]
    assert 0 < len(solved) < 12
    assert (np.diff(solved) <= 0).all()
    assert np.isnan(values[len(solved) :]).all()


def test_smallest_and_share_of_allowed_points(results: StudyResults) -> None:
    ranking = rank_cases(results, "mole fraction CO", smallest=True, where=["pressure < 25 bar"])
    lowest = (
        results.dataset["mole_fraction"]
        .sel(species="CO")
        .isel(pressure=[0, 1])
        .min(("temperature", "pressure"))
    )
    assert ranking["mole fraction CO"].tolist() == sorted(lowest.values.tolist())
    assert ranking["points allowed"].tolist() == [2 / 3] * 12


def test_a_few_cases_at_a_time_give_the_same(results: StudyResults, monkeypatch: pytest.MonkeyPatch) -> None:
    whole = rank_cases(results, "conversion of CO")
    monkeypatch.setattr("gibbsmin.study.ranking.POINTS_AT_ONCE", 40)
    assert rank_cases(results, "conversion of CO").equals(whole)


def test_names_are_found_as_people_write_them(results: StudyResults) -> None:
    by_coordinate = rank_cases(results, "carbon dioxide")
    assert by_coordinate["carbon dioxide"].tolist() == [3.0] * 4 + [2.0] * 4 + [1.0] * 4
    assert rank_cases(results, "H2")["H2"].equals(rank_cases(results, "mole fraction H2")["mole fraction H2"])


def test_conditions_are_read_with_units() -> None:
    assert read_condition("temperature<=850 degC") == Condition("temperature", "<=", 1123.15)
    assert read_condition("pressure > 20 bar") == Condition("pressure", ">", 20e5)
    assert read_condition("H2 to CO >= 2.5") == Condition("H2 to CO", ">=", 2.5)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("temperature = 5", "expected a name, one of < <= > >=, and a value"),
        ("temperature < 5", "5' has no unit; allowed: K, degC, degF"),
        ("H2 < much", "'much' is no number"),
    ],
)
def test_conditions_that_cannot_be_read(text: str, message: str) -> None:
    with pytest.raises(ConditionsError, match="condition") as error:
        read_condition(text)
    assert message in str(error.value)


def test_an_unknown_result_names_the_nearest(results: StudyResults) -> None:
    with pytest.raises(ConditionsError, match=r"there are .*did you mean 'conversion of CO'\?"):
        rank_cases(results, "conversion of CH")


def test_the_figure_has_a_panel_for_each_quantity_and_all_cases_in_it(results: StudyResults) -> None:
    ranking = rank_cases(results, "conversion of CO", where=["steam > 50"])
    with house_look():
        figure = draw_comparison(results, ranking, "conversion of CO", where=["steam > 50"])
    assert figure is not None
    assert [axes.get_xlabel() for axes in figure.axes] == ["steam (mol)", "carbon dioxide (mol)"]
    for axes, column in zip(figure.axes, ("steam [mol]", "carbon dioxide [mol]"), strict=True):
        dots = [part for part in axes.collections if isinstance(part, PathCollection)]
        drawn = np.vstack([np.asarray(part.get_offsets()) for part in dots])
        wanted = ranking[ranking["conversion of CO"].notna()]
        assert sorted(map(tuple, drawn.tolist())) == sorted(
            zip(wanted[column].astype(float), wanted["conversion of CO"], strict=True)
        )
    words = " ".join(text.get_text() for text in figure.texts)
    assert "3 of 12 cases have no point that meets the conditions" in words
    assert f"1: {ranking['case'][0]}" in words


def test_cases_without_quantities_are_ranked_by_name(tmp_path: Path) -> None:
    path = write_study(tmp_path, "title: Two\nscenarios: [base.yaml, other.yaml]\n")
    (tmp_path / "other.yaml").write_text(SCENARIO.replace("60 mol", "90 mol"), encoding="utf-8")
    results = run_study(path, tmp_path / "out", workers=0).results
    ranking = rank_cases(results, "conversion of CO")
    with house_look():
        figure = draw_comparison(results, ranking, "conversion of CO")
    assert figure is not None
    assert [label.get_text() for label in figure.axes[0].get_yticklabels()] == ["other", "base"]


def test_cases_without_the_result_come_last(tmp_path: Path) -> None:
    path = write_study(tmp_path, "title: Two\nscenarios: [other.yaml, base.yaml]\n")
    other = SCENARIO.replace("H2 to CO:", "something else:")
    (tmp_path / "other.yaml").write_text(other, encoding="utf-8")
    results = run_study(path, tmp_path / "out", workers=0).results
    ranking = rank_cases(results, "H2 to CO")
    assert ranking["case"].tolist() == ["base", "other"]
    assert ranking["H2 to CO"].isna().tolist() == [False, True]
    with pytest.raises(ConditionsError, match="there is none; there are"):
        rank_cases(results, "nowhere")
    with house_look():
        assert draw_comparison(results, ranking, "H2 to CO") is not None


def test_nothing_to_draw(results: StudyResults, tmp_path: Path) -> None:
    ranking = rank_cases(results, "conversion of CO", where=["steam > 500"])
    assert not write_comparison(results, ranking, "conversion of CO", tmp_path / "none.png")
    assert not (tmp_path / "none.png").exists()


def test_the_same_figure_gives_the_same_bytes(results: StudyResults, tmp_path: Path) -> None:
    ranking = rank_cases(results, "conversion of CO")
    for name in ("a.svg", "b.svg"):
        assert write_comparison(results, ranking, "conversion of CO", tmp_path / name)
    assert (tmp_path / "a.svg").read_bytes() == (tmp_path / "b.svg").read_bytes()
