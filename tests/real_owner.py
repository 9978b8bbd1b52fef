"""Screen a scenario with the real engine as a process of its own that a test can kill.

Commits and checkpoints come fast, draws are stored a few at a time, and the moments at which the engine goes on with
another method, IAS15 or a map again, are kill points as well. None of this changes a result.
"""

import dataclasses
import functools
import sys

from toy_owner import say_at_work

from stabcheck.store.killpoints import here

COMMIT_EVERY_S = 0.1
CHECKPOINT_EVERY_S = 0.02
CHUNK = 8


def quickened() -> None:
    """Have the owner store early and often."""
    from stabcheck import screen as screening

    plan_of = screening.plan_of
    screening.CHUNK = CHUNK
    screening.plan_of = lambda scenario: dataclasses.replace(plan_of(scenario), checkpoint_every_s=CHECKPOINT_EVERY_S)
    screening.carry_out = functools.partial(screening.carry_out, commit_every_s=COMMIT_EVERY_S)


def watched() -> None:
    """Have the process that follows draws die, if it is to, when a draw changes its method."""
    from stabcheck.engines.rebound import changes

    go_on = changes._go_on

    def gone_on(*arguments: object) -> None:
        go_on(*arguments)
        here("hand-over")

    changes._go_on = gone_on


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
