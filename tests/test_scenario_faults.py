"""Faults of a scenario file: each with its place, what was found, what is allowed, the nearest word."""

from __future__ import annotations

from pathlib import Path

import pytest

from gibbsmin import load_scenario
from gibbsmin.errors import ScenarioError
from gibbsmin.scenario import parse_scenario

SOUND = """\
title: Faults
species:
  gases: [CH4, H2O, CO, CO2, H2, N2, O2]
feed:
  gas:
    temperature: 400 degC
    mole per cent: {CH4: 95, N2: 5}
    total: 100 kmol/h
  steam:
    amounts: {H2O: 300 kmol/h}
grid:
  temperature: {from: 500 degC, to: 900 degC, step: 50 K}
  pressure: [1 bar, 10 bar]
  further axes:
    steam to carbon:
      ratio:
        of: {moles of: H2O}
        to: {atoms of: C, in: gas}
        by changing: steam
      values: [2, 3]
results:
  key species: [H2, CO]
  conversions: [CH4]
  yields:
    hydrogen: {of: H2, from: CH4}
  selectivities:
    to CO: {of: CO, from: CH4, element: C}
  ratios:
    H2 to CO: {of: H2, to: CO}
  lines at: [1 bar]
cross-check: {points: sample, sample size: 20, tolerance: 1e-6}
output: {tables: [csv]}
"""

