"""What turns and rounds the orbits: relativity, tides, and the planets themselves, side by side."""

import math
from dataclasses import dataclass

import numpy as np

from stabcheck.arrays import Array, DrawPlanet
from stabcheck.constants import DEGREE_RAD, EARTH_RADIUS_AU, TWO_PI, YEAR_D
from stabcheck.criteria.relativity import apsidal_rate_rad_d
from stabcheck.criteria.secular import apsidal_frequencies_rad_d
from stabcheck.ensemble import Ensemble
from stabcheck.preview.parts import RateFacts

DEG_CENTURY = 100.0 * YEAR_D / DEGREE_RAD
"""One radian a day in degrees a Julian century."""
LARGEST_ROCK_AU = 2.0 * EARTH_RADIUS_AU


@dataclass(frozen=True, slots=True)
class Response:
    """How a planet answers a tide: Love number k2, quality factor Q. Assumed, uncertain by a factor of ten or more."""

    love_number: float
    quality_factor: float


ROCK = Response(0.3, 100.0)  # common practice, no source: near the values of the Earth and Mars
GIANT = Response(0.4, 4.0e4)  # common practice, no source: 3Q/2k2 = 1.5e5


def relativity_rad_d(row: Ensemble) -> DrawPlanet:
    """Precession of each orbit by relativity."""
    mass = row.star_mass_msun[:, None] + row.mass_msun
    rate: DrawPlanet = apsidal_rate_rad_d(row.semi_major_axis_au, row.eccentricity, mass, row.period_d)
    return rate


def modes_rad_d(row: Ensemble, *, relativity: bool) -> Array:
    """Apsidal frequencies of the first row (Laplace-Lagrange), slowest first; zeros (a planet alone) are left out."""
    extra = relativity_rad_d(row) if relativity else None
    rates = apsidal_frequencies_rad_d(row.star_mass_msun, row.mass_msun, row.semi_major_axis_au, extra)[0]
    moving = rates[rates != 0.0]
    slowest_first: Array = moving[np.argsort(np.abs(moving))]
    return slowest_first


def rates_of(row: Ensemble) -> tuple[RateFacts, ...]:
    """Describe relativity and tides for each body of the first row."""
    relativity = relativity_rad_d(row)[0]
    return tuple(_rate(row, k, float(relativity[k])) for k in range(len(row.bodies)))


def _rate(row: Ensemble, k: int, relativity: float) -> RateFacts:
    radius = float(row.radius_au[0, k])
    answer = ROCK if radius < LARGEST_ROCK_AU else GIANT
    turn, rounding = math.nan, math.nan
    if radius > 0.0:
        ratio = float(row.star_mass_msun[0] / row.mass_msun[0, k])
        a, e = float(row.semi_major_axis_au[0, k]), float(row.eccentricity[0, k])
        n = TWO_PI / float(row.period_d[0, k])
        turn = tidal_rate_rad_d(n, ratio, radius / a, e, answer.love_number)
        rounding = circularisation_time_d(n, ratio, radius / a, answer) / YEAR_D
    return RateFacts(
        name=row.bodies[k],
        relativity_deg_century=relativity * DEG_CENTURY,
        tide_deg_century=turn * DEG_CENTURY,
        circularisation_yr=rounding,
        love_number=answer.love_number,
        quality_factor=answer.quality_factor,
    )


def tidal_rate_rad_d(mean_motion_rad_d: float, mass_ratio: float, size: float, e: float, love_number: float) -> float:
    """Precession by the tide that the star raises on the planet.

    Parameters
    ----------
    mean_motion_rad_d : float
    mass_ratio : float
        Star over planet.
    size : float
        Radius of the planet over its semi-major axis.
    e, love_number : float

    References
    ----------
    Sterne, T. E. (1939), MNRAS 99, 451; as 15/2 k2 n (M/m) (R/a)^5 (1 + 3/2 e² + 1/8 e⁴) / (1 - e²)^5 (from memory).
    """
    shape = (1.0 + 1.5 * e**2 + 0.125 * e**4) / (1.0 - e**2) ** 5
    return 7.5 * love_number * mean_motion_rad_d * mass_ratio * size**5 * shape


def circularisation_time_d(mean_motion_rad_d: float, mass_ratio: float, size: float, answer: Response) -> float:
    """Time e / |de/dt| by the tide in the planet: small e, synchronous spin.

    References
    ----------
    Goldreich, P. & Soter, S. (1966), Icarus 5, 375: (2/21) (Q/k2) (1/n) (m/M) (a/R)^5.
    """
    return 2.0 / 21.0 * answer.quality_factor / (answer.love_number * mean_motion_rad_d * mass_ratio * size**5)
