"""The one-call twin of ``screen``: what it stores, how it goes on, and what it refuses before anything is begun."""

import os
import signal

import numpy as np
import pytest

from stabcheck.build import states
from stabcheck.ensemble import draw
from stabcheck.errors import PlanError, ResumeRefused, ScenarioError, WorkerError
from stabcheck.plan import Method, Task
from stabcheck.planning import plan_of
from stabcheck.scenario import Scenario
from stabcheck.screen import ELEMENTS, Interrupted, screen, usable_cores
from stabcheck.store import RunFile

TOY = "toy_engine:ToyEngine"
TEXT = """
[star]
mass = "1 ± 0.05 Msun"
[elements]
frame = "jacobi"
fit = "keplerian"
epoch = "2459000 BJD_TDB"
[plane]
inclination = "88 deg"
[planets.outer]
period = "25 ± 0.1 d"
eccentricity = "0.02 ± 0.02"
omega_planet = "uniform(0, 360) deg"
mean_longitude_planet = "140 deg"
mass = "2 Mearth"
[planets.inner]
period = "10 ± 0.1 d"
eccentricity = "0"
mean_longitude_planet = "40 deg"
mass = "1 Mearth"
[draws]
seed = 1
[integration]
span = "40 inner orbits"
[endings]
ejection_distance = "50 au"
"""
DRAWS = 30


def scenario(text: str = TEXT) -> Scenario:
    return Scenario.from_text(text)


def dump(path) -> str:
    with RunFile.open(path) as run:
        return run.dump()


@pytest.fixture
def path(tmp_path):
    return tmp_path / "x.run"


@pytest.fixture
def done(path):
    return screen(scenario(), draws=DRAWS, run_file=path, workers=0, engine=TOY)


def test_every_draw_is_finished_or_refused_with_a_reason(done, path):
    with RunFile.open(path) as run:
        refused = run.draws().refused
        assert run.bodies == ("inner", "outer")
        assert run.about("draws asked") == str(DRAWS)
        assert set(run.outcomes()["number"]) == set(np.flatnonzero(refused == ""))
    assert done.refused == np.count_nonzero(refused) > 0 and set(refused) == {"", "e < 0 (outer)"}
    assert (done.finished, done.not_finished) == (DRAWS - done.refused, 0)
    assert sum(done.verdicts.values()) == done.finished
    assert f"{DRAWS}/{DRAWS} draws" in done.as_text() and f"not an orbit {done.refused}" in done.as_text()


@pytest.mark.parametrize("workers, chunk", [(1, 7), (2, 4096), (0, 1)])
def test_rows_do_not_depend_on_workers_or_on_the_pieces_in_which_draws_are_built(
    done, path, tmp_path, monkeypatch, workers, chunk
):
    monkeypatch.setattr("stabcheck.screen.CHUNK", chunk)
    screen(scenario(), draws=DRAWS, run_file=tmp_path / "y.run", workers=workers, engine=TOY)
    assert dump(tmp_path / "y.run") == dump(path)


def test_a_run_may_grow_and_its_first_draws_stay(done, path, tmp_path):
    whole = screen(scenario(), draws=DRAWS + 25, run_file=path, workers=0, engine=TOY)
    assert whole.draws == DRAWS + 25 and whole.not_finished == 0
    screen(scenario(), draws=DRAWS + 25, run_file=tmp_path / "y.run", workers=0, engine=TOY)
    assert dump(tmp_path / "y.run") == dump(path)


def test_fewer_draws_than_are_stored_are_counted_alone(done, path):
    assert screen(scenario(), draws=10, run_file=path, workers=0, engine=TOY).draws == 10
    with RunFile.open(path) as run:
        assert run.draw_count() == DRAWS


def test_what_is_stored_with_a_draw_is_its_row_of_the_ensemble_and_its_state(done, path):
    ensemble = draw(scenario(), 0, DRAWS)
    built = states(ensemble)
    with RunFile.open(path) as run:
        draws = run.draws()
        row = int(np.flatnonzero(draws.refused == "")[-1])
        task = run.task(row)
    for name in ELEMENTS:
        for k, body in enumerate(ensemble.bodies):
            expected = getattr(ensemble, name)[:, k]
            assert np.array_equal(draws.column("element", name, body), expected, equal_nan=True)
    for name, values in ensemble.parameters.items():
        assert np.array_equal(draws.column("parameter", name), values)
    assert np.array_equal(draws.column("element", "star_mass_msun"), ensemble.star_mass_msun)
    assert isinstance(task, Task)
    assert np.array_equal(task.position_au, built.position_au[row])
    assert np.array_equal(task.velocity_au_d, built.velocity_au_d[row])
    assert task.span_d == 40.0 * ensemble.period_d[row, 0]


