"""Physical constants, each with its unit in the name.

The gas and Faraday constants follow from the SI of 2019, in which the Boltzmann, Avogadro and
elementary-charge constants are exact [si_brochure_2019].
"""

from __future__ import annotations

BOLTZMANN_J_per_K = 1.380649e-23
AVOGADRO_per_mol = 6.02214076e23
ELEMENTARY_CHARGE_C = 1.602176634e-19
VACUUM_PERMITTIVITY_F_per_m = 8.8541878128e-12  # CODATA 2018: measured, no longer exact

GAS_CONSTANT_J_per_mol_K = BOLTZMANN_J_per_K * AVOGADRO_per_mol
FARADAY_C_per_mol = ELEMENTARY_CHARGE_C * AVOGADRO_per_mol

ZERO_CELSIUS_K = 273.15
STANDARD_TEMPERATURE_K = 298.15
STANDARD_ATMOSPHERE_Pa = 101325.0
GRAVITY_m_per_s2 = 9.80665  #: standard gravity, by convention

#: Volume of a mole of ideal gas at 0 degC and 1 atm, the "normal" cubic metre [m3/mol].
NORMAL_MOLAR_VOLUME_m3_per_mol = GAS_CONSTANT_J_per_mol_K * ZERO_CELSIUS_K / STANDARD_ATMOSPHERE_Pa

HOURS_PER_DAY = 24.0
DAYS_PER_MONTH = 30.4  #: the campaign's month for rates per hour; months of the calendar elsewhere
