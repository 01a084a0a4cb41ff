"""Physical constants in SI units.

Exact values of the 2019 SI (BIPM, "The International System of Units", 9th ed., 2019).
"""

from __future__ import annotations

from typing import Final

__all__ = ["AVOGADRO", "BOLTZMANN", "GAS_CONSTANT", "PLANCK", "ZERO_CELSIUS"]

BOLTZMANN: Final = 1.380649e-23  # J/K, exact
AVOGADRO: Final = 6.02214076e23  # 1/mol, exact
PLANCK: Final = 6.62607015e-34  # J s, exact
GAS_CONSTANT: Final = BOLTZMANN * AVOGADRO  # J/(mol K), exact product
ZERO_CELSIUS: Final = 273.15  # K, by definition of the Celsius temperature
