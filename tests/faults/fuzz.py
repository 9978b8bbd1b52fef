"""Whatever a scenario says: it is refused in words, or the whole way from preview to export works.

``python tests/faults/fuzz.py --examples 1500`` tries so many and keeps a record of each, with the text of the scenario
where something was wrong; ``--summary`` reads a record and prints one line. The exit code is 1 if anything was wrong.

What ``preview`` accepts is screened: two draws over ten orbits of the inner planet, in this process, whatever span it
says. Report and export have to work on the result. What anything refuses has to say what, where and what to do.
"""

import argparse
import contextlib
import csv
import faulthandler
import io
import json
import os
import re
import shutil
import signal
import sys
import tempfile
import time
import traceback
import warnings
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

from any_scenario import ANY, Written
from hypothesis import HealthCheck, given, seed, settings
from test_fuzzed_scenarios import as_toml

from stabcheck import cli

RECORD = Path(__file__).parent / "records" / "fuzz.jsonl"
WITHIN_S = 120
"""Ten orbits take seconds: what takes longer than this hangs."""
SPAN = "10 inner orbits"
PROGRESS = re.compile(r"\d\d:\d\d:\d\d  \d+/2 draws   .*")
QUIET = (DeprecationWarning, PendingDeprecationWarning, ImportWarning, ResourceWarning)
"""Python shows these to nobody."""


class Wrong(AssertionError):
    """Something that must not happen, with what was said."""


@dataclass
class Said:
    """What a command said, and its exit code."""

    words: list[str]
    code: int = -1
    out: str = ""
    err: str = ""
    behind: str = ""
    """Written to the file descriptors without the streams of Python: by a library in C."""
    warned: list[str] = field(default_factory=list)

    def __str__(self) -> str:
        return f"{' '.join(self.words)}: {self.code}\n{self.out[-500:]}\n{self.err}\n{self.behind}\n{self.warned}"


def spoken(*words: str) -> Said:
    """Give a command to the command line in this process."""
    said, out, err = Said(list(words)), io.StringIO(), io.StringIO()
    with _descriptors() as behind, warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        with contextlib.redirect_stdout(out), contextlib.redirect_stderr(err):
            said.code = cli.main(list(words))
    said.out, said.err, said.behind = out.getvalue(), err.getvalue(), behind.getvalue()
    said.warned = [str(each.message) for each in caught if not issubclass(each.category, QUIET)]
    return said


@contextlib.contextmanager
def _descriptors() -> Iterator[io.StringIO]:
    seen = io.StringIO()
    with tempfile.TemporaryFile() as file:
        before = os.dup(1), os.dup(2)
        os.dup2(file.fileno(), 1)
        os.dup2(file.fileno(), 2)
        try:
            yield seen
        finally:
            for number, old in zip((1, 2), before, strict=True):
                os.dup2(old, number)
                os.close(old)
            file.seek(0)
            seen.write(file.read().decode(errors="replace"))


def demand(fine: bool, what: str, said: Said) -> None:
    if not fine:
        raise Wrong(f"{what}\n{said}")


def demand_refusal(said: Said) -> None:
    """A refusal is exit code 2 and four parts on standard error (why may be obvious), nothing else."""
    demand(said.code == 2, "neither done nor refused", said)
    parts = ("Error: ", "\n  where  ", "\n  do     ")
    demand(said.err.startswith(parts[0]) and all(part in said.err for part in parts), "parts are missing", said)
    demand("Traceback" not in said.err and not said.out, "more than a refusal", said)
    demand_silence(said)


def demand_silence(said: Said) -> None:
    demand(not said.behind and not said.warned, "something leaked to the terminal", said)


def demand_done(said: Said, codes: tuple[int, ...] = (0,)) -> None:
    demand(said.code in codes, "it was not carried out", said)
    lines = [line for line in said.err.splitlines() if not PROGRESS.fullmatch(line)]
    demand(not lines, "standard error says more than the progress", said)
    demand_silence(said)


