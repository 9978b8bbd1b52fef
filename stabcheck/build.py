"""Elements to N-body states, barycentric, the only place that does it.

Jacobi: every body stands about the centre of mass of the star and the bodies before it, in the order of the
ensemble's bodies. Astrocentric: every body stands about the star. Sums run body by body in that order and nowhere
along an axis, so a row is the same bit for bit however many rows are built with it.
"""

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from stabcheck.arrays import Array, DrawBodyVector, DrawPlanet, Flags, PerDraw
from stabcheck.constants import GM_SUN_AU3_D2
from stabcheck.kepler import Elements, column, state_from_elements
from stabcheck.masses import orbit_masses_msun

if TYPE_CHECKING:
    from stabcheck.ensemble import Ensemble

STAR = "star"


@dataclass(frozen=True, slots=True, kw_only=True)
class States:
    """Barycentric states of consecutive draws; body 0 is the star.

    Attributes
    ----------
    bodies : tuple of str
        Names, the star's first.
    mass_msun, radius_au : (draw, body) arrays
        A radius of 0 means a point.
    position_au, velocity_au_d : (draw, body, 3) arrays
        NaN in rows that are not orbits.
    """

    bodies: tuple[str, ...]
    mass_msun: DrawPlanet
    radius_au: DrawPlanet
    position_au: DrawBodyVector
    velocity_au_d: DrawBodyVector


def states(ensemble: "Ensemble") -> States:
    """Build the states of all draws of an ensemble.

    Parameters
    ----------
    ensemble : Ensemble

    Returns
    -------
    States
        Rows with a reason in ``refused`` have NaN positions and velocities.

    Raises
    ------
    ScenarioError
        If the frame is not one of those known.
    """
    mass = np.concatenate([ensemble.star_mass_msun[:, None], ensemble.mass_msun], axis=1)
    radius = np.concatenate([ensemble.star_radius_au[:, None], ensemble.radius_au], axis=1)
    if ensemble.position_au is not None and ensemble.velocity_au_d is not None:
        position, velocity = ensemble.position_au, ensemble.velocity_au_d
    else:
        position, velocity = _placed(ensemble)
    refused = np.array([bool(reason) for reason in ensemble.refused], dtype=np.bool_)
    return States(
        bodies=(STAR, *ensemble.bodies),
        mass_msun=mass,
        radius_au=radius,
        position_au=_barycentric(mass, position, refused),
        velocity_au_d=_barycentric(mass, velocity, refused),
    )


def _placed(ensemble: "Ensemble") -> tuple[DrawBodyVector, DrawBodyVector]:
    """Positions and velocities with the star at the origin and at rest."""
    star, mass = ensemble.star_mass_msun, ensemble.mass_msun
    orbit_mass = orbit_masses_msun(ensemble.frame, star, mass)
    draws, planets = mass.shape
    position, velocity = np.zeros((draws, planets + 1, 3)), np.zeros((draws, planets + 1, 3))
    centre, drift = np.zeros((draws, 3)), np.zeros((draws, 3))
    for k in range(planets):
        r, v = state_from_elements(GM_SUN_AU3_D2 * column(orbit_mass, k), _elements(ensemble, k))
        position[:, k + 1], velocity[:, k + 1] = centre + r, drift + v
        if ensemble.frame == "jacobi":
            share = (column(mass, k) / column(orbit_mass, k))[:, None]
            centre, drift = centre + share * r, drift + share * v
    return position, velocity


def _elements(ensemble: "Ensemble", k: int) -> Elements:
    return Elements(
        semi_major_axis_au=column(ensemble.semi_major_axis_au, k),
        eccentricity=column(ensemble.eccentricity, k),
        inclination_rad=column(ensemble.inclination_rad, k),
        node_rad=column(ensemble.node_rad, k),
        omega_planet_rad=column(ensemble.omega_planet_rad, k),
        mean_anomaly_rad=column(ensemble.mean_anomaly_rad, k),
    )


def _barycentric(mass_msun: DrawPlanet, vector: DrawBodyVector, refused: Flags) -> DrawBodyVector:
    with np.errstate(invalid="ignore", divide="ignore"):
        centre = _centre_of_mass(mass_msun, vector)
        moved: DrawBodyVector = vector - centre[:, None, :]
    moved[refused] = np.nan
    return moved


def _centre_of_mass(mass_msun: DrawPlanet, vector: DrawBodyVector) -> Array:
    total: PerDraw = np.zeros(mass_msun.shape[0])
    weighted = np.zeros((mass_msun.shape[0], 3))
    for body in range(mass_msun.shape[1]):
        total = total + mass_msun[:, body]
        weighted = weighted + mass_msun[:, body, None] * vector[:, body]
    return np.asarray(weighted / total[:, None])


def simulation(states: States, row: int) -> Any:
    """One draw as a ``rebound.Simulation`` with G for au, day and solar mass, its bodies named, integrator not chosen.

    Parameters
    ----------
    states : States
    row : int
        Place in ``states``, not the number of the draw.

    Returns
    -------
    rebound.Simulation
    """
    import rebound

    sim = rebound.Simulation()
    sim.G = GM_SUN_AU3_D2
    for body, name in enumerate(states.bodies):
        x, y, z = (float(value) for value in states.position_au[row, body])
        vx, vy, vz = (float(value) for value in states.velocity_au_d[row, body])
        mass, radius = float(states.mass_msun[row, body]), float(states.radius_au[row, body])
        sim.add(m=mass, r=radius, x=x, y=y, z=z, vx=vx, vy=vy, vz=vz, name=name)
    return sim
