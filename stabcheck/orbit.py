"""Conversions between orbit conventions, each named after both ends: whose omega, which phase, which plane.

Everything is elementwise over (draw, planet) or any other shape, NaN in gives NaN out. The star's argument of
periastron and the planet's are half a turn apart; inferior conjunction (the transit side) is at true anomaly
f = 90° - omega_star; all times are BJD of one scale. What concerns two bodies only is in ``kepler``, what ties masses,
sizes and K in ``masses``; their names can be imported from here.
"""

import numpy as np

from stabcheck.arrays import Array
from stabcheck.constants import TWO_PI
from stabcheck.kepler import (
    Elements,
    column,
    eccentric_anomaly_from_mean_anomaly,
    eccentric_anomaly_from_true_anomaly,
    elements_from_state,
    inclination_and_node_from_normal,
    mean_anomaly_from_true_anomaly,
    state_from_elements,
    true_anomaly_from_eccentric_anomaly,
    true_anomaly_from_mean_anomaly,
    wrapped_rad,
)
from stabcheck.masses import (
    MassGiven,
    SizeGiven,
    Sizes,
    TiltGiven,
    carried_masses_msun,
    inclination_from_impact_parameter,
    mass_from_mass_sin_i,
    mass_from_semi_amplitude_jacobi,
    masses_msun,
    orbit_masses_msun,
    period_d_from_semi_major_axis_au,
    semi_amplitudes_au_d,
    semi_major_axis_au_from_period_d,
    solved_sizes,
)

__all__ = [
    "Elements",
    "MassGiven",
    "SizeGiven",
    "Sizes",
    "TiltGiven",
    "carried_masses_msun",
    "column",
    "eccentric_anomaly_from_mean_anomaly",
    "eccentric_anomaly_from_true_anomaly",
    "effective_period_d",
    "elements_from_state",
    "inclination_and_node_from_normal",
    "inclination_and_node_from_tilted_plane",
    "inclination_from_impact_parameter",
    "mass_from_mass_sin_i",
    "mass_from_semi_amplitude_jacobi",
    "masses_msun",
    "mean_anomaly_at_inferior_conjunction",
    "mean_anomaly_at_superior_conjunction",
    "mean_anomaly_from_mean_longitude",
    "mean_anomaly_from_time_of_conjunction",
    "mean_anomaly_from_time_of_periastron",
    "mean_anomaly_from_true_anomaly",
    "mean_longitude_from_mean_anomaly",
    "mutual_inclination",
    "omega_planet_from_omega_star",
    "omega_star_from_omega_planet",
    "orbit_masses_msun",
    "period_d_from_semi_major_axis_au",
    "semi_amplitudes_au_d",
    "semi_major_axis_au_from_period_d",
    "solved_sizes",
    "state_from_elements",
    "time_of_conjunction_from_mean_anomaly",
    "time_of_periastron_from_mean_anomaly",
    "true_anomaly_from_eccentric_anomaly",
    "true_anomaly_from_mean_anomaly",
    "wrapped_rad",
]


def omega_planet_from_omega_star(omega_star_rad: Array) -> Array:
    """Argument of periastron of the planet's orbit; the star's own is half a turn away."""
    return wrapped_rad(omega_star_rad + np.pi)


def omega_star_from_omega_planet(omega_planet_rad: Array) -> Array:
    """Argument of periastron of the star's orbit, the one in the velocity curve K [cos(omega + f) + e cos omega]."""
    return wrapped_rad(omega_planet_rad + np.pi)


def effective_period_d(period_d: Array, eccentricity: Array) -> Array:
    """Period the orbit would have if it kept the angular speed of its periastron (Wisdom 2015, AJ 150, 127)."""
    with np.errstate(invalid="ignore", divide="ignore"):
        left = 1.0 - np.asarray(eccentricity)
        return np.asarray(period_d * np.sqrt(left * left * left / (1.0 + eccentricity)))


def mean_anomaly_at_inferior_conjunction(eccentricity: Array, omega_star_rad: Array) -> Array:
    """Mean anomaly when the planet is nearest to the line of sight in front of the star, f = 90° - omega_star.

    References
    ----------
    Winn, J. N. (2010), arXiv:1001.2010, section 2.
    """
    return wrapped_rad(mean_anomaly_from_true_anomaly(0.5 * np.pi - omega_star_rad, eccentricity))


def mean_anomaly_at_superior_conjunction(eccentricity: Array, omega_star_rad: Array) -> Array:
    """Mean anomaly when the planet is behind the star, f = -90° - omega_star."""
    return wrapped_rad(mean_anomaly_from_true_anomaly(-0.5 * np.pi - omega_star_rad, eccentricity))


