"""From a run file, live or ended, to the columns, the answer and the folder of a report."""

import json

import numpy as np
import pytest
from made_up_draws import broken, survived, unknown

from stabcheck.ensemble import draw, source
from stabcheck.errors import StabcheckError
from stabcheck.outcome import Finished
from stabcheck.planning import plan_of
from stabcheck.report.answer import answer_of
from stabcheck.report.export import export
from stabcheck.report.from_run_file import run_table
from stabcheck.report.page import report
from stabcheck.scenario import Scenario
from stabcheck.screen import columns_of, identity_of, rows_of
from stabcheck.store import RunFile

TWO = """
title = "Two invented planets"
[star]
mass = "0.81 ± 0.03 Msun"
age = "5 ± 2 Gyr"
[elements]
frame = "jacobi"
fit = "keplerian"
epoch = "2459000.0 BJD_TDB"
data_span = "300 d"
[plane]
inclination = "isotropic"
[planets.b]
period = "10.0 ± 0.01 d"
eccentricity = "0.05 ± 0.04"
omega_star = "uniform(0, 360) deg"
mean_anomaly = "uniform(0, 360) deg"
mass = "90 ± 9 Mearth"
[planets.c]
period = "31.0 ± 0.01 d"
eccentricity = "0.1 ± 0.02"
omega_star = "uniform(0, 360) deg"
mean_anomaly = "uniform(0, 360) deg"
mass = "200 ± 9 Mearth"
[draws]
seed = 4
[integration]
span = "1e5 yr"
"""
DRAWS = 40


@pytest.fixture(scope="module")
def scenario():
    return Scenario.from_text(TWO)


def stored(path, scenario, finished):
    """A run file of the first 40 draws in which those of ``finished`` have an outcome."""
    opened, plan = source(scenario), plan_of(scenario)
    identity, columns = identity_of(opened, plan, ["toy"]), columns_of(draw(opened, 0, 1))
    rows = rows_of(opened, plan, 0, DRAWS)
    orbits = {row.number for row in rows if not row.refused}
    with RunFile.create(
        path, identity=identity, bodies=opened.bodies, columns=columns, scenario_text=scenario.text
    ) as run:
        run.say_about("draws asked", str(DRAWS))
        run.add_draws(rows)
        run.record([Finished(outcome(number)) for number in finished if number in orbits])
    return orbits


def outcome(number):
    if number % 10 == 9:
        return unknown(number)
    return broken(number, drift=np.empty(0)) if number % 3 == 0 else survived(number)


def test_columns_of_a_run_file_are_those_that_were_drawn(tmp_path, scenario):
    orbits = stored(tmp_path / "two.run", scenario, range(DRAWS))
    with RunFile.open(tmp_path / "two.run") as run:
        found = run_table(run)
    drawn = draw(scenario, 0, DRAWS)
    assert set(np.flatnonzero(found.is_orbit)) == orbits and 0 < len(orbits) < DRAWS
    assert np.array_equal(found.elements["period_d"], drawn.period_d, equal_nan=True)
    assert np.array_equal(found.parameters["planets.c.eccentricity"], drawn.parameters["planets.c.eccentricity"])
    assert np.array_equal(found.star_mass_msun, drawn.star_mass_msun)
    assert found.refused.tolist() == list(drawn.refused)


def test_outcomes_stand_in_the_rows_of_their_numbers(tmp_path, scenario):
    orbits = stored(tmp_path / "two.run", scenario, range(DRAWS))
    with RunFile.open(tmp_path / "two.run") as run:
        found = run_table(run)
    for number in sorted(orbits):
        expected = outcome(number)
        assert found.outcome.survival[number] == expected.survival
        assert found.outcome.time_d[number] == expected.time_d
        assert found.outcome.handover_why[number] == expected.handover_why
        assert np.isnan(found.outcome.drift[number]).all() == (expected.drift.size == 0)
    assert not found.done[sorted(set(range(DRAWS)) - orbits)].any()


def test_what_holds_for_the_run_is_read_from_it(tmp_path, scenario):
    stored(tmp_path / "two.run", scenario, range(DRAWS))
    with RunFile.open(tmp_path / "two.run") as run:
        found = run_table(run)
        facts = found.facts
    assert (facts.seed, facts.source, facts.frame, facts.fit, facts.span) == (
        4,
        "table",
        "jacobi",
        "keplerian",
        "1e5 yr",
    )
    assert facts.star_age_d == pytest.approx(5e9 * 365.25)
    assert facts.plan["steps_per_periastron"] == 25.0 and "rebound" in facts.versions
    # Planets of 0.3 and 0.6 Jupiter masses near 3:1: metres a second, neither micrometres nor kilometres.
    assert 1e-3 < facts.keplerian_departure_m_s < 100
    assert np.all(found.secular_cycle_d[found.is_orbit] > 365.25)


def test_a_live_run_is_reported_from_its_prefix(tmp_path, scenario):
    orbits = stored(tmp_path / "two.run", scenario, [*range(15), *range(20, DRAWS)])
    with RunFile.open(tmp_path / "two.run") as run:
        answer = answer_of(run)
    first_open = min(orbits & set(range(15, 20)))
    assert answer.is_preliminary and answer.counts.settled == first_open
    assert answer.counts.finished_later > 0


def test_a_run_without_any_outcome_can_be_reported_on(tmp_path, scenario):
    stored(tmp_path / "two.run", scenario, [])
    with RunFile.open(tmp_path / "two.run") as run:
        assert answer_of(run).counts.orbits == 0


def test_the_report_is_a_folder_with_everything(tmp_path, scenario):
    stored(tmp_path / "two.run", scenario, range(DRAWS))
    made = report(tmp_path / "two.run", out=tmp_path / "folder", plane=("m c", "planets.b.eccentricity"))
    assert {file.name for file in made.files} == {file.name for file in (tmp_path / "folder").iterdir()}
    assert json.loads((tmp_path / "folder" / "answer.json").read_text())["facts"]["seed"] == 4
    assert "hunter2007" in (tmp_path / "folder" / "references.bib").read_text()  # figures were drawn
    assert Scenario.read(tmp_path / "folder" / "scenario.toml").canonical() == scenario.canonical()
    assert made.as_text().count("\n") < (tmp_path / "folder" / "answer.txt").read_text().count("\n")


def test_a_report_on_a_plane_that_is_not_there_says_which_there_are(tmp_path, scenario):
    stored(tmp_path / "two.run", scenario, range(DRAWS))
    with pytest.raises(StabcheckError, match="P ratio c/b"):
        report(tmp_path / "two.run", out=tmp_path / "folder", plane=("m d", "m c"))
    assert not (tmp_path / "folder").exists()


@pytest.mark.parametrize("name", ["draws.csv", "draws.ecsv"])
def test_export_counts_the_draws_it_wrote(tmp_path, scenario, name):
    stored(tmp_path / "two.run", scenario, range(DRAWS))
    assert export(tmp_path / "two.run", tmp_path / name) == DRAWS
    lines = (tmp_path / name).read_text(encoding="utf-8").splitlines()
    assert len([line for line in lines if not line.startswith("#")]) == DRAWS + 1


def test_reading_a_run_changes_nothing_in_it(tmp_path, scenario):
    path = tmp_path / "two.run"
    stored(path, scenario, range(DRAWS))
    before = path.read_bytes()
    export(path, tmp_path / "draws.csv")
    assert path.read_bytes() == before
