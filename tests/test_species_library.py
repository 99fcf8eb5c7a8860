"""Looking species up: names, aliases, formulas, isomers, misspellings, additions, and the cost of it."""

from __future__ import annotations

import json
import pickle
import subprocess
import sys
from pathlib import Path
from shutil import copytree
from typing import Any

import pytest

from gibbsmin.errors import AmbiguousSpeciesError, FormulaError, SpeciesDataError, UnknownSpeciesError
from gibbsmin.shipped_files import scenario_folder, species_data_folder
from gibbsmin.species import SpeciesLibrary, library, standard_library

LIBRARY = standard_library()

OWN: dict[str, Any] = {
    "source": {"citation": "Works data sheet 7", "gas_constant": 8.31446, "reference_pressure": 101325},
    "species": [
        {
            "name": "XeF2",
            "formula": "XeF2",
            "composition": {"Xe": 1, "F": 2},
            "state": "g",
            "aliases": ["xenon difluoride", "steam"],
            "formation_enthalpy": -107000.0,
            "forms": [
                {
                    "state": "g",
                    "source": "estimated",
                    "intervals": [
                        {
                            "range": [250, 3000],
                            "heat_capacity": [0, 0, 6.5, 1e-4, 0, 0, 0],
                            "integration": [-14800, 1.2],
                        }
                    ],
                }
            ],
        }
    ],
}


@pytest.mark.parametrize(
    ("query", "name"),
    [
        ("CH4", "CH4"),
        (" CH4 ", "CH4"),
        ("methane", "CH4"),
        ("Methane", "CH4"),
        ("74-82-8", "CH4"),
        ("CO", "CO"),
        ("Co", "Co"),
        ("NO", "NO"),
        ("carbon-dioxide", "CO2"),
        ("carbon_dioxide", "CO2"),
        ("Carbon Dioxide", "CO2"),
        ("sulphur dioxide", "SO2"),
        ("steam", "H2O"),
        ("water", "H2O"),
        ("H2O(g)", "H2O"),
        ("liquid water", "H2O(cd)"),
        ("H2O(l)", "H2O(l)"),
        ("H2O(cr,l)", "H2O(cd)"),
        ("H2O(s)", "H2O(cr)"),
        ("graphite", "C(gr)"),
        ("C(s)", "C(gr)"),
        ("C(cd)", "C(gr)"),
        ("lime", "CaO(cd)"),
        ("CaO", "CaO"),
        ("limestone", "CaCO3(cd)"),
        ("CaCO3", "CaCO3(cd)"),  # no gas of that formula
        ("hematite", "Fe2O3(cd)"),
        ("Fe(gamma)", "Fe(gamma)"),
        ("iron(gamma)", "Fe(gamma)"),
        ("sulphur(l)", "S(l)"),
        ("SiO2(beta-cristobalite)", "SiO2(beta cristobalite)"),
        ("Fe.947O", "Fe0.947O(cd)"),
        ("C2H2", "C2H2 (acetylene)"),  # the other isomer, vinylidene, is a radical
        ("CH3-CH3", "C2H6"),
        ("CH2O", "HCHO"),
        ("butane", "C4H10 (n-butane)"),
        ("R-12", "CF2Cl2"),
        ("e-", "e-"),
        ("electron", "e-"),
        ("heavy water", "D2O"),
        ("NH4+", "NH4+"),
    ],
)
def test_look_up(query: str, name: str) -> None:
    assert LIBRARY.find(query).name == name


def test_the_same_species_is_the_same_object() -> None:
    for queries in (
        ("CH4", "methane", "74-82-8"),
        ("S(l)", "sulfur(l)", "sulphur(l)"),
        ("C(gr)", "C(cr)", "graphite"),
    ):
        assert len({id(LIBRARY.find(query)) for query in queries}) == 1


@pytest.mark.parametrize(
    ("query", "candidates"),
    [
        ("C3H6", {"C3H6 (propylene)", "C3H6 (cyclopropane)"}),
        ("C2H6O", {"C2H5OH", "CH3OCH3"}),
        ("C2H4O", {"C2H4O (ethylene oxide)", "CH3CHO"}),
        ("CHN", {"HCN", "HNC"}),
        ("C3H7", {"C3H7 (n-propyl)", "C3H7 (isopropyl)"}),
        ("7732-18-5", {"H2O", "H2O(cd)"}),
    ],
)
def test_an_ambiguous_query_names_the_candidates(query: str, candidates: set[str]) -> None:
    with pytest.raises(AmbiguousSpeciesError, match="can mean several species; choose one of") as caught:
        LIBRARY.find(query)
    assert set(caught.value.candidates) == candidates
    for name in candidates:
        assert LIBRARY.find(name).name == name
        assert name in str(caught.value)