def test_another_scenario_is_refused_by_its_differing_items_and_nothing_is_touched(done, path):
    before = path.read_bytes()
    with pytest.raises(ResumeRefused) as refused:
        other = scenario(TEXT.replace('"2 Mearth"', '"3 Mearth"').replace("seed = 1", "seed = 2"))
        screen(other, draws=DRAWS, run_file=path, workers=0, engine=TOY)
    items = set(refused.value.differing)
    assert "scenario.draws.seed" in items and any(item.startswith("scenario.planets.outer.mass") for item in items)
    assert not any(item.startswith("scenario.planets.inner") for item in items)
    assert path.read_bytes() == before


def test_another_title_or_spelling_is_the_same_run(done, path):
    again = 'title = "again"\n' + TEXT.replace("40 inner orbits", "4e1 inner orbits")
    assert screen(scenario(again), draws=DRAWS, run_file=path, workers=0, engine=TOY).not_finished == 0


def test_a_version_that_differs_is_named(done, path, monkeypatch):
    monkeypatch.setattr("stabcheck.screen.version", lambda name: "0.0" if name == "rebound" else "1")
    with pytest.raises(ResumeRefused) as refused:
        screen(scenario(), draws=DRAWS, run_file=path, workers=0, engine=TOY)
    assert refused.value.differing["versions.rebound"] == ("5.2.2", "0.0")


def test_more_draws_than_rows_of_a_sample_file_are_refused_before_a_file_is_made(tmp_path):
    (tmp_path / "rows.csv").write_text("P\n" + "\n".join(str(25 + k / 100) for k in range(20)) + "\n")
    text = TEXT.replace('"25 ± 0.1 d"', '{ column = "P", unit = "d" }') + '[samples]\nfile = "rows.csv"\n'
    asked = Scenario.from_text(text, folder=tmp_path)
    with pytest.raises(PlanError, match="has 20 rows"):
        screen(asked, draws=21, run_file=tmp_path / "x.run", workers=0, engine=TOY)
    assert not (tmp_path / "x.run").exists()
    assert screen(asked, draws=20, run_file=tmp_path / "x.run", workers=0, engine=TOY).not_finished == 0


def test_no_draws_are_refused(path):
    with pytest.raises(PlanError):
        screen(scenario(), draws=0, run_file=path, engine=TOY)


def test_a_span_that_is_not_defined_is_refused_in_words(path):
    head, _, rest = TEXT.partition("[planets.inner]")
    alone = head + rest[rest.index("[draws]") :]
    with pytest.raises(ScenarioError, match="secular"):
        screen(
            scenario(alone.replace("40 inner orbits", "3 secular cycles")),
            draws=5,
            run_file=path,
            workers=0,
            engine=TOY,
        )
    assert not path.exists()


@pytest.mark.parametrize("workers", [0, 2])
def test_a_stop_says_where_the_run_stands_and_the_same_call_goes_on(done, path, tmp_path, monkeypatch, workers):
    monkeypatch.setenv("TOY_PAUSE_S", "0.1")
    monkeypatch.setattr("stabcheck.batch.carry.SHOW_EVERY_S", 0.0)
    other = tmp_path / "y.run"

    def after_three(status) -> None:
        if status.rate_per_s and not status.ended:
            os.kill(os.getpid(), signal.SIGINT)
            monkeypatch.setattr("stabcheck.batch.carry.SHOW_EVERY_S", 1e9)  # once: the second one ends at once

    with pytest.raises(
        Interrupted, match=r"stopped by SIGINT with .* of 30 draws stored.*the same command goes on"
    ) as stopped:
        screen(scenario(), draws=DRAWS, run_file=other, workers=workers, engine=TOY, progress=after_three)
    assert stopped.value.run.not_finished > 0 and isinstance(stopped.value, KeyboardInterrupt)
    assert [file.name for file in tmp_path.iterdir() if file.name.startswith("y")] == ["y.run"]
    monkeypatch.delenv("TOY_PAUSE_S")
    screen(scenario(), draws=DRAWS, run_file=other, workers=1, engine=TOY)
    assert dump(other) == dump(path)


def test_the_run_file_is_named_after_the_scenario_and_lies_here(tmp_path, monkeypatch):
    (tmp_path / "two.toml").write_text(TEXT)
    (tmp_path / "here").mkdir()
    monkeypatch.chdir(tmp_path / "here")
    assert screen("../two.toml", draws=3, workers=0, engine=TOY).path.resolve() == tmp_path / "here" / "two.run"


def test_a_worker_error_leaves_a_file_that_can_be_continued(path, monkeypatch):
    with pytest.raises(WorkerError):
        screen(scenario(), draws=DRAWS, run_file=path, workers=1, engine="toy_engine:NeverReady")
    with RunFile.open(path) as run:
        assert run.draw_count() == DRAWS
    assert run.path == path and not path.with_name("x.run.lock").exists()


def test_the_plan_is_what_the_scenario_says():
    plan = plan_of(scenario(TEXT.replace('span = "40', 'method = "ias15"\nspan = "40')))
    assert (plan.method, plan.seed, plan.ejection_distance_au) == (Method.IAS15, 1, 50.0)
    assert np.isnan(plan.stop_distance_au) and not plan.relativity


def test_as_many_workers_as_cores_may_be_used():
    assert 1 <= usable_cores() <= (os.cpu_count() or 1)
