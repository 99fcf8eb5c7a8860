"""Reading species records: what a record may say, and every fault in one message."""

from __future__ import annotations

import copy
import pickle
from pathlib import Path
from typing import Any

import pytest

from gibbsmin.errors import Fault, SpeciesDataError, UnknownSpeciesError
from gibbsmin.species import Species, read_file, read_species, standard_library
from gibbsmin.strict_yaml import Document, parse

GOOD = """\
source:
  citation: Works data sheet 7
  gas_constant: 8.31446
  reference_pressure: 101325
species:
- name: XeF2
  formula: XeF2
  composition: {Xe: 1, F: 2}
  state: g
  aliases: [xenon difluoride]
  cas: 13709-36-9
  formation_enthalpy: -107000
  forms:
  - state: g
    source: estimated
    model: NASA-7
    intervals:
    - range: [250, 1000]
      heat_capacity: [6.5, 1e-3, 0, 0, 0]
      integration: [-14800, 1.2]
    - range: [1000, 3000]
      heat_capacity: [7.5, 0, 0, 0, 0]
      integration: [-15300, -4.7]
"""


def read(text: str) -> tuple[list[Species], list[str]]:
    document = parse(text, "own.yaml")
    species, faults = read_species(document)
    return species, [str(fault) for fault in (*document.faults, *faults)]


def test_a_record_becomes_a_species() -> None:
    (species,), faults = read(GOOD)
    assert faults == []
    assert species.name == "XeF2"
    assert species.composition == {"Xe": 1.0, "F": 2.0}
    assert (species.charge, species.state, species.radical) == (0, "g", False)
    assert (species.gas_constant, species.reference_pressure) == (8.31446, 101325.0)
    assert species.molar_mass == pytest.approx(0.169289, rel=1e-5)  # Xe 131.293 + 2 F 18.998 (IUPAC 2021)
    assert (species.lower, species.upper) == (250.0, 3000.0)
    assert [interval.model for interval in species.forms[0].intervals] == ["NASA-7", "NASA-7"]
    assert species.forms[0].intervals[0].nine == (0.0, 0.0, 6.5, 1e-3, 0.0, 0.0, 0.0, -14800.0, 1.2)
    assert species.source == "Works data sheet 7 [estimated]"
    assert species.formation_enthalpy_uncertainty is None
    assert species.critical_temperature is None


def test_a_radical_is_told_by_its_electrons_unless_the_record_says() -> None:
    def radical(formula: str, composition: str, mark: str = "") -> bool:
        text = GOOD.replace("XeF2", formula).replace("{Xe: 1, F: 2}", composition)
        (species,), faults = read(text.replace("  state: g\n  aliases", f"  state: g\n{mark}  aliases"))
        assert faults == []
        return species.radical

    assert radical("XeF", "{Xe: 1, F: 1}")
    assert not radical("XeF", "{Xe: 1, F: 1}", "  radical: false\n")
    assert not radical("XeF4", "{Xe: 1, F: 4}")
    assert radical("CBr2", "{C: 1, Br: 2}")


