"""The run file: what goes in comes out, twice the same is fine, anything else is refused before it is touched."""

import math
import os
import socket
import sqlite3
import tracemalloc
from dataclasses import fields, replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from toy_engine import rows_of, task_of

from stabcheck.errors import ResumeRefused, RunFileBusy, RunFileError
from stabcheck.outcome import Checkpoint, Ending, Finished, HandOver, Motion, Outcome, Survival, Trust
from stabcheck.store import DrawColumn, DrawRow, RunFile
from stabcheck.store.identity import NOT_THERE, canonical_text, differing, digest
from stabcheck.store.rows import outcome_of, row_of

IDENTITY = {"scenario": {"planets": {"c": {"mass": 1.5, "radius": math.nan}}}, "versions": {"numpy": "2.4.0"}}
COLUMNS = [DrawColumn("parameter", "star.mass"), DrawColumn("element", "period_d", "b")]


def made(path: Path) -> RunFile:
    return RunFile.create(path, identity=IDENTITY, bodies=["b", "c"], columns=COLUMNS, scenario_text="title = 'x'")


def row(number: int, refused: str = "") -> DrawRow:
    values = np.array([number + 0.1, math.nan], dtype="<f8").tobytes()
    state = b"" if refused else task_of(number).as_bytes()
    return DrawRow(number=number, state=state, values=values, refused=refused, weight=0.5, source_row=9, chain=2)


def survived(number: int, **changes: object) -> Outcome:
    usual = {"survival": Survival.SURVIVED, "time_d": 400.0, "span_d": 400.0, "method": "toy", "step_d": 1.0}
    return Outcome(number=number, **(usual | changes))


def same(one: Outcome, other: Outcome) -> bool:
    """Equal bit for bit, NaN equal to NaN, and of the same types."""
    return row_of(one) == row_of(other) and all(
        type(getattr(one, f.name)) is type(getattr(other, f.name)) for f in fields(Outcome)
    )


@pytest.fixture
def run(tmp_path):
    with made(tmp_path / "x.run") as run:
        run.add_draws([row(n, "e >= 1 (c)" if n == 3 else "") for n in range(10)])
        yield run


numbers = st.floats(allow_nan=True, allow_infinity=True)
arrays = st.lists(numbers, max_size=4).map(lambda values: np.array(values, dtype=np.float64))


@settings(max_examples=60, deadline=None)
@given(
    outcome=st.builds(
        Outcome,
        number=st.integers(0, 2**40),
        survival=st.sampled_from(Survival),
        ending=st.sampled_from(Ending),
        trust=st.sampled_from(Trust),
        motion=st.sampled_from(Motion),
        rearranged=st.booleans(),
        time_d=numbers,
        span_d=numbers,
        bodies=st.lists(st.integers(0, 9), max_size=3).map(tuple),
        method=st.sampled_from(["whfast", "ias15"]),
        step_d=numbers,
        energy_error=numbers,
        closest_pair=st.tuples(st.integers(0, 9), st.integers(0, 9)),
        a_least_au=arrays,
        drift=arrays,
        restarts=st.integers(0, 2),
        map_steps=st.integers(0, 2**60),
        history=st.text(st.characters(exclude_categories=["Cs"]), max_size=20),
    )
)
def test_an_outcome_comes_back_from_the_database_as_it_went_in(outcome):
    with sqlite3.connect(":memory:") as sql:
        flat = row_of(outcome)
        stored = sql.execute(f"SELECT {','.join('?' * len(flat))}", flat).fetchone()
    sql.close()
    assert same(outcome_of(stored), outcome)


def test_control_a_last_bit_is_noticed():
    assert not same(survived(0, energy_error=0.1), survived(0, energy_error=math.nextafter(0.1, 1.0)))


def test_an_outcome_in_the_file_comes_back_as_it_went_in(run):
    outcome = survived(4, bodies=(1, 2), drift=np.array([1e-9, math.nan]), megno=2.0 + 2**-51, closest_pair=(1, 2))
    run.record([Finished(outcome)])
    assert same(run.outcome(4), outcome)
    assert run.outcome(5) is None


