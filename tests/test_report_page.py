"""The report as text: what it says, that it says it safely, and that it is the same every time.

What a report should hold is common practice, no source; numbers are compared with the outcome it is made of.
"""

from __future__ import annotations

import hashlib
import json
import os
import re
import subprocess
import sys
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pytest

from gibbsmin.cli import main
from gibbsmin.figures.labels import number
from gibbsmin.outcome import Outcome
from gibbsmin.report import StudyCase, report_html, study_report_html, study_results_html
from gibbsmin.report.boundaries import boundaries
from gibbsmin.report.chart_data import ChartData
from gibbsmin.report.markup import Markup, embedded_json, paragraphs, pretty_name, pretty_words, tag
from gibbsmin.report.packing import RELATIVE_ERROR, packed, unpacked
from gibbsmin.report.page import LIBRARY_FILE, LIBRARY_LICENSE, page_file
from gibbsmin.report.results_part import chosen_points
from gibbsmin.report.thinning import MOST_VALUES, thin
from gibbsmin.study.results import open_study
from tests.report_cases import (
    HOSTILE,
    SMALL,
    flawed_outcome,
    hostile_outcome,
    phases_outcome,
    reactions_outcome,
    small_outcome,
)
from tests.study_cases import write_study

ROOT = Path(__file__).parents[1]


