"""The report as a person meets it: opened from disk in a real browser, without a network.

What the page shows is compared with the data set itself. Printed numbers have four significant digits and the
page's own values a relative error of up to 2^-16 (`gibbsmin.report.packing`), so `PRINTED` is what they may be
off by. How a page should behave is common practice, no source, but for accessibility: WCAG 2.2 as the axe-core
rules check it.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr

from gibbsmin.outcome import Outcome
from gibbsmin.report import REPORT_FILE, write_report
from gibbsmin.report.packing import RELATIVE_ERROR
from tests.report_cases import (
    HOSTILE,
    OpenedPage,
    flawed_outcome,
    hostile_outcome,
    large_outcome,
    line_outcome,
    needed,
    phases_outcome,
    point_outcome,
    reactions_outcome,
    small_outcome,
    started_browser,
)

PRINTED = 5.2e-4  # half a unit of the fourth digit at worst, plus 2^-16
PACKED = RELATIVE_ERROR
A4_BETWEEN_MARGINS = 672  # pixels: 210 mm less 2 x 16 mm at 96 dots per inch
_RAISED = str.maketrans("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "-0123456789")

CHOICES = "() => [...document.querySelectorAll('#quantity option')].map((each) => each.value)"

Opener = Callable[..., OpenedPage]


@pytest.fixture(scope="module")
def browser() -> Iterator[Any]:
    with started_browser() as started:
        yield started


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("reports")


@pytest.fixture
def opened(browser: Any, folder: Path) -> Iterator[Opener]:
    """Opens the report of an outcome; afterwards nothing may have been logged, thrown or asked for."""
    pages: list[OpenedPage] = []

    def open_one(outcome: Outcome, **options: Any) -> OpenedPage:
        file = write_report(outcome, folder / f"report {len(pages)}.html")
        pages.append(OpenedPage(browser, file, **options))
        return pages[-1]

    yield open_one
    for page in pages:
        page.close()
    assert [trouble for page in pages for trouble in page.troubles] == []
    assert [url for page in pages for url in page.foreign_requests] == []


CONTROLS = "#explorer select, #explorer input"
REMEMBER = f"""() => {{
  window.asOpened = [...document.querySelectorAll('{CONTROLS}')].map((each) => [each, each.value, each.checked]);
}}"""
RESTORE = """() => {
  for (const [each, value, checked] of window.asOpened) {
    if (each.value === value && each.checked === checked) continue;
    each.value = value;
    each.checked = checked;
    each.dispatchEvent(new Event(each.type === 'range' ? 'input' : 'change'));
  }
  document.activeElement.blur();
}"""


@pytest.fixture(scope="module")
def saved(folder: Path) -> Path:
    """A folder of results as a run leaves it, report included."""
    return small_outcome().save(
        folder / "ostrand-results",
        further_files=lambda draft: write_report(small_outcome(), draft / REPORT_FILE),
    )


@pytest.fixture(scope="module")
def shared_page(browser: Any, saved: Path) -> Iterator[OpenedPage]:
    page = OpenedPage(browser, saved / REPORT_FILE)
    page.run(REMEMBER)
    yield page
    page.close()
    assert page.troubles == []
    assert page.foreign_requests == []


@pytest.fixture
def small(shared_page: OpenedPage) -> Iterator[OpenedPage]:
    """The report of the small outcome as if just opened: opening takes a second, setting the controls back does not."""
    yield shared_page
    shared_page.run(RESTORE)
    shared_page.page.mouse.move(2, 2)
    shared_page.settle()


def number(text: str) -> float:
    """A number as the page prints it: 0.25, 1.5×10⁻⁴, 10⁻⁶, −3; a unit behind it is left out."""
    if power := re.match(r"(?:(−?[\d.]+)×)?10([⁻⁰¹²³⁴⁵⁶⁷⁸⁹]+)", text):
        front, exponent = power.groups()
        return float((front or "1").replace("−", "-")) * 10.0 ** int(exponent.translate(_RAISED))
    plain = re.match(r"−?[\d.]+", text)
    assert plain, text
    return float(plain[0].replace("−", "-"))


def pixel_of(page: OpenedPage, column: int, row: int) -> tuple[float, float]:
    """Where a point of the map's grid is on the screen."""
    x, y = page.run(
        """([column, row]) => {
          const chart = document.getElementById('map');
          chart.scrollIntoView({ block: 'center', behavior: 'instant' });
          const { xaxis, yaxis } = chart._fullLayout;
          const filled = chart.data.find((trace) => ['contour', 'heatmap'].includes(trace.type));
          const box = chart.getBoundingClientRect();
          return [box.left + xaxis._offset + xaxis.d2p(filled.x[column]),
            box.top + yaxis._offset + yaxis.d2p(filled.y[row])];
        }""",
        [column, row],
    )
    return x, y


