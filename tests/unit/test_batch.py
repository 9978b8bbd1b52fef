"""Runners: whoever carries out the tasks, the rows are the same, and a death or a hang costs no other draw."""

import errno
import math
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
from toy_engine import STEPS, ToyEngine, rows_of, task_of
from toy_owner import IDENTITY, PLAN, carry

from stabcheck.batch.base import Pulse, engine_of
from stabcheck.batch.channel import OwnerEnd, WorkerEnd, framed
from stabcheck.batch.in_place import InPlace
from stabcheck.batch.interrupt import StopRequest
from stabcheck.batch.local import LocalWorkers
from stabcheck.batch.progress import ProgressLine, Status, Tally, clock_time, described, rate_text, spans_left
from stabcheck.errors import WorkerError
from stabcheck.outcome import Checkpoint, Finished, Survival, Trust
from stabcheck.plan import Plan
from stabcheck.store import DrawColumn, RunFile
from stabcheck.verdict import Verdict

DRAWS = 40
TOY = ("toy_engine:ToyEngine",)
HERE = Path(__file__).parent.parent


@pytest.fixture
def measure(tmp_path):
    """What the run comes to in place: the measure for every other runner."""
    return carry(tmp_path / "measure.run", DRAWS, 0)


def entries(path: Path, event: str) -> list[str]:
    with RunFile.open(path) as run:
        return [text for _, kind, text in run.log_entries() if kind == event]


def messages_of(runner, numbers):
    return [m for m in runner.run(map(task_of, numbers), PLAN) if not isinstance(m, Pulse)]


@pytest.mark.parametrize("workers", [1, 3])
def test_rows_are_the_same_bit_for_bit_whoever_ran_them(tmp_path, measure, workers):
    assert carry(tmp_path / "x.run", DRAWS, workers) == measure


def test_rows_do_not_depend_on_how_many_draws_a_worker_follows_at_once(tmp_path, measure):
    assert carry(tmp_path / "x.run", DRAWS, 2, ["toy_engine:Lanes"]) == measure


def test_rows_do_not_depend_on_hand_overs(tmp_path, measure, monkeypatch):
    monkeypatch.setenv("TOY_HAND_OVER", "1,4,5,20")
    assert carry(tmp_path / "x.run", DRAWS, 2) == measure
    assert carry(tmp_path / "y.run", DRAWS, 2, ["toy_engine:Lanes", "toy_engine:ToySecond"]) == measure


def test_control_another_number_of_draws_is_another_dump(tmp_path, measure):
    assert carry(tmp_path / "x.run", DRAWS - 1, 0) != measure


def test_a_hand_over_without_another_engine_is_an_error(monkeypatch):
    monkeypatch.setenv("TOY_HAND_OVER", "1")
    with pytest.raises(WorkerError, match="given up by the last engine"):
        messages_of(InPlace(engines=TOY), [1])


def test_a_run_that_has_grown_begins_with_the_same_rows(tmp_path, measure):
    carry(tmp_path / "x.run", 25, 2)
    assert carry(tmp_path / "x.run", DRAWS, 1) == measure


def test_nothing_to_do_starts_no_worker():
    assert list(LocalWorkers(2, engines=["no.such:Engine"]).run([], PLAN)) == []


def test_tasks_are_taken_as_they_are_needed():
    taken = []

    def endless():
        for number in range(10**9):
            taken.append(number)
            yield task_of(number)

    finished = 0
    for message in LocalWorkers(2, engines=TOY).run(endless(), PLAN):
        finished += isinstance(message, Finished)
        if finished == 300:
            break
    # for each worker a stock, a batch on its way, results on their way back, and a stock that waits here
    assert len(taken) <= finished + 2 * (64 + 64 + 64 + 64)


def test_a_draw_that_kills_its_worker_twice_is_recorded_and_no_other_draw_suffers(tmp_path, measure, monkeypatch):
    monkeypatch.setenv("TOY_CRASH", "5,11")
    path = tmp_path / "x.run"
    dump = carry(path, DRAWS, 2).splitlines()
    with RunFile.open(path) as run:
        died = {n: run.outcome(n) for n in (5, 11)}
    for outcome in died.values():
        assert (outcome.survival, outcome.trust) == (Survival.UNKNOWN, Trust.PROCESS_DIED)
        assert outcome.span_d == STEPS and outcome.time_d == 0.0 and math.isnan(outcome.energy_error)
    others = [line for line in measure.splitlines() if line.split("\t")[0] not in ("5", "11")]
    assert [line for line in dump if line.split("\t")[0] not in ("5", "11")] == others
    assert len(entries(path, "worker died")) >= 3 and len(entries(path, "draw given up")) == 2


