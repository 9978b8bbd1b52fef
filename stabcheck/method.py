"""Which integration method a draw begins with, and why: one rule in one function, to be explained and tested."""

from dataclasses import dataclass

import numpy as np

from stabcheck.arrays import Array
from stabcheck.plan import Method, Plan

STAR_LIKE = 0.05
"""A body of more than this share of the star's mass is treated as a companion star, not as a planet."""

HIGH_ECCENTRICITY = 0.9
"""From here on a map that resolves periastron takes a thousand steps an orbit, as many as IAS15 (measured)."""

HIERARCHY = 5.0
"""A companion star whose periastron is further out than this many axes of the next orbit inside perturbs weakly."""


@dataclass(frozen=True, slots=True)
class Choice:
    """A method and the reason for it, in words."""

    method: Method
    why: str


def choose(mass_msun: Array, semi_major_axis_au: Array, eccentricity: Array, plan: Plan) -> Choice:
    """Choose the method with which a draw begins.

    Close pairs are not asked about here: a map that meets one hands the draw to IAS15 when it happens.

    Parameters
    ----------
    mass_msun : (body,) array
        Star first.
    semi_major_axis_au, eccentricity : (planet,) array
        Jacobi elements in the order of the bodies.
    plan : Plan

    Returns
    -------
    Choice
        The method of the plan if it names one; else IAS15 where a map would not pay or not hold, else WHFast.
    """
    if plan.method is not Method.AUTO:
        return Choice(plan.method, "the scenario names it")
    if not np.all(semi_major_axis_au > 0.0):
        return Choice(Method.IAS15, "a body is not bound at the start")
    if np.max(eccentricity) >= HIGH_ECCENTRICITY:
        return Choice(Method.IAS15, f"an eccentricity of {np.max(eccentricity):.2f} at the start")
    for body in range(2, mass_msun.size):
        if mass_msun[body] < STAR_LIKE * mass_msun[0]:
            continue
        ratio = semi_major_axis_au[body - 1] * (1.0 - eccentricity[body - 1]) / semi_major_axis_au[body - 2]
        if ratio < HIERARCHY:
            return Choice(Method.IAS15, f"a companion star only {ratio:.1f} times as far as the next orbit inside")
    if mass_msun[1] >= STAR_LIKE * mass_msun[0] and mass_msun.size > 2:
        return Choice(Method.IAS15, "the innermost body is a star")
    return Choice(Method.WHFAST, "orbits a map can follow; a close pair is handed to IAS15 when it meets")