def test_numbers_of_numpy_are_stored_as_numbers(run):
    run.record([Finished(survived(4, map_steps=np.int64(7), energy_error=np.float64(0.5), rearranged=np.bool_(True)))])
    assert (run.outcome(4).map_steps, run.outcome(4).energy_error, run.outcome(4).rearranged) == (7, 0.5, True)


def test_outcomes_come_as_columns_in_the_order_of_their_numbers(run):
    died = Outcome(
        number=0,
        survival=Survival.UNKNOWN,
        trust=Trust.PROCESS_DIED,
        time_d=0.0,
        span_d=400.0,
        method="auto",
        step_d=math.nan,
    )
    run.record([Finished(survived(5, a_most_au=np.array([1.0, 2.0]), bodies=(2,))), Finished(died)])
    columns = run.outcomes()
    assert columns["number"].tolist() == [0, 5]
    assert columns["trust"].tolist() == ["process died on it", "ok"]
    assert columns["bodies"].tolist() == [(), (2,)]
    assert columns["closest_pair"].shape == (2, 2)
    assert np.array_equal(columns["a_most_au"], [[math.nan, math.nan], [1.0, 2.0]], equal_nan=True)
    assert run.outcomes(upto=5)["number"].tolist() == [0]


def test_draws_come_back_as_arrays_with_their_columns(run):
    draws = run.draws()
    assert draws.refused.tolist() == [""] * 3 + ["e >= 1 (c)"] + [""] * 6
    assert draws.column("parameter", "star.mass").tolist() == [n + 0.1 for n in range(10)]
    assert np.isnan(draws.column("element", "period_d", "b")).all()
    assert (draws.weight.tolist(), draws.source_row.tolist(), draws.chain.tolist()) == ([0.5] * 10, [9] * 10, [2] * 10)
    with pytest.raises(KeyError):
        draws.column("element", "period_d", "c")


def test_a_file_without_draws_gives_empty_arrays(tmp_path):
    with made(tmp_path / "x.run") as run:
        assert run.draws().values.shape == (0, 2)
        assert run.outcomes()["drift"].shape == (0, 0)
        assert (run.draw_count(), run.prefix_done()) == (0, 0)


def test_the_states_that_are_stored_are_those_that_come_back(run):
    given_back = {task.number: task for task in run.tasks_pending(10)}
    assert sorted(given_back) == [0, 1, 2, 4, 5, 6, 7, 8, 9]  # not 3: it is no orbit
    assert given_back[5].as_bytes() == task_of(5).as_bytes()
    assert run.task(3) is None and run.task(5).as_bytes() == task_of(5).as_bytes()


def test_pending_tasks_come_in_order_from_any_page_with_their_checkpoints(run, monkeypatch):
    monkeypatch.setattr("stabcheck.store.reading.PAGE", 2)
    run.record([Finished(survived(1)), Checkpoint(6, b"here", 0.4)])
    pending = list(run.tasks_pending(9, first=1))
    assert [task.number for task in pending] == [2, 4, 5, 6, 7, 8]
    assert {task.number: task.checkpoint for task in pending}[6] == b"here"


def test_rows_may_be_stored_while_tasks_are_read(run, monkeypatch):
    monkeypatch.setattr("stabcheck.store.reading.PAGE", 2)
    seen = []
    for task in run.tasks_pending(10):
        run.record([Finished(survived(task.number))])
        seen.append(task.number)
    assert seen == [0, 1, 2, 4, 5, 6, 7, 8, 9]


def test_a_checkpoint_goes_when_its_draw_is_done_and_a_late_one_does_not_come_back(run):
    run.record([Checkpoint(2, b"a", 0.1), Checkpoint(2, b"b", 0.2), Checkpoint(4, b"c", 0.3)])
    assert run.checkpoint_shares() == {2: 0.2, 4: 0.3}
    run.record([Finished(survived(2))])
    run.record([Checkpoint(2, b"late", 0.9)])
    assert run.checkpoint_shares() == {4: 0.3}


def test_the_same_rows_twice_are_fine(run):
    before = run.dump()
    run.record([Finished(survived(1)), Finished(survived(2))])
    once = run.dump()
    run.record([Finished(survived(2)), Finished(survived(1)), Finished(survived(1))])
    run.add_draws([row(0), row(9)])
    assert run.dump() == once != before


