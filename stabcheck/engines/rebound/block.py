"""Carry a draw over one block of steps: a fresh simulation from plain arrays, the compiled loop, plain arrays back.

A block depends on nothing but the arrays it starts from. So a draw that goes on from a stored block start takes the
same steps bit for bit, whichever integrator, and no hidden state of an integrator has to be stored: IAS15 loses its
predictor at a block's start, which costs a few iterations in two thousand steps.
"""

import math
import warnings
from dataclasses import dataclass
from typing import Any

import numpy as np
import rebound

from stabcheck.arrays import Array
from stabcheck.engines.rebound import kernels
from stabcheck.engines.rebound.library import (
    POSITION,
    RADIUS,
    STEPS_ADDRESS,
    address_of,
    new_simulation,
    particles_view,
    variations_view,
)
from stabcheck.engines.rebound.relativity import additional_force
from stabcheck.engines.rebound.setting import Setting
from stabcheck.engines.rebound.track import Track
from stabcheck.plan import Method, Plan

MAP_STEPS = 32_768
"""Steps of a fixed-step method in a block: some 50 ms, so that making the simulation costs under 1 %."""

ADAPTIVE_STEPS = 2_048
"""Steps of an adaptive method in a block: some 50 ms."""


@dataclass(frozen=True, slots=True)
class Stage:
    """How a stretch of a draw is integrated."""

    method: Method
    step_d: float
    """Fixed step; 1 for an adaptive method, whose clock counts days."""
    steps_per_interval: int
    """0 for an adaptive method."""
    watch_close_pairs: bool
    """Give the draw up when two planets come close or an orbit opens."""
    quiet_d: float = math.inf
    """An adaptive method that took over may give the draw back when no pair was close for this long."""

    @property
    def adaptive(self) -> bool:
        """Does the method choose its own steps?"""
        return self.method is Method.IAS15


@dataclass(frozen=True, slots=True)
class BlockEnd:
    """Why a block came back, with the bodies concerned and the warnings of the library."""

    code: int
    bodies: tuple[int, int]
    warnings: tuple[str, ...]


def limits_of(setting: Setting, stage: Stage, plan: Plan) -> Array:
    """Collect the numbers that the compiled loop compares with."""
    limits = np.zeros(kernels.LIMITS_SIZE)
    limits[kernels.STEP_D] = stage.step_d
    limits[kernels.STEPS_PER_INTERVAL] = stage.steps_per_interval
    limits[kernels.INTERVAL_D] = setting.interval_d
    limits[kernels.INTERVALS] = setting.intervals
    watched = stage.watch_close_pairs or math.isfinite(stage.quiet_d)
    limits[kernels.HANDOVER2] = plan.handover_hill**2 if watched else 0.0
    limits[kernels.GIVE_UP] = 1.0 if stage.watch_close_pairs else 0.0
    limits[kernels.QUIET_D] = stage.quiet_d
    limits[kernels.STOP_APPROACH] = np.nan_to_num(plan.stop_approach_au, nan=0.0)
    limits[kernels.STOP_DISTANCE2] = np.nan_to_num(plan.stop_distance_au, nan=np.inf) ** 2
    limits[kernels.EJECTION2] = setting.ejection_au**2
    limits[kernels.SPEED_WEIGHT] = (float(np.min(setting.period_d)) / (2.0 * np.pi)) ** 2
    return limits


def run_block(track: Track, setting: Setting, stage: Stage, plan: Plan) -> BlockEnd:
    """Carry ``track`` over one block, in place.

    Parameters
    ----------
    track : Track
        Changed in place.
    setting, stage, plan
        What does not change.

    Returns
    -------
    BlockEnd
    """
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        simulation = simulation_at(track, setting, stage)
        event = np.zeros(2)
        code = kernels.advance(
            STEPS_ADDRESS,
            address_of(simulation),
            stage.adaptive,
            ADAPTIVE_STEPS if stage.adaptive else MAP_STEPS,
            setting.mass,
            setting.pair_scale,
            setting.touch,
            setting.axis_limits,
            setting.ordered,
            limits_of(setting, stage, plan),
            setting.basis,
            track.state,
            track.clock,
            track.extremes,
            track.closest,
            track.departure,
            track.longitudes,
            track.ln_deltas,
            track.megnos,
            event,
        )
        if track.tangent.size:
            track.tangent = _shortened(variations_view(simulation)[:, POSITION : POSITION + 6])
        simulation.process_messages()
    _note_energy(track, setting)
    bodies = (int(event[0]), int(event[1]))
    return BlockEnd(int(code), bodies, tuple(dict.fromkeys(str(w.message) for w in caught)))


def simulation_at(track: Track, setting: Setting, stage: Stage) -> Any:
    """Make the simulation that stands at ``track``, with the method and the forces of the stage."""
    simulation = new_simulation(setting.mass, track.state, track.tangent)
    simulation.integrator = str(stage.method)
    simulation.dt = track.clock[kernels.NEXT_STEP] if stage.adaptive else stage.step_d
    if stage.method is Method.TRACE:
        # Encounters happen inside its steps, where nobody else can look: let it search for collisions itself. "line"
        # found all of 50 deep passes there, "direct" 38.
        particles_view(simulation)[:, RADIUS] = setting.radius
        simulation.collision = "line"
        simulation.collision_resolve = "halt"
    if setting.relativity_strength > 0.0:
        simulation._additional_forces = rebound.simulation.AFF(additional_force.address)
    return simulation


def _shortened(tangent: Array) -> Array:
    """The tangent vector, scaled to length one so that it can grow by e^600 within the next block."""
    largest = float(np.max(np.abs(tangent)))
    return np.ascontiguousarray(tangent / largest) if largest > 0.0 and np.isfinite(largest) else tangent.copy()


def _note_energy(track: Track, setting: Setting) -> None:
    began = track.worst[2]
    change = abs(kernels.energy(track.state, setting.mass, setting.relativity_strength) - began)
    error = np.array([change / abs(began), change / setting.orbit_energy, began])
    track.worst = np.maximum(track.worst, error)  # NaN stays NaN, and ends as "not finite"
