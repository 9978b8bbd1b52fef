"""One rule gives each draw its word."""

import itertools

import numpy as np
import pytest

from stabcheck.outcome import Motion, Survival, Trust
from stabcheck.verdict import STAYED, Verdict, verdict, verdicts

COMBINATIONS = list(itertools.product(Survival, (False, True), Motion, Trust))


def by_hand(survival, rearranged, motion, trust):
    """The truth table of the docstring, written as plain branches."""
    if trust is not Trust.OK or survival is Survival.UNKNOWN:
        return Verdict.UNKNOWN
    if survival is Survival.BROKEN:
        return Verdict.BROKEN
    return Verdict.REARRANGED if rearranged else Verdict(str(motion))


@pytest.mark.parametrize("combination", COMBINATIONS, ids=lambda c: "-".join(str(word) for word in c))
def test_every_combination_of_the_axes_has_the_verdict_of_the_truth_table(combination):
    assert verdict(*combination) is by_hand(*combination)


def test_columns_give_the_same_words_as_draws_one_by_one():
    columns = [np.array([str(axis) for axis in column]) for column in zip(*COMBINATIONS, strict=True)]
    columns[1] = columns[1] == "True"
    words = verdicts(*columns)
    assert words.tolist() == [str(by_hand(*combination)) for combination in COMBINATIONS]


def test_a_draw_that_is_not_trusted_is_never_called_broken_or_regular():
    untrusted = [trust for trust in Trust if trust is not Trust.OK]
    words = {verdict(survival, False, Motion.REGULAR, trust) for survival in Survival for trust in untrusted}
    assert words == {Verdict.UNKNOWN}


def test_a_chaotic_draw_survived():
    assert verdict(Survival.SURVIVED, False, Motion.CHAOTIC, Trust.OK) in STAYED


def test_no_draws_give_no_verdicts():
    assert (
        verdicts(
            np.array([], dtype=str), np.array([], dtype=bool), np.array([], dtype=str), np.array([], dtype=str)
        ).size
        == 0
    )


def test_a_word_that_belongs_to_no_axis_is_refused_instead_of_called_something():
    with pytest.raises(ValueError, match="survival"):
        verdicts(np.array([""]), np.array([False]), np.array(["regular"]), np.array(["ok"]))
