"""Relativity as the engine applies it: the rate of its formula, a tangent that is its derivative, MEGNO."""

import math

import numpy as np
import pytest
import rebound
from engine_tasks import outcome_of, task_of

from stabcheck.constants import C_AU_D, GM_SUN_AU3_D2
from stabcheck.engines.rebound.library import POSITION, new_simulation, particles_view, variations_view
from stabcheck.engines.rebound.relativity import additional_force

STAR = 1.1
CLOSE_IN = {"m": 1e-5, "a": 0.05, "e": 0.2, "omega": 0.3, "M": 1.0}
OUTER = {"m": 3e-5, "a": 0.13, "e": 0.05, "M": 2.0, "omega": 2.0}


def simulation_of(planets: list[dict[str, float]], integrator: str, *, force: bool = True, shift: object = None):
    task = task_of(STAR, planets, 1.0)
    state = np.concatenate([task.position_au, task.velocity_au_d], axis=1)
    tangent = np.random.default_rng(1).normal(size=state.shape) * [1, 1, 1, 0.1, 0.1, 0.1]
    if shift is not None:
        state = state + shift * tangent
    simulation = new_simulation(task.mass_msun, state, np.array([]) if integrator == "trace" else tangent)
    simulation.integrator = integrator
    simulation.dt = simulation.particles[1].P / 200
    if force:
        simulation._additional_forces = rebound.simulation.AFF(additional_force.address)
    return simulation


def precession_rad(integrator: str, *, force: bool = True, days: float = 4000.0) -> float:
    simulation = simulation_of([CLOSE_IN], integrator, force=force)
    before = simulation.particles[1].pomega
    simulation.integrate(days, exact_finish_time=0)
    turned = simulation.particles[1].pomega - before
    return math.remainder(turned, 2 * math.pi) / simulation.t


@pytest.mark.parametrize("integrator", ["whfast", "ias15", "trace"])
def test_the_periastron_moves_at_the_rate_of_general_relativity(integrator):
    """6πGM/(c² a (1−e²)) an orbit; the osculating elements of this potential are modulated at 1e-4 of the rate here."""
    gm = GM_SUN_AU3_D2 * (STAR + CLOSE_IN["m"])
    period = 2 * math.pi * math.sqrt(CLOSE_IN["a"] ** 3 / gm)
    rate = 6 * math.pi * gm / (C_AU_D**2 * CLOSE_IN["a"] * (1 - CLOSE_IN["e"] ** 2)) / period
    # TRACE's democratic coordinates alone turn a periastron by about the planet's mass an orbit
    tolerance = 2e-3 if integrator != "trace" else 0.1
    assert precession_rad(integrator) == pytest.approx(rate, rel=tolerance, abs=0)


def test_control_without_the_force_nothing_moves():
    assert abs(precession_rad("ias15", force=False)) < 1e-12


@pytest.mark.parametrize("force", [True, False])
def test_the_tangent_is_the_derivative_of_the_motion(force):
    step, days = 1e-7, 30.0
    ends = []
    for shift in (step, -step):
        simulation = simulation_of([CLOSE_IN, OUTER], "ias15", force=force, shift=shift)
        simulation.integrate(days)
        ends.append(particles_view(simulation)[:, POSITION : POSITION + 6].copy())
    central = simulation_of([CLOSE_IN, OUTER], "ias15", force=force)
    central.integrate(days)
    tangent = variations_view(central)[:, POSITION : POSITION + 6]
    difference = (ends[0] - ends[1]) / (2 * step)
    # differences of doubles over 1e-7 keep eight digits
    assert np.abs(tangent - difference).max() < 1e-6 * np.abs(tangent).max()


def test_control_a_tangent_without_the_force_is_noticed():
    days = 30.0
    with_force, without = (simulation_of([CLOSE_IN, OUTER], "ias15", force=force) for force in (True, False))
    for simulation in (with_force, without):
        simulation.integrate(days)
    difference = variations_view(with_force) - variations_view(without)
    assert np.abs(difference).max() > 1e-5 * np.abs(variations_view(with_force)).max()


@pytest.mark.parametrize("method", ["whfast", "ias15"])
def test_megno_of_a_regular_pair_with_relativity_is_two(method):
    found = outcome_of(task_of(STAR, [CLOSE_IN, OUTER], 12_000.0), relativity=True, method=method)
    assert found.megno == pytest.approx(2.0, abs=0.05)  # 3,000 orbits: it converges as 1/t


def test_momentum_is_conserved_with_the_force():
    simulation = simulation_of([CLOSE_IN, OUTER], "ias15")
    simulation.integrate(100.0)
    view = particles_view(simulation)
    momentum = (view[:, 9:10] * view[:, 3:6]).sum(axis=0)
    assert np.abs(momentum).max() < 1e-17  # masses of 1e-5 times speeds of 0.1 au/d, to rounding


def test_the_energy_with_the_potential_is_kept():
    found = outcome_of(task_of(STAR, [CLOSE_IN, OUTER], 2000.0), relativity=True, method="ias15", indicator=False)
    assert found.energy_error < 1e-13
