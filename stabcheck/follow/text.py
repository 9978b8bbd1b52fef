"""A followed draw in words, at most 100 columns wide."""

import math
import textwrap
from collections.abc import Iterator

import numpy as np

from stabcheck.arrays import Array
from stabcheck.constants import DEGREE_RAD, GM_SUN_AU3_D2, TWO_PI, YEAR_D
from stabcheck.follow.followed import Followed, angles_of
from stabcheck.outcome import Ending, Motion, Survival, Trust
from stabcheck.report.tables import aligned
from stabcheck.resonance import sector_of
from stabcheck.series import PairSeries

WIDTH = 100
ALL_VALUES_DEG = 165.0
"""An angle that leaves less than a twelfth of the circle free is said to take all values."""


def lines_of(followed: Followed) -> Iterator[str]:
    """Say what a draw came to, how it was followed, and where its angles were seen."""
    yield from _wrapped(f"{followed.title or '(no title)'}: {followed.name}")
    if followed.medians:
        yield from _wrapped("! these are medians, each taken alone: not a solution of any fit", "  ")
    yield from _wrapped(f"{followed.verdict}: {_ending(followed)}")
    yield ""
    yield from _wrapped(_encounter(followed))
    yield from _wrapped(_motion(followed))
    yield from _wrapped(_numerics(followed))
    for clause in followed.outcome.history.split("; "):
        yield from _wrapped(f"- {clause}", "  ")
    for warning in followed.warnings:
        yield from _wrapped(f"! {warning}", "  ")
    yield ""
    yield from aligned(list(_orbit_rows(followed)))
    for pair in followed.series.pairs:
        yield ""
        yield from _pair_lines(followed, pair)
    yield ""
    yield from _wrapped(_about_the_series(followed))
    if followed.files:
        yield from _wrapped(f"tables, figures and the initial state: {followed.files[0].parent}")


def _wrapped(text: str, hanging: str = "  ") -> list[str]:
    return textwrap.wrap(text, WIDTH, subsequent_indent=hanging)


def _time(days: float) -> str:
    return f"{days / YEAR_D:.6g} yr" if abs(days) >= 2 * YEAR_D else f"{days:.6g} d"


def _names(followed: Followed, bodies: tuple[int, ...]) -> str:
    return " and ".join(("star", *followed.series.bodies)[body] for body in bodies)


def _ending(followed: Followed) -> str:
    one = followed.outcome
    if one.trust is not Trust.OK:
        return f"the numbers cannot be trusted ({one.trust}); followed until {_time(one.time_d)}"
    if one.survival is Survival.SURVIVED:
        words = f"all planets stayed for the span of {_time(one.span_d)}"
        return f"{words}, but one had departed by {_time(one.departure_time_d)}" if one.rearranged else words
    physical = "" if one.ending is not Ending.DISTANCE_RULE else " (not a physical end)"
    who = f", {_names(followed, one.bodies)}" if one.bodies else ""
    return f"{one.ending}{who}, after {_time(one.time_d)} of {_time(one.span_d)}{physical}"


def _encounter(followed: Followed) -> str:
    one = followed.outcome
    if not one.closest_pair[0]:
        return "no two planets that could be measured"
    where = f"{one.closest_hill:.3g} mutual Hill radii ({one.closest_au:.4g} au) at {_time(one.closest_time_d)}"
    return f"closest approach: {_names(followed, one.closest_pair)}, {where}"


def _motion(followed: Followed) -> str:
    one = followed.outcome
    if math.isnan(one.megno):
        return "motion: not measured"
    words = f"motion: {one.motion}, MEGNO {one.megno:.4g} after {_time(one.megno_time_d)}"
    if one.motion is Motion.CHAOTIC and math.isfinite(one.lyapunov_time_d):
        words += f", Lyapunov time {_time(one.lyapunov_time_d)}; its fate differs between machines"
    return words


def _numerics(followed: Followed) -> str:
    one = followed.outcome
    step = "" if math.isnan(one.step_d) else f" with a step of {one.step_d:.4g} d"
    return (
        f"method at the end: {one.method}{step}; {one.map_steps} steps of a map, {one.adaptive_steps} of IAS15; "
        f"largest relative energy error {one.energy_error:.1e}"
    )


def _orbit_rows(followed: Followed) -> Iterator[list[str]]:
    one, first = followed.outcome, followed.series.elements
    yield ["planet", "a at first [au]", "least", "most", "e at first", "least", "most"]
    for k, body in enumerate(followed.series.bodies):
        a = (first.semi_major_axis_au[0, k], one.a_least_au[k], one.a_most_au[k])
        e = (first.eccentricity[0, k], one.e_least[k], one.e_most[k])
        yield [body, *(f"{value:.6g}" for value in a), *(f"{value:.4f}" for value in e)]


def _pair_lines(followed: Followed, pair: PairSeries) -> Iterator[str]:
    inner, outer = followed.series.bodies[pair.inner], followed.series.bodies[pair.outer]
    near = pair.resonance
    words = f"near {near.p}:{near.q} ({100 * near.offset:+.2f} %)" if near else "near no resonance of low order"
    yield from _wrapped(f"{inner}, {outer}: {words}")
    rows = [[f"  {text}", _seen(values)] for text, values in angles_of(pair, followed.series.bodies)]
    yield from aligned(rows, left=2)


def _seen(values_rad: Array) -> str:
    sector = sector_of(values_rad)
    half_deg = sector.half_width_rad / DEGREE_RAD
    if math.isnan(half_deg):
        return "has no value"
    if half_deg > ALL_VALUES_DEG:
        return "took all values"
    return f"stayed within {half_deg:.0f}° of {sector.centre_rad / DEGREE_RAD:.0f}°"


def _about_the_series(followed: Followed) -> str:
    series, one = followed.series, followed.outcome
    words = f"series: {len(series.time_d)} rows in {followed.frame} elements"
    period_d = _inner_period_d(followed)
    if math.isfinite(period_d) and one.time_d > 0.0:
        orbits = one.time_d / (len(series.time_d) - 1) / period_d
        words += f", irregularly, about one in {orbits:.3g} orbits of {series.bodies[0]}"
    if followed.exact:
        return f"{words}: the very steps that decided the outcome; what varies faster is sampled, not resolved"
    return f"{words}: taken again, NOT bit for bit the steps that decided the outcome"


def _inner_period_d(followed: Followed) -> float:
    a, mass = float(followed.series.elements.semi_major_axis_au[0, 0]), float(np.sum(followed.task.mass_msun[:2]))
    return TWO_PI * math.sqrt(a**3 / (GM_SUN_AU3_D2 * mass)) if a > 0.0 else math.nan