def test_what_a_draw_that_kills_comes_to_does_not_depend_on_the_number_of_workers(tmp_path, monkeypatch):
    monkeypatch.setenv("TOY_CRASH", "5")
    assert carry(tmp_path / "x.run", 12, 1) == carry(tmp_path / "y.run", 12, 2)


def test_an_exception_of_an_engine_costs_the_draw_and_is_logged(tmp_path, monkeypatch):
    monkeypatch.setenv("TOY_RAISE", "4")
    path = tmp_path / "x.run"
    carry(path, 12, 1)
    with RunFile.open(path) as run:
        assert run.outcome(4).trust is Trust.PROCESS_DIED
        assert run.finished_count() == 10  # 12 without the two that are no orbits
    assert "RuntimeError: a defect at draw 4" in entries(path, "engine failed")[0]


def test_in_place_an_exception_goes_through(monkeypatch):
    monkeypatch.setenv("TOY_RAISE", "4")
    with pytest.raises(RuntimeError, match="a defect at draw 4"):
        messages_of(InPlace(engines=TOY), [4])


def test_what_hangs_is_not_finished_and_comes_right_on_resume(tmp_path, measure, monkeypatch):
    path = tmp_path / "x.run"
    monkeypatch.setenv("TOY_HANG", "3")
    carry(path, DRAWS, 2, hang_after_s=1.0)
    with RunFile.open(path) as run:
        assert run.outcome(3) is None and run.finished_count() == DRAWS - 4  # three are no orbits
    assert any(
        ("tried again on resume" in text and "[3]" in text) or "one by one" in text
        for text in entries(path, "worker stuck")
    )
    monkeypatch.delenv("TOY_HANG")
    assert carry(path, DRAWS, 1) == measure


def test_progress_messages_keep_the_watch_dog_quiet(monkeypatch):
    monkeypatch.setenv("TOY_PAUSE_S", "5")
    found = messages_of(LocalWorkers(1, engines=TOY, hang_after_s=2.5), [1])
    assert isinstance(found[-1], Finished)
    assert any(isinstance(message, Checkpoint) for message in found)


@pytest.mark.parametrize("engine", ["toy_engine:NeverReady", "toy_engine:NoSuch", "no_such_module:Engine"])
def test_workers_that_cannot_begin_are_not_started_for_ever_and_their_words_are_told(engine):
    started = time.monotonic()
    with pytest.raises(WorkerError) as refused:
        messages_of(LocalWorkers(2, engines=[engine]), [1])
    assert time.monotonic() - started < 30.0
    assert any(word in refused.value.why for word in ("no compiler on this machine", "NoSuch", "no_such_module"))


def test_workers_that_keep_dying_end_the_run_with_words(tmp_path, monkeypatch):
    monkeypatch.setattr("stabcheck.batch.local.DEATHS_IN_A_ROW", 3)
    monkeypatch.setenv("TOY_CRASH", ",".join(map(str, range(DRAWS))))
    with pytest.raises(WorkerError, match="3 workers died one after the other"):
        messages_of(LocalWorkers(1, engines=TOY), range(DRAWS))


def test_no_worker_is_an_error():
    with pytest.raises(WorkerError):
        LocalWorkers(0)


def test_the_owner_imports_nothing_that_integrates_and_its_environment_is_as_before(run_python):
    done = run_python(
        "import sys, os; sys.path.insert(0, sys.argv[1])\n"
        "from toy_engine import task_of\n"
        "from stabcheck.batch.local import LocalWorkers\n"
        "import stabcheck.screen\n"
        "from stabcheck.plan import Plan\n"
        "list(LocalWorkers(1, engines=['toy_engine:ToyEngine']).run([task_of(1)], Plan()))\n"
        "print(sorted({'numba', 'rebound', 'llvmlite'} & set(sys.modules)), 'OMP_NUM_THREADS' in os.environ)",
        str(HERE),
    )
    assert done.stdout.strip() == "[] False", done.stderr


