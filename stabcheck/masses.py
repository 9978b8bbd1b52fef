"""Masses, sizes of orbits and velocity semi-amplitudes, each tied to the others through the frame's own mass.

============== ============================= ==========================================
               Jacobi                        astrocentric
============== ============================= ==========================================
n² a³ / G      eta_k = M + m_1 + ... + m_k   M + m_k
K              (m_k / eta_k) n a s           (m_k / M_total) n a s
============== ============================= ==========================================

with s = sin i / sqrt(1 - e²). The star moves about the centre of mass of everything, so the astrocentric K divides by
the mass of all bodies, a companion star included, and the masses have to be solved together; in Jacobi coordinates
they follow one after the other from the inside out. Planets are columns in the order of the ensemble's bodies.

References
----------
Lissauer, J. J. & Rivera, E. J. (2001), ApJ 554, 1141; Lee, M. H. & Peale, S. J. (2003), ApJ 592, 1201: a sum of
Keplerian curves is read in Jacobi coordinates.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from stabcheck.arrays import Array, DrawPlanet, Flags, PerDraw
from stabcheck.constants import GM_SUN_AU3_D2, TWO_PI
from stabcheck.errors import ScenarioError
from stabcheck.kepler import column


class MassGiven(StrEnum):
    """Which statement about its mass a planet comes with; the values are the keys of a scenario."""

    MASS = "mass"
    MASS_SIN_I = "mass_sin_i"
    SEMI_AMPLITUDE = "semi_amplitude"


class SizeGiven(StrEnum):
    """Which statement about the size of its orbit a planet comes with."""

    PERIOD = "period"
    SEMI_MAJOR_AXIS = "semi_major_axis"


class TiltGiven(StrEnum):
    """Which statement about its inclination a planet comes with."""

    INCLINATION = "inclination"
    IMPACT_PARAMETER = "impact_parameter"


NEWTON_STEPS = 8
"""Steps of each one-dimensional solve: all start on the side from which Newton's method descends to the root without
overshooting. Four steps reach rounding for one planet of 1e-14 to 1e4 stellar masses, seven for four astrocentric
planets of up to 30 stellar masses; what has not converged after eight is NaN."""
CONVERGED = 1e-12
"""Largest relative residual of the total mass in the joint solution; rounding leaves some 1e-15."""


def semi_major_axis_au_from_period_d(period_d: Array, gm_au3_d2: Array) -> Array:
    """Kepler's third law; NaN for a period that is not positive."""
    with np.errstate(invalid="ignore"):
        per_radian = np.where(np.asarray(period_d) > 0.0, period_d, np.nan) / TWO_PI
        return np.asarray(np.cbrt(gm_au3_d2 * per_radian * per_radian))


def period_d_from_semi_major_axis_au(semi_major_axis_au: Array, gm_au3_d2: Array) -> Array:
    """Kepler's third law the other way; NaN for an axis that is not positive."""
    with np.errstate(invalid="ignore", divide="ignore"):
        a = np.where(np.asarray(semi_major_axis_au) > 0.0, semi_major_axis_au, np.nan)
        return np.asarray(TWO_PI * a * np.sqrt(a / gm_au3_d2))


def mass_from_mass_sin_i(mass_sin_i_msun: Array, inclination_rad: Array) -> Array:
    """True mass of a minimum mass; infinite for an orbit seen face on."""
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(mass_sin_i_msun / np.sin(inclination_rad))


def orbit_masses_msun(frame: str, star_mass_msun: PerDraw, mass_msun: DrawPlanet) -> DrawPlanet:
    """Mass that rules each orbit: everything up to and including the planet (Jacobi), or star and planet.

    Parameters
    ----------
    frame : str
        ``"jacobi"`` or ``"astrocentric"``.
    star_mass_msun : (draw,) array
    mass_msun : (draw, planet) array
        Bodies from the inside out.

    Returns
    -------
    (draw, planet) array

    Raises
    ------
    ScenarioError
        If the frame has no elements.
    """
    _demand_elements(frame)
    result = np.empty_like(mass_msun, dtype=np.float64)
    inside = star_mass_msun
    for planet in range(mass_msun.shape[1]):
        result[:, planet] = inside + mass_msun[:, planet]
        if frame == "jacobi":
            inside = result[:, planet].copy()
    return result


