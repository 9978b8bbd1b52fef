"""Follow a draw and keep its path: the very steps that decided its outcome, looked at again where one asks.

The engine leaves a checkpoint at the end of each block of steps (the clock that decides when changes no result). From
there each block is taken once more, step by step as the compiled loop takes them, and states are kept on the way. Each
block must end on the bits with which the next begins; ``Path.exact`` says whether all of them did.
"""

import ctypes
import warnings
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import rebound

from stabcheck.arrays import Array, Flags
from stabcheck.engines.rebound import kernels
from stabcheck.engines.rebound.block import Stage, simulation_at
from stabcheck.engines.rebound.follow import begun, follow_draw
from stabcheck.engines.rebound.library import POSITION, particles_view
from stabcheck.engines.rebound.setting import Setting, setting_of
from stabcheck.engines.rebound.track import Track, tracks_from_bytes
from stabcheck.outcome import Checkpoint, Finished
from stabcheck.plan import Method, Plan, Task

EVERY_BLOCK_S = 1e-9
"""Less than any block takes."""

Wanted = Callable[[Array], Flags]
"""Says of times, in days, which lie where every step is to be kept."""


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

    def path(self, grid_d: Array, every_step: Wanted | None = None) -> Path:
        """Keep the first step that ends at or after each time of the grid, and every step where asked.

        Parameters
        ----------
        grid_d : (time,) array
            Increasing, in days.
        every_step : callable, optional
            Takes times in days and says which steps to keep besides.

        Returns
        -------
        Path
        """
        times, states, exact = [0.0], [self.setting.state.copy()], True
        for place, leg in enumerate(self.legs):
            last = leg.track.state
            for time_d, state, kept in _walked(leg, self.setting, grid_d, every_step):
                last = state
                if kept:
                    times.append(time_d)
                    states.append(state)
            if place + 1 < len(self.legs):
                exact = exact and np.array_equal(last, self.legs[place + 1].track.state)
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
    head: dict[str, Any]
    head, (track, *_) = tracks_from_bytes(message.blob, setting.intervals + 1)
    stage = Stage(
        Method(head["method"]), head["step_d"], head["steps_per_interval"], head["watch_close_pairs"]
    )
    map_steps = int(head["map_steps"] + track.clock[kernels.MAP_STEPS])
    return stage, track, (map_steps, int(head["adaptive_steps"] + track.clock[kernels.ADAPTIVE_STEPS]))


def _slim(track: Track) -> Track:
    """Leave out the series: thousands of blocks are kept at once."""
    nothing = np.empty(0)
    return replace(track.copy(), longitudes=nothing, ln_deltas=nothing, megnos=nothing)


def _walked(leg: Leg, setting: Setting, grid_d: Array, every: Wanted | None) -> Iterator[tuple[float, Array, bool]]:
    """Take the steps of a block again; give time, state and whether to keep it, at least at the block's end."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # the outcome brings the warnings of the same steps
        simulation = simulation_at(leg.track, setting, leg.stage)
        walk = _walked_adaptive if leg.stage.adaptive else _walked_map
        yield from walk(simulation, leg, setting, grid_d, every)


def _walked_map(
    simulation: Any, leg: Leg, setting: Setting, grid_d: Array, every: Wanted | None
) -> Iterator[tuple[float, Array, bool]]:
    clock = leg.track.clock
    number = int(clock[kernels.INSIDE]) + np.arange(leg.steps + 1)
    interval, inside = np.divmod(number, leg.stage.steps_per_interval)
    ends_d = (clock[kernels.INTERVAL] + interval) * setting.interval_d + inside * leg.stage.step_d
    kept = _first_at_or_after(ends_d, grid_d)
    if every is not None:
        kept |= every(ends_d)
    kept[0] = False  # it was kept as the end of the block before
    done = 0
    for place in np.union1d(np.flatnonzero(kept), [leg.steps]):
        _advance(simulation, int(place) - done)
        done = int(place)
        yield float(ends_d[place]), _state(simulation), bool(kept[place])


def _walked_adaptive(
    simulation: Any, leg: Leg, setting: Setting, grid_d: Array, every: Wanted | None
) -> Iterator[tuple[float, Array, bool]]:
    """Steps end on the sample grid of the engine, as in the compiled loop."""
    clock = leg.track.clock
    interval, inside, kept_step = clock[kernels.INTERVAL], clock[kernels.INSIDE], clock[kernels.NEXT_STEP]
    before_d = leg.begin_d
    for number in range(1, leg.steps + 1):
        remaining = setting.interval_d - inside
        simulation.dt = min(kept_step, remaining)
        _advance(simulation, 1)
        step = simulation.dt_last_done
        inside += step
        kept_step = kept_step if step == remaining and kept_step > remaining else simulation.dt
        now_d = float(interval * setting.interval_d + inside)
        if step == remaining:
            interval, inside = interval + 1.0, 0.0
        kept = _any_between(grid_d, before_d, now_d) or (every is not None and bool(every(np.array([now_d]))[0]))
        if kept or number == leg.steps:
            yield now_d, _state(simulation), kept
        before_d = now_d


def _first_at_or_after(ends_d: Array, grid_d: Array) -> Flags:
    """Which ends of steps are the first at or after some time of the grid; the first end stands for what was before."""
    due = np.searchsorted(grid_d, ends_d, side="right")
    return np.concatenate([[False], np.diff(due) > 0])


def _any_between(grid_d: Array, before_d: float, now_d: float) -> bool:
    return bool(np.searchsorted(grid_d, now_d, side="right") > np.searchsorted(grid_d, before_d, side="right"))


def _advance(simulation: Any, steps: int) -> None:
    # Not simulation.steps(): that raises an exception for what the engine judges by its numbers.
    rebound.clibrebound.reb_simulation_steps(ctypes.byref(simulation), ctypes.c_size_t(steps))


def _state(simulation: Any) -> Array:
    return np.array(particles_view(simulation)[:, POSITION : POSITION + 6])
