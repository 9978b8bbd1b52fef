"""The life of one draw: stages, restarts, hand-over, and what it came to.

1. A map (WHFast) at the step of the rule, unless ``method.choose`` says otherwise.
2. If an orbit outgrows the step, again from the start with a finer one, at most twice; a third time, or if the energy
   error of the map leaves its bound, again from the start with IAS15.
3. If two planets come close or an orbit opens, IAS15 goes on from a stored state at least one orbit of the outermost
   planet earlier. MEGNO closes there; if that state is the start itself, IAS15 follows the tangent from the start.
4. The span ends, or a physical end is met, or a distance rule of the scenario, or the numbers cannot be trusted.
"""

import time
from collections.abc import Iterator
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from stabcheck.arrays import Array
from stabcheck.engines.rebound import kernels
from stabcheck.engines.rebound.block import BlockEnd, Stage, run_block
from stabcheck.engines.rebound.kernels import energy
from stabcheck.engines.rebound.setting import Setting, setting_of
from stabcheck.engines.rebound.summary import outcome_of, unusable
from stabcheck.engines.rebound.track import Track, first_track, tracks_as_bytes, tracks_from_bytes
from stabcheck.method import choose
from stabcheck.outcome import Checkpoint, Finished, Message, Trust
from stabcheck.plan import Method, Plan, Task
from stabcheck.random import uniforms

STALLED_SHARE = 1e-6
"""An adaptive block that advances by less than this share of the shortest period is stuck (two bodies all but on top of
each other); a thousand such blocks would not cover one encounter."""


@dataclass(slots=True)
class Life:
    """A draw under way: where it stands, the stored states it can go back to, and what its stages decided."""

    stage: Stage
    track: Track
    older: Track
    newer: Track
    """Two stored states: ``older`` is at least one outer orbit before now whenever such a state exists."""
    restarts: int = 0
    handover_time_d: float = float("nan")
    handover_why: str = ""
    map_errors: tuple[float, float] = (0.0, 0.0)
    """Energy errors of the map up to the stored state from which a hand-over went on."""
    megno_until: int = -1
    """Sample at which MEGNO closed; -1 while it is followed to the end."""
    map_steps: float = 0.0
    adaptive_steps: float = 0.0
    """Steps of attempts that were given up."""
    history: list[str] = field(default_factory=list)
    warnings: list[str] = field(default_factory=list)


def follow_draw(task: Task, plan: Plan) -> Iterator[Message]:
    """Follow one draw from its task to ``Finished``, leaving checkpoints by the wall clock.

    The clock decides when a checkpoint is left and nothing else.
    """
    if not _usable(task):
        yield Finished(unusable(task))
        return
    setting = setting_of(task, plan)
    life = _resumed(task, setting, plan) if task.checkpoint else begun(task, setting, plan)
    last = time.monotonic()
    while True:
        end = run_block(life.track, setting, life.stage, plan)
        life.warnings += [text for text in end.warnings if text not in life.warnings]
        trust = _trouble(life, setting, plan, end)
        handed = False
        if trust is not None and not _again(life, task, setting, plan, trust):
            yield Finished(outcome_of(task, plan, setting, life, end, trust), tuple(life.warnings))
            return
        if trust is None and end.code in (kernels.CLOSE_PAIR, kernels.UNBOUND):
            _hand_over(life, task, setting, plan, end)
            handed = True
        elif trust is None and end.code != kernels.UNDER_WAY:
            yield Finished(outcome_of(task, plan, setting, life, end, Trust.OK), tuple(life.warnings))
            return
        elif trust is None:
            _keep_states(life, setting)
        if handed or time.monotonic() - last >= plan.checkpoint_every_s:
            last = time.monotonic()
            share = life.track.time_d(setting, life.stage.step_d) / task.span_d
            yield Checkpoint(task.number, _stored(life), share)