# (text of the sound file, what replaces it, where the fault lies, what the message says)
FAULTS = [
    # structure
    ("title: Faults", "titel: Faults", "titel", "unknown key 'titel'; allowed: title, notes"),
    ("title: Faults", "titel: Faults", "titel", "did you mean 'title'?"),
    ("title: Faults", "title: 2024", "2024", "expected text, found 2024"),
    ("title: Faults", "title: ' '", "' '", "the text is empty"),
    ("title: Faults\n", "title: Faults\ntitle: Again\n", "title: Again", "'title' is written twice"),
    ("title: Faults", "title: &a Faults", "&a", "anchor &a is not read"),
    ("title: Faults", "title: !!python/name:os.system x", "!!python", "the tag !!python/name:os.system"),
    ("  pressure: [1 bar, 10 bar]\n", "", "grid", "the key 'pressure' is missing in grid"),
    (
        "    temperature: 400 degC\n",
        "    temprature: 400 degC\n",
        "temprature",
        "did you mean 'temperature'?",
    ),
    ("temperature: 400 degC", "temperature: 400", "400", "expected text, found 400"),
    ("{points: sample,", "{points: most,", "most", "expected 'sample', 'all' or 'none', found 'most'"),
    ("sample size: 20", "sample size: 0", "0,", "expected at least 1, found 0"),
    ("sample size: 20", "sample size: many", "many", "expected a whole number, found 'many'"),
    ("sample size: 20", "sample size: -1" + 350 * "0", "-1", "a number of 352 digits is too large"),
    ("tolerance: 1e-6", "tolerance: 0", "0}", "expected more than 0, found 0"),
    ("tolerance: 1e-6", "tolerance: .nan", ".nan", "expected a finite number, found nan"),
    ("[csv]", "[cvs]", "cvs", "expected 'csv' or 'parquet', found 'cvs'; did you mean 'csv'?"),
    ("  pressure: [1 bar, 10 bar]", "  pressure: []", "[]\n", "the list is empty"),
    ("output: {tables: [csv]}", "output: [csv]", "[csv]", "expected a mapping, found a list"),
    ("  lines at: [1 bar]", "  dry basis: maybe", "maybe", "expected true or false, found 'maybe'"),
    # species
    (
        "[CH4, H2O, CO, CO2, H2, N2, O2]",
        "everything",
        "everything",
        "expected 'all' or a list, found 'everything'",
    ),
    ("CO2, H2, N2, O2]", "CO2, H2, N2, CH3OOO]", "CH3OOO", "no species is called 'CH3OOO'; did you mean"),
    ("CO2, H2, N2, O2]", "CO2, H2, N2, H2]", "H2]", "H2 is listed twice"),
    ("CO2, H2, N2, O2]", "CO2, H2, N2, C4H10]", "C4H10", "is the formula of several species; choose one of"),
    ("CO2, H2, N2, O2]", "CO2, H2, N2, 'H2O(l)']", "'H2O(l)'", "is a condensed substance; only gases"),
    ("[CH4, H2O, CO, CO2, H2, N2, O2]", "[CH4, H2O, CO, CO2, H2]", "[CH4", "N2 is fed but not listed"),
    ("  gases: [CH4", "  radicals: false\n  gases: [CH4", "radicals", "'radicals' goes with 'gases: all'"),
    (
        "gases: [CH4, H2O, CO, CO2, H2, N2, O2]",
        "leave out: [CH4]",
        "CH4]",
        "CH4 is fed, so it cannot be left out",
    ),
    ("gases: [CH4, H2O, CO, CO2, H2, N2, O2]", "elements: [C, H, O]", "[C, H", "the feed holds N"),
    (
        "gases: [CH4, H2O, CO, CO2, H2, N2, O2]",
        "elements: [C, H, O, N, Xx]",
        "Xx]",
        "'Xx' is not the symbol of an element",
    ),
    (
        "gases: [CH4",
        "files: [none.yaml]\n  gases: [CH4",
        "none.yaml",
        "cannot read the species file 'none.yaml'",
    ),
    # feed
    (
        "400 degC",
        "400 degc",
        "400 degc",
        "'degc' is not a unit of temperature; allowed: K, degC, degF; did you mean",
    ),
    ("400 degC", "-300 degC", "-300", "-300 degC is not above absolute zero"),
    ("400 degC", "-100 degC", "-100", "173.15 K is outside the data of CH4, 200 to 6000 K"),
    ("400 degC", "400 bar", "400", "'bar' is not a unit of temperature"),
    ("{H2O: 300 kmol/h}", "{H2O: -300 kmol/h}", "-300", "-300 kmol/h is negative"),
    ("{H2O: 300 kmol/h}", "{H2O: 300}", "300", "300 has no unit; allowed: mol, kmol"),
    (
        "{H2O: 300 kmol/h}",
        "{H2O: 300 kmol}",
        "300 kmol}",
        "kmol is an amount, but the feed began with a rate (kmol/h)",
    ),
    (
        "{H2O: 300 kmol/h}",
        "{H20: 300 kmol}",
        "300 kmol}",
        "kmol is an amount, but the feed began with a rate",
    ),
    ("{H2O: 300 kmol/h}", "{H2O: 0 kmol/h}", "steam:\n", "cannot change it"),
    ("{H2O: 300 kmol/h}", "{H20: 300 kmol/h}", "H20", "no species is called 'H20'; did you mean"),
    (
        "{H2O: 300 kmol/h}",
        "{H2O: 1 mol/h, H2O(g): 1 mol/h}",
        "H2O(g)",
        "H2O is given twice (here as 'H2O(g)')",
    ),
    ("{H2O: 300 kmol/h}", "{H2O: 1 mol/h, H2O: 1 mol/h}", "H2O: 1 mol/h}", "'H2O' is written twice"),
    ("{H2O: 300 kmol/h}", "{}", "{}", "nothing is given in feed: steam: amounts"),
    ("N2: 5}", "N2: 4}", "{CH4: 95", "the shares add up to 99, expected 100 within 0.5; write 'rest'"),
    ("N2: 5}", "N2: -5}", "-5", "the share -5 of N2 is negative"),
    ("CH4: 95, N2: 5}", "CH4: rest, N2: rest}", "rest}", "'rest' is written twice"),
    ("CH4: 95, N2: 5}", "CH4: rest, N2: 105}", "{CH4: rest", "nothing is left for 'rest'"),
    ("N2: 5}", "N2: remainder}", "remainder", "expected a number or 'rest', found 'remainder'"),
    ("    total: 100 kmol/h\n", "", "gas:\n", "'gas' has a composition but no 'total'"),
    (
        "    total: 100 kmol/h",
        "    unit: kmol/h\n    total: 1 mol/h",
        "unit",
        "'unit' goes with 'amounts' only",
    ),
    ("    amounts: {H2O", "    total: 1 mol/h\n    amounts: {H2O", "total: 1 ", "does not go with 'amounts'"),
    ("    amounts: {H2O: 300 kmol/h}", "    pressure: 1 bar", "steam:\n", "'steam' has none of them"),
    (
        "    amounts: {H2O: 300 kmol/h}",
        "    pressure: -2 bar(g)\n    amounts: {H2O: 1 mol/h}",
        "-2 bar",
        "vacuum",
    ),
    ("{H2O: 300 kmol/h}", "{H2O+: 300 kmol/h}", "steam:\n", "carries a charge"),
    ("{H2O: 300 kmol/h}", "{H2O: 1e999 kmol/h}", "1e999", "1e999 kmol/h is beyond all measure"),
    ("{H2O: 300 kmol/h}", "{H2O: 1e-99 kmol/h}", "1e-99", "1e-99 kmol/h is beyond all measure"),
    # grid
    ("step: 50 K}", "step: 0 K}", "0 K}", "the step must be more than zero"),
    ("step: 50 K}", "step: 500 K}", "500 K}", "the step (500 K) is larger than the range"),
    ("step: 50 K}", "step: 1e-9 K}", "1e-9", "too many for one axis (at most 100000)"),
    ("step: 50 K}", "points: 1}", "1}", "expected at least 2, found 1"),
    ("step: 50 K}", "points: 2.5}", "2.5", "expected a whole number, found 2.5"),
    ("step: 50 K}", "points: 900000}", "900000", "900000 values are too many"),
    (
        "step: 50 K}",
        "}",
        "temperature: {",
        "a range needs one of 'step', 'points' or 'factor'; found none of them",
    ),
    ("step: 50 K}", "step: 50 K, points: 3}", "temperature: {", "found 'step' and 'points'"),
    ("step: 50 K}", "step: 50 K, spacing: logarithmic}", "step", "takes 'points' or 'factor', not 'step'"),
    ("step: 50 K}", "factor: 2, spacing: linear}", "factor", "takes 'points' or 'step', not 'factor'"),
    ("step: 50 K}", "factor: 1}", "1}", "expected more than 1, found 1"),
    ("step: 50 K}", "factor: 9}", "9}", "leads beyond 900 degC at once"),
    ("step: 50 K}", "step: 50 bar}", "50 bar", "'bar' is not a unit of temperature difference"),
    ("to: 900 degC", "to: 400 degC", "400 degC, step", "the range must ascend"),
    ("to: 900 degC, ", "", "temperature: {", "'to' is missing"),
    (
        "{from: 500 degC, to: 900 degC, step: 50 K}",
        "{values: 600 K, step: 5}",
        "step",
        "does not go with 'values'",
    ),
    ("{from: 500 degC, to: 900 degC, step: 50 K}", "{unit: K}", "temperature: {", "no values are given"),
    ("[1 bar, 10 bar]", "[1 bar, 1e5 Pa]", "1e5 Pa", "1e5 Pa is listed twice (already as 1 bar)"),
    ("[1 bar, 10 bar]", "[1 bar, 0 bar]", "0 bar]", "0 bar is not above vacuum"),
    ("[1 bar, 10 bar]", "[1 bar, 10 psi]", "10 psi", "write psi(a) or psi(g)"),
    ("[1 bar, 10 bar]", "{from: 1, to: 9 bar, step: 1}", "1, to", "1 has no unit"),
    (
        "to: 900 degC",
        "to: 9000 degC",
        "{from: 500",
        "go beyond the data of CH4 (its data cover 200 to 6000 K)",
    ),
    # further axes
    (
        "by changing: steam",
        "by changing: stream",
        "stream",
        "is not a stream of the feed; allowed: gas, steam; did",
    ),
    ("      values: [2, 3]", "      values: [2, -3]", "-3", "the ratio -3 is negative"),
    (
        "      values: [2, 3]",
        "      values: [2, 3 mol]",
        "3 mol",
        "expected a plain number (a ratio has no unit)",
    ),
    ("      values: [2, 3]", "      values: [2, 3]\n      unit: mol", "unit", "a ratio has no unit"),
    ("      values: [2, 3]", "      values: [2, 3", ":\n  key", "not readable as YAML"),
    ("atoms of: C,", "atoms of: Fe,", "Fe", "'Fe' is not an element in gas; allowed: C, H, N"),
    (
        "in: gas}",
        "in: gass}",
        "gass",
        "'gass' is not a stream of the feed; allowed: gas, steam; did you mean 'gas'?",
    ),
    ("{moles of: H2O}", "{moles of: CO}", "CO}", "CO is not in the feed; there: CH4, N2, H2O"),
    ("{moles of: H2O}", "{moles of: H2O, mass of: H2O}", "of: {moles", "found 'moles of' and 'mass of'"),
    (
        "{moles of: H2O}",
        "{in: steam}",
        "of: {in",
        "needs one of 'moles of', 'atoms of', 'mass of', 'oxygen demand of'",
    ),
    ("    steam to carbon:", "    Temperature:", "Temperature:\n", "an axis cannot be called 'Temperature'"),
    ("    steam to carbon:", "    '%':", "'%'", "has no letter or digit"),
    (
        "      ratio:\n",
        "      stream: gas\n      ratio:\n",
        "steam to carbon",
        "needs one of 'stream' or 'ratio'; found both",
    ),
    # results
    ("[H2, CO]", "[H2, CO, SO2]", "SO2", "'SO2' is not a gas that takes part; allowed: CH4, H2O, CO"),
    ("[H2, CO]", "[H2, H2(g)]", "H2(g)", "H2 is listed twice"),
    (
        "conversions: [CH4]",
        "conversions: [CO]",
        "CO]",
        "'CO' is not a gas of the feed; allowed: CH4, N2, H2O",
    ),
    ("{of: H2, from: CH4}", "{of: H2}", "hydrogen", "a yield needs 'from', 'element', or both"),
    ("{of: H2, from: CH4}", "{of: H2, element: C}", "C}", "'C' is not an element of H2; allowed: H"),
    ("element: C}", "element: O}", "O}", "'O' is not an element of CH4; allowed: C, H"),
    ("{of: CO, from: CH4, element: C}", "{of: CO, from: CH4}", "to CO: {", "the key 'element' is missing"),
    (
        "lines at: [1 bar]",
        "lines at: [50 bar]",
        "50 bar",
        "50 bar is outside the pressures of the grid, 1 to 10 bar",
    ),
]


