"""Laplace-Lagrange rates against quadrature, LAPACK and an N-body run."""

import warnings

import numpy as np
import pytest
import rebound

from stabcheck.constants import GM_SUN_AU3_D2
from stabcheck.criteria.relativity import apsidal_rate_rad_d
from stabcheck.criteria.secular import (
    apsidal_frequencies_rad_d,
    apsidal_matrix_rad_d,
    laplace_coefficient,
    slowest_apsidal_period_d,
)
from stabcheck.orbit import period_d_from_semi_major_axis_au


def by_quadrature(s, j, alpha):
    """Equal steps around the circle converge like alpha^n for a periodic function; long doubles, 8192 steps."""
    psi = 2 * np.arange(8192, dtype=np.longdouble) * np.pi / 8192
    power = (1 - 2 * np.longdouble(alpha) * np.cos(psi) + np.longdouble(alpha) ** 2) ** np.longdouble(s)
    return float(2 * np.mean(np.cos(j * psi) / power))


@pytest.mark.parametrize("s", [0.5, 1.5, 2.5])
@pytest.mark.parametrize("j", [0, 1, 2, 5])
@pytest.mark.parametrize("alpha", [0.3, 0.5445, 0.9, 0.97])
def test_laplace_coefficients_agree_with_their_integral(s, j, alpha):
    rounding = 1e-15 * by_quadrature(s, 0, alpha)  # np.pi is a double: the angles above are good to 1e-16 only
    assert laplace_coefficient(s, j, alpha) == pytest.approx(by_quadrature(s, j, alpha), rel=1e-12, abs=rounding)


def test_control_the_next_coefficient_is_another_number():
    assert laplace_coefficient(1.5, 1, 0.5) != pytest.approx(by_quadrature(1.5, 2, 0.5), rel=0.1, abs=0)


def test_small_ratios_follow_the_leading_power():
    # b_{3/2}^{(1)} -> 3 alpha, b_{3/2}^{(2)} -> 15/4 alpha² (Murray & Dermott 1999, eq. 6.68: the first terms)
    assert laplace_coefficient(1.5, 1, 1e-4) == pytest.approx(3e-4, rel=1e-7, abs=0)
    assert laplace_coefficient(1.5, 2, 1e-4) == pytest.approx(3.75e-8, rel=1e-7, abs=0)


def some_systems(rows, planets=5):
    u = np.random.default_rng(11).random((4096, planets, 2))[:rows]
    return 0.5 + u[:, 0, 0], 10.0 ** (-6.0 + 3.0 * u[..., 1]), 0.05 * 1.7 ** (np.arange(planets) + 0.5 * u[..., 0])


def test_frequencies_are_the_eigenvalues_that_lapack_finds():
    star, mass, axis = some_systems(40)
    mean_motion = 2.0 * np.pi / period_d_from_semi_major_axis_au(axis, GM_SUN_AU3_D2 * (star[:, None] + mass))
    found = apsidal_frequencies_rad_d(star, mass, axis)
    for row, matrix in enumerate(apsidal_matrix_rad_d(star, mass, axis, mean_motion)):
        expected = np.sort(np.linalg.eigvals(matrix).real)
        # LAPACK's error is that of the largest eigenvalue times the condition of an unsymmetric matrix
        np.testing.assert_allclose(found[row], expected, rtol=1e-9, atol=1e-13 * expected[-1])
        assert np.sum(found[row]) == pytest.approx(np.trace(matrix), rel=1e-13, abs=0)


def test_the_order_in_which_planets_are_listed_does_not_matter():
    star, mass, axis = some_systems(10)
    turned = apsidal_frequencies_rad_d(star, mass[:, ::-1], axis[:, ::-1])
    np.testing.assert_allclose(turned, apsidal_frequencies_rad_d(star, mass, axis), rtol=1e-11)


