"""Two bodies: anomalies, and elements to and from position and velocity. Everything is elementwise.

Angles of an orbit are the planet's. The sky frame has z pointing away from the observer, so a body at argument of
latitude omega + f stands at z = r sin(omega + f) sin i: at f = 90° - omega it is behind the star.

Nothing here sums along an axis or calls BLAS, and columns are copied before transcendental functions see them: some
of NumPy's loops round differently for strided input, and a row must not depend on how many rows stand beside it.
"""

from dataclasses import dataclass

import numpy as np

from stabcheck.arrays import Array, DrawPlanet, PerDraw
from stabcheck.constants import TWO_PI


@dataclass(frozen=True, slots=True, kw_only=True)
class Elements:
    """Orbital elements of one kind of frame, arrays of one shape; angles in [0, 2 pi), omega is the planet's."""

    semi_major_axis_au: Array
    eccentricity: Array
    inclination_rad: Array
    node_rad: Array
    omega_planet_rad: Array
    mean_anomaly_rad: Array


def column(values: DrawPlanet, planet: int) -> PerDraw:
    """Copy one planet's column so that it lies contiguous in memory (see the head of this file)."""
    return np.ascontiguousarray(values[:, planet])


def wrapped_rad(angle_rad: Array) -> Array:
    """Bring angles to [0, 2 pi); the remainder of a tiny negative angle alone would round up to 2 pi."""
    with np.errstate(invalid="ignore"):
        turned: Array = np.mod(angle_rad, TWO_PI)
        return np.where(turned >= TWO_PI, 0.0, turned)


def eccentric_anomaly_from_mean_anomaly(mean_anomaly_rad: Array, eccentricity: Array) -> Array:
    """Solve Kepler's equation with a fixed number of operations.

    Parameters
    ----------
    mean_anomaly_rad, eccentricity : arrays that broadcast
        Any turn; 0 <= e < 1.

    Returns
    -------
    array
        Eccentric anomaly in the same turn as the mean anomaly, NaN outside 0 <= e < 1. Absolute error below 1e-13 for
        e <= 0.99 and 1e-11 for e <= 0.999 within the first turns (measured over a dense grid in the tests); far away
        from zero it is that of the mean anomaly itself.

    References
    ----------
    Markley, F. L. (1995), Celestial Mechanics and Dynamical Astronomy 63, 101: a cubic for the start, good to
    a few 1e-4 of E, and one fifth-order step. A Newton step follows here, which removes the rounding of the
    cubic at high eccentricity.
    """
    with np.errstate(invalid="ignore", over="ignore", divide="ignore"):
        turns = np.rint(np.asarray(mean_anomaly_rad) / TWO_PI)
        reduced = mean_anomaly_rad - turns * TWO_PI
        inside = (np.asarray(eccentricity) >= 0.0) & (np.asarray(eccentricity) < 1.0)
        e = np.where(inside, eccentricity, np.nan)
        guess = _markley_start_rad(reduced, e)
        guess = guess + _fifth_order_step_rad(guess, reduced, e)
        guess = guess - (guess - e * np.sin(guess) - reduced) / (1.0 - e * np.cos(guess))
        return np.asarray(guess + turns * TWO_PI)


def _markley_start_rad(m: Array, e: Array) -> Array:
    # Markley (1995) eqs. 15-20; letters are the paper's
    alpha = (3.0 * np.pi**2 + 1.6 * np.pi * (np.pi - np.abs(m)) / (1.0 + e)) / (np.pi**2 - 6.0)
    d = 3.0 * (1.0 - e) + alpha * e
    r = 3.0 * alpha * d * (d - 1.0 + e) * m + m * m * m
    q = 2.0 * alpha * d * (1.0 - e) - m * m
    root = np.cbrt(np.abs(r) + np.sqrt(q * q * q + r * r))
    w = root * root
    return np.asarray((2.0 * r * w / (w * w + w * q + q * q) + m) / d)


def _fifth_order_step_rad(guess: Array, m: Array, e: Array) -> Array:
    # Markley (1995) eqs. 21-27: f0 and its derivatives, then corrections of rising order
    sine, cosine = e * np.sin(guess), e * np.cos(guess)
    f0, f1 = guess - sine - m, 1.0 - cosine
    d3 = -f0 / (f1 - 0.5 * f0 * sine / f1)
    d4 = -f0 / (f1 + 0.5 * d3 * sine + d3 * d3 * cosine / 6.0)
    return np.asarray(-f0 / (f1 + 0.5 * d4 * sine + d4 * d4 * cosine / 6.0 - d4 * d4 * d4 * sine / 24.0))


def true_anomaly_from_eccentric_anomaly(eccentric_anomaly_rad: Array, eccentricity: Array) -> Array:
    """True anomaly in the same turn, by the half-angle form that has no pole (Broucke & Cefola 1973, CeMec 7, 388)."""
    e = np.asarray(eccentricity)
    with np.errstate(invalid="ignore", divide="ignore"):
        beta = e / (1.0 + np.sqrt((1.0 - e) * (1.0 + e)))
        lead = beta * np.sin(eccentric_anomaly_rad) / (1.0 - beta * np.cos(eccentric_anomaly_rad))
        return np.asarray(eccentric_anomaly_rad + 2.0 * np.arctan(lead))


def eccentric_anomaly_from_true_anomaly(true_anomaly_rad: Array, eccentricity: Array) -> Array:
    """Undo ``true_anomaly_from_eccentric_anomaly``, in the same turn."""
    e = np.asarray(eccentricity)
    with np.errstate(invalid="ignore", divide="ignore"):
        beta = e / (1.0 + np.sqrt((1.0 - e) * (1.0 + e)))
        lag = beta * np.sin(true_anomaly_rad) / (1.0 + beta * np.cos(true_anomaly_rad))
        return np.asarray(true_anomaly_rad - 2.0 * np.arctan(lag))


