"""Which share of the orbits outlives a time, with a band."""

from dataclasses import dataclass

import numpy as np

from stabcheck.arrays import Array, Flags, PerDraw
from stabcheck.constants import YEAR_D
from stabcheck.outcome import Survival, Trust
from stabcheck.report.intervals import CONFIDENCE, fraction
from stabcheck.report.table_of_draws import RunTable
from stabcheck.report.weights import Weighting

POINTS = 61
SAME_SPAN = 1e-9
"""Spans that agree to this are one span: a common span in years is stored in days a draw, with its rounding."""


@dataclass(frozen=True, slots=True, kw_only=True)
class SurvivalCurve:
    """Share of the orbits that outlives a time, from draws followed to their span or to their end.

    Parameters
    ----------
    time : (point,) array
        Logarithmic, up to the shortest span.
    unit : str
        ``"yr"`` if all spans are the same time, otherwise ``"inner orbits"`` of each draw's own innermost planet.
    share_least, share_most : (point,) array
        All draws of unknown fate broken when last known, all of them survived.
    lower, upper : (point,) array
        Pointwise limits: lower limit of ``share_least``, upper limit of ``share_most``.
    note : str
        How it was made, in words.
    """

    time: Array
    unit: str
    share_least: Array
    share_most: Array
    lower: Array
    upper: Array
    confidence: float
    note: str


def survival_curve(table: RunTable, weighting: Weighting, *, confidence: float = CONFIDENCE) -> SurvivalCurve:
    """Follow the surviving share through time.

    Nobody is censored: a draw without a trusted end is not left out at the time it was lost, since what makes a draw
    untrustworthy is what breaks it. Instead it is counted both ways. The step budget tells when it was last known; a
    draw whose numbers are not trusted is not known at any time.

    Parameters
    ----------
    table : RunTable
        Finished draws that are orbits.
    weighting : Weighting
        Of the same draws.
    confidence : float

    Returns
    -------
    SurvivalCurve
        With no point if there is no draw.
    """
    unit_d, unit, note = _unit(table)
    broken = np.asarray((table.outcome.survival == Survival.BROKEN) & (table.outcome.trust == Trust.OK))
    unknown = np.asarray(table.verdict == "unknown")
    end = np.where(broken, table.outcome.time_d, np.where(unknown, last_known_d(table), np.inf)) / unit_d
    time = _grid(end[broken], table.outcome.span_d / unit_d)
    points = [_point(end, broken, unknown, at, weighting, confidence) for at in time]
    columns = np.array(points, dtype=np.float64).reshape(len(points), 4).T
    return SurvivalCurve(
        time=time,
        unit=unit,
        share_least=columns[0],
        share_most=columns[1],
        lower=columns[2],
        upper=columns[3],
        confidence=confidence,
        note=note,
    )


def last_known_d(table: RunTable) -> PerDraw:
    """Say until when each draw's integration can be believed: how far it got on its budget, else not at all."""
    believed = (table.outcome.trust == Trust.BUDGET) | (table.outcome.trust == Trust.OK)
    reached = np.where(np.isfinite(table.outcome.time_d), table.outcome.time_d, 0.0)
    return np.where(believed, reached, 0.0)


def _unit(table: RunTable) -> tuple[PerDraw, str, str]:
    span = table.outcome.span_d
    fate = "draws of unknown fate are counted as broken when last known (lower curve) and as survived (upper curve)"
    if not len(table) or span.max() <= span.min() * (1 + SAME_SPAN):
        return np.full(len(table), YEAR_D), "yr", fate
    inner = table.elements["period_d"].min(axis=1)
    note = "spans differ between draws: time is in orbits of each draw's innermost planet, up to the shortest span; "
    return inner, "inner orbits", note + fate


def _grid(ends: Array, span: Array) -> Array:
    if not span.size:
        return np.zeros(0)
    last = float(span.min())
    first = min(float(ends.min()), last) if ends.size else last
    first = max(min(first / 2, last / 1000), last * 1e-12)
    grid = np.geomspace(first, last, POINTS)
    grid[-1] = last
    return grid


def _point(
    end: PerDraw, broken: Flags, unknown: Flags, time: float, weighting: Weighting, confidence: float
) -> tuple[float, float, float, float]:
    outlived = end > time
    known, open_ = ~unknown & (~broken | outlived), unknown
    least = fraction("", known | (open_ & outlived), np.zeros_like(unknown), weighting, confidence=confidence)
    most = fraction("", known | open_, np.zeros_like(unknown), weighting, confidence=confidence)
    return least.share_least, most.share_least, least.lower, most.upper
