"""The command line: each verb parses, makes one library call and says how it went. Heavy imports wait inside the verbs.

Exit codes are part of the promise: 0 done; 1 finished, but more than a stated share of the draws could not be trusted;
2 wrong use or bad input; 130 interrupted, the same command goes on. (70 is a defect of stabcheck, with a traceback.)
"""

import contextlib
import errno
import json
import os
import sys
import traceback
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import click

from stabcheck import __version__
from stabcheck.errors import PlatformError, StabcheckError

EXIT_DONE, EXIT_UNTRUSTED, EXIT_WRONG_USE, EXIT_DEFECT, EXIT_INTERRUPTED = 0, 1, 2, 70, 130

EXISTING = click.Path(exists=True, dir_okay=False, path_type=Path)
FOLDER = click.Path(file_okay=False, path_type=Path)
FILE = click.Path(dir_okay=False, path_type=Path)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line.

    Parameters
    ----------
    arguments : sequence of str, optional
        The words after ``stabcheck``; those of this process if not given.

    Returns
    -------
    int
        The exit code.
    """
    words = list(sys.argv[1:] if arguments is None else arguments)
    fill_closed_descriptors()
    try:
        refuse_platform(sys.platform)
        return _carried_out(words or ["--help"])
    except BrokenPipeError:
        silence_stdout()
        return EXIT_DONE
    except KeyboardInterrupt as stop:  # of a screen it says how far the run is
        _tell(f"\n{stop}" if str(stop) else "\nstopped")
        return EXIT_INTERRUPTED
    except click.ClickException as error:
        with contextlib.suppress(OSError):
            error.show()
        return EXIT_WRONG_USE
    except StabcheckError as error:
        _tell(f"Error: {error}")
        return EXIT_WRONG_USE
    except OSError as error:
        _tell(f"Error: {_refused_by_system(error)}")
        return EXIT_WRONG_USE
    except Exception:  # the last stop: a crash must not look like exit code 1, which has a meaning
        traceback.print_exc()
        _tell("This is a defect of stabcheck, not of your input. Please report it with the lines above.")
        return EXIT_DEFECT


def refuse_platform(platform: str) -> None:
    """Refuse to begin where a run could not be kept safe.

    Raises
    ------
    PlatformError
        On Windows.
    """
    if platform in ("win32", "cygwin"):
        raise PlatformError(
            "stabcheck does not run on Windows",
            where=f"platform {platform}",
            why="its workers and run files rely on POSIX signals, sessions and file locks",
            do="use Linux or macOS; inside the Windows Subsystem for Linux it is Linux",
        )


def fill_closed_descriptors() -> None:
    """Put nowhere in place of a standard stream that is closed, or the next file opened would be taken for it."""
    for descriptor in (0, 1, 2):
        try:
            os.fstat(descriptor)
        except OSError:
            os.open(os.devnull, os.O_RDWR)  # the lowest that is free: this one


def silence_stdout() -> None:
    """Turn standard output to nowhere: whoever read us has seen enough, and what is buffered must not complain."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _carried_out(words: list[str]) -> int:
    # Not commands.main(): that would turn a closed pipe into exit code 1 and Ctrl-C into its own exception.
    try:
        with commands.make_context("stabcheck", words) as context:
            code = commands.invoke(context)
    except click.exceptions.Exit as end:
        return end.exit_code
    return code if isinstance(code, int) else EXIT_DONE


def _say(text: str, nl: bool = True) -> None:
    """Write to standard output; whoever has seen enough, or closed the terminal, does not change the exit code."""
    try:
        click.echo(text, nl=nl)
    except OSError as gone:
        if gone.errno not in (errno.EPIPE, errno.EIO):  # a full disk is another matter
            raise
        silence_stdout()


def _tell(text: str) -> None:
    """Write to standard error; that nobody is left to read it (a closed terminal) must not change the exit code."""
    with contextlib.suppress(OSError):
        click.echo(text, err=True)


def _refused_by_system(error: OSError) -> StabcheckError:
    return StabcheckError(
        error.strerror or str(error),
        where=str(error.filename or ""),
        why="the system refused it",
        do="check the path, the permissions and the space on the disk",
    )


def _as_json(value: Any) -> str:
    return json.dumps(value, indent=2, ensure_ascii=False, allow_nan=False)


@click.group(context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, prog_name="stabcheck")
def commands() -> None:
    """Which of the planetary systems that fit the data could have survived, and how sure is that?

    Begin with `stabcheck scenarios`, then `preview`, `screen` and `report`.
    """


