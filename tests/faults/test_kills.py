"""Kill the owner or a worker at named and at random moments: after a resume no bit of the result is different."""

import os
import random
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
import toy_engine
from toy_owner import carry

from stabcheck.errors import StabcheckError
from stabcheck.report.export import export
from stabcheck.store import RunFile
from stabcheck.store.killpoints import NAMES

TESTS = Path(__file__).parent.parent
DRAWS = 40
HANDED_OVER = "1,4,10,19,22"

OWNER_KILLS = [
    ("run file created", 1),
    ("draws added", 1),
    ("draws added", 3),
    ("before commit", 1),
    ("before commit", 3),
    ("in commit", 1),
    ("in commit", 2),
    ("in commit", 5),
    ("after commit", 1),
    ("after commit", 4),
    ("after commit", 6),
    ("checkpoint stored", 1),
    ("checkpoint stored", 3),
]
WORKER_KILLS = [
    ("worker start", 1),
    ("half-sent message", 1),
    ("half-sent message", 2),
    ("half-sent message", 4),
    ("half-sent message", 7),
    ("hand-over", 1),
    ("hand-over", 2),
]


@pytest.fixture(scope="module")
def measure(tmp_path_factory):
    """An undisturbed run in one process."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("TOY_HAND_OVER", HANDED_OVER)
        return carry(tmp_path_factory.mktemp("measure") / "x.run", DRAWS, 0)


@pytest.fixture(autouse=True)
def hand_overs(monkeypatch):
    monkeypatch.setenv("TOY_HAND_OVER", HANDED_OVER)


def owner(path: Path, workers: int, pause_s: float = 0.06, **environment: str) -> subprocess.Popen[bytes]:
    python_path = f"{TESTS}{os.pathsep}{TESTS.parent}"
    changed = {**os.environ, "PYTHONPATH": python_path, "TOY_PAUSE_S": str(pause_s), **environment}
    command = [sys.executable, str(TESTS / "toy_owner.py"), str(path), str(DRAWS), str(workers)]
    return subprocess.Popen(
        command, env=changed, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE, start_new_session=True
    )


def ended(process: subprocess.Popen[bytes]) -> int:
    _, said = process.communicate(timeout=60)
    assert b"Traceback" not in said, said.decode()
    return process.returncode


def children_of(pid: int) -> list[int]:
    """Workers of an owner, without what keeps the library's books."""
    try:
        children = [int(child) for child in Path(f"/proc/{pid}/task/{pid}/children").read_text().split()]
        return [child for child in children if b"spawn_main" in Path(f"/proc/{child}/cmdline").read_bytes()]
    except (FileNotFoundError, ProcessLookupError):
        return []


def is_running(pid: int) -> bool:
    try:
        return Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[0] != "Z"
    except (FileNotFoundError, ProcessLookupError):
        return False


def finished(path: Path) -> int:
    try:
        with RunFile.open(path) as run:
            return run.finished_count()
    except StabcheckError:
        return 0  # it is not there yet


def log_of(path: Path) -> list[tuple[str, str, str]]:
    with RunFile.open(path) as run:
        return run.log_entries()


def wait_until(true, within_s: float = 30.0) -> None:
    deadline = time.monotonic() + within_s
    while not true():
        assert time.monotonic() < deadline, "it did not happen"
        time.sleep(0.01)


def test_every_named_point_is_used_here():
    assert {name for name, _ in OWNER_KILLS + WORKER_KILLS} == set(NAMES)


@pytest.mark.parametrize("point, count", OWNER_KILLS)
def test_an_owner_killed_at_a_named_point_loses_no_bit(tmp_path, measure, point, count):
    path = tmp_path / "x.run"
    assert ended(owner(path, 2, STABCHECK_KILL_AT=f"{point}:{count}")) == -signal.SIGKILL  # it came there
    assert finished(path) < len(measure.splitlines()) - 1
    assert carry(path, DRAWS, 1) == measure


@pytest.mark.parametrize("point, count", WORKER_KILLS)
def test_a_worker_killed_at_a_named_point_loses_no_bit(tmp_path, measure, point, count):
    path, token = tmp_path / "x.run", tmp_path / "killed"
    assert ended(owner(path, 2, STABCHECK_KILL_AT=f"{point}:{count}:{token}")) == 0
    assert token.exists()  # it came there
    with RunFile.open(path) as run:
        assert sum(kind == "worker died" for _, kind, _ in run.log_entries()) == 1
        assert run.dump() == measure


@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="finds the workers in /proc")
@pytest.mark.parametrize("seed", [1, 2])
def test_a_run_killed_ten_times_at_random_loses_no_bit(tmp_path, measure, seed):
    chance, path = random.Random(seed), tmp_path / "x.run"
    for _ in range(10):
        process = owner(path, chance.choice([1, 2, 3]), pause_s=0.2)
        begun = finished(path)
        wait_until(lambda p=process, b=begun: children_of(p.pid) or finished(path) > b or p.poll() is not None)
        time.sleep(chance.uniform(0.0, 0.6))
        workers = children_of(process.pid)
        if workers and chance.random() < 0.5:  # one a session: a draw on which a process dies twice is given up
            os.kill(chance.choice(workers), signal.SIGKILL)
            time.sleep(chance.uniform(0.0, 0.3))
        process.kill()
        assert ended(process) in (0, -signal.SIGKILL)
    assert carry(path, DRAWS, 2) == measure


