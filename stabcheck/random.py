"""Uniform numbers that belong to a draw: seed, number and name of the parameter fix them, whoever asks for which piece.

Each parameter has its own Philox stream, known by its name and not by its place in a list, and each draw takes one
block of four raw numbers from it. So adding a planet changes no number of another one, and no piece of a run depends
on what was drawn before it. Only raw numbers are used: NumPy keeps their stream across versions, its distributions not.

References
----------
Salmon, J. K. et al. (2011), Proc. SC11, "Parallel random numbers: as easy as 1, 2, 3" (Philox).
"""

import hashlib

import numpy as np
from numpy.typing import NDArray

from stabcheck.arrays import Array, Integers, PerDraw

RAW_PER_DRAW = 4
"""One Philox block a draw, so that skipping draws is one addition to the counter."""


def key_of(seed: int, name: str) -> NDArray[np.uint64]:
    """Turn a seed and a parameter's name into the key of its stream.

    Parameters
    ----------
    seed : int
        Any whole number from 0; it is hashed as decimal digits, so its size is not limited.
    name : str
        For instance ``planets.b.period``.

    Returns
    -------
    (2,) array of uint64
        The first 128 bits of SHA-256 over ``seed``, a line feed and ``name``, read as little-endian words.
    """
    digest = hashlib.sha256(f"{seed}\n{name}".encode()).digest()
    return np.frombuffer(digest[:16], dtype="<u8").astype(np.uint64)


def raw_numbers(seed: int, name: str, first: int, count: int, which: int = 0) -> NDArray[np.uint64]:
    """Take raw number ``which`` (0 to 3) of draws ``first`` to ``first + count - 1`` from the stream of ``name``."""
    stream = np.random.Philox(key=key_of(seed, name))
    stream.advance(first)
    raw = np.asarray(stream.random_raw(RAW_PER_DRAW * count), dtype=np.uint64)
    return raw[which::RAW_PER_DRAW]


def uniforms(seed: int, name: str, first: int, count: int, which: int = 0) -> PerDraw:
    """Uniform numbers of one parameter, strictly between 0 and 1.

    Parameters
    ----------
    seed : int
        Seed of the scenario.
    name : str
        Name of the parameter, the same for ever.
    first, count : int
        Draws ``first`` to ``first + count - 1``.
    which : int
        0 to 3: a parameter that needs more than one number takes them from its own block.

    Returns
    -------
    (draw,) array
        Midpoints of 2**52 equal cells: neither 0 nor 1 can occur, and an inverse distribution function stays finite.
    """
    # 52 bits and not 53: with 53 the half is rounded away, and the highest cell would become exactly 1.
    return ((raw_numbers(seed, name, first, count, which) >> np.uint64(12)).astype(np.float64) + 0.5) * 2.0**-52


def permutation(seed: int, name: str, count: int) -> Integers:
    """Put the numbers 0 to ``count - 1`` into an order that the seed and the name fix.

    Sorting raw numbers gives every order the same chance, and unlike a generator's own shuffle it does not change
    between versions of NumPy.
    """
    return np.argsort(raw_numbers(seed, name, 0, count), kind="stable").astype(np.int64)


def rows_by_weight(cumulative: Array, uniform: PerDraw) -> Integers:
    """Find the row of each uniform number by the inverse of the cumulative weights.

    Parameters
    ----------
    cumulative : (row,) array
        Running sum of weights that are 0 or more; the last entry is the sum and is positive.
    uniform : (draw,) array
        Numbers strictly between 0 and 1.

    Returns
    -------
    (draw,) array of int
        Row ``k`` where ``cumulative[k - 1] <= uniform * sum < cumulative[k]``: a row of weight 0 is never met.
    """
    rows = np.searchsorted(cumulative, uniform * cumulative[-1], side="right").astype(np.int64)
    # A product rounded up to the sum itself would fall behind the last row; it belongs to the last row with weight.
    last = int(np.searchsorted(cumulative, cumulative[-1], side="left"))
    return np.where(rows > last, last, rows)
