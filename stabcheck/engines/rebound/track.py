"""Where a draw stands: all that the time loop changes, as arrays that can be copied, stored and compared exactly."""

import json
import struct
from collections.abc import Iterable
from dataclasses import dataclass, fields
from typing import Any

import numpy as np

from stabcheck.arrays import Array
from stabcheck.engines.rebound import kernels
from stabcheck.engines.rebound.setting import Setting
from stabcheck.errors import RunFileError

SCHEMA = 1
"""Raised whenever the layout of a checkpoint changes; another one is refused."""


@dataclass(slots=True)
class Track:
    """All that the time loop changes.

    Attributes
    ----------
    state : (body, 6) array
        Barycentric state at ``clock``.
    tangent : (body, 6) array, or empty
        Tangent vector of length one, if MEGNO is followed.
    clock, closest : arrays
        Laid out by the constants of ``kernels``.
    extremes : (planet, 4) array
        Least and largest 1/a, least and largest e².
    departure : (1,) array
        Time of the first departure, NaN before.
    worst : (3,) array
        Largest change of the energy at block ends since the stage began: relative, against the smallest orbital energy;
        and the energy with which the stage began.
    longitudes : (sample, planet) array
    ln_deltas, megnos : (sample,) array
        On the sample grid, NaN where not reached yet or not measured.
    """

    state: Array
    tangent: Array
    clock: Array
    closest: Array
    extremes: Array
    departure: Array
    worst: Array
    longitudes: Array
    ln_deltas: Array
    megnos: Array

    def copy(self) -> "Track":
        """Copy every array."""
        return Track(*(getattr(self, f.name).copy() for f in fields(self)))

    def time_d(self, setting: Setting, step_d: float) -> float:
        """Time since the start; ``step_d`` is the fixed step, or 1 for an adaptive method (its clock counts days)."""
        clock = self.clock
        return float(clock[kernels.INTERVAL] * setting.interval_d + clock[kernels.INSIDE] * step_d)


def first_track(setting: Setting, tangent: Array, next_step_d: float) -> Track:
    """Stand at the start of a draw."""
    planets = setting.mass.size - 1
    clock = np.zeros(kernels.CLOCK_SIZE)
    clock[kernels.NEXT_STEP] = next_step_d
    closest = np.full(kernels.CLOSEST_SIZE, np.nan)
    closest[kernels.RATIO2] = np.inf
    extremes = np.empty((planets, 4))
    extremes[:, :2] = (1.0 / setting.a_au)[:, None]
    extremes[:, 2:] = (setting.eccentricity**2)[:, None]
    samples = setting.intervals + 1
    track = Track(
        state=setting.state.copy(),
        tangent=tangent.copy(),
        clock=clock,
        closest=closest,
        extremes=extremes,
        departure=np.full(1, np.nan),
        worst=np.array([0.0, 0.0, setting.energy]),
        longitudes=np.full((samples, planets), np.nan),
        ln_deltas=np.full(samples, np.nan),
        megnos=np.full(samples, np.nan),
    )
    kernels.mean_longitudes(track.state, setting.mass, setting.basis, track.longitudes[0])
    return track


def tracks_as_bytes(head: dict[str, object], tracks: Iterable[Track]) -> bytes:
    """Pack a header of plain values and some tracks into bytes, exactly.

    Samples that were not reached yet are left out: most of an early checkpoint would be NaN.
    """
    shapes: list[list[list[int]]] = []
    parts: list[bytes] = []
    for track in tracks:
        reached = int(track.clock[kernels.INTERVAL]) + 1
        arrays = [_until(track, f.name, reached) for f in fields(Track)]
        shapes.append([list(array.shape) for array in arrays])
        parts += [np.ascontiguousarray(array, dtype="<f8").tobytes() for array in arrays]
    text = json.dumps({"schema": SCHEMA, "head": head, "shapes": shapes}).encode()
    return struct.pack("<I", len(text)) + text + b"".join(parts)


def _until(track: Track, name: str, reached: int) -> Array:
    array: Array = getattr(track, name)
    return array[:reached] if name in ("longitudes", "ln_deltas", "megnos") else array


def tracks_from_bytes(blob: bytes, samples: int) -> tuple[dict[str, Any], list[Track]]:
    """Undo ``tracks_as_bytes``.

    Raises
    ------
    RunFileError
        If the checkpoint has another layout.
    """
    (length,) = struct.unpack_from("<I", blob)
    content = json.loads(blob[4 : 4 + length])
    if content["schema"] != SCHEMA:
        raise RunFileError(
            f"a checkpoint has layout {content['schema']}, this version reads {SCHEMA}",
            why="it was written by another version of stabcheck",
            do="finish the run with the version that began it",
        )
    offset = 4 + length
    tracks = []
    for shapes in content["shapes"]:
        arrays = []
        for shape in shapes:
            count = int(np.prod(shape))
            arrays.append(np.frombuffer(blob, "<f8", count, offset).astype(np.float64).reshape(shape))
            offset += 8 * count
        tracks.append(_filled(Track(*arrays), samples))
    return content["head"], tracks


def _filled(track: Track, samples: int) -> Track:
    for name in ("longitudes", "ln_deltas", "megnos"):
        short: Array = getattr(track, name)
        full = np.full((samples, *short.shape[1:]), np.nan)
        full[: short.shape[0]] = short
        setattr(track, name, full)
    return track