def _usable(task: Task) -> bool:
    numbers = (task.mass_msun, task.radius_au, task.position_au, task.velocity_au_d, np.array(task.span_d))
    return all(bool(np.all(np.isfinite(values))) for values in numbers) and task.span_d > 0.0


def begun(task: Task, setting: Setting, plan: Plan) -> Life:
    """Stand at the start of a draw, with the method that the rule chooses."""
    choice = choose(setting.mass, setting.a_au, setting.eccentricity, plan)
    stage = _stage(setting, plan, choice.method, setting.a_au, setting.eccentricity)
    track = first_track(setting, _first_tangent(task, setting, plan, stage), _first_adaptive_step(setting))
    life = Life(stage, track, track.copy(), track.copy())
    life.history.append(f"{choice.method}: {choice.why}")
    return life


def _stage(
    setting: Setting, plan: Plan, method: Method, a_au: Array, eccentricity: Array, finer_than: int = 0
) -> Stage:
    """Lay out a stage; the fixed step divides the sample interval and is finer than ``finer_than`` steps an interval."""
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


def _trouble(life: Life, setting: Setting, plan: Plan, end: BlockEnd) -> Trust | None:
    """Say why the block cannot be trusted, if so."""
    track, stage = life.track, life.stage
    if not (np.all(np.isfinite(track.state)) and np.all(np.isfinite(track.worst[:1]))):
        return Trust.NOT_FINITE
    if stage.adaptive:
        if track.worst[0] > plan.adaptive_energy_bound:
            return Trust.ENERGY
        if life.adaptive_steps + track.clock[kernels.ADAPTIVE_STEPS] > plan.evaluation_budget:
            return Trust.BUDGET
        stalled = track.clock[kernels.NEXT_STEP] * 2048 < STALLED_SHARE * float(np.min(setting.period_d))
        return Trust.BUDGET if stalled and end.code == kernels.UNDER_WAY else None
    if life.map_steps + track.clock[kernels.MAP_STEPS] > plan.step_budget:
        return Trust.BUDGET
    if end.code in (kernels.CLOSE_PAIR, kernels.UNBOUND):
        return None  # what this map did since the stored state is thrown away
    if track.worst[0] > plan.energy_bound * setting.largest_mass_ratio:
        return Trust.ENERGY
    if _steps_per_periastron(life, setting) < plan.fewest_steps_per_periastron:
        return Trust.STEP_OUTGROWN
    return None


def _steps_per_periastron(life: Life, setting: Setting) -> float:
    """Fewest steps in an effective period, for the smallest axis and the largest eccentricity of each planet so far."""
    extremes = life.track.extremes
    with np.errstate(divide="ignore"):
        a_au = 1.0 / extremes[:, kernels.INVERSE_A_MOST]
    return setting.effective_period_d(a_au, np.sqrt(extremes[:, kernels.E2_MOST])) / life.stage.step_d


def _again(life: Life, task: Task, setting: Setting, plan: Plan, trust: Trust) -> bool:
    """Begin the draw again where that can cure the trouble; say whether it was begun again."""
    stage = life.stage
    if stage.adaptive or trust is Trust.BUDGET or plan.method is not Method.AUTO:
        if trust is not Trust.STEP_OUTGROWN or life.restarts >= plan.most_restarts:
            return False
    when = life.track.time_d(setting, stage.step_d)
    if trust is Trust.STEP_OUTGROWN and life.restarts < plan.most_restarts:
        extremes = life.track.extremes
        a_au = 1.0 / extremes[:, kernels.INVERSE_A_MOST]
        e_most = np.sqrt(extremes[:, kernels.E2_MOST])
        next_stage = _stage(setting, plan, stage.method, a_au, e_most, stage.steps_per_interval)
        life.history.append(f"step outgrown by day {when:.6g}: again with {next_stage.step_d:.6g} d")
    else:
        next_stage = _stage(setting, plan, Method.IAS15, setting.a_au, setting.eccentricity)
        life.history.append(f"{trust} by day {when:.6g}: again with ias15")
    _restart(life, task, setting, plan, next_stage)
    return True


