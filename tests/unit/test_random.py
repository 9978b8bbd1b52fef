"""Random numbers that belong to the draw."""

import numpy as np
import pytest
from scipy import stats

from stabcheck.random import key_of, permutation, rows_by_weight, uniforms

SEED, NAME = 20260101, "planets.b.period"


@pytest.mark.parametrize("piece", [1, 7, 4096])
def test_the_numbers_are_the_same_in_whatever_pieces_they_are_taken(piece):
    whole = uniforms(SEED, NAME, 0, 5000)
    pieces = [uniforms(SEED, NAME, k, min(piece, 5000 - k)) for k in range(0, 5000, piece)]
    assert np.array_equal(whole, np.concatenate(pieces))


def test_five_thousand_draws_begin_with_the_same_one_thousand():
    assert np.array_equal(uniforms(SEED, NAME, 0, 5000)[:1000], uniforms(SEED, NAME, 0, 1000))


def test_a_far_draw_is_reached_without_the_ones_before_it():
    assert uniforms(SEED, NAME, 10**15, 3)[1] == uniforms(SEED, NAME, 10**15 + 1, 1)[0]


@pytest.mark.parametrize("other", [(SEED + 1, NAME), (SEED, "planets.c.period"), (SEED, NAME + " ")])
def test_another_seed_or_name_gives_numbers_that_do_not_correlate(other):
    ours, theirs = uniforms(SEED, NAME, 0, 10_000), uniforms(*other, 0, 10_000)
    assert abs(np.corrcoef(ours, theirs)[0, 1]) < 0.04  # four standard deviations of 1/sqrt(1e4)


def test_seed_and_name_cannot_be_mixed_up():
    assert not np.array_equal(key_of(1, "2"), key_of(12, ""))


def test_the_four_numbers_of_a_draw_do_not_correlate():
    table = np.corrcoef([uniforms(SEED, NAME, 0, 10_000, which) for which in range(4)])
    assert np.abs(table - np.eye(4)).max() < 0.04


def test_the_numbers_are_uniform_and_a_control_that_is_not_is_noticed():
    found = uniforms(SEED, NAME, 0, 10_000)
    assert stats.kstest(found, "uniform").pvalue > 0.01
    assert stats.kstest(found**1.05, "uniform").pvalue < 0.01


def test_no_number_is_0_or_1_even_for_the_smallest_and_the_largest_raw_number(monkeypatch):
    extremes = np.array([0, 2**64 - 1], dtype=np.uint64)
    monkeypatch.setattr("stabcheck.random.raw_numbers", lambda *_: extremes)
    lowest, highest = uniforms(SEED, NAME, 0, 2)
    assert 0.0 < lowest < 1e-15
    assert 1.0 - 1e-15 < highest < 1.0
    assert (float(2**53 - 1) + 0.5) * 2.0**-53 == 1.0  # why 52 bits are used and not 53


def test_the_stream_is_the_one_it_always_was():
    # Regression values, written down when this was made: a change would silently change every run.
    found = uniforms(0, "star.mass", 0, 2)
    assert [value.hex() for value in found] == REGRESSION


REGRESSION = ["0x1.581c06268689ap-2", "0x1.0191013d529fbp-1"]


def test_the_generator_is_philox_4x64_with_ten_rounds():
    # Known answer for counter 0 and key 0, as in the test vectors that Salmon et al. (2011) distribute (from memory).
    before_zero = np.random.Philox(key=0, counter=2**256 - 1)  # the counter goes up before each block
    expected = [0x16554D9ECA36314C, 0xDB20FE9D672D0FDC, 0xD7E772CEE186176B, 0x7E68B68AEC7BA23B]
    assert [int(raw) for raw in before_zero.random_raw(4)] == expected


def test_a_permutation_has_each_row_once_and_is_not_the_order_of_the_file():
    order = permutation(SEED, "samples", 600)
    assert np.array_equal(np.sort(order), np.arange(600))
    assert not np.array_equal(order, np.arange(600))
    assert abs(stats.spearmanr(order, np.arange(600)).statistic) < 4 / np.sqrt(600)


def test_each_order_of_three_rows_is_equally_likely():
    orders = [tuple(permutation(seed, "samples", 3)) for seed in range(6000)]
    _, counts = np.unique(orders, axis=0, return_counts=True)
    assert stats.chisquare(counts).pvalue > 0.01
    assert len(counts) == 6


def test_rows_come_as_often_as_their_weights_say_and_a_row_of_weight_0_never():
    weights = np.array([0.0, 0.1, 0.0, 0.6, 0.3, 0.0])
    rows = rows_by_weight(np.cumsum(weights), uniforms(SEED, "samples", 0, 10_000))
    counts = np.bincount(rows, minlength=6)
    assert counts[[0, 2, 5]].sum() == 0
    assert stats.chisquare(counts[[1, 3, 4]], 10_000 * weights[[1, 3, 4]]).pvalue > 0.01
    assert stats.chisquare(counts[[1, 3, 4]], 10_000 * np.array([0.15, 0.55, 0.3])).pvalue < 0.01  # control


def test_the_ends_of_the_uniform_numbers_meet_rows_that_have_weight():
    weights = np.array([0.0, 0.1, 0.2, 0.0])
    assert list(rows_by_weight(np.cumsum(weights), np.array([2.0**-53, 1.0 - 2.0**-53]))) == [1, 2]
