"""Figures: what is on them (labels, panels, blanks), not merely that a file exists.

The data are made up (weights from straight lines in T and ln p) so that nothing here rests on a solver;
drawing conventions are common practice, no source, unless a source stands beside the check.
"""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import matplotlib
import numpy as np
import pytest
import xarray as xr
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle

from gibbsmin.figures import (
    DisplayUnit,
    draw_bars,
    draw_lines,
    draw_map,
    figures_of,
    key_species,
    write_figures,
)
from gibbsmin.figures.axes import axes_of, is_logarithmic, spread
from gibbsmin.figures.label_places import place_labels
from gibbsmin.figures.labels import chemical, file_name, number, with_formulas
from gibbsmin.figures.levels import choose_levels
from gibbsmin.figures.lines import spread_apart
from gibbsmin.figures.look import LINE_COLOURS
from gibbsmin.figures.refining import refine
from gibbsmin.figures.ticks import log_ticks

UNITS = {"temperature": DisplayUnit("°C", 1.0, 273.15), "pressure": DisplayUnit("bar", 1e5)}
SPECIES = {
    "H2": (1.0, 0.004, -0.3),
    "CH4": (2.0, -0.01, 0.3),
    "CO": (-2.0, 0.006, -0.2),
    "H2O": (1.5, 0.0, 0.1),
}


def made_up(
    temperatures: object = np.linspace(700.0, 1200.0, 11),
    pressures: object = np.geomspace(1e5, 1e7, 9),
    ratios: object = (2.0, 3.0, 4.0),
    species: dict[str, tuple[float, float, float]] = SPECIES,
) -> xr.Dataset:
    t, p, r = (np.asarray(values, dtype=float) for values in (temperatures, pressures, ratios))
    weight = np.stack(
        [
            np.exp(
                a
                + b * (t[None, :, None] - 900)
                + c * np.log(p / 1e6)[None, None, :]
                + 0.1 * i * r[:, None, None]
            )
            for i, (a, b, c) in enumerate(species.values())
        ],
        axis=-1,
    )
    dims = ("steam_to_carbon", "temperature", "pressure")
    return xr.Dataset(
        {
            "mole_fraction": ((*dims, "species"), weight / weight.sum(-1, keepdims=True), {"units": "1"}),
            "h2_per_co": (
                dims,
                weight[..., 0] / weight[..., -1],
                {"units": "1", "long_name": "ratio of two species"},
            ),
            "status": (dims, np.zeros(weight.shape[:-1], np.int8)),
        },
        coords={
            "temperature": ("temperature", t, {"units": "K", "long_name": "temperature"}),
            "pressure": ("pressure", p, {"units": "Pa", "long_name": "absolute pressure"}),
            "steam_to_carbon": ("steam_to_carbon", r, {"units": "1", "long_name": "steam to carbon"}),
            "species": list(species),
        },
    )


def field_of(dataset: xr.Dataset, species: str = "H2") -> xr.DataArray:
    return dataset["mole_fraction"].sel(species=species)


def drawn_map(field: xr.DataArray, **options: object) -> Figure:
    figure = draw_map(field, title="map", units=UNITS, **options)  # type: ignore[arg-type]
    assert figure is not None
    return figure


def panels(figure: Figure) -> list[matplotlib.axes.Axes]:
    return [axes for axes in figure.axes if axes.get_label() != "<colorbar>"]


def by_gid(figure: Figure, gid: str) -> list[matplotlib.artist.Artist]:
    return figure.findobj(lambda artist: artist.get_gid() == gid)


def all_text(figure: Figure) -> str:
    texts = figure.findobj(matplotlib.text.Text)
    return "\n".join(text.get_text() for text in texts if text.get_text())


# --- words and numbers


