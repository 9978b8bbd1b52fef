"""The one place that knows REBOUND's memory: addresses, offsets, and how a simulation is made from plain arrays.

A look at every step costs 9 µs from Python and tens of nanoseconds from compiled code, so the stepper in ``kernels``
calls REBOUND's own ``reb_simulation_steps`` through its address and reads the particles where they lie. That is only
right for the memory layout it was written for: ``check_layout`` compares the layout with REBOUND's own view of it, and
REBOUND is pinned exactly.
"""

import ctypes
from typing import Any

import numpy as np
import rebound

from stabcheck.arrays import Array
from stabcheck.constants import GM_SUN_AU3_D2
from stabcheck.errors import PlatformError

REBOUND_VERSION = "5.2.2"
"""The version whose memory layout the kernels read."""

DOUBLE = 8
PARTICLE_DOUBLES = ctypes.sizeof(rebound.Particle) // DOUBLE
POSITION = rebound.Particle.x.offset // DOUBLE
ACCELERATION = rebound.Particle.ax.offset // DOUBLE
MASS = rebound.Particle.m.offset // DOUBLE
RADIUS = rebound.Particle.r.offset // DOUBLE

TIME_WORD = rebound.Simulation.t.offset // DOUBLE
STEP_WORD = rebound.Simulation.dt.offset // DOUBLE
LAST_STEP_WORD = rebound.Simulation.dt_last_done.offset // DOUBLE
BODIES_WORD = rebound.Simulation.N.offset // DOUBLE
PARTICLES_WORD = rebound.Simulation._particles.offset // DOUBLE
VARIATIONS_COUNT_WORD = rebound.Simulation.N_var.offset // DOUBLE
VARIATIONS_WORD = rebound.Simulation._particles_var.offset // DOUBLE

COLLISION_STATUS = 7
"""What ``reb_simulation_steps`` returns when a collision halted it."""

STEPS_ADDRESS: int = ctypes.cast(rebound.clibrebound.reb_simulation_steps, ctypes.c_void_p).value or 0


def check_layout() -> None:
    """Compare the memory layout that the kernels assume with what REBOUND itself reads.

    Raises
    ------
    PlatformError
        If the version or any field is not where the kernels look for it.
    """
    if rebound.__version__ != REBOUND_VERSION:
        raise PlatformError(
            f"REBOUND {rebound.__version__} is installed",
            where="engine rebound",
            why=f"the compiled stepper reads the memory layout of version {REBOUND_VERSION}",
            do=f"install rebound=={REBOUND_VERSION}",
        )
    state = np.arange(1.0, 13.0).reshape(2, 6)
    simulation = new_simulation(np.array([1.0, 0.5]), state, np.array([]))
    view = particles_view(simulation)
    same = np.array_equal(view[:, POSITION : POSITION + 6], state) and np.array_equal(view[:, MASS], [1.0, 0.5])
    if not same or ctypes.sizeof(rebound.Particle) != PARTICLE_DOUBLES * DOUBLE:
        raise PlatformError(
            "REBOUND's particles do not lie in memory as expected",
            where="engine rebound",
            why="the library was built with another layout",
            do=f"install the wheel of rebound=={REBOUND_VERSION}",
        )


def new_simulation(mass_msun: Array, state: Array, tangent: Array) -> Any:
    """Make a fresh simulation from plain arrays, in au, day and solar mass.

    Parameters
    ----------
    mass_msun : (body,) array
    state : (body, 6) array
        Barycentric position (au) and velocity (au/d).
    tangent : (body, 6) array, or empty
        Tangent vector; empty for none.

    Returns
    -------
    rebound.Simulation
        Without an integrator chosen yet, at t = 0.
    """
    simulation = rebound.Simulation()
    simulation.G = GM_SUN_AU3_D2
    for mass, (x, y, z, vx, vy, vz) in zip(mass_msun.tolist(), state.tolist(), strict=True):
        simulation.add(m=mass, x=x, y=y, z=z, vx=vx, vy=vy, vz=vz)
    if tangent.size:
        simulation.add_variation()
        variations_view(simulation)[:, POSITION : POSITION + 6] = tangent
    return simulation


def address_of(simulation: Any) -> int:
    """Give the address of a simulation for the compiled stepper; the simulation must be kept alive meanwhile."""
    return ctypes.addressof(simulation)


def particles_view(simulation: Any) -> Array:
    """View the particles as a (body, doubles per particle) array, without a copy."""
    return _view(simulation._particles, simulation.N)


def variations_view(simulation: Any) -> Array:
    """View the variational particles as a (body, doubles per particle) array, without a copy."""
    return _view(simulation._particles_var, simulation.N_var)


def _view(pointer: Any, count: int) -> Array:
    address = ctypes.cast(pointer, ctypes.c_void_p).value
    if address is None:
        return np.empty((0, PARTICLE_DOUBLES))
    buffer: Any = (ctypes.c_double * (PARTICLE_DOUBLES * count)).from_address(address)
    return np.frombuffer(buffer, dtype=np.float64).reshape(count, PARTICLE_DOUBLES)
