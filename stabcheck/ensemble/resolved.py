"""Values of draws, as a scenario states them, become one kind of elements at the epoch: the planet's, with true masses.

Every body is treated alike whether its values make an orbit or not: what they do not determine is NaN here, and why is
said in ``physical``.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from stabcheck.arrays import DrawBodyVector, DrawPlanet, Flags, PerDraw
from stabcheck.constants import GM_SUN_AU3_D2, M_S_AU_D
from stabcheck.ensemble.sources import Values, has_own_plane, is_tilted, prefix_of, table_of
from stabcheck.orbit import (
    column,
    elements_from_state,
    inclination_and_node_from_tilted_plane,
    mean_anomaly_from_mean_longitude,
    mean_anomaly_from_time_of_conjunction,
    mean_anomaly_from_time_of_periastron,
    omega_planet_from_omega_star,
    omega_star_from_omega_planet,
    orbit_masses_msun,
    period_d_from_semi_major_axis_au,
    semi_amplitudes_au_d,
    solved_sizes,
    wrapped_rad,
)
from stabcheck.radius import radius_au_from_mass_msun
from stabcheck.scenario import Frame, Planet, Scenario

MASSES = ("mass", "mass_sin_i", "semi_amplitude")
SIZES = ("period", "semi_major_axis")
TILTS = ("impact_parameter", "inclination")
PHASES = ("mean_anomaly", "mean_longitude_star", "mean_longitude_planet", "time_of_conjunction", "time_of_periastron")


@dataclass(frozen=True, slots=True, kw_only=True)
class Resolved:
    """Elements at the epoch, each (draw, planet); for Cartesian scenarios with the vectors that they were read from."""

    mass_msun: DrawPlanet
    radius_au: DrawPlanet
    period_d: DrawPlanet
    semi_major_axis_au: DrawPlanet
    eccentricity: DrawPlanet
    inclination_rad: DrawPlanet
    node_rad: DrawPlanet
    omega_planet_rad: DrawPlanet
    mean_anomaly_rad: DrawPlanet
    semi_amplitude_m_s: DrawPlanet
    position_au: DrawBodyVector | None = None
    velocity_au_d: DrawBodyVector | None = None


def resolved(scenario: Scenario, bodies: tuple[str, ...], values: Values) -> Resolved:
    """Resolve the values of draws.

    Parameters
    ----------
    scenario : Scenario
    bodies : tuple of str
        In the order of the ensemble: in Jacobi coordinates a body's mass rules the orbits of all that come after it.
    values : mapping of str to (draw,) array
        As a source gives them.

    Returns
    -------
    Resolved
        Of Cartesian scenarios the elements are osculating Jacobi ones.
    """
    with np.errstate(all="ignore"):  # values that are no orbit are meant to come out as NaN
        if scenario.elements.frame is Frame.CARTESIAN:
            return _from_vectors(scenario, bodies, values)
        return _from_elements(scenario, bodies, values)


def given(table: Planet, keys: Sequence[str]) -> str:
    """Say which of the keys a body comes with; a checked scenario has just one of them."""
    return next(key for key in keys if getattr(table, key) is not None)


def mass_given(scenario: Scenario, bodies: tuple[str, ...]) -> list[str]:
    """Say what the mass of each body comes as."""
    return [given(table_of(scenario, body), MASSES) for body in bodies]


def _from_elements(scenario: Scenario, bodies: tuple[str, ...], values: Values) -> Resolved:
    tables = [table_of(scenario, body) for body in bodies]
    prefixes = [prefix_of(scenario, body) for body in bodies]
    count = len(values["star.mass"])

    def stated(keys: Sequence[str]) -> DrawPlanet:
        return stacked([values[f"{p}.{given(t, keys)}"] for p, t in zip(prefixes, tables, strict=True)], count)

    eccentricity = stated(("eccentricity",))
    omega_star = stacked([_omega_star_rad(table, p, values) for p, table in zip(prefixes, tables, strict=True)], count)
    tilts, nodes = zip(*(_tilt_and_node_rad(scenario, body, values) for body in bodies), strict=True)
    sizes = solved_sizes(
        scenario.elements.frame,
        values["star.mass"],
        _or_zero(values, "star.radius"),
        mass_given=mass_given(scenario, bodies),
        mass_value=stated(MASSES),
        size_given=[given(table, SIZES) for table in tables],
        size=stated(SIZES),
        tilt_given=["inclination" if table.impact_parameter is None else "impact_parameter" for table in tables],
        tilt=stacked(tilts, count),
        beyond_90_degrees=_beyond_90_degrees(prefixes, values),
        eccentricity=eccentricity,
        omega_star_rad=omega_star,
    )
    phases = [
        _mean_anomaly_rad(scenario, body, values, *(column(a, k) for a in (sizes.period_d, eccentricity, omega_star)))
        for k, body in enumerate(bodies)
    ]
    return Resolved(
        mass_msun=sizes.mass_msun,
        radius_au=_radii_au(scenario, bodies, values, sizes.mass_msun),
        period_d=sizes.period_d,
        semi_major_axis_au=sizes.semi_major_axis_au,
        eccentricity=eccentricity,
        inclination_rad=sizes.inclination_rad,
        node_rad=wrapped_rad(stacked(nodes, count)),
        omega_planet_rad=omega_planet_from_omega_star(omega_star),
        mean_anomaly_rad=stacked(phases, count),
        semi_amplitude_m_s=sizes.semi_amplitude_au_d / M_S_AU_D,
    )


def stacked(columns: Sequence[PerDraw], count: int) -> DrawPlanet:
    """Put columns beside each other; they were worked out one by one, each contiguous in memory."""
    table = np.empty((count, len(columns)))
    for k, values in enumerate(columns):
        table[:, k] = values
    return table


def _omega_star_rad(table: Planet, prefix: str, values: Values) -> PerDraw:
    if table.omega_star is not None:
        return wrapped_rad(values[f"{prefix}.omega_star"])
    if table.omega_planet is not None:
        return omega_star_from_omega_planet(values[f"{prefix}.omega_planet"])
    # A circular orbit without omega: angles of the planet count from its node, and any direction would do.
    return np.full_like(values[f"{prefix}.eccentricity"], np.pi)


def _tilt_and_node_rad(scenario: Scenario, body: str, values: Values) -> tuple[PerDraw, PerDraw]:
    """Inclination, or impact parameter where that is given, and node."""
    prefix, table = prefix_of(scenario, body), table_of(scenario, body)
    if has_own_plane(scenario, body):
        return values[f"{prefix}.{given(table, TILTS)}"], _or_zero(values, f"{prefix}.node")
    common = values["plane.inclination"]
    if not is_tilted(scenario, body):
        return common, _or_zero(values, f"{prefix}.node")
    return inclination_and_node_from_tilted_plane(common, values[f"{prefix}.tilt"], values[f"{prefix}.tilt_direction"])


def _beyond_90_degrees(prefixes: Sequence[str], values: Values) -> Flags:
    return np.stack([_or_zero(values, f"{prefix}.side") > 0.5 for prefix in prefixes], axis=1)


def _or_zero(values: Values, name: str) -> PerDraw:
    return values[name] if name in values else np.zeros_like(values["star.mass"])


def _mean_anomaly_rad(
    scenario: Scenario, body: str, values: Values, period_d: PerDraw, eccentricity: PerDraw, omega_star_rad: PerDraw
) -> PerDraw:
    table, prefix = table_of(scenario, body), prefix_of(scenario, body)
    phase = given(table, PHASES)
    value = values[f"{prefix}.{phase}"]
    epoch_bjd = scenario.elements.epoch.bjd if scenario.elements.epoch else 0.0  # unused unless the phase is a time
    if phase == "time_of_conjunction":
        return mean_anomaly_from_time_of_conjunction(value, period_d, eccentricity, omega_star_rad, epoch_bjd)
    if phase == "time_of_periastron":
        return mean_anomaly_from_time_of_periastron(value, period_d, epoch_bjd)
    if phase == "mean_anomaly":
        return wrapped_rad(value)
    omega = omega_star_rad if phase == "mean_longitude_star" else omega_planet_from_omega_star(omega_star_rad)
    # Only a node that the scenario gives is part of the longitude; one drawn or common to all was never measured.
    node: PerDraw | float = values[f"{prefix}.node"] if table.node is not None else 0.0
    return mean_anomaly_from_mean_longitude(value, omega, node)


def _radii_au(scenario: Scenario, bodies: tuple[str, ...], values: Values, mass_msun: DrawPlanet) -> DrawPlanet:
    """Radii as given, else from the mass where the scenario asks for it, else 0: a point."""
    radii = np.zeros_like(mass_msun)
    for k, body in enumerate(bodies):
        name = f"{prefix_of(scenario, body)}.radius"
        if name in values:
            radii[:, k] = values[name]
        elif scenario.endings.mass_radius is not None:
            radii[:, k] = radius_au_from_mass_msun(column(mass_msun, k))
    return radii


def _from_vectors(scenario: Scenario, bodies: tuple[str, ...], values: Values) -> Resolved:
    prefixes = [prefix_of(scenario, body) for body in bodies]
    count = len(values["star.mass"])
    position, velocity = (_vectors(["star", *prefixes], kind, values) for kind in ("position", "velocity"))
    mass = stacked([values[f"{prefix}.mass"] for prefix in prefixes], count)
    gm = GM_SUN_AU3_D2 * orbit_masses_msun("jacobi", values["star.mass"], mass)
    orbits = [
        elements_from_state(column(gm, k), *relative)
        for k, relative in enumerate(_jacobi(values["star.mass"], mass, position, velocity))
    ]

    def read(name: str) -> DrawPlanet:
        return stacked([getattr(orbit, name) for orbit in orbits], count)

    axis, e, inclination = read("semi_major_axis_au"), read("eccentricity"), read("inclination_rad")
    amplitude = semi_amplitudes_au_d("jacobi", values["star.mass"], mass, axis, e, inclination)
    return Resolved(
        mass_msun=mass,
        radius_au=_radii_au(scenario, bodies, values, mass),
        period_d=stacked(
            [period_d_from_semi_major_axis_au(column(axis, k), column(gm, k)) for k in range(len(bodies))], count
        ),
        semi_major_axis_au=axis,
        eccentricity=e,
        inclination_rad=inclination,
        node_rad=read("node_rad"),
        omega_planet_rad=read("omega_planet_rad"),
        mean_anomaly_rad=read("mean_anomaly_rad"),
        semi_amplitude_m_s=amplitude / M_S_AU_D,
        position_au=position,
        velocity_au_d=velocity,
    )


def _vectors(prefixes: Sequence[str], kind: str, values: Values) -> DrawBodyVector:
    table = np.empty((len(values["star.mass"]), len(prefixes), 3))
    for body, prefix in enumerate(prefixes):
        for axis, letter in enumerate("xyz"):
            table[:, body, axis] = _or_zero(values, f"{prefix}.{kind}.{letter}")
    return table


def _jacobi(
    star_mass_msun: PerDraw, mass_msun: DrawPlanet, position: DrawBodyVector, velocity: DrawBodyVector
) -> list[tuple[DrawBodyVector, DrawBodyVector]]:
    """Each body relative to the centre of mass of all before it."""
    centre, drift, inside = position[:, 0], velocity[:, 0], star_mass_msun
    relative = []
    for k in range(mass_msun.shape[1]):
        relative.append((position[:, k + 1] - centre, velocity[:, k + 1] - drift))
        total = inside + mass_msun[:, k]
        share = (mass_msun[:, k] / total)[:, None]
        centre, drift, inside = centre + share * relative[-1][0], drift + share * relative[-1][1], total
    return relative