@pytest.mark.parametrize(
    ("name", "markup"),
    [
        ("CH4", r"$\mathregular{CH_{4}}$"),
        ("CO", r"$\mathregular{CO}$"),
        ("H3O+", r"$\mathregular{H_{3}O^{+}}$"),
        ("SO3-", r"$\mathregular{SO_{3}^{-}}$"),
        ("Fe0.947O", r"$\mathregular{Fe_{0.947}O}$"),
        ("(HCOOH)2", r"$\mathregular{(HCOOH)_{2}}$"),
        ("H2O(l)", r"$\mathregular{H_{2}O(l)}$"),
        ("C(gr)", r"$\mathregular{C(gr)}$"),
        ("C2H2 (acetylene)", r"$\mathregular{C_{2}H_{2}}$ (acetylene)"),
        ("C4H8,1-butene", r"$\mathregular{C_{4}H_{8}}$,1-butene"),
        ("my gas no 2", "my gas no 2"),
        ("$x_2$", r"\$x_2\$"),
        ("<script>", "<script>"),
    ],
)
def test_formulas_get_subscripts_and_anything_else_is_left_alone(name: str, markup: str) -> None:
    assert chemical(name) == markup


def test_formulas_within_a_phrase_get_subscripts_too() -> None:
    assert with_formulas("H2/CO") == r"$\mathregular{H_{2}}$/CO"
    assert with_formulas("conversion of CH4 in pass 2 at $5") == (
        r"conversion of $\mathregular{CH_{4}}$ in pass 2 at \$5"
    )
    assert with_formulas("T90 and Q2") == "T90 and Q2"  # no elements
    assert with_formulas("Fe0.947O at 1.5 bar.") == r"$\mathregular{Fe_{0.947}O}$ at 1.5 bar."


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0.0, "0"),
        (0.25, "0.25"),
        (1200.0, "1200"),
        (99999.0, "100000"),  # four digits, written out
        (1e-4, "10⁻⁴"),
        (5e-12, "5×10⁻¹²"),
        (-2.5e7, "−2.5×10⁷"),
        (9.9999e-5, "10⁻⁴"),
        (-3.5, "−3.5"),
    ],
)
def test_numbers_are_written_as_people_write_them(value: float, text: str) -> None:
    assert number(value) == text


def test_file_names_hold_no_character_that_a_file_system_refuses() -> None:
    assert file_name("C2H2 (acetylene)") == "C2H2_acetylene"
    assert file_name('a/b\\c:d*e?"f<g>|') == "a_b_c_d_e_f_g"


# --- axes


@pytest.mark.parametrize(
    ("values", "logarithmic"),
    [
        (np.linspace(1, 100, 12), False),
        (np.geomspace(1, 100, 12), True),
        ([1.0, 5.0, 10.0, 30.0], True),  # uneven, a wide span
        ([1.0, 2.0, 3.5], False),  # uneven, a narrow span
        ([1.0, 100.0], False),  # two points say nothing
        ([-1.0, 1.0, 10.0, 100.0], False),
    ],
)
def test_an_axis_is_logarithmic_where_its_grid_is(values: list[float], logarithmic: bool) -> None:
    assert is_logarithmic(np.asarray(values)) is logarithmic


def test_values_are_chosen_with_both_ends() -> None:
    assert spread(21, 3) == [0, 10, 20]
    assert spread(2, 3) == [0, 1]
    assert spread(9, 1) == [4]


@pytest.mark.parametrize(("low", "high"), [(1, 100), (0.5, 8), (1e-4, 1e5), (17, 23), (2, 2.1)])
def test_ticks_of_a_logarithmic_axis_are_few_and_inside(low: float, high: float) -> None:
    ticks = log_ticks(low, high, 6)
    assert 2 <= len(ticks) <= 6
    assert min(ticks) >= low * (1 - 1e-9)
    assert max(ticks) <= high * (1 + 1e-9)
    assert ticks == sorted(set(ticks))


