"""Closure: the velocity of a built star gives back the elements that it was built from."""

import signal

import numpy as np
import pytest
from invented_ensembles import one_row, random_ensemble
from scipy.optimize import least_squares

from stabcheck.build import simulation, states
from stabcheck.constants import GM_SUN_AU3_D2, M_S_AU_D
from stabcheck.orbit import (
    mean_anomaly_from_time_of_conjunction,
    omega_planet_from_omega_star,
    omega_star_from_omega_planet,
    orbit_masses_msun,
    semi_major_axis_au_from_period_d,
)
from stabcheck.velocity import departure_m_s, keplerian_velocity_m_s, nbody_velocity_m_s

EPOCH_BJD = 0.0  # near zero, so that a double holds times to 1e-14 d and not to 5e-10 d as near 2 459 000
PERIOD_D, ECCENTRICITY, OMEGA_STAR, CONJUNCTION = 11.3, 0.4, 2.1, 5.7


def single_planet(omega_planet=None, inclination=0.5 * np.pi, mass=2e-3):
    mean = mean_anomaly_from_time_of_conjunction(CONJUNCTION, PERIOD_D, ECCENTRICITY, OMEGA_STAR, EPOCH_BJD)
    return one_row(
        "jacobi",
        "b",
        0.9,
        mass_msun=[mass],
        period_d=[PERIOD_D],
        semi_major_axis_au=[semi_major_axis_au_from_period_d(PERIOD_D, GM_SUN_AU3_D2 * (0.9 + mass))],
        eccentricity=[ECCENTRICITY],
        inclination_rad=[inclination],
        node_rad=[1.0],
        omega_planet_rad=[omega_planet_from_omega_star(OMEGA_STAR) if omega_planet is None else omega_planet],
        mean_anomaly_rad=[mean],
    )


def system(frame="jacobi", masses=(1e-3, 2e-3), periods=(20.0, 47.0)):
    inside = orbit_masses_msun(frame, np.array([1.0]), np.array([masses]))
    return one_row(
        frame,
        "bc",
        1.0,
        mass_msun=masses,
        period_d=periods,
        semi_major_axis_au=semi_major_axis_au_from_period_d(np.array(periods), GM_SUN_AU3_D2 * inside[0]),
        eccentricity=(0.1, 0.2),
        inclination_rad=(1.3, 1.3),
        node_rad=(0.0, 0.0),
        omega_planet_rad=(0.5, 3.0),
        mean_anomaly_rad=(1.0, 4.0),
    )


def keplerian_sum(ensemble, row, times, omega_star=None):
    return keplerian_velocity_m_s(
        times,
        period_d=ensemble.period_d[row],
        eccentricity=ensemble.eccentricity[row],
        omega_star_rad=omega_star_from_omega_planet(ensemble.omega_planet_rad[row])
        if omega_star is None
        else omega_star,
        mean_anomaly_rad=ensemble.mean_anomaly_rad[row],
        semi_amplitude_m_s=ensemble.semi_amplitude_m_s[row],
    )


def fitted(times, velocity, start):
    """K, P, e, omega of the star and time of conjunction of the best single Keplerian curve."""

    def residual(p):
        k, period, e, omega, conjunction = p
        mean = mean_anomaly_from_time_of_conjunction(conjunction, period, e, omega, EPOCH_BJD)
        columns = {"period_d": [period], "eccentricity": [e], "omega_star_rad": [omega], "mean_anomaly_rad": [mean]}
        return keplerian_velocity_m_s(times, **columns, semi_amplitude_m_s=[k]) - velocity

    return least_squares(residual, start, x_scale=np.abs(start), xtol=1e-15, ftol=1e-15, gtol=1e-15).x


TRUE = np.array([np.nan, PERIOD_D, ECCENTRICITY, OMEGA_STAR, CONJUNCTION])


def fit_of(ensemble):
    times = np.linspace(-17.0, 23.0, 200)
    velocity = nbody_velocity_m_s(states(ensemble), 0, times)
    k = ensemble.semi_amplitude_m_s[0, 0]
    return fitted(times, velocity, [0.97 * k, 11.32, 0.37, 2.05, 5.6]), np.array([k, *TRUE[1:]])


def test_one_planet_gives_back_k_period_e_omega_of_the_star_and_time_of_conjunction():
    found, expected = fit_of(single_planet(inclination=1.1))
    # IAS15 keeps a two-body orbit to 1e-14 over four periods; the least squares stop near the root of rounding
    np.testing.assert_allclose(found, expected, rtol=1e-9)


def test_control_the_planets_omega_taken_for_the_stars_is_noticed():
    found, expected = fit_of(single_planet(omega_planet=OMEGA_STAR))
    assert np.max(np.abs(found / expected - 1.0)) > 0.1


