"""The command line: what it prints, where, and the exit code that scripts read."""

import json
import os
import shutil
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from types import SimpleNamespace

import click
import pytest

from stabcheck import __version__, cli
from stabcheck.errors import PlatformError, StabcheckError

SCENARIO = """
title = "One planet"
[star]
mass = "1 Msun"
[elements]
frame = "jacobi"
fit = "keplerian"
[plane]
inclination = "90 deg"
[planets.b]
period = "10 d"
eccentricity = "0"
mean_longitude_planet = "0 deg"
mass = "1 ± 0.1 Mjup"
[draws]
seed = 1
[integration]
span = "100 yr"
"""


@pytest.fixture
def scenario(tmp_path: Path) -> Path:
    file = tmp_path / "one.toml"
    file.write_text(SCENARIO)
    return file


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    return tmp_path


def raising(error: BaseException) -> Callable[..., None]:
    def fail(*_: object, **__: object) -> None:
        raise error

    return fail


def test_without_words_the_help_is_shown(capsys: pytest.CaptureFixture[str]) -> None:
    assert cli.main([]) == 0
    said = capsys.readouterr().out
    for verb in ("preview", "screen", "follow", "report", "export", "scenarios"):
        assert f"\n  {verb} " in said


@pytest.mark.parametrize("verb", sorted(cli.commands.commands))
def test_every_verb_has_help_and_every_option_a_word(verb: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert cli.main([verb, "--help"]) == 0
    assert len(capsys.readouterr().out.splitlines()) > 4
    for parameter in cli.commands.commands[verb].params:
        if isinstance(parameter, click.Option):
            assert parameter.help, f"{verb} {parameter.name}"


def test_the_version_is_that_of_the_package(capsys: pytest.CaptureFixture[str]) -> None:
    assert cli.main(["--version"]) == 0
    assert __version__ in capsys.readouterr().out


@pytest.mark.parametrize(
    "words",
    [
        ["judge"],
        ["preview"],
        ["preview", "--draw", "3", "one.toml"],
        ["preview", "not-there.toml"],
        ["screen", "one.toml"],
        ["screen", "one.toml", "--draws", "0"],
        ["screen", "one.toml", "--draws", "many"],
        ["screen", "one.toml", "--draws", "5", "--untrusted-share", "2"],
    ],
)
def test_wrong_use_is_exit_code_two_and_one_line_on_stderr(
    words: list[str], here: Path, scenario: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert cli.main(words) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert "Error: " in err
    assert "Traceback" not in err


def test_preview_prints_text_or_json(scenario: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert cli.main(["preview", str(scenario)]) == 0
    assert "One planet" in capsys.readouterr().out
    assert cli.main(["preview", str(scenario), "--draws", "7", "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["cost"]["draws"] == 7


def test_bad_input_is_refused_in_four_parts_without_a_traceback(
    scenario: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    scenario.write_text(SCENARIO.replace("eccentricity", 'omega = "0 deg"\neccentricity'))
    assert cli.main(["preview", str(scenario)]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err.startswith("Error: ")
    for part in ("  where  one.toml, [planets.b]", "  why    ", "  do     "):
        assert part in err
    assert "Traceback" not in err


@pytest.mark.parametrize(
    ("untrusted_share", "words", "code"),
    [
        (0.0, [], 0),
        (0.05, [], 0),
        (0.06, [], 1),
        (0.06, ["--untrusted-share", "0.1"], 0),
        (1.0, ["--untrusted-share", "0"], 1),
    ],
)
def test_a_screen_with_too_many_untrusted_draws_is_exit_code_one(
    untrusted_share: float, words: list[str], code: int, scenario: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    run = SimpleNamespace(as_text=lambda: "done", untrusted_share=untrusted_share)
    monkeypatch.setattr("stabcheck.screen.screen", lambda *_, **__: run)
    assert cli.main(["screen", str(scenario), "--draws", "10", *words]) == code


@pytest.mark.parametrize(
    ("error", "code", "words"),
    [
        (
            StabcheckError("no", where="here", why="so", do="that"),
            2,
            "Error: no\n  where  here\n  why    so\n  do     that",
        ),
        (PermissionError(13, "Permission denied", "/x/y"), 2, "/x/y"),
        (OSError(28, "No space left on device"), 2, "No space left on device"),
        (KeyboardInterrupt("12 of 30 draws stored"), 130, "12 of 30 draws stored"),
        (KeyboardInterrupt(), 130, "stopped"),
        (BrokenPipeError(32, "Broken pipe"), 0, ""),
        (ZeroDivisionError("oops"), 70, "a defect of stabcheck"),
    ],
)
def test_each_kind_of_trouble_has_its_exit_code(
    error: BaseException,
    code: int,
    words: str,
    scenario: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.setattr("stabcheck.preview.understood", raising(error))
    monkeypatch.setattr("stabcheck.cli.silence_stdout", lambda: None)  # stdout belongs to the test runner here
    assert cli.main(["preview", str(scenario)]) == code
    err = capsys.readouterr().err
    assert words in err
    assert ("Traceback" in err) == (code == 70)


@pytest.mark.parametrize("platform", ["win32", "cygwin"])
def test_windows_is_refused_in_words(
    platform: str, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    with pytest.raises(PlatformError, match="Windows"):
        cli.refuse_platform(platform)
    monkeypatch.setattr(sys, "platform", platform)
    assert cli.main(["--help"]) == 2
    assert "does not run on Windows" in capsys.readouterr().err


@pytest.mark.parametrize("platform", ["linux", "darwin"])
def test_linux_and_macos_are_not_refused(platform: str) -> None:
    cli.refuse_platform(platform)


def test_a_reader_that_goes_away_early_hears_no_complaint() -> None:
    command = f"{sys.executable} -m stabcheck --help | true; echo ${{PIPESTATUS[0]}}"
    environment = {**os.environ, "PYTHONPATH": str(Path(cli.__file__).parent.parent), "PYTHONUNBUFFERED": "1"}
    bash = shutil.which("bash")
    assert bash
    done = subprocess.run(
        [bash, "-c", command], capture_output=True, text=True, env=environment, check=False, timeout=60
    )
    assert done.stdout == "0\n"
    assert done.stderr == ""


def test_the_shipped_scenarios_are_listed_and_each_can_be_read(capsys: pytest.CaptureFixture[str]) -> None:
    from stabcheck.scenario import Scenario
    from stabcheck.shipped import listed

    assert cli.main(["scenarios"]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert len(lines) == len(listed()) > 0
    for line, one in zip(lines, listed(), strict=True):
        assert line.split()[0] == one.name
        assert one.title and one.title in line
        assert Scenario.read(one.files[0]).title == one.title


def test_a_shipped_scenario_is_copied_with_its_samples_and_nothing_is_overwritten(
    here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    from stabcheck.shipped import listed

    one = max(listed(), key=lambda shipped: len(shipped.files))
    assert len(one.files) == 2  # there is one with samples
    assert cli.main(["scenarios", "--copy", one.name, "work"]) == 0
    capsys.readouterr()
    for file in one.files:
        assert (here / "work" / file.name).read_bytes() == file.read_bytes()
    assert cli.main(["preview", f"work/{one.name}.toml"]) == 0
    capsys.readouterr()
    (here / "work" / one.files[0].name).write_text("mine")
    assert cli.main(["scenarios", "--copy", one.name, "work"]) == 2
    assert "nothing is overwritten" in capsys.readouterr().err
    assert (here / "work" / one.files[0].name).read_text() == "mine"


def test_a_shipped_scenario_that_is_not_there_brings_the_list(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    from stabcheck.shipped import listed

    assert cli.main(["scenarios", "--copy", "no-such"]) == 2
    assert listed()[0].name in capsys.readouterr().err


def test_an_installation_without_scenarios_says_so(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from stabcheck import shipped

    monkeypatch.setattr(shipped, "__file__", str(tmp_path / "stabcheck" / "shipped.py"))
    with pytest.raises(StabcheckError, match="has no scenarios"):
        shipped.folder()


@pytest.mark.slow
def test_a_scenario_goes_through_all_verbs(here: Path, scenario: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert cli.main(["screen", "one.toml", "--draws", "3", "--workers", "0"]) == 0
    assert "3/3 draws" in capsys.readouterr().out
    assert cli.main(["screen", "one.toml", "--draws", "4", "--workers", "0", "--run-file", "one.run"]) == 0
    assert "4/4 draws" in capsys.readouterr().out
    assert cli.main(["report", "one.run", "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["counts"]["settled"] == 4
    assert (here / "one_report" / "answer.txt").is_file()
    for name in ("one.csv", "one.ecsv"):
        assert cli.main(["export", "one.run", name]) == 0
        assert "4 draws" in capsys.readouterr().out
        assert (here / name).stat().st_size > 0
    assert cli.main(["export", "one.run", "one.xyz"]) == 2
    scenario.write_text(SCENARIO.replace("seed = 1", "seed = 2"))
    assert cli.main(["screen", "one.toml", "--draws", "4", "--run-file", "one.run"]) == 2
    assert "seed" in capsys.readouterr().err
