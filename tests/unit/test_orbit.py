"""Conversions against independent computation: long doubles, bracketed roots, geometry."""

import warnings

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import brentq

from stabcheck.constants import GM_SUN_AU3_D2, M_S_AU_D
from stabcheck.errors import ScenarioError
from stabcheck.orbit import (
    Elements,
    carried_masses_msun,
    eccentric_anomaly_from_mean_anomaly,
    eccentric_anomaly_from_true_anomaly,
    elements_from_state,
    inclination_and_node_from_tilted_plane,
    inclination_from_impact_parameter,
    mass_from_semi_amplitude_jacobi,
    masses_msun,
    mean_anomaly_from_mean_longitude,
    mean_anomaly_from_time_of_conjunction,
    mean_anomaly_from_time_of_periastron,
    mean_anomaly_from_true_anomaly,
    mean_longitude_from_mean_anomaly,
    mutual_inclination,
    omega_planet_from_omega_star,
    omega_star_from_omega_planet,
    orbit_masses_msun,
    period_d_from_semi_major_axis_au,
    semi_amplitudes_au_d,
    semi_major_axis_au_from_period_d,
    solved_sizes,
    state_from_elements,
    time_of_conjunction_from_mean_anomaly,
    time_of_periastron_from_mean_anomaly,
    true_anomaly_from_eccentric_anomaly,
    true_anomaly_from_mean_anomaly,
    wrapped_rad,
)

DEGREE = np.pi / 180.0
ROWS = (1, 3, 33, 4096)


# ---- Kepler's equation


def eccentric_anomaly_error(e, solve):
    """Against Newton in long doubles, over mean anomalies that include the neighbourhood of periastron."""
    mean = np.concatenate([np.linspace(-np.pi, np.pi, 4001), np.geomspace(1e-14, 1.0, 500)])
    found = solve(mean, e)
    exact, e = found.astype(np.longdouble), np.longdouble(e)
    for _ in range(8):
        exact = exact - (exact - e * np.sin(exact) - mean) / (1 - e * np.cos(exact))
    return float(np.max(np.abs(found - exact)))


@pytest.mark.parametrize("e", [0.0, 1e-8, 0.01, 0.1, 0.3, 0.5, 0.7, 0.8, 0.9, 0.95, 0.97, 0.99])
def test_eccentric_anomalies_are_good_to_1e13(e):
    assert eccentric_anomaly_error(e, eccentric_anomaly_from_mean_anomaly) < 1e-13


def test_eccentric_anomalies_are_good_to_1e11_at_e_of_0999():
    assert eccentric_anomaly_error(0.999, eccentric_anomaly_from_mean_anomaly) < 1e-11  # dE/dM up to 1000


def test_control_three_newton_steps_are_not_good_to_1e13():
    def three_steps(mean, e):
        guess = mean
        for _ in range(3):
            guess = guess - (guess - e * np.sin(guess) - mean) / (1.0 - e * np.cos(guess))
        return guess

    assert eccentric_anomaly_error(0.5, three_steps) > 1e-13


def test_anomalies_stay_in_their_turn_and_come_back():
    mean, e = np.linspace(-20.0, 20.0, 801), 0.6
    true = true_anomaly_from_mean_anomaly(mean, e)
    assert np.all(np.diff(true) > 0.0)
    # 1/(1 - e)^2 at most between M and f, and turns of 20 rad carry 4e-15 of rounding
    np.testing.assert_allclose(mean_anomaly_from_true_anomaly(true, e), mean, rtol=0, atol=5e-14)
    eccentric = eccentric_anomaly_from_true_anomaly(true, e)
    np.testing.assert_allclose(true_anomaly_from_eccentric_anomaly(eccentric, e), true, rtol=0, atol=5e-14)


def test_eccentricities_that_are_no_orbit_give_nan_without_a_warning():
    e = np.array([-0.1, 1.0, 1.2, np.nan, 0.5])
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        found = eccentric_anomaly_from_mean_anomaly(np.array([1.0, 1.0, 1.0, 1.0, np.nan]), e)
    assert np.all(np.isnan(found))


def test_wrapping_never_gives_a_whole_turn():
    tiny = np.array([-1e-17, -1e-300, 0.0, -0.0, 2.0 * np.pi, -2.0 * np.pi])
    assert np.all(wrapped_rad(tiny) == 0.0)
    assert np.mod(-1e-17, 2.0 * np.pi) == 2.0 * np.pi  # control: the plain remainder does