@commands.command()
@click.argument("scenario", type=EXISTING)
@click.option("--draws", type=click.IntRange(min=1), default=1000, show_default=True, help="Draws to plan for.")
@click.option("--json", "wants_json", is_flag=True, help="Print JSON instead of text.")
def preview(scenario: Path, draws: int, wants_json: bool) -> None:
    """Show what was understood from SCENARIO, what it implies, and how long the run will take here."""
    from stabcheck.preview import understood

    seen = understood(scenario, draws=draws)
    _say(_as_json(seen.as_dict()) if wants_json else seen.as_text(), nl=wants_json)


@commands.command()
@click.argument("scenario", type=EXISTING)
@click.option("--draws", type=click.IntRange(min=1), required=True, help="Draws in total; a run file may grow later.")
@click.option("--workers", type=click.IntRange(min=0), help="Processes, one a core if not given; 0 works in place.")
@click.option("--run-file", type=FILE, help="Where to store the run; SCENARIO's name with .run, here, if not given.")
@click.option(
    "--untrusted-share",
    type=click.FloatRange(0.0, 1.0),
    default=0.05,
    show_default=True,
    help="Exit with 1 if more than this share of the draws could not be trusted.",
)
def screen(scenario: Path, draws: int, workers: int | None, run_file: Path | None, untrusted_share: float) -> int:
    """Follow draws of SCENARIO to their ends and store what each came to.

    The same command again goes on where it stopped, until there are --draws in total.
    """
    from stabcheck.batch.progress import ProgressLine
    from stabcheck.screen import screen as follow_all

    run = follow_all(scenario, draws=draws, run_file=run_file, workers=workers, progress=ProgressLine())
    _say(run.as_text())
    return EXIT_UNTRUSTED if run.untrusted_share > untrusted_share else EXIT_DONE


@commands.command()
@click.argument("scenario", type=EXISTING)
@click.option("--draw", type=click.IntRange(min=0), help="Number of the draw.")
@click.option("--central", is_flag=True, help="Follow the central values instead of a draw.")
@click.option("--out", type=FOLDER, help="Folder of the results; SCENARIO's name with _draw_N, here, if not given.")
@click.option("--json", "wants_json", is_flag=True, help="Print JSON instead of text.")
def follow(scenario: Path, draw: int | None, central: bool, out: Path | None, wants_json: bool) -> None:
    """Follow one draw of SCENARIO in detail: time series, resonant angles, plots, initial state."""
    from stabcheck.follow import follow as follow_one

    folder = out or Path(f"{scenario.stem}_central" if draw is None else f"{scenario.stem}_draw_{draw}")
    seen = follow_one(scenario, draw=draw, out=folder, central=central)
    _say(_as_json(seen.as_dict()) if wants_json else seen.as_text())


@commands.command()
@click.argument("run", type=EXISTING)
@click.option("--out", type=FOLDER, help="Folder of the report; RUN's name with _report, here, if not given.")
@click.option("--plane", nargs=2, metavar="X Y", help="Two drawn parameters for the scatter plot.")
@click.option("--json", "wants_json", is_flag=True, help="Print JSON instead of text.")
def report(run: Path, out: Path | None, plane: tuple[str, str] | None, wants_json: bool) -> None:
    """Say what RUN found so far: fractions, limits, figures, methods text. Works on a live run too."""
    from stabcheck.report.page import report as make_report

    made = make_report(run, out=out, plane=plane)
    _say(_as_json(made.answer.as_dict()) if wants_json else made.as_text(), nl=wants_json)


@commands.command()
@click.argument("run", type=EXISTING)
@click.argument("out", type=FILE, metavar="OUT.csv|OUT.ecsv")
def export(run: Path, out: Path) -> None:
    """Write one row a draw of RUN, with units: parameters, weight, verdict and numbers."""
    from stabcheck.report.export import export as write_table

    _say(f"wrote {write_table(run, out)} draws to {out}")


@commands.command()
@click.option("--copy", "name", metavar="NAME", help="Copy this one.")
@click.argument("folder", type=FOLDER, default=Path(), metavar="[DIR]")
def scenarios(name: str | None, folder: Path) -> None:
    """List the scenarios that come with stabcheck, or copy one into DIR (here if not given)."""
    from stabcheck import shipped

    if name is not None:
        for file in shipped.copy(name, folder):
            _say(str(file))
        return
    for one in shipped.listed():
        _say(f"{one.name:<20} {one.title}")
