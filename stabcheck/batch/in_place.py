"""Everything in this process, one draw after the other: the way to debug, and the measure for all others."""

import dataclasses
import time
from collections.abc import Callable, Iterable, Iterator, Sequence

from stabcheck.batch.base import LOOK_EVERY_S, REBOUND, Pulse, engine_of, never
from stabcheck.batch.stages import followed
from stabcheck.outcome import Message
from stabcheck.plan import Plan, Task


class InPlace:
    """Carry out tasks in this process.

    An exception of an engine goes through here unchanged; a draw that kills the process, kills the owner.

    Parameters
    ----------
    engines : sequence of str
        By name, ``module:Class``; what one gives up goes on in the next.
    stop : callable
        Asked at every message; True ends the run.
    """

    count = 1

    def __init__(self, *, engines: Sequence[str] = (REBOUND,), stop: Callable[[], bool] = never) -> None:
        self._engines, self._stop = tuple(engines), stop

    def run(self, tasks: Iterable[Task], plan: Plan) -> Iterator[Message | Pulse]:
        """Carry out tasks, giving messages as they arise."""
        engines = [engine_of(name) for name in self._engines]
        yield Pulse(1)
        often = dataclasses.replace(plan, checkpoint_every_s=min(LOOK_EVERY_S, plan.checkpoint_every_s))
        pulse_at = time.monotonic()
        for message in followed(engines, self._until_stopped(tasks), often):
            yield message
            if self._stop():
                return
            if time.monotonic() - pulse_at > 1.0:
                pulse_at = time.monotonic()
                yield Pulse(1)

    def _until_stopped(self, tasks: Iterable[Task]) -> Iterator[Task]:
        for task in tasks:
            if self._stop():
                return
            yield task
