"""Draws as arrays, first axis the draw: what every later step reads, in the units used inside.

``draw`` gives any stretch of a scenario's draws, bit for bit the same whatever the stretch: rows are worked out
elementwise, from random numbers that belong to the draw alone.
"""

from dataclasses import dataclass

import numpy as np

from stabcheck.arrays import DrawBodyVector, DrawPlanet, Integers, PerDraw
from stabcheck.ensemble.physical import Reasons, first_reasons, later_reasons
from stabcheck.ensemble.resolved import Resolved, mass_given, resolved
from stabcheck.ensemble.sources import Source, Values, prefix_of, source
from stabcheck.scenario import Frame, Scenario


@dataclass(frozen=True, slots=True, kw_only=True)
class Ensemble:
    """A stretch of draws.

    Attributes
    ----------
    first : int
        Number of the draw in row 0; rows are consecutive numbers.
    bodies : tuple of str
        Planets by central period, a companion star last; without the star. A draw in which two change places is still
        built in this order.
    frame : Frame
        What the elements refer to. Those of a Cartesian scenario are Jacobi elements read back from its vectors.
    star_mass_msun, star_radius_au : (draw,) arrays
        The radius is 0 where it is not known.
    mass_msun, radius_au, period_d, semi_major_axis_au, eccentricity, inclination_rad, node_rad, omega_planet_rad,
    mean_anomaly_rad, semi_amplitude_m_s : (draw, planet) arrays
        At the epoch. A radius of 0 is a point.
    refused : (draw,) array of str
        Why a draw is not an orbit, such as ``"e < 0 (c)"``; empty if it is one.
    weight : (draw,) array
        1 throughout: rows of a weighted sample file are drawn as often as their weights say.
    source_row, chain : (draw,) arrays of int
        Row of the sample file and its chain, -1 where there is none.
    position_au, velocity_au_d : (draw, body, 3) arrays or None
        Vectors of a Cartesian scenario, about its own origin; body 0 is the star.
    parameters : dict of str to (draw,) array
        What was drawn, as drawn, in the units used inside: the quantities of the scenario that are not fixed, and what
        the geometry leaves open (``Source.values``).
    """

    first: int
    bodies: tuple[str, ...]
    frame: Frame
    star_mass_msun: PerDraw
    star_radius_au: PerDraw
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
    refused: Reasons
    weight: PerDraw
    source_row: Integers
    chain: Integers
    position_au: DrawBodyVector | None
    velocity_au_d: DrawBodyVector | None
    parameters: dict[str, PerDraw]


def draw(scenario: Scenario | Source, first: int, count: int) -> Ensemble:
    """Make draws ``first`` to ``first + count - 1``.

    Parameters
    ----------
    scenario : Scenario or Source
        An opened source (see ``source``) spares reading the sample file for every stretch.
    first, count : int
        The stretch; memory is used for it alone.

    Returns
    -------
    Ensemble
        Draws that are not orbits keep their row, with the reason: nothing is clipped, nothing drawn again.

    Raises
    ------
    PlanError
        If a sample file without weights has fewer rows than are asked for, or the stretch begins before draw 0.
    SampleFileError
        If the sample file cannot be used.
    """
    opened = scenario if isinstance(scenario, Source) else source(scenario)
    rows = opened.rows(first, count)
    return _ensemble(opened, first, opened.values(first, count), rows)


def central(scenario: Scenario | Source) -> Ensemble:
    """Make one row of central values: the best row of the sample file where it is known, else medians.

    Parameters
    ----------
    scenario : Scenario or Source

    Returns
    -------
    Ensemble
        One row with number 0. Unless ``source_row`` names a row of the sample file, this is a row of medians, each
        taken alone, and not a solution of any fit.

    Raises
    ------
    SampleFileError
        If the sample file cannot be used.
    """
    opened = scenario if isinstance(scenario, Source) else source(scenario)
    values, row = opened.central_values()
    return _ensemble(opened, 0, values, np.array([row], dtype=np.int64))


def _ensemble(opened: Source, first: int, values: Values, rows: Integers) -> Ensemble:
    scenario, bodies = opened.scenario, opened.bodies
    orbits = resolved(scenario, bodies, values)
    radius_au = values.get("star.radius", np.zeros(len(rows)))
    return Ensemble(
        first=first,
        bodies=bodies,
        frame=scenario.elements.frame,
        star_mass_msun=values["star.mass"],
        star_radius_au=radius_au,
        mass_msun=orbits.mass_msun,
        radius_au=orbits.radius_au,
        period_d=orbits.period_d,
        semi_major_axis_au=orbits.semi_major_axis_au,
        eccentricity=orbits.eccentricity,
        inclination_rad=orbits.inclination_rad,
        node_rad=orbits.node_rad,
        omega_planet_rad=orbits.omega_planet_rad,
        mean_anomaly_rad=orbits.mean_anomaly_rad,
        semi_amplitude_m_s=orbits.semi_amplitude_m_s,
        refused=_refused(opened, values, orbits, radius_au),
        weight=np.ones(len(rows)),
        source_row=rows,
        chain=_chains(opened, rows),
        position_au=orbits.position_au,
        velocity_au_d=orbits.velocity_au_d,
        parameters=_drawn(opened, values),
    )


def _refused(opened: Source, values: Values, orbits: Resolved, star_radius_au: PerDraw) -> Reasons:
    scenario, bodies = opened.scenario, opened.bodies
    first = first_reasons({body: prefix_of(scenario, body) for body in bodies}, values, len(star_radius_au))
    names = ("eccentricity", "semi_major_axis_au", "period_d", "node_rad", "omega_planet_rad", "mean_anomaly_rad")
    return later_reasons(
        first,
        bodies,
        mass_given=mass_given(scenario, bodies),
        star_radius_au=star_radius_au,
        mass_msun=orbits.mass_msun,
        inclination_rad=orbits.inclination_rad,
        elements={name: getattr(orbits, name) for name in names},
    )


def _chains(opened: Source, rows: Integers) -> Integers:
    if opened.samples is None or opened.samples.chain is None:
        return np.full(len(rows), -1, dtype=np.int64)
    return np.where(rows < 0, -1, opened.samples.chain[rows])


def _drawn(opened: Source, values: Values) -> dict[str, PerDraw]:
    fixed = {name for name, quantity in opened.scenario.quantities().items() if quantity.is_fixed}
    return {name: drawn for name, drawn in values.items() if name not in fixed}