def map_values(page: OpenedPage) -> np.ndarray:
    z = page.run("() => document.getElementById('map').data.find((trace) => trace.type === 'contour').z")
    return np.array(z, dtype=np.float64)


def shown_species(page: OpenedPage, table: str = "#point-species") -> dict[str, float]:
    rows = page.run(
        f"() => [...document.querySelectorAll('{table} tr')].map((row) => "
        "[row.dataset.species, row.querySelector('td').textContent])"
    )
    return {name: number(text) for name, text in rows}


def choose(page: OpenedPage, chooser: str, value: str) -> None:
    page.page.select_option(f"#{chooser}", value)
    page.settle()


# --- explore


def test_charts_draw_and_start_with_the_middle_of_the_map(small: OpenedPage) -> None:
    outcome, page = small_outcome(), small
    assert page.page.locator("#map .contourlayer path").count() > 4
    assert page.page.locator("#cut .scatterlayer path.js-line").count() == 3  # one line for each key species
    dataset = outcome.dataset.isel(steam_to_carbon=1)
    expected = dataset["mole_fraction"].sel(species="H2").transpose("pressure", "temperature").values
    np.testing.assert_allclose(map_values(page), expected, rtol=PACKED)
    assert page.page.inner_text("#map-caption") == "H₂, mole fraction at steam to carbon 3."


@pytest.mark.parametrize(("column", "row"), [(1, 1), (4, 5), (7, 3)])
def test_hover_shows_the_full_composition_of_that_point(
    small: OpenedPage, saved: Path, column: int, row: int
) -> None:
    page = small
    page.page.mouse.move(*pixel_of(page, column, row))
    page.page.wait_for_selector("#hover-card:not([hidden])")
    with xr.open_dataset(saved / "results.nc") as dataset:
        point = dataset.isel(steam_to_carbon=1, temperature=column, pressure=row).load()
    expected = {
        str(name): float(point["mole_fraction"].sel(species=name)) for name in point["species"].values
    }
    shown = shown_species(page)
    assert shown.keys() == expected.keys()
    for name, value in shown.items():
        assert value == pytest.approx(expected[name], rel=PRINTED), name
    card = shown_species(page, "#hover-card table")
    assert list(card) == sorted(expected, key=lambda name: -expected[name])[:6]
    assert all(value == pytest.approx(expected[name], rel=PRINTED) for name, value in card.items())
    place = page.page.inner_text("#point-place")
    assert place.startswith(f"steam to carbon 3, {500 + 50 * column} °C, ")
    pressure = number(place.split(", ")[2]) * 1e5
    assert pressure == pytest.approx(float(point["pressure"]), rel=1e-5)
    gap = page.page.inner_text("#point-results div[data-quantity='gap'] dd")
    assert number(gap) == pytest.approx(float(point["gap"] / point["gas_amount"]), rel=PRINTED)
    page.page.mouse.move(2, 2)
    page.settle()
    assert page.page.inner_text("#point-kind") == "Marked point"
    assert page.page.locator("#hover-card").is_hidden()


def test_a_click_moves_the_mark_and_the_lines_follow(small: OpenedPage) -> None:
    outcome, page = small_outcome(), small
    page.page.mouse.click(*pixel_of(page, 2, 5))
    page.settle()
    values = page.run("() => document.getElementById('cut').data[0].y")
    line = outcome.dataset["mole_fraction"].sel(species="H2").isel(steam_to_carbon=1, pressure=5)
    np.testing.assert_allclose(values, line.values, rtol=PACKED)
    assert page.page.input_value("#slider-pressure") == "5"
    assert page.page.inner_text("#slider-temperature-value") == "600 °C"


