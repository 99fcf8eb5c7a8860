"""The shipped species files: form, index, and what every record must satisfy."""

from __future__ import annotations

import json
import re
from collections import Counter
from collections.abc import Iterator
from functools import cache
from pathlib import Path
from typing import Any

import jsonschema
import pytest

import gibbsmin.species
from gibbsmin.errors import SpeciesDataError
from gibbsmin.shipped_files import species_data_folder
from gibbsmin.species import IndexEntry, Species, standard_library
from gibbsmin.species.build_index import index_text
from gibbsmin.species.elements import hill_order, molar_mass
from gibbsmin.species.radicals import REACTIVE, STABLE, has_odd_electron, is_radical
from gibbsmin.species.record import plain_words
from gibbsmin.species.record_store import INDEX_FILE
from gibbsmin.strict_yaml import parse_file

FOLDER = species_data_folder()
SCHEMA = json.loads((Path(gibbsmin.species.__file__).parent / "species_file.schema.json").read_text("utf-8"))


@cache
def files() -> dict[str, Any]:
    """Plain data of every file by its path within the folder."""
    found = {}
    for path in sorted(FOLDER.glob("*/*.yaml")):
        document = parse_file(path)
        assert document.faults == (), path
        found[path.relative_to(FOLDER).as_posix()] = document.data
    return found


@cache
def all_species() -> tuple[Species, ...]:
    library = standard_library()
    return tuple(library.find(entry.name) for entry in library.entries)


def raw_records() -> Iterator[dict[str, Any]]:
    for data in files().values():
        yield from data["species"]


def test_every_file_satisfies_the_schema() -> None:
    validator = jsonschema.Draft202012Validator(SCHEMA)
    jsonschema.Draft202012Validator.check_schema(SCHEMA)
    wrong = {path: error.message for path, data in files().items() for error in validator.iter_errors(data)}
    assert wrong == {}


@pytest.mark.parametrize(
    "change",
    [
        {"state": "aq"},
        {"charges": 1},
        {"composition": {"ch": 1}},
        {"cas": "74828"},
        {"forms": []},
        {"molar_mass": -1},
        {"aliases": ["a", "a"]},
    ],
)
def test_the_schema_refuses_a_wrong_record(change: dict[str, Any]) -> None:
    data = files()["gases/C-H.yaml"]
    wrong = {**data, "species": [{**data["species"][0], **change}]}
    assert not jsonschema.Draft202012Validator(SCHEMA).is_valid(wrong)


def test_the_schema_counts_coefficients_by_model() -> None:
    data = files()["gases/C-H.yaml"]
    record = data["species"][0]
    (form,) = record["forms"]
    short = {**form, "intervals": [{**form["intervals"][0], "heat_capacity": [1.0] * 5}]}
    valid = jsonschema.Draft202012Validator(SCHEMA).is_valid
    assert not valid({**data, "species": [{**record, "forms": [short]}]})
    assert valid({**data, "species": [{**record, "forms": [{**short, "model": "NASA-7"}]}]})


def test_the_index_matches_the_files() -> None:
    built = index_text(FOLDER)  # raises if any record has a fault or two species share a name
    assert built == (FOLDER / INDEX_FILE).read_text(encoding="utf-8")


def test_the_index_builder_tells_every_fault(tmp_path: Path) -> None:
    (tmp_path / "gases").mkdir()
    text = (FOLDER / "gases" / "H-O.yaml").read_text(encoding="utf-8")
    (tmp_path / "gases" / "H-O.yaml").write_text(
        text.replace("state: g\n", "state: gas\n", 2), encoding="utf-8"
    )
    (tmp_path / "gases" / "twin.yaml").write_text(text, encoding="utf-8")
    (tmp_path / "gases" / "again.yaml").write_text(text, encoding="utf-8")
    with pytest.raises(SpeciesDataError) as caught:
        index_text(tmp_path)
    assert sum("expected g or condensed" in str(fault) for fault in caught.value.faults) >= 1
    assert any("'H2O' means several species" in str(fault) for fault in caught.value.faults)


def test_records_read_by_the_index_equal_those_of_the_whole_file() -> None:
    from gibbsmin.species import read_file

    for path in ("gases/C-H-O.yaml", "condensed/Fe.yaml", "gases/electron.yaml", "condensed/Fe-O.yaml"):
        for species in read_file(FOLDER / path):
            assert standard_library().find(species.name) == species


def test_index_entries_equal_their_records() -> None:
    for entry, species in zip(standard_library().entries, all_species(), strict=True):
        expected = IndexEntry.of(species)
        assert tuple(entry._replace(aliases=tuple(entry.aliases))) == tuple(expected)


