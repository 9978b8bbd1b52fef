"""Weighted quantiles, on a line and on a circle."""

import numpy as np

from stabcheck.arrays import Array, PerDraw

LEVELS = (0.025, 0.16, 0.5, 0.84, 0.975)
"""Median, 68 % and 95 % limits."""
NO_DIRECTION = 2.0
"""A mean direction whose length times the root of the number is below this is no better than chance (Rayleigh)."""


def weighted_quantiles(values: PerDraw, weight: PerDraw, levels: tuple[float, ...] = LEVELS) -> Array:
    """Quantiles of weighted values, linear between the middles of their steps.

    Parameters
    ----------
    values, weight : (draw,) array
    levels : tuple of float

    Returns
    -------
    (level,) array
        NaN without any weight; the smallest or largest value where a level lies beyond the middle of its step.

    References
    ----------
    For equal weights definition 5 of Hyndman, R. J. & Fan, Y. 1996, Am. Stat. 50, 361 (Hazen's).
    """
    used = (weight > 0) & np.isfinite(values)
    if not used.any():
        return np.full(len(levels), np.nan)
    order = np.argsort(values[used], kind="stable")
    ordered, steps = values[used][order], weight[used][order]
    middles = (np.cumsum(steps) - 0.5 * steps) / steps.sum()
    return np.interp(levels, middles, ordered)


def mean_direction_deg(values_deg: PerDraw, weight: PerDraw) -> tuple[float, float]:
    """Weighted mean direction and the length of the mean vector, 1 where all agree and near 0 where none does.

    References
    ----------
    Mardia, K. V. & Jupp, P. E. 2000, Directional Statistics (Wiley), section 2.2.
    """
    if not weight.sum() > 0:
        return float("nan"), float("nan")
    angle = np.deg2rad(values_deg)
    mean = complex((weight * np.exp(1j * angle)).sum() / weight.sum())
    return float(np.rad2deg(np.angle(mean)) % 360.0), abs(mean)


def circular_quantiles_deg(
    values_deg: PerDraw, weight: PerDraw, levels: tuple[float, ...] = LEVELS
) -> tuple[Array, bool]:
    """Quantiles of angles, measured from their mean direction so that 359 and 1 degree are neighbours.

    Returns
    -------
    (level,) array
        Moved by whole turns together: within 0 to 360 if they fit, otherwise about 0 with negative ones.
    bool
        Whether there is a mean direction at all; if not, the quantiles only describe a spread over the whole circle.
    """
    centre, length = mean_direction_deg(values_deg, weight)
    if not np.isfinite(centre):
        return np.full(len(levels), np.nan), False
    offsets = (values_deg - centre + 180.0) % 360.0 - 180.0
    limits = centre + weighted_quantiles(offsets, weight, levels)
    limits = limits - limits.min() + limits.min() % 360.0
    limits = limits - 360.0 if limits.max() >= 360.0 else limits
    number = float(weight.sum()) ** 2 / float((weight**2).sum())
    return limits, bool(length * np.sqrt(number) > NO_DIRECTION)
