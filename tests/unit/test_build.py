"""States against REBOUND's own conversion from elements, against geometry, and against themselves row by row."""

from types import SimpleNamespace

import numpy as np
import pytest
import rebound
from invented_ensembles import ensemble_of, random_ensemble

from stabcheck.build import simulation, states
from stabcheck.constants import GM_SUN_AU3_D2, M_S_AU_D
from stabcheck.errors import ScenarioError
from stabcheck.orbit import (
    mean_anomaly_from_mean_longitude,
    mean_anomaly_from_time_of_periastron,
    solved_sizes,
)

STAR_MSUN, EPOCH_BJD = 0.85, 2459000.0
NAMES, PLANETS = ("b", "c", "d"), 3
MASS = np.array([[4e-5, 2.5e-3, 8e-4]])
PERIOD = np.array([[6.2, 41.0, 380.0]])
ECCENTRICITY = np.array([[0.02, 0.35, 0.6]])
INCLINATION = np.array([[1.55, 1.2, 0.8]])
NODE = np.array([[0.1, 0.4, 5.9]])
OMEGA = np.array([[2.0, 4.4, 0.3]])
PERIASTRON_BJD = np.array([[2459001.25, 2458987.5, 2459100.0]])
LONGITUDE = np.array([[0.7, 3.1, 5.2]])
MEAN = np.array([[1.0, 6.0, 3.3]])
AGREEMENT = 2e-14  # of the axis and of the orbital speed: REBOUND goes by the true anomaly, we by the eccentric one
FRAMES = pytest.mark.parametrize("frame", ["jacobi", "astrocentric"])


def rebound_phase(phase, k):
    return {
        "mean anomaly": {"M": MEAN[0, k]},
        "mean longitude": {"l": LONGITUDE[0, k]},
        "time of periastron": {"T": PERIASTRON_BJD[0, k] - EPOCH_BJD},
    }[phase]


def our_mean_anomaly(phase):
    return {
        "mean anomaly": MEAN,
        "mean longitude": mean_anomaly_from_mean_longitude(LONGITUDE, OMEGA, NODE),
        "time of periastron": mean_anomaly_from_time_of_periastron(PERIASTRON_BJD, PERIOD, EPOCH_BJD),
    }[phase]


def rebound_system(frame, phase):
    sim = rebound.Simulation()
    sim.G = GM_SUN_AU3_D2
    sim.add(m=STAR_MSUN)
    for k in range(PLANETS):
        about = {"primary": sim.particles[0]} if frame == "astrocentric" else {}
        angles = {"inc": INCLINATION[0, k], "Omega": NODE[0, k], "omega": OMEGA[0, k]}
        sim.add(m=MASS[0, k], P=PERIOD[0, k], e=ECCENTRICITY[0, k], **angles, **rebound_phase(phase, k), **about)
    return sim


def rebound_semi_amplitudes_au_d(frame, sim):
    """From the orbits that REBOUND reads: the share of the mass times n a sin i / sqrt(1 - e²)."""
    orbits = sim.orbits(primary=sim.particles[0]) if frame == "astrocentric" else sim.orbits()
    inside, result = STAR_MSUN, []
    for k, orbit in enumerate(orbits):
        inside += MASS[0, k]
        carried = inside if frame == "jacobi" else STAR_MSUN + MASS.sum()
        result.append(MASS[0, k] / carried * orbit.n * orbit.a * np.sin(orbit.inc) / np.sqrt(1.0 - orbit.e**2))
    return np.array([result])


def our_ensemble(frame, phase, given, sim, omega=OMEGA):
    value = {
        "mass": MASS,
        "mass_sin_i": MASS * np.sin(INCLINATION),
        "semi_amplitude": rebound_semi_amplitudes_au_d(frame, sim),
    }[given]
    sizes = solved_sizes(
        frame,
        np.array([STAR_MSUN]),
        np.zeros(1),
        mass_given=[given] * PLANETS,
        mass_value=value,
        size_given=["period"] * PLANETS,
        size=PERIOD,
        tilt_given=["inclination"] * PLANETS,
        tilt=INCLINATION,
        beyond_90_degrees=np.zeros((1, PLANETS), dtype=bool),
        eccentricity=ECCENTRICITY,
        omega_star_rad=omega + np.pi,
    )
    star = np.array([STAR_MSUN])
    return ensemble_of(frame, NAMES, star, sizes, ECCENTRICITY, NODE, omega, our_mean_anomaly(phase))


