"""Constants of nature and reference states, SI."""

from __future__ import annotations

from typing import Final

#: Molar gas constant, J/(mol K). CODATA 2018 (exact since the 2019 SI).
R: Final = 8.314462618
#: Boltzmann constant, J/K. CODATA 2018 (exact).
K_BOLTZMANN: Final = 1.380649e-23
#: Avogadro constant, 1/mol. CODATA 2018 (exact).
N_AVOGADRO: Final = 6.02214076e23
#: Standard pressure of every Gibbs energy in the tables, Pa (IUPAC 1982).
P0: Final = 1.0e5
#: Standard atmosphere, Pa (10th CGPM 1954).
ATM: Final = 101325.0
#: Temperature of normal gas volumes, K (0 degC).
T_NORMAL: Final = 273.15
#: Molar volume of an ideal gas at 0 degC and 101 325 Pa, m3/mol.
V_NORMAL: Final = R * T_NORMAL / ATM
#: Standard gravity, m/s2 (3rd CGPM 1901).
GRAVITY: Final = 9.80665
#: Ice point, K.
ZERO_CELSIUS: Final = 273.15

#: Content (mole fraction) up to which the dilute laws are used.
DILUTE: Final = 0.02
#: Host mole fraction below which the host is no longer the solvent.
HOST_CONSUMED: Final = 0.9

#: Elements counted as gas formers, as the trade does when it counts nines.
GAS_FORMERS: Final = ("C", "N", "O", "H", "S")
