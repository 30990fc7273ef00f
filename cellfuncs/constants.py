"""The physical constants that every number here rests on, and where each is defined.

Exact by definition: c, h, k and e (SI, 9th edition, 2019), the astronomical unit (IAU 2012
resolution B2), the parsec (IAU 2015 resolution B2), the Julian year (IAU). Measured: G, and with
it the critical density (CODATA 2018; CODATA 2022 keeps the value).
"""

from math import pi

LIGHT_SPEED = 299_792.458
"""km/s"""

GRAVITATION = 6.674_30e-11
"""m³ kg⁻¹ s⁻²"""

PLANCK = 6.626_070_15e-34
"""J s"""

BOLTZMANN = 1.380_649e-23
"""J/K"""

ELECTRON_VOLT = 1.602_176_634e-19
"""J"""

STEFAN_BOLTZMANN = 2 * pi**5 * BOLTZMANN**4 / (15 * PLANCK**3 * (LIGHT_SPEED * 1e3) ** 2)
"""W m⁻² K⁻⁴"""

ASTRONOMICAL_UNIT = 149_597_870.7
"""km"""

PARSEC = 149_597_870_700 * 648_000 / pi
"""m"""

KM_PER_MPC = PARSEC * 1e3

JULIAN_YEAR = 365.25 * 86_400
"""s"""

MPC_PER_GIGA_LIGHT_YEAR = LIGHT_SPEED * JULIAN_YEAR * 1e9 / KM_PER_MPC

HUBBLE_GYR = KM_PER_MPC / JULIAN_YEAR / 1e9
"""Gyr times km/s/Mpc: divided by a Hubble constant it is the Hubble time."""

ARCSEC_PER_RADIAN = 648_000 / pi

SQUARE_DEGREES_OF_SKY = 4 * pi * (180 / pi) ** 2

EDITION = "CODATA 2018, IAU 2012 B2 and 2015 B2"