class Read(HTMLParser):
    """Elements and visible text of a page; tables by caption as lists of rows."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.elements: list[tuple[str, dict[str, str | None]]] = []
        self.tables: dict[str, list[list[str]]] = {}
        self.visible = ""
        self._open: list[str] = []
        self._rows: list[list[str]] = []
        self._caption = ""
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))
        if tag in ("meta", "br", "input", "img", "link"):
            return
        self._open.append(tag)
        if tag == "table":
            self._rows, self._caption = [], ""
        elif tag == "tr":
            self._rows.append([])
        elif tag in ("td", "th"):
            self._rows[-1].append("")

    def handle_endtag(self, tag: str) -> None:
        assert self._open.pop() == tag, f"</{tag}> closes nothing"
        if tag == "table":
            self.tables[self._caption] = self._rows

    def handle_data(self, data: str) -> None:
        if {"script", "style"} & set(self._open):
            return
        self.visible += data
        if "caption" in self._open:
            self._caption += data
        elif {"td", "th"} & set(self._open):
            self._rows[-1][-1] += data


@pytest.fixture(scope="module")
def small() -> Outcome:
    return small_outcome()


@pytest.fixture(scope="module")
def read(small: Outcome) -> Read:
    return Read(report_html(small))


# --- what it says


def test_feed_by_stream(read: Read) -> None:
    rows = {row[0]: row[1:] for row in read.tables["Feed by stream, amounts in kmol/h"]}
    assert rows["species"] == ["gas", "steam", "whole feed"]
    assert rows["CH₄"] == ["90", "–", "90"]
    assert rows["N₂"] == ["6", "–", "6"]
    # steam to carbon 2 to 4 on 94 kmol/h of carbon
    assert rows["H₂O"] == ["–", "188 to 376", "188 to 376"]
    assert rows["temperature"] == ["400 °C", "400 °C", "–"]
    assert rows["pressure"] == ["20 bar", "–", "–"]


def test_grid_and_species_with_source_and_range(read: Read, small: Outcome) -> None:
    axes = read.tables["Axes of the grid, 189 points in all"]
    assert ["temperature", "9", "500 °C", "900 °C", "even"] in axes
    assert ["pressure", "7", "1 bar", "40 bar", "even in the logarithm"] in axes
    rows = {row[0]: row for row in read.tables["Species and their data"]}
    methane = next(each for each in small.scenario.species if each.name == "CH4")
    assert rows["CH₄"][1:3] == [f"{methane.lower:g}", f"{methane.upper:g}"]
    assert rows["CH₄"][3] == "−74.600"  # kJ/mol, NASA/TP-2002-211556
    assert rows["CH₄"][5] == f"[1] {methane.forms[0].source}"
    assert len(rows) == 1 + len(small.scenario.species)
    assert "NASA/TP-2002-211556" in read.visible


def test_extremes_are_those_of_the_data(read: Read, small: Outcome) -> None:
    rows = {row[0]: row for row in read.tables["Lowest and highest value of each result over the grid"]}
    field = small.dataset["mole_fraction"].sel(species="H2")
    assert rows["H₂, mole fraction"][2] == number(float(field.min()))
    assert rows["H₂, mole fraction"][4] == number(float(field.max()))
    place = field.where(field == field.max(), drop=True)
    celsius = float(place["temperature"].item()) - 273.15
    assert f"{celsius:g} °C" in rows["H₂, mole fraction"][5]
    assert f"steam to carbon {place['steam_to_carbon'].item():g}" in rows["H₂, mole fraction"][5]


def test_chosen_points_show_composition_and_results(read: Read, small: Outcome) -> None:
    caption = next(
        each for each in read.tables if each.startswith("Composition and results at chosen points")
    )
    rows = {row[0]: row[2:] for row in read.tables[caption]}
    points = chosen_points(small.scenario)
    assert len(points) == 8  # corners of temperature and pressure at both ends of steam to carbon
    assert rows["temperature"] == ["500 °C", "500 °C", "900 °C", "900 °C"] * 2
    for position, index in enumerate(points):
        carbon_monoxide = float(small.dataset["mole_fraction"].sel(species="CO").values[index])
        assert rows["CO"][position] == number(carbon_monoxide)
        assert rows["conversion of CH₄"][position] == number(
            float(small.dataset["conversion of CH4"].values[index])
        )


def test_dew_points_are_in_the_unit_of_the_grid_and_may_have_no_value(small: Outcome) -> None:
    """A temperature result reads like the axis; a point without one is none the less solved."""
    dew = small.dataset["conversion of CH4"] * 0.0 + 350.0
    dew.attrs = {
        "units": "K",
        "long_name": "temperature at which water condenses",
        "description": "asked for",
    }
    first = chosen_points(small.scenario)[0]
    dew.values[first] = np.nan
    dew.values[chosen_points(small.scenario)[1]] = 300.0
    page = Read(report_html(replace(small, dataset=small.dataset.assign({"dew point of H2O": dew}))))
    rows = {row[0]: row for row in page.tables["Lowest and highest value of each result over the grid"]}
    assert rows["dew point of H₂O"][1:3] == ["–", "26.85 °C"]
    assert rows["dew point of H₂O"][4] == "76.85 °C"
    caption = next(
        each for each in page.tables if each.startswith("Composition and results at chosen points")
    )
    (row,) = (each for each in page.tables[caption] if "water condenses" in each[0])
    assert row[1:5] == ["–", "no value", "26.85 °C", "76.85 °C"]


def test_evidence_names_the_worst_point_and_counts(read: Read, small: Outcome) -> None:
    check = small.crosscheck
    rows = dict(row for row in read.tables[f"Points solved again by {check.library}"] if len(row) == 2)
    assert rows["confirmed"] == str(check.confirmed) == str(len(check.points))
    worst = check.worst
    assert worst is not None
    assert f"Largest relative difference: {number(worst.relative, 2)}" in read.visible
    listing = read.tables["Checked points: those that differ first, then by their difference"]
    assert len(listing) == 1 + len(check.points)
    assert number(worst.relative, 2) == listing[1][2]
    assert "all 189 points are solved and proved" in read.visible
    assert "the data of every species cover all temperatures" in read.visible
    gap = (small.dataset["gap"] / small.dataset["gas_amount"]).values
    assert f"largest {number(float(gap.max()), 2)}" in read.visible


def test_cautions_references_version_and_digests(read: Read, small: Outcome) -> None:
    for words in (
        "Equilibrium is a limit, not a rate",
        "Not for the sizing of relief devices",
        "non-flammable",
        "Not for exposure limits",
        "Local codes",
        "J. Chem. Phys. 28",
        "Chemical Reaction Equilibrium Analysis",
        small.scenario.digest,
    ):
        assert words in read.visible


def test_unsolved_and_extrapolated_points_are_named() -> None:
    flawed = flawed_outcome()
    flags = np.zeros((9, 10), dtype=np.int8)
    flags[7:, 3] = 1
    dataset = flawed.dataset.assign(extrapolated=(("temperature", "species"), flags))
    page = Read(report_html(replace(flawed, dataset=dataset)))
    assert "187 of 189 points solved and proved" in page.visible
    assert "2 points: the iteration ended at its step limit" in page.visible
    assert "steam to carbon 3, 500 °C, 6.32456 bar; steam to carbon 3, 550 °C, 6.32456 bar" in page.visible
    hydrogen = pretty_name(str(dataset["species"].values[3]))
    assert f"between 1123.15 and 1173.15 K: {hydrogen}." in page.visible
    assert "species data extrapolated" in page.visible


def test_points_that_differ_are_told_with_the_verdict(small: Outcome) -> None:
    first, *others = small.crosscheck.points
    odd = replace(first, status="differs", relative=0.25, species="CO", verdict="ours", reason="of a test")
    check = replace(small.crosscheck, points=(odd, *others))
    page = Read(report_html(replace(small, crosscheck=check)))
    assert "differs; the residuals support the answer of this report; of a test" in page.visible
    assert "Largest relative difference: 0.25 in the mole fraction of CO" in page.visible


def test_no_cross_check_is_said(small: Outcome) -> None:
    check = replace(small.crosscheck, extent="none", points=(), library="")
    page = Read(report_html(replace(small, crosscheck=check)))
    assert "No point was cross-checked, as asked." in page.visible
    assert "no independent cross-check" in page.visible


def test_boundaries_have_a_table_and_lines_of_one_direction_each() -> None:
    outcome = phases_outcome()
    page = Read(report_html(outcome))
    rows = page.tables["soot limit: C(gr) begins to form"]
    limit = outcome.dataset["boundary soot limit"].isel(root=0).values - 273.15
    assert rows[0] == ["pressure", "temperature", "above it"]
    assert rows[1:] == [
        [f"{pressure} bar", f"{celsius:.6g} °C", "dissolves above"]
        for pressure, celsius in zip((1, 5, 20), limit, strict=True)
    ]
    # A region that loses its lower end at the second pressure: its upper end stays one line.
    positions = np.array([[700.0, 900.0], [880.0, np.nan], [690.0, 860.0]])
    direction = np.array([[1, -1], [-1, 0], [1, -1]], dtype=np.int8)
    dataset = outcome.dataset.drop_vars(["boundary soot limit", "boundary soot limit, direction"]).assign(
        {
            "boundary region": (
                ("pressure", "root"),
                positions,
                {"boundary_along": "temperature", "units": "K"},
            ),
            "boundary region, direction": (("pressure", "root"), direction),
        }
    )
    kept = {"temperature": tuple(range(5)), "pressure": (0, 1, 2)}
    lines = [each["values"] for each in boundaries(dataset, kept)]
    assert lines == [[900.0, 880.0, 860.0], [700.0, None, 690.0]]


def test_reactions_show_constants_shortcuts_and_windows() -> None:
    outcome = reactions_outcome()
    assert outcome.reactions is not None
    page = Read(report_html(outcome))
    rows = {row[0]: row for row in page.tables["Reactions; K at a standard pressure of 1 bar"]}
    ln_K = outcome.dataset["ln_K"].sel(reaction="shift")
    assert rows["reaction"][2:4] == ["ln K at 500 °C", "ln K at 900 °C"]
    assert rows["shift"][1] == "CO + H₂O = CO₂ + H₂"
    assert rows["shift"][2:4] == [number(float(ln_K[0])), number(float(ln_K[-1]))]
    assert "K falls with temperature" in rows["shift"][4]
    shortcuts = next(rows for caption, rows in page.tables.items() if caption.startswith("Shortcuts"))
    error = outcome.dataset["shortcut_error_per_cent"].sel(shortcut="straight line").values
    assert shortcuts[1][2] == number(float(error[np.argmax(np.abs(error))]), 3)
    (window,) = outcome.reactions.shortcuts[0].windows
    assert shortcuts[1][4].startswith(f"{window.lower - 273.15:.4g}"[:3])
    assert "laboratory" in page.visible


# --- safety and sameness


def test_hostile_text_makes_no_element() -> None:
    page = Read(report_html(hostile_outcome()))
    kinds = [name for name, _ in page.elements]
    assert kinds.count("script") == 3  # data, library, the page's own
    assert "img" not in kinds
    assert page.visible.count(HOSTILE) > 15
    assert not any(key.startswith("on") for _, attributes in page.elements for key in attributes)


def test_nothing_is_asked_from_a_network(read: Read) -> None:
    policy = next(a["content"] for name, a in read.elements if name == "meta" and "http-equiv" in a)
    assert policy is not None
    assert policy.startswith("default-src 'none'")
    assert not any("src" in attributes or name == "link" for name, attributes in read.elements)
    targets = [attributes["href"] for name, attributes in read.elements if name == "a"]
    assert all(target is not None and target.startswith("#") for target in targets)


def test_same_outcome_same_bytes_whatever_the_hash_seed(small: Outcome, tmp_path: Path) -> None:
    text = report_html(small)
    assert report_html(small) == text
    program = (
        "import sys, hashlib; from tests.report_cases import small_outcome; from gibbsmin.report import report_html;"
        "sys.stdout.write(hashlib.sha256(report_html(small_outcome()).encode()).hexdigest())"
    )
    environment = {**os.environ, "PYTHONHASHSEED": "7", "PYTHONPATH": str(ROOT)}
    done = subprocess.run(
        [sys.executable, "-c", program],
        env=environment,
        cwd=tmp_path,
        capture_output=True,
        text=True,
        check=True,
    )
    assert done.stdout == hashlib.sha256(text.encode()).hexdigest()


def test_the_library_is_the_released_one_with_its_licence() -> None:
    # SHA-256 of plotly-cartesian.min.js in the npm package plotly.js-cartesian-dist-min 4.1.1
    released = "79542150855a52c567260e3137095dbe2b744e6d702a5cabe67da246942fba7a"
    assert hashlib.sha256(page_file(LIBRARY_FILE).encode()).hexdigest() == released
    assert "</script" not in page_file(LIBRARY_FILE).lower()
    assert page_file(LIBRARY_LICENSE).startswith(("The MIT License", "MIT License"))


def test_markup_escapes_all_but_markup() -> None:
    assert tag("p", "<b>", Markup("<i></i>"), title='"&') == '<p title="&quot;&amp;">&lt;b&gt;<i></i></p>'
    assert json.loads(embedded_json({"a": "</script><!--"})) == {"a": "</script><!--"}
    assert "<" not in embedded_json({"a": "</script><!--"})
    assert paragraphs("One\nline.\n\n- a <b>\n- c") == (
        "<p>One line.</p><ul><li>a &lt;b&gt;</li><li>c</li></ul>"
    )


@pytest.mark.parametrize(
    ("name", "shown"),
    [
        ("CH4", "CH₄"),
        ("NH4+", "NH₄⁺"),
        ("C4H10 (n-butane)", "C₄H₁₀ (n-butane)"),
        ("C(gr)", "C(gr)"),
        ("$x$", "$x$"),
    ],
)
def test_formulas_get_small_digits(name: str, shown: str) -> None:
    assert pretty_name(name) == shown
    assert pretty_words(f"yield of {name}").startswith("yield of")


# --- size


def test_packed_numbers_keep_their_promise() -> None:
    rng = np.random.default_rng(1)
    values = 10.0 ** rng.uniform(-37, 37, 20_000) * rng.choice([-1, 1], 20_000)
    np.testing.assert_allclose(unpacked(packed(values)), values, rtol=RELATIVE_ERROR)
    odd = unpacked(packed([np.nan, np.inf, 0.0, 1e-60, 1.0, -2.0]))
    np.testing.assert_array_equal(odd, [np.nan, np.nan, 0.0, 0.0, 1.0, -2.0])
    assert len(packed(values)) == 4 * values.size


def test_large_maps_are_thinned_evenly_and_it_is_said(small: Outcome) -> None:
    thinned = thin((4, 901, 111), 30)
    counts = [len(kept) for kept in thinned.kept]
    assert 8_000 < np.prod(counts) <= 10_000
    assert counts[0] == 4  # short axes stay whole
    assert all(
        kept[0] == 0 and kept[-1] == size - 1 for kept, size in zip(thinned.kept, (4, 901, 111), strict=True)
    )
    assert np.prod([len(kept) for kept in thin((100, 100), 400).kept]) * 400 <= MOST_VALUES
    assert thin((3, 9, 7), 10).is_whole
    text = report_html(small, most_points=60)
    assert "The map has 189 points. The charts show" in text
    data = ChartData(small, 60).as_json()
    shown = int(np.prod([len(axis["values"]) for axis in data["axes"]]))
    assert shown <= 60
    assert unpacked(data["fractions"]).size == shown * len(data["species"])
    # tables and evidence still use all points
    assert "all 189 points are solved and proved" in text


def test_traces_stay_out_of_the_charts_and_are_named(small: Outcome) -> None:
    dataset = small.dataset.copy(deep=True)
    dataset["mole_fraction"].loc[{"species": "HCN"}] = 3e-14
    data = ChartData(replace(small, dataset=dataset))
    assert data.left_out == ("HCN",)
    text = report_html(replace(small, dataset=dataset))
    assert "none of them exceeds a mole fraction of 1e-12 anywhere: HCN." in text


# --- with a run, and for a study


def test_run_writes_the_report_unless_told_not_to(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("ostrand.yaml").write_text(SMALL, encoding="utf-8")
    assert main(["run", "ostrand.yaml", "--no-figures", "--crosscheck", "none"]) == 0
    page = Path("ostrand-results/report.html").read_bytes()
    record = json.loads(Path("ostrand-results/record.json").read_text(encoding="utf-8"))
    assert record["files"]["report.html"] == hashlib.sha256(page).hexdigest()
    assert "report.html" in capsys.readouterr().out
    command = ["run", "ostrand.yaml", "--no-figures", "--crosscheck", "none", "--no-report", "--overwrite"]
    assert main(command) == 0
    assert not Path("ostrand-results/report.html").exists()


def test_a_study_leaves_a_report_unless_told_not_to(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    write_study(tmp_path)
    assert main(["study", "study.yaml", "--workers", "1"]) == 0
    report = Path("study-results/report.html")
    text = report.read_text(encoding="utf-8")
    page = Read(text)
    results = open_study("study-results")
    rows = page.tables["All 12 cases"]
    heading, first = rows[0], rows[1]
    told = dict(zip(heading, first, strict=True))
    case = results.summary.iloc[0]
    assert told["case"] == case["case"]
    assert [told[name] for name in results.quantity_columns] == [
        number(case[n], 6) for n in results.quantity_columns
    ]
    low, high = case["conversion of CO lowest"], case["conversion of CO highest"]
    assert told["conversion of CO"] == f"{number(low)} to {number(high)}"
    assert "180 of 180 points solved and proved" in page.visible
    assert results.manifest["species data SHA-256"]["all"] in page.visible
    report.unlink()
    assert main(["study", "study.yaml", "--no-report"]) == 0
    assert not report.exists()
    assert study_results_html(results) == text


def test_study_report_tells_cases_apart() -> None:
    cases = [
        StudyCase(
            "lean",
            100,
            0,
            5,
            0,
            1e-13,
            {"steam to carbon": 2.5},
            {"H2 (mol/mol)": (0.4, 0.5)},
            report="lean/report.html",
        ),
        StudyCase("rich", 100, 3, 5, 1, 2e-13, {"steam to carbon": 3}, {"H2 (mol/mol)": (0.6, 0.6)}),
        StudyCase(HOSTILE, 100, 0, failure=HOSTILE),
    ]
    text = study_report_html("Study of a test", cases, settings={"program": "gibbsmin"})
    page = Read(text)
    assert "2 of 3 cases ran" in page.visible
    assert "197 of 300 points solved and proved" in page.visible
    rows = page.tables["All 3 cases"]
    assert rows[1] == ["lean", "2.5", "100", "0", "0 of 5", number(1e-13, 2), "0.4 to 0.5"]
    assert "rich: 3 points not solved; 1 points differ in the cross-check" in page.visible
    spread = next(
        rows for caption, rows in page.tables.items() if caption.startswith("Lowest and highest value")
    )
    assert spread[1][:5] == ["H₂ (mol/mol)", "0.4", "lean", "0.6", "rich"]
    assert [name for name, _ in page.elements].count("script") == 0
    assert not re.search(r"<img", text)
    assert "cases that need attention" in page.visible.lower()
