"""Planets, neighbours and the other reading of the frame, from the one row of central values."""

import math
from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from stabcheck.arrays import Array
from stabcheck.build import States, states
from stabcheck.constants import DEGREE_RAD, GM_SUN_AU3_D2
from stabcheck.criteria.hill import separation_hill
from stabcheck.ensemble import Ensemble
from stabcheck.kepler import Elements, elements_from_state
from stabcheck.masses import orbit_masses_msun, period_d_from_semi_major_axis_au, semi_major_axis_au_from_period_d
from stabcheck.orbit import (
    mutual_inclination,
    omega_star_from_omega_planet,
    time_of_conjunction_from_mean_anomaly,
    time_of_periastron_from_mean_anomaly,
)
from stabcheck.preview.parts import FrameFacts, PairFacts, PlanetFacts
from stabcheck.scenario import Frame

HIGHEST_ORDER = 3
LARGEST_Q = 6
RESONANCES = tuple(
    (q + order, q)
    for order in range(1, HIGHEST_ORDER + 1)
    for q in range(1, LARGEST_Q + 1)
    if math.gcd(q + order, q) == 1
)
"""Period ratios p:q that are looked at, low orders first."""
FARTHEST_OFFSET = 0.1
"""Beyond this share no p:q is named: it would say nothing."""


def planets_of(row: Ensemble, epoch_bjd: float) -> tuple[PlanetFacts, ...]:
    """Describe each body of the first row; times are counted from ``epoch_bjd``."""
    omega_star = omega_star_from_omega_planet(row.omega_planet_rad)
    conjunction = time_of_conjunction_from_mean_anomaly(
        row.mean_anomaly_rad, row.period_d, row.eccentricity, omega_star, epoch_bjd
    )
    periastron = time_of_periastron_from_mean_anomaly(row.mean_anomaly_rad, row.period_d, epoch_bjd)
    return tuple(
        PlanetFacts(
            name=name,
            period_d=float(row.period_d[0, k]),
            semi_major_axis_au=float(row.semi_major_axis_au[0, k]),
            eccentricity=float(row.eccentricity[0, k]),
            omega_planet_deg=_deg(row.omega_planet_rad[0, k]),
            omega_star_deg=_deg(omega_star[0, k]),
            mean_anomaly_deg=_deg(row.mean_anomaly_rad[0, k]),
            inclination_deg=_deg(row.inclination_rad[0, k]),
            node_deg=_deg(row.node_rad[0, k]),
            mass_msun=float(row.mass_msun[0, k]),
            semi_amplitude_m_s=float(row.semi_amplitude_m_s[0, k]),
            radius_au=float(row.radius_au[0, k]),
            conjunction=float(conjunction[0, k]),
            periastron=float(periastron[0, k]) if row.eccentricity[0, k] > 0.0 else math.nan,
        )
        for k, name in enumerate(row.bodies)
    )


def pairs_of(row: Ensemble) -> tuple[PairFacts, ...]:
    """Describe each pair of neighbours of the first row."""
    apart = separation_hill(row.semi_major_axis_au, row.mass_msun, row.star_mass_msun)
    return tuple(_pair(row, k, float(apart[0, k])) for k in range(len(row.bodies) - 1))


def _pair(row: Ensemble, k: int, apart: float) -> PairFacts:
    ratio = float(row.period_d[0, k + 1] / row.period_d[0, k])
    resonance, offset = nearest_resonance(ratio)
    i, node = row.inclination_rad, row.node_rad
    tilt = mutual_inclination(i[:, k], node[:, k], i[:, k + 1], node[:, k + 1])
    return PairFacts(
        inner=row.bodies[k],
        outer=row.bodies[k + 1],
        period_ratio=ratio,
        resonance=resonance,
        offset=offset,
        separation_hill=apart,
        mutual_inclination_deg=_deg(tilt[0]),
    )


def nearest_resonance(period_ratio: float) -> tuple[tuple[int, int] | None, float]:
    """Name the nearest period ratio of low order.

    Parameters
    ----------
    period_ratio : float
        Outer period over inner period.

    Returns
    -------
    (p, q) or None, offset
        None and NaN if none of order up to 3 lies within a tenth.
    """
    if not period_ratio > 0.0:
        return None, math.nan
    (p, q), offset = min(
        ((pair, period_ratio * pair[1] / pair[0] - 1.0) for pair in RESONANCES), key=lambda x: abs(x[1])
    )
    return ((p, q), offset) if abs(offset) <= FARTHEST_OFFSET else (None, math.nan)


def elements_in(frame: str, built: States) -> Elements:
    """Read states back as elements of a frame, (draw, planet) arrays, bodies in the order they have."""
    gm = GM_SUN_AU3_D2 * orbit_masses_msun(frame, built.mass_msun[:, 0], built.mass_msun[:, 1:])
    position, velocity = map(np.stack, zip(*_relative(frame, built), strict=True))
    return elements_from_state(gm, np.moveaxis(position, 0, 1), np.moveaxis(velocity, 0, 1))


def _relative(frame: str, built: States) -> Iterator[tuple[Array, Array]]:
    """Position and velocity of each planet about what its frame says."""
    mass, x, v = built.mass_msun, built.position_au, built.velocity_au_d
    centre, drift, inside = x[:, 0], v[:, 0], mass[:, 0]
    for body in range(1, mass.shape[1]):
        yield x[:, body] - centre, v[:, body] - drift
        if frame == Frame.JACOBI:
            share = (mass[:, body] / (inside + mass[:, body]))[:, None]
            centre, drift = centre + share * (x[:, body] - centre), drift + share * (v[:, body] - drift)
            inside = inside + mass[:, body]


def other_reading(row: Ensemble) -> tuple[FrameFacts, ...]:
    """Say what the orbits would be if the same periods, e and angles were meant in the other frame.

    Parameters
    ----------
    row : Ensemble
        In a frame that has elements.

    Returns
    -------
    tuple of FrameFacts
        Expressed in the stated frame, so that the shifts are those of the system that would be built.
    """
    stated = str(row.frame)
    other = Frame.ASTROCENTRIC if row.frame == Frame.JACOBI else Frame.JACOBI
    gm_other = GM_SUN_AU3_D2 * orbit_masses_msun(other, row.star_mass_msun, row.mass_msun)
    axes = semi_major_axis_au_from_period_d(row.period_d, gm_other)
    read = elements_in(stated, states(replace(row, frame=other, semi_major_axis_au=axes)))
    gm = GM_SUN_AU3_D2 * orbit_masses_msun(stated, row.star_mass_msun, row.mass_msun)
    period = period_d_from_semi_major_axis_au(read.semi_major_axis_au, gm)
    return tuple(
        FrameFacts(
            name=name,
            period_shift=float(period[0, k] / row.period_d[0, k] - 1.0),
            eccentricity_shift=float(read.eccentricity[0, k] - row.eccentricity[0, k]),
        )
        for k, name in enumerate(row.bodies)
    )


def _deg(angle_rad: float) -> float:
    return float(angle_rad) / DEGREE_RAD
