"""How a draw changes its method: it begins, begins again, is handed over to IAS15, and is handed back.

A hand-over goes back to a stored state at least one orbit of the outermost planet before the trigger, so that the
encounter is integrated whole. The tangent vector goes along: both methods carry the same linearised flow, so MEGNO goes
on, unless it has called the draw chaotic already and would only cost time. When no pair was close for ten outer orbits
and a map could follow the orbits again, the map takes the draw back.
"""

from dataclasses import replace

import numpy as np

from stabcheck.arrays import Array
from stabcheck.chaos.megno import CHAOTIC_FROM
from stabcheck.engines.rebound import kernels
from stabcheck.engines.rebound.block import Stage
from stabcheck.engines.rebound.life import Life, Story, merged
from stabcheck.engines.rebound.setting import Setting
from stabcheck.engines.rebound.track import Track, first_track
from stabcheck.method import choose
from stabcheck.outcome import Trust
from stabcheck.plan import Method, Plan, Task
from stabcheck.random import uniforms

QUIET_ORBITS = 10.0
"""Outer orbits without a close pair before a map takes a draw back: several conjunctions of any neighbours that are
further apart than a tenth in period."""


def begun(task: Task, setting: Setting, plan: Plan) -> Life:
    """Stand at the start of a draw, with the method that the rule chooses."""
    choice = choose(setting.mass, setting.a_au, setting.eccentricity, plan)
    stage = _stage(setting, plan, choice.method, setting.a_au, setting.eccentricity)
    track = first_track(setting, _first_tangent(task, setting, plan, stage), _first_adaptive_step(setting))
    return Life(stage, track, track.copy(), track.copy(), Story(history=[f"{choice.method}: {choice.why}"]))


def began_again(life: Life, task: Task, setting: Setting, plan: Plan, trust: Trust) -> bool:
    """Go back where that can cure the trouble: finer from the start, or with IAS15; say whether it was done."""
    stage, story = life.stage, life.story
    if stage.adaptive or trust is Trust.BUDGET:
        return False
    when = life.time_d(setting)
    finer = trust is Trust.STEP_OUTGROWN and story.restarts < plan.most_restarts
    if not finer and plan.method is not Method.AUTO:
        return False
    if story.handovers:
        hand_over(life, setting, str(trust), may_return=False)
        return True
    if finer:
        a_au, e_most = _worst_orbits(life.track)
        next_stage = _stage(setting, plan, stage.method, a_au, e_most, stage.steps_per_interval)
        story.history.append(f"step outgrown by day {when:.6g}: again with {next_stage.step_d:.6g} d")
    else:
        next_stage = _stage(setting, plan, Method.IAS15, setting.a_au, setting.eccentricity)
        story.history.append(f"{trust} by day {when:.6g}: again with ias15")
    _restart(life, task, setting, plan, next_stage)
    return True


def hand_over(life: Life, setting: Setting, why: str, *, may_return: bool) -> None:
    """Go on with IAS15 from a stored state at least one outer orbit before now, where there is one."""
    story, now_d = life.story, life.time_d(setting)
    since_newer = now_d - life.newer.time_d(setting, life.stage.step_d)
    back = (life.newer if since_newer >= setting.longest_period_d else life.older).copy()
    from_d = back.time_d(setting, life.stage.step_d)
    story.map_steps += life.track.clock[kernels.MAP_STEPS] - back.clock[kernels.MAP_STEPS]
    if not story.handovers:
        story.handover_why, story.handover_time_d = why.split(" (")[0], from_d
        story.history.append(f"{why} on day {now_d:.6g}: ias15 from day {from_d:.6g}")
    story.handovers += 1
    back.clock[kernels.INSIDE] *= life.stage.step_d
    back.clock[kernels.NEXT_STEP] = _first_adaptive_step(setting)
    back.clock[kernels.LAST_CLOSE] = now_d
    _close_megno_if_chaotic(back, story)
    quiet_d = QUIET_ORBITS * setting.longest_period_d if may_return else np.inf
    _go_on(life, setting, Stage(Method.IAS15, 1.0, 0, False, quiet_d), back)


def handed_back(life: Life, setting: Setting, plan: Plan) -> bool:
    """Give a draw that has been quiet for long enough back to a map; say whether it was done."""
    track, stage = life.track, life.stage
    waiting = life.time_d(setting) - track.clock[kernels.LAST_CLOSE] < stage.quiet_d
    if not stage.adaptive or waiting or track.clock[kernels.INSIDE] != 0.0:
        return False
    elements = _elements(track, setting)
    if not _a_map_could(elements, setting, plan):
        life.stage = replace(stage, quiet_d=np.inf)  # the order of the planets does not come back: do not ask again
        return False
    if not life.story.returns:
        life.story.history.append(f"quiet again: whfast from day {life.time_d(setting):.6g}")
    life.story.returns += 1
    next_stage = _stage(setting, plan, Method.WHFAST, 1.0 / elements[:, 0], np.sqrt(elements[:, 1]))
    _go_on(life, setting, next_stage, track)
    return True