def carried(written: Written, folder: Path, *, figures: bool = True) -> dict[str, Any]:
    """Take a scenario the whole way; say how far it went.

    Raises
    ------
    Wrong
        If anything happened that must not.
    """
    folder.mkdir(exist_ok=True)
    file = folder / "any.toml"
    file.write_text(as_toml(written.content), encoding="utf-8")
    if written.sample_name:
        (folder / written.sample_name).write_bytes(written.sample_bytes)
    seen = spoken("preview", str(file), "--draws", "2")
    if seen.code != 0:
        demand_refusal(seen)
        return {"end": "refused", "what": seen.err.splitlines()[0][7:]}
    demand_done(seen)
    demand(bool(seen.out.strip()), "nothing was said", seen)
    as_json = spoken("preview", str(file), "--draws", "2", "--json")
    demand_done(as_json)
    json.loads(as_json.out)
    shortened = {**written.content, "integration": {**written.content["integration"], "span": SPAN}}
    file.write_text(as_toml(shortened), encoding="utf-8")
    return {"end": "done", **screened(file, folder, figures)}


def screened(file: Path, folder: Path, figures: bool) -> dict[str, Any]:
    run, began = folder / "any.run", time.monotonic()
    done = spoken("screen", str(file), "--draws", "2", "--workers", "0", "--run-file", str(run))
    demand_done(done, (0, 1))
    took_s = round(time.monotonic() - began, 2)
    if figures:
        demand_done(spoken("report", str(run), "--out", str(folder / "report")))
    told = spoken("report", str(run), "--out", str(folder / "report"), "--json") if figures else _answer_alone(run)
    demand_done(told)
    json.loads(told.out)
    for name in ("any.csv", "any.ecsv"):
        demand_done(spoken("export", str(run), str(folder / name)))
    with (folder / "any.csv").open(encoding="utf-8", newline="") as table:
        rows = list(csv.DictReader(table))
    demand(len(rows) == 2, "the table has not two rows", done)
    demand(all(row["state"] in ("done", "refused") for row in rows), "a draw is not finished", done)
    _read_by_astropy(folder / "any.ecsv")
    return {"seconds": took_s, "code": done.code, "verdicts": [row["verdict"] or row["refused"] for row in rows],
            "methods": [row["method"] for row in rows], "trust": [row["trust"] for row in rows]}  # fmt: skip


def _answer_alone(run: Path) -> Said:
    """What a report says, without drawing figures, which takes longer than all the rest."""
    from stabcheck.report.answer import answer_of
    from stabcheck.report.from_run_file import run_table
    from stabcheck.report.methods import bibtex, methods_text
    from stabcheck.report.tables import as_text
    from stabcheck.store import RunFile

    said = Said(["the answer"], code=0)
    with _descriptors() as behind, warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        with RunFile.open(run) as opened:
            answer = answer_of(run_table(opened))
        demand(bool(as_text(answer) and methods_text(answer) and bibtex(answer)), "nothing is said", said)
        said.out = json.dumps(answer.as_dict(), allow_nan=False)
    said.behind = behind.getvalue()
    said.warned = [str(each.message) for each in caught if not issubclass(each.category, QUIET)]
    return said


def _read_by_astropy(file: Path) -> None:
    from astropy.table import Table

    with warnings.catch_warnings():
        warnings.simplefilter("error")
        table = Table.read(file, format="ascii.ecsv")
    assert len(table) == 2


def shortened_measurement() -> None:
    """Have ``preview`` measure the speed for an instant only: the fuzz does not look at it."""
    from stabcheck.preview import cost

    cost.MEASURED_S, cost.CHUNK = 0.002, 20


# ---------------------------------------------------------------------------------------------------------------------
# The long run


class TooLong(Exception):
    """An example hangs."""


def _alarm(*_: object) -> None:
    raise TooLong


def noted(written: Written, folder: Path, figures: bool) -> dict[str, Any]:
    signal.alarm(WITHIN_S)
    try:
        note = carried(written, folder, figures=figures)
    except BaseException as problem:
        if isinstance(problem, KeyboardInterrupt):
            raise
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
    ends = Counter(note["end"] for note in notes)
    done = [note for note in notes if note["end"] == "done"]
    words = Counter(word for note in done for word in note["verdicts"])
    methods = Counter(method for note in done for method in note["methods"] if method)
    refusals = len({re.sub(r"[\d.]+|'[^']*'", "#", note["what"]) for note in notes if note["end"] == "refused"})
    most = {word: count for word, count in words.most_common(8)}
    longest = max((note["seconds"] for note in done), default=0.0)
    return (
        f"{len(notes)} examples: {ends['done']} done, {ends['refused']} refused in {refusals} ways, {ends['wrong']} "
        f"wrong; {dict(methods)}; {most}; longest screen {longest} s"
    )


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
