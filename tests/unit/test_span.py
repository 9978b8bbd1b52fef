"""How long each draw is followed."""

from types import SimpleNamespace

import numpy as np
import pytest

from stabcheck.constants import YEAR_D
from stabcheck.scenario import Span, SpanKind
from stabcheck.span import span_d


def ensemble(bodies=("b", "c"), periods=((10.0, 25.0), (12.0, 11.0)), masses=3e-6, axes=(0.09, 0.17)):
    count, width = np.shape(periods)
    return SimpleNamespace(
        bodies=bodies,
        period_d=np.array(periods),
        refused=np.array([""] * count),
        star_mass_msun=np.ones(count),
        mass_msun=np.full((count, width), masses),
        semi_major_axis_au=np.tile(axes, (count, 1)),
        eccentricity=np.full((count, width), 0.1),
    )


@pytest.mark.parametrize(
    "kind, expected",
    [
        (SpanKind.YEARS, [2 * YEAR_D, 2 * YEAR_D]),
        (SpanKind.INNER_ORBITS, [20.0, 22.0]),
        (SpanKind.OUTER_ORBITS, [50.0, 24.0]),
    ],
)
def test_orbits_are_those_of_the_draw_even_where_planets_change_order(kind, expected):
    assert span_d(Span(2.0, kind), ensemble(), relativity=False).tolist() == expected


def test_a_companion_star_is_not_the_outer_planet():
    made = ensemble(("b", "c", "companion"), ((10.0, 25.0, 9e4),), axes=(0.09, 0.17, 40.0))
    assert span_d(Span(2.0, SpanKind.OUTER_ORBITS), made, relativity=False).tolist() == [50.0]


def test_a_secular_cycle_gets_shorter_with_more_mass_in_proportion():
    light = span_d(Span(1.0, SpanKind.SECULAR_CYCLES), ensemble(masses=1e-7), relativity=False)
    heavy = span_d(Span(1.0, SpanKind.SECULAR_CYCLES), ensemble(masses=2e-7), relativity=False)
    # First order in the masses (Murray & Dermott 1999, eq. 7.9); the rest is of the order of the masses themselves.
    assert light / heavy == pytest.approx(2.0, rel=1e-6)


def test_relativity_gives_a_single_planet_a_secular_cycle_and_without_it_there_is_none():
    alone = ensemble(("b",), ((10.0,),), axes=(0.09,))
    assert np.isnan(span_d(Span(1.0, SpanKind.SECULAR_CYCLES), alone, relativity=False)).all()
    assert np.isfinite(span_d(Span(1.0, SpanKind.SECULAR_CYCLES), alone, relativity=True)).all()


def test_what_is_not_defined_is_nan_and_not_zero():
    assert np.isnan(
        span_d(Span(5.0, SpanKind.INNER_ORBITS), ensemble(periods=((np.nan, 3.0),)), relativity=False)
    ).all()
