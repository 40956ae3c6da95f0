"""Physical constants, each with its source; derived ones are computed from their parents.

The defining constants are exact in the SI of 2019 (BIPM, SI Brochure, 9th edition; CODATA 2018 and
2022 give the same values). Wavelengths are in um, so the radiation constants are too.
"""

from __future__ import annotations

import math

PLANCK = 6.62607015e-34  # J s, exact
LIGHT_SPEED = 299792458.0  # m s-1, exact
BOLTZMANN = 1.380649e-23  # J K-1, exact

# Spectral radiance of a blackbody: c1L / (wavelength^5 (exp(c2 / (wavelength T)) - 1)).
FIRST_RADIATION_CONSTANT = 2.0 * PLANCK * LIGHT_SPEED**2 * 1e24  # W m-2 sr-1 um4
SECOND_RADIATION_CONSTANT = PLANCK * LIGHT_SPEED / BOLTZMANN * 1e6  # um K
STEFAN_BOLTZMANN = 2.0 * math.pi**5 * BOLTZMANN**4 / (15.0 * PLANCK**3 * LIGHT_SPEED**2)  # W m-2 K-4

# Roots of the Wien conditions: x = 5 (1 - exp(-x)) per wavelength, x = 3 (1 - exp(-x)) per frequency.
_WIEN_WAVELENGTH_ROOT = 4.965114231744276
_WIEN_FREQUENCY_ROOT = 2.821439372122079
WIEN_WAVELENGTH = SECOND_RADIATION_CONSTANT / _WIEN_WAVELENGTH_ROOT  # um K
WIEN_FREQUENCY = _WIEN_FREQUENCY_ROOT * BOLTZMANN / PLANCK  # Hz K-1

ZERO_CELSIUS = 273.15  # K, exact
STANDARD_GRAVITY = 9.80665  # m s-2, exact by convention (CGPM 1901)
DRY_AIR_GAS_CONSTANT = 287.053  # J kg-1 K-1 (US Standard Atmosphere 1976, R* / M0)
WATER_TO_DRY_AIR_MASS = 0.622  # ratio of molar masses, common practice
EARTH_RADIUS = 6356766.0  # m, effective radius of the US Standard Atmosphere 1976
