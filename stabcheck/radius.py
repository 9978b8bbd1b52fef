"""Radius of a planet of known mass: the mean relation of Chen & Kipping (2017), used where a scenario asks for it.

The relation's own scatter (4 % for rocky worlds, 15 % for Neptunes, 7 % for giants) is not drawn: a radius decides only
when two bodies touch, and a collision course rarely depends on it.

References
----------
Chen, J. & Kipping, D. (2017), ApJ 834, 17. The coefficients below were written from memory of its table 1.
"""

import numpy as np

from stabcheck.arrays import Array
from stabcheck.constants import EARTH_MSUN, EARTH_RADIUS_AU, JUPITER_MSUN

SLOPES = (0.2790, 0.589, -0.044, 0.881)
"""d log R / d log M of rocky worlds, Neptune-like worlds, giants, stars."""
TRANSITIONS_EARTH = (2.04, 0.414 * JUPITER_MSUN / EARTH_MSUN, 0.0800 / EARTH_MSUN)
"""Masses, in that of the Earth, at which one kind gives way to the next."""
FIRST_CONSTANT = 0.00346
"""log10 of the radius, in that of the Earth, at one Earth mass."""


def constants() -> tuple[float, ...]:
    """Give log10 R at one Earth mass on each of the four lines; continuity fixes all but the first."""
    found = [FIRST_CONSTANT]
    for below, above, mass in zip(SLOPES, SLOPES[1:], TRANSITIONS_EARTH, strict=False):
        found.append(found[-1] + (below - above) * float(np.log10(mass)))
    return tuple(found)


def radius_au_from_mass_msun(mass_msun: Array) -> Array:
    """Estimate the radius of a body from its mass.

    Parameters
    ----------
    mass_msun : array
        Masses in solar masses. A mass of 0 is a point and has radius 0.

    Returns
    -------
    array of the same shape
        Radii in au; NaN where the mass is negative or NaN.

    References
    ----------
    Chen, J. & Kipping, D. (2017), ApJ 834, 17, section 3.
    """
    earths = np.where(mass_msun > 0.0, mass_msun, np.nan) / EARTH_MSUN
    kind = np.searchsorted(TRANSITIONS_EARTH, earths)  # NaN sorts behind everything and stays NaN below
    logarithm = np.array(constants())[kind] + np.array(SLOPES)[kind] * np.log10(earths)
    return np.where(mass_msun == 0.0, 0.0, 10.0**logarithm * EARTH_RADIUS_AU)
