"""The compiled loop's own formulas against plain ones and against REBOUND's conversions."""

import numpy as np
import pytest
import rebound
from engine_tasks import outcome_of, task_of

from stabcheck.constants import GM_SUN_AU3_D2
from stabcheck.engines.rebound.kernels import _never_nearer, closest_within, energy, jacobi_elements, mean_longitudes
from stabcheck.engines.rebound.library import check_layout, new_simulation, particles_view
from stabcheck.errors import PlatformError


def random_system(seed: int, planets: int = 3, steepest: float = 0.3) -> rebound.Simulation:
    rng = np.random.default_rng(seed)
    simulation = rebound.Simulation()
    simulation.G = GM_SUN_AU3_D2
    simulation.add(m=0.9)
    for k in range(planets):
        simulation.add(
            m=float(10 ** rng.uniform(-6, -2.3)),
            a=0.1 * 1.8**k,
            e=float(rng.uniform(0, 0.6)),
            inc=float(rng.uniform(0, steepest)),
            Omega=float(rng.uniform(0, 6)),
            omega=float(rng.uniform(0, 6)),
            M=float(rng.uniform(0, 6)),
        )
    simulation.move_to_com()
    return simulation


def state_and_mass(simulation: rebound.Simulation) -> tuple[np.ndarray, np.ndarray]:
    view = particles_view(simulation)
    return view[:, :6].copy(), view[:, 9].copy()


def test_the_memory_layout_is_the_one_the_kernels_read():
    check_layout()


def test_another_version_of_rebound_is_refused(monkeypatch):
    monkeypatch.setattr(rebound, "__version__", "5.1.0")
    with pytest.raises(PlatformError, match=r"5\.1\.0"):
        check_layout()


@pytest.mark.parametrize("seed", range(20))
def test_axes_and_eccentricities_are_those_of_rebound(seed):
    simulation = random_system(seed)
    state, mass = state_and_mass(simulation)
    elements = np.empty((3, 2))
    jacobi_elements(state, mass, np.empty(4), elements)
    orbits = simulation.orbits()
    # two roundings of numbers of order one, divided by 1 - e: 1e-13 leaves a factor of a hundred
    assert 1.0 / elements[:, 0] == pytest.approx([o.a for o in orbits], rel=1e-13, abs=0)
    assert np.sqrt(elements[:, 1]) == pytest.approx([o.e for o in orbits], abs=1e-12)


@pytest.mark.parametrize("seed", range(20))
def test_mean_longitudes_are_those_of_rebound_in_the_plane_they_are_counted_in(seed):
    simulation = random_system(seed)
    state, mass = state_and_mass(simulation)
    longitudes = np.empty(3)
    mean_longitudes(state, mass, np.eye(3), longitudes)
    turn = np.exp(1j * (longitudes - [o.l for o in simulation.orbits()]))
    assert np.abs(turn - 1.0).max() < 1e-11


def test_the_mean_longitude_of_a_retrograde_orbit_grows_at_its_mean_motion():
    simulation = rebound.Simulation()
    simulation.G = GM_SUN_AU3_D2
    simulation.add(m=1.0)
    simulation.add(m=0.0, a=1.0, e=0.3, inc=2.8, Omega=1.0, omega=0.4, M=0.1)
    state, mass = state_and_mass(simulation)
    before, after = np.empty(1), np.empty(1)
    mean_longitudes(state, mass, np.eye(3), before)
    simulation.integrator = "whfast"
    simulation.dt = simulation.particles[1].P / 40
    simulation.steps(4)
    mean_longitudes(state_and_mass(simulation)[0], mass, np.eye(3), after)
    assert np.angle(np.exp(1j * (after - before))) == pytest.approx(2 * np.pi / 10, abs=1e-11)


def test_the_energy_is_that_of_rebound():
    simulation = random_system(5)
    state, mass = state_and_mass(simulation)
    assert energy(state, mass, 0.0) == pytest.approx(simulation.energy(), rel=1e-13, abs=0)


def test_the_closest_point_of_a_straight_pass_lies_where_geometry_puts_it():
    r0, v = np.array([-1.0, 0.2, 0.0]), np.array([3.0, 0.0, 0.0])
    d2, share = closest_within(r0, v, r0 + 1.0 * v, v, 1.0)
    assert np.sqrt(d2) == pytest.approx(0.2, abs=1e-10)
    assert share == pytest.approx(1.0 / 3.0, abs=1e-7)  # a minimum is flat: half the digits


def test_control_the_ends_of_the_step_alone_miss_a_pass():
    r0, v = np.array([-1.0, 0.2, 0.0]), np.array([3.0, 0.0, 0.0])
    assert min(np.linalg.norm(r0), np.linalg.norm(r0 + v)) > 0.9