def test_dragging_zooms_and_the_button_shows_the_whole_range_again(small: OpenedPage) -> None:
    page = small
    span = "() => document.getElementById('map').layout.xaxis.range"
    whole = page.run(span)
    page.page.mouse.move(*pixel_of(page, 2, 2))
    page.page.mouse.down()
    page.page.mouse.move(*pixel_of(page, 6, 5), steps=4)
    page.page.mouse.up()
    page.settle()
    assert whole[0] < page.run(span)[0] < page.run(span)[1] < whole[1]
    page.page.click("button[data-chart='map'][data-do='reset']")
    page.settle()
    assert page.run(span) == whole
    page.page.mouse.move(*pixel_of(page, 3, 3))  # the new chart answers the pointer as well
    page.page.wait_for_selector("#hover-card:not([hidden])")


def test_a_picture_can_be_saved(small: OpenedPage, tmp_path: Path) -> None:
    with small.page.expect_download() as download:
        small.page.click("button[data-chart='cut'][data-do='save']")
    assert download.value.suggested_filename == "cut-chart.svg"
    download.value.save_as(tmp_path / "cut.svg")
    assert "CH₄" in (tmp_path / "cut.svg").read_text(encoding="utf-8")


@pytest.mark.parametrize(
    ("choice", "kind"),
    [
        ("x|CO", "mole fraction"),
        ("dry|CO", "dry"),
        ("conversion of CH4", "result"),
        ("heat_duty", "MW"),
        ("gap", "gap"),
    ],
)
def test_the_chooser_changes_what_the_map_shows(small: OpenedPage, choice: str, kind: str) -> None:
    outcome, page = small_outcome(), small
    choose(page, "quantity", choice)
    dataset = outcome.dataset.isel(steam_to_carbon=1)
    field = {
        "mole fraction": lambda: dataset["mole_fraction"].sel(species="CO"),
        "dry": lambda: dataset["dry_mole_fraction"].sel(species="CO"),
        "result": lambda: dataset["conversion of CH4"],
        "MW": lambda: (
            dataset["heat_duty"] / (1e6 if float(abs(outcome.dataset["heat_duty"]).max()) > 1e7 else 1e3)
        ),
        "gap": lambda: dataset["gap"] / dataset["gas_amount"],
    }[kind]()
    expected = field.transpose("pressure", "temperature").values
    np.testing.assert_allclose(map_values(page), expected, rtol=3 * PACKED, atol=1e-37)


def test_logarithmic_colours_show_decades(small: OpenedPage) -> None:
    page = small
    choose(page, "quantity", "x|NH3")
    choose(page, "scale", "log")
    field = small_outcome().dataset["mole_fraction"].sel(species="NH3")
    bar = page.run("() => document.getElementById('map').data.find((trace) => trace.colorbar).colorbar")
    ends = [number(text) for text in bar["ticktext"]]
    assert ends[0] <= float(field.min()) <= float(field.max()) <= ends[-1]
    assert all(f"{end:.0e}"[0] in "1235" for end in ends)  # 1, 2, 5 or 1, 3 of a decade
    # The place of a value on the scale counts bands: linear in its logarithm between two ends.
    expected = np.log10(field.isel(steam_to_carbon=1).transpose("pressure", "temperature"))
    places = np.interp(expected, np.log10(ends), bar["tickvals"])
    np.testing.assert_allclose(map_values(page), places, atol=1e-4)