def largest_disagreement(ours, sim):
    """In units of each planet's axis and orbital speed, body by body, the star with the innermost."""
    worst = 0.0
    for body, particle in enumerate(sim.particles):
        period = PERIOD[0, max(body - 1, 0)]
        axis = np.cbrt(GM_SUN_AU3_D2 * STAR_MSUN * (period / 2 / np.pi) ** 2)
        r = np.abs(ours.position_au[0, body] - particle.xyz) / axis
        v = np.abs(ours.velocity_au_d[0, body] - particle.vxyz) / (2 * np.pi * axis / period)
        worst = max(worst, *r, *v)
    return worst


@FRAMES
@pytest.mark.parametrize("phase", ["mean anomaly", "mean longitude", "time of periastron"])
@pytest.mark.parametrize("given", ["mass", "mass_sin_i", "semi_amplitude"])
def test_states_agree_with_rebounds_own_conversion_to_rounding(frame, phase, given):
    sim = rebound_system(frame, phase)
    ours = states(our_ensemble(frame, phase, given, sim))
    sim.move_to_com()
    # M carries a few roundings, multiplied by the speed at periastron, (1 + e)/(1 - e)^... = 5 at e = 0.6
    assert largest_disagreement(ours, sim) < 10 * AGREEMENT
    np.testing.assert_allclose(ours.mass_msun[0], [STAR_MSUN, *MASS[0]], rtol=1e-13)


def test_control_the_other_frame_or_the_stars_omega_do_not_agree():
    sim = rebound_system("jacobi", "mean anomaly")
    other_frame = states(our_ensemble("astrocentric", "mean anomaly", "mass", sim))
    other_omega = states(our_ensemble("jacobi", "mean anomaly", "mass", sim, omega=OMEGA + np.pi))
    sim.move_to_com()
    assert largest_disagreement(other_frame, sim) > 1e-4
    assert largest_disagreement(other_omega, sim) > 0.1


@FRAMES
def test_every_system_stands_and_rests_at_its_centre_of_mass(frame):
    built = states(random_ensemble(64, frame))
    for vector in (built.position_au, built.velocity_au_d):
        centre = np.sum(built.mass_msun[..., None] * vector, axis=1) / np.sum(built.mass_msun, axis=1)[:, None]
        assert (
            np.max(np.abs(centre) / np.max(np.abs(vector), axis=(1, 2))[:, None]) < 1e-17 * 100
        )  # mass ratio x rounding


@FRAMES
@pytest.mark.parametrize("rows", [1, 3, 33])
def test_rows_are_the_same_bit_for_bit_whatever_stands_beside_them(frame, rows):
    few, many = states(random_ensemble(rows, frame)), states(random_ensemble(4096, frame))
    for name in ("mass_msun", "position_au", "velocity_au_d"):
        assert getattr(few, name).tobytes() == getattr(many, name)[:rows].tobytes(), name


def test_memory_order_of_the_ensemble_changes_no_bit():
    ensemble = random_ensemble(33)
    turned = SimpleNamespace(**vars(ensemble))
    for name in ("mass_msun", "semi_major_axis_au", "eccentricity", "inclination_rad", "node_rad", "mean_anomaly_rad"):
        setattr(turned, name, np.asfortranarray(getattr(ensemble, name)))
    assert states(turned).position_au.tobytes() == states(ensemble).position_au.tobytes()


