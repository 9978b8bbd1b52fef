"""Invented systems made by hand, with the attributes that ``build`` and ``velocity`` read from an ensemble."""

from types import SimpleNamespace

import numpy as np

from stabcheck.constants import M_S_AU_D
from stabcheck.orbit import semi_amplitudes_au_d, solved_sizes

DEGREE = np.pi / 180.0


def ensemble_of(frame, bodies, star_mass_msun, sizes, eccentricity, node_rad, omega_planet_rad, mean_anomaly_rad):
    """From a ``Sizes`` and what it does not hold."""
    draws = len(star_mass_msun)
    return SimpleNamespace(
        first=0,
        bodies=tuple(bodies),
        frame=frame,
        star_mass_msun=star_mass_msun,
        star_radius_au=np.zeros(draws),
        mass_msun=sizes.mass_msun,
        radius_au=np.zeros_like(sizes.mass_msun),
        period_d=sizes.period_d,
        semi_major_axis_au=sizes.semi_major_axis_au,
        eccentricity=eccentricity,
        inclination_rad=sizes.inclination_rad,
        node_rad=node_rad,
        omega_planet_rad=omega_planet_rad,
        mean_anomaly_rad=mean_anomaly_rad,
        semi_amplitude_m_s=sizes.semi_amplitude_au_d / M_S_AU_D,
        refused=np.full(draws, "", dtype=object),
        position_au=None,
        velocity_au_d=None,
    )


def random_ensemble(draws, frame="jacobi", planets=3, seed=5):
    """Many rows of moderately wild systems; row k is the same whatever the number of rows."""
    uniform = np.random.default_rng(seed).random((4096, planets, 7))[:draws]
    star = 0.8 + 0.4 * uniform[:, 0, 6]
    mass, e = 3e-3 * uniform[..., 0], 0.9 * uniform[..., 1]
    inclination = np.pi * (0.05 + 0.9 * uniform[..., 2])
    period = 5.0 * 2.3 ** (np.arange(planets) + uniform[..., 3])
    sizes = solved_sizes(
        frame,
        star,
        np.zeros(draws),
        mass_given=["mass_sin_i"] + ["mass"] * (planets - 1),
        mass_value=mass,
        size_given=["period"] * planets,
        size=period,
        tilt_given=["inclination"] * planets,
        tilt=inclination,
        beyond_90_degrees=np.zeros((draws, planets), dtype=bool),
        eccentricity=e,
        omega_star_rad=2 * np.pi * uniform[..., 4],
    )
    names = "bcdefgh"[:planets]
    turns = 2 * np.pi * uniform[..., 4:7]
    return ensemble_of(frame, names, star, sizes, e, turns[..., 0], turns[..., 1], turns[..., 2])


def one_row(frame, bodies, star_mass_msun, **columns):
    """One system from lists, one entry a planet, under the names that an ensemble has."""
    rows = {name: np.array([values], dtype=float) for name, values in columns.items()}
    star = np.array([star_mass_msun], dtype=float)
    amplitude = semi_amplitudes_au_d(
        frame, star, rows["mass_msun"], rows["semi_major_axis_au"], rows["eccentricity"], rows["inclination_rad"]
    )
    return SimpleNamespace(
        first=0,
        bodies=tuple(bodies),
        frame=frame,
        star_mass_msun=star,
        star_radius_au=np.zeros(1),
        radius_au=np.zeros_like(rows["mass_msun"]),
        semi_amplitude_m_s=amplitude / M_S_AU_D,
        refused=np.array([""], dtype=object),
        position_au=None,
        velocity_au_d=None,
        **rows,
    )