def place(text: str, marker: str, change: int) -> tuple[int, int]:
    """Line and column, from 1, of the marker: the first from the changed line on, or the last before it."""
    offset = text.find(marker, text.rfind("\n", 0, change) + 1)
    if offset < 0:
        offset = text.rindex(marker)
    before = text[:offset]
    return before.count("\n") + 1, offset - (before.rfind("\n") + 1) + 1


def test_the_file_that_the_faults_are_put_into_is_sound() -> None:
    assert parse_scenario(SOUND).points == 2 * 9 * 2


@pytest.mark.parametrize(("old", "new", "marker", "said"), FAULTS)
def test_a_fault_is_told_with_its_place(old: str, new: str, marker: str, said: str) -> None:
    assert old in SOUND
    text = SOUND.replace(old, new, 1)
    with pytest.raises(ScenarioError) as caught:
        parse_scenario(text, file="plant.yaml")
    fitting = [fault for fault in caught.value.faults if said in fault.message]
    assert fitting, str(caught.value)
    assert (fitting[0].line, fitting[0].column) == place(text, marker, SOUND.index(old)), str(caught.value)
    assert fitting[0].file == "plant.yaml"


def faults_of(text: str, file: str = "plant.yaml") -> list[str]:
    with pytest.raises(ScenarioError) as caught:
        parse_scenario(text, file=file)
    return [str(fault) for fault in caught.value.faults]