def test_counts_of_the_source() -> None:
    # NASA/TP-2002-211556: 2,023 records, 1,262 of them gases; the others are 338 substances.
    states = Counter(species.state for species in all_species())
    assert states == {"g": 1262, "condensed": 338}


def test_a_file_holds_exactly_the_species_of_its_elements() -> None:
    for path, data in files().items():
        folder, stem = path.removesuffix(".yaml").split("/")
        for record in data["species"]:
            assert "-".join(hill_order(record["composition"])) == ("" if stem == "electron" else stem), path
            assert folder == ("gases" if record["state"] == "g" else "condensed"), path


def test_no_file_names_clash_without_case() -> None:
    names = [path.casefold() for path in files()]
    assert len(set(names)) == len(names)


def test_every_file_states_the_basis_of_its_source() -> None:
    for path, data in files().items():
        assert data["source"]["gas_constant"] == 8.314510, path  # NASA/TP-2002-211556, p. 2
        assert data["source"]["reference_pressure"] == 1e5, path
        assert "NASA/TP-2002-211556" in data["source"]["citation"], path
        assert data["units"]["enthalpy"] == "J/mol", path


def test_molar_masses_of_the_source_follow_from_iupac_2021_within_2e_4() -> None:
    # The largest difference is that of sulfur: 32.065 then (IUPAC 1999), 32.06 abridged now.
    worst = max(
        (
            abs(record["molar_mass"] / 1000 / molar_mass(record["composition"], record["charge"]) - 1),
            record["name"],
        )
        for record in raw_records()
        if "molar_mass" in record
    )
    assert worst[0] < 1.6e-4
    assert worst[1].startswith("S")
    without = [record["name"] for record in raw_records() if "molar_mass" not in record]
    assert without == ["Fe0.947O(cd)"]  # the source computes it from Fe 0.95


def test_names_and_aliases_mean_one_species_each() -> None:
    meaning: dict[str, set[str]] = {}
    for species in all_species():
        for word in (species.name, *map(plain_words, species.aliases)):
            meaning.setdefault(word, set()).add(species.name)
    assert {word: names for word, names in meaning.items() if len(names) > 1} == {}


def test_a_cas_number_means_one_gas_and_one_substance_at_most() -> None:
    seen = Counter((species.cas, species.state) for species in all_species() if species.cas)
    assert [key for key, count in seen.items() if count > 1] == []


def test_cas_numbers_of_common_species() -> None:
    # CAS registry numbers from memory, common practice on every safety data sheet.
    numbers = {
        "CH4": "74-82-8", "H2O": "7732-18-5", "CO": "630-08-0", "CO2": "124-38-9", "H2": "1333-74-0",
        "N2": "7727-37-9", "O2": "7782-44-7", "NH3": "7664-41-7", "H2S": "7783-06-4", "SO2": "7446-09-5",
        "HCl": "7647-01-0", "CH3OH": "67-56-1", "C2H4": "74-85-1", "C6H6": "71-43-2", "C7H8": "108-88-3",
        "C(gr)": "7782-42-5", "CaO(cd)": "1305-78-8", "CaCO3(cd)": "471-34-1", "Fe2O3(cd)": "1309-37-1",
        "SiO2(cd)": "7631-86-9", "HCN": "74-90-8", "COS": "463-58-1", "CS2": "75-15-0", "NO": "10102-43-9",
    }  # fmt: skip
    assert {name: standard_library().find(name).cas for name in numbers} == numbers


def test_condensed_forms_rise_in_temperature_and_end_in_the_liquid() -> None:
    for species in all_species():
        states = [form.state for form in species.forms]
        if species.state == "g":
            assert states == ["g"], species.name
        else:
            assert "g" not in states, species.name
            assert "l" not in states[:-1], species.name  # nothing freezes on heating


def test_forms_overlap_or_part_only_where_the_readme_says() -> None:
    gaps, overlaps = {}, {}
    for species in all_species():
        for below, above in zip(species.forms, species.forms[1:], strict=False):
            distance = round(above.lower - below.upper, 6)
            if distance > 0:
                gaps[species.name] = distance
            elif distance < 0:
                overlaps[species.name] = -distance
    assert gaps == {"Cd(cd)": 0.008, "In(cd)": 0.004, "Sn(cd)": 0.008, "Mg(OH)2(cd)": 100.0}
    assert overlaps == {"LiNO3(cd)": 1.0, "Mg2SiO4(cd)": 1.0, "SiC(cd)": 2.0, "SrCl2(cd)": 90.0}


