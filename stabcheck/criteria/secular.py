"""Laplace-Lagrange theory: how fast the orbits of a system precess, and the slowest of its apsidal cycles.

First order in the masses, lowest order in e and i, so nearly circular, nearly coplanar orbits away from resonances;
near the 5:2 of Jupiter and Saturn it misses a fifth of the faster rate. Here it sets time scales, not verdicts.

References
----------
Murray, C. D. & Dermott, S. F. (1999), Solar System Dynamics, chapter 7.
"""

import numpy as np

from stabcheck.arrays import Array, DrawPlanet, PerDraw
from stabcheck.constants import GM_SUN_AU3_D2, TWO_PI
from stabcheck.kepler import column

SWEEPS = 10
"""Sweeps of Jacobi rotations. Convergence is quadratic: six sweeps reach rounding for ten planets; the rest costs
little and the number of operations stays fixed, so that no draw depends on its neighbours."""


def laplace_coefficient(s: float, j: int, alpha: Array) -> Array:
    """Laplace coefficient b_s^(j)(alpha), by the hypergeometric function.

    Euler's transformation is applied first: what is left converges up to alpha = 1, and the factor
    (1 - alpha²)^(1 - 2s) that makes the coefficient large there stands in front.

    Parameters
    ----------
    s : float
        Half an odd number, 1/2, 3/2, ...
    j : int
    alpha : array
        Smaller over larger semi-major axis, 0 <= alpha < 1.

    Returns
    -------
    array
        NaN outside 0 <= alpha < 1.
    """
    from scipy.special import hyp2f1, poch

    with np.errstate(invalid="ignore", divide="ignore"):
        inside = (np.asarray(alpha) >= 0.0) & (np.asarray(alpha) < 1.0)
        a = np.where(inside, alpha, np.nan)
        square, lead = a * a, np.ones_like(a)
        for _ in range(j):
            lead = lead * a
        lead = lead * (2.0 * poch(s, j) / poch(1.0, j))
        return np.asarray(lead * (1.0 - square) ** (1.0 - 2.0 * s) * hyp2f1(1.0 - s + j, 1.0 - s, j + 1.0, square))


def apsidal_matrix_rad_d(
    star_mass_msun: PerDraw, mass_msun: DrawPlanet, semi_major_axis_au: DrawPlanet, mean_motion_rad_d: DrawPlanet
) -> Array:
    """Matrix A of the Laplace-Lagrange equations for eccentricities and longitudes of periastron.

    Parameters
    ----------
    star_mass_msun : (draw,) array
    mass_msun, semi_major_axis_au, mean_motion_rad_d : (draw, planet) arrays
        In any order of axes.

    Returns
    -------
    (draw, planet, planet) array
        In rad/d (in the unit of the mean motion, if another is given). NaN where two axes are equal.

    References
    ----------
    Murray & Dermott (1999), equations 7.9 to 7.11.
    """
    draws, planets = mass_msun.shape
    result = np.zeros((draws, planets, planets))
    for j in range(planets):
        for k in range(planets):
            if k == j:
                continue
            a_j, a_k = column(semi_major_axis_au, j), column(semi_major_axis_au, k)
            with np.errstate(invalid="ignore", divide="ignore"):
                alpha = np.minimum(a_j, a_k) / np.maximum(a_j, a_k)
                # alpha times alpha-bar, which is 1 when the perturber is inside
                factor = np.where(a_k > a_j, alpha * alpha, alpha)
                strength = 0.25 * column(mean_motion_rad_d, j) * column(mass_msun, k) * factor
                strength = strength / (star_mass_msun + column(mass_msun, j))
                result[:, j, j] += strength * laplace_coefficient(1.5, 1, alpha)
                result[:, j, k] = -strength * laplace_coefficient(1.5, 2, alpha)
    return result


