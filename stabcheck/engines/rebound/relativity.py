"""Relativity as a potential, in the motion and in its tangent, as a compiled callback of REBOUND.

The potential of Nobili & Roxburgh (1986), φ = −3 (GM)²/(c² r²) a unit of mass with r from the star, moves the
periastron at the rate of general relativity, 6πGM/(c² a (1−e²)) an orbit. It leaves out the change of the mean motion
by order GM/(c² a), which decides no stability. Each planet's reaction on the star is included, so momentum is
conserved. Additional forces of other kinds do not reach REBOUND's variational particles, and a MEGNO with them would be
meaningless; this callback adds the linearised force to the variations itself.

With r⃗ = x⃗ − x⃗_star, A = 6 (GM)²/c² and the tangent δr⃗:

    a⃗ = −A r⃗ / r⁴,     δa⃗ = −A (δr⃗ / r⁴ − 4 r⃗ (r⃗·δr⃗) / r⁶)

References
----------
Nobili, A. & Roxburgh, I. W. (1986), IAU Symposium 114, 105.
"""

from typing import Any

from numba import cfunc, njit

from stabcheck.constants import C_AU_D, GM_SUN_AU3_D2
from stabcheck.engines.rebound.library import (
    ACCELERATION,
    BODIES_WORD,
    MASS,
    PARTICLE_DOUBLES,
    PARTICLES_WORD,
    POSITION,
    VARIATIONS_COUNT_WORD,
    VARIATIONS_WORD,
)
from stabcheck.engines.rebound.memory import carray, doubles_at, words_at

STRENGTH = 6.0 * GM_SUN_AU3_D2**2 / C_AU_D**2
"""A of the module's text for a star of one solar mass, in au⁴/d²."""


@njit(error_model="numpy")
def pull(particles: Any) -> None:
    """Add the relativistic acceleration; changes the accelerations of ``particles`` (body, doubles), nothing else."""
    star_mass = particles[0, MASS]
    strength = STRENGTH * star_mass * star_mass
    for body in range(1, particles.shape[0]):
        r2 = 0.0
        for axis in range(3):
            d = particles[body, POSITION + axis] - particles[0, POSITION + axis]
            r2 += d * d
        scale = -strength / (r2 * r2)
        share = particles[body, MASS] / star_mass
        for axis in range(3):
            a = scale * (particles[body, POSITION + axis] - particles[0, POSITION + axis])
            particles[body, ACCELERATION + axis] += a
            particles[0, ACCELERATION + axis] -= share * a


@njit(error_model="numpy")
def pull_tangent(particles: Any, variations: Any) -> None:
    """Add the linearised acceleration; changes the accelerations of ``variations``, nothing else."""
    star_mass = particles[0, MASS]
    strength = STRENGTH * star_mass * star_mass
    for body in range(1, particles.shape[0]):
        r2 = 0.0
        along = 0.0
        for axis in range(3):
            d = particles[body, POSITION + axis] - particles[0, POSITION + axis]
            r2 += d * d
            along += d * (variations[body, POSITION + axis] - variations[0, POSITION + axis])
        scale = -strength / (r2 * r2)
        share = particles[body, MASS] / star_mass
        for axis in range(3):
            d = particles[body, POSITION + axis] - particles[0, POSITION + axis]
            dd = variations[body, POSITION + axis] - variations[0, POSITION + axis]
            a = scale * (dd - 4.0 * d * along / r2)
            variations[body, ACCELERATION + axis] += a
            variations[0, ACCELERATION + axis] -= share * a


@cfunc("void(int64)", cache=True, error_model="numpy")
def additional_force(simulation: int) -> None:
    """Act as REBOUND's additional force on particles and variations."""
    words = carray(words_at(simulation), 32)
    particles = carray(doubles_at(words[PARTICLES_WORD]), (words[BODIES_WORD], PARTICLE_DOUBLES))
    pull(particles)
    if words[VARIATIONS_COUNT_WORD] == words[BODIES_WORD]:
        pull_tangent(particles, carray(doubles_at(words[VARIATIONS_WORD]), (words[BODIES_WORD], PARTICLE_DOUBLES)))