def carried_masses_msun(frame: str, star_mass_msun: PerDraw, mass_msun: DrawPlanet) -> DrawPlanet:
    """Mass that a planet's K divides by: everything up to and including it (Jacobi), or everything there is."""
    inside = orbit_masses_msun("jacobi", star_mass_msun, mass_msun)
    if frame == "jacobi":
        return inside
    _demand_elements(frame)
    return np.ascontiguousarray(np.broadcast_to(inside[:, -1:], inside.shape))


def semi_amplitudes_au_d(
    frame: str,
    star_mass_msun: PerDraw,
    mass_msun: DrawPlanet,
    semi_major_axis_au: DrawPlanet,
    eccentricity: DrawPlanet,
    inclination_rad: DrawPlanet,
) -> DrawPlanet:
    """Velocity semi-amplitude of the star for each planet, in au/d (divide by ``constants.M_S_AU_D`` for m/s).

    Returns
    -------
    (draw, planet) array
        NaN where e is outside (-1, 1).
    """
    gm = GM_SUN_AU3_D2 * orbit_masses_msun(frame, star_mass_msun, mass_msun)
    share = mass_msun / carried_masses_msun(frame, star_mass_msun, mass_msun)
    with np.errstate(invalid="ignore", divide="ignore"):
        speed = np.sqrt(gm / semi_major_axis_au) / np.sqrt((1.0 - eccentricity) * (1.0 + eccentricity))
    return np.asarray(share * speed * np.sin(inclination_rad))


def mass_from_semi_amplitude_jacobi(
    semi_amplitude_au_d: Array,
    size: Array,
    size_given: str,
    eccentricity: Array,
    inclination_rad: Array,
    inside_msun: Array,
) -> Array:
    """Exact mass of one planet about everything inside it.

    Parameters
    ----------
    semi_amplitude_au_d : array
    size : array
        Period in d or semi-major axis in au, as ``size_given`` ("period", "semi_major_axis") says.
    eccentricity, inclination_rad : arrays
    inside_msun : array
        Mass of the star and all planets inside.

    Returns
    -------
    array
        The one root with the sign of K: of the cubic m³ sin³i = f (M + m)² with the mass function f for a given
        period, of a quadratic for a given axis. Infinite face on, NaN for e outside (-1, 1).

    References
    ----------
    Lovis, C. & Fischer, D. (2010), in Exoplanets (ed. Seager), eq. 14, without dropping m against M.
    """
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        pull = _pull(semi_amplitude_au_d, size, size_given, eccentricity, inclination_rad)
        if size_given == SizeGiven.SEMI_MAJOR_AXIS:  # m² = pull² (M + m)
            square = pull * pull
            root = 0.5 * (square + np.sqrt(square * square + 4.0 * square * inside_msun))
        else:  # m = pull (M + m)^(2/3)
            root = inside_msun * _root_of_cubic(np.abs(pull) / np.cbrt(inside_msun))
        return np.asarray(np.copysign(root, pull))


def _pull(k_au_d: Array, size: Array, size_given: str, e: Array, i_rad: Array) -> Array:
    """K sqrt(1 - e²) / sin i over (n G)^(1/3) or sqrt(G / a): what is left of K when the masses are taken out."""
    if size_given == SizeGiven.SEMI_MAJOR_AXIS:
        scale = np.sqrt(GM_SUN_AU3_D2 / size)
    else:
        scale = np.cbrt(TWO_PI * GM_SUN_AU3_D2 / np.where(np.asarray(size) > 0.0, size, np.nan))
    return np.asarray(k_au_d * np.sqrt((1.0 - e) * (1.0 + e)) / (np.sin(i_rad) * scale))


