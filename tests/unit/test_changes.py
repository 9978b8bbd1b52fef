"""Handing a draw over, giving it back, and what goes along."""

import numpy as np
import pytest
from engine_tasks import outcome_of, task_of

from stabcheck.engines.rebound import ReboundEngine, block, changes
from stabcheck.outcome import Checkpoint
from stabcheck.plan import Method, Plan, Task

YEAR = 365.25


def slow_neighbours(span_yr: float = 400.0) -> Task:
    """Two small planets whose conjunctions are 12 orbits apart: close at first, then quiet."""
    planets = [
        {"m": 3e-6, "a": 0.1, "e": 0.01, "M": 1.0},
        {"m": 3e-6, "a": 0.1035, "e": 0.01, "M": 2.6},
        {"m": 1e-6, "a": 0.2, "e": 0.01, "M": 4.0},
    ]
    return task_of(0.8, planets, span_yr * YEAR, number=3)


def test_a_quiet_draw_is_given_back_and_handed_over_again():
    found = outcome_of(slow_neighbours(), seed=1)
    assert found.handovers > 1 and found.returns > 0
    assert abs(found.handovers - found.returns) <= 1
    assert found.map_steps > 0 and found.adaptive_steps > 0
    assert "quiet again" in found.history and found.handover_why == "close pair"


def test_a_draw_that_changes_its_method_often_goes_on_from_any_checkpoint_to_the_same_bits(monkeypatch):
    monkeypatch.setattr(block, "MAP_STEPS", 5000)
    task, plan = slow_neighbours(60.0), Plan(seed=1, checkpoint_every_s=1e-9)
    messages = list(ReboundEngine().follow([task], plan))
    whole = messages[-1].outcome
    assert whole.returns > 0
    checkpoints = [message for message in messages if isinstance(message, Checkpoint)]
    for checkpoint in checkpoints[:: max(1, len(checkpoints) // 6)]:
        fields = {name: getattr(task, name) for name in task.__slots__} | {"checkpoint": checkpoint.blob}
        resumed = list(ReboundEngine().follow([Task(**fields)], plan))[-1].outcome
        for name in whole.__slots__:
            assert np.array_equal(getattr(resumed, name), getattr(whole, name), equal_nan=_is_number(whole, name)), name


def _is_number(outcome: object, name: str) -> bool:
    value = getattr(outcome, name)
    return isinstance(value, float | np.ndarray)


def test_megno_goes_along_through_both_methods():
    """A calm pair, 6.6 Hill radii apart, told to be close at 8: the methods change at each conjunction."""
    planets = [{"m": 1e-6, "a": 1.0, "M": 0.0}, {"m": 1e-6, "a": 1.06, "M": 2.0}]
    task = task_of(1.0, planets, 2000 * YEAR)
    changing, one_map = outcome_of(task, handover_hill=8.0), outcome_of(task)
    assert changing.handovers > 10 and changing.returns > 10 and one_map.handovers == 0
    assert changing.megno_time_d == pytest.approx(task.span_d, rel=1e-9)
    assert changing.megno == pytest.approx(one_map.megno, abs=0.05)  # the same tangent vector, two integrators


def test_a_draw_that_began_with_ias15_is_not_given_to_a_map():
    found = outcome_of(slow_neighbours(20.0), method=Method.IAS15)
    assert (found.method, found.returns, found.map_steps) == ("ias15", 0, 0)


def test_a_draw_that_megno_has_called_chaotic_stops_carrying_its_tangent_at_a_hand_over(monkeypatch):
    monkeypatch.setattr(changes, "CHAOTIC_FROM", 0.1)  # then any draw has been called chaotic
    found = outcome_of(slow_neighbours(60.0), seed=1)
    assert found.handovers > 0 and 0.0 < found.megno_time_d < 0.9 * found.time_d


def test_megno_loses_nothing_where_blocks_end_between_measurements(monkeypatch):
    """Blocks of a length that no multiple of eight divides: time and growth of each last stretch must count."""
    planets = [{"m": 3e-5, "a": 0.1, "e": 0.02, "M": 1.0}, {"m": 3e-5, "a": 0.13, "e": 0.02, "M": 4.0}]
    task = task_of(1.0, planets, 40 * YEAR)
    whole = outcome_of(task, samples=64)
    monkeypatch.setattr(block, "MAP_STEPS", 101)
    pieces = outcome_of(task, samples=64)
    assert pieces.megno_time_d == pytest.approx(task.span_d, rel=1e-9)
    assert pieces.megno == pytest.approx(whole.megno, abs=1e-3)  # the sums are cut elsewhere: step over time
