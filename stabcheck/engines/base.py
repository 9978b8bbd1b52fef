"""The contract of an engine, written once; ``tests/unit/test_engine_contract.py`` holds all that sign it to it."""

from collections.abc import Iterable, Iterator
from typing import Protocol

from stabcheck.outcome import Message
from stabcheck.plan import Plan, Task


class Engine(Protocol):
    """Follow draws.

    1. Each task ends in exactly one ``Finished`` or ``HandOver``, in any order; ``Checkpoint`` may come before.
    2. An outcome depends on the task's own state and the plan, never on its neighbours or on the clock.
    3. Going on from any checkpoint gives the same outcome, bit for bit.
    4. Numerical trouble is an outcome, not an exception.
    5. No file, no print, no global or hidden random state.
    """

    def follow(self, tasks: Iterable[Task], plan: Plan) -> Iterator[Message]:
        """Follow tasks to their ends, yielding messages as they arise."""
        ...