def _root_of_cubic(c: Array) -> Array:
    # x = c (1 + x)^(2/3). x³ - c³(1 + x)² at c³ + 2c is c³ (2c⁴ - 2c³ + 8c² - 4c + 7) > 0: the start is above the
    # root, the function convex, so Newton descends. The closed form of the cubic cancels for small c.
    x = c * c * c + 2.0 * c
    for _ in range(NEWTON_STEPS):
        root = np.cbrt(1.0 + x)
        x = x - (x - c * root * root) / (1.0 - (2.0 / 3.0) * c / root)
    return np.asarray(x)


def masses_msun(
    frame: str,
    star_mass_msun: PerDraw,
    mass_given: Sequence[str],
    mass_value: DrawPlanet,
    size_given: Sequence[str],
    size: DrawPlanet,
    eccentricity: DrawPlanet,
    inclination_rad: DrawPlanet,
) -> DrawPlanet:
    """True masses, whatever each planet comes with.

    Parameters
    ----------
    frame : str
        ``"jacobi"`` or ``"astrocentric"``.
    star_mass_msun : (draw,) array
    mass_given : sequence of str, one a planet
        ``"mass"``, ``"mass_sin_i"`` (``mass_value`` in solar masses) or ``"semi_amplitude"`` (in au/d).
    mass_value : (draw, planet) array
    size_given : sequence of str, one a planet
        ``"period"`` (``size`` in d) or ``"semi_major_axis"`` (in au).
    size, eccentricity, inclination_rad : (draw, planet) arrays

    Returns
    -------
    (draw, planet) array
        In solar masses. A negative K or m sin i gives a negative mass, a face-on orbit an infinite one or NaN: to be
        refused by whoever drew it. NaN in, NaN out, also for planets that depend on the one that is NaN.

    Raises
    ------
    ScenarioError
        If the frame has no elements.
    """
    _demand_elements(frame)
    if frame == "jacobi":
        return _masses_jacobi(star_mass_msun, mass_given, mass_value, size_given, size, eccentricity, inclination_rad)
    return _masses_astrocentric(star_mass_msun, mass_given, mass_value, size_given, size, eccentricity, inclination_rad)


def _masses_jacobi(
    star_mass_msun: PerDraw,
    mass_given: Sequence[str],
    mass_value: DrawPlanet,
    size_given: Sequence[str],
    size: DrawPlanet,
    eccentricity: DrawPlanet,
    inclination_rad: DrawPlanet,
) -> DrawPlanet:
    result = np.empty_like(mass_value, dtype=np.float64)
    inside = star_mass_msun
    for k, given in enumerate(mass_given):
        if given == MassGiven.SEMI_AMPLITUDE:
            orbit = column(size, k), size_given[k], column(eccentricity, k), column(inclination_rad, k)
            mass = mass_from_semi_amplitude_jacobi(column(mass_value, k), *orbit, inside)
        else:
            mass = _known_mass(given, column(mass_value, k), column(inclination_rad, k))
        result[:, k] = mass
        with np.errstate(invalid="ignore"):
            inside = inside + mass
    return result


def _masses_astrocentric(
    star_mass_msun: PerDraw,
    mass_given: Sequence[str],
    mass_value: DrawPlanet,
    size_given: Sequence[str],
    size: DrawPlanet,
    eccentricity: DrawPlanet,
    inclination_rad: DrawPlanet,
) -> DrawPlanet:
    result = np.empty_like(mass_value, dtype=np.float64)
    known, wanted = star_mass_msun, {}
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        for k, given in enumerate(mass_given):
            i = column(inclination_rad, k)
            if given == MassGiven.SEMI_AMPLITUDE:
                wanted[k] = _pull(column(mass_value, k), column(size, k), size_given[k], column(eccentricity, k), i)
            else:
                result[:, k] = _known_mass(given, column(mass_value, k), i)
                known = known + result[:, k]
        powers = {k: 0.5 if size_given[k] == SizeGiven.SEMI_MAJOR_AXIS else 1.0 / 3.0 for k in wanted}
        total = _total_mass(star_mass_msun, known, wanted, powers)
        for k, pull in wanted.items():
            result[:, k] = _mass_and_slope(star_mass_msun, pull, powers[k], total)[0]
    return result