def test_sliders_work_by_keyboard_and_cut_the_map(small: OpenedPage) -> None:
    outcome, page = small_outcome(), small
    page.page.focus("#slider-steam_to_carbon")
    page.page.keyboard.press("ArrowRight")
    page.settle()
    expected = outcome.dataset["mole_fraction"].sel(species="H2").isel(steam_to_carbon=2)
    np.testing.assert_allclose(map_values(page), expected.transpose("pressure", "temperature"), rtol=PACKED)
    assert page.page.inner_text("#map-caption") == "H₂, mole fraction at steam to carbon 4."
    assert page.page.get_attribute("#slider-steam_to_carbon", "aria-valuetext") == "4"
    page.page.focus("#slider-pressure")
    page.page.keyboard.press("Home")
    page.settle()
    line = outcome.dataset["mole_fraction"].sel(species="CO").isel(steam_to_carbon=2, pressure=0)
    np.testing.assert_allclose(page.run("() => document.getElementById('cut').data[1].y"), line, rtol=PACKED)
    assert "pressure 1 bar" in page.page.inner_text("#cut-caption")
    assert "1 bar: H₂" in page.page.inner_text("#spoken")


def test_a_further_axis_can_be_an_axis_of_the_map(small: OpenedPage) -> None:
    outcome, page = small_outcome(), small
    choose(page, "up", "steam_to_carbon")
    expected = outcome.dataset["mole_fraction"].sel(species="H2").isel(pressure=3)
    np.testing.assert_allclose(
        map_values(page), expected.transpose("steam_to_carbon", "temperature"), rtol=PACKED
    )
    choose(page, "across", "steam_to_carbon")  # the same axis twice: the other one gives way
    assert page.page.input_value("#up") != "steam_to_carbon"


def test_species_are_shown_and_hidden(small: OpenedPage) -> None:
    page = small
    names = "() => document.getElementById('cut').data.map((trace) => trace.name)"
    assert page.run(names) == ["H₂", "CO", "CH₄"]
    page.page.uncheck("input[data-species='CO']")
    page.page.click("#species-fieldset summary")
    page.page.check("input[data-species='NH3']")
    page.settle()
    assert page.run(names) == ["H₂", "CH₄", "NH₃"]
    assert "CO," not in page.page.inner_text("#cut-caption")


def test_lines_linear_dry_and_by_another_axis(small: OpenedPage) -> None:
    outcome, page = small_outcome(), small
    scale = "() => document.getElementById('cut').layout.yaxis.type"
    assert page.run(scale) == "log"
    choose(page, "line-scale", "linear")
    assert page.run(scale) == "linear"
    choose(page, "basis", "dry")
    dry = outcome.dataset["dry_mole_fraction"].isel(steam_to_carbon=1, pressure=3).sel(species="H2")
    np.testing.assert_allclose(
        page.run("() => document.getElementById('cut').data[0].y"), dry, rtol=3 * PACKED
    )
    choose(page, "along", "pressure")
    choose(page, "lines-show", "steam_to_carbon")
    lines = page.run("() => document.getElementById('cut').data.map((trace) => trace.y)")
    expected = outcome.dataset["mole_fraction"].sel(species="H2").isel(temperature=4)
    np.testing.assert_allclose(lines, expected.transpose("steam_to_carbon", "pressure"), rtol=PACKED)


def test_units_switch_in_charts_controls_and_tables(small: OpenedPage) -> None:
    page = small
    choose(page, "temperature-unit", "K")
    choose(page, "pressure-unit", "kPa")
    x = page.run("() => document.getElementById('map').data[0].x")
    np.testing.assert_allclose(x, small_outcome().dataset["temperature"])
    assert page.page.inner_text("#slider-temperature-value") == "973.15 K"
    assert "1173.15 K, 100 kPa" in page.page.inner_text("#results")
    assert " °C" not in page.page.inner_text("#results")
    choose(page, "pressure-unit", "bar(g)")
    assert page.page.inner_text("#point-place").endswith("bar(g)")


def test_a_temperature_among_the_results_follows_the_unit_of_the_axis(opened: Opener) -> None:
    small = small_outcome()
    dew = 300.0 + 0.1 * (small.dataset["temperature"] - 700.0) + 0.0 * small.dataset["gap"]
    dew = dew.transpose(*small.dataset["status"].dims)
    dew.attrs = {"units": "K", "long_name": "dew point of water", "description": "asked for"}
    page = opened(replace(small, dataset=small.dataset.assign({"dew point of H2O": dew})))
    choose(page, "quantity", "dew point of H2O")
    expected = dew.isel(steam_to_carbon=1).transpose("pressure", "temperature").values
    for unit, symbol, zero in (("degC", "°C", 273.15), ("K", "K", 0.0)):
        choose(page, "temperature-unit", unit)
        np.testing.assert_allclose(map_values(page), expected - zero, atol=2 * PACKED * 400.0)
        bar = page.run("() => document.getElementById('map').data.find((trace) => trace.colorbar).colorbar")
        assert bar["title"]["text"] == symbol


