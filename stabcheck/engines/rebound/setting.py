"""What does not change while a draw is followed: masses, scales, first orbits, and the grid of samples."""

import math
from dataclasses import dataclass

import numpy as np

from stabcheck.arrays import Array
from stabcheck.constants import GM_SUN_AU3_D2, TWO_PI
from stabcheck.engines.rebound.kernels import energy, jacobi_elements
from stabcheck.engines.rebound.relativity import STRENGTH
from stabcheck.method import STAR_LIKE
from stabcheck.plan import Plan, Task

STEPS_PER_SAMPLE = 4
"""A sample grid finer than this many steps of the map would only repeat itself."""


@dataclass(frozen=True, slots=True)
class Setting:
    """The constants of one draw.

    Attributes
    ----------
    mass : (body,) array, solar masses
    state : (body, 6) array, au and au/d
        At the start.
    pair_scale : (body, body) array
        ((m_i + m_j)/3M)^{2/3}/4: times (r_i + r_j)² the square of the momentary mutual Hill radius. 0 where a pair
        holds a star-like body: it has no mutual Hill radius that would mean anything.
    radius : (body,) array, au
    touch : (body, body) array, au
        Sum of the radii of two bodies that both have one, else 0.
    a_au, eccentricity, period_d : (planet,) array
        First osculating Jacobi orbits.
    axis_limits, ordered : arrays
        The rule for "rearranged", as the kernel reads it.
    basis : (3, 3) array
        Axes of the invariable plane and its normal.
    energy, orbit_energy : float
        Total energy, and the smallest orbital energy among the planets, au² solar masses / d².
    relativity_strength : float
        A of ``relativity``, 0 without.
    intervals : int
    interval_d : float
        The sample grid: ``intervals`` of ``interval_d`` make the span.
    ejection_au : float
    longest_period_d : float
        Of the planets; a hand-over goes back at least this far.
    """

    mass: Array
    state: Array
    pair_scale: Array
    radius: Array
    touch: Array
    a_au: Array
    eccentricity: Array
    period_d: Array
    axis_limits: Array
    ordered: Array
    basis: Array
    energy: float
    orbit_energy: float
    relativity_strength: float
    intervals: int
    interval_d: float
    ejection_au: float
    longest_period_d: float

    @property
    def largest_mass_ratio(self) -> float:
        """Largest planet-to-star mass ratio, at most that of a star-like body."""
        return min(float(np.max(self.mass[1:])) / float(self.mass[0]), STAR_LIKE)

    def effective_period_d(self, a_au: Array, eccentricity: Array) -> float:
        """Give the shortest effective period at periastron for these axes and eccentricities (Wisdom 2015)."""
        return float(np.min(_effective_periods_d(a_au, eccentricity, self.mass)))


def one_planet() -> Task:
    """Make the task to follow a Jupiter at 1 au for a year."""
    speed = math.sqrt(GM_SUN_AU3_D2)
    return Task(
        number=0,
        mass_msun=np.array([1.0, 1e-3]),
        radius_au=np.zeros(2),
        position_au=np.array([[-1e-3, 0.0, 0.0], [0.999, 0.0, 0.0]]),
        velocity_au_d=np.array([[0.0, -1e-3 * speed, 0.0], [0.0, 0.999 * speed, 0.0]]),
        span_d=365.25,
    )


def setting_of(task: Task, plan: Plan) -> Setting:
    """Work out the constants of a draw from its task."""
    state = np.concatenate([task.position_au, task.velocity_au_d], axis=1)
    mass = np.ascontiguousarray(task.mass_msun)
    a_au, eccentricity = _first_orbits(state, mass)
    inside = np.cumsum(mass)[1:]
    period = TWO_PI * np.sqrt(np.abs(a_au) ** 3 / (GM_SUN_AU3_D2 * inside))
    strength = STRENGTH if plan.relativity else 0.0
    step = float(np.min(_effective_periods_d(a_au, eccentricity, mass))) / plan.steps_per_periastron
    intervals, interval_d = _grid(task.span_d, step, plan.samples)
    ejection = plan.ejection_distance_au
    if math.isnan(ejection):
        ejection = plan.ejection_axes * float(np.max(np.abs(a_au)))
    planets = mass[1:] < STAR_LIKE * mass[0]
    longest = float(np.max(period[planets])) if np.any(planets) else float(np.max(period))
    return Setting(
        mass=mass,
        state=state,
        pair_scale=_pair_scale(mass),
        radius=np.ascontiguousarray(task.radius_au),
        touch=_touch(task.radius_au),
        a_au=a_au,
        eccentricity=eccentricity,
        period_d=period,
        axis_limits=np.stack(
            [1.0 / (a_au * (1.0 + plan.rearranged_share)), _upper(a_au, plan.rearranged_share)], axis=1
        ),
        ordered=_ordered(a_au, mass),
        basis=_invariable_basis(state, mass),
        energy=float(energy(state, mass, strength)),
        orbit_energy=_least_orbit_energy(a_au, mass),
        relativity_strength=strength,
        intervals=intervals,
        interval_d=interval_d,
        ejection_au=ejection,
        longest_period_d=longest,
    )