GUARDLESS = """
import sys
sys.path.insert(0, {tests!r})
from toy_engine import task_of
from stabcheck.batch.local import LocalWorkers
from stabcheck.batch.processes import refuse_while_importing_main
from stabcheck.errors import WorkerError
from stabcheck.plan import Plan
{guard}
try:
    print(len(list(LocalWorkers(1, engines=["toy_engine:ToyEngine"]).run([task_of(1)], Plan()))) > 0)
except WorkerError as error:
    import multiprocess
    if multiprocess.parent_process() is None:
        print(error)
        sys.exit(2)
    raise
"""


def test_a_script_without_the_usual_guard_is_told_to_have_one(tmp_path):
    script = tmp_path / "script.py"
    script.write_text(GUARDLESS.format(tests=str(HERE), guard=""))
    environment = {**os.environ, "PYTHONPATH": str(HERE.parent)}
    done = subprocess.run([sys.executable, script], capture_output=True, text=True, env=environment, timeout=60)
    assert done.returncode == 2
    assert 'if __name__ == "__main__":' in done.stdout and "freeze" not in done.stdout + done.stderr


def test_control_a_script_with_the_guard_runs(tmp_path):
    script = tmp_path / "script.py"
    body = GUARDLESS.format(tests=str(HERE), guard="if __name__ != '__main__':\n    raise SystemExit('unused')\n")
    guarded = body.replace("if __name__ != '__main__':\n    raise SystemExit('unused')\n", "")
    head, _, tail = guarded.partition("try:")
    indented = "\n".join("    " + line for line in ("try:" + tail).splitlines())
    script.write_text(f"{head}if __name__ == '__main__':\n{indented}\n")
    environment = {**os.environ, "PYTHONPATH": str(HERE.parent)}
    done = subprocess.run([sys.executable, script], capture_output=True, text=True, env=environment, timeout=60)
    assert (done.returncode, done.stdout.strip()) == (0, "True"), done.stderr


def test_an_engine_that_is_not_there_is_refused_by_name():
    with pytest.raises(WorkerError, match="'toy_engine:Nothing' cannot be loaded"):
        engine_of("toy_engine:Nothing")
    assert isinstance(engine_of("toy_engine:ToyEngine"), ToyEngine)


# -- the pipe


def test_messages_come_whole_however_they_are_cut():
    reader, writer = os.pipe()
    owner = OwnerEnd(reader)
    data = framed(("messages", [1, 2], False)) + framed(("ready", None))
    got = []
    for k in range(len(data)):
        os.write(writer, data[k : k + 1])
        got += owner.receive()
    assert got == [("messages", [1, 2], False), ("ready", None)] and not owner.ended
    os.close(writer)
    assert owner.receive() == [] and owner.ended
    os.close(reader)


def test_half_a_message_of_a_dead_writer_is_dropped():
    reader, writer = os.pipe()
    owner = OwnerEnd(reader)
    os.write(writer, framed("whole") + framed("half")[:-1])
    os.close(writer)
    assert owner.receive() == ["whole"] and owner.ended
    os.close(reader)


def test_the_owner_is_not_blocked_by_a_partner_that_does_not_read():
    import socket

    ours, theirs = socket.socketpair()
    owner, worker = OwnerEnd(ours.fileno()), WorkerEnd(theirs.fileno())
    big = b"x" * 4_000_000
    owner.send(big)
    assert owner.wants_to_write
    messages = worker.receive()
    import threading

    reader = threading.Thread(target=lambda: got.append(next(messages)))
    got: list[bytes] = []
    reader.start()
    while owner.wants_to_write:
        owner.flush()
    reader.join()
    assert got == [big]
    ours.close()
    theirs.close()


# -- stops


def test_the_first_signal_is_remembered_and_the_second_ends_at_once():
    stop = StopRequest()
    with stop.listening():
        assert not stop()
        os.kill(os.getpid(), signal.SIGTERM)
        assert stop() and stop.by == "SIGTERM"
        with pytest.raises(KeyboardInterrupt):
            os.kill(os.getpid(), signal.SIGINT)
            time.sleep(1.0)


