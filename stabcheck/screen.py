"""Follow the draws of a scenario to their ends and store what each came to: the library twin of ``screen``."""

import os
import platform
import sys
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path
from typing import Any

import numpy as np

import stabcheck
from stabcheck.batch.base import REBOUND, Runner
from stabcheck.batch.carry import carry_out
from stabcheck.batch.in_place import InPlace
from stabcheck.batch.interrupt import StopRequest
from stabcheck.batch.local import LocalWorkers
from stabcheck.batch.processes import refuse_while_importing_main
from stabcheck.batch.progress import Progress
from stabcheck.build import states
from stabcheck.ensemble import Ensemble, Source, draw, source
from stabcheck.errors import PlanError
from stabcheck.outcome import Trust
from stabcheck.plan import Plan, Task
from stabcheck.planning import plan_of, spans_of, task_of
from stabcheck.scenario import Scenario
from stabcheck.store import DrawColumn, DrawRow, RunFile
from stabcheck.verdict import Verdict, verdict

CHUNK = 4096
"""Draws that are built and stored at once."""

ELEMENTS = (
    "mass_msun",
    "radius_au",
    "period_d",
    "semi_major_axis_au",
    "eccentricity",
    "inclination_rad",
    "node_rad",
    "omega_planet_rad",
    "mean_anomaly_rad",
    "semi_amplitude_m_s",
)
STAR = ("star_mass_msun", "star_radius_au")
VERSIONS_OF = ("numpy", "scipy", "rebound", "numba")
VECTOR_FEATURES = ("avx512f", "avx2", "fma", "asimd")


@dataclass(frozen=True, slots=True, kw_only=True)
class Run:
    """Where a run stands.

    Attributes
    ----------
    path : Path
        The run file.
    draws : int
        How many were asked for in total.
    finished, refused, not_finished : int
        With an outcome; not an orbit; neither (stopped, or a process hung on them: tried again by the same command).
    untrusted : int
        Finished draws whose numbers cannot be trusted.
    verdicts : dict of Verdict to int
    """

    path: Path
    draws: int
    finished: int
    refused: int
    untrusted: int
    verdicts: dict[Verdict, int]

    @property
    def not_finished(self) -> int:
        """Draws without an outcome that are orbits."""
        return self.draws - self.finished - self.refused

    @property
    def untrusted_share(self) -> float:
        """Share of the finished draws that could not be trusted."""
        return self.untrusted / self.finished if self.finished else 0.0

    def as_text(self) -> str:
        """Two lines for a terminal."""
        words = [f"{word} {count}" for word, count in self.verdicts.items()]
        words += [f"not an orbit {self.refused}"] if self.refused else []
        words += [f"not finished {self.not_finished}: give the same command again"] if self.not_finished else []
        return (
            f"{self.finished + self.refused}/{self.draws} draws   {'   '.join(words)}\n"
            f"run file: {self.path}   next: stabcheck report {self.path}"
        )


class Interrupted(KeyboardInterrupt):
    """A run was asked to stop and has stopped in order.

    Attributes
    ----------
    run : Run
        Where it stands.
    by : str
        The signal.
    """

    def __init__(self, run: Run, by: str) -> None:
        self.run, self.by = run, by
        done = run.finished + run.refused
        super().__init__(
            f"stopped by {by} with {done} of {run.draws} draws stored in {run.path}; the same command goes on"
        )


def screen(
    scenario: Path | str | Scenario,
    *,
    draws: int,
    run_file: Path | str | None = None,
    workers: int | None = None,
    engine: str | Sequence[str] = REBOUND,
    progress: Progress | None = None,
) -> Run:
    """Follow draws of a scenario and store what each came to; go on where an earlier run with this file stopped.

    Parameters
    ----------
    scenario : Path, str or Scenario
    draws : int
        How many in total. A run file may grow: draws 0 to 999 are the same, however many follow.
    run_file : Path or str, optional
        Where to store the run; the name of the scenario with ``.run``, in the current folder, if not given.
    workers : int, optional
        Processes; one for each core that this process may use if not given; 0 runs everything in this process.
    engine : str or sequence of str
        ``module:Class``; of several, each goes on with what the one before gives up.
    progress : callable, optional
        Takes a `stabcheck.batch.progress.Status` about every second; `stabcheck.batch.progress.ProgressLine` shows it.

    Returns
    -------
    Run

    Raises
    ------
    ScenarioError, SampleFileError, PlanError
        If the scenario cannot be used, or not for so many draws.
    ResumeRefused
        If the run file was made with something else; nothing is touched then.
    RunFileError
        If the run file cannot be used, or its disk refuses.
    WorkerError
        If the workers cannot be started, or the script that calls this has no ``__main__`` guard.
    Interrupted
        After Ctrl-C, or the signals TERM or HUP: everything is stored. It is a `KeyboardInterrupt`.
    """
    refuse_while_importing_main()
    if draws < 1:
        raise PlanError(f"{draws} draws were asked for", where="screen", do="ask for at least 1")
    asked = scenario if isinstance(scenario, Scenario) else Scenario.read(Path(scenario))
    opened, plan = source(asked), plan_of(asked)
    engines = (engine,) if isinstance(engine, str) else tuple(engine)
    # What cannot be drawn or has no span is refused before anything is begun.
    opened.rows(draws - 1, 1)
    rows_of(opened, plan, 0, 1)
    path = Path(run_file) if run_file is not None else Path(Path(asked.name).stem + ".run")
    stop = StopRequest()
    with stop.listening(), _opened(path, opened, plan, engines) as run:
        run.say_about("draws asked", str(draws))
        runner = _runner(run, workers, engines, stop)
        run.log("start", f"until {draws} draws; {runner.count} workers; stabcheck {stabcheck.__version__}")
        carry_out(run, _tasks(run, opened, plan, draws), runner, plan, total=draws, progress=progress)
        reached = state_of(run, draws)
        run.log("stop", f"by {stop.by or 'its end'}; {reached.not_finished} draws not finished")
    if stop.by and reached.not_finished:
        raise Interrupted(reached, stop.by)
    return reached


