"""Do the map with its hand-overs and IAS15 alone come to the same survivals? The question behind the choice of methods.

Draws of a shipped scenario are followed by the rule and by IAS15 from the start, each twice with a displacement of
1e-12 au, so that the disagreement of the two is compared with that of each with itself.

    python tests/benchmarks/methods_agree.py --draws 60

prints the counts and appends them to records/methods_agree.jsonl. A minute of one core is worth about five draws.
"""

import argparse
import time
from collections import Counter
from collections.abc import Iterator
from dataclasses import replace
from itertools import combinations
from pathlib import Path

import numpy as np
from kept import ROOT, keep

from stabcheck.build import states
from stabcheck.engines.rebound import ReboundEngine
from stabcheck.ensemble import draw, source
from stabcheck.outcome import Finished, Outcome, Survival
from stabcheck.plan import Method, Plan, Task
from stabcheck.planning import plan_of, spans_of, task_of
from stabcheck.scenario import Scenario

DISPLACED_AU = 1e-12
WAYS = ("rule", "rule displaced", "ias15", "ias15 displaced")


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("--scenario", default=str(ROOT / "scenarios" / "compact_four.toml"))
    parser.add_argument("--draws", type=int, default=60)
    asked = parser.parse_args()
    scenario = Scenario.read(Path(asked.scenario))
    plan = replace(plan_of(scenario), indicator=False)
    rows = []
    for task in tasks_of(scenario, asked.draws):
        rows.append(followed(task, plan))
        print(task.number, *(one[0] for one in rows[-1]), flush=True)
    record = counted(rows) | {"scenario": scenario.title, "draws": len(rows)}
    print(record)
    keep("methods_agree", record)


def tasks_of(scenario: Scenario, count: int) -> Iterator[Task]:
    """Tasks of the draws that are orbits."""
    ensemble = draw(source(scenario), 0, count)
    built = states(ensemble)
    spans = spans_of(scenario, ensemble, relativity=scenario.physics.relativity)
    for row in np.flatnonzero(ensemble.refused == ""):
        yield task_of(built, int(row), int(row), float(spans[row]))


def followed(task: Task, plan: Plan) -> list[tuple[Survival, bool, float]]:
    """Survival, rearranged and seconds of one draw in each of the four ways."""
    position = task.position_au.copy()
    position[1, 0] += DISPLACED_AU
    displaced = replace(task, position_au=position)
    alone = replace(plan, method=Method.IAS15)
    found = []
    for one, how in ((task, plan), (displaced, plan), (task, alone), (displaced, alone)):
        began = time.process_time()
        outcome = _outcome(one, how)
        found.append((outcome.survival, outcome.rearranged, time.process_time() - began))
    return found


def _outcome(task: Task, plan: Plan) -> Outcome:
    last = list(ReboundEngine().follow([task], plan))[-1]
    assert isinstance(last, Finished)
    return last.outcome


def counted(rows: list[list[tuple[Survival, bool, float]]]) -> dict[str, object]:
    """Survivals in each way, seconds, and how many draws each two ways disagree on."""
    survivals = {way: dict(Counter(str(row[k][0]) for row in rows)) for k, way in enumerate(WAYS)}
    seconds = {way: round(sum(row[k][2] for row in rows), 1) for k, way in enumerate(WAYS)}
    differ = {
        f"{WAYS[i]} / {WAYS[j]}": sum(row[i][0] != row[j][0] for row in rows) for i, j in combinations(range(4), 2)
    }
    return {"survival": survivals, "seconds": seconds, "disagree": differ}


if __name__ == "__main__":
    main()
