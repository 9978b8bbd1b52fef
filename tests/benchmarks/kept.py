"""What the benchmarks share: pairs of measurements, and the record of a run as one line of JSON.

A number without its reference means nothing on another machine, so whatever is kept is a ratio to a reference that was
measured in the same run, the two of a pair right after one another: what else the machine does meets both alike.
"""

import json
import os
import platform
import statistics
import subprocess
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path
from typing import Any

import stabcheck

RECORDS = Path(__file__).parent / "records"
ROOT = Path(__file__).resolve().parents[2]


@dataclass(frozen=True, slots=True)
class Spread:
    """Median, smallest and largest of some values."""

    median: float
    least: float
    most: float

    @classmethod
    def of(cls, values: Sequence[float]) -> "Spread":
        """Take them of values."""
        return cls(statistics.median(values), min(values), max(values))

    def __str__(self) -> str:
        return f"{self.median:.3f} ({self.least:.3f} to {self.most:.3f})"

    def as_list(self) -> list[float]:
        """Give median, least, most with four digits after the point."""
        return [round(value, 4) for value in (self.median, self.least, self.most)]


def interleaved(pairs: int, *measures: Callable[[], float]) -> list[tuple[float, ...]]:
    """Measure each in turn, ``pairs`` times after one round that does not count; every other round backwards."""
    rounds = []
    for k in range(pairs + 1):
        order = range(len(measures)) if k % 2 else reversed(range(len(measures)))
        values = {which: measures[which]() for which in order}
        rounds.append(tuple(values[which] for which in range(len(measures))))
    return rounds[1:]


def ratio(rounds: Sequence[tuple[float, ...]], ours: int, reference: int) -> Spread:
    """Take the ratio of two columns pair by pair."""
    return Spread.of([values[ours] / values[reference] for values in rounds])


def keep(benchmark: str, results: Any) -> None:
    """Append what was measured, with what it was measured on, to the records."""
    RECORDS.mkdir(exist_ok=True)
    line = {"date": time.strftime("%Y-%m-%d"), **machine(), "results": results}
    with open(RECORDS / f"{benchmark}.jsonl", "a") as file:
        file.write(json.dumps(line, sort_keys=False) + "\n")
    print(f"kept in {(RECORDS / benchmark).relative_to(ROOT)}.jsonl")


def machine() -> dict[str, Any]:
    """Say what this is run on and with."""
    versions = {name: version(name) for name in ("rebound", "numpy", "numba")}
    return {
        "cpu": _cpu(),
        "cores": os.cpu_count(),
        "load": round(os.getloadavg()[0], 1),
        "versions": {"stabcheck": stabcheck.__version__, "python": platform.python_version(), **versions},
        "commit": _commit(),
    }


def _cpu() -> str:
    """The model as the kernel tells it, with family and numbers: the name alone can be too short to mean anything."""
    try:
        lines = Path("/proc/cpuinfo").read_text().splitlines()
    except OSError:  # not Linux
        return platform.processor() or platform.machine()
    told = dict(line.replace("\t", "").split(":", 1) for line in lines if ":" in line)
    name = told.get("model name", platform.machine()).strip()
    return f"{name}, family {told.get('cpu family', '?').strip()} model {told.get('model', '?').strip()}"


def _commit() -> str:
    """Short hash of the checkout, with + if something was changed since; empty where there is none."""
    try:
        asked = ["git", "-C", str(ROOT), "describe", "--always", "--dirty=+", "--exclude=*"]
        return subprocess.run(asked, capture_output=True, text=True, check=True).stdout.strip()
    except (OSError, subprocess.CalledProcessError):
        return ""