def test_axes_are_in_the_units_of_the_user() -> None:
    axes = axes_of(field_of(made_up()), UNITS)
    assert list(axes) == ["temperature", "pressure", "steam_to_carbon"]
    assert axes["temperature"].values[0] == pytest.approx(426.85)  # 700 K
    assert axes["temperature"].label == "Temperature (°C)"
    assert axes["pressure"].at(8) == "100 bar"
    assert axes["steam_to_carbon"].at(1) == "steam to carbon = 3"


def test_scattered_points_are_refused() -> None:
    scattered = xr.DataArray([1.0, 2.0], dims="point", coords={"temperature": ("point", [1.0, 2.0])})
    with pytest.raises(ValueError, match="'point' is no axis of a grid"):
        draw_map(scattered, title="")


def test_a_field_is_refined_by_straight_lines_on_the_scales_as_drawn() -> None:
    axes = axes_of(
        field_of(made_up(temperatures=[700.0, 800.0, 1000.0], pressures=np.geomspace(1e5, 1e7, 3))), UNITS
    )
    up, across = axes["pressure"], axes["temperature"]
    plane = across.values[None, :] + 50.0 * np.log(up.values)[:, None]
    x, y, fine = refine(plane, up, across)
    assert set(across.values) <= set(x)
    assert set(up.values) <= set(y)
    assert len(x) >= 80
    assert len(y) >= 80
    np.testing.assert_allclose(fine, x[None, :] + 50.0 * np.log(y)[:, None], rtol=1e-12)


def test_refining_leaves_squares_beside_an_unsolved_point_blank_and_no_others() -> None:
    axes = axes_of(field_of(made_up(temperatures=[700.0, 800.0, 900.0], pressures=[1e5, 2e5, 3e5])), UNITS)
    up, across = axes["pressure"], axes["temperature"]
    x, y, fine = refine(np.array([[np.nan, 1.0, 1.0], [1.0, 1.0, 1.0], [1.0, 1.0, 1.0]]), up, across)
    inside = (x[None, :] < across.values[1] - 1e-9) & (y[:, None] < up.values[1] - 1e-9)
    on_an_edge = (x[None, :] == across.values[0]) | (y[:, None] == up.values[0])
    assert np.isnan(fine[inside & ~on_an_edge]).all()
    assert np.isfinite(fine[~inside]).all()


# --- colour levels


def test_a_narrow_field_gets_even_levels_around_it() -> None:
    levels = choose_levels(np.array([0.02, 0.3, 0.61, np.nan]))
    assert levels is not None
    assert not levels.logarithmic
    assert levels.places[0] <= 0.02
    assert levels.places[-1] >= 0.61
    assert np.ptp(np.diff(levels.places)) < 1e-12
    assert 8 <= len(levels.places) <= 16


def test_a_wide_field_is_coloured_by_decades() -> None:
    levels = choose_levels(np.geomspace(2e-6, 0.3, 50))
    assert levels is not None
    assert levels.logarithmic
    assert levels.floor is None
    assert levels.places[0] <= np.log10(2e-6)
    assert levels.places[-1] >= np.log10(0.3)
    assert {levels.text(place) for place in levels.numbered} >= {"10⁻⁴", "0.01", "0.1"}


def test_zeros_and_extreme_traces_share_one_colour_below_the_lowest_level() -> None:
    levels = choose_levels(np.array([0.0, 1e-200, 1e-5, 0.2]))
    assert levels is not None
    assert levels.floor is not None
    assert levels.floor == pytest.approx(10 ** levels.places[0])
    position = levels.position(np.array([0.0, 1e-200, np.nan]))
    assert (position[:2] < levels.places[0]).all()
    assert np.isnan(position[2])


@pytest.mark.parametrize("values", [[np.nan, np.nan], [0.79, 0.79, 0.79], [0.0, 0.0]])
def test_a_field_that_shows_nothing_gets_no_levels(values: list[float]) -> None:
    assert choose_levels(np.array(values)) is None


# --- maps