def _total_mass(star: PerDraw, known: PerDraw, pulls: dict[int, PerDraw], powers: dict[int, float]) -> PerDraw:
    """Mass of everything, T = known + sum of m_k(T), where m (M + m)^p = pull T."""
    # Each m_k(T) is concave, so Newton descends from any T above the root. m <= (pull T)^(1/(1+p)) and Young's
    # inequality give sum m_k <= 3/8 T + bound, hence the start.
    count = len(pulls)
    bound = known
    for k, pull in pulls.items():
        most = 2.0 * count * np.abs(pull)
        bound = bound + (most * most / 3.0 if powers[k] == 0.5 else 0.25 * most * most * most)
    total: PerDraw = 1.6 * bound
    for _ in range(NEWTON_STEPS):
        value, slope = known, np.zeros_like(known)
        for k, pull in pulls.items():
            mass, rise = _mass_and_slope(star, pull, powers[k], total)
            value, slope = value + mass, slope + rise
        residual = value - total
        total = total + residual / (1.0 - slope)
    return np.where(np.abs(residual) <= CONVERGED * total, total, np.nan)


def _mass_and_slope(star: PerDraw, pull: PerDraw, power: float, total: PerDraw) -> tuple[PerDraw, PerDraw]:
    """Root m of m (M + m)^p = pull T, with the sign of the pull, and dm/dT."""
    rho = np.abs(pull) * total / (star * _power(star, power))
    x = np.minimum(rho, np.cbrt(rho * rho) if power == 0.5 else np.sqrt(rho * np.sqrt(rho)))  # above the root
    for _ in range(NEWTON_STEPS):
        root = _power(1.0 + x, power)
        x = x - (x * root - rho) / (root * (1.0 + power * x / (1.0 + x)))
    slope = np.abs(pull) / (_power(star, power) * _power(1.0 + x, power) * (1.0 + power * x / (1.0 + x)))
    return np.copysign(star * x, pull), np.copysign(slope, pull)


def _power(value: PerDraw, power: float) -> PerDraw:
    return np.sqrt(value) if power == 0.5 else np.cbrt(value)


def _known_mass(given: str, value: PerDraw, inclination_rad: PerDraw) -> PerDraw:
    return mass_from_mass_sin_i(value, inclination_rad) if given == MassGiven.MASS_SIN_I else value