@pytest.mark.parametrize(
    ("old", "new", "place", "message"),
    [
        ("  state: g\n  aliases", "  state: gas\n  aliases", "9:10", "expected g or condensed, found 'gas'"),
        ("  cas: 13709-36-9", "  cas: 13709-36-8", "11:8", "'13709-36-8' is no CAS number"),
        ("  cas:", "  cass:", "11:3", "unknown key 'cass'; did you mean 'cas'?"),
        ("formula: XeF2", "formula: XeF4", "7:12", "XeF4 holds Xe 1 F 4, the composition says Xe 1 F 2"),
        ("formula: XeF2", "formula: XeF2+", "7:12", "has the charge +1, the key charge says +0"),
        ("formula: XeF2", "formula: XeF2(g)", "7:12", "the state belongs under the key state"),
        ("formula: XeF2", "formula: Xef2", "7:12", "cannot read the formula 'Xef2'"),
        ("{Xe: 1, F: 2}", "{Xq: 1, F: 2}", "8:17", "'Xq' is no element symbol"),
        ("{Xe: 1, F: 2}", "{Xe: 1, F: 0}", "8:27", "expected a number above 0, found 0"),
        ("{Xe: 1, F: 2}", "[Xe, F]", "8:16", "expected element symbols with counts, found a list of 2"),
        ("formation_enthalpy: -107000", "formation_enthalpy: low", "12:23", "expected a number, found 'low'"),
        ("formation_enthalpy: -107000", "formation_enthalpy: .nan", "12:23", "expected a number, found nan"),
        ("formation_enthalpy: -107000", "note: x", "6:3", "the key 'formation_enthalpy' is missing"),
        ("    source: estimated\n", "", "14:5", "the key 'source' is missing"),
        ("source: estimated", "source: ''", "15:13", "expected text, found ''"),
        ("model: NASA-7", "model: NASA-8", "16:12", "expected NASA-9 or NASA-7, found 'NASA-8'"),
        ("[6.5, 1e-3, 0, 0, 0]", "[6.5]", "19:22", "expected 5 numbers, found a list of 1"),
        (
            "range: [250, 1000]",
            "range: [1000, 250]",
            "18:14",
            "two rising temperatures above 0 K, found 1000, 250",
        ),
        ("range: [250, 1000]", "range: [0, 1000]", "18:14", "two rising temperatures above 0 K"),
        (
            "range: [1000, 3000]",
            "range: [900, 3000]",
            "21:14",
            "begins at 900 K where the interval before it ends",
        ),
        ("range: [1000, 3000]", "range: [1000.5, 3000]", "21:14", "intervals of one form must join"),
        (
            "gas_constant: 8.31446",
            "gas_constant: 1.98720",
            "3:17",
            "1.9872 is not the gas constant in J/(mol K)",
        ),
        ("reference_pressure: 101325", "reference_pressure: 0", "4:23", "expected a number above 0, found 0"),
        ("  citation: Works data sheet 7\n", "", "2:3", "the key 'citation' is missing"),
        ("[xenon difluoride]", "[xenon difluoride, Xenon-Difluoride]", "10:31", "is in the list twice"),
        ("  aliases:", "  charge: one\n  aliases:", "10:11", "expected a whole number, found 'one'"),
        ("  aliases:", "  radical: maybe\n  aliases:", "10:12", "expected true or false, found 'maybe'"),
        ("  aliases:", "  molar_mass: 150\n  aliases:", "10:15", "which gives 169.29 g/mol"),
        (
            "  aliases:",
            "  state: g\n  aliases:",
            "10:3",
            "the key 'state' is written twice (first on line 9)",
        ),
        ("species:", "units: {temperature: degF}\nspecies:", "5:8", "only these units are read"),
    ],
)
def test_a_fault_is_told_with_its_place(old: str, new: str, place: str, message: str) -> None:
    assert old in GOOD
    _, faults = read(GOOD.replace(old, new, 1))
    assert len(faults) == 1, faults
    assert faults[0].startswith(f"own.yaml:{place}: ")
    assert message in faults[0]


def test_all_faults_come_in_one_message(tmp_path: Path) -> None:
    path = tmp_path / "own.yaml"
    wrong = (
        GOOD.replace("state: g\n  aliases", "state: gas\n  aliases")
        .replace("cas: 13709-36-9", "cas: 1")
        .replace("range: [1000, 3000]", "range: [3000, 1000]")
        .replace("[-15300, -4.7]", "[-15300]")
    )
    path.write_text(wrong, encoding="utf-8")
    with pytest.raises(SpeciesDataError) as caught:
        read_file(path, shown_as="own.yaml")
    assert [(fault.line, fault.column) for fault in caught.value.faults] == [
        (9, 10),
        (11, 8),
        (21, 14),
        (23, 20),
    ]
    assert all(fault.file == "own.yaml" for fault in caught.value.faults)
    assert str(caught.value).count("\n") == 3
    assert pickle.loads(pickle.dumps(caught.value)).faults == caught.value.faults


def test_a_species_named_twice_in_a_file_is_a_fault() -> None:
    record = GOOD[GOOD.index("- name") :]
    species, faults = read(GOOD + record)
    assert len(species) == 1
    assert faults == ["own.yaml:24:9: XeF2 is in the list twice (entries 1, 2)"]


