"""Named places where the fault tests have a process killed. Without ``STABCHECK_KILL_AT`` nothing happens here.

``STABCHECK_KILL_AT=name:count`` kills the process that comes to ``name`` for the ``count``-th time;
``name:count:file`` kills only the first process that can create ``file``, so that its replacement lives.
"""

import os
import signal

NAMES = (
    "before commit",
    "in commit",
    "after commit",
    "checkpoint stored",
    "draws added",
    "run file created",
    "half-sent message",
    "worker start",
    "hand-over",
)

_passes = 0


def here(name: str) -> None:
    """Die by SIGKILL if this is the place, the time and the process that the environment names."""
    wanted = os.environ.get("STABCHECK_KILL_AT")
    if wanted is None:
        return
    place, _, rest = wanted.partition(":")
    if place != name:
        return
    count, _, once = rest.partition(":")
    global _passes
    _passes += 1
    if _passes == int(count) and (not once or _first_of_all(once)):
        os.kill(os.getpid(), signal.SIGKILL)


def _first_of_all(token: str) -> bool:
    try:
        os.close(os.open(token, os.O_CREAT | os.O_EXCL))
    except FileExistsError:
        return False
    return True
