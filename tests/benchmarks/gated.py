"""An engine that waits at its first draw until it is let go, so that starting processes stays out of a measurement."""

import os
import time
from collections.abc import Iterable, Iterator
from pathlib import Path

from stabcheck.engines.rebound import ReboundEngine
from stabcheck.outcome import Finished, Message
from stabcheck.plan import Plan, Task

FOLDER = "STABCHECK_BENCHMARK_FOLDER"
NAME = "gated:GatedEngine"


def folder() -> Path:
    return Path(os.environ[FOLDER])


def wait_for_go() -> None:
    while not (folder() / "go").exists():
        time.sleep(0.002)


class GatedEngine:
    """The rebound engine, held up before its first draw; leaves the CPU time spent since in a file for this process."""

    def prepare(self) -> None:
        """Load everything before this process says that it is ready."""
        self._engine = ReboundEngine()
        self._engine.prepare()

    def follow(self, tasks: Iterable[Task], plan: Plan) -> Iterator[Message]:
        """Follow tasks."""
        began = -1.0
        for task in tasks:
            if began < 0.0:
                wait_for_go()
                began = time.process_time()
            for message in self._engine.follow([task], plan):
                if isinstance(message, Finished):
                    (folder() / f"spent-{os.getpid()}").write_text(str(time.process_time() - began))
                yield message


def spent_s() -> float:
    """CPU time that all processes of this folder have spent since they were let go."""
    return sum(float(file.read_text()) for file in folder().glob("spent-*"))