@pytest.mark.parametrize(
    ("query", "suggestion"),
    [
        ("metane", "CH4 (methane)"),
        ("co2", "CO2"),
        ("c4h10", "C4H10 (n-butane)"),
        ("H20", "H2O"),  # a zero
        ("CH30H", "CH3OH"),
        ("hematit", "Fe2O3(cd) (hematite)"),
        ("ammonnia", "NH3 (ammonia)"),
        ("H2O(gas)", "H2O(cr)"),
        ("Fe(epsilon)", "Fe(gamma)"),
    ],
)
def test_a_misspelling_gets_suggestions(query: str, suggestion: str) -> None:
    with pytest.raises(UnknownSpeciesError) as caught:
        LIBRARY.find(query)
    assert suggestion in caught.value.suggestions
    assert suggestion in str(caught.value)


@pytest.mark.parametrize(
    "query", ["", "  ", "zzzzqq", "H2O(", "(l)", "He2", "C99H99", "\u00b5", "CH4(l)", "x" * 5000]
)
def test_nonsense_is_unknown_not_a_crash(query: str) -> None:
    with pytest.raises(UnknownSpeciesError):
        LIBRARY.find(query)


def test_gases_of_elements() -> None:
    gases = LIBRARY.gases(["C", "H", "O"])
    names = {species.name for species in gases}
    assert {"CO", "CO2", "CH4", "H2O", "H", "OH"} <= names
    assert all(set(species.composition) <= {"C", "H", "O"} for species in gases)
    assert all(species.charge == 0 and species.state == "g" for species in gases)
    assert not {"N2", "D2", "C(gr)", "e-", "OH-"} & names
    assert len(names) == len(gases)


def test_each_option_of_gases_changes_the_list() -> None:
    everything = {species.name for species in LIBRARY.gases(["C", "H"])}
    small = {species.name for species in LIBRARY.gases(["C", "H"], largest_carbon_number=2)}
    stable = {species.name for species in LIBRARY.gases(["C", "H"], radicals=False)}
    charged = {species.name for species in LIBRARY.gases(["C", "H"], ions=True)}
    fewer = {species.name for species in LIBRARY.gases(["C", "H"], exclude=["methane", "C2H2 (acetylene)"])}
    assert everything - small >= {"C3H8", "C6H6"}
    assert all(LIBRARY.find(name).composition.get("C", 0) <= 2 for name in small)
    assert everything - stable >= {"CH3", "H", "C2H5"}
    assert charged - everything >= {"H+", "CH+", "e-"}
    assert everything - fewer == {"CH4", "C2H2 (acetylene)"}


def test_condensed_substances_of_elements() -> None:
    names = {species.name for species in LIBRARY.condensed(["Ca", "C", "O"])}
    assert names == {"Ca(cd)", "CaO(cd)", "CaCO3(cd)", "C(gr)"}
    assert {species.name for species in LIBRARY.condensed(["Ca", "C", "O"], exclude="graphite")} == names - {
        "C(gr)"
    }


def test_wrong_elements_and_exclusions_are_told() -> None:
    with pytest.raises(FormulaError, match="'Xx'"):
        LIBRARY.gases(["C", "Xx"])
    with pytest.raises(FormulaError, match="'CHO'"):  # a text is one symbol, not a list of letters
        LIBRARY.gases("CHO")
    with pytest.raises(UnknownSpeciesError, match="methane"):
        LIBRARY.gases(["C", "H"], exclude=["methan"])


def test_search_ranks_names_before_parts_of_names() -> None:
    assert LIBRARY.search("CO2")[0].name == "CO2"
    assert LIBRARY.search("benzene")[0].name == "C6H6"
    assert {entry.name for entry in LIBRARY.search("C4H8")} >= {"C4H8 (1-butene)", "C4H8 (isobutene)"}
    assert any(entry.name == "CH2Cl2" for entry in LIBRARY.search("chloro"))
    assert LIBRARY.search("no such thing") == []
    assert len(LIBRARY.search("")) == len(LIBRARY) == 1600


def test_own_species_are_added_without_changing_the_standard_library() -> None:
    own = LIBRARY.with_records(OWN)
    assert own.find("xenon difluoride").name == "XeF2"
    assert own.find("XeF2").reference_pressure == 101325.0
    assert own.find("CH4") is LIBRARY.find("CH4")
    assert own.find("steam").name == "XeF2"  # an alias the user gives means the user's species
    assert own.added == ("XeF2",)
    assert "XeF2" in {species.name for species in own.gases(["Xe", "F"])}
    assert "XeF2" not in LIBRARY
    assert LIBRARY.find("steam").name == "H2O"
    with pytest.raises(UnknownSpeciesError):
        LIBRARY.find("xenon difluoride")