def test_a_single_planet_has_no_cycle_unless_something_else_turns_it():
    star, mass, axis = np.array([1.0]), np.array([[1e-3]]), np.array([[0.05]])
    assert np.isinf(slowest_apsidal_period_d(star, mass, axis))[0]
    period = period_d_from_semi_major_axis_au(axis, GM_SUN_AU3_D2)
    rate = apsidal_rate_rad_d(axis, np.array([[0.1]]), star[:, None], period)
    # 1.926194613 degrees a century at 0.05 au, e = 0.1, one solar mass
    assert np.degrees(rate[0, 0]) * 36525.0 == pytest.approx(1.926194613, rel=1e-9, abs=0)
    assert slowest_apsidal_period_d(star, mass, axis, rate)[0] == pytest.approx(
        2 * np.pi / rate[0, 0], rel=1e-14, abs=0
    )


def test_relativity_is_comparable_to_the_mode_of_a_close_in_planet():
    star, mass, axis = np.array([1.0]), np.array([[1e-4, 1e-3]]), np.array([[0.05, 0.5]])
    newtonian = slowest_apsidal_period_d(star, mass, axis)[0]
    assert newtonian / 365.25 == pytest.approx(470409.5990, rel=1e-9, abs=0)  # evaluated independently
    rate = apsidal_rate_rad_d(axis, 0.0 * axis, star[:, None], period_d_from_semi_major_axis_au(axis, GM_SUN_AU3_D2))
    without, together = (
        apsidal_frequencies_rad_d(star, mass, axis)[0],
        apsidal_frequencies_rad_d(star, mass, axis, rate)[0],
    )
    assert together[1] - without[1] == pytest.approx(rate[0, 0], rel=0.05, abs=0)  # the fast mode is the inner planet's
    assert together[1] / without[1] == pytest.approx(1.0 + 14622.34992 * 0.01926194613 * 0.99 / 360.0, rel=0.01, abs=0)
    assert slowest_apsidal_period_d(star, mass, axis, rate)[0] < newtonian


def test_equal_axes_and_nan_give_nan_in_their_row_only_and_no_warning():
    star, mass, axis = some_systems(4)
    axis[1, 2], mass[2, 0] = axis[1, 1], np.nan
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        found = apsidal_frequencies_rad_d(star, mass, axis)
    assert np.isnan(found[1:3]).all() and np.isfinite(found[[0, 3]]).all()


@pytest.mark.parametrize("rows", [1, 3, 33])
def test_rows_do_not_depend_on_how_many_there_are(rows):
    few, many = apsidal_frequencies_rad_d(*some_systems(rows)), apsidal_frequencies_rad_d(*some_systems(4096))
    assert few.tobytes() == many[:rows].tobytes()


def test_a_light_inner_planet_precesses_in_an_n_body_run_as_the_theory_says():
    star, mass, axis = np.array([1.0]), np.array([[1e-9, 5e-4]]), np.array([[1.0, 3.0]])
    sim = rebound.Simulation()
    sim.G = GM_SUN_AU3_D2
    sim.add(m=1.0)
    sim.add(m=1e-9, a=1.0, e=0.05)
    sim.add(m=5e-4, a=3.0, f=1.0)
    sim.move_to_com()
    sim.integrator, sim.dt = "whfast", 10.0
    years = np.linspace(0.0, 6000.0, 121)
    longitude = []
    for year in years:
        sim.integrate(year * 365.25, exact_finish_time=0)
        longitude.append(sim.particles[1].orbit().pomega)
    measured = np.polyfit(years * 365.25, np.unwrap(longitude), 1)[0]
    modes = apsidal_frequencies_rad_d(star, mass, axis)[0]
    # e² = 0.0025 and the second order in 5e-4 are left out of the theory; 0.5 % measured
    assert measured == pytest.approx(modes[1], rel=0.02, abs=0)
    assert measured != pytest.approx(modes[0], rel=0.5, abs=0)  # control: the heavy planet's own mode