def test_a_map_has_one_labelled_panel_for_each_value_of_the_further_axis() -> None:
    figure = drawn_map(field_of(made_up()), subtitle="An invented reformer", scale_label="mole fraction")
    shown = panels(figure)[:3]
    assert [axes.get_title() for axes in shown] == [f"steam to carbon = {r}" for r in (2, 3, 4)]
    assert shown[0].get_xlabel() == "Temperature (°C)"
    assert shown[0].get_ylabel() == "Pressure (bar)"
    assert [axes.get_ylabel() for axes in shown[1:]] == ["", ""]
    assert {axes.get_yscale() for axes in shown} == {"log"}
    assert {axes.get_xscale() for axes in shown} == {"linear"}
    assert shown[0].get_ylim() == pytest.approx((1, 100))
    assert "An invented reformer" in all_text(figure)
    assert "not solved" not in all_text(figure)


def test_a_map_with_too_many_values_says_which_part_it_shows() -> None:
    figure = drawn_map(field_of(made_up(ratios=np.linspace(2, 4, 9))))
    titles = [axes.get_title() for axes in panels(figure) if axes.get_title()]
    assert len(titles) == 6
    assert titles[0].endswith("= 2")
    assert titles[-1].endswith("= 4")
    assert "6 of 9 values of steam to carbon shown" in all_text(figure)


def test_unsolved_points_are_blank_hatched_and_counted() -> None:
    dataset = made_up(ratios=[2.0])
    dataset["mole_fraction"][0, 5, 4] = np.nan
    figure = drawn_map(field_of(dataset))
    (hatched,) = by_gid(figure, "unsolved")
    assert hatched.get_hatch()  # type: ignore[attr-defined]
    assert len(hatched.get_paths()) == 4  # type: ignore[attr-defined]  # the four squares around the point
    assert "1 of 99 points not solved" in all_text(figure)
    point = (dataset.temperature.values[5] - 273.15, dataset.pressure.values[4] / 1e5)
    beside = (point[0] + 100.0, point[1])
    areas = [path for each in figure.axes[0].collections if each is not hatched for path in each.get_paths()]
    assert any(area.contains_point(beside) for area in areas)
    assert not any(area.contains_point(point) for area in areas)


def test_a_long_number_beside_the_colour_scale_leaves_room_for_its_title() -> None:
    field = field_of(made_up(ratios=[2.0])) * -1e-4
    figure = drawn_map(field, scale_label="error of a mole fraction")
    figure.canvas.draw()
    title = figure.axes[-1].yaxis.label.get_window_extent()
    assert title.x1 <= figure.bbox.x1
    numbers = [text.get_window_extent() for text in figure.axes[-1].get_yticklabels()]
    assert max(number.x1 for number in numbers) <= title.x0


def test_a_temperature_among_the_results_is_shown_in_the_unit_of_the_axis() -> None:
    """A dew point beside an axis in degC; where it has no value the point is none the less solved."""
    dataset = made_up(ratios=[2.0])
    point = xr.zeros_like(dataset["pressure"]) + dataset["temperature"]
    point = point.expand_dims({"steam_to_carbon": dataset["steam_to_carbon"]}, 0)
    point = point.transpose(*dataset["status"].dims).copy()
    point.attrs = {"units": "K", "long_name": "dew point of H2O"}
    point[0, 0, 0] = np.nan
    dataset["dew_point"] = point
    drawn = {each.name: each for each in figures_of(dataset, quantities=["dew_point"], units=UNITS)}
    figure = drawn["map_dew_point"].figure
    assert figure is not None
    assert "(°C)" in figure.axes[-1].get_ylabel()
    assert "1 of 99 points without a value" in all_text(figure)
    numbers = [float(text.get_text().replace("−", "-")) for text in figure.axes[-1].get_yticklabels()]
    shown = dataset.temperature.values - 273.15
    steps = np.diff(numbers)
    assert np.allclose(steps, steps[0])  # no decades: zero degrees is no zero
    assert shown.min() <= numbers[1] <= numbers[-2] <= shown.max()


def test_a_map_without_any_solved_point_is_not_drawn() -> None:
    field = field_of(made_up())
    assert draw_map(field.where(False), title="") is None


