"""The strict YAML reader: what it returns, what it refuses, and where it says the fault is."""

from __future__ import annotations

import math
import random
from pathlib import Path

import pytest
import yaml

from gibbsmin import strict_yaml
from gibbsmin.strict_yaml import DEEPEST_NESTING, parse, parse_file


@pytest.fixture(params=["C parser", "Python parser"])
def either_parser(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> None:
    """PyYAML may have been built without its C parser; both must read alike."""
    if request.param == "Python parser":
        monkeypatch.setattr(strict_yaml, "_LOADER", yaml.SafeLoader)


def faults(text: str) -> list[str]:
    return [str(fault) for fault in parse(text, "f.yaml").faults]


@pytest.mark.usefixtures("either_parser")
@pytest.mark.parametrize(
    ("text", "value"),
    [  # YAML 1.2.2, section 10.3.2, core schema; the words of YAML 1.1 below the line stay text
        ("12", 12),
        ("-3", -3),
        ("+7", 7),
        ("0.5", 0.5),
        (".5", 0.5),
        ("1e5", 1e5),
        ("1E-05", 1e-5),
        ("6.", 6.0),
        (".inf", math.inf),
        ("-.inf", -math.inf),
        ("true", True),
        ("False", False),
        ("null", None),
        ("~", None),
        ("''", ""),
        ("'12'", "12"),
        ('"true"', "true"),
        ("!!str 12", "12"),
        ("NO", "NO"),
        ("No", "No"),
        ("yes", "yes"),
        ("on", "on"),
        ("1:30", "1:30"),
        ("2024-01-01", "2024-01-01"),
        ("7732-18-5", "7732-18-5"),
        ("0x1F", "0x1F"),
        ("1_000", "1_000"),
        ("-", [None]),
    ],
)
def test_plain_values_follow_yaml_1_2(text: str, value: object) -> None:
    document = parse(f"a: {text}" if text != "-" else "a:\n-")
    assert document.faults == ()
    assert document.data == {"a": value}
    assert type(document.data["a"]) is type(value)


def test_not_a_number_is_read_as_such() -> None:
    assert math.isnan(parse("a: .nan").data["a"])


def test_keys_are_always_text() -> None:
    assert parse("{NO: 1, 1: 2, true: 3, ~: 4}").data == {"NO": 1, "1": 2, "true": 3, "~": 4}


@pytest.mark.usefixtures("either_parser")
def test_positions_of_values_and_keys() -> None:
    document = parse("title: map\nfeed:\n  - {CH4: 1.5,\n     H2O: 3}\n", "plant.yaml")
    assert document.positions[()] == (1, 1)
    assert document.positions["title",] == (1, 8)
    assert document.positions["feed", 0, "CH4"] == (3, 11)
    assert document.positions["feed", 0, "H2O"] == (4, 11)
    assert document.key_positions["feed", 0, "H2O"] == (4, 6)
    assert str(document.fault(("feed", 0, "H2O"), "too much")) == "plant.yaml:4:11: too much"
    assert str(document.fault(("feed", 0, "H2O"), "odd", of_key=True)) == "plant.yaml:4:6: odd"


def test_a_missing_value_is_placed_at_what_encloses_it() -> None:
    document = parse("feed:\n  gas: {CH4: 1}\n", "plant.yaml")
    assert document.position(("feed", "gas", "temperature", "unit")) == (2, 8)
    assert str(parse("", "empty.yaml").fault((), "nothing here")) == "empty.yaml: nothing here"


def test_lines_of_an_excerpt_are_those_of_its_file() -> None:
    document = parse("- name: X\n  name: Y\n", "long.yaml", first_line=41)
    assert document.positions[0, "name"] == (41, 9)
    assert [str(fault) for fault in document.faults] == [
        "long.yaml:42:3: the key 'name' is written twice (first on line 41)"
    ]


@pytest.mark.usefixtures("either_parser")
@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("a: 1\nb: 2\na: 3", "f.yaml:3:1: the key 'a' is written twice (first on line 1)"),
        ("a: {x: 1, x: 2}", "f.yaml:1:11: the key 'x' is written twice (first on line 1)"),
        ("a: &one 1", "f.yaml:1:4: the anchor &one is not read; write the value out"),
        ("a: !!python/object:os.system x", "f.yaml:1:4: the tag !!python/object:os.system is not read"),
        ("a: !!float 1", "f.yaml:1:4: the tag !!float is not read; remove it"),
        ("a: !mine {b: 1}", "f.yaml:1:4: the tag !mine is not read; remove it"),
        ("? [1, {q: [r]}]\n: 3", "f.yaml:1:3: a key must be text, not a list or a mapping"),
        ("a: 1\n---\nb: 2", "f.yaml:2:1: a file holds one document; remove this '---'"),
        ("a: 1e999", "f.yaml:1:4: the number 1e999 is too large"),
        (f"a: {'9' * 5000}", "f.yaml:1:4: a whole number of 5000 digits is too long"),
        ("a: b\x07", "f.yaml:1:5: a control character that YAML does not allow"),
        ("a: [1, 2\nb: 3", "f.yaml:2:2: not readable as YAML: "),
        ("a: 'open", "f.yaml:1:"),
    ],
)
def test_a_fault_is_told_with_its_place(text: str, expected: str) -> None:
    found = faults(text)
    assert len(found) == 1
    assert found[0].startswith(expected)


