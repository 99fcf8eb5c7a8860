"""Species as text: complete output where it is short, the facts where it is long."""

from __future__ import annotations

import pytest

from gibbsmin.errors import TemperatureRangeError, UnknownSpeciesError
from gibbsmin.species import standard_library
from gibbsmin.species.listing import DEFAULT_TEMPERATURES, WIDTH, list_species, match_list, record_view

SULFUR = """\
S(cd)
=====
formula                 S
also called             sulfur, brimstone, sulphur
CAS number              7704-34-9
state                   pure condensed substance
atoms                   S 1
molar mass              32.06 g/mol
formation enthalpy      0.000 kJ/mol at 298.15 K
data                    200 to 6000 K
                        crystal, alpha: 200 to 368.3 K
                        crystal, beta: 368.3 to 388.36 K
                        liquid: 388.36 to 6000 K
source                  McBride, Zehe & Gordon, NASA Glenn Coefficients for Calculating
                        Thermodynamic Properties of Individual Species, NASA/TP-2002-211556 (2002)
                        [tpis89: Alpha. Ref-Elm. Gurvich,1989 pt1 p265 pt2 p160.; tpis89: Beta.
                        Ref-Elm. Gurvich,1989 pt1 p265 pt2 p160.; tpis89: Liquid. Ref-Elm.
                        Gurvich,1989 pt1 p265 pt2 p160.]
basis of the source     R = 8.31451 J/(mol K), standard pressure 1 bar

             T            cp             h             s             g
             K     J/(mol K)        kJ/mol     J/(mol K)        kJ/mol
           150       no data
        298.15        22.690         0.000        32.070        -9.562  crystal, alpha
           370        24.808         2.092        38.233       -12.054  crystal, beta
           400        32.369         4.646        44.824       -13.284  liquid

h is relative to the elements in their reference states at 298.15 K; g = h - T s; s at 1 bar.

See also: S"""


def test_a_condensed_record_in_full() -> None:
    # The layout is what is tested; the numbers are those of the records, which other tests check.
    assert list_species("sulfur", temperatures=[150, 298.15, 370, 400]) == SULFUR


def test_a_gas_record_tells_uncertainty_and_critical_point() -> None:
    text = " ".join(record_view(standard_library().find("CH4")).split())
    assert "evaluated elsewhere (-74.534 +/- 0.057) kJ/mol (95 %)" in text
    assert "the record lies -0.066 kJ/mol from it" in text
    assert "Tc = 190.564 K, pc = 45.992 bar, acentric factor 0.01142" in text
    assert "R = 8.31451 J/(mol K), standard pressure 1 bar" in text
    assert "NASA/TP-2002-211556" in text
    for temperature in DEFAULT_TEMPERATURES:
        assert f" {temperature:g} " in text


def test_properties_of_water_vapour_at_25_degrees() -> None:
    # CODATA key values (Cox, Wagman & Medvedev 1989): h -241.826(40) kJ/mol, s 188.835(10) J/(mol K)
    row = next(
        line for line in record_view(standard_library().find("H2O")).splitlines() if "298.15   " in line
    )
    _, _, h, s, g = map(float, row.split())
    assert h == pytest.approx(-241.826, abs=0.040)
    assert s == pytest.approx(188.835, abs=0.010)
    assert g == pytest.approx(h - 298.15 * s / 1000, abs=0.001)


def test_several_matches_are_a_list() -> None:
    lines = list_species("C3H6").splitlines()
    assert lines == [
        "name                 state  range / K      also called",
        "C3H6 (propylene)     gas    200 to 6000    propylene, propene",
        "C3H6 (cyclopropane)  gas    200 to 6000    cyclopropane",
        "",
        "2 species",
    ]


def test_marks_of_ions_and_radicals() -> None:
    library = standard_library()
    entries = [entry for entry in library.entries if entry.name in ("OH", "OH-", "CO")]
    text = match_list(entries)
    assert {line.split()[0]: "radical" in line for line in text.splitlines()[1:4]} == {
        "CO": False,
        "OH": True,
        "OH-": False,
    }
    assert " ion" in next(line for line in text.splitlines() if line.startswith("OH-"))
    assert match_list(entries[:1]).endswith("\n1 species")


def test_an_empty_query_lists_everything() -> None:
    assert list_species().endswith("\n1600 species")


def test_relatives_are_named() -> None:
    assert list_species("CaO").endswith("See also: CaO(cd)")
    assert list_species("lime").endswith("See also: CaO")
    assert "HNC" in list_species("HCN").splitlines()[-1]


def test_what_matches_nothing_is_an_error_with_suggestions() -> None:
    with pytest.raises(UnknownSpeciesError, match=r"did you mean CH4 \(methane\)"):
        list_species("metane")


@pytest.mark.parametrize("temperature", [0.0, -5.0, float("nan"), float("inf"), 100.0, 7000.0])
def test_a_temperature_outside_the_data_is_an_error(temperature: float) -> None:
    with pytest.raises(TemperatureRangeError, match="CH4"):
        list_species("CH4", temperatures=[300.0, temperature])


def test_every_record_can_be_shown_within_the_width() -> None:
    library = standard_library()
    for entry in list(library.entries)[::13]:
        text = record_view(library.find(entry.name))
        assert text.startswith(entry.name + "\n")
        assert max(map(len, text.splitlines())) <= WIDTH, entry.name
        assert "nan" not in text.split("source")[1].split("note")[0]
