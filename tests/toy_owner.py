"""Carry out a run of the toy engine as a process of its own that a test can kill, or as a function."""

import argparse
import os
import sys
from collections.abc import Iterator, Sequence
from pathlib import Path

from toy_engine import rows_of

from stabcheck.batch.carry import carry_out
from stabcheck.batch.in_place import InPlace
from stabcheck.batch.interrupt import StopRequest
from stabcheck.batch.local import LocalWorkers
from stabcheck.batch.progress import Progress, ProgressLine, Status
from stabcheck.plan import Plan, Task
from stabcheck.store import DrawColumn, RunFile

ENGINES = ("toy_engine:ToyEngine", "toy_engine:ToySecond")
PLAN = Plan(checkpoint_every_s=0.02)
IDENTITY = {"engine": "toy"}
NOT_AN_ORBIT = (7, 8, 30)
CHUNK = 16


def opened(path: Path) -> RunFile:
    if path.exists():
        return RunFile.open(path, for_writing=True, identity=IDENTITY)
    return RunFile.create(path, identity=IDENTITY, bodies=["b"], columns=[DrawColumn("parameter", "number")])


def tasks(run: RunFile, draws: int) -> Iterator[Task]:
    for first in range(0, draws, CHUNK):
        upto, stored = min(first + CHUNK, draws), run.draw_count()
        if stored < upto:
            run.add_draws(rows_of(stored, upto - stored, NOT_AN_ORBIT))
        yield from run.tasks_pending(upto, first)


def carry(
    path: Path,
    draws: int,
    workers: int,
    engines: Sequence[str] = ENGINES,
    *,
    stop: StopRequest | None = None,
    hang_after_s: float | None = None,
    progress: Progress | None = None,
) -> str:
    """Run until ``draws`` in total; gives the dump of the outcomes."""
    stop = stop or StopRequest()
    with opened(path) as run:
        runner = (
            LocalWorkers(workers, engines=engines, log=run.log, stop=stop, hang_after_s=hang_after_s)
            if workers
            else InPlace(engines=engines, stop=stop)
        )
        work = tasks(run, draws)
        carry_out(run, work, runner, PLAN, total=draws, progress=progress, commit_every_s=0.05)
        return run.dump()


def say_at_work(status: Status) -> None:
    """Make the file that ``AT_WORK`` names as soon as a process follows draws: starting takes its time."""
    if status.working and (name := os.environ.pop("AT_WORK", "")):
        Path(name).touch()


def main() -> int:
    parser = argparse.ArgumentParser()
    parser.add_argument("path", type=Path)
    parser.add_argument("draws", type=int)
    parser.add_argument("workers", type=int)
    asked = parser.parse_args()
    with StopRequest().listening() as stop:
        line = ProgressLine(plain_every_s=0.1)

        def show(status: Status) -> None:
            say_at_work(status)
            line(status)

        carry(asked.path, asked.draws, asked.workers, stop=stop, progress=show)
    return 130 if stop.by else 0


if __name__ == "__main__":
    sys.exit(main())
