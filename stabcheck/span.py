"""How long each draw is followed, in days: years, orbits or secular cycles are those of the draw itself."""

import numpy as np

from stabcheck.arrays import DrawPlanet, PerDraw
from stabcheck.constants import YEAR_D
from stabcheck.criteria.relativity import apsidal_rate_rad_d
from stabcheck.criteria.secular import slowest_apsidal_period_d
from stabcheck.ensemble import Ensemble
from stabcheck.scenario import Span, SpanKind

COMPANION = "companion"


def span_d(span: Span, ensemble: Ensemble, *, relativity: bool) -> PerDraw:
    """Work out the span of each draw.

    Parameters
    ----------
    span : Span
    ensemble : Ensemble
        A bound companion star is not a planet: the outer orbits are those of the outermost planet.
    relativity : bool
        Whether relativity makes the orbits precess too; only for secular cycles.

    Returns
    -------
    (draw,) array
        In days. NaN where the unit is not defined: for draws that are not orbits, or without a secular cycle.
    """
    unit_d = _unit_d(span.kind, ensemble, relativity)
    return np.asarray(np.where(np.isfinite(unit_d) & (unit_d > 0.0), span.value * unit_d, np.nan))


def _unit_d(kind: SpanKind, ensemble: Ensemble, relativity: bool) -> PerDraw:
    if kind is SpanKind.YEARS:
        return np.full(len(ensemble.refused), YEAR_D)
    if kind is SpanKind.SECULAR_CYCLES:
        return _secular_cycle_d(ensemble, relativity)
    planets = [k for k, body in enumerate(ensemble.bodies) if body != COMPANION] or [0]
    choose = np.minimum if kind is SpanKind.INNER_ORBITS else np.maximum
    chosen = ensemble.period_d[:, planets[0]]
    for k in planets[1:]:
        chosen = choose(chosen, ensemble.period_d[:, k])
    return chosen


def _secular_cycle_d(ensemble: Ensemble, relativity: bool) -> PerDraw:
    star, mass, axis = ensemble.star_mass_msun, ensemble.mass_msun, ensemble.semi_major_axis_au
    extra: DrawPlanet | None = None
    if relativity:
        extra = apsidal_rate_rad_d(axis, ensemble.eccentricity, star[:, None] + mass, ensemble.period_d)
    return slowest_apsidal_period_d(star, mass, axis, extra)
