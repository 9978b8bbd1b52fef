"""Follow a draw and keep its path: the very steps that decided its outcome, looked at again where one asks.

The engine leaves a checkpoint at the end of each block of steps (the clock that decides when changes no result). From
there each block is taken once more, step by step as the compiled loop takes them, and states are kept on the way. Each
block must end on the bits with which the next begins; ``Path.exact`` says whether all of them did.
"""

import ctypes
import math
import warnings
from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import rebound

from stabcheck.arrays import Array, Flags
from stabcheck.engines.rebound import kernels
from stabcheck.engines.rebound.block import Stage, simulation_at
from stabcheck.engines.rebound.changes import begun
from stabcheck.engines.rebound.follow import follow_draw
from stabcheck.engines.rebound.library import POSITION, particles_view
from stabcheck.engines.rebound.life import restored
from stabcheck.engines.rebound.setting import Setting, setting_of
from stabcheck.engines.rebound.track import Track
from stabcheck.outcome import Checkpoint, Finished
from stabcheck.plan import Plan, Task

EVERY_BLOCK_S = 1e-9
"""Less than any block takes."""

Window = tuple[float, float]
"""First and last time, in days, between which every step is kept."""
NO_WINDOW: Window = (math.inf, -math.inf)


@dataclass(frozen=True, slots=True)
class Leg:
    """One block of steps: where it began, how it went on, and how many steps it took."""

    stage: Stage
    track: Track
    begin_d: float
    steps: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Path:
    """States along the way of one draw.

    Attributes
    ----------
    time_d : (time,) array
        Ends of steps, increasing, the start first.
    state : (time, body, 6) array
        Barycentric position (au) and velocity (au/d).
    exact : bool
        Whether these are the steps of the outcome, bit for bit.
    """

    time_d: Array
    state: Array
    exact: bool

    def on_grid(self, grid_d: Array) -> Flags:
        """Which states belong to a grid: the first at or after each of its times, and the last of all."""
        due = np.searchsorted(grid_d, self.time_d, side="right")
        chosen = np.concatenate([[True], np.diff(due) > 0])
        chosen[-1] = True
        return chosen


@dataclass(frozen=True, slots=True, kw_only=True)
class Turn:
    """Where a method took over."""

    time_d: float
    method: str
    step_d: float
    """NaN if the method chooses it."""
    state: Array


@dataclass(frozen=True, slots=True, kw_only=True)
class Replay:
    """A draw that was followed to its end, block by block."""

    finished: Finished
    setting: Setting
    legs: tuple[Leg, ...]

    def turns(self) -> tuple[Turn, ...]:
        """The start, and each state from which another method or step went on."""
        found: list[Turn] = []
        for leg in self.legs:
            step_d = float("nan") if leg.stage.adaptive else leg.stage.step_d
            method = str(leg.stage.method)
            if not found or (found[-1].method, repr(found[-1].step_d)) != (method, repr(step_d)):
                found.append(Turn(time_d=leg.begin_d, method=method, step_d=step_d, state=leg.track.state))
        return tuple(found)

    def path(self, grid_d: Array, window: Window = NO_WINDOW) -> Path:
        """Keep the first step that ends at or after each time of the grid, and every step within a window.

        Parameters
        ----------
        grid_d : (time,) array
            Increasing, in days.
        window : (first, last)
            In days.

        Returns
        -------
        Path
        """
        times, states, exact = [0.0], [self.setting.state.copy()], True
        for place, leg in enumerate(self.legs):
            last, is_last = leg.track.state, place + 1 == len(self.legs)
            for time_d, state, kept in _walked(leg, self.setting, grid_d, window):
                last = state
                if kept:
                    times.append(time_d)
                    states.append(state)
            if not is_last:
                exact = exact and np.array_equal(last, self.legs[place + 1].track.state)
            elif not kept:  # the last step ends a rounding before the last time of the grid
                times.append(time_d)
                states.append(state)
        return Path(time_d=np.array(times), state=np.array(states), exact=bool(exact))


