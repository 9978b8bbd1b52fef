"""Screen a scenario with the real engine as a process of its own that a test can kill.

Commits and checkpoints come fast, draws are stored a few at a time, and the moment at which the engine goes on with
IAS15 is a kill point as well. None of this changes a result.
"""

import dataclasses
import functools
import os
import sys
from pathlib import Path

from stabcheck.batch.progress import Status
from stabcheck.store.killpoints import here

COMMIT_EVERY_S = 0.1
CHECKPOINT_EVERY_S = 0.02
CHUNK = 8


def quickened() -> None:
    """Have the owner store early and often."""
    from stabcheck import screen as screening
    from stabcheck.batch import carry

    plan_of = screening.plan_of
    carry.SHOW_EVERY_S = 0.0
    screening.CHUNK = CHUNK
    screening.plan_of = lambda scenario: dataclasses.replace(plan_of(scenario), checkpoint_every_s=CHECKPOINT_EVERY_S)
    screening.carry_out = functools.partial(screening.carry_out, commit_every_s=COMMIT_EVERY_S)


def watched() -> None:
    """Have the process that follows draws die, if it is to, when a draw has been handed over."""
    from stabcheck.engines.rebound import follow

    hand_over = follow._hand_over

    def handed_over(*arguments: object) -> None:
        hand_over(*arguments)
        here("hand-over")

    follow._hand_over = handed_over


def say_at_work(status: Status) -> None:
    """Make the file that ``AT_WORK`` names as soon as a process follows draws: starting takes seconds."""
    if status.working and (name := os.environ.pop("AT_WORK", "")):
        Path(name).touch()


def main(path: str, scenario: str, draws: str, workers: str) -> None:
    from stabcheck.screen import screen

    quickened()
    if workers == "0":
        watched()
    screen(scenario, run_file=path, draws=int(draws), workers=int(workers), progress=say_at_work)


if __name__ == "__mp_main__":  # a worker reads this file again
    watched()
if __name__ == "__main__":
    main(*sys.argv[1:])
