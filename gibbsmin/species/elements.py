"""The chemical elements: symbols, atomic numbers and standard atomic weights.

Atomic weights: IUPAC 2021, abridged values for the elements whose weight is an interval (Prohaska et al.,
Pure Appl. Chem. 94 (2022) 573). Elements without a standard weight carry the mass number of a long-lived
isotope. Deuterium, which the species data treat as an element of its own, and the electron: AME 2020 (Wang et
al., Chinese Phys. C 45 (2021) 030003) and CODATA 2018.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping

__all__ = [
    "ATOMIC_NUMBERS",
    "ATOMIC_WEIGHTS",
    "ELECTRON_MASS",
    "hill_formula",
    "hill_order",
    "molar_mass",
    "sort_elements",
]

ELECTRON_MASS = 5.48579909065e-4  # g/mol, measured

# fmt: off
_ELEMENTS: tuple[tuple[str, int, float], ...] = (
    ("H", 1, 1.008),
    ("D", 1, 2.01410177784),
    ("He", 2, 4.002602),
    ("Li", 3, 6.94),
    ("Be", 4, 9.0121831),
    ("B", 5, 10.81),
    ("C", 6, 12.011),
    ("N", 7, 14.007),
    ("O", 8, 15.999),
    ("F", 9, 18.998403162),
    ("Ne", 10, 20.1797),
    ("Na", 11, 22.98976928),
    ("Mg", 12, 24.305),
    ("Al", 13, 26.9815384),
    ("Si", 14, 28.085),
    ("P", 15, 30.973761998),
    ("S", 16, 32.06),
    ("Cl", 17, 35.45),
    ("Ar", 18, 39.95),
    ("K", 19, 39.0983),
    ("Ca", 20, 40.078),
    ("Sc", 21, 44.955907),
    ("Ti", 22, 47.867),
    ("V", 23, 50.9415),
    ("Cr", 24, 51.9961),
    ("Mn", 25, 54.938043),
    ("Fe", 26, 55.845),
    ("Co", 27, 58.933194),
    ("Ni", 28, 58.6934),
    ("Cu", 29, 63.546),
    ("Zn", 30, 65.38),
    ("Ga", 31, 69.723),
    ("Ge", 32, 72.63),
    ("As", 33, 74.921595),
    ("Se", 34, 78.971),
    ("Br", 35, 79.904),
    ("Kr", 36, 83.798),
    ("Rb", 37, 85.4678),
    ("Sr", 38, 87.62),
    ("Y", 39, 88.905838),
    ("Zr", 40, 91.224),
    ("Nb", 41, 92.90637),
    ("Mo", 42, 95.95),
    ("Tc", 43, 98.0),
    ("Ru", 44, 101.07),
    ("Rh", 45, 102.90549),
    ("Pd", 46, 106.42),
    ("Ag", 47, 107.8682),
    ("Cd", 48, 112.414),
    ("In", 49, 114.818),
    ("Sn", 50, 118.71),
    ("Sb", 51, 121.76),
    ("Te", 52, 127.6),
    ("I", 53, 126.90447),
    ("Xe", 54, 131.293),
    ("Cs", 55, 132.90545196),
    ("Ba", 56, 137.327),
    ("La", 57, 138.90547),
    ("Ce", 58, 140.116),
    ("Pr", 59, 140.90766),
    ("Nd", 60, 144.242),
    ("Pm", 61, 145.0),
    ("Sm", 62, 150.36),
    ("Eu", 63, 151.964),
    ("Gd", 64, 157.25),
    ("Tb", 65, 158.925354),
    ("Dy", 66, 162.5),
    ("Ho", 67, 164.930329),
    ("Er", 68, 167.259),
    ("Tm", 69, 168.934219),
    ("Yb", 70, 173.045),
    ("Lu", 71, 174.9668),
    ("Hf", 72, 178.486),
    ("Ta", 73, 180.94788),
    ("W", 74, 183.84),
    ("Re", 75, 186.207),
    ("Os", 76, 190.23),
    ("Ir", 77, 192.217),
    ("Pt", 78, 195.084),
    ("Au", 79, 196.96657),
    ("Hg", 80, 200.592),
    ("Tl", 81, 204.38),
    ("Pb", 82, 207.2),
    ("Bi", 83, 208.9804),
    ("Po", 84, 209.0),
    ("At", 85, 210.0),
    ("Rn", 86, 222.0),
    ("Fr", 87, 223.0),
    ("Ra", 88, 226.0),
    ("Ac", 89, 227.0),
    ("Th", 90, 232.0377),
    ("Pa", 91, 231.03588),
    ("U", 92, 238.02891),
    ("Np", 93, 237.0),
    ("Pu", 94, 244.0),
    ("Am", 95, 243.0),
    ("Cm", 96, 247.0),
    ("Bk", 97, 247.0),
    ("Cf", 98, 251.0),
    ("Es", 99, 252.0),
    ("Fm", 100, 257.0),
    ("Md", 101, 258.0),
    ("No", 102, 259.0),
    ("Lr", 103, 262.0),
    ("Rf", 104, 261.0),
    ("Db", 105, 262.0),
    ("Sg", 106, 266.0),
    ("Bh", 107, 264.0),
    ("Hs", 108, 277.0),
    ("Mt", 109, 268.0),
    ("Ds", 110, 281.0),
    ("Rg", 111, 272.0),
    ("Cn", 112, 285.0),
    ("Nh", 113, 286.0),
    ("Fl", 114, 289.0),
    ("Mc", 115, 289.0),
    ("Lv", 116, 293.0),
    ("Ts", 117, 294.0),
    ("Og", 118, 294.0),
)
# fmt: on

ATOMIC_NUMBERS: dict[str, int] = {symbol: number for symbol, number, _ in _ELEMENTS}
ATOMIC_WEIGHTS: dict[str, float] = {symbol: weight for symbol, _, weight in _ELEMENTS}  # g/mol


def molar_mass(composition: Mapping[str, float], charge: int = 0) -> float:
    """Molar mass [kg/mol] of a species; a positive ion is lighter by its missing electrons.

    Raises KeyError for a symbol that is no element.
    """
    atoms = sum(count * ATOMIC_WEIGHTS[symbol] for symbol, count in composition.items())
    return (atoms - charge * ELECTRON_MASS) / 1000.0


def hill_order(symbols: Iterable[str]) -> list[str]:
    """Distinct element symbols in Hill order: carbon, then hydrogen, then the alphabet; without carbon the
    alphabet alone (Hill, J. Am. Chem. Soc. 22 (1900) 478)."""
    distinct = sorted(set(symbols))
    if "C" not in distinct:
        return distinct
    first = [symbol for symbol in ("C", "H") if symbol in distinct]
    return first + [symbol for symbol in distinct if symbol not in first]


def hill_formula(composition: Mapping[str, float]) -> str:
    """The sum formula in Hill order, e.g. C2H6O."""
    return "".join(
        symbol if composition[symbol] == 1 else f"{symbol}{composition[symbol]:.12g}"
        for symbol in hill_order(composition)
    )


def sort_elements(symbols: Iterable[str]) -> tuple[str, ...]:
    """Distinct element symbols in the order used for matrices and tables: Hill order."""
    return tuple(hill_order(symbols))
