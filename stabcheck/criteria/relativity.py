"""Precession of the periastron by general relativity, to first post-Newtonian order."""

import numpy as np

from stabcheck.arrays import Array
from stabcheck.constants import C_AU_D, GM_SUN_AU3_D2, TWO_PI


def apsidal_advance_rad_per_orbit(semi_major_axis_au: Array, eccentricity: Array, mass_msun: Array) -> Array:
    """Advance of the periastron in one orbit, 6 pi G M / (c² a (1 - e²)).

    Parameters
    ----------
    semi_major_axis_au, eccentricity : arrays
    mass_msun : array
        Of star and planet together.

    Returns
    -------
    array
        In rad, positive along the motion.

    References
    ----------
    Einstein, A. (1915), Sitzungsber. Preuss. Akad. Wiss., 831.
    """
    e = np.asarray(eccentricity)
    with np.errstate(invalid="ignore", divide="ignore"):
        latus = semi_major_axis_au * (1.0 - e) * (1.0 + e)
        return np.asarray(3.0 * TWO_PI * GM_SUN_AU3_D2 * mass_msun / (C_AU_D * C_AU_D * latus))


def apsidal_rate_rad_d(semi_major_axis_au: Array, eccentricity: Array, mass_msun: Array, period_d: Array) -> Array:
    """Mean rate of the periastron, the advance of one orbit over the period."""
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(apsidal_advance_rad_per_orbit(semi_major_axis_au, eccentricity, mass_msun) / period_d)