# ---- states


def some_elements(count=500, seed=1):
    u = np.random.default_rng(seed).random((6, count))
    return Elements(
        semi_major_axis_au=0.02 * 1000.0 ** u[0],
        eccentricity=0.01 + 0.97 * u[1],
        inclination_rad=np.pi * (0.01 + 0.98 * u[2]),
        node_rad=2 * np.pi * u[3],
        omega_planet_rad=2 * np.pi * u[4],
        mean_anomaly_rad=2 * np.pi * u[5],
    )


def angle_between(a, b):
    return np.abs(np.mod(a - b + np.pi, 2.0 * np.pi) - np.pi)


def test_elements_survive_the_way_through_position_and_velocity():
    before = some_elements()
    after = elements_from_state(GM_SUN_AU3_D2, *state_from_elements(GM_SUN_AU3_D2, before))
    # e, omega and M are read with a loss of up to 1/(1 - e)^(3/2) = 350 at e = 0.98, and 1/e = 100 at e = 0.01
    np.testing.assert_allclose(after.semi_major_axis_au, before.semi_major_axis_au, rtol=1e-12)
    np.testing.assert_allclose(after.eccentricity, before.eccentricity, rtol=0, atol=1e-13)
    for name in ("inclination_rad", "node_rad", "omega_planet_rad", "mean_anomaly_rad"):
        assert np.max(angle_between(getattr(after, name), getattr(before, name))) < 1e-12, name


def test_planar_and_circular_orbits_keep_their_mean_longitude():
    zero = np.zeros(4)
    lap = np.array([0.3, 2.0, 4.0, 6.0])
    circular = Elements(
        semi_major_axis_au=zero + 1.0,
        eccentricity=zero,
        inclination_rad=zero,
        node_rad=zero,
        omega_planet_rad=zero,
        mean_anomaly_rad=lap,
    )
    after = elements_from_state(GM_SUN_AU3_D2, *state_from_elements(GM_SUN_AU3_D2, circular))
    longitude = after.node_rad + after.omega_planet_rad + after.mean_anomaly_rad
    assert np.all(after.node_rad == 0.0)
    assert np.max(angle_between(longitude, lap)) < 1e-15 * 10  # a few roundings of angles up to 6 rad


def test_an_unbound_state_has_a_negative_axis_and_no_anomaly():
    r, v = np.array([[1.0, 0.0, 0.0]]), np.array([[0.0, 0.03, 0.0]])  # escape at 0.0243 au/d
    found = elements_from_state(np.array([GM_SUN_AU3_D2]), r, v)
    assert found.semi_major_axis_au[0] < 0.0 and found.eccentricity[0] > 1.0
    assert np.isnan(found.mean_anomaly_rad[0]) and np.isnan(found.omega_planet_rad[0])
    assert found.eccentricity[0] == pytest.approx(
        0.03**2 / GM_SUN_AU3_D2 - 1.0, rel=1e-13, abs=0
    )  # h²/(GM r) - 1 at periastron


# ---- whose omega, which phase


def test_star_and_planet_are_half_a_turn_apart():
    assert omega_planet_from_omega_star(30.0 * DEGREE) == pytest.approx(210.0 * DEGREE, rel=1e-15, abs=0)
    assert omega_star_from_omega_planet(210.0 * DEGREE) == pytest.approx(30.0 * DEGREE, rel=1e-14, abs=0)


def test_at_the_time_of_conjunction_the_planet_stands_in_front_of_the_star():
    epoch, conjunction, period, e, omega_star = 2459000.0, 2458911.25, 17.3, 0.35, 1.1
    mean = mean_anomaly_from_time_of_conjunction(conjunction, period, e, omega_star, epoch)
    mean_then = mean + 2.0 * np.pi * (conjunction - epoch) / period
    omega = omega_planet_from_omega_star(omega_star)
    edge_on = elements_of(0.1, e, 0.5 * np.pi, 0.7, omega, mean_then)
    (x, y, z), _ = state_from_elements(GM_SUN_AU3_D2, edge_on)
    assert np.hypot(x, y) < 1e-15 and z < -0.05  # z points away from the observer
    behind = elements_of(0.1, e, 0.5 * np.pi, 0.7, omega_star, mean_then)  # control: the star's omega for the planet's
    assert state_from_elements(GM_SUN_AU3_D2, behind)[0][2] > 0.05


