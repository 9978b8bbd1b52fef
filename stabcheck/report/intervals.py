"""Fractions with an interval, and the bracket that draws of unknown fate leave open."""

import math
from dataclasses import dataclass

import numpy as np

from stabcheck.arrays import Array, Flags
from stabcheck.report.weights import Weighting

CONFIDENCE = 0.95


def normal_quantile(confidence: float) -> float:
    """Half-width of the central ``confidence`` of a normal distribution, in standard deviations."""
    from scipy.special import ndtri

    return float(ndtri(0.5 + 0.5 * confidence))


def wilson(share: float | Array, number: float | Array, z: float) -> tuple[Array, Array]:
    """Limits of a binomial share from the score test.

    Parameters
    ----------
    share : float or array
        Share seen, 0 to 1.
    number : float or array
        Draws it was seen among; an effective number need not be whole.
    z : float
        From `normal_quantile`.

    Returns
    -------
    lower, upper : array
        0 and 1 where there is no draw.

    References
    ----------
    Wilson, E. B. 1927, J. Am. Stat. Assoc. 22, 209; Newcombe, R. G. 1998, Stat. Med. 17, 857, method 3.
    """
    share, number = np.asarray(share, dtype=np.float64), np.asarray(number, dtype=np.float64)
    some = number > 0
    n, p = np.where(some, number, 1.0), np.where(some, share, 0.5)
    centre = p + z**2 / (2 * n)
    half = z * np.sqrt(p * (1 - p) / n + z**2 / (4 * n**2))
    scale = 1 + z**2 / n
    # At 0 and 1 the limit is exact; the difference of two equal numbers there would leave 1e-18 or its negative.
    lower = np.where(some & (p > 0), (centre - half) / scale, 0.0)
    upper = np.where(some & (p < 1), (centre + half) / scale, 1.0)
    return lower, upper


@dataclass(frozen=True, slots=True, kw_only=True)
class Fraction:
    """A share of the orbits, from the lower limit of what is known to the upper limit with all unknown counted in.

    Parameters
    ----------
    name : str
    count, unknown, orbits : int
        Draws it holds for, draws for which it is open, draws that are orbits.
    share_least, share_most : float
        Weighted share without and with the unknown.
    lower, upper : float
        The bracket: lower limit of ``share_least`` to upper limit of ``share_most``.
    effective : float
        Number of independent draws that the limits are worth (the smaller of the two).
    """

    name: str
    count: int
    unknown: int
    orbits: int
    share_least: float
    share_most: float
    lower: float
    upper: float
    effective: float


def fraction(
    name: str,
    hit: Flags,
    unknown: Flags,
    weighting: Weighting,
    *,
    confidence: float = CONFIDENCE,
) -> Fraction:
    """Bracket the share of draws for which something holds.

    Parameters
    ----------
    name : str
    hit, unknown : (draw,) array of bool
        Where it holds; where it may or may not hold.
    weighting : Weighting
    confidence : float

    Returns
    -------
    Fraction
    """
    z = normal_quantile(confidence)
    most = hit | unknown
    least_n, most_n = (effective_number(flags, weighting, z) for flags in (hit, most))
    lower = float(wilson(weighting.share(hit), least_n, z)[0])
    upper = float(wilson(weighting.share(most), most_n, z)[1])
    return Fraction(
        name=name,
        count=int(hit.sum()),
        unknown=int((unknown & ~hit).sum()),
        orbits=int(hit.size),
        share_least=weighting.share(hit),
        share_most=weighting.share(most),
        lower=lower,
        upper=upper,
        effective=min(least_n, most_n),
    )


def effective_number(hit: Flags, weighting: Weighting, z: float) -> float:
    """Count the independent draws that would give the share of ``hit`` the same variance.

    The number of draws if they are equal and independent. Otherwise the smaller of Kish's number and p(1-p) over the
    linearised variance of the ratio, the latter scaled by Student's quantile for the number of independent groups.
    Where all draws are alike, the stand-ins say how correlated they are, by who lies above their medians.
    """
    if weighting.is_plain or not hit.size:
        return float(hit.size)
    numbers = [weighting.kish()]
    above = [np.asarray(column > np.median(column)) for column in weighting.stand_ins]
    flags = [hit] if 0 < hit.sum() < hit.size else above
    numbers += [_number_from_variance(one, weighting, z) for one in flags if 0 < one.sum() < one.size]
    return max(min(numbers), 0.0)


def _number_from_variance(hit: Flags, weighting: Weighting, z: float) -> float:
    from scipy.special import stdtrit

    share, variance = weighting.share(hit), weighting.variance_of_share(hit)
    if not 0 < share < 1 or not 0 < variance < math.inf:
        return math.inf if variance == 0 else 0.0
    groups = np.unique(weighting.block).size
    tail = 0.5 * math.erfc(-z / math.sqrt(2))
    return share * (1 - share) / variance * (z / float(stdtrit(groups - 1, tail))) ** 2
