"""Line-of-sight velocity of the star: the Keplerian sum, the N-body curve, and how far the two are apart.

z points away from the observer, so a receding star has positive velocity. Times count from the epoch.
"""

import signal
import threading
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from stabcheck.arrays import Array
from stabcheck.build import States, simulation, states
from stabcheck.constants import M_S_AU_D, TWO_PI
from stabcheck.orbit import omega_star_from_omega_planet, true_anomaly_from_mean_anomaly

if TYPE_CHECKING:
    from stabcheck.ensemble import Ensemble

DEPARTURE_TIMES = 2048
"""Times at which ``departure_m_s`` compares; a golden-ratio sequence, which beats with no period of a planet."""

SMALLEST_STEP_ORBITS = 1e-6
"""Two bodies that start all but on top of one another stop IAS15 for ever; no step gets smaller than this share of the
shortest period. Orbits with e = 0.99 need steps of some 1e-5 periods, so nothing that is an orbit is cut short."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Departure:
    """How far the N-body velocity curve departs from the Keplerian sum, without a constant offset."""

    rms_m_s: float
    largest_m_s: float
    """Largest at the times compared; the true maximum can be slightly larger."""


def keplerian_velocity_m_s(
    time_d: Array,
    *,
    period_d: Array,
    eccentricity: Array,
    omega_star_rad: Array,
    mean_anomaly_rad: Array,
    semi_amplitude_m_s: Array,
) -> Array:
    """Sum of Keplerian velocity curves, K [cos(omega_star + f) + e cos omega_star] for each planet.

    Parameters
    ----------
    time_d : (time,) array
        Days since the epoch.
    period_d, eccentricity, omega_star_rad, mean_anomaly_rad, semi_amplitude_m_s : (planet,) arrays
        Mean anomaly at the epoch.

    Returns
    -------
    (time,) array
        Velocity of the star in m/s, positive away from the observer, relative to the system.

    References
    ----------
    Lovis, C. & Fischer, D. (2010), in Exoplanets (ed. Seager), section 2.
    """
    total = np.zeros(np.shape(time_d))
    for planet in range(len(period_d)):
        e, omega = eccentricity[planet], omega_star_rad[planet]
        mean_anomaly = mean_anomaly_rad[planet] + TWO_PI * np.asarray(time_d) / period_d[planet]
        true_anomaly = true_anomaly_from_mean_anomaly(mean_anomaly, e)
        total = total + semi_amplitude_m_s[planet] * (np.cos(omega + true_anomaly) + e * np.cos(omega))
    return total


def nbody_velocity_m_s(states: States, row: int, time_d: Array, smallest_step_d: float = 0.0) -> Array:
    """Velocity of the star in the N-body system, Newtonian, by IAS15.

    Parameters
    ----------
    states : States
    row : int
        Place in ``states``.
    time_d : (time,) array
        Days since the epoch, in any order, negative ones too.
    smallest_step_d : float
        Keeps nearly coincident bodies from stopping the integration; 0 leaves the step to IAS15.

    Returns
    -------
    (time,) array
        In m/s, positive away from the observer; NaN where the state is not finite, and throughout if IAS15 warns (a
        close encounter below the smallest step): what it gives then is not to be relied on.
    """
    times = np.asarray(time_d, dtype=np.float64)
    velocity = np.full(times.shape, np.nan)
    if not np.all(np.isfinite(states.position_au[row])):  # REBOUND would integrate NaN to the end without a word
        return velocity
    for side in (np.flatnonzero(times >= 0.0), np.flatnonzero(times < 0.0)):
        outwards = side[np.argsort(np.abs(times[side]), kind="stable")]
        sim = simulation(states, row)
        sim.integrator = "ias15"
        sim.integrator.min_dt = smallest_step_d
        with interruptible(), warnings.catch_warnings(record=True) as said:
            warnings.simplefilter("always")
            for place in outwards:
                sim.integrate(float(times[place]))
                velocity[place] = sim.particles[0].vz / M_S_AU_D
        if said:
            return np.full(times.shape, np.nan)
    return velocity


@contextmanager
def interruptible() -> Iterator[None]:
    """Give Ctrl-C back to Python: each integrate() of REBOUND leaves its own handler for it installed."""
    handler = signal.getsignal(signal.SIGINT)
    try:
        yield
    finally:
        if handler is not None and threading.current_thread() is threading.main_thread():
            signal.signal(signal.SIGINT, handler)


def departure_m_s(ensemble: "Ensemble", row: int, data_span_d: float, built: States | None = None) -> Departure:
    """Measure how far a draw's N-body velocity curve departs from its Keplerian sum over the time span of the data.

    Elements of a Keplerian fit are taken as osculating at the epoch when a system is built; over the span the planets
    perturb one another and the draw no longer fits exactly. This is by how much.

    Parameters
    ----------
    ensemble : Ensemble
    row : int
        Place in the ensemble.
    data_span_d : float
        The span is centred on the epoch.
    built : States, optional
        The states of this ensemble, if they are there already.

    Returns
    -------
    Departure
        NaN for a draw that is not an orbit.
    """
    times = data_span_d * (np.sort(np.mod(np.arange(DEPARTURE_TIMES) * 0.5 * (np.sqrt(5.0) - 1.0), 1.0)) - 0.5)
    smallest = SMALLEST_STEP_ORBITS * float(np.min(ensemble.period_d[row]))
    nbody = nbody_velocity_m_s(built if built is not None else states(ensemble), row, times, smallest)
    apart = nbody - keplerian_velocity_m_s(
        times,
        period_d=ensemble.period_d[row],
        eccentricity=ensemble.eccentricity[row],
        omega_star_rad=omega_star_from_omega_planet(ensemble.omega_planet_rad[row]),
        mean_anomaly_rad=ensemble.mean_anomaly_rad[row],
        semi_amplitude_m_s=ensemble.semi_amplitude_m_s[row],
    )
    apart = apart - np.mean(apart)
    return Departure(rms_m_s=float(np.sqrt(np.mean(apart * apart))), largest_m_s=float(np.max(np.abs(apart))))
