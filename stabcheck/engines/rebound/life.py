"""A draw under way: where it stands, the stored states it can go back to, and what its stages decided."""

from dataclasses import asdict, dataclass, field
from typing import Any

import numpy as np

from stabcheck.arrays import Array
from stabcheck.engines.rebound import kernels
from stabcheck.engines.rebound.block import Stage
from stabcheck.engines.rebound.setting import Setting
from stabcheck.engines.rebound.track import Track, tracks_as_bytes, tracks_from_bytes
from stabcheck.plan import Method


@dataclass(slots=True)
class Story:
    """What happened to a draw up to its present stage; plain values that a checkpoint can hold as text."""

    restarts: int = 0
    handovers: int = 0
    returns: int = 0
    """How often IAS15 took over and how often it gave the draw back."""
    handover_time_d: float = float("nan")
    """Time of the stored state from which the first hand-over went on."""
    handover_why: str = ""
    energy_error: float = 0.0
    orbit_energy_error: float = 0.0
    """Largest energy errors of the stages before."""
    megno_until: int = -1
    """Sample at which MEGNO closed; -1 while it is followed."""
    map_steps: float = 0.0
    adaptive_steps: float = 0.0
    """Steps of attempts that were given up."""
    extremes: list[list[float]] = field(default_factory=list)
    """Extremes of the stages before, laid out as in ``Track``; empty if there was none."""
    history: list[str] = field(default_factory=list)
    warnings: list[str] = field(default_factory=list)


@dataclass(slots=True)
class Life:
    """Where a draw stands.

    Attributes
    ----------
    older, newer : Track
        Two stored states: ``older`` is at least one outer orbit before now whenever such a state exists.
    """

    stage: Stage
    track: Track
    older: Track
    newer: Track
    story: Story

    def time_d(self, setting: Setting) -> float:
        """Time since the start."""
        return self.track.time_d(setting, self.stage.step_d)

    def extremes(self) -> Array:
        """Extremes of each planet over all stages."""
        now = self.track.extremes
        return merged(np.array(self.story.extremes), now) if self.story.extremes else now


def merged(first: Array, second: Array) -> Array:
    """Extremes over two stretches."""
    out = np.maximum(first, second)
    for least in (kernels.INVERSE_A_LEAST, kernels.E2_LEAST):
        out[:, least] = np.minimum(first[:, least], second[:, least])
    return out


def stored(life: Life) -> bytes:
    """Pack a draw under way for a checkpoint."""
    stage = asdict(life.stage) | {"method": str(life.stage.method)}
    head: dict[str, object] = {"stage": stage, "story": asdict(life.story)}
    return tracks_as_bytes(head, (life.track, life.older, life.newer))


def restored(blob: bytes, setting: Setting) -> Life:
    """Undo ``stored``."""
    head: dict[str, Any]
    head, (track, older, newer) = tracks_from_bytes(blob, setting.intervals + 1)
    stage = Stage(**head["stage"] | {"method": Method(head["stage"]["method"])})
    return Life(stage, track, older, newer, Story(**head["story"]))
