"""What the README shows is what works: its commands are parsed or run, its scenario is read, its script is run."""

import os
import re
import shlex
import subprocess
import sys
from pathlib import Path

import click
import pytest

from stabcheck import cli
from stabcheck.preview import understood
from stabcheck.scenario import Scenario


def blocks(page: Path, language: str) -> list[str]:
    return re.findall(rf"^```{language}\n(.*?)^```", page.read_text(), re.DOTALL | re.MULTILINE)


def commands(page: Path) -> list[list[str]]:
    """Words of each ``stabcheck`` command in the bash blocks, without the first."""
    found = []
    for line in "\n".join(blocks(page, "bash")).splitlines():
        for piece in re.split(r"&&|;", line):
            words = shlex.split(piece, comments=True)
            if words and words[0].rpartition("/")[2] == "stabcheck":
                found.append(words[1:])
    return found


def parsed(words: list[str]) -> None:
    """Parse a command as the command line would, without carrying it out."""
    command = cli.commands.commands[words[0]]
    with click.Context(cli.commands) as parent:
        command.make_context(words[0], list(words[1:]), parent=parent)


@pytest.fixture
def as_if_it_had_run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, project: Path) -> Path:
    """A folder with the files that the README's commands name."""
    (tmp_path / "scenarios").symlink_to(project / "scenarios")
    (tmp_path / "compact_four.toml").write_bytes((project / "scenarios" / "compact_four.toml").read_bytes())
    (tmp_path / "compact_four.run").touch()
    monkeypatch.chdir(tmp_path)
    return tmp_path


def test_every_command_in_the_readme_is_one_that_exists(project: Path, as_if_it_had_run: Path) -> None:
    found = commands(project / "README.md")
    assert {words[0] for words in found} == set(cli.commands.commands)  # and every verb is shown
    for words in found:
        parsed(words)


def test_control_a_command_that_does_not_exist_is_noticed(as_if_it_had_run: Path) -> None:
    with pytest.raises(click.UsageError):
        parsed(["screen", "compact_four.toml", "--number", "5"])
    with pytest.raises(KeyError):
        parsed(["judge", "compact_four.toml"])


def test_the_files_that_the_pages_name_are_there(project: Path) -> None:
    names = set()
    for page in ("README.md", "DEVELOPERS.md"):
        names |= set(re.findall(r"(?:scenarios|tests)/[\w/]+\.\w+", (project / page).read_text()))
    assert len(names) > 3
    missing = [name for name in names if not (project / name).exists()]
    assert not missing


def test_the_scenario_in_the_readme_is_read_as_it_stands(project: Path) -> None:
    (text,) = blocks(project / "README.md", "toml")
    scenario = Scenario.from_text(text)
    assert scenario.body_names == ("b", "c")
    assert understood(scenario).cost is not None


@pytest.mark.slow
def test_the_script_in_the_readme_runs(project: Path, package: Path, tmp_path: Path) -> None:
    (text,) = blocks(project / "README.md", "python")
    script = tmp_path / "script.py"
    script.write_text(text)
    done = subprocess.run(
        [sys.executable, script.name],
        cwd=tmp_path,
        env={**os.environ, "PYTHONPATH": str(package.parent)},
        capture_output=True,
        text=True,
        timeout=300,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    assert "Fraction(" in done.stdout
    assert (tmp_path / "compact_four_report" / "answer.txt").is_file()


@pytest.mark.slow
def test_the_first_command_of_the_readme_leads_to_a_report(
    project: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "scenarios").symlink_to(project / "scenarios")
    first, second = commands(project / "README.md")[:2]
    assert first[0] == "screen" and second[0] == "report"
    few = [*first[: first.index("--draws")], "--draws", "4"]
    assert cli.main(few) in (cli.EXIT_DONE, cli.EXIT_UNTRUSTED)
    assert cli.main(second) == cli.EXIT_DONE
    assert "4 of 4 draws settled" in capsys.readouterr().out
    named = re.findall(
        r"`([\w.]+)`", "\n".join(re.findall(r"^\| (`.*?) \|", (project / "README.md").read_text(), re.M))
    )
    written = {file.name for file in (tmp_path / "compact_four_report").iterdir()}
    assert named
    for name in named:  # figures are named without their two endings, and may have several pages
        assert {name, f"{name}.png", f"{name}_1.png"} & written, name