def passes(count: int) -> list[dict[str, float]]:
    """Single passes of two small planets, deep inside their mutual Hill radius at the closest."""
    rng = np.random.default_rng(1)
    return [{"e": float(rng.uniform(0.2, 0.4)), "M": float(rng.uniform(0, 6.28))} for _ in range(count)]


def test_closest_approaches_between_steps_are_found_within_a_hundredth_of_a_hill_radius():
    """A map at the step of the rule against IAS15, whose steps resolve every pass (hand-over switched off)."""
    worst = 0.0
    for k, inner in enumerate(passes(40)):
        planets = [
            {"m": 3e-7, "a": 1.0, "e": inner["e"], "M": inner["M"], "inc": 0.004},
            {"m": 3e-7, "a": 1.35, "e": 0.02, "M": 0.3 * k, "omega": 1.0},
        ]
        task = task_of(1.0, planets, 8 * 365.25)
        found = outcome_of(task, method="whfast", handover_hill=1e-9, indicator=False)
        true = outcome_of(task, method="ias15", indicator=False)
        if true.closest_hill > 8.0:
            continue
        worst = max(worst, abs(found.closest_au - true.closest_au) / (true.closest_au / true.closest_hill))
    assert 0.0 < worst < 0.05


def bent_pass(seed: int, bend: float) -> tuple[np.ndarray, np.ndarray]:
    """Both ends of a step of 1 d in which body 1 passes body 0; ``bend`` is how much its velocity changes, au/d."""
    rng = np.random.default_rng(seed)
    before, now = np.zeros((2, 6)), np.zeros((2, 6))
    before[1] = np.array([1.0, -0.5, 0.0, 0.0, 1.0, 0.0]) + rng.normal(0.0, 0.1, 6)
    now[1, 3:] = before[1, 3:] + rng.normal(0.0, bend, 3)
    now[1, :3] = before[1, :3] + 0.5 * (before[1, 3:] + now[1, 3:])
    return before, now


def nearest2_on_the_cubic(before: np.ndarray, now: np.ndarray) -> float:
    """The smallest of 1001 squared distances on the cubic of Hermite, from its definition."""
    s = np.linspace(0.0, 1.0, 1001)[:, None]
    start = (1 + 2 * s) * (1 - s) ** 2 * before[1, :3] + s * (1 - s) ** 2 * before[1, 3:]
    end = s**2 * (3 - 2 * s) * now[1, :3] + s**2 * (s - 1) * now[1, 3:]
    return float(np.min(np.sum((start + end) ** 2, axis=1)))


@pytest.mark.parametrize("bend", [0.01, 0.3, 3.0])
def test_a_pair_is_never_nearer_than_the_bound_that_spares_the_search(bend):
    for seed in range(500):
        before, now = bent_pass(seed, bend)
        assert _never_nearer(before, now, 0, 1, 1.0) <= nearest2_on_the_cubic(before, now)


def test_control_a_bound_that_is_half_as_large_again_would_be_wrong():
    both = [
        (_never_nearer(*bent_pass(k, 0.01), 0, 1, 1.0), nearest2_on_the_cubic(*bent_pass(k, 0.01))) for k in range(99)
    ]
    assert np.mean([1.5 * bound > nearest2 for bound, nearest2 in both]) > 0.9


def test_the_cubic_needs_velocities_and_a_straight_line_would_miss():
    """Control: on a curved path the chord between step ends is off by more than the cubic is."""
    angle0, angle1 = -0.12, 0.13
    r0, r1 = np.array([np.cos(angle0), np.sin(angle0), 0.0]), np.array([np.cos(angle1), np.sin(angle1), 0.0])
    v0, v1 = np.array([-np.sin(angle0), np.cos(angle0), 0.0]), np.array([-np.sin(angle1), np.cos(angle1), 0.0])
    centre = np.array([2.0, 0.0, 0.0])
    d2, _ = closest_within(r0 - centre, v0, r1 - centre, v1, angle1 - angle0)
    chord = 2.0 - (r0 + 0.5 * (r1 - r0))[0]
    assert abs(np.sqrt(d2) - 1.0) < 1e-4 < 1e-3 < abs(chord - 1.0)


def test_a_new_simulation_holds_the_very_numbers_it_was_given():
    rng = np.random.default_rng(3)
    state = rng.normal(size=(4, 6))
    simulation = new_simulation(np.array([1.0, 1e-3, 1e-4, 0.0]), state, state)
    assert np.array_equal(particles_view(simulation)[:, :6], state)
