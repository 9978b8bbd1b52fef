"""One word a draw, derived by one rule from what is stored; nothing else in stabcheck decides what a draw is called."""

from enum import StrEnum

import numpy as np
from numpy.typing import NDArray

from stabcheck.arrays import Flags
from stabcheck.outcome import Motion, Survival, Trust

Words = NDArray[np.str_]
"""(draw,) of words"""


class Verdict(StrEnum):
    """What a draw is called."""

    UNKNOWN = "unknown"
    BROKEN = "broken"
    REARRANGED = "rearranged"
    CHAOTIC = "chaotic"
    UNSETTLED = "unsettled"
    REGULAR = "regular"


STAYED = (Verdict.REGULAR, Verdict.UNSETTLED, Verdict.CHAOTIC, Verdict.REARRANGED)
"""The verdicts of draws that survived."""


def verdicts(survival: Words, rearranged: Flags, motion: Words, trust: Words) -> Words:
    """Call each draw by one word.

    The rule, first line that fits (``-`` means: whatever it is)::

        trust      survival   rearranged  motion     verdict
        not "ok"   -          -           -          unknown
        -          unknown    -           -          unknown
        ok         broken     -           -          broken
        ok         survived   yes         -          rearranged
        ok         survived   no          chaotic    chaotic
        ok         survived   no          regular    regular
        ok         survived   no          unsettled  unsettled

    How a broken draw ended has no say: a draw that a distance rule stopped is ``broken`` here, and whoever counts
    shows the distance rule apart, since it is not a physical end. Chaotic is not unstable: it survived its span.

    Parameters
    ----------
    survival, motion, trust : (draw,) array of str
        Words of ``Survival``, ``Motion`` and ``Trust``.
    rearranged : (draw,) array of bool

    Returns
    -------
    (draw,) array of str
        Words of ``Verdict``.

    Raises
    ------
    ValueError
        If a word belongs to none of the axes: a table that was not filled would otherwise get a verdict.
    """
    for words, axis in ((survival, Survival), (motion, Motion), (trust, Trust)):
        _refuse_foreign(words, [str(member) for member in axis], axis.__name__.lower())
    stayed = survival == Survival.SURVIVED
    rule = [
        (trust != Trust.OK, Verdict.UNKNOWN),
        (survival == Survival.UNKNOWN, Verdict.UNKNOWN),
        (survival == Survival.BROKEN, Verdict.BROKEN),
        (stayed & rearranged, Verdict.REARRANGED),
        (stayed & (motion == Motion.CHAOTIC), Verdict.CHAOTIC),
        (stayed & (motion == Motion.REGULAR), Verdict.REGULAR),
        (stayed & (motion == Motion.UNSETTLED), Verdict.UNSETTLED),
    ]
    words = np.select([fits for fits, _ in rule], [np.array(str(word)) for _, word in rule], default="")
    return np.asarray(words, dtype=np.str_)


def verdict(survival: Survival, rearranged: bool, motion: Motion, trust: Trust) -> Verdict:
    """Call one draw by one word; the rule is in `verdicts`."""
    one = verdicts(np.array([str(survival)]), np.array([rearranged]), np.array([str(motion)]), np.array([str(trust)]))
    return Verdict(str(one[0]))


def _refuse_foreign(words: Words, known: list[str], axis: str) -> None:
    foreign = sorted(set(np.unique(words).tolist()) - set(known))
    if foreign:
        raise ValueError(f"{axis} is none of {', '.join(known)} for some draws: {foreign}")
