"""What workers, their owner and the run file cost. Run: python throughput.py (ten minutes)

1. Two workers against two bare processes that follow half of the same draws each, at the same time, and store nothing.
   Both are held up until all processes are ready; the clock runs from there to the last result. Then the same with the
   start of all processes. Draws of about 0.1 s. Aim: at least 0.97 of the bare draws a second.
2. CPU time of the owner (drawing, building, handing out, storing; without imports) over that of its workers, for draws
   of about 0.1 s and of about 1 s. Aim: at most 0.02.
3. A screen in one process (drawing, building, runner, run file) against a bare loop over the same draws of about 1 s,
   in CPU time. Aim: at most 1.03.

Ratios of pairs that were measured right after one another; both sides of a pair meet the same other work.
"""

import json
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterable, Iterator, Sequence
from pathlib import Path
from typing import Any

import gated
from kept import Spread, interleaved, keep, ratio

from stabcheck import screen as screening
from stabcheck.batch.base import REBOUND, Pulse, Runner
from stabcheck.ensemble import source
from stabcheck.outcome import Finished, Message
from stabcheck.plan import Plan, Task
from stabcheck.scenario import Scenario

PAIRS = 7
WORKERS = 2
SHORT, LONG = 3_000, 30_000
"""Inner orbits that take about 0.1 s and 1 s on a machine of 2025."""

PLANET = """
[planets.{name}]
period = "{period:.6f} d"
eccentricity = "0.02"
omega_star = "uniform(0, 360) deg"
mean_longitude_star = "uniform(0, 360) deg"
mass = "3 Mearth"
radius = "1.5 Rearth"
"""
SYSTEM = """
title = "Four small planets with room between them: every draw takes the same time"
[star]
mass = "1 Msun"
radius = "1 Rsun"
[elements]
frame = "jacobi"
fit = "dynamical"
epoch = "2459000.0 BJD_TDB"
[plane]
inclination = "90 deg"
[draws]
seed = 1
[integration]
span = "{span} inner orbits"
"""


def scenario_of(orbits: int) -> Scenario:
    planets = "".join(PLANET.format(name=name, period=10.0 * 1.63**k) for k, name in enumerate("bcde"))
    return Scenario.from_text(SYSTEM.format(span=orbits) + planets)


def tasks_of(orbits: int, first: int, count: int) -> tuple[list[Task], Plan]:
    scenario = scenario_of(orbits)
    plan = screening.plan_of(scenario)
    rows = screening.rows_of(source(scenario), plan, first, count)
    return [Task.from_bytes(row.number, row.state) for row in rows], plan


class LetGo:
    """A runner that lets the gated engines go when all of them are ready, and notes when the last result came."""

    def __init__(self, inner: Runner) -> None:
        self._inner, self.count = inner, inner.count
        self.went_at = self.last_at = 0.0

    def run(self, tasks: Iterable[Task], plan: Plan) -> Iterator[Message | Pulse]:
        for event in self._inner.run(tasks, plan):
            if isinstance(event, Finished):
                self.last_at = time.monotonic()
            elif isinstance(event, Pulse) and event.working == self.count and not self.went_at:
                (gated.folder() / "go").touch()
                self.went_at = time.monotonic()
            yield event


def be_owner(orbits: int, draws: int) -> None:
    """Screen with workers, and tell what it took; runs as a process of its own."""
    made: list[LetGo] = []
    usual = screening._runner

    def noted(*arguments: Any) -> LetGo:
        made.append(LetGo(usual(*arguments)))
        return made[-1]

    screening._runner = noted  # type: ignore[assignment]
    began = time.process_time()
    run = screening.screen(
        scenario_of(orbits), draws=draws, run_file=gated.folder() / "it.run", workers=WORKERS, engine=gated.NAME
    )
    owner = time.process_time() - began
    if run.finished != draws:
        raise SystemExit(f"{run.as_text()}: nothing to measure")
    print(json.dumps({"went": made[0].went_at, "last": made[0].last_at, "owner": owner, "workers": gated.spent_s()}))


def be_bare(orbits: int, first: int, draws: int) -> None:
    """Follow draws in a plain loop; runs as a process of its own."""
    tasks, plan = tasks_of(orbits, first, draws)
    engine = gated.GatedEngine()
    engine.prepare()
    (gated.folder() / f"ready-{first}").touch()
    finished = sum(isinstance(message, Finished) for message in engine.follow(tasks, plan))
    print(json.dumps({"last": time.monotonic(), "finished": finished}))


def started(folder: str, *words: object) -> subprocess.Popen[str]:
    here = Path(__file__)
    environment = {**os.environ, gated.FOLDER: folder, **{f"{name}_NUM_THREADS": "1" for name in ("OMP", "OPENBLAS")}}
    command = [sys.executable, str(here), *map(str, words)]
    # In a session of its own, as the workers are: on a busy machine Linux shares the processors out by session.
    return subprocess.Popen(command, stdout=subprocess.PIPE, text=True, env=environment, start_new_session=True)


