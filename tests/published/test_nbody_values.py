"""Known answers of N-body work, through the engine: each with its source, its tolerance's reason and a control.

"Recomputed" means: by an independent IAS15 or Wisdom-Holman run outside stabcheck, with the set-up stated beside it.
"""

import itertools
import math

import numpy as np
import pytest
import rebound
from engine_tasks import outcome_of, task_from_simulation, task_of

from stabcheck.constants import GM_SUN_AU3_D2
from stabcheck.outcome import Motion, Survival, Trust
from stabcheck.plan import Task

YEAR = 365.25
# IAU 2009 best estimates, Luzum et al. 2011, CeMDA 110, 293 (from memory): Sun/planet mass ratios
JUPITER, SATURN = 1 / 1047.348644, 1 / 3497.9018
# J2000 mean elements, Standish & Williams (from memory): a, e, i, node, varpi, lambda in au and degrees
ELEMENTS = {
    "jupiter": (5.20288700, 0.04838624, 1.30439695, 100.47390909, 14.72847983, 34.39644051),
    "saturn": (9.53667594, 0.05386179, 2.48599187, 113.66242448, 92.59887831, 49.95424423),
}


def sun_jupiter_saturn(span_yr: float) -> Task:
    planets = []
    for name, mass in (("jupiter", JUPITER), ("saturn", SATURN)):
        a, e, i, node, varpi, longitude = ELEMENTS[name]
        angles = {"inc": i, "Omega": node, "omega": varpi - node, "M": longitude - varpi}
        planets.append({"m": mass, "a": a, "e": e} | {k: math.radians(v) for k, v in angles.items()})
    return task_of(1.0, planets, span_yr * YEAR)


def test_jupiter_and_saturn_have_a_megno_of_two():
    """<Y> = 2.004 after 1e5 yr (recomputed, Wisdom-Holman, P_J/40); here 2e4 yr, and 0.05 for the shorter run."""
    found = outcome_of(sun_jupiter_saturn(20_000.0))
    assert found.megno == pytest.approx(2.0, abs=0.05)
    assert found.survival is Survival.SURVIVED
    assert found.motion is Motion.UNSETTLED  # a twentieth of the slowest secular cycle proves nothing


def test_control_with_thirty_times_the_mass_the_pair_is_not_regular():
    task = sun_jupiter_saturn(20_000.0)
    heavier = task.mass_msun * np.array([1.0, 30.0, 30.0])
    fields = {name: getattr(task, name) for name in task.__slots__} | {"mass_msun": heavier}
    heavy = outcome_of(Task(**fields))
    assert heavy.survival is not Survival.SURVIVED or heavy.megno > 2.1


def test_halving_the_step_cuts_the_energy_error_fourfold():
    """Sun-Jupiter-Saturn, second-order map without corrector: ratios 4.01 to 4.02 (recomputed, 3000 yr)."""
    task = sun_jupiter_saturn(3000.0)
    errors = [_largest_energy_error(task, steps) for steps in (40, 80, 160)]
    for coarse, fine in itertools.pairwise(errors):
        assert 3.7 < coarse / fine < 4.3


def _largest_energy_error(task: Task, steps_per_orbit: int) -> float:
    """Block ends alone sample the energy too rarely for an order: take REBOUND's own map at the engine's set-up."""
    simulation = rebound.Simulation()
    simulation.G = GM_SUN_AU3_D2
    for m, x, v in zip(task.mass_msun, task.position_au, task.velocity_au_d, strict=True):
        simulation.add(m=m, x=x[0], y=x[1], z=x[2], vx=v[0], vy=v[1], vz=v[2])
    simulation.integrator = "whfast"
    simulation.dt = simulation.particles[1].P / steps_per_orbit
    start, worst = simulation.energy(), 0.0
    while simulation.t < 300 * YEAR:
        simulation.steps(1)
        worst = max(worst, abs(simulation.energy() / start - 1.0))
    return worst


def test_the_pythagorean_problem_ends_as_published():
    """Burrau 1913; Szebehely & Peters 1967, AJ 72, 876: 3, 4, 5 at rest; 3 escapes, 4 and 5 stay as a binary.

    Closest approach near t = 15.83 (from memory). Energy -769/60 closes.
    """
    task = _pythagorean(70.0)
    found = outcome_of(task, method="ias15", indicator=False, ejection_distance_au=12.0)
    assert found.survival is Survival.BROKEN
    assert task.mass_msun[found.bodies[0]] == 3.0
    assert found.energy_error < 1e-8
    assert found.trust is Trust.OK


def _pythagorean(time_units: float) -> Task:
    """Masses as given with the heaviest first, as the star; lengths in au, so a unit of time is 1/sqrt(GM) days."""
    unit_d = 1.0 / math.sqrt(GM_SUN_AU3_D2)
    simulation = rebound.Simulation()
    simulation.G = GM_SUN_AU3_D2
    for mass, x, y in ((5.0, 1.0, -1.0), (4.0, -2.0, -1.0), (3.0, 1.0, 3.0)):
        simulation.add(m=mass, x=x, y=y)
    return task_from_simulation(simulation, time_units * unit_d)


