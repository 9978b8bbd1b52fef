"""Physical ends, distance rules, departures, restarts and hand-over, each on a system made for it."""

import math

import numpy as np
import pytest
import rebound
from engine_tasks import outcome_of, task_from_simulation, task_of

from stabcheck.constants import GM_SUN_AU3_D2, JUPITER_MSUN, JUPITER_RADIUS_AU, SUN_RADIUS_AU
from stabcheck.outcome import Ending, Motion, Survival, Trust

YEAR = 365.25


def head_on(miss_au: float, radius_au: float) -> object:
    """Two small planets on the same circle, the second the other way round: they meet once within the span."""
    planets = [{"m": 1e-6, "a": 1.0, "e": 0.0, "M": 0.0}, {"m": 1e-6, "a": 1.0, "e": 0.0, "M": 0.3, "inc": 0.0}]
    task = task_of(1.0, planets, 0.3 * YEAR, radii_au=[0.004, radius_au, radius_au])
    velocity = task.velocity_au_d.copy()
    position = task.position_au.copy()
    velocity[2] = -velocity[2]
    position[2, 2] += miss_au
    fields = {name: getattr(task, name) for name in task.__slots__}
    return type(task)(**fields | {"velocity_au_d": velocity, "position_au": position})


def test_two_planets_that_meet_head_on_collide_at_half_their_distance():
    found = outcome_of(head_on(0.0, 1e-3), indicator=False)
    assert (found.survival, found.ending, found.bodies) == (Survival.BROKEN, Ending.COLLIDED, (1, 2))
    meeting = 0.15 / (2 * math.pi) * YEAR
    assert found.time_d == pytest.approx(meeting, abs=0.01 * YEAR)  # a step of IAS15 is 1/40 of an orbit


def test_control_planets_that_are_points_pass_each_other():
    found = outcome_of(head_on(2e-3, 0.0), indicator=False)
    assert found.survival is Survival.SURVIVED
    assert 0.0 < found.closest_au < 3e-3


def test_a_miss_by_more_than_both_radii_is_not_a_collision():
    assert outcome_of(head_on(2.5e-3, 1e-3), indicator=False).ending is not Ending.COLLIDED


def test_a_planet_whose_periastron_is_inside_the_star_hits_it():
    planets = [{"m": 1e-6, "a": 0.5, "e": 0.995, "M": 3.0}]
    found = outcome_of(task_of(1.0, planets, 3 * YEAR, radii_au=[SUN_RADIUS_AU, 4e-5]), indicator=False)
    assert (found.ending, found.bodies) == (Ending.HIT_STAR, (1,))
    assert found.time_d < 0.6 * 0.5**1.5 * YEAR


def test_control_a_periastron_just_outside_the_star_survives():
    planets = [{"m": 1e-6, "a": 0.5, "e": 0.985, "M": 3.0}]
    assert outcome_of(task_of(1.0, planets, YEAR, radii_au=[SUN_RADIUS_AU, 4e-5])).survival is Survival.SURVIVED


def test_a_planet_on_a_hyperbola_is_ejected_by_energy_and_distance():
    simulation = rebound.Simulation()
    simulation.G = GM_SUN_AU3_D2
    simulation.add(m=1.0)
    simulation.add(m=JUPITER_MSUN, a=1.0)
    simulation.add(m=1e-5, a=-2.0, e=2.0, f=1.0)
    simulation.move_to_com()
    found = outcome_of(task_from_simulation(simulation, 3000 * YEAR), ejection_distance_au=50.0)
    assert (found.survival, found.ending, found.bodies) == (Survival.BROKEN, Ending.EJECTED, (2,))


def test_a_bound_planet_beyond_the_ejection_distance_is_not_ejected():
    planets = [{"m": 1e-5, "a": 1.0}, {"m": 1e-5, "a": 60.0, "e": 0.5, "M": 0.1}]
    found = outcome_of(task_of(1.0, planets, 100 * YEAR), ejection_distance_au=20.0, indicator=False)
    assert found.survival is Survival.SURVIVED


def test_a_distance_rule_stops_a_draw_and_is_no_physical_end():
    planets = [{"m": 1e-5, "a": 1.0}, {"m": 1e-5, "a": 60.0, "e": 0.5, "M": 0.1}]
    found = outcome_of(task_of(1.0, planets, 500 * YEAR), stop_distance_au=45.0, indicator=False)
    assert (found.survival, found.ending, found.bodies) == (Survival.BROKEN, Ending.DISTANCE_RULE, (2,))


