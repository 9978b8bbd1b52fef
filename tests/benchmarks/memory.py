"""What many draws need: memory of the owner, size of the run file, time a draw beyond its steps. Run: python memory.py

1. Largest resident memory of a process that screens 100,000 draws of two planets over ten orbits, minus that for 10,000
   draws, each in a fresh process. Everything runs in that one process, so what the engine keeps is in it too. Aim: at
   most 50 MB more.
2. Size of the run file over its draws, for 2 to 8 planets.
3. Process time a draw of these, which is nearly all building, handing out and storing, beside the steps themselves.
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


def be_owner(planets: int, draws: int) -> None:
    """Screen in this process, and tell what it took; runs as a process of its own."""
    screen(scenario_of(planets), draws=1, run_file="warm.run", workers=0)  # kernels are loaded
    start, before = time.process_time(), time.perf_counter()
    run = screen(scenario_of(planets), draws=draws, run_file="it.run", workers=0)
    spent, passed = time.process_time() - start, time.perf_counter() - before
    if run.finished != draws:
        raise SystemExit(run.as_text())
    unit = 1 if sys.platform == "darwin" else 1024
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * unit
    print(json.dumps({"peak MB": peak / 1e6, "file": Path("it.run").stat().st_size, "cpu": spent, "s": passed}))


def measured(planets: int, draws: int) -> dict[str, float]:
    with tempfile.TemporaryDirectory() as folder:
        command = [sys.executable, str(Path(__file__).resolve()), str(planets), str(draws)]
        done = subprocess.run(command, cwd=folder, stdout=subprocess.PIPE, text=True, check=True)
    found: dict[str, float] = json.loads(done.stdout)
    return found


def main() -> None:
    few, many = measured(2, FEW), measured(2, MANY)
    more = many["peak MB"] - few["peak MB"]
    print(
        f"peak memory: {few['peak MB']:.0f} MB for {FEW} draws, {many['peak MB']:.0f} MB for {MANY}: {more:.1f} MB more"
    )
    each = 1e3 * (many["cpu"] - few["cpu"]) / (MANY - FEW)
    print(f"{ORBITS} orbits of 2 planets: {each:.2f} ms of CPU a draw ({many['s']:.0f} s for {MANY})", flush=True)
    sizes = {planets: measured(planets, FOR_SIZE)["file"] / FOR_SIZE for planets in range(2, 9)}
    sizes[2] = many["file"] / MANY
    print("run file, bytes a draw: " + "   ".join(f"{planets} planets {size:.0f}" for planets, size in sizes.items()))
    slope, fixed = np.polyfit(list(sizes), list(sizes.values()), 1)
    print(f"about {fixed:.0f} + {slope:.0f} a planet (the number of drawn quantities grows with it: 2 a planet here)")
    rounded = {str(planets): round(size) for planets, size in sizes.items()}
    peaks = [round(few["peak MB"], 1), round(many["peak MB"], 1)]
    keep("memory", {"draws": [FEW, MANY], "peak MB": peaks, "CPU ms a draw": round(each, 3), "bytes a draw": rounded})


if __name__ == "__main__":
    match sys.argv[1:]:
        case [planets, draws]:
            be_owner(int(planets), int(draws))
        case _:
            main()
