"""The contract of a runner: tasks go in, messages come out, and where it runs changes nothing but the time."""

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass
from importlib import import_module
from typing import Any, Protocol

from stabcheck.engines.base import Engine
from stabcheck.errors import WorkerError
from stabcheck.outcome import Message
from stabcheck.plan import Plan, Task

REBOUND = "stabcheck.engines.rebound:ReboundEngine"
"""The engine by name: whoever hands out the tasks does not import what integrates them."""

LOOK_EVERY_S = 5.0
"""Engines are asked for a checkpoint this often, so that a stop loses seconds; they are stored far less often."""

Log = Callable[[str, str], None]
"""Takes an event and its text."""


@dataclass(frozen=True, slots=True)
class Pulse:
    """Nothing to report; whoever stores may want to commit. ``working`` counts the processes that are ready."""

    working: int


class Runner(Protocol):
    """Carry out tasks.

    1. Each task ends in at most one ``Finished``, in any order; ``Checkpoint`` may come before. A hand-over from one
       engine to the next is carried out here and comes out as a ``Checkpoint``.
    2. Tasks are taken from the iterable as they are needed, and it is used by the calling thread alone.
    3. A task without ``Finished`` when the iterator ends was not finished: because of a stop, or because it hung.
    4. ``Pulse`` comes at least about every second, and so do chances to stop.

    Attributes
    ----------
    count : int
        Processes that follow draws.
    """

    count: int

    def run(self, tasks: Iterable[Task], plan: Plan) -> Iterator[Message | Pulse]:
        """Carry out tasks, giving messages as they arise."""
        ...


def engine_of(name: str) -> Engine:
    """Make an engine from ``module:Class``; one that has a ``prepare`` method is prepared (kernels compiled).

    Raises
    ------
    WorkerError
        If there is none of that name.
    """
    module, _, kind = name.partition(":")
    try:
        engine: Any = getattr(import_module(module), kind)()
    except (ImportError, AttributeError) as problem:
        raise WorkerError(
            f"the engine {name!r} cannot be loaded", why=str(problem), do="check the installation"
        ) from problem
    if hasattr(engine, "prepare"):
        engine.prepare()
    made: Engine = engine
    return made


def no_log(event: str, text: str) -> None:
    """Take an event and keep nothing."""


def never() -> bool:
    """Nobody asks for a stop."""
    return False
