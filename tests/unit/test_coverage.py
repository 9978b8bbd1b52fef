"""Do the intervals hold the truth as often as they say? Simulations in which the truth is known.

Each simulation of R repetitions knows a coverage c to sqrt(c (1 - c) / R); three times that is allowed for chance.
Beyond it, the score interval oscillates about its nominal coverage because counts are whole numbers (Brown, Cai &
DasGupta 2001, Stat. Sci. 16, 101): where that matters its exact coverage is summed from the binomial law.
"""

import heapq

import numpy as np
import pytest
from made_up_draws import SPAN_D, broken, survived, table, unknown
from scipy import stats
from scipy.signal import lfilter

from stabcheck.outcome import Trust
from stabcheck.report.answer import answer_of, weighting_of
from stabcheck.report.intervals import fraction, normal_quantile, wilson
from stabcheck.report.quantiles import weighted_quantiles
from stabcheck.report.survival import survival_curve
from stabcheck.report.weights import Weighting

NOMINAL = 0.95
Z = normal_quantile(NOMINAL)
CASES = [(p, n) for p in (0.02, 0.3, 0.7, 0.99) for n in (50, 500)]


def chance(repetitions, coverage=NOMINAL):
    return 3 * np.sqrt(coverage * (1 - coverage) / repetitions)


def exact_coverage(p, n, limits):
    counts = np.arange(n + 1)
    lower, upper = limits(counts / n, n)
    return float(stats.binom.pmf(counts, n, p)[(lower <= p) & (p <= upper)].sum())


def score(share, n):
    return wilson(share, n, Z)


def normal(share, n):
    half = Z * np.sqrt(share * (1 - share) / n)
    return share - half, share + half


def covered(found, truth):
    return found.lower <= truth <= found.upper


def grouped(weight, source_row=None, chain=None):
    alone = np.full(weight.size, -1)
    return Weighting.of(weight, alone if source_row is None else source_row, alone if chain is None else chain)


# ----- equal weights, and draws of unknown fate


@pytest.mark.parametrize("p, n", CASES)
def test_the_score_interval_holds_the_truth_about_as_often_as_it_says(p, n):
    # With half a draw or one expected on the rare side, one whole number more or less decides: 0.911 and 0.922.
    expected_rare = n * min(p, 1 - p)
    assert exact_coverage(p, n, score) > (0.91 if expected_rare <= 1 else 0.935)


def test_control_the_normal_interval_misses_far_more_often():
    assert exact_coverage(0.02, 50, normal) < 0.7
    assert exact_coverage(0.99, 50, normal) < 0.5


@pytest.mark.parametrize("p, n", CASES)
@pytest.mark.parametrize("lost", ["by chance", "only broken ones", "only survivors"])
def test_the_bracket_holds_the_truth_whoever_is_lost(p, n, lost):
    random, repetitions = np.random.default_rng(100), 1500
    weighting, hits = grouped(np.ones(n)), 0
    for _ in range(repetitions):
        lives = random.uniform(size=n) < p
        among = {"by chance": np.ones(n, dtype=bool), "only broken ones": ~lives, "only survivors": lives}[lost]
        open_ = among & (random.uniform(size=n) < 0.1)
        hits += covered(fraction("", lives & ~open_, open_, weighting), p)
    least = exact_coverage(p, n, score)
    assert hits / repetitions >= least - chance(repetitions, least)


def test_control_dropping_the_lost_draws_misses_the_truth_when_the_broken_are_lost():
    random, n, p, hits = np.random.default_rng(101), 500, 0.7, 0
    for _ in range(500):
        lives = random.uniform(size=n) < p
        known = lives | (random.uniform(size=n) < 0.7)
        lower, upper = score(lives.sum() / known.sum(), known.sum())
        hits += lower <= p <= upper
    assert hits / 500 < 0.3


# ----- weights, repeated rows, chains