@pytest.mark.parametrize("inclination, nearest_au", [(0.5 * np.pi, 1e-10), (1.55, 3e-3)])
def test_the_planet_crosses_in_front_of_the_star_at_the_time_of_conjunction(inclination, nearest_au):
    sim = simulation(states(single_planet(inclination=inclination)), 0)
    sim.integrate(CONJUNCTION)
    x, y, z = (np.array(sim.particles["b"].xyz) - sim.particles["star"].xyz).tolist()
    assert np.hypot(x, y) < nearest_au  # edge-on: it covers 0.1 au/d, and 1e-14 of rounding grows over half an orbit
    assert z < -0.05
    sim.integrate(CONJUNCTION + 0.01)
    x, y, _ = (np.array(sim.particles["b"].xyz) - sim.particles["star"].xyz).tolist()
    assert np.hypot(x, y) > 5e-4 if nearest_au < 1e-9 else True  # control: a hundredth of a day later it is elsewhere


def test_one_planet_follows_its_keplerian_curve_over_many_orbits():
    ensemble = single_planet(inclination=1.1)
    times = np.linspace(-400.0, 400.0, 301)
    apart = nbody_velocity_m_s(states(ensemble), 0, times) - keplerian_sum(ensemble, 0, times)
    assert np.max(np.abs(apart)) / ensemble.semi_amplitude_m_s[0, 0] < 1e-10  # 35 orbits of IAS15's phase error
    control = keplerian_sum(ensemble, 0, times, omega_star=ensemble.omega_planet_rad[0])
    assert np.max(np.abs(control - nbody_velocity_m_s(states(ensemble), 0, times))) > ensemble.semi_amplitude_m_s[0, 0]


@pytest.mark.parametrize("frame", ["jacobi", "astrocentric"])
def test_at_the_epoch_the_keplerian_sum_of_the_frame_is_exact(frame):
    ensemble = random_ensemble(200, frame)
    velocity = states(ensemble).velocity_au_d[:, 0, 2] / M_S_AU_D
    curve = np.array([keplerian_sum(ensemble, row, np.zeros(1))[0] for row in range(200)])
    scale = np.sum(ensemble.semi_amplitude_m_s, axis=1) / (1.0 - 0.9)
    assert np.max(np.abs(velocity - curve) / scale) < 1e-14  # a few roundings of the largest term near periastron
    ensemble.frame = "astrocentric" if frame == "jacobi" else "jacobi"  # control: K of one frame, states of the other
    other = states(ensemble).velocity_au_d[:, 0, 2] / M_S_AU_D
    assert np.max(np.abs(other - curve) / scale) > 1e-5


def test_one_planet_does_not_depart_from_its_curve():
    ensemble = single_planet(inclination=1.1)
    departure = departure_m_s(ensemble, 0, 400.0)
    assert departure.largest_m_s < 1e-9 * ensemble.semi_amplitude_m_s[0, 0]


def test_departure_grows_with_the_masses_and_with_the_span():
    heavy, light = system(), system(masses=(1e-5, 2e-5))
    long, short = departure_m_s(heavy, 0, 1000.0), departure_m_s(heavy, 0, 50.0)
    small = departure_m_s(light, 0, 1000.0)
    assert long.rms_m_s > 5.0 * short.rms_m_s > 0.0
    assert 0.0 < long.rms_m_s <= long.largest_m_s
    # a hundred times less mass pulls the star and shifts the orbits a hundred times less each: 1e4 at first order
    assert 3e3 < long.rms_m_s / small.rms_m_s < 3e4


def test_departure_is_that_of_an_independent_comparison():
    ensemble, span = system(), 300.0
    times = np.linspace(-150.0, 150.0, 4001)
    apart = nbody_velocity_m_s(states(ensemble), 0, times) - keplerian_sum(ensemble, 0, times)
    apart -= apart.mean()
    found = departure_m_s(ensemble, 0, span, built=states(ensemble))
    assert found.rms_m_s == pytest.approx(np.sqrt(np.mean(apart**2)), rel=0.02, abs=0)  # 2048 times against 4001
    assert found.largest_m_s == pytest.approx(np.max(np.abs(apart)), rel=0.02, abs=0)


def test_a_draw_that_is_not_an_orbit_departs_by_nothing_that_is_a_number():
    ensemble = system()
    ensemble.refused[0] = "m <= 0 (b)"
    departure = departure_m_s(ensemble, 0, 100.0)
    assert np.isnan(departure.rms_m_s) and np.isnan(departure.largest_m_s)


def test_times_may_come_in_any_order():
    built, times = states(system()), np.array([30.0, -12.0, 0.0, 7.0, -40.0])
    shuffled = nbody_velocity_m_s(built, 0, times)
    ordered = nbody_velocity_m_s(built, 0, np.sort(times))
    np.testing.assert_allclose(shuffled[np.argsort(times)], ordered, rtol=1e-13)


def test_ctrl_c_belongs_to_python_again_after_an_integration():
    def handler(number, frame):
        raise KeyboardInterrupt

    before = signal.signal(signal.SIGINT, handler)
    try:
        nbody_velocity_m_s(states(system()), 0, np.array([1.0]))
        with pytest.raises(KeyboardInterrupt):
            signal.raise_signal(signal.SIGINT)
    finally:
        signal.signal(signal.SIGINT, before)


def test_what_ias15_warns_of_is_no_velocity_and_nothing_is_printed():
    built = states(system())
    times = np.linspace(0.0, 400.0, 20)
    assert np.isfinite(nbody_velocity_m_s(built, 0, times)).all()
    assert np.isnan(nbody_velocity_m_s(built, 0, times, smallest_step_d=15.0)).all()  # steps too long to converge
