"""Kill runs hundreds of times, at named points and at random moments, and keep a record of each kill.

``python tests/faults/campaign.py --kills 500`` uses the toy engine; with ``--scenario FILE`` it screens that scenario
with its own engine (``handovers.toml`` is made for this). A run is killed and resumed until it is done; then its table,
as ``export`` writes it (of the toy engine: the canonical dump), is compared byte for byte with that of an undisturbed
run that had another number of workers; and the next run begins. Each line of the record is one session with its kills,
or the comparison at the end of a run. ``--summary`` reads a record and prints one line. The exit code is 1 if any run
differed, if a session ended in a way that it should not, or if something was left beside a run file.
"""

import argparse
import hashlib
import json
import os
import random
import signal
import subprocess
import sys
import tempfile
import time
from collections import Counter
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

TESTS = Path(__file__).resolve().parent.parent
FIRST_POINTS = ("run file created", "draws added")
"""Where an owner comes in the first session of a run, before anything else."""
OWNER_POINTS = ("draws added", "before commit", "in commit", "after commit", "checkpoint stored")
WORKER_POINTS = ("half-sent message", "worker start", "hand-over")
ONCE = ("run file created", "worker start")
"""A process comes here once."""
UNDISTURBED_WORKERS = 4
WORKERS = (0, 1, 2, 3)
"""Of the sessions that are killed; 0 works in the owner itself."""
RECORD = Path(__file__).parent / "records" / "kills.jsonl"


@dataclass(frozen=True)
class Subject:
    """What is run.

    Attributes
    ----------
    engine : str
    command : callable
        The command for a run file and a number of workers.
    environment : dict
    longest_s : float
        Longest useful wait before a kill.
    table : callable
        What of a finished run file is compared, as bytes.
    """

    engine: str
    command: Callable[[Path, int], list[str]]
    environment: dict[str, str]
    longest_s: float
    table: Callable[[Path], bytes]


def toy(draws: int) -> Subject:
    script = str(TESTS / "toy_owner.py")
    return Subject(
        "toy",
        lambda path, workers: [sys.executable, script, str(path), str(draws), str(workers)],
        {"TOY_PAUSE_S": "0.1", "TOY_HAND_OVER": ",".join(map(str, range(1, draws, 7)))},
        1.5,
        dumped,
    )


def scenario(file: Path, draws: int, longest_s: float) -> Subject:
    script, name = str(TESTS / "real_owner.py"), str(file.resolve())
    return Subject(
        "rebound",
        lambda path, workers: [sys.executable, script, str(path), name, str(draws), str(workers)],
        {},
        longest_s,
        exported,
    )


def dumped(path: Path) -> bytes:
    from stabcheck.store import RunFile

    with RunFile.open(path) as run:
        return run.dump().encode()


def exported(path: Path) -> bytes:
    """Give the table that a user gets, and the dump, which has every digit of every outcome."""
    from stabcheck.report.export import export

    out = path.with_suffix(".csv")
    export(path, out)
    table = out.read_bytes()
    out.unlink()
    return table + dumped(path)


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


def planned(subject: Subject, path: Path, chance: random.Random) -> dict[str, Any]:
    """Choose what is done to one session."""
    way = chance.choice(["owner", "owner point", "worker", "worker point"])
    workers = chance.choice(WORKERS if way.startswith("owner") else WORKERS[1:])
    plan: dict[str, Any] = {"workers": workers, "way": way}
    plan["after"] = "start" if chance.random() < 0.2 else "work begun"
    plan["after_s"] = round(chance.uniform(0.0, subject.longest_s), 3)
    if way.endswith("point"):
        points = WORKER_POINTS if way == "worker point" else OWNER_POINTS if path.exists() else FIRST_POINTS
        plan["point"] = chance.choice(points)
        plan["count"] = 1 if plan["point"] in ONCE else chance.randint(1, 6)
        plan["after_s"] = round(plan["after_s"] + subject.longest_s, 3)  # so that it is likely to get there before
    return plan


def session(subject: Subject, path: Path, chance: random.Random, folder: Path) -> dict[str, Any]:
    """Start or resume a run, kill at least its owner unless it ends before, and say what happened.

    Workers are killed at most once a session: a draw on which processes die twice is, rightly, given up.
    """
    note = {**planned(subject, path, chance), "kills": 0}
    token, at_work = folder / "token", folder / "at work"
    for file in (token, at_work):
        file.unlink(missing_ok=True)
    environment = {"AT_WORK": str(at_work)}  # the owner makes this file when draws are followed
    if "point" in note:
        environment["STABCHECK_KILL_AT"] = f"{note['point']}:{note['count']}:{token}"
    process = started(subject, path, note["workers"], **environment)
    try:
        while note["after"] == "work begun" and not at_work.exists() and process.poll() is None:
            time.sleep(0.02)
        code = waited(process, note["after_s"])
        if code is None and note["way"] == "worker" and (alive := workers_of(process.pid)):
            os.kill(chance.choice(alive), signal.SIGKILL)
            note["kills"] += 1
            code = waited(process, chance.uniform(0.0, subject.longest_s))
        if code is None:
            note["kills"] += not token.exists() or note["way"] != "owner point"  # or it is dying already
            process.kill()
    finally:
        _, said = process.communicate()
    note["reached"] = token.exists() if "point" in note else None
    note["kills"] += token.exists()
    note["code"] = process.returncode
    if process.returncode not in (0, -signal.SIGKILL) or b"Traceback" in said:
        note["said"] = said.decode(errors="replace")[-2000:]
    return note | standing(path)