def _restart(life: Life, task: Task, setting: Setting, plan: Plan, stage: Stage) -> None:
    life.map_steps += life.track.clock[kernels.MAP_STEPS]
    life.adaptive_steps += life.track.clock[kernels.ADAPTIVE_STEPS]
    life.restarts += 1
    life.stage = stage
    life.track = first_track(setting, _first_tangent(task, setting, plan, stage), _first_adaptive_step(setting))
    life.older, life.newer = life.track.copy(), life.track.copy()


def _hand_over(life: Life, task: Task, setting: Setting, plan: Plan, end: BlockEnd) -> None:
    """Go on with IAS15 from a stored state at least one outer orbit before the trigger."""
    now_d = life.track.time_d(setting, life.stage.step_d)
    since_newer = now_d - life.newer.time_d(setting, life.stage.step_d)
    back = life.newer if since_newer >= setting.longest_period_d else life.older
    from_d = back.time_d(setting, life.stage.step_d)
    life.map_steps += life.track.clock[kernels.MAP_STEPS] - back.clock[kernels.MAP_STEPS]
    life.handover_why = "close pair" if end.code == kernels.CLOSE_PAIR else "orbit opened"
    life.handover_time_d = from_d
    pair = "-".join(str(body) for body in end.bodies if body)
    life.history.append(f"{life.handover_why} ({pair}) on day {now_d:.6g}: ias15 from day {from_d:.6g}")
    stage = _stage(setting, plan, Method.IAS15, setting.a_au, setting.eccentricity)
    if from_d == 0.0:
        tangent = _first_tangent(task, setting, plan, stage)
        life.track = first_track(setting, tangent, _first_adaptive_step(setting))
    else:
        life.megno_until = int(back.clock[kernels.INTERVAL])
        life.track = back.copy()
        life.map_errors = float(back.worst[0]), float(back.worst[1])
        life.track.worst = np.array([0.0, 0.0, energy(back.state, setting.mass, setting.relativity_strength)])
        life.track.tangent = np.empty((0, 6))
        life.track.clock[kernels.INSIDE] *= life.stage.step_d
        life.track.clock[kernels.NEXT_STEP] = _first_adaptive_step(setting)
    life.stage = stage
    life.older, life.newer = life.track.copy(), life.track.copy()


def _keep_states(life: Life, setting: Setting) -> None:
    """Store a state whenever an outer orbit has passed since the last one; nothing is kept for adaptive methods."""
    if not life.stage.watch_close_pairs:
        return
    step = life.stage.step_d
    if life.track.time_d(setting, step) - life.newer.time_d(setting, step) >= setting.longest_period_d:
        life.older, life.newer = life.newer, life.track.copy()


def _stored(life: Life) -> bytes:
    head = {
        "method": str(life.stage.method),
        "step_d": life.stage.step_d,
        "steps_per_interval": life.stage.steps_per_interval,
        "watch_close_pairs": life.stage.watch_close_pairs,
        "restarts": life.restarts,
        "handover_time_d": life.handover_time_d,
        "handover_why": life.handover_why,
        "map_errors": life.map_errors,
        "megno_until": life.megno_until,
        "map_steps": life.map_steps,
        "adaptive_steps": life.adaptive_steps,
        "history": life.history,
        "warnings": life.warnings,
    }
    return tracks_as_bytes(head, (life.track, life.older, life.newer))


def _resumed(task: Task, setting: Setting, plan: Plan) -> Life:
    head: dict[str, Any]
    head, (track, older, newer) = tracks_from_bytes(task.checkpoint, setting.intervals + 1)
    stage = Stage(
        Method(head.pop("method")), head.pop("step_d"), head.pop("steps_per_interval"), head.pop("watch_close_pairs")
    )
    head["map_errors"] = tuple(head["map_errors"])
    return replace(Life(stage, track, older, newer), **head)