def test_every_fault_is_in_one_message_in_the_order_of_the_file() -> None:
    text = SOUND
    for old, new in [
        ("titl", "tytl"),
        ("95, N2: 5", "95, N2: 3"),
        ("300 kmol/h", "300 kmol/hr"),
        ("step: 50 K", "step: 0 K"),
        ("by changing: steam", "by changing: steams"),
        ("points: sample", "points: few"),
        ("[csv]", "[xls]"),
    ]:
        text = text.replace(old, new, 1)
    with pytest.raises(ScenarioError) as caught:
        parse_scenario(text, file="plant.yaml")
    message = str(caught.value)
    expected = [
        "'tytle'",
        "'title' is missing",
        "add up to 98",
        "kmol/hr",
        "step",
        "'steams'",
        "'few'",
        "'xls'",
    ]
    assert len(caught.value.faults) == len(expected)
    for line, word in zip(message.splitlines(), expected, strict=True):
        assert line.startswith("plant.yaml:")
        assert word in line
    lines = [fault.line or 0 for fault in caught.value.faults]
    assert lines == sorted(lines)


@pytest.mark.parametrize(
    ("values", "ratio", "said"),
    [
        (
            "[0, 1, 2, 3]",
            "{of: {moles of: [H2O, N2]}, to: {atoms of: C}, by changing: steam}",
            "'x' cannot be 0: changing 'steam' can only give values between 0.0526316 (with none of it) "
            "and infinity",
        ),
        (
            "[0.5, 3]",
            "{of: {moles of: H2O, in: steam}, to: {moles of: everything}, by changing: steam}",
            "'x' cannot be 3: changing 'steam' can only give values between 0 (with none of it) and 1",
        ),
        (
            "[10]",
            "{of: {moles of: CH4}, to: {moles of: N2}, by changing: gas}",
            "'x' cannot be 10: changing 'gas' keeps it at 19",
        ),
        (
            "[10]",
            "{of: {moles of: CH4}, to: {moles of: N2}, by changing: steam}",
            "'x' cannot be 10: changing 'steam' does not change this ratio",
        ),
        (
            "[0, 1]",
            "{of: {moles of: H2O}, to: {moles of: CH4}, by changing: gas}",
            "'x' cannot be 0: changing 'gas' can only give values between infinity (with none of it) and 0",
        ),
    ],
)
def test_a_ratio_that_no_amount_can_give(values: str, ratio: str, said: str) -> None:
    start, end = SOUND.index("    steam to carbon:"), SOUND.index("results:")
    text = f"{SOUND[:start]}    x:\n      ratio: {ratio}\n      values: {values}\n{SOUND[end:]}"
    (fault,) = faults_of(text)
    assert fault.startswith(f"plant.yaml:{SOUND[:start].count(chr(10)) + 1}:5: ")
    assert said in fault


