"""Physical constants as plain floats in CGS and in the units astronomers quote.

They are written out here rather than taken from ``astropy.constants`` because that import costs
half a second, which every warm answer from the store would pay. ``tests/test_constants.py``
asserts each one equal to astropy's value.

Sources: SI Brochure 9 (2019) for the defined constants; CODATA 2018 for G and the electron mass;
IAU 2012 B2 (au), IAU 2015 B2 (parsec) and IAU 2015 B3 (nominal solar values).
"""

from __future__ import annotations

import math

C_CM_S = 2.99792458e10
"""Speed of light (exact)."""
H_ERG_S = 6.62607015e-27
"""Planck constant (exact)."""
K_ERG_K = 1.380649e-16
"""Boltzmann constant (exact)."""
KEV_ERG = 1.602176634e-9
"""One kilo-electronvolt in erg (exact)."""
KEV_HZ = KEV_ERG / H_ERG_S
"""Frequency of a 1 keV photon, Hz."""
KEV_K = KEV_ERG / K_ERG_K
"""Temperature of 1 keV, kelvin."""
SIGMA_SB_CGS = 2.0 * math.pi**5 * K_ERG_K**4 / (15.0 * H_ERG_S**3 * C_CM_S**2)
"""Stefan-Boltzmann constant, erg cm^-2 s^-1 K^-4."""
G_CGS = 6.67430e-8
"""Newtonian constant of gravitation (CODATA 2018)."""
AU_CM = 1.495978707e13
"""Astronomical unit (IAU 2012 B2)."""
PC_CM = AU_CM * 648000.0 / math.pi
"""Parsec (IAU 2015 B2)."""
KPC_CM = 1.0e3 * PC_CM
"""Kiloparsec."""
LY_CM = C_CM_S * 365.25 * 86400.0
"""Light-year of one Julian year (IAU)."""
YR_S = 365.25 * 86400.0
"""Julian year in seconds."""
GM_SUN_CGS = 1.3271244e26
"""Nominal solar mass parameter, cm^3 s^-2 (IAU 2015 B3)."""
MSUN_G = GM_SUN_CGS / G_CGS
"""Solar mass, g."""
RSUN_CM = 6.957e10
"""Nominal solar radius (IAU 2015 B3)."""
LSUN_ERG_S = 3.828e33
"""Nominal solar luminosity (IAU 2015 B3)."""
JY_CGS = 1.0e-23
"""One jansky in erg s^-1 cm^-2 Hz^-1."""
DEG2_SR = (math.pi / 180.0) ** 2
"""One square degree in steradian."""
ARCSEC_RAD = math.pi / 648000.0
"""One arcsecond in radian."""
ARCSEC2_PER_DEG2 = 3600.0**2
"""Square arcseconds in a square degree."""
KM_S_KPC_MAS_YR = AU_CM / 1.0e5 / YR_S
"""Velocity of 1 mas/yr at 1 kpc (= 1 au/yr), km/s."""
