"""What survival says about the parameters: limits before and after, and how far each has moved."""

from dataclasses import dataclass

import numpy as np

from stabcheck.arrays import Array, Flags, PerDraw
from stabcheck.report.columns import Column
from stabcheck.report.quantiles import circular_quantiles_deg, weighted_quantiles
from stabcheck.report.weights import Weighting

FEWEST_EFFECTIVE = 200
"""Below this many independent draws a 95 % limit rests on fewer than five draws beyond it on each side."""
FEWEST_FOR_SHIFT = 50
"""Below this many independent draws that live, medians of skewed columns move by chance up to twice as far as the
normal law says (measured on 7 and 24 draws), and no error is given."""
MEDIAN_ERROR = float(np.sqrt(np.pi / 2))
"""Standard error of the median of n normal values, times the root of n, over their standard deviation."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Limits:
    """Quantiles 2.5, 16, 50, 84, 97.5 % of a column, in its unit; ``directed`` is False for a circle without centre."""

    values: tuple[float, ...]
    directed: bool = True

    @property
    def median(self) -> float:
        """The middle one."""
        return self.values[2]

    @property
    def sigma(self) -> float:
        """Half the width of the central 68 %."""
        return 0.5 * (self.values[3] - self.values[1])


@dataclass(frozen=True, slots=True, kw_only=True)
class ConstrainedRow:
    """One parameter before and after.

    Parameters
    ----------
    name, unit : str
    before, kept, regular : Limits
        Of all orbits; of those that survived and kept their arrangement; of those that are also regular.
    shift, shift_regular : float
        Median after less median before, in units of the sigma before.
    shift_error : float
        Standard error of ``shift`` if those that live were a random part of all (exact for a normal distribution);
        NaN below ``FEWEST_FOR_SHIFT`` independent draws.
    narrowing : float
        Sigma after over sigma before.
    """

    name: str
    unit: str
    before: Limits
    kept: Limits
    regular: Limits
    shift: float
    shift_regular: float
    shift_error: float
    narrowing: float


@dataclass(frozen=True, slots=True, kw_only=True)
class ConstrainedTable:
    """All parameters before and after, in the order of the columns, with the effective numbers behind each set."""

    rows: tuple[ConstrainedRow, ...]
    effective_before: float
    effective_kept: float
    effective_regular: float

    def by_shift(self) -> tuple[ConstrainedRow, ...]:
        """Rows with a shift, the most shifted first."""
        known = [row for row in self.rows if np.isfinite(row.shift)]
        return tuple(sorted(known, key=lambda row: -abs(row.shift)))


def constrained_table(
    columns: tuple[Column, ...], verdict: np.ndarray[tuple[int, ...], np.dtype[np.str_]], weighting: Weighting
) -> ConstrainedTable:
    """Compare every column of all orbits with those of the orbits that live.

    Parameters
    ----------
    columns : tuple of Column
    verdict : (draw,) array of str
    weighting : Weighting

    Returns
    -------
    ConstrainedTable
        "After" is survived and not rearranged: a system that rearranges within the span would not long look like the
        one that was observed. Unknown draws are in "before" only.
    """
    kept = np.isin(verdict, ["regular", "unsettled", "chaotic"])
    regular = np.asarray(verdict == "regular")
    numbers = [weighting.take(rows).kish() for rows in (np.ones_like(kept), kept, regular)]
    rows = tuple(_row(column, weighting.weight, kept, regular, (numbers[0], numbers[1])) for column in columns)
    return ConstrainedTable(
        rows=rows, effective_before=numbers[0], effective_kept=numbers[1], effective_regular=numbers[2]
    )


def limits(column: Column, weight: PerDraw) -> Limits:
    """Limits of one column under the given weights (0 leaves a draw out)."""
    if column.circular:
        values, directed = circular_quantiles_deg(column.values, weight)
        return Limits(values=_floats(values), directed=directed)
    return Limits(values=_floats(weighted_quantiles(column.values, weight)))


def _row(
    column: Column, weight: PerDraw, kept: Flags, regular: Flags, effective: tuple[float, float]
) -> ConstrainedRow:
    before, after, calm = (limits(column, weight * chosen) for chosen in (np.ones_like(kept), kept, regular))
    narrowing = after.sigma / before.sigma if before.sigma > 0 else float("nan")
    return ConstrainedRow(
        name=column.name,
        unit=column.unit,
        before=before,
        kept=after,
        regular=calm,
        shift=_shift(column, before, after),
        shift_regular=_shift(column, before, calm),
        shift_error=_shift_error(*effective),
        narrowing=narrowing,
    )


def _shift(column: Column, before: Limits, after: Limits) -> float:
    if not before.sigma > 0 or not (before.directed and after.directed):
        return float("nan")
    moved = after.median - before.median
    return ((moved + 180.0) % 360.0 - 180.0 if column.circular else moved) / before.sigma


def _shift_error(before: float, after: float) -> float:
    """What remains by chance between the medians of a set and of a random part of it, in sigmas of the set."""
    if not FEWEST_FOR_SHIFT <= after <= before:
        return float("nan")
    return MEDIAN_ERROR * float(np.sqrt(1 / after - 1 / before))


def _floats(values: Array) -> tuple[float, ...]:
    return tuple(float(value) for value in values)