def mean_anomaly_from_time_of_periastron(periastron_bjd: Array, period_d: Array, epoch_bjd: float) -> Array:
    """Mean anomaly at the epoch of a planet that passes, passed or will pass its periastron at this time."""
    with np.errstate(invalid="ignore", divide="ignore"):
        return wrapped_rad(TWO_PI * _fraction((epoch_bjd - np.asarray(periastron_bjd)) / period_d))


def mean_anomaly_from_time_of_conjunction(
    conjunction_bjd: Array, period_d: Array, eccentricity: Array, omega_star_rad: Array, epoch_bjd: float
) -> Array:
    """Mean anomaly at the epoch of a planet that has an inferior conjunction (the transit side) at this time."""
    since = mean_anomaly_from_time_of_periastron(conjunction_bjd, period_d, epoch_bjd)
    return wrapped_rad(since + mean_anomaly_at_inferior_conjunction(eccentricity, omega_star_rad))


def mean_anomaly_from_mean_longitude(
    mean_longitude_rad: Array, omega_rad: Array, node_rad: Array | float = 0.0
) -> Array:
    """Mean anomaly of a mean longitude, M = lambda - node - omega.

    Longitude and omega belong to the same body: both the star's, or both the planet's. Give the node only where the
    longitude was measured from a reference direction on the sky; else it is measured from the node.
    """
    return wrapped_rad(mean_longitude_rad - omega_rad - node_rad)


def mean_longitude_from_mean_anomaly(mean_anomaly_rad: Array, omega_rad: Array, node_rad: Array | float = 0.0) -> Array:
    """Undo ``mean_anomaly_from_mean_longitude``; the longitude is that of the body whose omega is given."""
    return wrapped_rad(mean_anomaly_rad + omega_rad + node_rad)


def time_of_periastron_from_mean_anomaly(mean_anomaly_rad: Array, period_d: Array, epoch_bjd: float) -> Array:
    """First passage of periastron at or after the epoch, in BJD, along the Keplerian orbit."""
    return np.asarray(epoch_bjd + period_d * (wrapped_rad(-mean_anomaly_rad) / TWO_PI))


def time_of_conjunction_from_mean_anomaly(
    mean_anomaly_rad: Array, period_d: Array, eccentricity: Array, omega_star_rad: Array, epoch_bjd: float
) -> Array:
    """First inferior conjunction at or after the epoch, in BJD, along the Keplerian orbit."""
    at_conjunction = mean_anomaly_at_inferior_conjunction(eccentricity, omega_star_rad)
    return time_of_periastron_from_mean_anomaly(mean_anomaly_rad - at_conjunction, period_d, epoch_bjd)


def inclination_and_node_from_tilted_plane(
    common_inclination_rad: Array, tilt_rad: Array, direction_rad: Array
) -> tuple[Array, Array]:
    """Inclination to the sky and node of an orbit that is tilted against a common plane.

    Parameters
    ----------
    common_inclination_rad : array
        Inclination of the common plane; its node is the origin of nodes.
    tilt_rad : array
        Angle between the orbit and the common plane.
    direction_rad : array
        Node of the orbit measured in the common plane, uniform if nothing is known.

    Returns
    -------
    (inclination in rad, node in rad)
        Inclination in [0, pi], node in [0, 2 pi); both are the common plane's where the tilt is 0.
    """
    sideways, forward = np.sin(tilt_rad) * np.sin(direction_rad), -np.sin(tilt_rad) * np.cos(direction_rad)
    upward = np.cos(tilt_rad)
    sine, cosine = np.sin(common_inclination_rad), np.cos(common_inclination_rad)
    return inclination_and_node_from_normal(
        sideways, forward * cosine - upward * sine, forward * sine + upward * cosine
    )


def mutual_inclination(
    inclination_1_rad: Array, node_1_rad: Array, inclination_2_rad: Array, node_2_rad: Array
) -> Array:
    """Angle between two orbital planes, in [0, pi].

    Not the arccosine of the scalar product: near 0 that loses half the digits, and most systems are nearly coplanar.
    """
    sin_1, cos_1 = np.sin(inclination_1_rad), np.cos(inclination_1_rad)
    sin_2, cos_2 = np.sin(inclination_2_rad), np.cos(inclination_2_rad)
    apart = node_2_rad - node_1_rad
    along = sin_2 * np.sin(apart)
    across = cos_1 * sin_2 * np.cos(apart) - sin_1 * cos_2
    shared = sin_1 * sin_2 * np.cos(apart) + cos_1 * cos_2
    return np.asarray(np.arctan2(np.sqrt(along * along + across * across), shared))


def _fraction(turns: Array) -> Array:
    """What is left of a number of turns, so that 2 pi multiplies a number below 1 and not thousands of orbits."""
    return np.asarray(turns - np.floor(turns))