def told(process: subprocess.Popen[str]) -> dict[str, float]:
    text, _ = process.communicate()
    if process.returncode:
        raise SystemExit(f"a process of the benchmark ended with {process.returncode}")
    words: dict[str, float] = json.loads(text)
    return words


def with_workers(orbits: int, draws: int) -> dict[str, float]:
    with tempfile.TemporaryDirectory() as folder:
        began = time.monotonic()
        said = told(started(folder, "owner", orbits, draws))
    return {
        "s": said["last"] - said["went"],
        "s with start": said["last"] - began,
        "owner": said["owner"],
        "cpu": said["workers"],
    }


def with_bare(orbits: int, draws: int) -> dict[str, float]:
    with tempfile.TemporaryDirectory() as folder:
        began = time.monotonic()
        half = draws // 2
        pair = [started(folder, "bare", orbits, first, half) for first in (0, half)]
        while len(list(Path(folder).glob("ready-*"))) < 2:
            if any(process.poll() for process in pair):
                raise SystemExit("a bare process failed")
            time.sleep(0.002)
        (Path(folder) / "go").touch()
        went = time.monotonic()
        last = max(told(process)["last"] for process in pair)
        os.environ[gated.FOLDER] = folder
        return {"s": last - went, "s with start": last - began, "cpu": gated.spent_s()}


def two_workers(draws: int) -> dict[str, object]:
    pairs: list[tuple[dict[str, float], dict[str, float]]] = []
    for k in range(PAIRS + 1):  # the first one warms caches and does not count
        both = [with_workers(SHORT, draws), with_bare(SHORT, draws)] if k % 2 else []
        both = both or [with_bare(SHORT, draws), with_workers(SHORT, draws)][::-1]
        pairs.append((both[0], both[1]))
    del pairs[0]
    rate = {name: Spread.of([bare[name] / ours[name] for ours, bare in pairs]) for name in ("s", "s with start")}
    cpu = Spread.of([ours["cpu"] / bare["cpu"] for ours, bare in pairs])
    start = [Spread.of([side[k]["s with start"] - side[k]["s"] for side in pairs]).median for k in (0, 1)]
    each = Spread.of([bare["cpu"] / draws for _, bare in pairs]).median
    print(f"{WORKERS} workers / {WORKERS} bare processes, {PAIRS} pairs of {draws} draws of {each:.3f} s (CPU)")
    print(f"   draws a second                     {rate['s']}")
    print(f"   with the start of all processes    {rate['s with start']}   ({start[0]:.1f} s, bare {start[1]:.1f} s)")
    print(f"   CPU time of workers a draw         {cpu}", flush=True)
    owner = owner_share([ours for ours, _ in pairs], draws)
    return {
        "draws": draws,
        "draw s": round(each, 4),
        "draws a second / bare": rate["s"].as_list(),
        "the same with starts": rate["s with start"].as_list(),
        "starts s": [round(seconds, 2) for seconds in start],
        "CPU a draw / bare": cpu.as_list(),
        "owner / workers, short draws": owner.as_list(),
    }


def owner_share(runs: Sequence[dict[str, float]], draws: int) -> Spread:
    share = Spread.of([run["owner"] / run["cpu"] for run in runs])
    each = Spread.of([run["cpu"] / draws for run in runs]).median
    print(f"owner / workers, CPU time, {len(runs)} runs of {draws} draws of {each:.3f} s: {share}", flush=True)
    return share


def in_place(draws: int) -> dict[str, object]:
    from stabcheck.engines.rebound import ReboundEngine

    scenario = scenario_of(LONG)

    def stored() -> float:
        with tempfile.TemporaryDirectory() as folder:
            start = time.process_time()
            screening.screen(scenario, draws=draws, run_file=Path(folder) / "it.run", workers=0, engine=REBOUND)
            return time.process_time() - start

    def bare() -> float:
        tasks, plan = tasks_of(LONG, 0, draws)
        start = time.process_time()
        finished = sum(isinstance(message, Finished) for message in ReboundEngine().follow(tasks, plan))
        assert finished == draws
        return time.process_time() - start

    rounds = interleaved(PAIRS, stored, bare)
    spread = ratio(rounds, 0, 1)
    each = Spread.of([values[1] / draws for values in rounds]).median
    print(f"screen in one process / bare loop, CPU time, {PAIRS} pairs of {draws} draws of {each:.2f} s: {spread}")
    return {"draws": draws, "draw s": round(each, 3), "screen in one process / bare loop": spread.as_list()}


def main() -> None:
    keep("throughput", {"pairs": PAIRS, **two_workers(80)})
    keep(
        "throughput",
        {"owner / workers, long draws": owner_share([with_workers(LONG, 12) for _ in range(3)], 12).as_list()},
    )
    keep("throughput", {"pairs": PAIRS, "in place": in_place(4)})


if __name__ == "__main__":
    match sys.argv[1:]:
        case ["owner", orbits, draws]:
            be_owner(int(orbits), int(draws))
        case ["bare", orbits, first, draws]:
            be_bare(int(orbits), int(first), int(draws))
        case _:
            main()