def _elements(track: Track, setting: Setting) -> Array:
    """Osculating (1/a, e²) of each planet, (planet, 2)."""
    elements = np.empty((setting.mass.size - 1, 2))
    kernels.jacobi_elements(track.state, setting.mass, np.empty(setting.mass.size), elements)
    return elements


def _a_map_could(elements: Array, setting: Setting, plan: Plan) -> bool:
    if not np.all(elements[:, 0] > 0.0):
        return False
    a_au = 1.0 / elements[:, 0]
    in_order = bool(np.all((a_au[1:] > a_au[:-1]) | (setting.ordered == 0.0)))
    rule = replace(plan, method=Method.AUTO)
    return in_order and choose(setting.mass, a_au, np.sqrt(elements[:, 1]), rule).method is Method.WHFAST


def _go_on(life: Life, setting: Setting, stage: Stage, track: Track) -> None:
    """Begin a stage where ``track`` stands, keeping what was seen before apart from what the stage will see."""
    story = life.story
    story.energy_error = max(story.energy_error, float(track.worst[0]))
    story.orbit_energy_error = max(story.orbit_energy_error, float(track.worst[1]))
    before = track.extremes
    story.extremes = (merged(np.array(story.extremes), before) if story.extremes else before).tolist()
    elements = _elements(track, setting)
    track.extremes = np.ascontiguousarray(np.repeat(elements, 2, axis=1))
    began = kernels.energy(track.state, setting.mass, setting.relativity_strength)
    track.worst = np.array([0.0, 0.0, began])
    life.stage, life.track = stage, track
    life.older, life.newer = track.copy(), track.copy()


def _close_megno_if_chaotic(track: Track, story: Story) -> None:
    time_d = track.clock[kernels.MEGNO_TIME]
    if track.tangent.size and time_d > 0.0 and track.clock[kernels.SUM_MEAN] / time_d >= CHAOTIC_FROM:
        track.tangent = np.empty((0, 6))
        story.megno_until = int(track.clock[kernels.INTERVAL])


def _restart(life: Life, task: Task, setting: Setting, plan: Plan, stage: Stage) -> None:
    life.story.map_steps += life.track.clock[kernels.MAP_STEPS]
    life.story.adaptive_steps += life.track.clock[kernels.ADAPTIVE_STEPS]
    life.story.restarts += 1
    life.stage = stage
    life.track = first_track(setting, _first_tangent(task, setting, plan, stage), _first_adaptive_step(setting))
    life.older, life.newer = life.track.copy(), life.track.copy()


def _worst_orbits(track: Track) -> tuple[Array, Array]:
    """Smallest axis and largest eccentricity of each planet so far."""
    with np.errstate(divide="ignore"):
        return 1.0 / track.extremes[:, kernels.INVERSE_A_MOST], np.sqrt(track.extremes[:, kernels.E2_MOST])


def steps_per_periastron(life: Life, setting: Setting) -> float:
    """Fewest steps in an effective period, for the smallest axis and the largest eccentricity of the stage."""
    return setting.effective_period_d(*_worst_orbits(life.track)) / life.stage.step_d


def _stage(
    setting: Setting, plan: Plan, method: Method, a_au: Array, eccentricity: Array, finer_than: int = 0
) -> Stage:
    """Lay out a stage; the fixed step divides the sample interval into more than ``finer_than`` parts."""
    if method is Method.IAS15:
        return Stage(method, 1.0, 0, False)
    rule = setting.effective_period_d(a_au, eccentricity) / plan.steps_per_periastron
    steps = max(int(np.ceil(setting.interval_d / rule)), finer_than + 1)
    return Stage(method, setting.interval_d / steps, steps, method is Method.WHFAST)


def _first_adaptive_step(setting: Setting) -> float:
    return setting.effective_period_d(setting.a_au, setting.eccentricity) / 100.0


def _first_tangent(task: Task, setting: Setting, plan: Plan, stage: Stage) -> Array:
    """A tangent vector that belongs to the draw: (seed, number) and nothing else."""
    if not plan.indicator or stage.method is Method.TRACE:
        return np.empty((0, 6))
    words = [uniforms(plan.seed, f"tangent {k}", task.number, 1)[0] for k in range(setting.state.size)]
    tangent = 2.0 * np.array(words).reshape(setting.state.shape) - 1.0
    tangent[:, 3:] *= 2.0 * np.pi / float(np.min(setting.period_d))
    return tangent