@pytest.mark.parametrize(
    ("data", "message"),
    [
        (None, "expected a mapping with the keys source, species; found nothing"),
        ([], "expected a mapping with the keys source, species; found a list of 0"),
        ({"species": []}, "the key 'source' is missing"),
        ({"source": 3, "species": []}, "expected a mapping with the keys citation"),
        ({"source": {}, "species": {}}, "the key 'gas_constant' is missing"),
    ],
)
def test_things_that_are_no_species_file(data: Any, message: str) -> None:
    species, faults = read_species(Document(data, "x.yaml"))
    assert species == []
    assert any(message in str(fault) for fault in faults)


def test_a_section_of_another_file_is_read_with_its_places() -> None:
    section = "".join(f"  {line}\n" for line in GOOD.splitlines())
    document = parse(
        f"title: plant\nown species:\n{section}".replace("cas: 13709-36-9", "cas: 5"), "plant.yaml"
    )
    species, faults = read_species(document, ("own species",))
    assert species == []
    assert [str(fault)[:16] for fault in faults] == ["plant.yaml:13:10"]


CONDENSED = """\
source: {citation: Works data sheet 8, gas_constant: 8.31446, reference_pressure: 100000}
species:
- name: XeF2(cd)
  formula: XeF2
  composition: {Xe: 1, F: 2}
  state: condensed
  formation_enthalpy: -162000
  forms:
  - state: cr
    label: alpha
    source: estimated
    intervals: [{range: [200, 350], heat_capacity: [0, 0, 9, 0, 0, 0, 0], integration: [-22000, -40]}]
  - state: cr
    label: beta
    source: estimated
    intervals: [{range: [350, 402], heat_capacity: [0, 0, 9.5, 0, 0, 0, 0], integration: [-22000, -42]}]
  - state: l
    source: estimated
    intervals: [{range: [402, 600], heat_capacity: [0, 0, 12, 0, 0, 0, 0], integration: [-21000, -54]}]
"""


def test_a_condensed_substance_keeps_its_forms() -> None:
    (species,), faults = read(CONDENSED)
    assert faults == []
    assert [form.description for form in species.forms] == ["crystal, alpha", "crystal, beta", "liquid"]
    assert species.form_names == ("XeF2(alpha)", "XeF2(beta)", "XeF2(l)")
    assert species.only("l").forms == species.forms[2:]
    assert species.only("s").forms == species.only("cr").forms == species.forms[:2]
    assert species.only("Beta").name == "XeF2(beta)"
    with pytest.raises(UnknownSpeciesError, match=r"did you mean XeF2\(alpha\), XeF2\(beta\), XeF2\(l\)"):
        species.only("gamma")


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("state: condensed", "state: g", "a gas has one form, found 3"),
        ("- state: l", "- state: g", "expected cr or l, found 'g'"),
        ("label: beta", "label: alpha", "a second form crystal, alpha; give each form a label of its own"),
        ("[350, 402]", "[150, 402]", "forms must follow each other by rising temperature"),
        ("[402, 600]", "[201, 600]", "forms must follow each other by rising temperature"),
        ("[200, 350]", "[200, 502]", "forms must follow each other by rising temperature"),
    ],
)
def test_faults_of_forms(old: str, new: str, message: str) -> None:
    assert old in CONDENSED
    _, faults = read(CONDENSED.replace(old, new, 1))
    assert any(message in fault for fault in faults), faults


def test_polymorphs_over_one_range_are_no_forms_of_one_entry() -> None:
    wide = (
        CONDENSED.replace("[200, 350]", "[200, 510]")
        .replace("[350, 402]", "[355, 520]")
        .replace("[402", "[520")
    )
    _, faults = read(wide)
    assert len(faults) == 1
    assert "more than 150 K; independent polymorphs are entries of their own" in faults[0]


def test_a_species_survives_copying_and_pickling() -> None:
    for name in ("CH4", "Fe(cd)", "e-"):
        species = standard_library().find(name)
        assert pickle.loads(pickle.dumps(species)) == species
        assert copy.deepcopy(species) == species
        assert hash(copy.deepcopy(species)) == hash(species)


def test_a_gas_has_no_forms_to_choose() -> None:
    with pytest.raises(UnknownSpeciesError):
        standard_library().find("CH4").only("l")


def test_faults_of_plain_data_need_no_file() -> None:
    _, faults = read_species(Document({"source": {}, "species": [{}]}))
    assert all(isinstance(fault, Fault) and fault.file == "" and fault.line is None for fault in faults)
    assert len(faults) == 3 + 6