def test_unsolved_points_boundaries_and_activities_are_shown(opened: Opener) -> None:
    page = opened(flawed_outcome())
    crosses = page.run(
        "() => document.getElementById('map').data.find((trace) => trace.name === 'not solved').x"
    )
    assert crosses == [500, 550]
    assert "Crosses: 2 points without a value." in page.page.inner_text("#map-caption")
    curve = page.run(
        "() => document.getElementById('map').data.filter((trace) => trace.name === 'carbon begins')[1]"
    )
    pressures = small_outcome().dataset["pressure"].values
    np.testing.assert_allclose(curve["x"], 900.0 + 50.0 * np.log10(pressures / 1e5) - 273.15)
    np.testing.assert_allclose(curve["y"], pressures / 1e5, rtol=1e-9)
    choose(page, "quantity", "phase_activity|C(graphite)")
    assert "Practically 0.5 everywhere" in page.page.inner_text("#map")
    page.page.focus("#slider-temperature")
    page.page.keyboard.press("Home")
    page.settle()
    assert "not solved" in page.page.inner_text("#point-species")


def test_condensed_phases_have_amounts_and_activities(opened: Opener) -> None:
    outcome = phases_outcome()
    page = opened(outcome)
    phase = str(outcome.dataset["phase"].values[0])
    for variable in ("phase_amount", "phase_activity"):
        choose(page, "quantity", f"{variable}|{phase}")
        expected = outcome.dataset[variable].sel(phase=phase).transpose("pressure", "temperature")
        np.testing.assert_allclose(map_values(page), expected, rtol=PACKED, atol=1e-30)
    choose(page, "quantity", f"phase_element_fraction|{phase}|C")
    share = outcome.dataset["phase_element_fraction"].sel(phase=phase, element="C")
    np.testing.assert_allclose(
        map_values(page), share.transpose("pressure", "temperature"), rtol=PACKED, atol=1e-30
    )
    assert page.page.inner_text("#map-caption") == f"Share of C in {phase}."
    limit = outcome.dataset["boundary soot limit"].isel(root=0)
    curve = page.run(
        "() => document.getElementById('map').data.filter((trace) => trace.name === 'soot limit')[1]"
    )
    np.testing.assert_allclose(curve["x"], limit - 273.15)
    np.testing.assert_allclose(curve["y"], limit["pressure"] / 1e5)
    assert "5 gases and 1 condensed phase at equilibrium" in page.page.inner_text("header")
    assert "1 pure condensed phase may form beside them" in page.page.inner_text("#species")


def test_checked_points_appear_on_request(small: OpenedPage) -> None:
    outcome, page = small_outcome(), small
    page.page.check("#show-checked")
    page.settle()
    shown = page.run(
        "() => document.getElementById('map').data.filter((trace) => trace.name === 'confirmed').map((t) => t.x.length)"
    )
    expected = sum(point.index[0] == 1 for point in outcome.crosscheck.points)
    assert sum(shown) == expected > 0 or (shown == [] and expected == 0)