def test_all_faults_are_told_at_once_and_the_rest_is_read() -> None:
    document = parse("a: 1\na: 2\nb: &x [1]\nc: *x\nd: 4\n", "f.yaml")
    assert [(fault.line, fault.column) for fault in document.faults] == [(2, 1), (3, 4), (4, 4)]
    assert document.data == {"a": 1, "b": [1], "c": None, "d": 4}


def test_aliases_that_would_expand_to_a_billion_values_are_refused() -> None:
    lines = ["a0: &a0 [x, x, x, x, x, x, x, x, x, x]"]
    lines += [f"a{n}: &a{n} [{', '.join([f'*a{n - 1}'] * 10)}]" for n in range(1, 10)]
    document = parse("\n".join(lines))
    assert len(document.faults) == 10 + 90
    assert document.data["a9"] == [None] * 10


@pytest.mark.usefixtures("either_parser")
@pytest.mark.parametrize("opening", ["[", "{a: ", "- "])
def test_deep_nesting_is_a_fault_not_a_crash(opening: str) -> None:
    document = parse(opening * 20_000)
    assert document.data is None
    assert len(document.faults) == 1
    assert "nest" in document.faults[0].message


def test_nesting_up_to_the_limit_is_read() -> None:
    document = parse("[" * DEEPEST_NESTING + "]" * DEEPEST_NESTING)
    assert document.faults == ()
    value, depth = document.data, 0
    while isinstance(value, list):
        value, depth = (value[0] if value else None), depth + 1
    assert depth == DEEPEST_NESTING


def test_a_file_that_is_not_utf_8_says_where(tmp_path: Path) -> None:
    path = tmp_path / "latin.yaml"
    path.write_bytes("a: 1\nb: caf\u00e9\n".encode("latin-1"))
    (fault,) = parse_file(path, shown_as="latin.yaml").faults
    assert str(fault) == "latin.yaml:2:7: the file is not UTF-8 text here"


def test_a_byte_order_mark_is_ignored(tmp_path: Path) -> None:
    path = tmp_path / "bom.yaml"
    path.write_bytes(b"\xef\xbb\xbfa: 1\n")
    assert parse_file(path).data == {"a": 1}


def test_random_bytes_of_yaml_never_raise() -> None:
    random_numbers = random.Random(20_02)
    letters = "ab:-[]{},&*!?|>'\"#%@` \n\t1.e~"
    for _ in range(3000):
        text = "".join(random_numbers.choices(letters, k=random_numbers.randrange(1, 40)))
        document = parse(text, "noise.yaml")
        assert (
            document.faults
            or document.data is None
            or isinstance(document.data, str | int | float | list | dict)
        )