def elements_of(axis, e, inclination, node, omega, mean):
    values = (np.float64(value) for value in (axis, e, inclination, node, omega, mean))
    return Elements(
        **dict(zip(Elements.__slots__, values, strict=True)),
    )


def test_a_planet_at_periastron_has_mean_anomaly_zero_then():
    assert mean_anomaly_from_time_of_periastron(2459000.0, 4.3, 2459000.0) == 0.0
    quarter = mean_anomaly_from_time_of_periastron(2459000.0, 8.0, 2459002.0)
    assert quarter == pytest.approx(0.5 * np.pi, rel=1e-15, abs=0)


@given(st.floats(0.0, 6.28), st.floats(0.5, 5e4), st.floats(0.0, 0.95), st.floats(0.0, 6.28))
def test_times_implied_by_a_phase_give_the_phase_back(mean, period, e, omega_star):
    epoch = 2459000.0
    conjunction = time_of_conjunction_from_mean_anomaly(mean, period, e, omega_star, epoch)
    periastron = time_of_periastron_from_mean_anomaly(mean, period, epoch)
    rounding = 1e-13 + 2.0 * np.pi * 5e-10 / period  # a double holds a date near 2 459 000 to 4.7e-10 d
    assert -1e-9 <= conjunction - epoch <= period * (1 + 1e-9) and -1e-9 <= periastron - epoch <= period * (1 + 1e-9)
    assert angle_between(mean_anomaly_from_time_of_periastron(periastron, period, epoch), mean) <= rounding
    back = mean_anomaly_from_time_of_conjunction(conjunction, period, e, omega_star, epoch)
    assert angle_between(back, mean) <= rounding


def test_mean_longitudes_of_star_and_planet_differ_by_half_a_turn():
    omega_star, mean, node = 0.4, 1.3, 2.2
    omega_planet = omega_planet_from_omega_star(omega_star)
    of_star = mean_longitude_from_mean_anomaly(mean, omega_star, node)
    of_planet = mean_longitude_from_mean_anomaly(mean, omega_planet, node)
    assert angle_between(of_star, of_planet) == pytest.approx(np.pi, rel=1e-15, abs=0)
    assert mean_anomaly_from_mean_longitude(of_planet, omega_planet, node) == pytest.approx(mean, rel=1e-14, abs=0)
    crossed = mean_anomaly_from_mean_longitude(of_planet, omega_star, node)  # control: one of each
    assert angle_between(crossed, mean) == pytest.approx(np.pi, rel=1e-14, abs=0)


# ---- planes


@given(st.floats(0.01, 3.13), st.floats(0.0, 1.5), st.floats(0.0, 6.28))
def test_a_tilted_orbit_makes_its_tilt_with_the_common_plane(common, tilt, direction):
    i, node = inclination_and_node_from_tilted_plane(common, tilt, direction)
    assert 0.0 <= i <= np.pi and 0.0 <= node < 2.0 * np.pi
    # a plane seen nearly face on loses digits of its node, by 1/sin of 0.01 at most
    assert mutual_inclination(i, node, common, 0.0) == pytest.approx(tilt, abs=1e-14 * 20)


def test_an_untilted_orbit_is_in_the_common_plane():
    i, node = inclination_and_node_from_tilted_plane(np.array([1.2, 0.3]), np.zeros(2), np.array([4.0, -1.0]))
    np.testing.assert_allclose(i, [1.2, 0.3], rtol=1e-15)
    assert np.all(node == 0.0)


def test_tilts_along_the_line_of_sight_add_to_the_inclination_and_others_turn_the_node():
    i, node = inclination_and_node_from_tilted_plane(
        np.full(3, 1.0), np.full(3, 0.1), np.array([0.0, np.pi, np.pi / 2])
    )
    np.testing.assert_allclose(i[:2], [1.1, 0.9], rtol=1e-14)  # node of the tilt on the node of the plane
    assert abs(i[2] - 1.0) < 0.01 and node[2] == pytest.approx(0.1 / np.sin(1.0), rel=0.01, abs=0)