def identity_of(opened: Source, plan: Plan, engines: Sequence[str]) -> dict[str, Any]:
    """Say what must agree before a run is continued; the number of draws is not part of it."""
    return {
        "scenario": opened.scenario.canonical(),
        "bodies": list(opened.bodies),
        "plan": plan.identity(),
        "samples sha256": opened.content_hash,
        "engines": list(engines),
        "versions": {
            "stabcheck": stabcheck.__version__,
            "python": f"{sys.version_info.major}.{sys.version_info.minor}",
            **{name: version(name) for name in VERSIONS_OF},
        },
        "machine": {"architecture": platform.machine(), "vectors": _vector_features()},
    }


def _vector_features() -> str:
    """Which of the vector instructions that NumPy chooses its routines by this machine has; empty where not told."""
    try:
        lines = Path("/proc/cpuinfo").read_text().splitlines()
    except OSError:  # not Linux: the architecture says it
        return ""
    found = next((set(line.split()) for line in lines if line.startswith(("flags", "Features"))), set())
    return " ".join(feature for feature in VECTOR_FEATURES if feature in found)


def _opened(path: Path, opened: Source, plan: Plan, engines: Sequence[str]) -> RunFile:
    identity = identity_of(opened, plan, engines)
    if path.exists():
        return RunFile.open(path, for_writing=True, identity=identity)
    columns = columns_of(draw(opened, 0, 1))
    text = opened.scenario.text
    return RunFile.create(path, identity=identity, bodies=opened.bodies, columns=columns, scenario_text=text)


def _runner(run: RunFile, workers: int | None, engines: Sequence[str], stop: StopRequest) -> Runner:
    count = usable_cores() if workers is None else workers
    if count == 0:
        return InPlace(engines=engines, stop=stop)
    return LocalWorkers(count, engines=engines, log=run.log, stop=stop)


def usable_cores() -> int:
    """How many cores this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def _tasks(run: RunFile, opened: Source, plan: Plan, draws: int) -> Iterator[Task]:
    """Give the unfinished draws in order; those that are not stored yet are built and stored when their turn comes."""
    for first in range(0, draws, CHUNK):
        upto = min(first + CHUNK, draws)
        stored = run.draw_count()
        if stored < upto:
            run.add_draws(rows_of(opened, plan, stored, upto - stored))
        yield from run.tasks_pending(upto, first)


def columns_of(ensemble: Ensemble) -> tuple[DrawColumn, ...]:
    """Name the numbers that are stored with each draw: what was drawn, then the elements body by body."""
    return (
        *(DrawColumn("parameter", name) for name in ensemble.parameters),
        *(DrawColumn("element", name) for name in STAR),
        *(DrawColumn("element", name, body) for name in ELEMENTS for body in ensemble.bodies),
    )


def rows_of(opened: Source, plan: Plan, first: int, count: int) -> list[DrawRow]:
    """Build draws ``first`` to ``first + count - 1`` as they are stored.

    Raises
    ------
    ScenarioError
        If a draw is an orbit, but the span's unit is not defined for it.
    """
    ensemble = draw(opened, first, count)
    spans = spans_of(opened.scenario, ensemble, relativity=plan.relativity)
    built = states(ensemble)
    values = _values(ensemble)
    return [
        DrawRow(
            number=first + k,
            state=b"" if ensemble.refused[k] else task_of(built, k, first + k, float(spans[k])).as_bytes(),
            values=values[k].tobytes(),
            refused=str(ensemble.refused[k]),
            weight=float(ensemble.weight[k]),
            source_row=int(ensemble.source_row[k]),
            chain=int(ensemble.chain[k]),
        )
        for k in range(count)
    ]


def _values(ensemble: Ensemble) -> Any:
    columns = [*ensemble.parameters.values(), *(getattr(ensemble, name) for name in STAR)]
    columns += [getattr(ensemble, name)[:, k] for name in ELEMENTS for k in range(len(ensemble.bodies))]
    return np.ascontiguousarray(np.stack(columns, axis=1), dtype="<f8")


def state_of(run: RunFile, draws: int) -> Run:
    """Say where a run stands, counting its first ``draws`` draws."""
    classes = run.classes(0, draws)
    words = {word: 0 for word in Verdict}
    for axes, (count, _) in classes.items():
        words[verdict(*axes)] += count
    return Run(
        path=run.path,
        draws=draws,
        finished=sum(count for count, _ in classes.values()),
        refused=sum(run.refused(draws).values()),
        untrusted=sum(count for (*_, trust), (count, _) in classes.items() if trust is not Trust.OK),
        verdicts={word: count for word, count in words.items() if count},
    )