def test_the_handlers_of_before_come_back_and_what_is_ignored_stays_ignored():
    before = signal.getsignal(signal.SIGINT)
    hung_up = signal.signal(signal.SIGHUP, signal.SIG_IGN)
    try:
        stop = StopRequest()
        with stop.listening():
            os.kill(os.getpid(), signal.SIGHUP)
            assert not stop()
            assert signal.getsignal(signal.SIGINT) is not before
        assert signal.getsignal(signal.SIGINT) is before
    finally:
        signal.signal(signal.SIGHUP, hung_up)


@pytest.mark.parametrize("workers", [0, 2])
def test_a_stop_in_order_keeps_what_is_in_flight(tmp_path, measure, monkeypatch, workers):
    monkeypatch.setenv("TOY_PAUSE_S", "0.5")
    path = tmp_path / "x.run"

    class Later(StopRequest):
        """Asked for two seconds after the first draw is in the file, however long the workers took to begin."""

        def __init__(self) -> None:
            super().__init__()
            self.first_seen = math.inf

        def __call__(self) -> bool:
            if math.isinf(self.first_seen):
                with RunFile.open(path) as live:
                    self.first_seen = time.monotonic() if live.finished_count() else math.inf
            return time.monotonic() > self.first_seen + 2.0

    carry(path, DRAWS, workers, stop=Later())
    with RunFile.open(path) as run:
        assert run.finished_count() < DRAWS // 2
        assert run.checkpoint_shares() and all(share > 0.0 for share in run.checkpoint_shares().values())
    monkeypatch.delenv("TOY_PAUSE_S")
    assert carry(path, DRAWS, 1) == measure


# -- progress


def test_the_end_is_estimated_from_spans_not_from_rows(tmp_path):
    clock = [0.0]
    with RunFile.create(
        tmp_path / "x.run", identity=IDENTITY, bodies=["b"], columns=[DrawColumn("parameter", "number")]
    ) as run:
        run.add_draws(rows_of(0, 100))
        tally = Tally(run, 100, clock=lambda: clock[0])
        tally.ready(1)
        # Ten draws broke at a hundredth of their span: they say next to nothing about how long the others take.
        quick = [m for m in ToyEngine().follow(map(task_of, range(0, 30, 3)), Plan())]
        for message in quick:
            tally.add(message)
        tally.add(Checkpoint(1, b"", 0.5))
        run.record(quick)
        clock[0] = 100.0
        status = tally.status()
    assert status.done == 10 and status.prefix == 1
    # 10 x 0.25 + 0.5 spans in 100 s; left: half a span under way, and 89 draws like the prefix, a quarter each.
    assert status.left_s == pytest.approx((0.5 + 89 * 0.25) / (3.0 / 100.0))
    assert status.left_s > 5 * 90 / status.rate_per_s / 10  # not rows


def test_what_an_earlier_session_did_does_not_count_as_speed(tmp_path):
    clock = [0.0]
    with RunFile.create(
        tmp_path / "x.run", identity=IDENTITY, bodies=["b"], columns=[DrawColumn("parameter", "number")]
    ) as run:
        run.add_draws(rows_of(0, 10))
        finished = [m for m in ToyEngine().follow(map(task_of, (1, 2)), Plan())]
        run.record([finished[0], Checkpoint(2, b"", 0.9)])
        tally = Tally(run, 10, clock=lambda: clock[0])
        tally.ready(1)
        clock[0] = 10.0
        assert tally.status().left_s is None and tally.status().rate_per_s == 0.0
        tally.add(finished[1])
        run.record([finished[1]])
        assert tally.status().left_s == pytest.approx(8 * 1.0 / (0.1 / 10.0))


def test_work_left_counts_draws_under_way_to_their_span():
    assert spans_left(10, [0.25, 0.5], 0.5) == pytest.approx(0.75 + 0.5 + 8 * 0.5)
    assert spans_left(0, [], 0.5) == 0.0


def test_the_end_is_a_clock_time_with_its_day_unless_it_is_today():
    noon = time.mktime((2026, 3, 4, 12, 0, 0, 0, 0, -1))
    assert clock_time(3600.0, noon) == "13:00"
    assert clock_time(20 * 3600.0, noon) == "Thu 08:00"
    assert clock_time(10 * 86_400.0, noon) == "14 Mar 12:00"