def test_small_mutual_inclinations_keep_their_digits():
    found = mutual_inclination(1.0, 0.3, 1.0 + 1e-9, 0.3)
    assert found == pytest.approx(1e-9, rel=1e-6, abs=0)  # 1 + 1e-9 itself has a rounding of 1e-7 of the difference
    naive = np.arccos(np.sin(1.0) * np.sin(1.0 + 1e-9) + np.cos(1.0) * np.cos(1.0 + 1e-9))
    assert naive != pytest.approx(1e-9, rel=0.1, abs=0)  # control: the arccosine


def test_mutual_inclination_of_prograde_and_retrograde_is_half_a_turn():
    assert mutual_inclination(0.4, 1.0, np.pi - 0.4, 1.0 + np.pi) == pytest.approx(np.pi, rel=1e-8, abs=0)


def test_an_impact_parameter_is_the_distance_at_conjunction_in_stellar_radii():
    b, radius, axis, e, omega_star = 0.6, 0.004, 0.05, 0.3, 0.8
    i = inclination_from_impact_parameter(b, radius, axis, e, omega_star)
    mean = mean_anomaly_from_true_anomaly(0.5 * np.pi - omega_star, e)
    for inclination in (i, np.pi - i):  # both sides of 90° fit
        orbit = elements_of(axis, e, inclination, 0.2, omega_planet_from_omega_star(omega_star), mean)
        (x, y, _), _ = state_from_elements(GM_SUN_AU3_D2, orbit)
        assert np.hypot(x, y) / radius == pytest.approx(b, rel=1e-12, abs=0)
    circular = np.arccos(b * radius / axis)
    assert circular != pytest.approx(float(i), abs=1e-3)  # control: without the eccentricity
    assert np.isnan(inclination_from_impact_parameter(30.0, radius, axis, e, omega_star))


# ---- masses


def columns(*rows):
    return [np.atleast_2d(np.array(row, dtype=float)) for row in rows]


MASSES, STAR = (5e-4, 0.02, 0.3), np.array([0.9])  # a planet, a brown dwarf, a companion star
PERIODS, ECCENTRICITIES, INCLINATIONS = (4.3, 60.0, 9000.0), (0.05, 0.4, 0.3), (1.2, 0.9, 1.7)
FRAMES = pytest.mark.parametrize("frame", ["jacobi", "astrocentric"])


def truth(frame):
    mass, e, i, period = columns(MASSES, ECCENTRICITIES, INCLINATIONS, PERIODS)
    axis = semi_major_axis_au_from_period_d(period, GM_SUN_AU3_D2 * orbit_masses_msun(frame, STAR, mass))
    return mass, axis, period, e, i, semi_amplitudes_au_d(frame, STAR, mass, axis, e, i)


@FRAMES
@pytest.mark.parametrize("kinds", ["KKm", "Kmm", "KKK", "sKm", "mmm", "ssm", "KsK"])
@pytest.mark.parametrize("sizes", ["PPP", "aaa", "PaP", "aPa"])
def test_masses_come_back_from_any_mixture_of_statements(frame, kinds, sizes):
    mass, axis, period, e, i, k = truth(frame)
    named = {"K": ("semi_amplitude", k), "m": ("mass", mass), "s": ("mass_sin_i", mass * np.sin(i))}
    value = np.stack([named[kind][1][:, n] for n, kind in enumerate(kinds)], axis=1)
    size_named = {"P": ("period", period), "a": ("semi_major_axis", axis)}
    size = np.stack([size_named[kind][1][:, n] for n, kind in enumerate(sizes)], axis=1)
    statements = [named[kind][0] for kind in kinds], value, [size_named[kind][0] for kind in sizes], size
    found = masses_msun(frame, STAR, *statements, e, i)
    np.testing.assert_allclose(found, mass, rtol=1e-13)  # some dozens of roundings, no cancellation


def test_frame_masses_are_what_the_frame_says():
    mass, *_ = truth("jacobi")
    np.testing.assert_allclose(orbit_masses_msun("jacobi", STAR, mass), [[0.9005, 0.9205, 1.2205]], rtol=1e-15)
    np.testing.assert_allclose(orbit_masses_msun("astrocentric", STAR, mass), [[0.9005, 0.92, 1.2]], rtol=1e-15)
    np.testing.assert_allclose(carried_masses_msun("astrocentric", STAR, mass), [[1.2205] * 3], rtol=1e-15)
    np.testing.assert_allclose(carried_masses_msun("jacobi", STAR, mass), [[0.9005, 0.9205, 1.2205]], rtol=1e-15)


