"""Intervals and effective numbers against printed and independently computed values."""

import math

import numpy as np
import pytest
from scipy import stats

from stabcheck.report.intervals import normal_quantile, wilson
from stabcheck.report.quantiles import circular_quantiles_deg, mean_direction_deg, weighted_quantiles
from stabcheck.report.weights import Weighting

# Newcombe, R. G. 1998, Stat. Med. 17, 857, table I, method 3 (score), as printed (from memory, and the score formula
# with these inputs gives each of them again).
NEWCOMBE = [
    (81, 263, 0.2553, 0.3662),
    (15, 148, 0.0624, 0.1605),
    (0, 20, 0.0, 0.1611),
    (1, 29, 0.0061, 0.1718),
]
HALF_A_DIGIT = 5e-5 * (1 + 1e-9)

# The score formula in independent double precision arithmetic: counts met in practice, and both ends.
COMPUTED = [
    (0, 10, 0.0, 0.2775327999),
    (5, 10, 0.2365930905, 0.7634069095),
    (0, 5000, 0.0, 0.000767701945),
    (4987, 5000, 0.9955564171, 0.9984798730),
]


def limits(count, number, confidence=0.95):
    return [float(limit) for limit in wilson(count / number, number, normal_quantile(confidence))]


def wald(count, number):
    share = count / number
    half = 1.959963984540 * np.sqrt(share * (1 - share) / number)
    return [share - half, share + half]


def independent(weight):
    alone = np.full(len(weight), -1)
    return Weighting.of(np.asarray(weight, dtype=float), alone, alone)


@pytest.mark.parametrize("count, number, lower, upper", NEWCOMBE)
def test_score_limits_are_those_printed_by_newcombe(count, number, lower, upper):
    assert limits(count, number) == pytest.approx([lower, upper], abs=HALF_A_DIGIT)


@pytest.mark.parametrize("count, number, lower, upper", COMPUTED)
def test_score_limits_are_those_computed_apart(count, number, lower, upper):
    assert limits(count, number) == pytest.approx([lower, upper], abs=1e-9)


def test_control_the_normal_interval_is_noticed_in_every_printed_row():
    for count, number, lower, upper in NEWCOMBE:
        assert wald(count, number) != pytest.approx([lower, upper], abs=HALF_A_DIGIT)


def test_no_hit_at_all_still_leaves_an_upper_limit():
    lower, upper = limits(0, 10)
    assert lower == 0.0 and upper > 0.25
    assert wald(0, 10) == [0.0, 0.0]  # control: the normal interval has no width there


@pytest.mark.parametrize("number", [1, 7, 50, 5000])
@pytest.mark.parametrize("confidence", [0.6827, 0.95, 0.99])
def test_score_limits_agree_with_scipy_for_every_kind_of_count(number, confidence):
    for count in {0, 1, number // 3, number - 1, number}:
        theirs = stats.binomtest(count, number).proportion_ci(confidence, method="wilson")
        assert limits(count, number, confidence) == pytest.approx([theirs.low, theirs.high], abs=1e-12)


def test_the_lower_limit_of_five_in_ten_at_one_sigma():
    one_sigma = math.erf(math.sqrt(0.5))
    assert limits(5, 10, one_sigma)[0] == pytest.approx(0.3492443277, abs=1e-9)  # the score formula, computed apart


def test_effective_number_is_the_square_of_the_sum_over_the_sum_of_squares():
    # Kish, L. 1965, Survey Sampling; worked numbers by hand: 100/30 and 5.1²/6.51.
    assert independent([1, 2, 3, 4]).kish() == pytest.approx(10 / 3, rel=1e-12)
    assert independent([0.5, 0.5, 0.1, 2, 1, 1, 0]).kish() == pytest.approx(3.995391705069, rel=1e-12)


def test_control_the_sum_of_the_weights_is_not_the_effective_number():
    assert independent([1, 2, 3, 4]).kish() != pytest.approx(10.0, rel=0.1)


def test_equal_weights_other_than_one_give_the_number_of_draws():
    assert independent([0.37] * 41).kish() == pytest.approx(41, rel=1e-12)


def test_lognormal_weights_of_unit_width_are_worth_one_in_e():
    number = 200_000
    weight = np.exp(np.random.default_rng(5).normal(size=number))
    # E[w]²/E[w²] = e^-1 for a lognormal law. The fourth power of such weights has a heavy tail: 3/sqrt(n) is too tight
    # by e, the standard error of the mean of w² over its mean being sqrt(e^4 - 1)/sqrt(n) = 7.3/sqrt(n).
    assert independent(weight).kish() / number == pytest.approx(np.exp(-1), rel=3 * 7.3 / np.sqrt(number))


def test_quantiles_of_equal_weights_are_hazens():
    values = np.random.default_rng(2).normal(size=101)
    levels = (0.025, 0.16, 0.5, 0.84, 0.975)
    ours = weighted_quantiles(values, np.full(101, 2.5), levels)
    assert ours == pytest.approx(np.quantile(values, levels, method="hazen"), abs=1e-12)


def test_control_another_definition_of_quantiles_is_noticed():
    values = np.random.default_rng(2).normal(size=101)
    ours = weighted_quantiles(values, np.ones(101), (0.025,))
    assert ours != pytest.approx(np.quantile(values, [0.025], method="weibull"), abs=1e-3)


def test_a_draw_of_weight_three_counts_like_three_draws_in_a_large_sample():
    random = np.random.default_rng(9)
    values, weight = random.normal(size=4000), random.integers(1, 4, 4000).astype(float)
    ours = weighted_quantiles(values, weight, (0.16, 0.5, 0.84))
    repeated = np.quantile(np.repeat(values, weight.astype(int)), [0.16, 0.5, 0.84], method="hazen")
    # Both are steps between the same neighbours; these are about 1/(n density) = 1/(4000 * 0.24) apart.
    assert ours == pytest.approx(repeated, abs=5e-3)


def test_mean_direction_agrees_with_scipy():
    angle = np.random.default_rng(4).vonmises(3.1, 2.0, 500)
    theirs = np.rad2deg(stats.circmean(angle))
    assert mean_direction_deg(np.rad2deg(angle), np.ones(500))[0] == pytest.approx(theirs, abs=1e-9)


def test_quantiles_of_angles_do_not_break_at_zero():
    spread = np.random.default_rng(6).normal(0, 10, 2001)
    limits_deg, directed = circular_quantiles_deg(spread % 360.0, np.ones(2001))
    middle = (limits_deg[2] + 180) % 360 - 180
    assert directed and limits_deg - limits_deg[2] + middle == pytest.approx(
        np.quantile(spread, [0.025, 0.16, 0.5, 0.84, 0.975], method="hazen"), abs=1e-9
    )
    raw = np.quantile(spread % 360.0, [0.16, 0.84])
    assert raw[1] - raw[0] > 300  # control: raw quantiles span the circle


def test_angles_all_round_have_no_direction():
    _, directed = circular_quantiles_deg(np.arange(0, 360, 1.0), np.ones(360))
    assert not directed