def test_one_wholly_unsolved_panel_is_hatched_all_over() -> None:
    field = field_of(made_up()).copy()
    field[0] = np.nan
    figure = drawn_map(field)
    (hatched,) = by_gid(figure, "unsolved")
    assert len(hatched.get_paths()) == 10 * 8  # type: ignore[attr-defined]
    assert "99 of 297 points not solved" in all_text(figure)


def test_a_gauge_axis_is_logarithmic_in_absolute_pressure() -> None:
    units = {**UNITS, "pressure": DisplayUnit("bar(g)", 1e5, 101325.0)}
    figure = draw_map(
        field_of(made_up(pressures=np.geomspace(101325.0, 50e5, 9), ratios=[3.0])), title="", units=units
    )
    assert figure is not None
    axes = figure.axes[0]
    assert axes.get_ylabel() == "Pressure (bar(g))"
    assert axes.get_ylim()[0] == pytest.approx(0.0, abs=1e-12)
    # Half way up the panel lies the geometric mean of the absolute pressures.
    middle = axes.transData.inverted().transform(axes.transAxes.transform((0.5, 0.5)))[1]
    assert middle + 1.01325 == pytest.approx(np.sqrt(1.01325 * 50), rel=1e-9)


def test_a_map_falls_back_on_the_further_axis_where_pressure_is_single() -> None:
    figure = drawn_map(field_of(made_up(pressures=[20e5])))
    assert figure.axes[0].get_xlabel() == "Temperature (°C)"
    assert figure.axes[0].get_ylabel() == "Steam to carbon"
    assert "20 bar" in all_text(figure)


def test_where_pressure_makes_no_difference_the_map_is_over_the_further_axis() -> None:
    field = field_of(made_up(ratios=[2.0, 3.0, 4.0, 5.0]))
    level = field.isel(pressure=4).expand_dims(pressure=field.pressure, axis=2).copy()
    figure = drawn_map(level)
    (axes,) = panels(figure)[:1]
    assert axes.get_ylabel() == "Steam to carbon"
    assert axes.get_ylim() == pytest.approx((2.0, 5.0))
    words = " ".join(all_text(figure).split())
    assert "drawn at 10 bar: pressure changes it by less than 2 % of the" in words
    holed = level.copy()
    holed[0, 0, 0] = np.nan  # an unsolved point must stay in sight, so pressure keeps its axis
    assert drawn_map(holed).axes[0].get_ylabel() == "Pressure (bar)"


def test_numbers_on_contours_are_inside_the_panel_apart_and_on_their_line() -> None:
    size = (2.0, 2.0)
    along = np.linspace(0.0, 2.0, 201)
    lines = [np.column_stack([along, np.full_like(along, y)]) for y in (0.01, 0.5, 0.6, 1.0, 1.5)]
    places = place_labels(lines, size)
    assert places[0] is None  # all of it lies at the frame
    found = [(line, place) for line, place in zip(lines, places, strict=True) if place is not None]
    assert len(found) == 4
    for line, place in found:
        assert (place > 0.2).all()
        assert (place < 1.8).all()
        assert (line == place).all(axis=1).any()
    spots = np.array([place for _, place in found])
    distances = np.hypot(*(spots[:, None] - spots[None, :]).transpose(2, 0, 1))
    assert distances[~np.eye(4, dtype=bool)].min() >= 0.33


def test_a_contour_without_room_gets_no_number() -> None:
    line = np.column_stack([np.linspace(0.9, 1.1, 21), np.full(21, 1.0)])
    assert [place is None for place in place_labels([line, line], (2.0, 2.0))] == [False, True]


def test_every_number_on_a_map_lies_within_its_panel() -> None:
    figure = drawn_map(field_of(made_up()))
    written = [(axes, text) for axes in panels(figure)[:3] for text in axes.texts]
    assert len(written) >= 3
    for axes, text in written:
        frame, box = axes.get_window_extent(), text.get_window_extent()
        assert frame.x0 <= box.x0 <= box.x1 <= frame.x1
        assert frame.y0 <= box.y0 <= box.y1 <= frame.y1