def true_anomaly_from_mean_anomaly(mean_anomaly_rad: Array, eccentricity: Array) -> Array:
    """True anomaly in the same turn as the mean anomaly."""
    eccentric = eccentric_anomaly_from_mean_anomaly(mean_anomaly_rad, eccentricity)
    return true_anomaly_from_eccentric_anomaly(eccentric, eccentricity)


def mean_anomaly_from_true_anomaly(true_anomaly_rad: Array, eccentricity: Array) -> Array:
    """Mean anomaly in the same turn as the true anomaly."""
    eccentric = eccentric_anomaly_from_true_anomaly(true_anomaly_rad, eccentricity)
    return np.asarray(eccentric - eccentricity * np.sin(eccentric))


def state_from_elements(gm_au3_d2: Array, elements: Elements) -> tuple[Array, Array]:
    """Position and velocity relative to whatever the elements are relative to.

    Parameters
    ----------
    gm_au3_d2 : array
        G times the mass that the frame gives this orbit.
    elements : Elements
        Of the same shape.

    Returns
    -------
    (position in au, velocity in au/d) : arrays with a last axis of 3
        NaN where any element is NaN or e is outside [0, 1).
    """
    a, e = elements.semi_major_axis_au, elements.eccentricity
    eccentric = eccentric_anomaly_from_mean_anomaly(elements.mean_anomaly_rad, e)
    sine, cosine = np.sin(eccentric), np.cos(eccentric)
    with np.errstate(invalid="ignore", divide="ignore"):
        flattening = np.sqrt((1.0 - e) * (1.0 + e))
        speed = np.sqrt(gm_au3_d2 / a) / (1.0 - e * cosine)
        position = _rotated(elements, a * (cosine - e), a * flattening * sine)
        velocity = _rotated(elements, -speed * sine, speed * flattening * cosine)
    return position, velocity


def _rotated(elements: Elements, along: Array, across: Array) -> Array:
    """Turn (towards periastron, a quarter turn ahead of it) into the sky frame."""
    sin_omega, cos_omega = np.sin(elements.omega_planet_rad), np.cos(elements.omega_planet_rad)
    from_node = along * cos_omega - across * sin_omega
    ahead = along * sin_omega + across * cos_omega
    sin_i, cos_i = np.sin(elements.inclination_rad), np.cos(elements.inclination_rad)
    sin_node, cos_node = np.sin(elements.node_rad), np.cos(elements.node_rad)
    x = cos_node * from_node - sin_node * cos_i * ahead
    y = sin_node * from_node + cos_node * cos_i * ahead
    return np.stack([x, y, sin_i * ahead], axis=-1)


def elements_from_state(gm_au3_d2: Array, position_au: Array, velocity_au_d: Array) -> Elements:
    """Osculating elements of a relative state.

    Parameters
    ----------
    gm_au3_d2 : array
        G times the mass that the frame gives this orbit.
    position_au, velocity_au_d : arrays with a last axis of 3

    Returns
    -------
    Elements
        Of an unbound orbit only axis (negative), eccentricity, inclination and node are finite. A planar orbit has
        node 0, a circular one has its periastron where the body is, so that sums of angles always mean something.
    """
    x, y, z = (np.ascontiguousarray(position_au[..., axis]) for axis in range(3))
    vx, vy, vz = (np.ascontiguousarray(velocity_au_d[..., axis]) for axis in range(3))
    with np.errstate(invalid="ignore", divide="ignore"):
        r = np.sqrt(x * x + y * y + z * z)
        radial = x * vx + y * vy + z * vz
        a = 1.0 / (2.0 / r - (vx * vx + vy * vy + vz * vz) / gm_au3_d2)
        e_cos = 1.0 - r / a
        e = np.sqrt(e_cos * e_cos + radial * radial / (gm_au3_d2 * a))
        e_sin = radial / np.sqrt(gm_au3_d2 * a)
        hx, hy, hz = y * vz - z * vy, z * vx - x * vz, x * vy - y * vx
        inclination, node = inclination_and_node_from_normal(hx, hy, hz)
        latitude = _argument_of_latitude_rad(x, y, z, inclination, node)
        eccentric = np.arctan2(e_sin, e_cos)
        true = true_anomaly_from_eccentric_anomaly(eccentric, e)
    return Elements(
        semi_major_axis_au=a,
        eccentricity=e,
        inclination_rad=inclination,
        node_rad=node,
        omega_planet_rad=wrapped_rad(latitude - true),
        mean_anomaly_rad=wrapped_rad(eccentric - e_sin),
    )


def inclination_and_node_from_normal(nx: Array, ny: Array, nz: Array) -> tuple[Array, Array]:
    """Inclination and node of the plane with this normal, of any length; node 0 where the plane is the sky's.

    The inclination comes from an arctangent, not from arccos(nz): near 0 that loses half the digits.
    """
    sideways = np.sqrt(nx * nx + ny * ny)
    return np.arctan2(sideways, nz), wrapped_rad(np.where(sideways == 0.0, 0.0, np.arctan2(nx, -ny)))


def _argument_of_latitude_rad(x: Array, y: Array, z: Array, inclination: Array, node: Array) -> Array:
    sin_node, cos_node = np.sin(node), np.cos(node)
    ahead = np.cos(inclination) * (cos_node * y - sin_node * x) + np.sin(inclination) * z
    return np.asarray(np.arctan2(ahead, cos_node * x + sin_node * y))