FRAME = "title: t\ngrid: {temperature: 1000 K, pressure: 1 bar, further axes: %s}\nfeed: %s\n"


@pytest.mark.parametrize(
    ("axes", "feed", "said"),
    [
        ("{}", "{a: {amounts: {CH4: 0 mol}}}", "plant.yaml:3:1: the feed is nothing: every amount is zero"),
        ("{}", "{}", "plant.yaml:3:7: nothing is given in feed"),
        (
            "{x: {stream: a, values: [0 mol, 1 mol]}}",
            "{a: {amounts: {CH4: 1 mol}}}",
            "the feed is nothing at x = 0",
        ),
        (
            "{x: {stream: a, values: [1 mol/h]}}",
            "{a: {amounts: {CH4: 1 mol}}}",
            "mol/h is a rate, but the feed began with an amount (mol)",
        ),
        (
            "{x: {stream: a, values: [1 mol]}, y: {stream: a, values: [1 mol]}}",
            "{a: {amounts: {CH4: 1 mol}}}",
            "the stream 'a' is changed by the axis 'x' already",
        ),
        (
            "{x y: {stream: a, values: [1 mol]}, x-y: {stream: b, values: [1 mol]}}",
            "{a: {amounts: {CH4: 1 mol}}, b: {amounts: {CH4: 1 mol}}}",
            "the axis 'x-y' would be called x_y, as 'x y' is",
        ),
        (
            "{x: {stream: a, from: 1 mol, to: 2 mol, points: 1000}, "
            "y: {stream: b, from: 1 mol, to: 2 mol, points: 1000}}",
            "{a: {amounts: {CH4: 1 mol}}, b: {amounts: {CH4: 1 mol}}}",
            "the further axes give 1000000 feeds, too many for one scenario",
        ),
        (
            "{x: {ratio: {of: {moles of: O2}, to: {oxygen demand of: everything, in: a}, by changing: b}, "
            "values: [1]}}",
            "{a: {amounts: {Fe: 1 mol}}, b: {amounts: {O2: 1 mol}}}",
            "the oxygen demand of Fe is not defined",
        ),
    ],
)
def test_faults_of_small_files(axes: str, feed: str, said: str) -> None:
    assert any(said in fault for fault in faults_of(FRAME % (axes, feed)))


