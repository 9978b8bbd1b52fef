"""The contract of ``engines.base``, clause by clause, over every engine that signs it."""

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from engine_tasks import task_of

from stabcheck.constants import JUPITER_MSUN
from stabcheck.engines.rebound import ReboundEngine, block
from stabcheck.outcome import Checkpoint, Finished, Outcome, Survival, Trust
from stabcheck.plan import Plan, Task

ENGINES: list[Callable[[], Any]] = [ReboundEngine]
PLAN = Plan(seed=7, samples=256, checkpoint_every_s=1e-9)


def quiet(number: int) -> Task:
    planets = [{"m": 3e-6, "a": 0.05, "e": 0.05, "M": 1.0 + number}, {"m": 5e-6, "a": 0.08, "e": 0.02, "M": 2.0}]
    return task_of(0.9, planets, 9_000.0, number=number)


def crossing(number: int) -> Task:
    planets = [
        {"m": 2 * JUPITER_MSUN, "a": 1.0, "e": 0.1, "M": 0.3 * number},
        {"m": JUPITER_MSUN, "a": 1.25, "e": 0.1, "M": 2.0},
    ]
    return task_of(1.0, planets, 60_000.0, number=number, radii_au=[0.005, 0.0005, 0.0005])


def not_finite(number: int) -> Task:
    task = quiet(number)
    position = task.position_au.copy()
    position[1, 0] = np.nan
    return Task(
        number=number,
        mass_msun=task.mass_msun,
        radius_au=task.radius_au,
        position_au=position,
        velocity_au_d=task.velocity_au_d,
        span_d=task.span_d,
    )


TASKS = [quiet(0), crossing(1), not_finite(2), quiet(3), crossing(4), crossing(5)]


def outcomes(engine: Any, tasks: list[Task], plan: Plan = PLAN) -> dict[int, Outcome]:
    found = [message.outcome for message in engine.follow(tasks, plan) if isinstance(message, Finished)]
    assert len(found) == len(tasks)
    return {outcome.number: outcome for outcome in found}


def bits(outcome: Outcome) -> str:
    """Every field of an outcome with all its digits."""
    return repr([(name, _exact(getattr(outcome, name))) for name in outcome.__slots__])


def _exact(value: Any) -> Any:
    return value.tobytes() if isinstance(value, np.ndarray) else value


@pytest.fixture(params=ENGINES, ids=lambda engine: engine.__name__)
def engine(request: pytest.FixtureRequest) -> Any:
    return request.param()


def test_each_task_comes_back_once(engine):
    assert sorted(outcomes(engine, TASKS)) == [0, 1, 2, 3, 4, 5]


def test_an_outcome_does_not_depend_on_its_neighbours(engine):
    together = outcomes(engine, TASKS)
    for task in reversed(TASKS):
        assert bits(outcomes(engine, [task])[task.number]) == bits(together[task.number])


def test_the_tasks_straddle_what_can_happen(engine):
    found = outcomes(engine, TASKS)
    assert {found[n].survival for n in found} == {Survival.SURVIVED, Survival.BROKEN, Survival.UNKNOWN}
    assert any(found[n].handover_why for n in found)


@pytest.mark.parametrize("task", [TASKS[0], TASKS[1], TASKS[4]], ids=["quiet", "crossing", "other"])
def test_going_on_from_any_checkpoint_gives_the_same_bits(engine, task, monkeypatch):
    monkeypatch.setattr(block, "MAP_STEPS", 1000)
    monkeypatch.setattr(block, "ADAPTIVE_STEPS", 500)
    messages = list(engine.follow([task], PLAN))
    whole = messages[-1].outcome
    checkpoints = [message for message in messages if isinstance(message, Checkpoint)]
    assert len(checkpoints) >= 3
    for checkpoint in checkpoints[:: max(1, len(checkpoints) // 8)]:
        resumed = Task(**{name: getattr(task, name) for name in task.__slots__} | {"checkpoint": checkpoint.blob})
        assert bits(outcomes(engine, [resumed])[task.number]) == bits(whole)


def test_control_a_state_that_is_off_by_one_bit_is_noticed(engine):
    position = TASKS[1].position_au.copy()
    position[1, 0] = np.nextafter(position[1, 0], 1.0)
    other = Task(**{name: getattr(TASKS[1], name) for name in TASKS[1].__slots__} | {"position_au": position})
    assert bits(outcomes(engine, [other])[1]) != bits(outcomes(engine, [TASKS[1]])[1])


def test_numbers_that_are_not_finite_are_an_outcome(engine):
    found = outcomes(engine, [TASKS[2]])[2]
    assert (found.survival, found.trust) == (Survival.UNKNOWN, Trust.NOT_FINITE)


def test_an_engine_prints_nothing(engine, capfd):
    outcomes(engine, TASKS[:3])
    assert capfd.readouterr() == ("", "")


def test_the_wall_clock_changes_nothing(engine):
    seldom = Plan(seed=7, samples=256, checkpoint_every_s=1e9)
    assert bits(outcomes(engine, [TASKS[4]], seldom)[4]) == bits(outcomes(engine, [TASKS[4]])[4])


def test_the_tangent_vector_belongs_to_the_seed_and_the_number(engine):
    first, second = (outcomes(engine, [quiet(0)], Plan(seed=seed, samples=256))[0] for seed in (1, 2))
    assert first.megno != second.megno
    assert first.closest_au == second.closest_au
