"""The life of one draw, from its task to what it came to.

1. A map (WHFast) at the step of the rule, unless ``method.choose`` says otherwise.
2. If an orbit outgrows the step, again from the start with a finer one, at most twice; a third time, or if the energy
   error of the map leaves its bound, again from the start with IAS15.
3. If two planets come close or an orbit opens, IAS15 goes on from a stored state, and gives the draw back to the map
   when it has been quiet for long (``changes``).
4. The span ends, or a physical end is met, or a distance rule of the scenario, or the numbers cannot be trusted.
"""

import time
from collections.abc import Iterator

import numpy as np

from stabcheck.engines.rebound import kernels
from stabcheck.engines.rebound.block import BlockEnd, run_block
from stabcheck.engines.rebound.changes import began_again, begun, hand_over, handed_back, steps_per_periastron
from stabcheck.engines.rebound.life import Life, restored, stored
from stabcheck.engines.rebound.setting import Setting, setting_of
from stabcheck.engines.rebound.summary import outcome_of, unusable
from stabcheck.outcome import Checkpoint, Finished, Message, Trust
from stabcheck.plan import Method, Plan, Task

STALLED_SHARE = 1e-6
"""An adaptive block that advances by less than this share of the shortest period is stuck (two bodies all but on top of
each other); a thousand such blocks would not cover one encounter."""

GIVEN_UP = {kernels.CLOSE_PAIR: "close pair", kernels.UNBOUND: "orbit opened"}


def follow_draw(task: Task, plan: Plan) -> Iterator[Message]:
    """Follow one draw from its task to ``Finished``, leaving checkpoints by the wall clock.

    The clock decides when a checkpoint is left and nothing else.
    """
    if not _usable(task):
        yield Finished(unusable(task))
        return
    setting = setting_of(task, plan)
    life = restored(task.checkpoint, setting) if task.checkpoint else begun(task, setting, plan)
    last = time.monotonic()
    while True:
        end = run_block(life.track, setting, life.stage, plan)
        life.story.warnings += [text for text in end.warnings if text not in life.story.warnings]
        trust = _trouble(life, setting, plan, end)
        changed = _changed(life, task, setting, plan, end, trust)
        if not changed and (trust is not Trust.OK or end.code != kernels.UNDER_WAY):
            yield Finished(outcome_of(task, setting, life, end, trust), tuple(life.story.warnings))
            return
        if not changed:
            _keep_states(life, setting)
        if changed or time.monotonic() - last >= plan.checkpoint_every_s:
            last = time.monotonic()
            yield Checkpoint(task.number, stored(life), life.time_d(setting) / task.span_d)


def _usable(task: Task) -> bool:
    numbers = (task.mass_msun, task.radius_au, task.position_au, task.velocity_au_d, np.array(task.span_d))
    return all(bool(np.all(np.isfinite(values))) for values in numbers) and task.span_d > 0.0


def _changed(life: Life, task: Task, setting: Setting, plan: Plan, end: BlockEnd, trust: Trust) -> bool:
    """Change the method where this block's end asks for it; say whether it was changed."""
    if trust is not Trust.OK:
        return began_again(life, task, setting, plan, trust)
    if end.code in GIVEN_UP:
        bodies = "-".join(str(body) for body in end.bodies if body)
        hand_over(life, setting, f"{GIVEN_UP[end.code]} ({bodies})", may_return=True)
        return True
    return end.code == kernels.UNDER_WAY and handed_back(life, setting, plan)


def _trouble(life: Life, setting: Setting, plan: Plan, end: BlockEnd) -> Trust:
    """Say why the block cannot be trusted, or that it can."""
    track, stage, story = life.track, life.stage, life.story
    if not (np.all(np.isfinite(track.state)) and np.all(np.isfinite(track.worst[:1]))):
        return Trust.NOT_FINITE
    if story.map_steps + track.clock[kernels.MAP_STEPS] > plan.step_budget:
        return Trust.BUDGET
    if story.adaptive_steps + track.clock[kernels.ADAPTIVE_STEPS] > plan.evaluation_budget:
        return Trust.BUDGET
    if stage.adaptive:
        stalled = track.clock[kernels.NEXT_STEP] * 2048 < STALLED_SHARE * float(np.min(setting.period_d))
        if stalled and end.code == kernels.UNDER_WAY:
            return Trust.BUDGET
        return Trust.ENERGY if track.worst[0] > plan.adaptive_energy_bound else Trust.OK
    if end.code in GIVEN_UP:
        return Trust.OK  # what this map did since the stored state is thrown away
    bound = plan.energy_bound * setting.largest_mass_ratio
    if track.worst[0] > (plan.trace_energy_bound if stage.method is Method.TRACE else bound):
        return Trust.ENERGY
    outgrown = steps_per_periastron(life, setting) < plan.fewest_steps_per_periastron
    return Trust.STEP_OUTGROWN if outgrown else Trust.OK


def _keep_states(life: Life, setting: Setting) -> None:
    """Store a state whenever an outer orbit has passed since the last one; nothing is kept for adaptive methods."""
    if not life.stage.watch_close_pairs:
        return
    since = life.time_d(setting) - life.newer.time_d(setting, life.stage.step_d)
    if since >= setting.longest_period_d:
        life.older, life.newer = life.newer, life.track.copy()