def test_another_outcome_of_the_same_draw_is_a_loud_error_and_changes_nothing(run):
    run.record([Finished(survived(1))])
    before = run.dump()
    with pytest.raises(
        RunFileError, match=r"draw 1 is in the run file already.*\n(.*\n)*.*megno: None stored, 2.0 now"
    ):
        run.record([Finished(survived(0)), Finished(survived(1, megno=2.0))])
    assert run.dump() == before


def test_another_start_of_the_same_draw_is_a_loud_error(run):
    with pytest.raises(RunFileError, match="draw 1 is in the run file already"):
        run.add_draws([replace(row(1), weight=0.25)])


def test_an_outcome_of_a_draw_that_is_not_stored_is_refused(run):
    with pytest.raises(RunFileError):
        run.record([Finished(survived(10))])


def test_a_hand_over_is_not_stored_in_silence(run):
    with pytest.raises(RunFileError, match="hand-over"):
        run.record([HandOver(1, b"x", "too near")])


def test_the_prefix_ends_before_the_first_open_draw_and_counts_what_is_no_orbit_as_done(run):
    run.record([Finished(survived(n)) for n in (0, 1, 2, 5)])
    assert run.prefix_done() == 4
    assert run.prefix_done(start=2) == 4
    run.record([Finished(survived(n)) for n in (4, 6, 7, 8, 9)])
    assert run.prefix_done() == 10


def test_classes_count_what_verdicts_follow_from(run):
    broken = replace(survived(2), survival=Survival.BROKEN, time_d=100.0)
    run.record([Finished(survived(0)), Finished(survived(1)), Finished(broken)])
    key = (Survival.SURVIVED, False, Motion.UNSETTLED, Trust.OK)
    assert run.classes()[key] == (2, 2.0)
    assert run.classes()[(Survival.BROKEN, *key[1:])] == (1, 0.25)
    assert key not in run.classes(first=2) and run.classes(upto=1)[key] == (1, 1.0)


def test_warnings_are_counted_and_the_log_keeps_its_order(run):
    run.record([Finished(survived(0), ("slow",)), Finished(survived(1), ("slow", "odd"))])
    run.log("start", "a")
    run.log("stop", "b")
    assert run.warnings() == {"slow": 2, "odd": 1}
    assert [entry[1:] for entry in run.log_entries()] == [("start", "a"), ("stop", "b")]


def test_warnings_and_log_are_not_part_of_what_is_compared(tmp_path):
    dumps = []
    for name, words in (("a", ("slow",)), ("b", ())):
        with made(tmp_path / name) as run:
            run.add_draws([row(0)])
            run.record([Finished(survived(0), words)])
            run.log("note", name)
            dumps.append(run.dump())
    assert dumps[0] == dumps[1]


def test_after_a_clean_end_there_is_one_file_and_a_copy_of_it_is_whole(tmp_path):
    with made(tmp_path / "x.run") as run:
        run.add_draws([row(n) for n in range(10)])
        run.record([Finished(survived(1))])
        dump = run.dump()
    assert [file.name for file in tmp_path.iterdir()] == ["x.run"]
    (tmp_path / "copy.run").write_bytes((tmp_path / "x.run").read_bytes())
    with RunFile.open(tmp_path / "copy.run") as copy:
        assert (copy.dump(), copy.bodies, copy.scenario_text) == (dump, ("b", "c"), "title = 'x'")


def test_control_a_copy_of_the_main_file_of_a_live_run_is_not_whole(run, tmp_path):
    run.record([Finished(survived(1))])
    (tmp_path / "copy.run").write_bytes(run.path.read_bytes())
    with RunFile.open(tmp_path / "copy.run") as copy:
        assert copy.draw_count() == 0


def test_a_reader_sees_what_is_committed_while_the_run_is_live(run):
    run.record([Finished(survived(1))])
    with RunFile.open(run.path) as reader:
        assert reader.outcomes()["number"].tolist() == [1]
        run.record([Finished(survived(2))])
        assert reader.outcomes()["number"].tolist() == [1, 2]
        with pytest.raises(RunFileError, match="for reading only"):
            reader.record([Finished(survived(4))])


