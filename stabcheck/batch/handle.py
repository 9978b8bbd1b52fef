"""The owner's view of one worker: what it was given, what it has begun, when it was last heard of."""

import dataclasses
import os
import tempfile
import time
from collections.abc import Sequence
from typing import Any

from stabcheck.batch import processes
from stabcheck.batch.channel import OwnerEnd
from stabcheck.batch.worker import work
from stabcheck.outcome import Checkpoint, Finished
from stabcheck.plan import Plan, Task

STDERR_KEPT = 1 << 20
"""A worker's standard error beyond this is thrown away, or a chatty library could fill the disk in a night."""


class Worker:
    """A worker process and its books.

    Attributes
    ----------
    outstanding : dict of int to Task
        What it was given and has not finished, in order, each with its newest checkpoint.
    alone : bool
        It has one task and gets no other: that one was in flight when another worker died.
    wanting : bool
        It waits for tasks and has none in flight.
    ready : bool
        It has imported and compiled everything.
    failure : str
        The exception that ended its engine, if one did, with its traceback.
    """

    def __init__(self, name: str, engines: Sequence[str], plan: Plan) -> None:
        ours, theirs = processes.pipe()
        self._pipe_end = ours
        self.name = name
        self.channel = OwnerEnd(ours.fileno())
        self._begun = processes.counter()
        self._stderr = tempfile.TemporaryFile("a+b")  # noqa: SIM115 - lives as long as the worker
        arguments = (theirs, self._begun, tuple(engines), plan, os.getpid())
        self.process = processes.start(work, arguments, name, self._stderr)
        theirs.close()  # or its death would not be seen as the end of what it sends
        self.outstanding: dict[int, Task] = {}
        self._order: list[int] = []  # what it was given and the owner does not know to be finished, as given
        self._given = 0
        self.alone = self.wanting = self.ready = False
        self.heard_at = self.ready_at = time.monotonic()
        self.finished = 0
        self.failure = ""

    def give(self, tasks: Sequence[Task], alone: bool = False) -> None:
        """Send tasks."""
        if not self.outstanding:
            self.heard_at = time.monotonic()  # it had nothing to say before
        for task in tasks:
            self.outstanding[task.number] = task
            self._order.append(task.number)
        self._given += len(tasks)
        self.alone, self.wanting = alone, False
        self.channel.send(("tasks", list(tasks)))

    def no_more(self) -> None:
        """Tell it to finish what it has without waiting for more."""
        self.channel.send(("end", None))

    def ask_to_stop(self) -> None:
        """Ask for the newest checkpoints and its end."""
        self.channel.send(("stop", None))

    def receive(self) -> list[Any]:
        """Read what it has sent."""
        messages = self.channel.receive()
        if messages:
            self.heard_at = time.monotonic()
        return messages

    def note(self, message: Finished | Checkpoint) -> bool:
        """Keep the books; False if this worker has no such task."""
        number = message.outcome.number if isinstance(message, Finished) else message.number
        if number not in self.outstanding:
            return False
        if isinstance(message, Finished):
            del self.outstanding[number]
            self._order.remove(number)
            self.finished += 1
        else:
            self.outstanding[number] = dataclasses.replace(self.outstanding[number], checkpoint=message.blob)
        return True

    @property
    def queued(self) -> int:
        """How many tasks it has not begun."""
        return self._given - self._begun.value

    def in_flight_and_not(self) -> tuple[list[Task], list[Task]]:
        """Split what it has not finished into begun and not begun: it begins tasks in the order they were given."""
        unbegun = min(self.queued, len(self._order))
        border = len(self._order) - unbegun
        tasks = [self.outstanding[number] for number in self._order]
        return tasks[:border], tasks[border:]

    def rate_per_s(self) -> float:
        """How many draws it finishes a second."""
        return self.finished / max(time.monotonic() - self.ready_at, 0.1)

    def stderr_text(self, most: int = 4000) -> str:
        """Give the end of its standard error."""
        size = os.fstat(self._stderr.fileno()).st_size
        return os.pread(self._stderr.fileno(), most, max(0, size - most)).decode(errors="replace").strip()

    def trim_stderr(self) -> None:
        """Throw its standard error away when it has grown too long."""
        if os.fstat(self._stderr.fileno()).st_size > STDERR_KEPT:
            self._stderr.truncate(0)

    def end(self) -> None:
        """End it now, if it has not ended, and clean up. The process is known by its own id, nothing else is hit."""
        self.process.kill()
        self.process.join()
        self._pipe_end.close()
        self._stderr.close()