def waited(process: subprocess.Popen[bytes], seconds: float) -> int | None:
    try:
        return process.wait(timeout=seconds)
    except subprocess.TimeoutExpired:
        return None


def standing(path: Path) -> dict[str, Any]:
    """Say how far the run is by its file, and in which stages the stored checkpoints are."""
    from stabcheck.store import RunFile

    if not path.exists():
        return {"finished": None}
    with RunFile.open(path) as run:
        blobs = [task.checkpoint for task in run.tasks_pending(run.draw_count()) if task.checkpoint]
        stages = Counter(stage_of(blob) for blob in blobs)
        return {"finished": run.finished_count(), "checkpoints": dict(sorted(stages.items()))}


def stage_of(blob: bytes) -> str:
    for method in ("ias15", "whfast", "trace"):
        if f'"method": "{method}"'.encode() in blob:
            return method
    return f"engine {blob[0]}"


def digest(table: bytes) -> str:
    return hashlib.sha256(table).hexdigest()[:16]


def campaign(subject: Subject, kills: int, seed: int, folder: Path) -> Iterator[dict[str, Any]]:
    measure = folder / "measure.run"
    whole = started(subject, measure, UNDISTURBED_WORKERS)
    _, said = whole.communicate()
    assert whole.returncode == 0, said.decode()
    expected, chance, hits, number = subject.table(measure), random.Random(seed), 0, 0
    while hits < kills:
        path, done, sessions = folder / f"{number}.run", False, 0
        while not done:
            note = session(subject, path, chance, folder)
            done = note["code"] == 0
            hits += note["kills"]
            sessions += 1
            yield {"run": number, **note}
        table = subject.table(path)
        left = sorted(file.name for file in folder.glob(f"{number}.*") if file != path)
        digests = {"undisturbed": digest(expected), "resumed": digest(table)}
        yield {"run": number, "sessions": sessions, "equal": table == expected, "left": left, **digests}
        if table == expected:
            path.unlink()  # what differs is kept
        number += 1


def is_wrong(note: dict[str, Any]) -> bool:
    return note.get("equal") is False or bool(note.get("left")) or "said" in note


def summary(record: Path) -> str:
    notes = [json.loads(line) for line in record.read_text().splitlines()]
    kills, runs, wrong = Counter[str](), Counter[str](), sum(map(is_wrong, notes))
    reached = Counter(f"{note['engine']} {note['point']}" for note in notes if note.get("reached"))
    for note in notes:
        kills[note["engine"]] += note.get("kills", 0)
        runs[note["engine"]] += "equal" in note
    parts = [f"{engine}: {kills[engine]} kills in {runs[engine]} runs" for engine in sorted(kills)]
    at = ", ".join(f"{point} {count}" for point, count in sorted(reached.items()))
    return f"{kills.total()} kills, {wrong} wrong ({'; '.join(parts)}); at named points: {at}"


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--kills", type=int, default=500)
    parser.add_argument("--draws", type=int, default=60)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--scenario", type=Path, help="screen this scenario; the toy engine if not given")
    parser.add_argument("--longest", type=float, default=5.0, help="longest wait before a kill, in s, with --scenario")
    parser.add_argument("--record", type=Path, default=RECORD)
    parser.add_argument("--summary", action="store_true", help="only print what is in the record")
    asked = parser.parse_args()
    if asked.summary:
        print(summary(asked.record))
        return 0
    folder = Path(tempfile.mkdtemp(prefix="campaign"))
    subject = scenario(asked.scenario, asked.draws, asked.longest) if asked.scenario else toy(asked.draws)
    wrong = 0
    with asked.record.open("a") as record:
        for note in campaign(subject, asked.kills, asked.seed, folder):
            wrong += is_wrong(note)
            when = time.strftime("%Y-%m-%dT%H:%M:%S")
            record.write(json.dumps({"time": when, "engine": subject.engine, **note}) + "\n")
            record.flush()
    print(f"{wrong} wrong; run files that differ, if any, in {folder}")
    print(summary(asked.record))
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main())