def test_control_k_read_in_the_other_frame_gives_other_masses():
    _, _, period, e, i, k = truth("jacobi")
    statements = ["semi_amplitude", "semi_amplitude", "mass"], np.concatenate([k[:, :2], [[0.3]]], axis=1)
    found = masses_msun("astrocentric", STAR, *statements, ["period"] * 3, period, e, i)
    assert np.all(np.abs(found[0, :2] / MASSES[:2] - 1.0) > 0.1)  # the companion alone shifts the total by a third


@pytest.mark.parametrize("size_given", ["period", "semi_major_axis"])
@pytest.mark.parametrize("k_m_s", [1e-3, 1.0, 50.0, 3e3, 5e4, 1e6])
def test_masses_agree_with_a_bracketed_root_from_earths_to_stars(size_given, k_m_s):
    star, e, i, size = 0.7, 0.3, 1.0, 20.0 if size_given == "period" else 0.12

    def k_of(mass):  # speeds from Kepler's third law, independent of the module's way of taking K apart
        n = 2 * np.pi / size if size_given == "period" else np.sqrt(GM_SUN_AU3_D2 * (star + mass) / size**3)
        axis = (GM_SUN_AU3_D2 * (star + mass) / n**2) ** (1.0 / 3.0)
        return mass / (star + mass) * n * axis * np.sin(i) / np.sqrt(1 - e**2) / M_S_AU_D

    expected = np.exp(brentq(lambda log_mass: np.log(k_of(np.exp(log_mass)) / k_m_s), -30.0, 30.0, xtol=1e-14))
    found = mass_from_semi_amplitude_jacobi(k_m_s * M_S_AU_D, size, size_given, e, i, star)
    assert found == pytest.approx(expected, rel=1e-12, abs=0)  # brentq stops at 1e-14 in ln m, and rounds there
    planets = masses_msun("astrocentric", np.array([star]), ["semi_amplitude"], *columns([k_m_s * M_S_AU_D])[:1],
                          [size_given], *columns([size], [e], [i]))  # fmt: skip
    assert planets[0, 0] == pytest.approx(expected, rel=1e-12, abs=0)  # one planet: the frames are the same


def test_astrocentric_masses_solve_the_joint_equations_for_massive_planets():
    star, k = np.array([0.5]), np.array([[2e4, 1e4, 5e3]]) * M_S_AU_D
    period, e, i = columns([10.0, 50.0, 400.0], [0.1, 0.6, 0.3], [0.7, 1.5, 2.0])
    mass = masses_msun("astrocentric", star, ["semi_amplitude"] * 3, k, ["period"] * 3, period, e, i)
    assert np.all(mass > 0.05)
    axis = semi_major_axis_au_from_period_d(period, GM_SUN_AU3_D2 * (star[:, None] + mass))
    residual = semi_amplitudes_au_d("astrocentric", star, mass, axis, e, i) / k - 1.0
    assert np.max(np.abs(residual)) < 1e-13
    alone = [mass_from_semi_amplitude_jacobi(k[:, n], period[:, n], "period", e[:, n], i[:, n], star) for n in range(3)]
    assert np.all(np.abs(np.array(alone).T / mass - 1.0) > 0.05)  # control: each planet for itself


def test_a_joint_solution_that_has_not_converged_is_nan(monkeypatch):
    k, period, e, i = columns([3e5 * M_S_AU_D, 2e5 * M_S_AU_D], [5.0, 50.0], [0.1, 0.1], [1.0, 1.0])
    given = ["semi_amplitude"] * 2, k, ["period"] * 2, period
    assert np.all(masses_msun("astrocentric", STAR, *given, e, i) > 1.0)
    monkeypatch.setattr("stabcheck.masses.NEWTON_STEPS", 3)
    assert np.all(np.isnan(masses_msun("astrocentric", STAR, *given, e, i)))


