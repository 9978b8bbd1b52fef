"""Separation of neighbouring orbits in mutual Hill radii.

Three mutual Hill radii are in use; they share ((m1 + m2) / 3M)^(1/3) and differ in the length it multiplies: the mean
axis (here, Chambers et al. 1996), the inner axis (Gladman 1993, whose limit 2 sqrt(3) belongs to it at leading order)
or the mass-weighted axis. Jupiter and Saturn are 7.9, 11.2 or 9.4 apart, so no separation without its definition.
"""

import math

import numpy as np

from stabcheck.arrays import Array, DrawPair, DrawPlanet, PerDraw
from stabcheck.kepler import column

HILL_LIMIT = 2.0 * math.sqrt(3.0)
"""Two planets on circular, coplanar orbits further apart than this many mutual Hill radii never meet (leading order in
the masses); nearer ones may or may not. Says nothing about three planets, nor about the ejection of the outer one."""


def mutual_hill_radius_au(
    inner_axis_au: Array, outer_axis_au: Array, inner_mass_msun: Array, outer_mass_msun: Array, star_mass_msun: Array
) -> Array:
    """Mutual Hill radius with the mean of the two semi-major axes.

    References
    ----------
    Chambers, J. E., Wetherill, G. W. & Boss, A. P. (1996), Icarus 119, 261.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        share = np.cbrt((inner_mass_msun + outer_mass_msun) / (3.0 * star_mass_msun))
        return np.asarray(share * 0.5 * (inner_axis_au + outer_axis_au))


def separation_hill(semi_major_axis_au: DrawPlanet, mass_msun: DrawPlanet, star_mass_msun: PerDraw) -> DrawPair:
    """Measure the gap between neighbouring orbits in mutual Hill radii (mean axis).

    Parameters
    ----------
    semi_major_axis_au, mass_msun : (draw, planet) arrays
        Planets in the order of the ensemble's bodies.
    star_mass_msun : (draw,) array

    Returns
    -------
    (draw, planet - 1) array
        Entry ``k`` belongs to planets ``k`` and ``k + 1``; negative where planet ``k + 1`` has the smaller axis in
        this draw, so that a draw whose order flips is seen and lies below every limit. NaN in, NaN out.

    References
    ----------
    Chambers, J. E., Wetherill, G. W. & Boss, A. P. (1996), Icarus 119, 261; Gladman, B. (1993), Icarus 106, 247.
    """
    draws, planets = mass_msun.shape
    result = np.empty((draws, max(planets - 1, 0)))
    for k in range(planets - 1):
        inner, outer = column(semi_major_axis_au, k), column(semi_major_axis_au, k + 1)
        radius = mutual_hill_radius_au(inner, outer, column(mass_msun, k), column(mass_msun, k + 1), star_mass_msun)
        with np.errstate(invalid="ignore", divide="ignore"):
            result[:, k] = (outer - inner) / radius
    return result
