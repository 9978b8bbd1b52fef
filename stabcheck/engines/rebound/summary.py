"""From the end of a draw to its outcome."""

from dataclasses import replace

import numpy as np

from stabcheck.arrays import Array
from stabcheck.chaos.drift import drift
from stabcheck.chaos.megno import SETTLED_CYCLES, Convergence, convergence
from stabcheck.criteria.secular import slowest_apsidal_period_d
from stabcheck.engines.rebound import kernels
from stabcheck.engines.rebound.block import BlockEnd
from stabcheck.engines.rebound.changes import steps_per_periastron
from stabcheck.engines.rebound.life import Life
from stabcheck.engines.rebound.setting import Setting
from stabcheck.outcome import Ending, Motion, Outcome, Survival, Trust
from stabcheck.plan import Task

ENDINGS = {
    kernels.COLLIDED: Ending.COLLIDED,
    kernels.HIT_STAR: Ending.HIT_STAR,
    kernels.EJECTED: Ending.EJECTED,
    kernels.TOO_NEAR: Ending.DISTANCE_RULE,
    kernels.TOO_FAR: Ending.DISTANCE_RULE,
}


def outcome_of(task: Task, setting: Setting, life: Life, end: BlockEnd, trust: Trust) -> Outcome:
    """Say what a draw came to.

    Parameters
    ----------
    end : BlockEnd
        Of the last block.
    trust : Trust
        Anything but ``ok`` makes survival unknown.

    Returns
    -------
    Outcome
    """
    track, stage, story = life.track, life.stage, life.story
    ending = ENDINGS.get(end.code, Ending.NONE) if trust is Trust.OK else Ending.NONE
    chaos = _chaos(life, setting)
    survival = _survival(end.code, trust)
    extremes = life.extremes()
    inverse_most, inverse_least = extremes[:, kernels.INVERSE_A_MOST], extremes[:, kernels.INVERSE_A_LEAST]
    closest = track.closest
    return Outcome(
        number=task.number,
        survival=survival,
        ending=ending,
        trust=trust,
        motion=chaos.motion,
        rearranged=bool(survival is Survival.SURVIVED and np.isfinite(track.departure[0])),
        time_d=task.span_d if survival is Survival.SURVIVED else track.time_d(setting, stage.step_d),
        span_d=task.span_d,
        bodies=tuple(body for body in end.bodies if body) if ending is not Ending.NONE else (),
        method=str(stage.method),
        step_d=float("nan") if stage.adaptive else stage.step_d,
        energy_error=float(np.maximum(story.energy_error, track.worst[0])),
        orbit_energy_error=float(np.maximum(story.orbit_energy_error, track.worst[1])),
        closest_hill=float(np.sqrt(closest[kernels.RATIO2])) if np.isfinite(closest[kernels.RATIO2]) else float("nan"),
        closest_au=float(closest[kernels.DISTANCE]),
        closest_pair=_pair(closest),
        closest_time_d=float(closest[kernels.WHEN]),
        departure_time_d=float(track.departure[0]),
        a_least_au=1.0 / inverse_most,
        a_most_au=np.where(inverse_least > 0.0, 1.0 / np.where(inverse_least > 0.0, inverse_least, 1.0), np.inf),
        e_least=np.sqrt(extremes[:, kernels.E2_LEAST]),
        e_most=np.sqrt(extremes[:, kernels.E2_MOST]),
        fewest_steps_per_periastron=float("nan") if stage.adaptive else steps_per_periastron(life, setting),
        megno=chaos.megno,
        megno_time_d=_megno_time_d(life, setting),
        megno_wander=chaos.wander,
        lyapunov_time_d=chaos.lyapunov_time_d,
        drift=_drift(life, setting, survival),
        restarts=story.restarts,
        handovers=story.handovers,
        returns=story.returns,
        handover_time_d=story.handover_time_d,
        handover_why=story.handover_why,
        map_steps=int(story.map_steps + track.clock[kernels.MAP_STEPS]),
        adaptive_steps=int(story.adaptive_steps + track.clock[kernels.ADAPTIVE_STEPS]),
        history="; ".join(story.history),
    )


def unusable(task: Task) -> Outcome:
    """Say that a draw cannot be followed, because a number of its state is not finite or its span is not positive."""
    return Outcome(
        number=task.number,
        survival=Survival.UNKNOWN,
        trust=Trust.NOT_FINITE,
        time_d=0.0,
        span_d=task.span_d,
        method="",
        step_d=float("nan"),
        history="a number of the initial state is not finite, or the span is not positive",
    )


def _survival(code: int, trust: Trust) -> Survival:
    if trust is not Trust.OK:
        return Survival.UNKNOWN
    return Survival.SURVIVED if code == kernels.SPAN_DONE else Survival.BROKEN


def _chaos(life: Life, setting: Setting) -> Convergence:
    closed = life.story.megno_until
    until = int(life.track.clock[kernels.INTERVAL]) if closed < 0 else closed
    samples = slice(1, until + 1)
    times: Array = setting.interval_d * np.arange(1.0, until + 1.0)
    found = convergence(times, life.track.megnos[samples], life.track.ln_deltas[samples])
    measured_all = closed < 0  # else what came after was not measured
    if found.motion is Motion.REGULAR and not (measured_all and _long_enough(setting, times[-1])):
        return replace(found, motion=Motion.UNSETTLED)
    return found


def _long_enough(setting: Setting, time_d: float) -> bool:
    """Have the slowest secular terms had time to show? Not asked where theory has no slowest mode to offer."""
    slowest_d = slowest_apsidal_period_d(setting.mass[:1], setting.mass[None, 1:], setting.a_au[None, :])[0]
    return not np.isfinite(slowest_d) or time_d >= SETTLED_CYCLES * float(slowest_d)


def _megno_time_d(life: Life, setting: Setting) -> float:
    if not np.any(np.isfinite(life.track.megnos)):
        return float("nan")
    return float(life.track.clock[kernels.MEGNO_TIME])


def _pair(closest: Array) -> tuple[int, int]:
    if not np.isfinite(closest[kernels.FIRST_BODY]):
        return (0, 0)
    return int(closest[kernels.FIRST_BODY]), int(closest[kernels.SECOND_BODY])


def _drift(life: Life, setting: Setting, survival: Survival) -> Array:
    planets = setting.mass.size - 1
    if survival is not Survival.SURVIVED:
        return np.full(planets, np.nan)
    return drift(life.track.longitudes, 2.0 * np.pi / setting.period_d * setting.interval_d)