def test_radical_marks_follow_the_rule() -> None:
    departures = [
        species.name
        for species in all_species()
        if species.radical
        != (species.state == "g" and is_radical(species.formula, species.composition, species.charge))
    ]
    assert departures == ["C2H2 (vinylidene)"]  # shares its formula with acetylene


def test_the_radical_lists_name_species_of_the_data() -> None:
    formulas = {species.formula for species in all_species() if species.state == "g"}
    assert formulas >= REACTIVE
    assert formulas >= STABLE
    odd = {
        species.formula
        for species in all_species()
        if has_odd_electron(species.composition, species.charge) and species.state == "g"
    }
    assert not odd & REACTIVE  # the list is for those that counting electrons does not find
    assert odd >= STABLE - {"Cu", "Ag"}  # whose open d shells the count leaves out anyway


def test_molecules_without_radicals_are_what_an_engineer_expects() -> None:
    names = {species.name for species in standard_library().gases(["C", "H", "O", "N", "S"], radicals=False)}
    assert names >= {
        "H2", "O2", "N2", "CO", "CO2", "H2O", "CH4", "C2H2 (acetylene)", "C2H4", "C2H6", "NH3", "HCN", "NO", "NO2",
        "N2O", "O3", "H2S", "SO2", "SO3", "COS", "CS2", "S2", "S8", "HNO3", "H2O2", "HCHO", "CH3OH",
    }  # fmt: skip
    assert not names & {
        "H", "O", "N", "C", "S", "OH", "HO2", "CH", "CH2", "CH3", "NH", "NH2", "CN", "HCO", "C2", "C3", "C2H", "NCO",
        "SH", "SO", "NO3", "C2H5", "C2H2 (vinylidene)",
    }  # fmt: skip


def test_uncertainties_and_critical_constants_are_plausible() -> None:
    with_uncertainty = [species for species in all_species() if species.uncertainty is not None]
    with_critical = [species for species in all_species() if species.critical is not None]
    assert (len(with_uncertainty), len(with_critical)) == (170, 151)
    assert all(species.charge == 0 for species in with_uncertainty)
    for species in with_critical:
        assert 4.0 < (species.critical_temperature or 0.0) < 1800.0, (
            species.name
        )  # helium 5 K, mercury 1764 K
        assert 1e5 < (species.critical_pressure or 0.0) < 2e8, species.name
        assert species.critical is not None
        assert len(species.critical.source) > 20, species.name


@pytest.mark.parametrize(
    ("name", "temperature", "megapascals"),
    [  # IAPWS R2-83 (1992) water; Setzmann & Wagner (1991) methane; Span & Wagner (1996) carbon dioxide
        ("H2O", 647.096, 22.064),
        ("CH4", 190.564, 4.5992),
        ("CO2", 304.1282, 7.3773),
    ],
)
def test_critical_points(name: str, temperature: float, megapascals: float) -> None:
    species = standard_library().find(name)
    assert species.critical_temperature == pytest.approx(temperature, abs=1e-3)
    assert species.critical_pressure == pytest.approx(megapascals * 1e6, rel=1e-4)


def test_uncertainties_equal_those_of_the_reference_library() -> None:
    # Active Thermochemical Tables 1.112, as carried by the package chemicals.
    from chemicals import reaction

    table = reaction.Hfg_ATcT_data
    checked = 0
    for species in all_species():
        if species.state == "g" and species.uncertainty is not None and species.cas in table.index:
            row = table.loc[species.cas]
            assert species.uncertainty.value == row["Hfg"], species.name
            assert species.uncertainty.half_width == row["uncertainty"], species.name
            assert plain_words(str(row["Formula"])).endswith("(g)"), species.name
            checked += 1
    assert checked > 150


def test_the_readme_tells_the_counts() -> None:
    text = re.sub(r"\s+", " ", (FOLDER / "README.md").read_text(encoding="utf-8"))
    species = all_species()
    elements = {symbol for each in species for symbol in each.composition}
    radicals = sum(each.radical for each in species)
    ions = sum(each.charge != 0 for each in species)
    assert f"{len(species):,} species of {len(elements)} elements" in text
    assert f"1,262 gases ({ions} of them ions, {radicals} marked as radicals) and 338 pure condensed" in text
    assert f"{sum(each.cas is not None for each in species)} species, from the identifiers" in text
    assert f"acentric factor** of {sum(each.critical is not None for each in species)} gases" in text
    assert f"reading {len(files())} files" in text