def _first_orbits(state: Array, mass: Array) -> tuple[Array, Array]:
    elements = np.empty((mass.size - 1, 2))
    jacobi_elements(state, mass, np.empty(mass.size), elements)
    return 1.0 / elements[:, 0], np.sqrt(elements[:, 1])


def _least_orbit_energy(a_au: Array, mass: Array) -> float:
    heavy = mass[1:] > 0.0  # a massless body has no energy to compare with
    if not np.any(heavy):
        return math.nan
    return float(np.min(np.abs(0.5 * GM_SUN_AU3_D2 * mass[1:][heavy] * mass[0] / a_au[heavy])))


def _effective_periods_d(a_au: Array, eccentricity: Array, mass: Array) -> Array:
    """Effective periods at periastron; an orbit that is open, or all but open, counts as one of e = 0.999.

    Such an orbit is followed by an adaptive method, which takes from here only its first guess of a step.
    """
    e = np.minimum(eccentricity, 0.999)
    period = TWO_PI * np.sqrt(np.abs(a_au) ** 3 / (GM_SUN_AU3_D2 * np.cumsum(mass)[1:]))
    return np.asarray(period * np.sqrt((1.0 - e) ** 3 / (1.0 + e)))


def _grid(span_d: float, step_d: float, samples: int) -> tuple[int, float]:
    """Sample grid: a power of two, at most ``samples``, with a few steps of the map in each interval."""
    most = max(int(min(span_d / (STEPS_PER_SAMPLE * step_d), samples)), 1)
    intervals = 1 << (most.bit_length() - 1)
    return intervals, span_d / intervals


def _pair_scale(mass: Array) -> Array:
    pair = mass[:, None] + mass[None, :]
    scale = np.cbrt(pair / (3.0 * mass[0])) ** 2 / 4.0
    scale[pair > STAR_LIKE * mass[0]] = 0.0
    return np.asarray(scale)


def _touch(radius_au: Array) -> Array:
    both = (radius_au[:, None] > 0.0) & (radius_au[None, :] > 0.0)
    touch = np.where(both, radius_au[:, None] + radius_au[None, :], 0.0)
    star = radius_au[0]
    touch[0, 1:] = touch[1:, 0] = np.where(star > 0.0, star + radius_au[1:], 0.0)
    return np.asarray(touch)


def _upper(a_au: Array, share: float) -> Array:
    return 1.0 / (a_au * (1.0 - share)) if share < 1.0 else np.full(a_au.size, np.inf)


def _ordered(a_au: Array, mass: Array) -> Array:
    """Neighbours whose order is watched: those that start further apart than a mutual Hill radius, in order."""
    hill = np.cbrt((mass[1:-1] + mass[2:]) / (3.0 * mass[0])) * 0.5 * (a_au[:-1] + a_au[1:])
    return np.asarray(a_au[1:] - a_au[:-1] > hill, dtype=np.float64)


def _cross(a: Array, b: Array) -> Array:
    """The vector product; NumPy's own takes 30 µs for two vectors."""
    (ax, ay, az), (bx, by, bz) = a.tolist(), b.tolist()
    return np.array([ay * bz - az * by, az * bx - ax * bz, ax * by - ay * bx])


def _invariable_basis(state: Array, mass: Array) -> Array:
    momentum = np.zeros(3)
    for body in range(mass.size):
        momentum += mass[body] * _cross(state[body, :3], state[body, 3:])
    length = math.sqrt(float(momentum @ momentum))
    up = momentum / length if length > 0.0 else np.array([0.0, 0.0, 1.0])
    helper = np.eye(3)[int(np.argmin(np.abs(up)))]
    first = _cross(helper, up)
    first /= math.sqrt(float(first @ first))
    return np.ascontiguousarray(np.stack([first, _cross(up, first), up]))