@pytest.mark.parametrize("p", [0.1, 0.5, 0.9])
@pytest.mark.parametrize("tied", [False, True], ids=["weights apart from fate", "weights tied to fate"])
def test_weighted_intervals_hold_the_truth(p, tied):
    random, n, repetitions, hits = np.random.default_rng(7), 400, 1500, 0
    sigma = 0.7
    for _ in range(repetitions):
        fate = random.normal(size=n)
        other = random.normal(size=n)
        weight = np.exp(sigma * ((fate + other) / np.sqrt(2) if tied else other))
        lives = fate < stats.norm.ppf(p)
        # Under the weights the fate is a normal variable moved by sigma/sqrt(2).
        truth = stats.norm.cdf(stats.norm.ppf(p) - (sigma / np.sqrt(2) if tied else 0.0))
        hits += covered(fraction("", lives, lives & False, grouped(weight)), truth)
    # 0.02: the variance is itself estimated, from about 250 effective draws of which as few as 10 decide.
    assert hits / repetitions > NOMINAL - 0.02 - chance(repetitions)


def test_control_weights_taken_for_draws_miss_the_truth():
    random, n, hits = np.random.default_rng(8), 400, 0
    for _ in range(800):
        weight = np.exp(1.2 * random.normal(size=n))
        lives = random.uniform(size=n) < 0.5
        lower, upper = score((weight * lives).sum() / weight.sum(), n)
        hits += lower <= 0.5 <= upper
    assert hits / 800 < 0.85


@pytest.mark.parametrize("blind", [False, True], ids=["rows known", "control: rows forgotten"])
def test_rows_drawn_again_and_again_keep_the_number_of_the_rows(blind):
    random, rows, draws, p, repetitions, hits = np.random.default_rng(9), 150, 900, 0.4, 1200, 0
    for _ in range(repetitions):
        lives, share = random.uniform(size=rows) < p, random.gamma(2.0, size=rows)
        drawn = random.choice(rows, draws, p=share / share.sum())
        weighting = grouped(np.ones(draws), None if blind else drawn)
        hits += covered(fraction("", lives[drawn], lives[drawn] & False, weighting), p)
    if blind:
        assert hits / repetitions < 0.7
    else:
        assert hits / repetitions > NOMINAL - 0.015 - chance(repetitions)


@pytest.mark.parametrize("blind", [False, True], ids=["chains known", "control: chains forgotten"])
def test_draws_along_chains_keep_the_number_that_is_independent(blind):
    random, chains, length, p, repetitions, hits = np.random.default_rng(10), 5, 400, 0.3, 600, 0
    memory = 0.8  # autocorrelation time 9 steps, pieces of 100: long against it
    chain, row = np.repeat(np.arange(chains), length), np.arange(chains * length)
    for _ in range(repetitions):
        noise = np.sqrt(1 - memory**2) * random.normal(size=(chains, length))
        noise[:, 0] = random.normal(size=chains)
        state = lfilter([1.0], [1.0, -memory], noise)
        lives = state.ravel() < stats.norm.ppf(p)
        shuffled = random.permutation(lives.size)  # draws come in random order of rows
        weighting = grouped(np.ones(lives.size), row[shuffled], None if blind else chain[shuffled])
        hits += covered(fraction("", lives[shuffled], lives & False, weighting), p)
    if blind:
        assert hits / repetitions < 0.75
    else:
        # 0.02: neighbouring pieces of one chain still know of each other, by 9/100.
        assert hits / repetitions > NOMINAL - 0.02 - chance(repetitions)


# ----- survival with time


def test_the_survival_band_holds_the_true_curve_at_each_time():
    random, n, repetitions = np.random.default_rng(11), 80, 60
    held, points = 0, 0
    for _ in range(repetitions):
        times = SPAN_D * random.exponential(0.8, n)  # true survival exp(-t / 0.8 span)
        lost = random.uniform(size=n) < 0.05
        outcomes = [
            unknown(k, Trust.BUDGET, min(t, SPAN_D) * 0.9) if u else (broken(k, t) if t < SPAN_D else survived(k))
            for k, (t, u) in enumerate(zip(times, lost, strict=True))
        ]
        made = table(outcomes)
        curve = survival_curve(made, weighting_of(made))
        truth = np.exp(-curve.time / curve.time[-1] / 0.8)
        held += int(((curve.lower <= truth) & (truth <= curve.upper)).sum())
        points += truth.size
    # Points of one curve are far from independent: chance is that of 60 curves, not of 60 x 61 points.
    assert held / points > NOMINAL - chance(repetitions)


# ----- limits after