def test_an_approach_rule_stops_a_draw():
    found = outcome_of(head_on(2e-3, 0.0), indicator=False, stop_approach_au=0.01)
    assert found.ending is Ending.DISTANCE_RULE
    assert found.closest_au <= 0.01


def tight_giants(ratio: float = 1.25, seed: int = 0) -> object:
    planets = [
        {"m": 2 * JUPITER_MSUN, "a": 1.0, "e": 0.05, "M": 1.0 + seed},
        {"m": JUPITER_MSUN, "a": ratio, "e": 0.05, "M": 3.0},
    ]
    return task_of(1.0, planets, 3000 * YEAR, radii_au=[SUN_RADIUS_AU, JUPITER_RADIUS_AU, JUPITER_RADIUS_AU])


def test_giants_inside_three_hill_radii_are_handed_to_ias15_and_break():
    found = outcome_of(tight_giants())
    assert (found.survival, found.method, found.handover_why) == (Survival.BROKEN, "ias15", "close pair")
    assert found.handover_time_d == 0.0
    assert found.trust is Trust.OK and found.energy_error < 1e-10


@pytest.mark.parametrize("seed", range(4))
def test_what_becomes_of_a_draw_does_not_depend_on_where_it_is_handed_over(seed):
    task = tight_giants(1.32, seed)
    found = {outcome_of(task, handover_hill=hill, indicator=False).survival for hill in (3.0, 4.0, 6.0)}
    assert found == {outcome_of(task, method="ias15", indicator=False).survival}


def test_a_draw_handed_over_later_goes_on_from_a_stored_state_an_outer_orbit_before():
    planets = [
        {"m": 3e-5, "a": 1.0, "e": 0.02, "M": 1.0},
        {"m": 3e-5, "a": 1.13, "e": 0.02, "M": 4.0},
        {"m": 3e-5, "a": 1.28, "e": 0.02, "M": 2.0},
    ]
    found = outcome_of(task_of(1.0, planets, 30_000 * YEAR), seed=3)
    assert found.handover_why == "close pair"
    assert found.handover_time_d > 0.0
    triggered = float(found.history.split(" on day ")[1].split(":")[0])
    assert triggered - found.handover_time_d >= 1.28**1.5 * YEAR
    assert found.motion is not Motion.REGULAR


def test_an_orbit_that_outgrows_its_step_makes_the_draw_begin_again():
    """Kozai-Lidov: a companion star at 60 degrees drives e from 0.01 to 0.76; the first step is too coarse then."""
    planets = [
        {"m": 1e-6, "a": 1.0, "e": 0.01, "inc": math.radians(60.0), "omega": 0.5},
        {"m": 1.0, "a": 20.0},
    ]
    found = outcome_of(task_of(1.0, planets, 6000 * YEAR), indicator=False)
    assert found.restarts >= 1 and found.survival is Survival.SURVIVED and found.trust is Trust.OK
    assert "outgrown" in found.history
    assert found.method == "ias15" or found.fewest_steps_per_periastron >= 16.0
    assert found.e_most[0] == pytest.approx(0.764, abs=0.02)  # sqrt(1 - 5/3 cos² i), quadrupole, test particle


def test_control_at_thirty_degrees_the_eccentricity_stays_small():
    planets = [
        {"m": 1e-6, "a": 1.0, "e": 0.01, "inc": math.radians(30.0), "omega": 0.5},
        {"m": 1.0, "a": 20.0},
    ]
    found = outcome_of(task_of(1.0, planets, 6000 * YEAR), indicator=False)
    assert found.e_most[0] < 0.05 and found.restarts == 0


def test_a_first_departure_is_noted_and_makes_a_survivor_rearranged():
    planets = [{"m": 1e-4, "a": 1.0, "M": 1.0}, {"m": 1e-7, "a": 1.13, "M": 2.0}]
    task = task_of(1.0, planets, 3000 * YEAR)
    strict = outcome_of(task, rearranged_share=0.005)
    lax = outcome_of(task, rearranged_share=5.0)
    assert strict.rearranged and 0.0 < strict.departure_time_d < strict.span_d
    assert lax.survival is Survival.SURVIVED and not lax.rearranged