@pytest.mark.parametrize("total", ["100 kmol/h", "100 kmol/x"], ids=["feed sound", "feed faulty"])
def test_faults_of_all_sections_come_in_one_message(total: str) -> None:
    text = (
        SOUND.replace("total: 100 kmol/h", f"total: {total}")
        .replace("N2, O2]", "N2, O2X]")
        .replace("key species: [H2, CO]", "key species: [H2, COX]")
        .replace("hydrogen: {of: H2,", "hydrogen: {of: H2X,")
        .replace("lines at: [1 bar]", "lines at: [1 barn]")
    )
    said = "\n".join(faults_of(text))
    for wrong in ("O2X", "COX", "H2X", "barn"):
        assert f"'{wrong}'" in said
    assert ("kmol/x" in said) == ("kmol/x" in total)
    # what cannot be known without the faulty parts is not complained of
    assert said.count("\n") == 3 + ("kmol/x" in total)


def test_an_element_without_a_gas_is_a_fault() -> None:
    text = "species: {gases: [H2O, H2, O2]}\n" + FRAME % ("{}", "{a: {amounts: {H2O: 1 mol, C(gr): 1 mol}}}")
    assert any(
        "no gas that takes part contains C, which C(gr) brings in" in fault for fault in faults_of(text)
    )


def test_own_species_with_a_fault_keep_their_place() -> None:
    text = (
        FRAME % ("{}", "{a: {amounts: {CH4: 1 mol}}}") + "species:\n  own:\n    sourc: {}\n    species: []\n"
    )
    assert any(fault.startswith("plant.yaml:6:5: ") for fault in faults_of(text))


def test_expansion_by_aliases_is_refused() -> None:
    bomb = "a: &a [x, x]\n" + "".join(
        f"{b}: &{b} [*{a}, *{a}]\n" for a, b in zip("abcdefgh", "bcdefghi", strict=True)
    )
    assert any("alias" in fault for fault in faults_of(bomb))


@pytest.mark.parametrize(
    ("content", "said"),
    [
        (b"", "the file is empty"),
        (b"title: caf\xe9\n", "not UTF-8 text"),
        (b"\x89PNG\r\n", "not UTF-8 text"),
        (b"- a\n- b\n", "expected a mapping, found a list"),
        (b"just words", "expected a mapping, found 'just words'"),
        (b"a: [1, 2\n", "not readable as YAML"),
        (b"[" * 5000, "nest"),
    ],
)
def test_files_that_are_no_scenario(tmp_path: Path, content: bytes, said: str) -> None:
    file = tmp_path / "odd.yaml"
    file.write_bytes(content)
    with pytest.raises(ScenarioError) as caught:
        load_scenario(file)
    assert said in str(caught.value)
    assert str(file) in str(caught.value)


def test_a_missing_file_and_a_folder(tmp_path: Path) -> None:
    with pytest.raises(ScenarioError, match="cannot be read: No such file"):
        load_scenario(tmp_path / "none.yaml")
    with pytest.raises(ScenarioError, match="cannot be read"):
        load_scenario(tmp_path)
