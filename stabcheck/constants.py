"""Constants with their sources. Inside stabcheck everything is in au, day and solar mass; derived values are derived.

References
----------
IAU 2012 Resolution B2 (the astronomical unit); IAU 2015 Resolution B3 (nominal solar and planetary values;
Prša, A. et al. 2016, AJ 152, 41). Nothing is computed through G and kilograms: G is known to 2e-5 only.
"""

import math

AU_M = 149_597_870_700.0  # exact, IAU 2012 Resolution B2
DAY_S = 86_400.0
YEAR_D = 365.25  # Julian year
C_M_S = 299_792_458.0  # exact, SI

GM_SUN_M3_S2 = 1.327_124_4e20  # nominal, IAU 2015 Resolution B3
GM_JUPITER_M3_S2 = 1.266_865_3e17  # nominal, IAU 2015 Resolution B3
GM_EARTH_M3_S2 = 3.986_004e14  # nominal, IAU 2015 Resolution B3

R_SUN_M = 6.957e8  # nominal, IAU 2015 Resolution B3
R_JUPITER_M = 7.1492e7  # nominal, equatorial, IAU 2015 Resolution B3
R_EARTH_M = 6.3781e6  # nominal, equatorial, IAU 2015 Resolution B3

GM_SUN_AU3_D2 = GM_SUN_M3_S2 * DAY_S**2 / AU_M**3
"""The gravitational constant in the units used inside: au³ / (solar mass · day²)."""

JUPITER_MSUN = GM_JUPITER_M3_S2 / GM_SUN_M3_S2
EARTH_MSUN = GM_EARTH_M3_S2 / GM_SUN_M3_S2
SUN_RADIUS_AU = R_SUN_M / AU_M
JUPITER_RADIUS_AU = R_JUPITER_M / AU_M
EARTH_RADIUS_AU = R_EARTH_M / AU_M
C_AU_D = C_M_S * DAY_S / AU_M
M_S_AU_D = DAY_S / AU_M
"""One metre per second in au per day."""

TWO_PI = 2.0 * math.pi
DEGREE_RAD = math.pi / 180.0