def test_reactions_are_drawn_with_shortcuts_measured_values_and_verdicts(opened: Opener) -> None:
    outcome = reactions_outcome()
    page = opened(outcome)
    page.page.wait_for_selector("#ln-k .scatterlayer path")
    traces = {
        trace["name"]: trace
        for trace in page.run(
            "() => document.getElementById('ln-k').data.map(({name, x, y}) => ({name, x, y}))"
        )
    }
    kelvin = outcome.dataset["temperature"].values
    np.testing.assert_allclose(traces["shift"]["x"], 1000 / kelvin)
    np.testing.assert_allclose(traces["shift"]["y"], outcome.dataset["ln_K"].sel(reaction="shift"), rtol=1e-5)
    line = outcome.dataset["ln_K"].sel(reaction="shift") + outcome.dataset["shortcut_error_ln_K"].isel(
        shortcut=0
    )
    np.testing.assert_allclose(traces["straight line"]["y"], line, rtol=1e-5, atol=1e-6)
    np.testing.assert_allclose(traces["laboratory"]["y"], np.log([5.2, 2.7, 1.6, 1.1]), rtol=1e-5)
    error = page.run("() => document.getElementById('shortcut-error').data[0].y")
    np.testing.assert_allclose(
        error, outcome.dataset["shortcut_error_per_cent"].isel(shortcut=0), rtol=1e-5, atol=1e-6
    )
    verdict = next(value for value in page.run(CHOICES) if value.startswith("alone_reason"))
    choose(page, "quantity", verdict)
    expected = (
        outcome.dataset["alone_reason"].isel(alone=0, steam_to_carbon=0).transpose("pressure", "temperature")
    )
    meanings = page.run("() => document.getElementById('map').data[0].colorbar.ticktext")
    shown = page.run("() => document.getElementById('map').data[0].z")
    codes = list(outcome.dataset["alone_reason"].attrs["flag_values"])
    np.testing.assert_array_equal(shown, [[codes.index(code) for code in row] for row in expected.values])
    page.page.mouse.move(*pixel_of(page, 4, 3))
    page.page.wait_for_selector("#hover-card:not([hidden])")
    assert page.page.inner_text(".card-value").endswith(f": {meanings[int(shown[3][4])]}")


def test_a_line_and_a_single_point_have_a_report_as_well(opened: Opener) -> None:
    line = opened(line_outcome())
    assert line.page.locator("#map").count() == 0
    assert line.page.locator("#cut .scatterlayer path.js-line").count() == 3
    point = opened(point_outcome())
    assert point.page.locator("#cut").count() == 0
    assert "H₂" in point.page.inner_text("#point-species")


# --- craft


def test_hostile_text_stays_text(opened: Opener) -> None:
    page = opened(hostile_outcome())
    assert page.page.title() == HOSTILE
    assert page.page.inner_text("h1") == HOSTILE
    assert page.page.locator("img").count() == 0
    assert page.page.locator("script").count() == 3  # data, library, the page's own
    assert HOSTILE in page.page.inner_text("#point-species")
    choose(page, "quantity", f"x|{HOSTILE}")
    assert HOSTILE in page.page.inner_text("#map-caption")
    names = page.page.locator("#cut .annotation text").all_text_contents()
    assert any("<script>" in name and "<b>bold</b>" in name for name in names)  # <b> the charts would draw
    page.page.mouse.move(*pixel_of(page, 2, 2))
    page.page.wait_for_selector("#hover-card:not([hidden])")
    flawed = opened(flawed_outcome())
    choose(flawed, "quantity", f"phase_activity|{HOSTILE}")
    assert HOSTILE in flawed.page.inner_text("#map-caption")


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_no_serious_finding_of_axe(opened: Opener, scheme: str) -> None:
    axe = needed("axe_playwright_python.sync_playwright", "test")
    page = opened(flawed_outcome(), color_scheme=scheme)
    for details in page.page.locator("details").all():
        details.evaluate("(each) => { each.open = true; }")
    # Only contrast can differ between the schemes.
    options = {} if scheme == "light" else {"runOnly": ["color-contrast"]}
    response = axe.Axe().run(page.page, options=options).response
    assert len(response["passes"]) >= (20 if scheme == "light" else 1)
    serious = [each for each in response["violations"] if each["impact"] in ("serious", "critical")]
    assert [(each["id"], each["nodes"][0]["html"]) for each in serious] == []


def test_dark_and_light_differ_and_charts_follow(small: OpenedPage) -> None:
    page = small
    background = "() => getComputedStyle(document.body).backgroundColor"
    ink = "() => document.getElementById('map').layout.font.color"
    light = page.run(background), page.run(ink)
    page.page.emulate_media(color_scheme="dark")
    page.settle()
    dark = page.run(background), page.run(ink)
    page.page.emulate_media(color_scheme="light")
    assert light[0] != dark[0]
    assert light[1] != dark[1]