def test_control_a_map_asked_for_by_name_gives_the_pythagorean_problem_up():
    """Its steps cannot resolve the passages: what it says alone would be wrong, so it must restart and hand over."""
    found = outcome_of(_pythagorean(70.0), method="whfast", indicator=False, ejection_distance_au=12.0)
    assert found.restarts > 0 or found.handover_why
    assert found.method == "ias15" or found.survival is Survival.UNKNOWN


def near_l4(mass_share: float, orbits: float, displaced: float = 1e-6) -> Task:
    """A massless body displaced from L4 of two bodies one au apart."""
    simulation = rebound.Simulation()
    simulation.G = GM_SUN_AU3_D2
    simulation.add(m=1.0 - mass_share)
    simulation.add(m=mass_share, a=1.0)
    simulation.move_to_com()
    n = math.sqrt(GM_SUN_AU3_D2)
    x, y = 0.5 - mass_share + displaced, math.sqrt(3.0) / 2.0
    simulation.add(m=0.0, x=x, y=y, vx=-n * y, vy=n * x)
    return task_from_simulation(simulation, orbits * 2 * math.pi / n)


# Gascheau 1843, Routh 1875: L4 is stable below mu = (1 - sqrt(69)/9)/2 = 0.038520896
@pytest.mark.parametrize(("share", "motion"), [(0.01, Motion.REGULAR), (0.030, Motion.REGULAR), (0.05, Motion.CHAOTIC)])
def test_l4_is_regular_below_the_limit_of_gascheau_and_not_above(share, motion):
    found = outcome_of(near_l4(share, 600.0), method="ias15")
    assert found.motion is motion or (motion is Motion.CHAOTIC and found.survival is Survival.BROKEN)


def test_the_growth_at_l4_above_the_limit_is_the_linear_one():
    """mu = 0.05: growth 0.181985690 per unit of time (from the linear theory); 0.1815 fitted (recomputed)."""
    found = outcome_of(near_l4(0.05, 16.0, 1e-12), method="ias15")
    assert found.megno > 5.0
    lyapunov_units = found.lyapunov_time_d * math.sqrt(GM_SUN_AU3_D2)
    assert 1.0 / lyapunov_units == pytest.approx(0.182, abs=0.02)  # half of sixteen orbits, an oscillating growth


def gladman_pair(times_limit: float, number: int) -> Task:
    """Masses of 1e-5 on circles at a multiple of the exact Hill limit 0.06735991591 (Gladman 1993; recomputed)."""
    phases = np.random.default_rng(1000 + number).uniform(0, 2 * math.pi, 2)
    axis = 1.0 + 0.0673599159113 * times_limit
    planets = [{"m": 1e-5, "a": 1.0, "M": phases[0]}, {"m": 1e-5, "a": axis, "M": phases[1]}]
    return task_of(1.0, planets, 3000.0 * YEAR, number=number)


def test_pairs_beyond_the_hill_limit_never_come_within_a_hill_radius():
    """Gladman 1993, Icarus 106, 247: the zero-velocity surface is closed. 0 of 20 at 1.02 and 1.3 (recomputed)."""
    found = [outcome_of(gladman_pair(x, k), indicator=False).closest_hill for x in (1.05, 1.3) for k in range(4)]
    assert min(found) > 1.0


def test_control_pairs_inside_the_limit_do():
    """20 of 20 at 0.8 (recomputed, 1e4 orbits); here 3000 orbits and a stop at one Hill radius, so at least half."""
    stop = 1.08 * (2e-5 / 3.0) ** (1 / 3)
    found = [outcome_of(gladman_pair(0.8, k), indicator=False, stop_approach_au=stop).survival for k in range(6)]
    assert sum(survival is Survival.BROKEN for survival in found) >= 3


def overlap_pair(separation: float, number: int) -> Task:
    phases = np.random.default_rng(number).uniform(0, 2 * math.pi, 2)
    planets = [{"m": 1e-6, "a": 1.0, "M": phases[0]}, {"m": 1e-6, "a": 1.0 + separation, "M": phases[1]}]
    return task_of(1.0, planets, 5000.0 * YEAR, number=number)


def test_first_order_resonances_overlap_where_theory_says():
    """Two planets of 1e-6 on circles overlap below 0.03570 (Wisdom 1980; Deck et al. 2013; Petit et al. 2017).

    12 of 12 chaotic at 0.0325, Hill stable and chaotic; 0 of 12 at 0.046 (recomputed, 2e4 orbits). Here 5000 orbits,
    five each: at most one may differ.
    """
    inside = [outcome_of(overlap_pair(0.0325, k)).motion for k in range(5)]
    outside = [outcome_of(overlap_pair(0.046, k)).motion for k in range(5)]
    assert sum(motion is Motion.CHAOTIC for motion in inside) >= 4
    assert sum(motion is Motion.CHAOTIC for motion in outside) == 0


def test_kozai_lidov_reaches_the_eccentricity_of_the_quadrupole():
    """Lidov 1962; Kozai 1962: e_max² = 1 - 5/3 cos² i, 0.76376 at 60°; 0.76412 at 50 au from e = 0.01 (recomputed)."""
    planets = [
        {"m": 0.0, "a": 1.0, "e": 0.01, "inc": math.radians(60.0), "omega": 0.5},
        {"m": 1.0, "a": 25.0},
    ]
    found = outcome_of(task_of(1.0, planets, 1e4 * YEAR), indicator=False)
    assert found.e_most[0] == pytest.approx(0.764, abs=0.01)
    assert found.trust is Trust.OK
