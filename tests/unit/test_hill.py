"""Separation in mutual Hill radii."""

import warnings

import numpy as np
import pytest

from stabcheck.criteria.hill import HILL_LIMIT, mutual_hill_radius_au, separation_hill


def pair(axes, masses, star=1.0):
    return separation_hill(np.array([axes], dtype=float), np.array([masses], dtype=float), np.array([star]))


@pytest.mark.parametrize(
    "mass, separation, ratio",  # a2/a1 = (1 + x)/(1 - x), x = (K/2) (2m/3M)^(1/3), evaluated independently
    [(3.003e-6, HILL_LIMIT, 1.044633834100), (3.003e-6, 10.0, 1.134510545346), (1e-5, 8.0, 1.162823594092)],
)
def test_equal_planets_at_a_known_axis_ratio_have_the_known_separation(mass, separation, ratio):
    assert pair([1.0, ratio], [mass, mass])[0, 0] == pytest.approx(separation, rel=1e-10, abs=0)  # 13 digits of a2 - a1


@pytest.mark.parametrize("mu_1, mu_2, gap", [(1e-5, 1e-5, 0.0673938223121), (1e-3, 1e-3, 0.3565691144623)])
def test_the_limit_with_the_mean_axis_is_the_computed_gap(mu_1, mu_2, gap):
    assert pair([1.0, 1.0 + gap], [mu_1, mu_2])[0, 0] == pytest.approx(HILL_LIMIT, rel=1e-10, abs=0)


def test_control_the_inner_axis_would_make_the_gap_smaller():
    inner_axis_gap = 2.40 * np.cbrt(2e-5)
    assert pair([1.0, 1.0 + inner_axis_gap], [1e-5, 1e-5])[0, 0] != pytest.approx(HILL_LIMIT, rel=0.01, abs=0)


def test_half_the_star_makes_planets_look_a_quarter_nearer():
    whole, half = pair([1.0, 1.3], [1e-5, 2e-5])[0, 0], pair([1.0, 1.3], [1e-5, 2e-5], star=0.5)[0, 0]
    assert whole / half == pytest.approx(np.cbrt(2.0), rel=1e-14, abs=0)


def test_a_draw_whose_order_flips_is_below_every_limit():
    assert pair([1.3, 1.0], [1e-5, 2e-5])[0, 0] == -pair([1.0, 1.3], [2e-5, 1e-5])[0, 0] < 0.0


def test_entries_belong_to_neighbours_and_a_single_planet_has_none():
    three = pair([1.0, 1.2, 3.0], [1e-5, 1e-4, 1e-3])
    assert three.shape == (1, 2) and pair([1.0], [1e-5]).shape == (1, 0)
    assert three[0, 1] == (3.0 - 1.2) / mutual_hill_radius_au(1.2, 3.0, 1e-4, 1e-3, 1.0)


def test_nan_goes_in_and_comes_out_without_a_warning():
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        assert np.isnan(pair([1.0, np.nan, 3.0], [1e-5, 1e-4, 1e-3])).all()


@pytest.mark.parametrize("rows", [1, 3, 33])
def test_rows_do_not_depend_on_how_many_there_are(rows):
    u = np.random.default_rng(3).random((4096, 4, 2))
    axis, mass, star = np.arange(1, 5) + u[..., 0], 1e-3 * u[..., 1], 1.0 + u[:, 0, 0]
    few, many = separation_hill(axis[:rows], mass[:rows], star[:rows]), separation_hill(axis, mass, star)
    assert few.tobytes() == many[:rows].tobytes()