def replay_of(task: Task, plan: Plan) -> Replay:
    """Follow one draw as ``ReboundEngine`` does, and remember where each block began.

    Parameters
    ----------
    task : Task
        Without a checkpoint.
    plan : Plan

    Returns
    -------
    Replay
        Steps of attempts that were given up (a step outgrown, a hand-over's way back) are left out.
    """
    setting = setting_of(task, plan)
    first = begun(task, setting, plan)
    stage, track, done = first.stage, _slim(first.track), (0, 0)
    legs: list[Leg] = []
    messages = follow_draw(task, replace(plan, checkpoint_every_s=EVERY_BLOCK_S))
    for message in messages:
        begin_d = track.time_d(setting, stage.step_d)
        if isinstance(message, Finished):
            total = message.outcome.map_steps, message.outcome.adaptive_steps
            legs.append(Leg(stage, track, begin_d, total[stage.adaptive] - done[stage.adaptive]))
            return Replay(finished=message, setting=setting, legs=tuple(leg for leg in legs if leg.steps))
        if not isinstance(message, Checkpoint):
            raise AssertionError("this engine hands nothing over to another")
        head, track_now, total = _checkpoint(message, setting)
        legs.append(Leg(stage, track, begin_d, total[stage.adaptive] - done[stage.adaptive]))
        stage, track, done = head, _slim(track_now), total
        # Whatever did not begin before this state was given up.
        now_d = track.time_d(setting, stage.step_d)
        legs = [leg for leg in legs if leg.begin_d < now_d]
    raise AssertionError("an engine ends each task with Finished")


def _checkpoint(message: Checkpoint, setting: Setting) -> tuple[Stage, Track, tuple[int, int]]:
    life = restored(message.blob, setting)
    clock, story = life.track.clock, life.story
    map_steps = int(story.map_steps + clock[kernels.MAP_STEPS])
    return life.stage, life.track, (map_steps, int(story.adaptive_steps + clock[kernels.ADAPTIVE_STEPS]))


def _slim(track: Track) -> Track:
    """Leave out the series: thousands of blocks are kept at once."""
    nothing = np.empty(0)
    return replace(track.copy(), longitudes=nothing, ln_deltas=nothing, megnos=nothing)


def _walked(leg: Leg, setting: Setting, grid_d: Array, window: Window) -> Iterator[tuple[float, Array, bool]]:
    """Take the steps of a block again; give time, state and whether to keep it, at least at the block's end."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # the outcome brings the warnings of the same steps
        simulation = simulation_at(leg.track, setting, leg.stage)
        walk = _walked_adaptive if leg.stage.adaptive else _walked_map
        yield from walk(simulation, leg, setting, grid_d, window)


def _walked_map(
    simulation: Any, leg: Leg, setting: Setting, grid_d: Array, window: Window
) -> Iterator[tuple[float, Array, bool]]:
    clock = leg.track.clock
    number = int(clock[kernels.INSIDE]) + np.arange(leg.steps + 1)
    interval, inside = np.divmod(number, leg.stage.steps_per_interval)
    ends_d = (clock[kernels.INTERVAL] + interval) * setting.interval_d + inside * leg.stage.step_d
    # The first end of a step at or after a time of the grid, and all within the window. The start is the end of the
    # block before, and was kept there.
    due = np.diff(np.searchsorted(grid_d, ends_d, side="right")) > 0
    kept = np.concatenate([[False], due | ((window[0] <= ends_d[1:]) & (ends_d[1:] <= window[1]))])
    done = 0
    for place in np.union1d(np.flatnonzero(kept), [leg.steps]).tolist():
        _advance(simulation, place - done)
        done = place
        yield float(ends_d[place]), _state(simulation), bool(kept[place])


def _walked_adaptive(
    simulation: Any, leg: Leg, setting: Setting, grid_d: Array, window: Window
) -> Iterator[tuple[float, Array, bool]]:
    """Steps end on the sample grid of the engine, as in the compiled loop."""
    clock, interval_d = leg.track.clock, setting.interval_d
    interval, inside = float(clock[kernels.INTERVAL]), float(clock[kernels.INSIDE])
    next_step = float(clock[kernels.NEXT_STEP])
    due = iter(grid_d[np.searchsorted(grid_d, leg.begin_d, side="right") :].tolist())
    next_due = next(due, math.inf)
    for number in range(1, leg.steps + 1):
        remaining = interval_d - inside
        simulation.dt = min(next_step, remaining)
        _advance(simulation, 1)
        step = simulation.dt_last_done
        inside += step
        if not (step == remaining and next_step > remaining):
            next_step = simulation.dt
        now_d = interval * interval_d + inside
        if step == remaining:
            interval, inside = interval + 1.0, 0.0
        kept = next_due <= now_d or window[0] <= now_d <= window[1]
        if kept or number == leg.steps:
            yield now_d, _state(simulation), kept
        while next_due <= now_d:
            next_due = next(due, math.inf)


def _advance(simulation: Any, steps: int) -> None:
    # Not simulation.steps(): that raises an exception for what the engine judges by its numbers.
    rebound.clibrebound.reb_simulation_steps(ctypes.byref(simulation), ctypes.c_size_t(steps))


def _state(simulation: Any) -> Array:
    return np.array(particles_view(simulation)[:, POSITION : POSITION + 6])
