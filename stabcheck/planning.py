"""From a scenario to what an engine is given: the plan that all draws share, and the task of each."""

import math

import numpy as np

from stabcheck.arrays import PerDraw
from stabcheck.build import States
from stabcheck.ensemble import Ensemble
from stabcheck.errors import ScenarioError
from stabcheck.plan import Method, Plan, Task
from stabcheck.scenario import Scenario
from stabcheck.span import span_d


def plan_of(scenario: Scenario) -> Plan:
    """Say how the draws of a scenario are followed."""
    integration, endings = scenario.integration, scenario.endings
    return Plan(
        method=Method(integration.method),
        relativity=scenario.physics.relativity,
        indicator=integration.indicator,
        seed=scenario.draws.seed,
        steps_per_periastron=integration.steps_per_periastron,
        ejection_distance_au=_or_nan(endings.ejection_distance),
        stop_approach_au=_or_nan(endings.stop_approach),
        stop_distance_au=_or_nan(endings.stop_distance),
        rearranged_share=scenario.rearranged.axis_share,
    )


def _or_nan(value: float | None) -> float:
    return math.nan if value is None else value


def spans_of(scenario: Scenario, ensemble: Ensemble, *, relativity: bool) -> PerDraw:
    """Span of each draw in days, NaN for those that are not orbits.

    Raises
    ------
    ScenarioError
        If a draw is an orbit, but the span's unit is not defined for it.
    """
    span = scenario.integration.span
    spans = span_d(span, ensemble, relativity=relativity)
    orbits = np.array([not reason for reason in ensemble.refused], dtype=np.bool_)
    lost = np.flatnonzero(orbits & ~np.isfinite(spans)) + ensemble.first
    if lost.size:
        raise ScenarioError(
            f"a span of {span} is not defined for draw {lost[0]}"
            + (f" and {lost.size - 1} more" if lost.size > 1 else ""),
            where="[integration], span",
            why="without a second planet or relativity nothing precesses, and equal axes have no secular theory",
            do='count in years or orbits: "1 Myr", "1e5 inner orbits"',
        )
    return spans


def task_of(built: States, row: int, number: int, span: float) -> Task:
    """Make the task of one draw from its place in the built states; ``span`` in days."""
    return Task(
        number=number,
        mass_msun=built.mass_msun[row],
        radius_au=built.radius_au[row],
        position_au=built.position_au[row],
        velocity_au_d=built.velocity_au_d[row],
        span_d=span,
    )