def test_own_species_replace_those_of_the_same_name() -> None:
    methane = json.loads(json.dumps(OWN))
    methane["species"][0] |= {"name": "CH4", "formula": "CH4", "composition": {"C": 1, "H": 4}, "aliases": []}
    own = LIBRARY.with_records(methane)
    assert len(own) == len(LIBRARY)
    assert own.find("CH4").formation_enthalpy == -107000.0
    assert (
        own.find("CH4")
        is own.gases(["C", "H"], exclude=[])[[s.name for s in own.gases(["C", "H"])].index("CH4")]
    )
    assert LIBRARY.find("CH4").formation_enthalpy == -74600.0
    again = own.with_records([LIBRARY.find("CH4")])
    assert again.find("CH4").formation_enthalpy == -74600.0


def test_own_species_from_a_file(tmp_path: Path) -> None:
    path = tmp_path / "own.yaml"
    path.write_text(json.dumps(OWN), encoding="utf-8")  # JSON is YAML
    assert LIBRARY.with_file(path).find("XeF2") == LIBRARY.with_records(OWN).find("XeF2")
    path.write_text("species: []\n", encoding="utf-8")
    with pytest.raises(SpeciesDataError, match="the key 'source' is missing"):
        LIBRARY.with_file(path)
    with pytest.raises(FileNotFoundError):
        LIBRARY.with_file(tmp_path / "absent.yaml")


def test_faulty_own_records_are_refused() -> None:
    wrong = json.loads(json.dumps(OWN))
    wrong["species"][0]["composition"] = {"Xe": 1}
    with pytest.raises(SpeciesDataError, match="XeF2 holds Xe 1 F 2, the composition says Xe 1"):
        LIBRARY.with_records(wrong)


def test_an_index_that_does_not_fit_is_noticed(tmp_path: Path) -> None:
    folder = tmp_path / "species_data"
    copytree(species_data_folder(), folder)
    with (folder / "gases" / "C-H.yaml").open("a", encoding="utf-8") as file:
        file.write("# edited\n")
    stale = library._read_library(folder)
    assert stale.find("CO").name == "CO"
    with pytest.raises(SpeciesDataError, match=r"gases/C-H\.yaml: index\.json does not fit this file; run"):
        stale.find("CH4")
    shifted = (folder / "gases" / "C-O.yaml").read_text(encoding="utf-8")
    (folder / "gases" / "C-O.yaml").write_text(
        shifted.replace("name: CO2\n", "name: CO3\n"), encoding="utf-8"
    )
    with pytest.raises(SpeciesDataError, match=r"does not fit"):
        library._read_library(folder).find("CO2")
    (folder / "index.json").write_text("{", encoding="utf-8")
    with pytest.raises(SpeciesDataError, match="not readable; run"):
        library._read_library(folder)
    (folder / "index.json").unlink()
    with pytest.raises(SpeciesDataError, match="is missing; run"):
        library._read_library(folder)


def test_shipped_folders_exist() -> None:
    assert (species_data_folder() / "index.json").is_file()
    assert scenario_folder().is_dir()


def test_errors_survive_pickling() -> None:
    for query in ("metane", "C2H6O"):
        with pytest.raises((UnknownSpeciesError, AmbiguousSpeciesError)) as caught:
            LIBRARY.find(query)
        assert str(pickle.loads(pickle.dumps(caught.value))) == str(caught.value)


COLD_START = """
from gibbsmin.species import standard_library
library = standard_library()
for query in "CH4 water hydrogen CO 124-38-9 oxygen N2 graphite ammonia SO2".split():
    library.find(query)
import sys
print("numpy" in sys.modules)
"""


def test_look_ups_from_a_cold_start_need_no_numpy() -> None:
    output = subprocess.run([sys.executable, "-c", COLD_START], capture_output=True, text=True, check=True)
    assert output.stdout.strip() == "False"


def test_a_library_is_made_of_what_it_is_given() -> None:
    entries = [entry for entry in LIBRARY.entries if entry.name in ("CO", "CO2")]
    small = SpeciesLibrary(entries, LIBRARY._records, {})
    assert [species.name for species in small.gases(["C", "O"])] == ["CO", "CO2"]
    with pytest.raises(UnknownSpeciesError):
        small.find("CH4")