# --- lines


def fields_of(dataset: xr.Dataset) -> dict[str, xr.DataArray]:
    return {str(name): field_of(dataset, str(name)) for name in dataset.species.values}


def drawn_lines(dataset: xr.Dataset) -> Figure:
    figure = draw_lines(fields_of(dataset), title="lines", value_label="Mole fraction", units=UNITS)
    assert figure is not None
    return figure


def test_composition_is_drawn_along_temperature_at_three_pressures() -> None:
    figure = drawn_lines(made_up(ratios=[3.0]))
    assert [axes.get_title() for axes in panels(figure)] == ["1 bar", "10 bar", "100 bar"]
    assert figure.axes[0].get_xlabel() == "Temperature (°C)"
    assert figure.axes[0].get_ylabel() == "Mole fraction"
    assert "3 of 9 values of pressure shown" in all_text(figure)
    for axes in panels(figure):
        assert [line.get_label() for line in axes.lines] == list(SPECIES)
        assert [line.get_color() for line in axes.lines] == list(LINE_COLOURS[:4])
    assert chemical("CH4") in all_text(figure)


def test_lines_show_the_values_themselves() -> None:
    dataset = made_up(ratios=[3.0], pressures=[10e5])
    (axes,) = panels(drawn_lines(dataset))
    line = axes.lines[1]
    np.testing.assert_allclose(np.asarray(line.get_xdata(), dtype=float), dataset.temperature.values - 273.15)
    np.testing.assert_array_equal(line.get_ydata(), field_of(dataset, "CH4").values.ravel())


def test_an_unsolved_point_leaves_a_hatched_gap_in_the_lines() -> None:
    dataset = made_up(ratios=[3.0], pressures=[10e5])
    dataset["mole_fraction"][0, 5, 0] = np.nan
    figure = drawn_lines(dataset)
    assert len(by_gid(figure, "unsolved")) == 1
    for line in figure.axes[0].lines:
        assert np.flatnonzero(np.isnan(np.asarray(line.get_ydata(), dtype=float))).tolist() == [5]
    assert "1 of 11 points not solved" in all_text(figure)


def test_traces_get_a_logarithmic_scale_and_majors_a_linear_one() -> None:
    trace = {**SPECIES, "HCN": (-14.0, 0.001, 0.0)}
    assert drawn_lines(made_up()).axes[0].get_yscale() == "linear"
    assert drawn_lines(made_up(species=trace)).axes[0].get_yscale() == "log"


def test_more_species_than_colours_differ_in_their_line_style() -> None:
    many = {f"X{i}": (0.1 * i, 0.0, 0.0) for i in range(1, 11)}
    (axes,) = panels(drawn_lines(made_up(ratios=[3.0], pressures=[10e5], species=many)))
    looks = {(line.get_color(), str(line.get_linestyle())) for line in axes.lines}
    assert len(looks) == 10


def test_line_colours_stay_apart_on_white_and_in_lightness() -> None:
    # Contrast of graphical objects: WCAG 2.1, criterion 1.4.11 asks for 3:1. The light ones of the
    # palette (orange, sky blue, pink) fall short, which is why lines are labelled too; none may be under 2:1.
    def luminance(colour: str) -> float:
        linear = [c / 12.92 if c <= 0.03928 else ((c + 0.055) / 1.055) ** 2.4 for c in to_rgb(colour)]
        return float(np.dot([0.2126, 0.7152, 0.0722], linear))

    assert min(1.05 / (luminance(colour) + 0.05) for colour in LINE_COLOURS) > 2.0


