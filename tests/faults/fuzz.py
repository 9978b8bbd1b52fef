"""Whatever a scenario says: it is refused in words, or the whole way from preview to export works.

``python tests/faults/fuzz.py --examples 1500`` tries so many and keeps a record of each, with the text of the scenario
where something was wrong; ``--summary`` reads a record and prints one line. The exit code is 1 if anything was wrong.
"""

import argparse
import faulthandler
import json
import re
import shutil
import signal
import sys
import tempfile
import traceback
from collections import Counter
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

from any_scenario import ANY, Written, as_toml
from hypothesis import HealthCheck, given, seed, settings
from whole_way import Wrong, carried

RECORD = Path(__file__).parent / "records" / "fuzz.jsonl"
WITHIN_S = 120
"""Ten orbits take seconds. What takes longer is given up and counted: a map with the step of a near-parabolic orbit.
What does not even notice that it is given up, and hangs in a library, ends the fuzz."""
SLOW_S = 10
"""What takes longer than this is kept to be looked at."""


def shortened_measurement() -> None:
    """Have ``preview`` measure the speed for an instant only: the fuzz does not look at it."""
    from stabcheck.preview import cost

    cost.MEASURED_S, cost.CHUNK = 0.002, 20


class TooLong(BaseException):
    """An example takes too long; not an ``Exception``, so that nothing on its way takes it for a defect."""


def _alarm(*_: object) -> None:
    raise TooLong


def noted(written: Written, folder: Path, figures: bool) -> dict[str, Any]:
    signal.alarm(WITHIN_S)
    try:
        note = carried(written, folder, figures=figures)
        if note.get("seconds", 0.0) > SLOW_S:
            note["scenario"] = as_toml(written.content)
    except TooLong:
        note = {"end": "slow", "scenario": as_toml(written.content)}
    except Exception as problem:
        note = {"end": "wrong", "what": f"{type(problem).__name__}: {problem}"[:3000]}
        if not isinstance(problem, Wrong):
            note["trace"] = traceback.format_exc()[-3000:]
        note["scenario"] = as_toml(written.content)
        if written.sample_bytes:
            kept = Path(tempfile.mkdtemp(prefix="fuzz")) / written.sample_name
            kept.write_bytes(written.sample_bytes)
            note["samples"] = str(kept)
    finally:
        signal.alarm(0)
        shutil.rmtree(folder, ignore_errors=True)
    return note


def long_run(examples: int, number: int, record: Path, figures_every: int) -> int:
    count = Counter[str]()
    folder = Path(tempfile.mkdtemp(prefix="fuzz"))
    signal.signal(signal.SIGALRM, _alarm)
    shortened_measurement()

    with record.open("a") as lines:

        @seed(number)
        @settings(max_examples=examples, deadline=None, database=None, suppress_health_check=list(HealthCheck))
        @given(written=ANY)
        def try_one(written: Written) -> None:
            faulthandler.dump_traceback_later(2 * WITHIN_S, exit=True)  # even where no signal is looked at
            note = noted(written, folder / "one", figures=count.total() % figures_every == 0)
            faulthandler.cancel_dump_traceback_later()
            count[note["end"]] += 1
            lines.write(json.dumps({"seed": number, "example": count.total(), **note}, default=str) + "\n")
            lines.flush()

        try_one()
    print(dict(count))
    return count["wrong"]


def summary(record: Path) -> str:
    notes = [json.loads(line) for line in record.read_text().splitlines()]
    ends = Counter("mended" if "mended" in note else note["end"] for note in notes)
    done = [note for note in notes if note["end"] == "done"]
    words = Counter(word for note in done for word in note["verdicts"])
    methods = Counter(method for note in done for method in note["methods"] if method)
    refusals = len({re.sub(r"[\d.]+|'[^']*'", "#", note["what"]) for note in notes if note["end"] == "refused"})
    most = {word: count for word, count in words.most_common(8)}
    longest = max((note["seconds"] for note in done), default=0.0)
    counts = f"{ends['done']} done, {ends['refused']} refused in {refusals} ways, {ends['slow']} too slow"
    faults = f"{ends['wrong']} wrong, {ends['mended']} wrong then and mended since"
    return f"{len(notes)} examples: {counts}, {faults}; {dict(methods)}; {most}; longest screen {longest} s"


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--examples", type=int, default=1500)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--record", type=Path, default=RECORD)
    parser.add_argument("--figures-every", type=int, default=10, help="make a whole report, with figures, this often")
    parser.add_argument("--summary", action="store_true", help="only print what is in the record")
    asked = parser.parse_args()
    if asked.summary:
        print(summary(asked.record))
        return 0
    wrong = long_run(asked.examples, asked.seed, asked.record, asked.figures_every)
    print(summary(asked.record))
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main())
