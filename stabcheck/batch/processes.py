"""The only place that touches ``multiprocess``: spawned processes, pipes, and a counter in shared memory."""

import contextlib
import os
import signal
import sys
from collections.abc import Callable, Iterator
from typing import IO, Any, Protocol

import multiprocess
from multiprocess import process, resource_tracker

from stabcheck.errors import WorkerError

_SPAWN = multiprocess.get_context("spawn")

ONE_THREAD = {name: "1" for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS")}
_STOPS = {signal.SIGINT, signal.SIGTERM, signal.SIGHUP}


class Process(Protocol):
    """What is used of a process."""

    pid: int
    exitcode: int | None

    def join(self, timeout: float | None = None) -> None: ...
    def kill(self) -> None: ...
    def is_alive(self) -> bool: ...


class Counter(Protocol):
    """A whole number in memory that two processes share."""

    value: int


class End(Protocol):
    """One end of a pipe."""

    def fileno(self) -> int: ...
    def close(self) -> None: ...


def pipe() -> tuple[End, End]:
    """Make a two-way pipe."""
    ours, theirs = _SPAWN.Pipe(duplex=True)
    return ours, theirs


def counter() -> Counter:
    """Make a counter that starts at 0."""
    made: Counter = _SPAWN.RawValue("q", 0)
    return made


def start(target: Callable[..., None], arguments: tuple[Any, ...], name: str, stderr: IO[bytes]) -> Process:
    """Start a process that cannot be hit by what is meant for the owner, with one thread for each numerical library.

    Parameters
    ----------
    target : function of a module
    arguments : tuple
    name : str
    stderr : file
        Where its standard error goes, from its first instruction on.
    """
    made = _SPAWN.Process(target=target, args=arguments, name=name, daemon=True)
    resource_tracker.ensure_running()  # now, or it would be started with the redirected standard error
    with _stops_blocked(), _environment(ONE_THREAD), _standard_error_into(stderr):
        made.start()
    started: Process = made
    return started


def refuse_while_importing_main() -> None:
    """Refuse to begin a run inside of a worker that is only re-reading the script it was started from.

    Raises
    ------
    WorkerError
        With how to write the script.
    """
    if getattr(process.current_process(), "_inheriting", False):
        raise missing_guard()


def refuse_main_without_file() -> None:
    """Refuse to start workers for a script that they could not read again.

    Raises
    ------
    WorkerError
        If the script came over standard input.
    """
    main = sys.modules["__main__"]
    file = getattr(main, "__file__", None)  # a notebook or ``python -c`` has none, and nothing is read again
    if getattr(main, "__spec__", None) is None and file is not None and not os.path.exists(file):
        raise WorkerError(
            "a script that is no file cannot start workers",
            where=str(file),
            why="each worker reads the script again",
            do="save it as a file, or ask for workers=0, which works in this process",
        )


def missing_guard() -> WorkerError:
    """Say how a script has to be written."""
    return WorkerError(
        "a script that starts a run needs the usual guard",
        where="the script that was started",
        why="each worker reads the script again, and would start the run again",
        do='put what the script does under the line  if __name__ == "__main__":',
    )


@contextlib.contextmanager
def _stops_blocked() -> Iterator[None]:
    """Block the stop signals; a process that is started inherits that, before it has even an interpreter."""
    before = signal.pthread_sigmask(signal.SIG_BLOCK, _STOPS)
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)


@contextlib.contextmanager
def _environment(wanted: dict[str, str]) -> Iterator[None]:
    before = {name: os.environ.get(name) for name in wanted}
    os.environ.update(wanted)
    try:
        yield
    finally:
        for name, value in before.items():
            if value is None:
                del os.environ[name]
            else:
                os.environ[name] = value


@contextlib.contextmanager
def _standard_error_into(file: IO[bytes]) -> Iterator[None]:
    # multiprocess has no way to give a process another standard error, and a script that cannot be read fails before
    # any line of ours runs in it. What another thread of the owner prints in these milliseconds goes there too.
    try:
        before = os.dup(2)
    except OSError:  # it is closed: there is nothing to put back
        before = -1
    os.dup2(file.fileno(), 2)
    try:
        yield
    finally:
        if before >= 0:
            os.dup2(before, 2)
            os.close(before)
        else:
            os.close(2)
