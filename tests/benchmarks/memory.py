"""What many draws need: memory of the owner, size of the run file, time a draw beyond its steps. Run: python memory.py

Ten minutes. Draws follow their planets for ten orbits only.

1. Largest resident memory of the owner of two workers for 100,000 draws of two planets, minus that for 10,000, each in
   a fresh process. Aim: at most 50 MB more. The same for a screen in one process, where the engine is in it too.
2. Size of the run file over its draws, for 2 to 8 planets.
3. Process time a draw in one process: building, handing out, storing, and some 250 steps.
"""

import json
import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
from kept import keep
from throughput import PLANET, SYSTEM

from stabcheck.scenario import Scenario
from stabcheck.screen import screen

FEW, MANY = 10_000, 100_000
ORBITS = 10
FOR_SIZE = 2_000


def scenario_of(planets: int) -> Scenario:
    tables = "".join(PLANET.format(name="bcdefghi"[k], period=10.0 * 1.63**k) for k in range(planets))
    return Scenario.from_text(SYSTEM.format(span=ORBITS) + tables)


def be_owner(planets: int, draws: int, workers: int) -> None:
    """Screen in this process, and tell what it took; runs as a process of its own."""
    screen(scenario_of(planets), draws=1, run_file="warm.run", workers=workers)  # kernels are loaded
    start, before = time.process_time(), time.perf_counter()
    run = screen(scenario_of(planets), draws=draws, run_file="it.run", workers=workers)
    spent, passed = time.process_time() - start, time.perf_counter() - before
    if run.finished != draws:
        raise SystemExit(run.as_text())
    unit = 1 if sys.platform == "darwin" else 1024
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * unit
    print(json.dumps({"peak MB": peak / 1e6, "file": Path("it.run").stat().st_size, "cpu": spent, "s": passed}))


def measured(planets: int, draws: int, workers: int) -> dict[str, float]:
    with tempfile.TemporaryDirectory() as folder:
        command = [sys.executable, str(Path(__file__).resolve()), *map(str, (planets, draws, workers))]
        done = subprocess.run(command, cwd=folder, stdout=subprocess.PIPE, text=True, check=True)
    found: dict[str, float] = json.loads(done.stdout)
    return found


def growth(workers: int) -> dict[str, object]:
    few, many = (measured(2, draws, workers) for draws in (FEW, MANY))
    more = many["peak MB"] - few["peak MB"]
    cpu_ms = 1e3 * (many["cpu"] - few["cpu"]) / (MANY - FEW)
    print(f"{workers or 'no'} workers, {FEW} and {MANY} draws of 2 planets over {ORBITS} orbits:")
    print(f"   peak memory of the owner {few['peak MB']:.0f} MB and {many['peak MB']:.0f} MB: {more:.1f} MB more")
    print(f"   {many['s']:.0f} s for {MANY}; CPU time of this process {cpu_ms:.2f} ms a draw", flush=True)
    peaks = [round(few["peak MB"], 1), round(many["peak MB"], 1)]
    return {"workers": workers, "draws": [FEW, MANY], "peak MB": peaks, "CPU ms a draw": round(cpu_ms, 3)}


def main() -> None:
    sizes = {planets: measured(planets, FOR_SIZE, 0)["file"] / FOR_SIZE for planets in range(2, 9)}
    print("run file, bytes a draw: " + "   ".join(f"{planets} planets {size:.0f}" for planets, size in sizes.items()))
    slope, fixed = np.polyfit(list(sizes), list(sizes.values()), 1)
    print(f"about {fixed:.0f} + {slope:.0f} a planet, with two drawn quantities a planet")
    keep("memory", {"bytes a draw": {str(planets): round(size) for planets, size in sizes.items()}})
    for workers in (2, 0):
        keep("memory", growth(workers))


if __name__ == "__main__":
    match sys.argv[1:]:
        case [planets, draws, workers]:
            be_owner(int(planets), int(draws), int(workers))
        case _:
            main()
