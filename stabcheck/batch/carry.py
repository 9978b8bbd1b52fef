"""Let a runner carry out tasks, and bring what it says into the run file by time."""

import time
from collections.abc import Iterable

from stabcheck.batch.base import Pulse, Runner
from stabcheck.batch.progress import Progress, Tally
from stabcheck.errors import RunFileError
from stabcheck.outcome import Message
from stabcheck.plan import Plan, Task
from stabcheck.store import RunFile

COMMIT_EVERY_S = 2.0
COMMIT_AT = 512
SHOW_EVERY_S = 1.0


class _Book:
    """Messages on their way into the run file."""

    def __init__(self, run: RunFile, every_s: float) -> None:
        self._run, self._every_s = run, every_s
        self._waiting: list[Message] = []
        self._committed_at = time.monotonic()

    def add(self, message: Message) -> None:
        self._waiting.append(message)

    def commit_if_due(self) -> None:
        late = time.monotonic() - self._committed_at >= self._every_s
        if len(self._waiting) >= COMMIT_AT or (late and self._waiting):
            self.commit()

    def commit(self) -> None:
        waiting, self._waiting = self._waiting, []  # before: what the disk has refused once is not tried again
        if waiting:
            self._run.record(waiting)
        self._committed_at = time.monotonic()


def carry_out(
    run: RunFile,
    tasks: Iterable[Task],
    runner: Runner,
    plan: Plan,
    *,
    total: int,
    progress: Progress | None = None,
    commit_every_s: float = COMMIT_EVERY_S,
) -> None:
    """Carry out tasks and store what comes of them; what is stored survives whatever happens next.

    Parameters
    ----------
    run : RunFile
        Open for writing; it holds the draws of the tasks.
    tasks : iterable of Task
    runner : Runner
    plan : Plan
    total : int
        How many draws were asked for in all, for the progress.
    progress : callable, optional
        Takes a `Status` about every second.
    commit_every_s : float
        So much work at most is lost with the machine, apart from checkpoints.

    Raises
    ------
    RunFileError
        If the disk refuses.
    WorkerError
        If the workers cannot go on.
    """
    book, tally = _Book(run, commit_every_s), Tally(run, total)
    shown_at = 0.0
    try:
        for event in runner.run(tasks, plan):
            if isinstance(event, Pulse):
                tally.ready(event.working)
            else:
                book.add(event)
                tally.add(event)
            book.commit_if_due()
            if progress is not None and time.monotonic() - shown_at >= SHOW_EVERY_S:
                shown_at = time.monotonic()
                progress(tally.status())
    except RunFileError:
        raise
    except BaseException:
        book.commit()  # even at a second Ctrl-C: it takes milliseconds
        raise
    book.commit()
    if progress is not None:
        progress(tally.status(ended=True))