def test_a_species_keeps_its_colour_where_another_is_left_out() -> None:
    dataset = made_up(ratios=[3.0])
    dataset["dry_mole_fraction"] = dataset["mole_fraction"]
    drawn = {
        each.name: each.figure for each in figures_of(dataset, key=["H2O", "CO", "H2"], dry=True, units=UNITS)
    }
    colours = {}
    for name in ("composition", "composition_dry"):
        figure = drawn[name]
        assert figure is not None
        colours[name] = {line.get_label(): line.get_color() for line in figure.axes[0].lines}
    assert set(colours["composition"]) == {"H2O", "CO", "H2"}
    assert colours["composition_dry"] == {name: colours["composition"][name] for name in ("CO", "H2")}


def test_labels_are_spread_apart_within_the_panel() -> None:
    places = spread_apart([0.0, 0.01, 0.02, 0.5, 1.0, 1.0], 0.1, 1.02)
    assert np.diff(places).min() >= 0.1 - 1e-12
    assert max(places) <= 1.02
    assert places[3] == pytest.approx(0.5)


def test_labels_of_one_panel_do_not_overlap() -> None:
    close = {f"C{i}H4": (1 + 0.001 * i, 0.0, 0.0) for i in range(1, 8)}
    figure = drawn_lines(made_up(ratios=[3.0], pressures=[10e5], species=close))
    boxes = sorted(tuple(text.get_window_extent().intervaly) for text in figure.axes[0].texts)
    heights = [top - bottom for bottom, top in boxes]
    centres = [(top + bottom) / 2 for bottom, top in boxes]
    assert len(boxes) == 7
    assert np.diff(centres).min() > 0.8 * min(heights)


# --- single points and odd grids


def test_a_single_point_becomes_bars_with_their_numbers() -> None:
    dataset = made_up([900.0], [1e6], [3.0])
    figure = draw_bars(fields_of(dataset), title="one", value_label="Mole fraction", units=UNITS)
    assert figure is not None
    (axes,) = figure.axes
    assert [bar.get_bbox().width for bar in axes.patches if isinstance(bar, Rectangle)] == pytest.approx(
        list(dataset.mole_fraction.values.ravel())
    )
    assert [text.get_text() for text in axes.get_yticklabels()] == [chemical(name) for name in SPECIES]
    assert "626.9 °C, 10 bar, steam to carbon = 3" in all_text(figure)


@pytest.mark.parametrize(
    ("grid", "names", "reasons"),
    [
        ({}, {"composition", "map_H2", "map_CH4", "map_h2_per_co"}, {}),
        ({"ratios": [3.0], "pressures": [1e6]}, {"composition", "course_h2_per_co"}, {"maps"}),
        ({"ratios": [3.0], "temperatures": [900.0]}, {"composition", "course_h2_per_co"}, {"maps"}),
        (
            {"ratios": [3.0], "pressures": [1e6], "temperatures": [900.0]},
            {"composition"},
            {"maps", "course_h2_per_co"},
        ),
    ],
)
def test_every_grid_gets_the_figures_it_can_carry_and_a_reason_for_the_others(
    grid: dict[str, object], names: set[str], reasons: set[str]
) -> None:
    drawn = list(figures_of(made_up(**grid), key=["H2", "CH4"], quantities=["h2_per_co"], units=UNITS))  # type: ignore[arg-type]
    assert {each.name for each in drawn if each.figure is not None} == names
    assert {each.name for each in drawn if each.figure is None} == set(reasons)
    assert all(each.reason for each in drawn if each.figure is None)


def test_a_constant_species_is_named_with_its_value_rather_than_drawn() -> None:
    dataset = made_up()
    dataset["mole_fraction"].loc[{"species": "H2O"}] = 0.25
    drawn = {each.name: each for each in figures_of(dataset, key=["H2O"], units=UNITS)}
    assert drawn["map_H2O"].figure is None
    assert drawn["map_H2O"].reason == "practically 0.25 everywhere"


def test_nothing_solved_is_said_and_draws_nothing(tmp_path: Path) -> None:
    dataset = made_up()
    dataset["mole_fraction"] = dataset["mole_fraction"].where(False)
    written = write_figures(dataset, tmp_path, key=["H2"], units=UNITS)
    assert written.files == ()
    assert set(written.left_out.values()) == {"no point of the grid is solved"}