def test_refused_rows_have_no_state_and_their_neighbours_keep_theirs():
    whole, holed = random_ensemble(5), random_ensemble(5)
    holed.refused[2] = "e >= 1 (c)"
    holed.eccentricity[2, 1] = 1.3
    with_hole, without = states(holed), states(whole)
    assert np.all(np.isnan(with_hole.position_au[2])) and np.all(np.isnan(with_hole.velocity_au_d[2]))
    for row in (0, 1, 3, 4):
        assert with_hole.position_au[row].tobytes() == without.position_au[row].tobytes()


def test_cartesian_states_are_moved_to_the_barycentre_and_nothing_else():
    known = states(random_ensemble(3))
    shift, drift = np.array([10.0, -3.0, 0.5]), np.array([1e-3, 0.0, 2e-3])
    ensemble = random_ensemble(3)
    ensemble.frame = "cartesian"
    ensemble.position_au, ensemble.velocity_au_d = known.position_au + shift, known.velocity_au_d + drift
    again = states(ensemble)
    np.testing.assert_allclose(again.position_au, known.position_au, rtol=0, atol=1e-14)  # rounding of 10 au
    np.testing.assert_allclose(again.velocity_au_d, known.velocity_au_d, rtol=0, atol=1e-17)
    assert np.max(np.abs(ensemble.position_au - known.position_au)) > 9.0  # what came in is left alone


def test_a_frame_that_does_not_exist_is_refused():
    ensemble = random_ensemble(1)
    ensemble.frame = "barycentric"
    with pytest.raises(ScenarioError, match="barycentric"):
        states(ensemble)


def test_a_simulation_carries_names_masses_radii_and_the_nominal_constant():
    ensemble = random_ensemble(2)
    ensemble.radius_au[1] = [1e-4, 2e-4, 3e-4]
    built = states(ensemble)
    sim = simulation(built, 1)
    assert sim.G == GM_SUN_AU3_D2
    assert [particle.name for particle in sim.particles] == ["star", "b", "c", "d"]
    assert [particle.r for particle in sim.particles] == [0.0, 1e-4, 2e-4, 3e-4]
    assert np.array_equal([particle.xyz for particle in sim.particles], built.position_au[1])
    assert np.array_equal([particle.vxyz for particle in sim.particles], built.velocity_au_d[1])
    assert np.array_equal([particle.m for particle in sim.particles], built.mass_msun[1])


def test_control_rebounds_units_would_be_another_constant():
    sim = rebound.Simulation()
    sim.units = ("AU", "day", "Msun")
    assert pytest.approx(GM_SUN_AU3_D2, rel=1e-10, abs=0) != sim.G  # Gauss's k², 3e-10 off


def test_elements_read_by_rebound_are_those_of_the_ensemble():
    ensemble = random_ensemble(20)
    built = states(ensemble)
    for row in range(20):
        for k, orbit in enumerate(simulation(built, row).orbits()):
            assert pytest.approx(ensemble.period_d[row, k], rel=1e-12, abs=0) == orbit.P
            assert orbit.e == pytest.approx(ensemble.eccentricity[row, k], abs=1e-12)
            assert orbit.inc == pytest.approx(ensemble.inclination_rad[row, k], rel=1e-12, abs=0)


def test_a_receding_star_has_positive_velocity_when_its_planet_approaches():
    ensemble = random_ensemble(50, planets=1)
    built = states(ensemble)
    e, omega_star = ensemble.eccentricity[:, 0], ensemble.omega_planet_rad[:, 0] + np.pi
    from stabcheck.orbit import true_anomaly_from_mean_anomaly

    true = true_anomaly_from_mean_anomaly(ensemble.mean_anomaly_rad[:, 0], e)
    curve = ensemble.semi_amplitude_m_s[:, 0] * (np.cos(omega_star + true) + e * np.cos(omega_star))
    np.testing.assert_allclose(built.velocity_au_d[:, 0, 2] / M_S_AU_D, curve, rtol=1e-12, atol=1e-12)
    wrong = ensemble.semi_amplitude_m_s[:, 0] * -(np.cos(omega_star + true) + e * np.cos(omega_star))
    assert np.min(np.abs(built.velocity_au_d[:, 0, 2] / M_S_AU_D - wrong)) > 1e-3  # control: the planet's omega
