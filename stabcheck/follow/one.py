"""Follow one draw with the engine of a screen, and look at its very steps again."""

from dataclasses import replace
from pathlib import Path

import numpy as np

from stabcheck import ensemble as draws
from stabcheck.arrays import Array
from stabcheck.build import states
from stabcheck.constants import GM_SUN_AU3_D2, TWO_PI
from stabcheck.ensemble import Ensemble, Source, source
from stabcheck.errors import PlanError
from stabcheck.follow.files import write_files
from stabcheck.follow.followed import Followed
from stabcheck.outcome import Ending, Outcome, Survival
from stabcheck.plan import Task
from stabcheck.planning import plan_of, spans_of, task_of
from stabcheck.scenario import Frame, Scenario
from stabcheck.series import encounter_of, series_of
from stabcheck.velocity import interruptible

ROWS = 2048
"""Intervals of the time series, each with one row."""
ORBITS_BEFORE, ORBITS_AFTER = 3.0, 1.0
"""Of the inner of two bodies, around the encounter that is looked at step by step."""


def follow(
    scenario: Path | Scenario, *, draw: int | None = None, out: Path | None = None, central: bool = False
) -> Followed:
    """Follow one draw in detail.

    Parameters
    ----------
    scenario : Path or Scenario
    draw : int, optional
        Number of the draw.
    out : Path, optional
        Folder for tables, plots and the initial state; nothing is written if not given. Older files of the same names
        are replaced.
    central : bool
        Follow the central values instead of a draw.

    Returns
    -------
    Followed
        Its outcome is the one that ``screen`` stores for this draw.

    Raises
    ------
    PlanError
        If neither or both of a draw and the central values are asked for, or what is asked for is not an orbit.
    ScenarioError, SampleFileError
        If the scenario or its sample file cannot be used.
    """
    if (draw is None) != central:
        raise PlanError(
            "either the number of a draw or the central values can be followed",
            where="follow",
            why="both or neither were asked for",
            do="give one of the two",
        )
    asked = scenario if isinstance(scenario, Scenario) else Scenario.read(Path(scenario))
    opened = source(asked)
    ensemble = draws.central(opened) if draw is None else draws.draw(opened, draw, 1)
    with interruptible():
        followed = _followed(opened, ensemble, draw)
    return followed if out is None else replace(followed, files=tuple(write_files(followed, out)))


def _followed(opened: Source, ensemble: Ensemble, number: int | None) -> Followed:
    from stabcheck.engines.rebound.replay import NO_WINDOW, replay_of

    scenario, plan = opened.scenario, plan_of(opened.scenario)
    task = _task(opened, ensemble)
    replay = replay_of(task, plan)
    outcome = replay.finished.outcome
    pair, at_d = _encounter(outcome)
    window = _window(task, pair, at_d) if pair else NO_WINDOW
    grid_d = row_times_d(outcome.time_d)
    path = replay.path(grid_d, window)
    regular = path.on_grid(grid_d)
    frame = Frame.JACOBI if ensemble.frame == Frame.CARTESIAN else ensemble.frame
    inside = (window[0] <= path.time_d) & (path.time_d <= window[1])
    near = (
        encounter_of(task.mass_msun, task.radius_au, pair, at_d, path.time_d[inside], path.state[inside])
        if pair
        else None
    )
    return Followed(
        title=scenario.title,
        number=number,
        medians=number is None and bool(ensemble.source_row[0] < 0) and bool(ensemble.parameters),
        frame=str(frame),
        task=task,
        plan=plan,
        outcome=outcome,
        warnings=replay.finished.warnings,
        stages=replay.turns(),
        series=series_of(str(frame), ensemble.bodies, task.mass_msun, path.time_d[regular], path.state[regular]),
        exact=path.exact,
        encounter=near,
    )


def row_times_d(until_d: float) -> Array:
    """Spread the rows of the time series: one in each interval, but irregularly, and one at the end.

    Rows at equal distances would beat with the periods of the planets: where spans are counted in orbits, they would
    show each planet at the same place of its orbit. Places within the intervals are a golden-ratio sequence, which
    beats with nothing.
    """
    row = np.arange(ROWS)
    places = row + np.mod(row * 0.5 * (np.sqrt(5.0) - 1.0), 1.0)
    return np.append(places, ROWS) * (until_d / ROWS)


def _task(opened: Source, ensemble: Ensemble) -> Task:
    """Make the task as a screen does."""
    if ensemble.refused[0]:
        raise PlanError(
            "this draw is not an orbit" if ensemble.parameters else "the scenario is not an orbit",
            where=f"draw {ensemble.first}",
            why=str(ensemble.refused[0]),
            do="follow another draw",
        )
    span = spans_of(opened.scenario, ensemble, relativity=opened.scenario.physics.relativity)
    return task_of(states(ensemble), 0, ensemble.first, float(span[0]))


def _encounter(outcome: Outcome) -> tuple[tuple[int, int] | None, float]:
    """Which two bodies to look at step by step, and when: those of the ending, else the closest approach of a pair."""
    if outcome.ending in (Ending.COLLIDED, Ending.HIT_STAR, Ending.DISTANCE_RULE) and len(outcome.bodies) == 2:
        return (outcome.bodies[0], outcome.bodies[1]), outcome.time_d
    if outcome.ending is Ending.HIT_STAR:
        return (0, outcome.bodies[0]), outcome.time_d
    met = outcome.survival is not Survival.SURVIVED or bool(outcome.handover_why)
    if met and outcome.closest_pair[0] and np.isfinite(outcome.closest_time_d):
        return outcome.closest_pair, outcome.closest_time_d
    return None, float("nan")


def _window(task: Task, pair: tuple[int, int], at_d: float) -> tuple[float, float]:
    """Time around an encounter, in periods of a circular orbit where the nearer of the two planets was at the start."""
    apart = task.position_au - task.position_au[0]
    r = min(float(np.sqrt(np.sum(apart[body] ** 2))) for body in pair if body)
    period_d = TWO_PI * float(np.sqrt(r**3 / (GM_SUN_AU3_D2 * task.mass_msun[0])))
    return at_d - ORBITS_BEFORE * period_d, at_d + ORBITS_AFTER * period_d
