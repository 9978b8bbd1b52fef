"""Inside of a worker: take tasks, follow them, send what comes out, and end when the owner ends.

Three threads: the engine's, one that reads what the owner sends, and one that sends results by time and looks after
the owner. The last two only get their turn because kernels release the interpreter's lock.
"""

import dataclasses
import os
import queue
import signal
import threading
import time
import traceback
from collections.abc import Iterator, Sequence

from stabcheck.batch.base import LOOK_EVERY_S, engine_of
from stabcheck.batch.channel import WorkerEnd
from stabcheck.batch.processes import Counter, End
from stabcheck.batch.stages import followed
from stabcheck.outcome import Checkpoint, Finished
from stabcheck.plan import Plan, Task
from stabcheck.store.killpoints import here

FLUSH_EVERY_S = 0.25
FLUSH_AT = 64


def work(pipe_end: End, begun: Counter, engines: Sequence[str], plan: Plan, owner_pid: int) -> None:
    """Be a worker until the owner says stop or is gone. Runs as the main function of a spawned process."""
    os.setsid()  # what the terminal sends to its processes is for the owner alone
    # Not signal.signal: REBOUND puts a handler of its own in place at every call, a blocked signal stays blocked.
    signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    signal.pthread_sigmask(signal.SIG_UNBLOCK, {signal.SIGTERM, signal.SIGHUP})
    here("worker start")
    _Worker(pipe_end, begun, plan, owner_pid).serve(engines)


class _Worker:
    def __init__(self, pipe_end: End, begun: Counter, plan: Plan, owner_pid: int) -> None:
        self._pipe_end = pipe_end  # kept, or its descriptor would be closed
        self._channel = WorkerEnd(pipe_end.fileno())
        self._begun = begun
        self._store_every_s = plan.checkpoint_every_s
        # More often than they are stored: a stop then needs no answer from the engine. Not part of the identity.
        self._plan = dataclasses.replace(plan, checkpoint_every_s=min(LOOK_EVERY_S, plan.checkpoint_every_s))
        self._owner_pid = owner_pid
        self._tasks: queue.SimpleQueue[Task | None] = queue.SimpleQueue()
        self._lock = threading.RLock()
        self._out: list[Finished | Checkpoint] = []
        self._held: dict[int, Checkpoint] = {}  # newest checkpoint of each draw under way, if not sent
        self._stored_at: dict[int, float] = {}

    def serve(self, engine_names: Sequence[str]) -> None:
        for job in (self._read_owner, self._look_after_owner):
            threading.Thread(target=job, daemon=True).start()
        engines = [engine_of(name) for name in engine_names]
        self._channel.send(("ready", None))
        try:
            while True:
                for message in followed(engines, self._handed_out(), self._plan):
                    self._take(message)
        except OSError as problem:
            if not self._owner_is_gone():
                self._fail(problem)
        except Exception as problem:
            self._fail(problem)
        os._exit(1)

    def _handed_out(self) -> Iterator[Task]:
        while True:
            try:
                task = self._tasks.get_nowait()
            except queue.Empty:
                self._flush(wants_more=True)
                task = self._tasks.get()
            if task is None:
                return
            self._begun.value += 1  # seen by the owner even if this process dies in the next line
            with self._lock:
                self._stored_at[task.number] = time.monotonic()
            yield task

    def _take(self, message: Finished | Checkpoint) -> None:
        with self._lock:
            if isinstance(message, Finished):
                self._held.pop(message.outcome.number, None)
                self._stored_at.pop(message.outcome.number, None)
                self._out.append(message)
            else:
                self._hold(message)
            full = len(self._out) >= FLUSH_AT
        if full:
            self._flush()

    def _hold(self, message: Checkpoint) -> None:
        now = time.monotonic()
        # Nine tenths: the engine's clock and this one do not begin at the same instant.
        if now - self._stored_at.get(message.number, now) >= 0.9 * self._store_every_s:
            self._held.pop(message.number, None)
            self._stored_at[message.number] = now
            self._out.append(message)
        else:
            self._held[message.number] = message

    def _flush(self, wants_more: bool = False) -> None:
        with self._lock:  # held while sending: messages of one draw must not overtake each other
            if self._out or wants_more:
                self._channel.send(("messages", self._out, wants_more))
                self._out = []

    def _fail(self, problem: Exception) -> None:
        self._flush()
        self._channel.send(("failed", "".join(traceback.format_exception(problem))))

    def _read_owner(self) -> None:
        for kind, content in self._channel.receive():
            if kind == "tasks":
                for task in content:
                    self._tasks.put(task)
            elif kind == "end":
                self._tasks.put(None)
            else:
                self._stop()
        os._exit(0)  # the owner is gone

    def _stop(self) -> None:
        with self._lock:
            self._out.extend(self._held.values())
            self._flush()
            os._exit(0)

    def _look_after_owner(self) -> None:
        while not self._owner_is_gone():
            time.sleep(FLUSH_EVERY_S)
            try:
                self._flush()
            except OSError:
                break
        os._exit(0)

    def _owner_is_gone(self) -> bool:
        return os.getppid() != self._owner_pid
