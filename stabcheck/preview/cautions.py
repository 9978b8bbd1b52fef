"""What could mislead in a scenario, in sentences; each check looks at one thing and says nothing if it is in order."""

import math
from collections.abc import Iterator, Mapping, Sequence

from stabcheck.constants import JUPITER_MSUN
from stabcheck.criteria.hill import HILL_LIMIT
from stabcheck.ensemble import Ensemble
from stabcheck.preview.parts import FrameFacts, PairFacts, RateFacts, SpanFacts
from stabcheck.scenario import FitKind, Scenario

PLANET_MSUN = 0.08
"""Lightest star that burns hydrogen (common practice, no source): more is hardly a planet, and often a wrong unit."""
RELATIVITY_MATTERS = 0.1
"""Of the slowest secular rate; below this relativity changes a secular cycle by less than a tenth."""
FEWEST_CYCLES = 3.0
PHASE_POOR_DEG, PHASE_UNKNOWN_DEG = 20.0, 120.0
"""Carried errors from which a wrapped normal is worth a word, and from which it is nearly uniform."""
NOTABLE_PERIOD_SHIFT = 1e-4
"""Of the frame; narrow resonances of Neptune-like planets are some 1e-3 wide."""


def about_the_draws(scenario: Scenario, row: Ensemble, phase_error_deg: Mapping[str, float]) -> Iterator[str]:
    """Independent errors, samples, confirmations, phases."""
    if not row.parameters:
        yield "nothing is drawn: every draw is the same system, and the answer is yes or no, not a fraction"
    elif scenario.samples is None:
        yield (
            "the errors of a table are drawn independently: the correlations of the fit are lost, and some draws fit "
            "the data badly; posterior samples do not have this fault"
        )
    elif row.source_row[0] < 0:
        yield (
            "the central values are medians of the samples, each taken alone: not a solution of the fit; name the "
            "column log_probability to see the best row"
        )
    if scenario.elements.independent_omega_and_periastron_time:
        yield "ω and the time of periastron are drawn independently, as the scenario confirms; their sum is then poor"
    for name, error_deg in phase_error_deg.items():
        if error_deg > PHASE_UNKNOWN_DEG:
            yield f"{name}: at the epoch its phase is uncertain by {error_deg:.0f}°, as good as uniform"
        elif error_deg > PHASE_POOR_DEG:
            yield f"{name}: at the epoch its phase is uncertain by {error_deg:.0f}° (drawn as a wrapped normal)"


def about_the_system(row: Ensemble, pairs: Sequence[PairFacts], frame: Sequence[FrameFacts]) -> Iterator[str]:
    """Close pairs, points, and the other reading of the frame."""
    for pair in pairs:
        if pair.separation_hill < HILL_LIMIT:
            yield (
                f"{pair.inner}-{pair.outer}: {pair.separation_hill:.2f} mutual Hill radii, below 2√3, where circular "
                "orbits may meet; only a resonance can protect them"
            )
    for name, mass in zip(row.bodies, row.mass_msun[0].tolist(), strict=True):
        if name != "companion" and mass > PLANET_MSUN:
            yield (
                f"{name}: {mass / JUPITER_MSUN:.3g} Jupiter masses, heavier than any planet: look at the "
                "unit of its mass or semi-amplitude"
            )
    points = [name for name, radius in zip(row.bodies, row.radius_au[0], strict=True) if not radius > 0.0]
    if points:
        yield (
            f"{', '.join(points)}: no radius, so points that cannot collide; close approaches are still found. "
            "Give radius, or mass_radius in [endings]"
        )
    if shifts := [
        f"{one.name} {100 * one.period_shift:+.2f} %" for one in frame if abs(one.period_shift) > NOTABLE_PERIOD_SHIFT
    ]:
        yield (
            f"if the source meant the other frame, the periods built here would shift: {', '.join(shifts)}; a "
            "sum of orbits fitted to velocities is nearest to jacobi"
        )


def about_the_physics(
    scenario: Scenario, rates: Sequence[RateFacts], modes_deg_century: Sequence[float]
) -> Iterator[str]:
    """Relativity left out where it matters, tides left out everywhere."""
    if modes_deg_century and not scenario.physics.relativity:
        slowest = abs(modes_deg_century[0])
        fast = [one.name for one in rates if one.relativity_deg_century > RELATIVITY_MATTERS * slowest]
        if fast and len(rates) > 1:
            yield (
                f"relativity is off, but it turns {', '.join(fast)} by more than a tenth of the slowest secular rate "
                f"({slowest:.3g} deg/century): write relativity = true in [physics]"
            )
    yield "not modelled: tides, stellar spin and flattening, unseen planets, and whatever the scenario does not name"


def about_the_span(span: SpanFacts) -> Iterator[str]:
    """Undefined, too short against the slowest cycle, or against the age."""
    if math.isnan(span.years):
        yield (
            "the span is not defined for the central values: nothing precesses, or the axes are equal; count it in "
            "years or orbits"
        )
        return
    if 0.0 < span.secular_cycles < FEWEST_CYCLES:
        yield (
            f"the span is only {span.secular_cycles:.2g} cycles of the slowest secular mode: eccentricities have not "
            'been seen at their largest; "10 secular cycles" would'
        )
    if span.star_ages < 0.5:
        yield f"the span is {span.star_ages:.1e} of the star's age: surviving it does not mean surviving until today"
    elif math.isnan(span.star_ages):
        yield "the star's age is not given, so the span cannot be compared with it"


def about_the_fit(scenario: Scenario, departure_m_s: float) -> Iterator[str]:
    """What a Keplerian fit means for an N-body start."""
    if scenario.elements.fit is not FitKind.KEPLERIAN or len(scenario.bodies) < 2:
        return
    if math.isnan(departure_m_s) and scenario.elements.data_span is not None:
        yield (
            "the fit is a Keplerian sum, taken as osculating at the epoch; by how much the N-body curve departs cannot "
            "be said: the central values are no orbit, or meet within the data"
        )
    elif math.isnan(departure_m_s):
        yield (
            "the fit is a Keplerian sum, taken as osculating at the epoch; give data_span to see by how much the "
            "N-body curve departs"
        )
    else:
        yield (
            f"the N-body velocity curve departs from the Keplerian sum by up to {departure_m_s:.2g} m/s within the "
            "data: if that is above the noise, these draws no longer fit"
        )


def about_the_cost(scenario: Scenario, failed: bool) -> Iterator[str]:
    """The method gives up on the central values at once."""
    if failed:
        yield (
            f"method {scenario.integration.method} fails on the central values in its first steps, so the cost is not "
            "known: do two bodies stand at one place?"
        )


def not_an_orbit(row: Ensemble) -> Iterator[str]:
    """The central values themselves are refused."""
    if reason := str(row.refused[0]):
        yield f"the central values are not an orbit: {reason}; what needs a system was left out"
