"""Fractions, their brackets, and what repeated, weighted and correlated draws are worth."""

import numpy as np
import pytest
from scipy import stats

from stabcheck.report.intervals import effective_number, fraction, normal_quantile, wilson
from stabcheck.report.weights import Weighting

Z = normal_quantile(0.95)


def flags(count, number):
    return np.arange(number) < count


def plain(number):
    return weighted(np.ones(number))


def weighted(weight, source_row=None, chain=None):
    alone = np.full(len(weight), -1)
    return Weighting.of(
        np.asarray(weight, dtype=float),
        alone if source_row is None else np.asarray(source_row),
        alone if chain is None else np.asarray(chain),
    )


def test_the_bracket_runs_from_none_of_the_unknown_to_all_of_them():
    hit, unknown = flags(30, 100), flags(40, 100) & ~flags(30, 100)
    found = fraction("survived", hit, unknown, plain(100))
    assert (found.share_least, found.share_most) == (0.3, 0.4)
    assert found.lower == pytest.approx(float(wilson(0.3, 100, Z)[0]), abs=1e-15)
    assert found.upper == pytest.approx(float(wilson(0.4, 100, Z)[1]), abs=1e-15)
    assert (found.count, found.unknown, found.orbits, found.effective) == (30, 10, 100, 100.0)


def test_control_dropping_the_unknown_gives_a_narrower_interval():
    hit, unknown = flags(30, 100), flags(60, 100) & ~flags(30, 100)
    honest = fraction("", hit, unknown, plain(100))
    dropped = fraction("", hit[~unknown], np.zeros(70, dtype=bool), plain(70))
    assert honest.upper - honest.lower > 1.5 * (dropped.upper - dropped.lower)


def test_no_draws_leave_everything_open():
    found = fraction("", flags(0, 0), flags(0, 0), plain(0))
    assert (found.lower, found.upper) == (0.0, 1.0) and np.isnan(found.share_least)


def test_equal_weights_whatever_their_size_change_nothing():
    one, other = (fraction("", flags(3, 20), flags(0, 20), weighted(np.full(20, w))) for w in (1.0, 0.01))
    assert (one.lower, one.upper) == (other.lower, other.upper)


def test_drawing_each_row_three_times_leaves_the_interval_of_the_rows():
    rows = np.repeat(np.arange(40), 3)
    hit = rows < 12
    repeated = fraction("", hit, ~hit & False, weighted(np.ones(120), source_row=rows))
    once = fraction("", flags(12, 40), flags(0, 40), plain(40))
    # A variance from 40 groups is larger by 40/39, and Student's limits for 39 degrees of freedom are wider.
    student = float(stats.t.ppf(0.975, 39))
    assert repeated.effective == pytest.approx(39 * (Z / student) ** 2, rel=1e-9)
    assert (repeated.lower, repeated.upper) == pytest.approx((once.lower, once.upper), abs=0.01)


def test_control_counting_repeated_rows_as_draws_is_noticed():
    rows = np.repeat(np.arange(40), 3)
    blind = fraction("", rows < 12, rows < 0, weighted(np.ones(120)))
    once = fraction("", flags(12, 40), flags(0, 40), plain(40))
    assert blind.upper - blind.lower < 0.7 * (once.upper - once.lower)


def test_a_share_weighs_its_draws():
    weight = np.array([1.0, 1.0, 2.0, 4.0])
    assert weighted(weight).share(np.array([True, False, False, True])) == pytest.approx(5 / 8)


def test_the_linearised_variance_is_that_of_many_repetitions():
    random = np.random.default_rng(12)
    shares, variances = [], []
    for _ in range(2000):
        weight = random.gamma(2.0, size=200)
        hit = random.uniform(size=200) < 0.3
        shares.append(weighted(weight).share(hit))
        variances.append(weighted(weight).variance_of_share(hit))
    # The variance of 2000 numbers is known to sqrt(2/2000) = 3 %; three times that.
    assert np.mean(variances) == pytest.approx(np.var(shares), rel=0.1)


def test_draws_along_a_slow_chain_are_worth_less_than_their_number():
    chain = np.repeat(np.arange(4), 250)
    hit = (np.arange(1000) // 50) % 2 == 0  # stays for 50 draws at a time
    slow = effective_number(hit, weighted(np.ones(1000), source_row=np.arange(1000), chain=chain), Z)
    mixed = np.random.default_rng(1).permutation(hit)
    fast = effective_number(mixed, weighted(np.ones(1000), source_row=np.arange(1000), chain=chain), Z)
    assert slow < 60
    assert fast > 300  # twenty pieces tell their own variance to a factor of two or so


def test_one_fate_along_a_slow_chain_is_measured_by_what_was_drawn():
    chain = np.repeat(np.arange(4), 250)
    slow_column = np.repeat(np.arange(20) % 2, 50).astype(float)
    alone = np.arange(1000)
    with_column = Weighting.of(np.ones(1000), alone, chain, (slow_column,))
    assert effective_number(np.ones(1000, dtype=bool), with_column, Z) < 60
    assert effective_number(np.ones(1000, dtype=bool), Weighting.of(np.ones(1000), alone, chain), Z) == 1000


def test_each_piece_of_a_chain_holds_whole_rows_of_one_chain():
    random = np.random.default_rng(3)
    rows, chain_of_row = random.integers(0, 300, 500), np.arange(300) // 100
    weighting = weighted(np.ones(500), source_row=rows, chain=chain_of_row[rows])
    for row in np.unique(rows):
        assert np.unique(weighting.block[rows == row]).size == 1
    for piece in np.unique(weighting.block):
        assert np.unique(chain_of_row[rows[weighting.block == piece]]).size == 1
    assert np.unique(weighting.block).size >= 20
