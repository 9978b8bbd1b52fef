"""How long "survived" is: the span in years, orbits, secular cycles and stellar ages."""

from dataclasses import dataclass

import numpy as np

from stabcheck.arrays import PerDraw
from stabcheck.constants import YEAR_D
from stabcheck.report.table_of_draws import RunTable


@dataclass(frozen=True, slots=True)
class Range:
    """Smallest, middle and largest over the draws; NaN where there is nothing to say."""

    least: float
    middle: float
    most: float

    @classmethod
    def of(cls, values: PerDraw) -> "Range":
        """Range of the finite values."""
        finite = values[np.isfinite(values)]
        if not finite.size:
            return cls(float("nan"), float("nan"), float("nan"))
        return cls(float(finite.min()), float(np.median(finite)), float(finite.max()))


@dataclass(frozen=True, slots=True, kw_only=True)
class Spans:
    """The span of the draws in every unit; ``stellar_ages`` and ``secular_cycles`` are NaN where not known."""

    asked: str
    years: Range
    inner_orbits: Range
    outer_orbits: Range
    secular_cycles: Range
    stellar_ages: Range

    def in_words(self) -> str:
        """Say the span wherever "survived" is used, in one phrase."""
        words = [f"{brief(self.years)} yr", f"{brief(self.inner_orbits)} orbits of the innermost planet"]
        if np.isfinite(self.stellar_ages.middle):
            words.append(f"{100 * self.stellar_ages.middle:.2g} % of the star's age")
        return ", ".join(words)


def spans_of(table: RunTable) -> Spans:
    """Express the span of each draw in every unit."""
    span, period = table.outcome.span_d, table.elements["period_d"]
    planets = [index for index, body in enumerate(table.bodies) if body != "companion"]
    inner, outer = (choose(period[:, planets], axis=1) for choose in (np.min, np.max))
    return Spans(
        asked=table.facts.span,
        years=Range.of(span / YEAR_D),
        inner_orbits=Range.of(span / inner),
        outer_orbits=Range.of(span / outer),
        secular_cycles=Range.of(span / table.secular_cycle_d),
        stellar_ages=Range.of(span / table.facts.star_age_d),
    )


def brief(values: Range) -> str:
    """One number if the draws agree to three digits, otherwise the range."""
    least, most = f"{values.least:.3g}", f"{values.most:.3g}"
    return least if least == most else f"{least} to {most}"