def apsidal_frequencies_rad_d(
    star_mass_msun: PerDraw,
    mass_msun: DrawPlanet,
    semi_major_axis_au: DrawPlanet,
    extra_rate_rad_d: DrawPlanet | None = None,
) -> DrawPlanet:
    """Eigenfrequencies g of the apsidal motion, in rising order.

    Parameters
    ----------
    star_mass_msun : (draw,) array
    mass_msun, semi_major_axis_au : (draw, planet) arrays
    extra_rate_rad_d : (draw, planet) array, optional
        Precession of each orbit by something else, relativity for example.

    Returns
    -------
    (draw, planet) array
        Mode by mode, not planet by planet. NaN in rows with NaN, equal axes or masses that are not positive.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        gm = GM_SUN_AU3_D2 * (star_mass_msun[:, None] + mass_msun)
        mean_motion = np.sqrt(gm / semi_major_axis_au) / semi_major_axis_au
    matrix = apsidal_matrix_rad_d(star_mass_msun, mass_msun, semi_major_axis_au, mean_motion)
    if extra_rate_rad_d is not None:
        for k in range(mass_msun.shape[1]):
            matrix[:, k, k] += extra_rate_rad_d[:, k]
    return _eigenvalues(_symmetrised(matrix))


def slowest_apsidal_period_d(
    star_mass_msun: PerDraw,
    mass_msun: DrawPlanet,
    semi_major_axis_au: DrawPlanet,
    extra_rate_rad_d: DrawPlanet | None = None,
) -> PerDraw:
    """Period of the slowest apsidal mode; infinite for a single planet that nothing makes precess."""
    slowest = apsidal_frequencies_rad_d(star_mass_msun, mass_msun, semi_major_axis_au, extra_rate_rad_d)[:, 0]
    with np.errstate(divide="ignore"):
        return np.asarray(TWO_PI / np.abs(slowest))


def _symmetrised(matrix: Array) -> Array:
    """Scale to a symmetric matrix with the same eigenvalues: A_jk / A_kj is a ratio of two numbers, one a planet."""
    result = matrix.copy()
    planets = matrix.shape[1]
    for j in range(planets):
        for k in range(j + 1, planets):
            with np.errstate(invalid="ignore"):
                both = -np.sqrt(np.ascontiguousarray(matrix[:, j, k] * matrix[:, k, j]))
            result[:, j, k] = both
            result[:, k, j] = both
    return result


def _eigenvalues(symmetric: Array) -> DrawPlanet:
    """Eigenvalues in rising order by cyclic Jacobi rotations, elementwise over the draws (LAPACK goes row by row)."""
    work = symmetric.copy()
    draws, planets, _ = work.shape
    for _ in range(SWEEPS):
        for p in range(planets):
            for q in range(p + 1, planets):
                _rotate(work, p, q)
    diagonal = np.empty((draws, planets))
    broken = np.zeros(draws, dtype=np.bool_)
    for k in range(planets):
        diagonal[:, k] = work[:, k, k]
        broken |= ~np.isfinite(work[:, k, k])
    diagonal[broken] = np.nan
    return np.sort(diagonal, axis=1)


def _rotate(work: Array, p: int, q: int) -> None:
    """Make element (p, q) zero; changes ``work``, nothing else. Formulas after Golub & Van Loan, section 8.5."""
    off = work[:, p, q].copy()
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        half = (work[:, q, q] - work[:, p, p]) / (2.0 * off)
        tangent = np.where(half >= 0.0, 1.0, -1.0) / (np.abs(half) + np.sqrt(1.0 + half * half))
    tangent = np.where(off == 0.0, 0.0, tangent)
    cosine = 1.0 / np.sqrt(1.0 + tangent * tangent)
    sine = tangent * cosine
    work[:, p, p] -= tangent * off
    work[:, q, q] += tangent * off
    work[:, p, q] = 0.0
    work[:, q, p] = 0.0
    for other in range(work.shape[1]):
        if other not in (p, q):
            to_p, to_q = work[:, other, p].copy(), work[:, other, q].copy()
            work[:, other, p] = work[:, p, other] = cosine * to_p - sine * to_q
            work[:, other, q] = work[:, q, other] = sine * to_p + cosine * to_q
