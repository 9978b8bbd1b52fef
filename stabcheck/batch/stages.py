"""Engines one after the other: what the first gives up goes on in the next, from the state it was given up with.

The checkpoints of a run say in their first byte which engine they belong to, so that a resume goes on in the right one.
"""

import dataclasses
from collections.abc import Iterable, Iterator, Sequence

from stabcheck.engines.base import Engine
from stabcheck.errors import WorkerError
from stabcheck.outcome import Checkpoint, Finished, Message
from stabcheck.plan import Plan, Task
from stabcheck.store.killpoints import here


def followed(engines: Sequence[Engine], tasks: Iterable[Task], plan: Plan) -> Iterator[Finished | Checkpoint]:
    """Follow tasks to their ends through all the engines they need.

    Raises
    ------
    WorkerError
        If the last engine gives a draw up.
    """
    later: list[Task] = []
    yield from _staged(engines, 0, _of_first_engine(tasks, later), plan, later)
    while later:
        yield from _later(engines, later.pop(), plan)


def _of_first_engine(tasks: Iterable[Task], later: list[Task]) -> Iterator[Task]:
    for task in tasks:
        if stage_of(task) == 0:
            yield dataclasses.replace(task, checkpoint=task.checkpoint[1:])
        else:
            later.append(task)


def _staged(
    engines: Sequence[Engine], stage: int, tasks: Iterable[Task], plan: Plan, later: list[Task]
) -> Iterator[Finished | Checkpoint]:
    known: dict[int, Task] = {}

    def noted() -> Iterator[Task]:
        for task in tasks:
            known[task.number] = task
            yield task

    share: dict[int, float] = {}
    for message in engines[stage].follow(noted(), plan):
        yield from _passed_on(engines, stage, message, plan, known, share)
        while later:  # between two messages the engine waits, and a resumed draw of a later stage gets its turn
            yield from _later(engines, later.pop(), plan)


def _passed_on(
    engines: Sequence[Engine],
    stage: int,
    message: Message,
    plan: Plan,
    known: dict[int, Task],
    share: dict[int, float],
) -> Iterator[Finished | Checkpoint]:
    if isinstance(message, Finished):
        known.pop(message.outcome.number, None)
        share.pop(message.outcome.number, None)
        yield message
    elif isinstance(message, Checkpoint):
        share[message.number] = message.steps_done
        yield Checkpoint(message.number, marked(stage, message.blob), message.steps_done)
    else:
        task = known.pop(message.number)
        if stage + 1 == len(engines):
            raise WorkerError(f"draw {message.number} was given up by the last engine", why=message.why)
        blob = marked(stage + 1, message.blob)
        yield Checkpoint(message.number, blob, share.pop(message.number, 0.0))
        here("hand-over")
        yield from _later(engines, dataclasses.replace(task, checkpoint=blob), plan)


def _later(engines: Sequence[Engine], task: Task, plan: Plan) -> Iterator[Finished | Checkpoint]:
    stage = stage_of(task)
    yield from _staged(engines, stage, [dataclasses.replace(task, checkpoint=task.checkpoint[1:])], plan, [])


def marked(stage: int, blob: bytes) -> bytes:
    """Put the number of the engine before its blob."""
    return bytes([stage]) + blob


def stage_of(task: Task) -> int:
    """Say which engine a task goes on in; a task without checkpoint begins in the first."""
    return task.checkpoint[0] if task.checkpoint else 0
