"""What a draw came to, as a value: five axes, the numbers behind them, and the messages an engine sends."""

import math
from dataclasses import dataclass, field
from enum import StrEnum

import numpy as np

from stabcheck.arrays import Array


class Survival(StrEnum):
    """Did all planets stay?"""

    SURVIVED = "survived"
    BROKEN = "broken"
    UNKNOWN = "unknown"


class Ending(StrEnum):
    """How a draw that did not reach its span ended."""

    NONE = ""
    EJECTED = "ejected"
    HIT_STAR = "hit star"
    COLLIDED = "planets collided"
    DISTANCE_RULE = "distance rule"
    """Stopped by a distance that the scenario set: not a physical end, counted apart."""


class Motion(StrEnum):
    """What the indicator says of the motion."""

    REGULAR = "regular"
    CHAOTIC = "chaotic"
    UNSETTLED = "unsettled"


class Trust(StrEnum):
    """Can the numbers be believed? Anything but ``ok`` makes survival unknown."""

    OK = "ok"
    ENERGY = "energy"
    STEP_OUTGROWN = "step outgrown"
    SOLVER = "solver residual"
    NOT_FINITE = "not finite"
    BUDGET = "step budget spent"
    PROCESS_DIED = "process died on it"


@dataclass(frozen=True, slots=True, kw_only=True)
class Outcome:
    """What one draw came to.

    Planets are counted from 1 in the order of the ensemble's bodies (0 is the star); names are the reader's business.
    Times are in days from the start, NaN where a thing did not happen or was not measured.
    """

    number: int
    survival: Survival
    ending: Ending = Ending.NONE
    trust: Trust = Trust.OK
    motion: Motion = Motion.UNSETTLED
    rearranged: bool = False
    time_d: float
    """Time of the ending, or how far the draw was followed."""
    span_d: float
    bodies: tuple[int, ...] = ()
    """The bodies of the ending."""
    method: str
    """Integration method in use at the end."""
    step_d: float
    """Fixed step of the last map used; NaN if there was none."""
    energy_error: float = math.nan
    """Largest relative error of the total energy seen at block ends."""
    orbit_energy_error: float = math.nan
    """The same error against the smallest orbital energy among the planets at the start."""
    closest_hill: float = math.nan
    """Smallest distance of two planets in momentary mutual Hill radii."""
    closest_au: float = math.nan
    """The distance of that approach; another one can be smaller in au where the pair was nearer to the star."""
    closest_pair: tuple[int, int] = (0, 0)
    closest_time_d: float = math.nan
    departure_time_d: float = math.nan
    """First time an axis had moved by more than the stated share, or two planets had changed order."""
    a_least_au: Array = field(default_factory=lambda: np.empty(0))
    a_most_au: Array = field(default_factory=lambda: np.empty(0))
    e_most: Array = field(default_factory=lambda: np.empty(0))
    e_least: Array = field(default_factory=lambda: np.empty(0))
    fewest_steps_per_periastron: float = math.nan
    megno: float = math.nan
    """Time-averaged MEGNO at the end of its run; 2 for quasi-periodic motion."""
    megno_time_d: float = math.nan
    """How long MEGNO was followed (it closes at a hand-over if it has called the draw chaotic by then)."""
    megno_wander: float = math.nan
    """Largest minus smallest averaged MEGNO over the last half of its run."""
    lyapunov_time_d: float = math.nan
    """Only where the motion is chaotic."""
    drift: Array = field(default_factory=lambda: np.empty(0))
    """Relative change of each mean motion from the first half of the span to the second."""
    restarts: int = 0
    handovers: int = 0
    """How often a method that resolves encounters took over ..."""
    returns: int = 0
    """... and how often it gave the draw back to the map."""
    handover_time_d: float = math.nan
    """Time of the stored state from which a method that resolves encounters first went on."""
    handover_why: str = ""
    map_steps: int = 0
    adaptive_steps: int = 0
    history: str = ""
    """What each stage decided, in words, one clause a stage."""


@dataclass(frozen=True, slots=True)
class Finished:
    """A draw is done."""

    outcome: Outcome
    warnings: tuple[str, ...] = ()
    """Warnings of the libraries while it ran, each once."""


@dataclass(frozen=True, slots=True)
class Checkpoint:
    """A draw is under way; ``blob`` is all an engine needs to go on from here to the same bits."""

    number: int
    blob: bytes
    steps_done: float
    """Share of the span that is done, 0 to 1."""


@dataclass(frozen=True, slots=True)
class HandOver:
    """An engine gives a draw up to another one, from the state in ``blob``."""

    number: int
    blob: bytes
    why: str


Message = Finished | Checkpoint | HandOver