def inclination_from_impact_parameter(
    impact_parameter: Array,
    star_radius_au: Array,
    semi_major_axis_au: Array,
    eccentricity: Array,
    omega_star_rad: Array,
) -> Array:
    """Inclination up to 90° of a transiting orbit; 180° minus it fits as well, and the caller must draw both.

    b = (a cos i / R) (1 - e²) / (1 + e sin omega_star): the distance at inferior conjunction in stellar radii.

    Returns
    -------
    array
        NaN where no inclination gives this impact parameter.

    References
    ----------
    Winn, J. N. (2010), arXiv:1001.2010, eq. 7.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        latus = semi_major_axis_au * (1.0 - eccentricity) * (1.0 + eccentricity)
        cosine = impact_parameter * star_radius_au * (1.0 + eccentricity * np.sin(omega_star_rad)) / latus
        return np.asarray(np.arctan2(np.sqrt((1.0 - cosine) * (1.0 + cosine)), cosine))


@dataclass(frozen=True, slots=True, kw_only=True)
class Sizes:
    """What ``solved_sizes`` found, each (draw, planet)."""

    mass_msun: DrawPlanet
    inclination_rad: DrawPlanet
    semi_major_axis_au: DrawPlanet
    period_d: DrawPlanet
    semi_amplitude_au_d: DrawPlanet


TILT_ROUNDS = 8
"""Rounds between inclination and mass; each gains a factor of at least (m/M) cot²i / 3, below 0.01 for transits."""


def solved_sizes(
    frame: str,
    star_mass_msun: PerDraw,
    star_radius_au: PerDraw,
    *,
    mass_given: Sequence[str],
    mass_value: DrawPlanet,
    size_given: Sequence[str],
    size: DrawPlanet,
    tilt_given: Sequence[str],
    tilt: DrawPlanet,
    beyond_90_degrees: Flags,
    eccentricity: DrawPlanet,
    omega_star_rad: DrawPlanet,
) -> Sizes:
    """Masses, inclinations, axes, periods and K of all planets from whatever each comes with.

    An impact parameter gives the inclination through the axis, the axis needs the mass, and a mass from K or m sin i
    needs the inclination: this solves them together.

    Parameters
    ----------
    frame, star_mass_msun, mass_given, mass_value, size_given, size, eccentricity
        As in ``masses_msun``.
    star_radius_au : (draw,) array
        Used only with impact parameters.
    tilt_given : sequence of str, one a planet
        ``"inclination"`` (``tilt`` in rad) or ``"impact_parameter"`` (``tilt`` in stellar radii).
    tilt : (draw, planet) array
    beyond_90_degrees : (draw, planet) bool array
        Where the inclination of an impact parameter is taken as 180° minus the smaller one.
    omega_star_rad : (draw, planet) array

    Returns
    -------
    Sizes

    Raises
    ------
    ScenarioError
        If the frame has no elements.
    """
    tilted = [k for k, given in enumerate(tilt_given) if given == TiltGiven.IMPACT_PARAMETER]
    inclination = np.array(tilt, dtype=np.float64)
    inclination[:, tilted] = 0.5 * np.pi
    for _ in range(TILT_ROUNDS if tilted else 1):
        mass = masses_msun(frame, star_mass_msun, mass_given, mass_value, size_given, size, eccentricity, inclination)
        axis, period = _axes_and_periods(frame, star_mass_msun, mass, size_given, size)
        for k in tilted:
            orbit = column(axis, k), column(eccentricity, k), column(omega_star_rad, k)
            below = inclination_from_impact_parameter(column(tilt, k), star_radius_au, *orbit)
            inclination[:, k] = np.where(beyond_90_degrees[:, k], np.pi - below, below)
    amplitude = semi_amplitudes_au_d(frame, star_mass_msun, mass, axis, eccentricity, inclination)
    return Sizes(
        mass_msun=mass,
        inclination_rad=inclination,
        semi_major_axis_au=axis,
        period_d=period,
        semi_amplitude_au_d=amplitude,
    )


def _axes_and_periods(
    frame: str, star_mass_msun: PerDraw, mass_msun: DrawPlanet, size_given: Sequence[str], size: DrawPlanet
) -> tuple[DrawPlanet, DrawPlanet]:
    gm = GM_SUN_AU3_D2 * orbit_masses_msun(frame, star_mass_msun, mass_msun)
    axis, period = np.array(size, dtype=np.float64), np.array(size, dtype=np.float64)
    for k, given in enumerate(size_given):
        if given == SizeGiven.SEMI_MAJOR_AXIS:
            period[:, k] = period_d_from_semi_major_axis_au(column(size, k), column(gm, k))
        else:
            axis[:, k] = semi_major_axis_au_from_period_d(column(size, k), column(gm, k))
    return axis, period


def _demand_elements(frame: str) -> None:
    if frame not in ("jacobi", "astrocentric"):
        raise ScenarioError(
            f"there are no elements in the frame {str(frame)!r}",
            where="[elements] frame",
            why="masses, periods and K are tied through the mass of the frame",
            do='give "jacobi" or "astrocentric", or positions and velocities with "cartesian"',
        )
