"""What a run will cost here: method, step, time and disk. The speed is measured, for a fifth of a second."""

import math
import os
import time
import warnings

import numpy as np

from stabcheck.arrays import Array
from stabcheck.build import States, simulation
from stabcheck.kepler import Elements
from stabcheck.method import Choice, choose
from stabcheck.orbit import effective_period_d
from stabcheck.plan import Method, Plan
from stabcheck.preview.parts import CostFacts

MEASURED_S = 0.2
CHUNK = 200
"""Steps between two looks at the clock."""
OVERHEAD = 1.2
"""Looking at every step for close approaches and extremes, over plain REBOUND steps (measured, 5e6 steps a draw)."""
START_S, EACH_DRAW_S = 5.0, 0.01
"""To start the workers and load what is compiled, and to build, begin and store a draw (measured, 1000 short draws)."""
BYTES_FIXED, BYTES_BODY, BYTES_PARAMETER = 120, 240, 9
"""Of a finished draw in the run file: measured, and held to a quarter by a test."""


def cost_of(
    built: States, jacobi: Elements, period_d: Array, span_d: float, plan: Plan, *, draws: int, parameters: int
) -> CostFacts | None:
    """Estimate what following the first row costs, and ``draws`` times that.

    Parameters
    ----------
    built : States
    jacobi : Elements
        Of the same rows.
    period_d : (planet,) array
    span_d : float
    plan : Plan
    draws : int
    parameters : int
        How many numbers are drawn for a draw.

    Returns
    -------
    CostFacts or None
        As if every draw were followed to its span; draws that break early cost less, close encounters more. None if the
        method fails on the first row within its first steps.
    """
    choice = choose(built.mass_msun[0], jacobi.semi_major_axis_au[0], jacobi.eccentricity[0], plan)
    fixed = choice.method is not Method.IAS15
    step_d = float(np.min(effective_period_d(period_d, jacobi.eccentricity[0]))) / plan.steps_per_periastron
    try:
        day_s, steps_a_day = pace(built, choice, step_d if fixed else math.nan, indicator=plan.indicator)
    except RuntimeError:  # what REBOUND's errors are
        return None
    cores = len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
    one_draw_s = OVERHEAD * day_s * span_d + EACH_DRAW_S
    return CostFacts(
        method=str(choice.method),
        why=choice.why,
        step_d=step_d if fixed else math.nan,
        steps_per_draw=steps_a_day * span_d,
        seconds_per_draw=one_draw_s,
        cores=cores,
        draws=draws,
        seconds=START_S + one_draw_s * math.ceil(draws / cores),
        bytes_per_draw=BYTES_FIXED + BYTES_BODY * built.mass_msun.shape[1] + BYTES_PARAMETER * parameters,
        half_width=1.96 * 0.5 / math.sqrt(draws),
    )


def pace(built: States, choice: Choice, step_d: float, *, indicator: bool) -> tuple[float, float]:
    """Measure how fast the first row is integrated on this machine.

    Parameters
    ----------
    built : States
    choice : Choice
    step_d : float
        NaN if the method chooses it.
    indicator : bool
        Follow a tangent vector as well.

    Returns
    -------
    seconds, steps
        Process time and steps, both for one day of the system.

    Raises
    ------
    RuntimeError
        If REBOUND gives the integration up.
    """
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # of a throw-away measurement; the run itself keeps every warning
        sim = simulation(built, 0)
        sim.integrator = str(choice.method)
        if not math.isnan(step_d):
            sim.dt = step_d
        if indicator and choice.method is not Method.TRACE:
            sim.init_megno(seed=0)
        sim.steps(CHUNK)  # the first steps set things up
        start_d, start_s, steps = sim.t, time.process_time(), 0
        while (used_s := time.process_time() - start_s) < MEASURED_S:
            sim.steps(CHUNK)
            steps += CHUNK
        done_d = sim.t - start_d
    return used_s / done_d, steps / done_d