def test_rates_come_in_a_readable_unit():
    assert [rate_text(rate) for rate in (12.0, 0.5, 0.004, 1e-5)] == ["12/s", "30/min", "14.4/h", "0.036/h"]


STATUS = Status(
    done=12,
    total=50,
    rate_per_s=2.0,
    left_s=19.0,
    prefix=10,
    verdicts={Verdict.BROKEN: 4, Verdict.REGULAR: 5},
    refused=1,
    working=2,
)


def test_the_line_says_rate_end_and_the_verdicts_of_the_prefix():
    text = described(STATUS, time.mktime((2026, 3, 4, 12, 0, 0, 0, 0, -1)))
    assert text == "2/s   done about 12:00   first 10: broken 4, regular 5, not an orbit 1"


class Screen:
    """A terminal, or a pipe, that can vanish."""

    def __init__(self, tty: bool) -> None:
        self.text, self.tty, self.broken = "", tty, False

    def isatty(self) -> bool:
        return self.tty

    def write(self, text: str) -> int:
        if self.broken:
            raise OSError(errno.EIO, "Input/output error")
        self.text += text
        return len(text)

    def flush(self) -> None:
        if self.broken:
            raise OSError(errno.EIO, "Input/output error")


def test_on_a_terminal_it_is_one_line_and_elsewhere_plain_lines_now_and_then():
    terminal, pipe = Screen(tty=True), Screen(tty=False)
    lines = [ProgressLine(screen, plain_every_s=3600.0) for screen in (terminal, pipe)]
    for line in 5 * lines:
        line(STATUS)
    assert "12/50 draws |" in terminal.text and "\r" in terminal.text and "\n" not in terminal.text
    assert "12/50 draws   2/s" in pipe.text and pipe.text.count("\n") == 1 and "\r" not in pipe.text


@pytest.mark.parametrize("tty", [True, False])
def test_a_terminal_that_vanishes_does_not_lose_the_run(tmp_path, measure, tty, monkeypatch):
    monkeypatch.setattr("stabcheck.batch.carry.SHOW_EVERY_S", 0.0)
    screen = Screen(tty)
    line = ProgressLine(screen, plain_every_s=0.0)
    screen.broken = True
    assert carry(tmp_path / "x.run", DRAWS, 0, progress=line) == measure
    assert "Input/output error" in line.gone


@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="reads /proc")
def test_a_worker_has_one_thread_a_library_a_session_of_its_own_and_no_ctrl_c():
    runner = LocalWorkers(1, engines=TOY).run(iter([task_of(1)]), PLAN)
    while not (isinstance(message := next(runner), Pulse) and message.working):
        pass
    (pid,) = (p for p in children_of(os.getpid()) if b"spawn_main" in Path(f"/proc/{p}/cmdline").read_bytes())
    environment = Path(f"/proc/{pid}/environ").read_bytes().split(b"\0")
    assert {b"OMP_NUM_THREADS=1", b"OPENBLAS_NUM_THREADS=1", b"MKL_NUM_THREADS=1"} <= set(environment)
    assert os.getsid(pid) == pid
    blocked = int(
        next(line for line in Path(f"/proc/{pid}/status").read_text().splitlines() if "SigBlk" in line)[7:], 16
    )
    assert blocked & 1 << (signal.SIGINT - 1) and not blocked & 1 << (signal.SIGTERM - 1)
    runner.close()
    assert not Path(f"/proc/{pid}").exists()


def children_of(pid: int) -> list[int]:
    return [int(child) for child in Path(f"/proc/{pid}/task/{pid}/children").read_text().split()]


def test_a_worker_may_be_chatty_without_filling_the_disk(monkeypatch):
    from stabcheck.batch.handle import Worker

    worker = Worker("chatty", TOY, PLAN)
    try:
        os.write(worker._stderr.fileno(), b"x" * 2_000_000 + b"last words")
        assert worker.stderr_text().endswith("last words")
        worker.trim_stderr()
        assert worker.stderr_text() == ""
    finally:
        worker.end()
    assert np.isfinite(worker.process.exitcode)
