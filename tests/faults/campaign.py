"""Kill a run hundreds of times, at named points and at random moments, and keep a record of each kill.

``python tests/faults/campaign.py --kills 500 --record kills.jsonl`` uses the toy engine; with ``--scenario FILE`` it
screens that scenario with its own engine. Runs are killed and resumed until they are done, each is compared with an
undisturbed run that had another number of workers, and then the next one begins. Each line of the record is a kill, or
the comparison at the end of a run. The exit code is 1 if any run differed by a bit.
"""

import argparse
import json
import os
import random
import signal
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

TESTS = Path(__file__).parent.parent
OWNER_POINTS = ("draws added", "before commit", "in commit", "after commit", "checkpoint stored", "run file created")
WORKER_POINTS = ("half-sent message", "worker start", "hand-over")

SCREEN = """
import sys
from stabcheck.screen import screen
if __name__ == "__main__":
    screen(sys.argv[2], run_file=sys.argv[1], draws=int(sys.argv[3]), workers=int(sys.argv[4]))
"""


@dataclass(frozen=True)
class Subject:
    """What is run: the command for a run file and a number of workers, and the longest useful wait before a kill."""

    command: Callable[[Path, int], list[str]]
    environment: dict[str, str]
    longest_s: float


def toy(draws: int) -> Subject:
    script = str(TESTS / "toy_owner.py")
    return Subject(
        lambda path, workers: [sys.executable, script, str(path), str(draws), str(workers)],
        {"TOY_PAUSE_S": "0.1", "TOY_HAND_OVER": ",".join(map(str, range(1, draws, 7)))},
        1.5,
    )


def scenario(file: Path, draws: int, folder: Path, longest_s: float) -> Subject:
    script = folder / "owner.py"  # a file: workers read the main script again
    script.write_text(SCREEN)
    return Subject(
        lambda path, workers: [sys.executable, str(script), str(path), str(file.resolve()), str(draws), str(workers)],
        {},
        longest_s,
    )


def started(subject: Subject, path: Path, workers: int, **environment: str) -> subprocess.Popen[bytes]:
    python_path = os.pathsep.join(map(str, (TESTS, TESTS.parent)))
    changed = {**os.environ, "PYTHONPATH": python_path, **subject.environment, **environment}
    return subprocess.Popen(
        subject.command(path, workers),
        env=changed,
        stdout=subprocess.DEVNULL,
        stderr=subprocess.PIPE,
        start_new_session=True,
    )


def workers_of(pid: int) -> list[int]:
    try:
        children = Path(f"/proc/{pid}/task/{pid}/children").read_text().split()
        return [int(c) for c in children if b"spawn_main" in Path(f"/proc/{c}/cmdline").read_bytes()]
    except (FileNotFoundError, ProcessLookupError):
        return []


def killed(subject: Subject, path: Path, chance: random.Random, folder: Path) -> tuple[bool, dict[str, Any]]:
    """One session with one kill; whether the run came to its end, and what is to be recorded.

    Workers are killed at most once a session: a draw on which processes die twice is, rightly, given up.
    """
    workers = chance.choice([1, 2, 3])
    way = chance.choice(["owner", "owner point", "worker", "worker point"])
    note: dict[str, Any] = {"workers": workers, "way": way}
    environment, token = {}, folder / "token"
    token.unlink(missing_ok=True)
    if way.endswith("point"):
        point = chance.choice(OWNER_POINTS if way == "owner point" else WORKER_POINTS)
        # A worker starts once, so that its first passage is the only one.
        note["point"], note["count"] = point, 1 if point == "worker start" else chance.randint(1, 6)
        environment["STABCHECK_KILL_AT"] = f"{point}:{note['count']}:{token}"
    process = started(subject, path, workers, **environment)
    try:
        note["after_s"] = round(chance.uniform(0.0, subject.longest_s), 3)
        code = waited(process, note["after_s"])
        if code is None and way == "worker" and (alive := workers_of(process.pid)):
            os.kill(chance.choice(alive), signal.SIGKILL)
            note["hit"] = True
            code = waited(process, chance.uniform(0.0, subject.longest_s))
        if code is None:
            note["hit"] = True
            process.kill()
    finally:
        _, said = process.communicate()
    note["hit"] = note.get("hit", False) or token.exists()
    note["code"] = process.returncode
    if process.returncode not in (0, -signal.SIGKILL):
        note["said"] = said.decode(errors="replace")[-2000:]
    return process.returncode == 0, note


def waited(process: subprocess.Popen[bytes], seconds: float) -> int | None:
    try:
        return process.wait(timeout=seconds)
    except subprocess.TimeoutExpired:
        return None


def dump(path: Path) -> str:
    from stabcheck.store import RunFile

    with RunFile.open(path) as run:
        return run.dump()


def campaign(subject: Subject, kills: int, seed: int, folder: Path) -> Iterator[dict[str, Any]]:
    measure = folder / "measure.run"
    whole = started(subject, measure, 4)
    _, said = whole.communicate()
    assert whole.returncode == 0, said.decode()
    expected, chance, hits, runs = dump(measure), random.Random(seed), 0, 0
    while hits < kills:
        path, done, sessions = folder / f"{runs}.run", False, 0
        while not done:
            done, note = killed(subject, path, chance, folder)
            hits += note["hit"]
            sessions += 1
            yield {"run": runs, "kills": hits, **note}
        yield {"run": runs, "sessions": sessions, "equal": dump(path) == expected}
        if dump(path) == expected:
            path.unlink()  # what differs is kept
        runs += 1


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--kills", type=int, default=500)
    parser.add_argument("--draws", type=int, default=60)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--scenario", type=Path, help="screen this scenario; the toy engine if not given")
    parser.add_argument("--longest", type=float, default=20.0, help="longest wait before a kill, in s, with --scenario")
    parser.add_argument("--record", type=Path, default=Path("kills.jsonl"))
    asked = parser.parse_args()
    folder = Path(tempfile.mkdtemp(prefix="campaign"))
    subject = scenario(asked.scenario, asked.draws, folder, asked.longest) if asked.scenario else toy(asked.draws)
    wrong = 0
    with asked.record.open("a") as record:
        for note in campaign(subject, asked.kills, asked.seed, folder):
            wrong += note.get("equal") is False or "said" in note
            record.write(json.dumps({"time": time.strftime("%Y-%m-%dT%H:%M:%S"), **note}) + "\n")
            record.flush()
    print(f"{wrong} wrong; record in {asked.record}; run files that differ, if any, in {folder}")
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main())
