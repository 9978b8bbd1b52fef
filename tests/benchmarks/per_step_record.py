"""What looking at every step costs. Run: python per_step_record.py (three minutes)

Reference: one ``integrate`` of plain REBOUND over the same system with the same step and number of steps, WHFast,
safe mode 1 (``exact_finish_time=0``). Ours: everything that following a draw takes, from its start state to its
outcome. Once without a tangent vector, and once with MEGNO, against plain REBOUND with its own MEGNO and with its
variational equations alone. Process times of one process. Aim: at most 12 % more.
"""

import sys
import time

import numpy as np
import rebound
from kept import interleaved, keep, ratio

from stabcheck.constants import GM_SUN_AU3_D2
from stabcheck.engines.rebound import ReboundEngine
from stabcheck.engines.rebound.library import new_simulation
from stabcheck.outcome import Finished, Outcome
from stabcheck.plan import Plan, Task

PAIRS = 9
PLANETS = (2, 3, 4, 5, 8)
SPAN_TIMES_PLANETS_D = 8.0e5
"""900,000 steps of 2 planets, 225,000 of 8: about half a second each."""


def compact_system(planets: int) -> Task:
    """Planets of 3.3 Earth masses, each with a period 1.4 times that of the one inside, about a star like the Sun."""
    simulation = rebound.Simulation()
    simulation.G = GM_SUN_AU3_D2
    simulation.add(m=1.0)
    for k in range(planets):
        simulation.add(m=1e-5, a=0.1 * 1.25**k, e=0.02, M=2.4 * k)
    simulation.move_to_com()
    bodies = simulation.particles
    return Task(
        number=7,
        mass_msun=np.array([body.m for body in bodies]),
        radius_au=np.array([0.00465] + [8e-5] * planets),
        position_au=np.array([body.xyz for body in bodies]),
        velocity_au_d=np.array([body.vxyz for body in bodies]),
        span_d=SPAN_TIMES_PLANETS_D / planets,
    )


def followed(engine: ReboundEngine, task: Task, plan: Plan) -> tuple[float, Outcome]:
    start = time.process_time()
    *_, last = engine.follow([task], plan)
    spent = time.process_time() - start
    assert isinstance(last, Finished)
    return spent, last.outcome


def plain(task: Task, steps: int, step_d: float, tangent: str) -> float:
    state = np.concatenate([task.position_au, task.velocity_au_d], axis=1)
    simulation = new_simulation(task.mass_msun, state, np.empty(0))
    simulation.integrator, simulation.dt = "whfast", step_d
    if tangent == "megno":
        simulation.init_megno(seed=1)
    elif tangent == "variation":
        simulation.add_variation().particles[1].x = 1.0
    start = time.process_time()
    simulation.integrate((steps - 0.5) * step_d, exact_finish_time=0)
    spent = time.process_time() - start
    if simulation.steps_done != steps:
        raise SystemExit(f"{simulation.steps_done} plain steps are not {steps}: the times cannot be compared")
    return spent


def compared(planets: int, references: dict[str, str]) -> dict[str, object]:
    """Measure one system; ``references`` are what plain REBOUND follows beside the planets, by the words for it."""
    task, plan = compact_system(planets), Plan(seed=1, indicator="" not in references.values())
    engine = ReboundEngine()
    _, outcome = followed(engine, task, plan)
    if outcome.method != "whfast" or outcome.restarts or outcome.adaptive_steps:
        raise SystemExit(f"not a plain WHFast draw: {outcome.history}")
    steps, step_d = outcome.map_steps, outcome.step_d
    others = [lambda tangent=tangent: plain(task, steps, step_d, tangent) for tangent in references.values()]
    rounds = interleaved(PAIRS, lambda: followed(engine, task, plan)[0], *others)
    found: dict[str, object] = {"planets": planets, "steps": steps}
    for column, words in enumerate(references, 1):
        spread = ratio(rounds, 0, column)
        nanoseconds = 1e9 * np.median([values[column] for values in rounds]) / steps
        print(f"{planets} planets   {words:<36} {spread}   plain step {nanoseconds:.0f} ns", flush=True)
        found[words] = spread.as_list()
    return found


def main() -> None:
    print(f"time over that of plain REBOUND, median (least to most) of {PAIRS} pairs")
    counts = [int(word) for word in sys.argv[1:]] or PLANETS
    without = [compared(planets, {"no tangent / WHFast": ""}) for planets in counts]
    both = {"MEGNO / WHFast + init_megno": "megno", "MEGNO / WHFast + add_variation": "variation"}
    keep("per_step_record", {"pairs": PAIRS, "ratios": without + [compared(planets, both) for planets in counts]})


if __name__ == "__main__":
    main()