def test_limits_after_survival_are_those_of_the_truth():
    # Draws from N(0, 1) live where x < 0.5: the limits after are those of the truncated law.
    random, n, truth = np.random.default_rng(12), 600, stats.truncnorm(-np.inf, 0.5)
    levels = (0.025, 0.16, 0.5, 0.84, 0.975)
    found = np.array([_limits_below(random.normal(size=n), 0.5, levels) for _ in range(800)])
    # About 415 live: the quantile error sqrt(q (1-q)/415)/density is 0.12 at 2.5 %, of the mean of 800 0.12/28 = 0.005.
    assert found.mean(axis=0) == pytest.approx(truth.ppf(levels), abs=3 * 0.005)


def test_with_few_living_draws_the_outer_limits_are_pulled_in():
    # Why there is a warning below 200: with 20 draws the 2.5 % limit can only be the lowest draw or so.
    random = np.random.default_rng(13)
    found = np.array([weighted_quantiles(random.normal(size=20), np.ones(20), (0.025,))[0] for _ in range(4000)])
    expected_lowest_of_20 = -1.8675  # Harter, H. L. 1961, Biometrika 48, 151 (from memory; and the integral gives it)
    assert found.mean() == pytest.approx(expected_lowest_of_20, abs=3 * 0.525 / np.sqrt(4000))
    assert found.mean() > stats.norm.ppf(0.025) + 0.05


def _limits_below(values, limit, levels):
    return weighted_quantiles(values, (values < limit).astype(float), levels)


# ----- the prefix rule


def finished_at(durations, workers, clock):
    """Which draws are finished when: taken in order by whoever is free."""
    free, done = [0.0] * workers, np.zeros(len(durations), dtype=bool)
    for number, duration in enumerate(durations):
        end = heapq.heappop(free) + duration
        heapq.heappush(free, end)
        done[number] = end <= clock
    return done


def live_run(random, p, draws=240, workers=16):
    """A run stopped in the middle; draws that break do so in a twentieth of the time that survivors take."""
    lives = random.uniform(size=draws) < p
    durations = np.where(lives, 1.0, 0.05 * random.uniform(size=draws))
    return lives, finished_at(durations, workers, clock=0.4 * draws * p / workers)


def test_the_prefix_of_a_live_run_holds_the_truth_and_what_is_finished_so_far_does_not():
    random, p, repetitions = np.random.default_rng(14), 0.5, 800
    ours, naive, bias = 0, 0, []
    for _ in range(repetitions):
        lives, done = live_run(random, p)
        prefix = int(np.flatnonzero(~done)[0])
        if prefix == 0:
            continue
        lower, upper = score(lives[:prefix].mean(), prefix)
        ours += lower <= p <= upper
        lower, upper = score(lives[done].mean(), done.sum())
        naive += lower <= p <= upper
        bias.append((lives[:prefix].mean() - p, lives[done].mean() - p))
    by_prefix, so_far = np.mean(bias, axis=0)
    # The draw after the prefix is open, and more likely a survivor: a bias of order one draw in some eighty.
    assert ours / repetitions > NOMINAL - 0.01 - chance(repetitions)
    assert abs(by_prefix) < 0.01
    assert so_far < -0.03 and abs(so_far) > 4 * abs(by_prefix)
    assert naive < ours


def test_the_answer_of_a_live_run_is_made_of_the_prefix_alone():
    # Draws 0 to 9 are settled, half of them alive; beyond, only what breaks has finished.
    early = [broken(n) if n % 2 else survived(n) for n in range(10)]
    late = [broken(n) for n in range(11, 60)]
    answer = answer_of(table([*early, *late], draws=100))
    assert answer.is_preliminary and answer.counts.settled == 10 and answer.counts.finished_later == 49
    assert answer.survived.share_least == 0.5
    assert answer.survived.lower > 5 / 59  # control: finished so far would say 5 of 59


def test_a_prefix_of_fixed_size_is_an_ordinary_sample():
    random, p, size = np.random.default_rng(15), 0.3, 60
    shares = []
    for _ in range(1500):
        lives = random.uniform(size=200) < p
        shares.append(lives[:size].mean())
    assert np.mean(shares) == pytest.approx(p, abs=3 * np.sqrt(p * (1 - p) / size / 1500))
