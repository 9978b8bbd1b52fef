"""Which low-order commensurability two orbits are nearest to, its angles, and where an angle was seen.

For periods in the ratio p : q, p > q, the angles are p λ₂ − q λ₁ − (p − q − k) ϖ₁ − k ϖ₂ with k = 0 ... p − q; body 1
is the inner one. The coefficients sum to zero, so an angle does not depend on where longitudes are counted from
(d'Alembert; Murray & Dermott 1999, Solar System Dynamics, section 6.4).
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from stabcheck.arrays import Array
from stabcheck.constants import TWO_PI
from stabcheck.kepler import wrapped_rad

HIGHEST_ORDER, LARGEST_P = 4, 12
NEARER_PER_ORDER = 3.0
"""A resonance of one order more must be nearer by this factor to be named: widths fall with a power of e. Our rule."""
FURTHEST = 0.25
"""A pair whose period ratio is further than this from every candidate is near none."""


@dataclass(frozen=True, slots=True)
class Resonance:
    """A commensurability p : q of the outer to the inner period, and how far the periods are from it."""

    p: int
    q: int
    offset: float
    """Period ratio over p/q, minus 1."""

    @property
    def order(self) -> int:
        """How many apsidal longitudes its angles hold."""
        return self.p - self.q

    def coefficients(self, k: int) -> tuple[int, int, int, int]:
        """Of λ₁, λ₂, ϖ₁, ϖ₂ in angle ``k`` of 0 ... order; their sum is zero."""
        return -self.q, self.p, -(self.order - k), -k

    def angle_rad(self, k: int, longitude_rad: Array, apsis_rad: Array) -> Array:
        """Give angle ``k`` in [0, 2 pi).

        Parameters
        ----------
        k : int
            0 ... order.
        longitude_rad, apsis_rad : (time, 2) arrays
            Mean longitudes and longitudes of periastron, inner body first, all from one direction.

        Returns
        -------
        (time,) array
        """
        a, b, c, d = self.coefficients(k)
        inner, outer = longitude_rad[:, 0], longitude_rad[:, 1]
        return wrapped_rad(a * inner + b * outer + c * apsis_rad[:, 0] + d * apsis_rad[:, 1])

    def angle_text(self, k: int, symbols: Sequence[str]) -> str:
        """Write angle ``k`` out with symbols for λ₁, λ₂, ϖ₁, ϖ₂, such as ``2λ_c − λ_b − ϖ_b``."""
        terms = [(c, symbol) for c, symbol in zip(self.coefficients(k), symbols, strict=True) if c]
        terms.sort(key=lambda term: term[0] < 0)  # p λ₂ is the only positive one
        return "".join(_term(*term) for term in terms).removeprefix(" + ")


def _term(coefficient: int, symbol: str) -> str:
    times = "" if abs(coefficient) == 1 else str(abs(coefficient))
    return f" {'−' if coefficient < 0 else '+'} {times}{symbol}"


def nearest_resonance(period_ratio: float) -> Resonance | None:
    """Name the low-order resonance that a period ratio is nearest to.

    Parameters
    ----------
    period_ratio : float
        Outer over inner period.

    Returns
    -------
    Resonance or None
        Orders 1 to ``HIGHEST_ORDER``, p up to ``LARGEST_P``; of two, the one of lower order unless the other is nearer
        by ``NEARER_PER_ORDER`` for each order. None if the ratio is not above 1 or nothing lies within ``FURTHEST``.
    """
    if not period_ratio > 1.0:
        return None
    pairs = [
        (p, q)
        for p in range(2, LARGEST_P + 1)
        for q in range(max(1, p - HIGHEST_ORDER), p)
        if math.gcd(p, q) == 1 and abs(period_ratio * q / p - 1.0) <= FURTHEST
    ]
    if not pairs:
        return None

    def distance(pair: tuple[int, int]) -> float:
        p, q = pair
        return abs(math.log(period_ratio * q / p)) * NEARER_PER_ORDER ** (p - q - 1)

    p, q = min(pairs, key=distance)
    return Resonance(p, q, period_ratio * q / p - 1.0)


@dataclass(frozen=True, slots=True)
class Sector:
    """The smallest arc that holds every sample of an angle."""

    centre_rad: float
    half_width_rad: float


def sector_of(angle_rad: Array) -> Sector:
    """Find the smallest arc that holds every sample of an angle.

    It says where an angle was seen, not that it must stay there: an angle that turns slowly may not have turned yet.

    Parameters
    ----------
    angle_rad : (time,) array
        NaN entries are left out.

    Returns
    -------
    Sector
        NaN if there is no finite entry.
    """
    seen = np.sort(wrapped_rad(angle_rad[np.isfinite(angle_rad)]))
    if not seen.size:
        return Sector(math.nan, math.nan)
    gaps = np.diff(np.append(seen, seen[0] + TWO_PI))
    widest = int(np.argmax(gaps))
    half = 0.5 * (TWO_PI - float(gaps[widest]))
    begins = float(seen[(widest + 1) % seen.size])
    return Sector(math.fmod(begins + half, TWO_PI), half)