def test_a_negative_or_missing_k_is_left_for_the_caller_to_refuse():
    k, period, e, i = columns([-30.0 * M_S_AU_D, 30.0 * M_S_AU_D], [5.0, 50.0], [0.1, 0.1], [1.0, 1.0])
    given = ["semi_amplitude"] * 2, k, ["period"] * 2, period
    for frame in ("jacobi", "astrocentric"):
        mass = masses_msun(frame, STAR, *given, e, i)
        assert mass[0, 0] < 0.0 < mass[0, 1]
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        hole = np.where(np.array([[True, False]]), np.nan, k)
        assert np.all(np.isnan(masses_msun("jacobi", STAR, given[0], hole, *given[2:], e, i)))
        assert np.isnan(masses_msun("jacobi", STAR, *given, np.array([[0.1, 1.5]]), i)[0, 1])
        assert np.isinf(masses_msun("jacobi", STAR, ["mass_sin_i"] * 2, np.abs(k), *given[2:], e, 0.0 * i)).all()


@FRAMES
def test_impact_parameter_mass_and_axis_are_solved_together(frame):
    star, radius = np.array([0.8, 0.8]), np.array([0.0035, 0.0035])
    k = np.array([[120.0, 8000.0], [120.0, 8000.0]]) * M_S_AU_D
    period = np.array([[3.0, 9.0], [3.0, 9.0]])
    e, omega = np.array([[0.1, 0.3]] * 2), np.array([[0.5, 2.0]] * 2)
    b, beyond = np.array([[0.4, 0.9]] * 2), np.array([[False, False], [True, False]])
    found = solved_sizes(
        frame,
        star,
        radius,
        mass_given=["semi_amplitude"] * 2,
        mass_value=k,
        size_given=["period"] * 2,
        size=period,
        tilt_given=["impact_parameter"] * 2,
        tilt=b,
        beyond_90_degrees=beyond,
        eccentricity=e,
        omega_star_rad=omega,
    )
    np.testing.assert_allclose(found.semi_amplitude_au_d, k, rtol=1e-13)
    cosine = np.where(beyond, -1.0, 1.0) * np.cos(found.inclination_rad)
    implied = found.semi_major_axis_au * cosine / radius[:, None] * (1 - e**2) / (1 + e * np.sin(omega))
    np.testing.assert_allclose(implied, b, rtol=1e-12)  # cos i near 0 from an angle near 90°: 1e-16/0.05
    gm = GM_SUN_AU3_D2 * orbit_masses_msun(frame, star, found.mass_msun)
    np.testing.assert_allclose(period_d_from_semi_major_axis_au(found.semi_major_axis_au, gm), period, rtol=1e-14)


def test_a_frame_without_elements_is_refused_and_the_others_are_named():
    with pytest.raises(ScenarioError, match="jacobi"):
        orbit_masses_msun("cartesian", STAR, np.ones((1, 2)))


def test_periods_and_axes_that_are_not_positive_give_nan():
    assert np.all(np.isnan(semi_major_axis_au_from_period_d(np.array([-3.0, 0.0, np.nan]), GM_SUN_AU3_D2)))
    assert np.all(np.isnan(period_d_from_semi_major_axis_au(np.array([-3.0, 0.0, np.nan]), GM_SUN_AU3_D2)))


# ---- rows and their neighbours


@FRAMES
@pytest.mark.parametrize("size_given", ["period", "semi_major_axis"])
def test_solved_rows_do_not_depend_on_how_many_rows_there_are(frame, size_given):
    u = np.random.default_rng(8).random((4096, 3, 6))

    def solved(rows):
        part = u[:rows]
        return solved_sizes(
            frame,
            0.5 + part[:, 0, 5],
            np.full(rows, 0.004),
            mass_given=["semi_amplitude", "mass_sin_i", "semi_amplitude"],
            mass_value=part[..., 0] * np.array([100 * M_S_AU_D, 1e-3, 2000 * M_S_AU_D]),
            size_given=[size_given] * 3,
            size=(5.0 if size_given == "period" else 0.06) * 2.0 ** (np.arange(3) + part[..., 1]),
            tilt_given=["impact_parameter", "inclination", "inclination"],
            tilt=part[..., 2],
            beyond_90_degrees=part[..., 3] > 0.5,
            eccentricity=0.9 * part[..., 4],
            omega_star_rad=6.0 * part[..., 3],
        )

    many = solved(max(ROWS))
    for rows in ROWS:
        few = solved(rows)
        for name in few.__slots__:
            assert getattr(few, name).tobytes() == getattr(many, name)[:rows].tobytes(), name
