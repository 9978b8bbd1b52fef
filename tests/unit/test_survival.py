"""Survival with time: two bounds, no censoring, one clock."""

import numpy as np
import pytest
from made_up_draws import SPAN_D, broken, facts, survived, table, unknown

from stabcheck.constants import YEAR_D
from stabcheck.outcome import Trust
from stabcheck.report.answer import weighting_of
from stabcheck.report.survival import survival_curve


def curve_of(outcomes, **changes):
    made = table(outcomes, **changes)
    return survival_curve(made, weighting_of(made))


def test_the_curve_ends_at_the_surviving_share():
    curve = curve_of([broken(0), broken(1, 5e4 * YEAR_D), *(survived(n) for n in range(2, 10))])
    assert curve.unit == "yr" and curve.time[-1] == pytest.approx(1e5)
    assert curve.share_least[-1] == curve.share_most[-1] == 0.8


def test_the_curve_steps_down_where_draws_break():
    curve = curve_of([broken(0, 1e3 * YEAR_D), *(survived(n) for n in range(1, 10))])
    assert np.all(curve.share_most[curve.time < 999.0] == 1.0)
    assert np.all(curve.share_most[curve.time > 1001.0] == 0.9)


def test_it_begins_before_the_first_break():
    curve = curve_of([broken(0, 3.0 * YEAR_D), survived(1)])
    assert curve.time[0] < 3.0 and curve.share_most[0] == 1.0


def test_a_draw_out_of_budget_is_known_until_then_and_counted_both_ways_after():
    curve = curve_of([unknown(0, Trust.BUDGET, 1e4 * YEAR_D), *(survived(n) for n in range(1, 10))])
    late = curve.time > 1.01e4
    assert np.all(curve.share_least[~late & (curve.time < 9.9e3)] == 1.0)
    assert np.all(curve.share_least[late] == 0.9) and np.all(curve.share_most == 1.0)


def test_a_draw_that_is_not_trusted_is_not_known_at_any_time():
    curve = curve_of([unknown(0, Trust.ENERGY, 1e4 * YEAR_D), *(survived(n) for n in range(1, 10))])
    assert np.all(curve.share_least == 0.9) and np.all(curve.share_most == 1.0)


def test_leaving_out_what_was_lost_would_hide_what_the_bounds_show():
    # Numerics fail where planets meet: all that would break is lost. Censored at its time, the share would stay 1.
    curve = curve_of(
        [*(unknown(n, Trust.BUDGET, 1e3 * YEAR_D) for n in range(50)), *(survived(n) for n in range(50, 100))]
    )
    censored = 1.0
    assert curve.share_least[-1] == 0.5 < curve.share_most[-1] == censored


def test_rearranged_draws_survived():
    curve = curve_of([survived(0, rearranged=True), survived(1)])
    assert curve.share_least[-1] == 1.0


def test_spans_that_differ_put_time_in_inner_orbits_up_to_the_shortest_and_say_so():
    periods = np.array([[1.0, 3.0], [2.0, 5.0], [4.0, 9.0]])
    elements = {"period_d": periods, "inclination_rad": periods * 0, "node_rad": periods * 0}
    elements |= {"eccentricity": periods * 0}
    outcomes = [survived(n, span_d=1000 * p, time_d=1000 * p) for n, p in enumerate(periods[:, 0])]
    outcomes[0] = broken(0, 500.0, span_d=1000.0)
    curve = curve_of(outcomes, elements=elements, parameters={}, facts=facts(asked=3))
    assert curve.unit == "inner orbits" and "shortest span" in curve.note
    assert curve.time[-1] == pytest.approx(1000)
    assert np.all(curve.share_most[curve.time > 501] == pytest.approx(2 / 3))


def test_limits_hold_the_bounds_between_them_and_never_rise():
    random = np.random.default_rng(8)
    outcomes = [broken(n, SPAN_D * random.uniform()) if random.uniform() < 0.4 else survived(n) for n in range(200)]
    curve = curve_of(outcomes)
    assert np.all(curve.lower <= curve.share_least) and np.all(curve.share_most <= curve.upper)
    for column in (curve.lower, curve.upper, curve.share_least, curve.share_most):
        assert np.all(np.diff(column) <= 0)


def test_no_draw_gives_no_point():
    assert curve_of([]).time.size == 0