def test_a_trojan_pair_lives_without_being_called_rearranged_or_close():
    """Equal masses 60 degrees apart are stable below the limit of Gascheau (1843): (m1 + m2 + m1 m2)/(sum)² < 1/27."""
    planets = [{"m": 1e-4, "a": 1.0, "M": 0.0}, {"m": 1e-4, "a": 1.0, "M": math.radians(63.0)}]
    found = outcome_of(task_of(1.0, planets, 500 * YEAR))
    assert (found.survival, found.rearranged, found.handover_why) == (Survival.SURVIVED, False, "")
    assert found.motion is Motion.REGULAR


@pytest.mark.parametrize(("years", "motion"), [(4_000, Motion.UNSETTLED), (45_000, Motion.REGULAR)])
def test_a_calm_draw_is_regular_only_after_several_cycles_of_its_slowest_secular_mode(years, motion):
    """Laplace-Lagrange theory puts the slow mode of this pair at 12,939 yr."""
    planets = [{"m": 2e-3, "a": 1.0, "e": 0.02, "M": 1.0}, {"m": 2e-3, "a": 2.2, "e": 0.02, "M": 2.0}]
    found = outcome_of(task_of(1.0, planets, years * YEAR))
    assert found.megno == pytest.approx(2.0, abs=0.1)
    assert found.motion is motion


def test_a_retrograde_neighbour_is_followed_like_any_other():
    planets = [
        {"m": 1e-4, "a": 1.0, "e": 0.05, "M": 1.0},
        {"m": 1e-4, "a": 1.3, "e": 0.05, "M": 2.0, "inc": math.pi},
    ]
    found = outcome_of(task_of(1.0, planets, 2000 * YEAR))
    assert found.survival is Survival.SURVIVED and found.motion is not Motion.CHAOTIC
    assert found.megno == pytest.approx(2.0, abs=0.1)


def test_a_spent_budget_is_unknown_not_survived():
    planets = [{"m": 1e-6, "a": 1.0}, {"m": 1e-6, "a": 2.0}]
    found = outcome_of(task_of(1.0, planets, 1e5 * YEAR), step_budget=100_000)
    assert (found.survival, found.trust) == (Survival.UNKNOWN, Trust.BUDGET)
    assert 0.0 < found.time_d < found.span_d


def test_nearly_coincident_planets_end_without_a_hang():
    planets = [{"m": 1e-4, "a": 1.0, "M": 1.0}, {"m": 1e-4, "a": 1.0, "M": 1.0 + 1e-9}]
    found = outcome_of(task_of(1.0, planets, 100 * YEAR), evaluation_budget=200_000)
    assert found.survival in (Survival.UNKNOWN, Survival.BROKEN)


def test_the_extremes_of_a_lone_planet_are_its_orbit():
    found = outcome_of(task_of(1.0, [{"m": 1e-3, "a": 1.0, "e": 0.3}], 100 * YEAR))
    assert found.e_most[0] == pytest.approx(0.3, abs=1e-9) and found.a_most_au[0] == pytest.approx(1.0, abs=1e-9)
    assert math.isnan(found.closest_hill)
    assert np.all(np.isfinite(found.drift))


@pytest.mark.parametrize("seed", range(3))
def test_trace_meets_the_collisions_that_ias15_meets(seed):
    """Fat planets on crossing orbits: what TRACE resolves inside its steps must not pass unseen."""
    planets = [
        {"m": 3e-5, "a": 0.05, "e": 0.1, "M": 1.0 + seed},
        {"m": 3e-5, "a": 0.056, "e": 0.1, "M": 3.0, "omega": 2.0},
    ]
    task = task_of(1.0, planets, 100 * YEAR, radii_au=[SUN_RADIUS_AU, 4e-4, 4e-4])
    found = {method: outcome_of(task, method=method, indicator=False) for method in ("trace", "ias15")}
    assert {one.ending for one in found.values()} == {Ending.COLLIDED}
    assert found["trace"].bodies == (1, 2) and found["trace"].method == "trace"


def test_control_trace_lets_points_pass():
    planets = [{"m": 3e-5, "a": 0.05, "e": 0.1, "M": 1.0}, {"m": 3e-5, "a": 0.056, "e": 0.1, "M": 3.0, "omega": 2.0}]
    found = outcome_of(task_of(1.0, planets, 3 * YEAR), method="trace", indicator=False)
    assert found.ending is not Ending.COLLIDED
