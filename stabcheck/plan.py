"""What an engine needs to know beyond the state of a draw. Frozen, checked when built, and part of a run's identity."""

import math
from dataclasses import dataclass, fields
from enum import StrEnum
from typing import Any

import numpy as np

from stabcheck.arrays import Array
from stabcheck.errors import PlanError


class Method(StrEnum):
    """Integration methods of the ``rebound`` engine."""

    AUTO = "auto"
    WHFAST = "whfast"
    TRACE = "trace"
    IAS15 = "ias15"


@dataclass(frozen=True, slots=True, kw_only=True)
class Plan:
    """How every draw of a run is followed.

    Raises
    ------
    PlanError
        If a number is not usable; NaN is refused too unless NaN has a meaning that is stated.
    """

    method: Method = Method.AUTO
    relativity: bool = False
    indicator: bool = True
    """Follow a tangent vector and measure MEGNO."""
    seed: int = 0
    """Seed of the tangent vectors; the draw's number does the rest."""
    steps_per_periastron: float = 25.0
    """First step: this many in the shortest effective period at periastron (Wisdom 2015; Hernandez et al. 2022)."""
    fewest_steps_per_periastron: float = 16.0
    """A step that has become coarser than this is outgrown and the draw starts again."""
    most_restarts: int = 2
    handover_hill: float = 3.0
    """A pair of planets nearer than this many momentary mutual Hill radii is handed to a method that resolves it."""
    ejection_axes: float = 30.0
    """An unbound planet further from the barycentre than this times the largest first axis is ejected ..."""
    ejection_distance_au: float = math.nan
    """... or than this, if given (NaN: not given)."""
    stop_approach_au: float = math.nan
    """Distance rule of the scenario: two planets nearer than this stop the draw (NaN: no such rule)."""
    stop_distance_au: float = math.nan
    """Distance rule of the scenario: a body further from the barycentre than this stops the draw (NaN: no rule)."""
    rearranged_share: float = 0.3
    samples: int = 2048
    """Intervals of the sample grid (a power of two); fewer when the span has too few steps."""
    energy_bound: float = 0.1
    """Largest relative energy error of a trusted map, in units of the largest planet-to-star mass ratio. The error of a
    map grows with the mass ratio; at the step of the rule it stays below 0.02 of it on known systems (measured), and
    most of that is the oscillation of a map that is not corrected, not an error that adds up."""
    trace_energy_bound: float = 1e-4
    """The same for TRACE, absolute: its coordinates leave 2e-5 at periastron whatever the mass (measured)."""
    adaptive_energy_bound: float = 1e-8
    """Largest relative energy error of a trusted adaptive method; IAS15 keeps 1e-12 unless something went wrong."""
    step_budget: int = 20_000_000_000
    evaluation_budget: int = 2_000_000_000
    checkpoint_every_s: float = 120.0
    """Wall-clock spacing of checkpoints; changes no result and is not part of the identity."""

    def __post_init__(self) -> None:
        if not isinstance(self.method, Method):
            raise PlanError(
                f"method is {self.method!r}",
                where="plan",
                why="it must be one of " + ", ".join(f"Method.{m.name}" for m in Method),
                do=f"write Method({self.method!r}) if that is one of their values",
            )
        positive = (
            "steps_per_periastron",
            "fewest_steps_per_periastron",
            "handover_hill",
            "ejection_axes",
            "rearranged_share",
            "samples",
            "energy_bound",
            "trace_energy_bound",
            "adaptive_energy_bound",
            "step_budget",
            "evaluation_budget",
            "checkpoint_every_s",
        )
        for name in positive:
            value = getattr(self, name)
            if not value > 0:  # this way round NaN is refused too
                raise PlanError(
                    f"{name} is {value!r}", where="plan", why="it must be positive", do="give a positive number"
                )
        if self.samples & (self.samples - 1):
            raise PlanError(
                f"samples is {self.samples}",
                where="plan",
                why="the sample grid is halved and windowed, so it must be a power of two",
                do="give 256, 512, 1024, ...",
            )

    def identity(self) -> dict[str, Any]:
        """Say what in this plan changes numbers, for the identity of a run.

        Returns
        -------
        dict of str to value
            Every field but the wall-clock ones.
        """
        return {
            f.name: (str(v) if isinstance(v := getattr(self, f.name), StrEnum) else v)
            for f in fields(self)
            if f.name != "checkpoint_every_s"
        }


@dataclass(frozen=True, slots=True, kw_only=True)
class Task:
    """One draw to be followed: its barycentric state, and where it stands if it was interrupted.

    Parameters
    ----------
    number : int
        Number of the draw.
    mass_msun, radius_au : (body,) array
        Body 0 is the star; a radius of 0 means a point that cannot be hit.
    position_au, velocity_au_d : (body, 3) array
        Barycentric. Bodies after the star are sorted by period; the last one may be a companion star.
    span_d : float
        How long to follow it.
    checkpoint : bytes
        Blob of the last ``Checkpoint`` of this draw, empty to start at the beginning.
    """

    number: int
    mass_msun: Array
    radius_au: Array
    position_au: Array
    velocity_au_d: Array
    span_d: float
    checkpoint: bytes = b""

    def as_bytes(self) -> bytes:
        """Flatten the state for the run file, native doubles in the order of the fields above."""
        parts = (self.mass_msun, self.radius_au, self.position_au.ravel(), self.velocity_au_d.ravel())
        return np.concatenate([*parts, [self.span_d]]).astype("<f8").tobytes()

    @classmethod
    def from_bytes(cls, number: int, flat: bytes, checkpoint: bytes = b"") -> "Task":
        """Undo ``as_bytes``.

        Raises
        ------
        PlanError
            If the length fits no number of bodies.
        """
        values = np.frombuffer(flat, dtype="<f8").astype(np.float64)
        bodies, rest = divmod(values.size - 1, 8)
        if rest or bodies < 2:
            raise PlanError(f"a stored state of draw {number} has {values.size} numbers", why="8 per body and the span")
        return cls(
            number=number,
            mass_msun=values[:bodies],
            radius_au=values[bodies : 2 * bodies],
            position_au=values[2 * bodies : 5 * bodies].reshape(bodies, 3),
            velocity_au_d=values[5 * bodies : 8 * bodies].reshape(bodies, 3),
            span_d=float(values[-1]),
            checkpoint=checkpoint,
        )
