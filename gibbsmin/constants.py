"""Physical constants, all exact by definition.

Source: BIPM, The International System of Units, 9th edition (2019); standard pressure of the
thermodynamic tables: IUPAC recommendation of 1982.
"""

from __future__ import annotations

BOLTZMANN = 1.380649e-23  # J/K, exact
AVOGADRO = 6.02214076e23  # 1/mol, exact
GAS_CONSTANT = BOLTZMANN * AVOGADRO  # J/(mol K), exact
STANDARD_PRESSURE = 1e5  # Pa
STANDARD_ATMOSPHERE = 101325.0  # Pa
NORMAL_TEMPERATURE = 273.15  # K, of the normal cubic metre (DIN 1343, ISO 13443 calls 15 degC standard)
NORMAL_PRESSURE = STANDARD_ATMOSPHERE  # Pa, of the normal cubic metre