def test_a_reader_that_stays_does_not_keep_the_run_from_ending(tmp_path):
    with made(tmp_path / "x.run") as run:
        run.add_draws([row(0)])
        reader = RunFile.open(run.path)
        reader.dump()
    with RunFile.open(tmp_path / "x.run") as again:
        assert again.draw_count() == 1
    reader.close()


def test_a_second_writer_is_refused_by_host_and_process(run):
    with pytest.raises(RunFileBusy, match=f"process {os.getpid()} on {socket.gethostname()}, since 20"):
        RunFile.open(run.path, for_writing=True)


def test_the_lock_of_a_writer_that_is_gone_is_free(tmp_path):
    with made(tmp_path / "x.run"):
        pass
    (tmp_path / "x.run.lock").write_text('{"host": "elsewhere", "pid": 1, "since": "2020-01-01 00:00:00"}')
    with RunFile.open(tmp_path / "x.run", for_writing=True) as run:
        assert run.draw_count() == 0


def test_nothing_is_ever_overwritten(run, tmp_path):
    run.close()
    with pytest.raises(RunFileError, match="a file already"):
        made(run.path)


def test_a_resume_with_the_same_identity_goes_on(tmp_path):
    made(tmp_path / "x.run").close()
    with RunFile.open(tmp_path / "x.run", for_writing=True, identity=IDENTITY) as run:
        assert run.about("identity sha256") == digest(canonical_text(IDENTITY))


def test_a_resume_with_something_else_is_refused_item_by_item_before_anything_is_touched(tmp_path):
    path = tmp_path / "x.run"
    made(path).close()
    before = path.read_bytes()
    other = {
        "scenario": {"planets": {"c": {"mass": 1.6, "radius": math.nan}}},
        "versions": {"numpy": "2.4.0", "numba": "1"},
    }
    with pytest.raises(ResumeRefused) as refused:
        RunFile.open(path, for_writing=True, identity=other)
    assert refused.value.differing == {"scenario.planets.c.mass": (1.5, 1.6), "versions.numba": (NOT_THERE, "1")}
    assert path.read_bytes() == before and [file.name for file in tmp_path.iterdir()] == ["x.run"]


@pytest.mark.parametrize(
    "then, now",
    [({"a": True}, {"a": 1}), ({"a": 1}, {"a": 1.0}), ({"a": [1, 2]}, {"a": [2, 1]}), ({"a": {}}, {"a": 0})],
)
def test_what_python_calls_equal_or_hides_in_a_list_still_differs(then, now):
    assert differing(then, now)
    assert not differing(then, then)


def test_the_identity_of_a_run_cannot_be_changed(run):
    run.say_about("draws asked", "10")
    run.say_about("draws asked", "20")
    assert run.about("draws asked") == "20"
    with pytest.raises(RunFileError):
        run.say_about("identity", "{}")


def test_the_file_holds_no_pickle(run):
    run.record([Finished(survived(1, drift=np.array([1.0]))), Checkpoint(2, b"blob", 0.5)])
    run.close()
    with sqlite3.connect(run.path) as sql:
        blobs = [value for table in ("draws", "outcomes") for r in sql.execute(f"SELECT * FROM {table}") for value in r]
    sql.close()
    blobs = [value for value in blobs if isinstance(value, bytes) and value]
    assert blobs and all(len(blob) % 8 == 0 for blob in blobs)


def test_reading_many_tasks_needs_no_more_memory_than_reading_few(tmp_path):
    with made(tmp_path / "x.run") as run:
        for first in range(0, 6000, 1000):
            run.add_draws(rows_of(first, 1000))
        peaks = []
        for upto in (1000, 6000):
            tracemalloc.start()
            assert sum(1 for _ in run.tasks_pending(upto)) == upto
            peaks.append(tracemalloc.get_traced_memory()[1])
            tracemalloc.stop()
    assert peaks[1] < 1.5 * peaks[0]  # a page of 256 tasks either way; six times as much if they were all held
