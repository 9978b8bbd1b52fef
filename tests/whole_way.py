"""Take a scenario the whole way, from preview to export, in this process, and demand that every step behaves.

What ``preview`` accepts is screened: two draws over ten orbits of the inner planet, whatever span it says. Report and
export have to work on the result. What is refused has to say what, where and what to do. Nothing else may be said.
"""

import contextlib
import csv
import io
import json
import os
import re
import tempfile
import time
import warnings
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from any_scenario import Written, as_toml

from stabcheck import cli

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
