"""A folder with everything a run says: text, numbers, table of draws, figures, methods, references."""

import json
from dataclasses import dataclass, replace
from importlib.metadata import version
from pathlib import Path

from stabcheck.report.answer import Answer, answer_of
from stabcheck.report.export import write_csv
from stabcheck.report.figures import write_figures
from stabcheck.report.from_run_file import run_table
from stabcheck.report.methods import bibtex, methods_text
from stabcheck.report.table_of_draws import RunTable
from stabcheck.report.tables import as_text
from stabcheck.store import RunFile


@dataclass(frozen=True, slots=True, kw_only=True)
class Report:
    """What was written, and the answer behind it."""

    answer: Answer
    folder: Path
    files: tuple[Path, ...]

    def as_text(self) -> str:
        """The answer as text, with the place of the files at its end."""
        return f"{as_text(self.answer, limits=False)}\nall limits, figures, methods text, references: {self.folder}"


def report(run: Path, *, out: Path | None = None, plane: tuple[str, str] | None = None) -> Report:
    """Report on a run file, also while it is being written.

    Parameters
    ----------
    run : Path
        Only its longest prefix of settled draws enters the answer and the figures; the table holds every draw.
    out : Path, optional
        Folder; the run's name with ``_report`` here if not given. Older files of the same names are replaced.
    plane : pair of str, optional
        Columns of the verdict plane.

    Returns
    -------
    Report

    Raises
    ------
    StabcheckError
        If the run file cannot be read, or a column of the plane is not there.
    OSError
        If the folder cannot be written; it names the file or the folder.
    """
    with RunFile.open(run) as opened:
        table, scenario_text = run_table(opened), opened.scenario_text
    versions = {**table.facts.versions, "matplotlib": version("matplotlib")}
    table = replace(table, facts=replace(table.facts, versions=versions))
    folder = out if out is not None else Path(f"{run.stem}_report")
    answer = answer_of(table)
    try:
        files = _written(table, answer, scenario_text, folder, plane)
    except OSError as problem:  # a full disk does not say which file it was
        raise OSError(problem.errno, problem.strerror, str(problem.filename or folder)) from problem
    return Report(answer=answer, folder=folder, files=files)


def _written(
    table: RunTable, answer: Answer, scenario_text: str, folder: Path, plane: tuple[str, str] | None
) -> tuple[Path, ...]:
    figures = write_figures(table, folder, plane=plane)
    texts = {
        "answer.txt": as_text(answer),
        "answer.json": json.dumps(answer.as_dict(), indent=1, allow_nan=False) + "\n",
        "methods.txt": methods_text(answer),
        "references.bib": bibtex(answer),
        "scenario.toml": scenario_text,
    }
    for name, text in texts.items():
        (folder / name).write_text(text, encoding="utf-8")
    write_csv(table, folder / "draws.csv")
    return (*figures, *(folder / name for name in (*texts, "draws.csv")))