def test_axes_run_upwards_whatever_the_order_of_the_request() -> None:
    upward = made_up(ratios=[3.0])
    downward = upward.isel(temperature=slice(None, None, -1), pressure=slice(None, None, -1))
    first = next(iter(figures_of(downward, key=["H2"], units=UNITS))).figure
    assert first is not None
    assert [axes.get_title() for axes in panels(first)] == ["1 bar", "10 bar", "100 bar"]
    line = panels(first)[0].lines[0]
    assert np.all(np.diff(np.asarray(line.get_xdata(), dtype=float)) > 0)


def test_pressures_of_the_lines_can_be_chosen() -> None:
    dataset = made_up(ratios=[3.0], pressures=[1e5, 5e5, 10e5, 20e5])
    first = next(iter(figures_of(dataset, key=["H2"], units=UNITS, line_pressures=[5e5, 20e5]))).figure
    assert first is not None
    assert [axes.get_title() for axes in panels(first)] == ["5 bar", "20 bar"]


def test_key_species_default_to_the_most_abundant() -> None:
    dataset = made_up(species={**SPECIES, "HCN": (-40.0, 0.0, 0.0)})
    names = key_species(dataset)
    assert set(names) == set(SPECIES)
    largest = [float(field_of(dataset, name).max()) for name in names]
    assert largest == sorted(largest, reverse=True)
    assert key_species(dataset, ["HCN"]) == ("HCN",)


# --- files


def test_the_same_result_gives_the_same_bytes_whatever_the_user_has_set(tmp_path: Path) -> None:
    dataset = made_up(ratios=[2.0, 3.0])
    first = write_figures(dataset, tmp_path / "a", key=["H2"], units=UNITS)
    with matplotlib.rc_context({"font.size": 20, "svg.hashsalt": None, "axes.grid": True}):
        second = write_figures(dataset, tmp_path / "b", key=["H2"], units=UNITS)
        assert matplotlib.rcParams["font.size"] == 20
    names = ["composition.png", "composition.svg", "map_H2.png", "map_H2.svg"]
    assert [path.name for path in first.files] == names
    assert [path.name for path in second.files] == names
    for one, other in zip(first.files, second.files, strict=True):
        content = one.read_bytes()
        assert content == other.read_bytes()
        assert b"dc:date" not in content
        assert b"Software" not in content


def test_names_that_differ_only_in_case_do_not_overwrite_each_other(tmp_path: Path) -> None:
    species = {"CO": (1.0, 0.002, 0.0), "Co": (1.0, -0.002, 0.1)}
    written = write_figures(made_up(ratios=[2.0], species=species), tmp_path, key=["CO", "Co"], units=UNITS)
    names = [path.name.lower() for path in written.files]
    assert len(names) == len(set(names)) == 6


def test_a_title_is_taken_literally(tmp_path: Path) -> None:
    title = r"Reformer $\frac{1}{0}$ <script>alert(1)</script> 改質炉 " + "very long " * 20
    written = write_figures(made_up(ratios=[2.0]), tmp_path, key=["H2"], units=UNITS, title=title)
    assert len(written.files) == 4
    first = next(iter(figures_of(made_up(ratios=[2.0]), key=["H2"], units=UNITS, title=title))).figure
    assert first is not None
    assert r"\$\frac{1}{0}\$ <script>" in all_text(first)
    assert "<script>" not in (tmp_path / "map_H2.svg").read_text(encoding="utf-8")


def test_drawing_leaves_the_global_state_of_matplotlib_alone() -> None:
    code = "import sys, gibbsmin.figures; sys.exit('matplotlib.pyplot' in sys.modules)"
    root = Path(__file__).parents[1]  # found there even if not installed
    assert subprocess.run([sys.executable, "-c", code], check=False, cwd=root).returncode == 0
