"""A small engine for the tests of runner and store: exact, resumable, and able to die or hang on chosen draws.

It follows the logistic map, in which one wrong bit is a different result after some fifty steps: a resume that is not
exact cannot stay unseen.
"""

import os
import struct
import time
from collections.abc import Iterable, Iterator

import numpy as np

from stabcheck.outcome import Checkpoint, Finished, HandOver, Message, Motion, Outcome, Survival
from stabcheck.plan import Plan, Task
from stabcheck.store import DrawRow

STEPS = 400
BLOCK = 20
_BLOB = struct.Struct("<qd")


def task_of(number: int) -> Task:
    start = 0.1 + 0.8 * ((number * 0.618_033_988_749_894_9) % 1.0)
    return Task(
        number=number,
        mass_msun=np.array([1.0, 1e-3]),
        radius_au=np.zeros(2),
        position_au=np.array([[0.0, 0.0, 0.0], [start, 0.0, 0.0]]),
        velocity_au_d=np.zeros((2, 3)),
        span_d=float(STEPS),
    )


def rows_of(first: int, count: int, not_an_orbit: tuple[int, ...] = ()) -> list[DrawRow]:
    return [
        DrawRow(number=n, state=b"", values=_value(n), refused="e >= 1 (b)")
        if n in not_an_orbit
        else DrawRow(number=n, state=task_of(n).as_bytes(), values=_value(n))
        for n in range(first, first + count)
    ]


def _value(number: int) -> bytes:
    return np.array([float(number)], dtype="<f8").tobytes()


def chosen(name: str) -> set[int]:
    """Draws that an environment variable names, such as ``TOY_CRASH=3,5``."""
    return {int(number) for number in os.environ.get(name, "").split(",") if number}


def outcome_of(task: Task, step: int, x: float, most: float) -> Outcome:
    broken = task.number % 3 == 0
    return Outcome(
        number=task.number,
        survival=Survival.BROKEN if broken else Survival.SURVIVED,
        motion=Motion.CHAOTIC if x > 0.5 else Motion.REGULAR,
        time_d=float(step),
        span_d=task.span_d,
        method="toy",
        step_d=1.0,
        energy_error=x,
        a_most_au=np.array([x, most]),
        map_steps=step,
    )


class ToyEngine:
    """One draw at a time; draws that ``TOY_HAND_OVER`` names are given up half-way."""

    gives_up = True

    def follow(self, tasks: Iterable[Task], plan: Plan) -> Iterator[Message]:
        for task in tasks:
            yield from self._one(task, plan)

    def _one(self, task: Task, plan: Plan) -> Iterator[Message]:
        if task.number in chosen("TOY_CRASH"):
            os.abort()
        if task.number in chosen("TOY_RAISE"):
            raise RuntimeError(f"a defect at draw {task.number}")
        if task.number in chosen("TOY_HANG"):
            time.sleep(3600.0)
        step, x = _BLOB.unpack(task.checkpoint) if task.checkpoint else (0, abs(float(task.position_au[1, 0])) % 1.0)
        stop = STEPS // 4 if task.number % 3 == 0 else STEPS
        pause_s = float(os.environ.get("TOY_PAUSE_S", "0")) * BLOCK / STEPS
        looked_at = time.monotonic()
        while step < stop:
            if self.gives_up and step >= STEPS // 2 and task.number in chosen("TOY_HAND_OVER"):
                yield HandOver(task.number, _BLOB.pack(step, x), "too near")
                return
            for _ in range(BLOCK):
                x = 3.9 * x * (1.0 - x)
            step += BLOCK
            if pause_s:
                time.sleep(pause_s)
            if time.monotonic() - looked_at >= plan.checkpoint_every_s:
                looked_at = time.monotonic()
                yield Checkpoint(task.number, _BLOB.pack(step, x), step / STEPS)
        warnings = ("a library warns",) if task.number % 5 == 0 else ()
        yield Finished(outcome_of(task, step, x, x * x), warnings)


class ToySecond(ToyEngine):
    """Takes what `ToyEngine` gives up; its results say so."""

    gives_up = False


class Lanes(ToyEngine):
    """Several draws at once, like a vectorised engine: it takes a new one whenever one ends."""

    width = 4

    def follow(self, tasks: Iterable[Task], plan: Plan) -> Iterator[Message]:
        source = iter(tasks)
        lanes = [self._one(task, plan) for _, task in zip(range(self.width), source, strict=False)]
        while lanes:
            for lane in list(lanes):
                message = next(lane, None)
                if message is not None:
                    yield message
                    continue
                lanes.remove(lane)
                following = next(source, None)
                if following is not None:
                    lanes.append(self._one(following, plan))


class NeverReady(ToyEngine):
    """Cannot be prepared."""

    def prepare(self) -> None:
        raise RuntimeError("no compiler on this machine")
