"""Tasks made straight from elements with REBOUND's own conversion, and one draw followed to its outcome."""

from collections.abc import Sequence
from typing import Any

import numpy as np
import rebound

from stabcheck.constants import GM_SUN_AU3_D2
from stabcheck.engines.rebound import ReboundEngine
from stabcheck.outcome import Finished, Outcome
from stabcheck.plan import Method, Plan, Task


def task_of(
    star_msun: float,
    planets: Sequence[dict[str, Any]],
    span_d: float,
    *,
    number: int = 0,
    radii_au: Sequence[float] | None = None,
) -> Task:
    """Jacobi elements as REBOUND takes them (m, a or P, e, omega, M, inc, Omega) to a task."""
    simulation = rebound.Simulation()
    simulation.G = GM_SUN_AU3_D2
    simulation.add(m=star_msun)
    for planet in planets:
        simulation.add(**planet)
    simulation.move_to_com()
    return task_from_simulation(simulation, span_d, number=number, radii_au=radii_au)


def task_from_simulation(
    simulation: Any, span_d: float, *, number: int = 0, radii_au: Sequence[float] | None = None
) -> Task:
    """Take a task from a simulation in au, day and solar mass."""
    particles = simulation.particles
    return Task(
        number=number,
        mass_msun=np.array([p.m for p in particles]),
        radius_au=np.zeros(len(particles)) if radii_au is None else np.array(radii_au, dtype=float),
        position_au=np.array([[p.x, p.y, p.z] for p in particles]),
        velocity_au_d=np.array([[p.vx, p.vy, p.vz] for p in particles]),
        span_d=span_d,
    )


def outcome_of(task: Task, **changes: Any) -> Outcome:
    """Follow one task with a plan that differs from the default in ``changes``."""
    if "method" in changes:
        changes["method"] = Method(changes["method"])
    last = list(ReboundEngine().follow([task], Plan(**changes)))[-1]
    assert isinstance(last, Finished)
    return last.outcome
