"""From the states along one draw's way to what one looks at: elements, apsidal and resonant angles, distances.

Elements refer to the sky and to the frame of the scenario. Angles that compare two orbits are taken in the invariable
plane instead, where a longitude ϖ = node + ω means a direction: on the sky, two orbits seen edge on have nodes that
mutual inclination alone moves apart. An orbit retrograde to that plane has no such longitude, and NaN stands there.
"""

from dataclasses import dataclass

import numpy as np

from stabcheck.arrays import Array
from stabcheck.constants import GM_SUN_AU3_D2, TWO_PI
from stabcheck.kepler import Elements, elements_from_state, wrapped_rad
from stabcheck.masses import orbit_masses_msun
from stabcheck.resonance import Resonance, nearest_resonance


@dataclass(frozen=True, slots=True, kw_only=True)
class PairSeries:
    """Two neighbours along the way.

    Attributes
    ----------
    inner, outer : int
        Places among the planets.
    distance_hill : (time,) array
        Momentary distance in momentary mutual Hill radii.
    apsidal_difference_rad : (time,) array
        ϖ of the outer minus ϖ of the inner orbit, in [0, 2 pi).
    resonance : Resonance or None
        Nearest to the median ratio of the periods.
    angles_rad : tuple of (time,) arrays
        Its angles k = 0 ... order; empty without a resonance.
    """

    inner: int
    outer: int
    distance_hill: Array
    apsidal_difference_rad: Array
    resonance: Resonance | None
    angles_rad: tuple[Array, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Encounter:
    """Two bodies step by step around the time that mattered.

    Attributes
    ----------
    first, second : int
        Bodies; 0 is the star.
    at_d : float
        The time that mattered.
    time_d, distance_au, distance_hill : (step,) arrays
        At the ends of steps; the last in mutual Hill radii, NaN against the star.
    touch_au : float
        Sum of the radii; 0 if one of the two is a point.
    """

    first: int
    second: int
    at_d: float
    time_d: Array
    distance_au: Array
    distance_hill: Array
    touch_au: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Series:
    """What one looks at along the way of a draw.

    Attributes
    ----------
    time_d : (time,) array
    bodies : tuple of str
        Planets from the inside out, a companion star last.
    elements : Elements
        (time, planet) arrays in the scenario's frame. Of an unbound orbit only axis (negative), eccentricity,
        inclination and node are finite.
    pairs : tuple of PairSeries
        Neighbours.
    """

    time_d: Array
    bodies: tuple[str, ...]
    elements: Elements
    pairs: tuple[PairSeries, ...]

    @property
    def mean_longitude_rad(self) -> Array:
        """Node + omega of the planet + mean anomaly, (time, planet)."""
        one = self.elements
        return wrapped_rad(one.node_rad + one.omega_planet_rad + one.mean_anomaly_rad)


def series_of(frame: str, bodies: tuple[str, ...], mass_msun: Array, time_d: Array, state: Array) -> Series:
    """Work out elements, angles and distances along the way.

    Parameters
    ----------
    frame : str
        ``"jacobi"`` or ``"astrocentric"``.
    bodies : tuple of str
        Without the star.
    mass_msun : (body,) array
        Star first.
    time_d : (time,) array
    state : (time, body, 6) array
        Position in au and velocity in au/d.

    Returns
    -------
    Series
    """
    lengthways = relative_states(frame, mass_msun, state)
    gm = GM_SUN_AU3_D2 * orbit_masses_msun(frame, mass_msun[:1], mass_msun[None, 1:])[0]
    elements = elements_from_state(gm, lengthways[..., :3], lengthways[..., 3:])
    level = _turned(lengthways, _invariable_axes(mass_msun, state[0]))
    flat = elements_from_state(gm, level[..., :3], level[..., 3:])
    apsis = wrapped_rad(flat.node_rad + flat.omega_planet_rad)
    apsis = np.where(flat.inclination_rad < 0.5 * np.pi, apsis, np.nan)
    longitude = wrapped_rad(apsis + flat.mean_anomaly_rad)
    with np.errstate(invalid="ignore"):
        period = TWO_PI * np.sqrt(elements.semi_major_axis_au**3 / gm)
    pairs = []
    for k in range(len(bodies) - 1):
        both = slice(k, k + 2)
        ratio = period[:, k + 1] / period[:, k]
        resonance = nearest_resonance(float(np.nanmedian(ratio))) if np.any(np.isfinite(ratio)) else None
        pairs.append(
            PairSeries(
                inner=k,
                outer=k + 1,
                distance_hill=distance_hill(mass_msun, state, k + 1, k + 2),
                apsidal_difference_rad=wrapped_rad(apsis[:, k + 1] - apsis[:, k]),
                resonance=resonance,
                angles_rad=tuple(
                    resonance.angle_rad(angle, longitude[:, both], apsis[:, both])
                    for angle in range(resonance.order + 1)
                )
                if resonance
                else (),
            )
        )
    return Series(time_d=time_d, bodies=bodies, elements=elements, pairs=tuple(pairs))


def encounter_of(
    mass_msun: Array, radius_au: Array, pair: tuple[int, int], at_d: float, time_d: Array, state: Array
) -> Encounter:
    """Look at two bodies along steps that were all kept.

    Parameters
    ----------
    mass_msun, radius_au : (body,) arrays
    pair : (first, second)
        Bodies, the inner first; 0 is the star.
    at_d : float
    time_d : (step,) array
    state : (step, body, 6) array
    """
    first, second = pair
    radii = float(radius_au[first]), float(radius_au[second])
    hill = np.full(time_d.shape, np.nan) if first == 0 else distance_hill(mass_msun, state, first, second)
    return Encounter(
        first=first,
        second=second,
        at_d=at_d,
        time_d=time_d,
        distance_au=distance_au(state, first, second),
        distance_hill=hill,
        touch_au=sum(radii) if min(radii) > 0.0 else 0.0,
    )


def relative_states(frame: str, mass_msun: Array, state: Array) -> Array:
    """Give each planet's state about what its elements are about.

    Parameters
    ----------
    frame : str
        ``"jacobi"``: the centre of mass of the star and the planets before it; ``"astrocentric"``: the star.
    mass_msun : (body,) array
    state : (time, body, 6) array

    Returns
    -------
    (time, planet, 6) array
    """
    result = np.empty_like(state[:, 1:])
    centre, inside = state[:, 0], mass_msun[0]
    for k in range(1, state.shape[1]):
        result[:, k - 1] = state[:, k] - centre
        if frame == "jacobi":
            inside = inside + mass_msun[k]
            centre = centre + (mass_msun[k] / inside) * result[:, k - 1]
    return result


def distance_hill(mass_msun: Array, state: Array, first: int, second: int) -> Array:
    """Distance of two bodies in mutual Hill radii, ((m₁ + m₂)/3M)^{1/3} (r₁ + r₂)/2, both momentary.

    Parameters
    ----------
    mass_msun : (body,) array
    state : (time, body, 6) array
    first, second : int
        Bodies; 0 is the star.

    Returns
    -------
    (time,) array
        r is the distance from the centre of mass of the star and the planets before, as the engine has it.
    """
    about = relative_states("jacobi", mass_msun, state)
    hill = np.cbrt((mass_msun[first] + mass_msun[second]) / (3.0 * mass_msun[0]))
    mean = 0.5 * (_length(about[:, first - 1]) + _length(about[:, second - 1]))
    return np.asarray(_length(state[:, second] - state[:, first]) / (hill * mean))


def distance_au(state: Array, first: int, second: int) -> Array:
    """Distance of two bodies."""
    return _length(state[:, second] - state[:, first])


def _length(vector: Array) -> Array:
    x, y, z = (vector[..., axis] for axis in range(3))
    return np.asarray(np.sqrt(x * x + y * y + z * z))


def _invariable_axes(mass_msun: Array, state: Array) -> Array:
    """Rows: two axes of the invariable plane and its normal; the sky's where nothing turns."""
    momentum = np.zeros(3)
    for body in range(mass_msun.size):
        momentum = momentum + mass_msun[body] * np.cross(state[body, :3], state[body, 3:])
    length = float(_length(momentum))
    if not length > 0.0:
        return np.eye(3)
    up = momentum / length
    sideways = np.cross(np.eye(3)[int(np.argmin(np.abs(up)))], up)
    sideways = sideways / _length(sideways)
    return np.stack([sideways, np.cross(up, sideways), up])


def _turned(state: Array, axes: Array) -> Array:
    parts = (state[..., first : first + 3] @ axes.T for first in (0, 3))
    return np.concatenate(list(parts), axis=-1)