REAL_DRAWS = 6
REAL_KILLS = {
    "one": [("in commit", 3, ""), ("checkpoint stored", 2, ""), ("half-sent message", 4, "worker")],
    "other": [("hand-over", 2, "worker")],
}
"""Two runs and how they are killed, one session after the other; one whose worker is killed comes to its end."""


def real_owner(path: Path, workers: int, kill_at: str = "") -> int:
    """Screen with the real engine in a process of its own; its exit code."""
    python_path = f"{TESTS}{os.pathsep}{TESTS.parent}"
    environment = {**os.environ, "PYTHONPATH": python_path, **({"STABCHECK_KILL_AT": kill_at} if kill_at else {})}
    words = [str(path), str(TESTS / "faults" / "handovers.toml"), str(REAL_DRAWS), str(workers)]
    command = [sys.executable, str(TESTS / "real_owner.py"), *words]
    return ended(subprocess.Popen(command, env=environment, stderr=subprocess.PIPE, start_new_session=True))


def table(path: Path) -> str:
    """Give what a user gets, and every digit of the outcomes."""
    export(path, path.with_suffix(".csv"))
    with RunFile.open(path) as run:
        return path.with_suffix(".csv").read_text() + run.dump()


@pytest.mark.slow
def test_runs_of_the_real_engine_killed_in_its_stages_lose_no_bit(tmp_path):
    assert real_owner(tmp_path / "whole.run", 0) == 0
    expected = table(tmp_path / "whole.run")
    assert "close pair" in expected  # the scenario is one with hand-overs
    for name, kills in REAL_KILLS.items():
        path = tmp_path / f"{name}.run"
        for point, count, who in kills:
            token = tmp_path / f"{name} killed at {point}"
            code = real_owner(path, 1, f"{point}:{count}:{token}")
            assert token.exists(), f"it did not come to {point!r}"
            assert code == (0 if who == "worker" else -signal.SIGKILL)
        assert sum(event == "worker died" for _, event, _ in log_of(path)) == 1
        assert table(path) == expected


@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="finds the workers in /proc")
def test_workers_end_when_their_owner_is_killed(tmp_path):
    process = owner(tmp_path / "x.run", 2, pause_s=2.0)
    wait_until(lambda: finished(tmp_path / "x.run") > 0)
    workers = children_of(process.pid)
    assert len(workers) == 2
    process.kill()
    ended(process)
    wait_until(lambda: not any(map(is_running, workers)), within_s=5.0)


def test_a_killed_owner_leaves_no_lock_behind_while_its_workers_may_still_run(tmp_path):
    path = tmp_path / "x.run"
    process = owner(path, 2, pause_s=2.0)
    wait_until(lambda: finished(path) > 0)
    process.kill()
    ended(process)
    RunFile.open(path, for_writing=True).close()


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM, signal.SIGHUP])
def test_a_stop_signal_ends_in_order_with_checkpoints_and_the_run_goes_on(tmp_path, measure, number):
    path = tmp_path / "x.run"
    process = owner(path, 2, pause_s=0.5)
    wait_until(lambda: finished(path) > 2)
    os.killpg(process.pid, number)  # the whole session, as a terminal does
    assert ended(process) == 130
    assert [file.name for file in tmp_path.iterdir()] == ["x.run"]  # a clean end: one file
    with RunFile.open(path) as run:
        assert len(run.checkpoint_shares()) >= 1
        assert not [entry for entry in run.log_entries() if entry[1] == "worker died"]
    assert carry(path, DRAWS, 1) == measure


def test_a_standard_error_that_is_gone_does_not_lose_the_run(tmp_path, measure):
    path = tmp_path / "x.run"
    process = owner(path, 2)
    assert process.stderr is not None
    process.stderr.close()
    assert process.wait(timeout=60) == 0
    with RunFile.open(path) as run:
        assert run.dump() == measure


def test_control_a_resume_that_is_not_exact_is_noticed(tmp_path, measure, monkeypatch):
    path = tmp_path / "x.run"
    ended(owner(path, 1, pause_s=0.2, STABCHECK_KILL_AT="checkpoint stored:2"))

    class LastBitOff:
        def unpack(self, blob: bytes) -> tuple[int, float]:
            step, x = blob_format.unpack(blob)
            return step, x * (1.0 + 2.0**-52)

        pack = staticmethod(toy_engine._BLOB.pack)

    blob_format = toy_engine._BLOB
    monkeypatch.setattr(toy_engine, "_BLOB", LastBitOff())
    assert carry(path, DRAWS, 0) != measure