def test_every_control_is_reached_by_the_tab_key(small: OpenedPage) -> None:
    page = small
    page.run("() => { document.activeElement.blur(); scrollTo(0, 0); }")
    wanted = set(
        page.run(
            "() => [...document.querySelectorAll('#explorer select, #explorer input, #explorer button')]"
            ".filter((each) => each.checkVisibility()).map((each) => each.id || each.dataset.species || "
            "each.dataset.chart + each.dataset.do)"
        )
    )
    assert {"quantity", "slider-temperature", "H2", "mapsave", "line-scale"} <= wanted
    reached = set()
    for _ in range(80):
        page.page.keyboard.press("Tab")
        reached.add(
            page.run(
                "() => { const e = document.activeElement; return e.id || e.dataset.species || "
                "(e.dataset.chart ? e.dataset.chart + e.dataset.do : ''); }"
            )
        )
    assert wanted <= reached


def test_print_cuts_no_chart_and_shows_all_tables(opened: Opener, folder: Path) -> None:
    page = opened(small_outcome(), viewport={"width": A4_BETWEEN_MARGINS, "height": 950}, color_scheme="dark")
    page.page.emulate_media(media="print")
    page.run("() => dispatchEvent(new Event('beforeprint'))")
    page.settle()
    facts = page.run(
        """() => ({
          charts: [...document.querySelectorAll('.chart')].map((chart) => {
            const drawn = chart.querySelector('.main-svg').getBoundingClientRect();
            return { right: drawn.right, height: chart.closest('figure').getBoundingClientRect().height,
              kept: getComputedStyle(chart.closest('figure')).breakInside,
              writing: chart.layout.font.color };
          }),
          wide: [...document.querySelectorAll('main *')].filter((each) => each.checkVisibility()
            && each.closest('.chart') === null
            && each.getBoundingClientRect().right > innerWidth + 1).map((each) => each.outerHTML.slice(0, 80)),
          closed: document.querySelectorAll('main > section:not(#explore) details:not([open])').length,
          controls: [...document.querySelectorAll('select, button, nav')].filter((each) => each.checkVisibility()).length,
        })"""
    )
    assert len(facts["charts"]) == 2
    for chart in facts["charts"]:
        assert chart["right"] <= A4_BETWEEN_MARGINS
        assert chart["height"] < 950  # fits a page, so that it can be kept whole
        assert chart["kept"] == "avoid"
        assert chart["writing"] == "#111"  # dark writing on paper, though the screen is dark
    assert facts["wide"] == []
    assert facts["closed"] == 0
    assert facts["controls"] == 0
    page.run("() => dispatchEvent(new Event('afterprint'))")
    page.page.emulate_media(media="screen")
    page.settle()
    assert page.run("() => document.querySelectorAll('details[open]').length") == 0


def test_printing_to_pdf_gives_a4_pages(opened: Opener, folder: Path) -> None:
    page = opened(small_outcome())
    content = page.page.pdf(prefer_css_page_size=True)
    boxes = set(re.findall(rb"/MediaBox\s*\[\s*0 0 ([\d.]+) ([\d.]+)\s*\]", content))
    assert len(boxes) == 1
    width, height = (float(side) for side in boxes.pop())
    assert (width, height) == pytest.approx((595.3, 841.9), abs=1.0)  # A4 in points, ISO 216


def test_without_scripts_the_tables_remain(opened: Opener) -> None:
    page = opened(small_outcome(), java_script_enabled=False)
    text = page.page.inner_text("main")
    assert "The charts need scripts" in text
    assert "Composition and results at chosen points" in text
    assert page.page.locator("#explorer").is_hidden()
    assert page.page.locator("#results tbody tr").count() > 20


def test_ten_thousand_points_stay_small_and_whole(opened: Opener) -> None:
    outcome = large_outcome()
    assert outcome.points == 10_000
    page = opened(outcome)
    assert page.file.stat().st_size < 6_000_000
    assert page.run("() => document.querySelector('#thinned')") is None
    expected = outcome.dataset["mole_fraction"].sel(species="H2").transpose("pressure", "temperature")
    choose(page, "quantity", "x|H2")
    np.testing.assert_allclose(map_values(page), expected, rtol=PACKED)
