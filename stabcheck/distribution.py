"""Distributions as inverse distribution functions: a uniform number between 0 and 1 in, a value out, entry by entry.

That is what lets a draw be known by its number alone. ``at`` never looks at more than one uniform at a time, so a row
does not depend on how many rows are drawn with it.

References
----------
Moments of the truncated and the half-normal: Johnson, N. L., Kotz, S. & Balakrishnan, N. (1994), Continuous Univariate
Distributions 1, chapters 10 and 13. [from memory]
"""

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.special import erfinv, ndtr, ndtri

from stabcheck.arrays import Array
from stabcheck.errors import QuantityError


@dataclass(frozen=True, slots=True)
class Fixed:
    """The same value in every draw."""

    value: float

    def at(self, u: Array) -> Array:
        return np.full(np.shape(u), self.value)


@dataclass(frozen=True, slots=True)
class Normal:
    """Mean ``mean``, standard deviation ``sigma``."""

    mean: float
    sigma: float

    def at(self, u: Array) -> Array:
        return self.mean + self.sigma * _floats(ndtri(u))


@dataclass(frozen=True, slots=True)
class TwoPieceNormal:
    """Half a normal of width ``lower`` below the value, half a normal of width ``upper`` above, half the draws each.

    The value is the median; value - lower and value + upper are the 16th and 84th percentile (15.87 %, 84.13 %). Mean:
    median + (upper - lower) / √(2π). Variance: (upper² + lower²) / 2 - (upper - lower)² / (2π). (The other usage of the
    name, with a continuous density and the value as its mode, has other percentiles than those a table prints.)
    """

    median: float
    lower: float
    upper: float

    def at(self, u: Array) -> Array:
        steps = _floats(ndtri(u))
        return self.median + np.where(steps < 0.0, self.lower, self.upper) * steps


@dataclass(frozen=True, slots=True)
class HalfNormal:
    """|normal| of width ``scale`` about 0. Median 0.6745 scale, mean scale √(2/π), variance scale² (1 - 2/π)."""

    scale: float

    @classmethod
    def below(cls, limit: float, share: float) -> "HalfNormal":
        """Make the one of which ``share`` lies below ``limit``."""
        return cls(limit / (math.sqrt(2.0) * float(erfinv(share))))

    def at(self, u: Array) -> Array:
        # Not ndtri((1 + u) / 2): that is exactly 0 for the smallest u, and a mass of 0 is not a body.
        return self.scale * math.sqrt(2.0) * _floats(erfinv(u))


@dataclass(frozen=True, slots=True)
class TruncatedNormal:
    """The part between ``low`` and ``high`` of a normal with the given mean and width, brought to total 1."""

    mean: float
    sigma: float
    low: float
    high: float

    def share(self) -> float:
        """Say how much of the whole normal lies between the limits."""
        start, stop, _ = self._ends()
        return float(ndtr(stop) - ndtr(start))

    def at(self, u: Array) -> Array:
        start, _, sign = self._ends()
        below = float(ndtr(start))
        kept = self.share()
        steps = _floats(ndtri(below + (u if sign > 0 else 1.0 - np.asarray(u)) * kept))
        # Rounding at the very ends may step over a limit by one unit in the last place; nothing else is moved here.
        return np.clip(self.mean + sign * self.sigma * steps, self.low, self.high)

    def _ends(self) -> tuple[float, float, float]:
        """Limits in widths from the mean, mirrored into the lower tail (where ndtr keeps its digits), and the sign."""
        start, stop = (self.low - self.mean) / self.sigma, (self.high - self.mean) / self.sigma
        return (start, stop, 1.0) if start + stop <= 0.0 else (-stop, -start, -1.0)


@dataclass(frozen=True, slots=True)
class Uniform:
    """The same density everywhere between ``low`` and ``high``."""

    low: float
    high: float

    def at(self, u: Array) -> Array:
        return self.low + (self.high - self.low) * np.asarray(u)


@dataclass(frozen=True, slots=True)
class LogUniform:
    """The same density in the logarithm between ``low`` and ``high``."""

    low: float
    high: float

    def at(self, u: Array) -> Array:
        return self.low * np.exp(np.asarray(u) * math.log(self.high / self.low))


@dataclass(frozen=True, slots=True)
class Isotropic:
    """Inclination of a plane whose normal has no preferred direction: P(i < x) = 1 - cos x.

    ``both_senses`` False: 0 to 90°, for a common plane (its mirror image is dynamically the same). Median 60°, mean of
    sin i π/4. True: 0 to 180°, for planets drawn one by one, which makes half of the pairs retrograde.
    """

    both_senses: bool = False

    def at(self, u: Array) -> Array:
        # Not arccos(1 - u): it loses half the digits near face-on.
        reach = 2.0 if self.both_senses else 1.0
        return 2.0 * np.arcsin(np.sqrt(0.5 * reach * np.asarray(u)))


@dataclass(frozen=True, slots=True)
class Column:
    """A column of the sample file: ``values * unit_factor + offset`` in the unit inside, row by row."""

    name: str
    unit_factor: float
    offset: float = 0.0

    def inside(self, values: Array) -> Array:
        """Bring values as they stand in the file to the unit used inside."""
        return np.asarray(values, dtype=np.float64) * self.unit_factor + self.offset

    def at(self, u: Array) -> Array:
        raise QuantityError(
            f"column {self.name!r} was asked for a value at a uniform number",
            why="rows of a sample file are used whole, so that what is correlated stays correlated",
            do="take the row from the sample file and bring it to inner units with Column.inside",
        )


Distribution = (
    Fixed | Normal | TwoPieceNormal | HalfNormal | TruncatedNormal | Uniform | LogUniform | Isotropic | Column
)


def _floats(values: Any) -> Array:
    return np.asarray(values, dtype=np.float64)
