"""Terminals that close, streams that are not there, folders and disks that refuse: as a user meets them."""

import os
import pty
import resource
import shutil
import subprocess
import sys
import time
from pathlib import Path

import pytest

from stabcheck.store import RunFile

TESTS = Path(__file__).parent.parent
SCENARIO = TESTS / "faults" / "handovers.toml"
STABCHECK = (sys.executable, "-m", "stabcheck")
NO_PRIVILEGES = (
    "setpriv",
    "--bounding-set=-dac_override,-dac_read_search",
    "--inh-caps=-dac_override,-dac_read_search",
)
"""Without these, permissions hold for root too."""


def environment() -> dict[str, str]:
    return {**os.environ, "PYTHONPATH": str(TESTS.parent)}


def said(folder: Path, *words: str, **options: object) -> subprocess.CompletedProcess[str]:
    usual = {"cwd": folder, "env": environment(), "capture_output": True, "text": True, "timeout": 120, "check": False}
    return subprocess.run([*words], **(usual | options))  # type: ignore[call-overload]


@pytest.fixture(scope="module")
def finished(tmp_path_factory) -> Path:
    path = tmp_path_factory.mktemp("finished") / "x.run"
    done = said(path.parent, *STABCHECK, "screen", str(SCENARIO), "--draws", "2", "--workers", "0", "--run-file", path)
    assert done.returncode == 0, done.stderr
    return path


def on_a_terminal_that_closes(folder: Path, *words: str, hangs_up: bool) -> int:
    """Run a command until its run file has an outcome, then close its terminal; its exit code."""
    path, process = folder / "x.run", None
    if hangs_up:  # the command leads the session of the terminal, so that the kernel sends it SIGHUP
        pid, ours = pty.fork()
        if pid == 0:
            os.chdir(folder)
            os.execvpe(words[0], list(words), environment())
    else:
        ours, theirs = pty.openpty()
        process = subprocess.Popen(words, cwd=folder, env=environment(), stdin=theirs, stdout=theirs, stderr=theirs)
        os.close(theirs)
    deadline = time.monotonic() + 60.0
    while not (path.exists() and finished_count(path)):
        assert time.monotonic() < deadline
        time.sleep(0.05)
    os.close(ours)
    return os.waitstatus_to_exitcode(os.waitpid(pid, 0)[1]) if process is None else process.wait()


def finished_count(path: Path) -> int:
    with RunFile.open(path) as run:
        return run.finished_count()


def test_a_terminal_that_closes_stops_the_run_in_order_and_says_so_by_the_exit_code(tmp_path):
    words = (*STABCHECK, "screen", str(SCENARIO), "--draws", "500", "--workers", "1", "--run-file", "x.run")
    assert on_a_terminal_that_closes(tmp_path, *words, hangs_up=True) == 130
    assert [file.name for file in tmp_path.iterdir()] == ["x.run"]  # a clean end
    with RunFile.open(tmp_path / "x.run") as run:
        assert run.log_entries()[-1][2].startswith("by SIGHUP")


def test_a_terminal_that_closes_without_a_signal_does_not_end_the_run_nor_change_its_exit_code(tmp_path):
    words = (*STABCHECK, "screen", str(SCENARIO), "--draws", "8", "--workers", "1", "--run-file", "x.run")
    assert on_a_terminal_that_closes(tmp_path, *words, hangs_up=False) == 0
    assert finished_count(tmp_path / "x.run") == 8


@pytest.mark.parametrize("closed", ["<&-", ">&-", "2>&-", "<&- >&- 2>&-"])
def test_streams_that_are_not_there_are_done_without(tmp_path, finished, closed):
    shutil.copy(finished, tmp_path / "x.run")
    words = f'"$0" -m stabcheck screen "$1" --draws 3 --workers 1 --run-file x.run {closed}'
    done = said(tmp_path, "sh", "-c", words, sys.executable, str(SCENARIO))
    assert done.returncode == 0, done.stderr
    assert finished_count(tmp_path / "x.run") == 3


def test_a_full_disk_under_standard_output_is_an_error(tmp_path, finished):
    if not Path("/dev/full").exists():
        pytest.skip("there is no /dev/full here")
    with open("/dev/full", "w") as full:
        done = said(
            tmp_path, *STABCHECK, "export", str(finished), "x.csv", capture_output=False, stdout=full, stderr=-1
        )
    assert done.returncode == 2
    assert "No space left" in done.stderr


def small_files() -> None:
    resource.setrlimit(resource.RLIMIT_FSIZE, (1000, 1000))


@pytest.mark.parametrize("words, where", [(("export", "RUN", "x.csv"), "x.csv"), (("report", "RUN"), "x_report")])
def test_a_disk_that_refuses_an_answer_is_named_and_nothing_half_is_left_for_a_table(tmp_path, finished, words, where):
    asked = [str(finished) if word == "RUN" else word for word in words]
    done = said(tmp_path, *STABCHECK, *asked, preexec_fn=small_files)
    assert done.returncode == 2, done.stderr
    assert done.stderr.startswith("Error: ") and f"\n  where  {where}" in done.stderr
    assert not list(tmp_path.glob("*.csv*"))


@pytest.fixture
def read_only(tmp_path, finished):
    """A folder that nobody may write, with a run file in it as a copy of a run under way would be: in WAL mode."""
    if os.geteuid() == 0 and said(tmp_path, *NO_PRIVILEGES, "true").returncode != 0:
        pytest.skip("root may write everywhere")
    folder = tmp_path / "read only"
    folder.mkdir()
    shutil.copy(finished, folder / "x.run")
    with RunFile.open(folder / "x.run", for_writing=True) as run:
        run.close(clean=False)
    for left in folder.glob("x.run-*"):
        left.unlink()
    folder.chmod(0o555)
    yield folder
    folder.chmod(0o755)


def test_a_run_file_in_a_folder_that_cannot_be_written_can_be_read_but_not_continued(read_only):
    before = NO_PRIVILEGES if os.geteuid() == 0 else ()
    done = said(read_only, *before, *STABCHECK, "export", "x.run", str(read_only.parent / "x.csv"))
    assert done.returncode == 0, done.stderr
    assert len((read_only.parent / "x.csv").read_text().splitlines()) == 3
    done = said(read_only, *before, *STABCHECK, "screen", str(SCENARIO), "--draws", "3", "--run-file", "x.run")
    assert done.returncode == 2 and "Permission denied" in done.stderr and "--run-file" in done.stderr


def test_a_script_without_the_guard_is_told_so_at_its_end(tmp_path):
    script = f"from stabcheck.screen import screen\nscreen({str(SCENARIO)!r}, draws=2, workers=2)\n"
    (tmp_path / "script.py").write_text(script)
    done = said(tmp_path, sys.executable, "script.py")
    assert done.returncode == 1
    assert done.stderr.rstrip().endswith('do     put what the script does under the line  if __name__ == "__main__":')


def test_a_script_over_standard_input_is_told_to_become_a_file(tmp_path):
    script = (
        "from stabcheck.screen import screen\n"
        f"if __name__ == '__main__':\n    screen({str(SCENARIO)!r}, draws=2, workers=1)\n"
    )
    done = said(tmp_path, sys.executable, "-", input=script)
    assert done.returncode == 1
    assert "a script that is no file cannot start workers" in done.stderr and "workers=0" in done.stderr
    done = said(tmp_path, sys.executable, "-", input=script.replace("workers=1", "workers=0"))
    assert done.returncode == 0, done.stderr


def test_an_engine_that_cannot_work_is_quoted_when_the_run_is_given_up(tmp_path):
    code = (
        "from stabcheck.batch import local\n"
        "from stabcheck.screen import screen\n"
        "local.DEATHS_IN_A_ROW = 2\n"
        "if __name__ == '__main__':\n"
        f"    screen({str(SCENARIO)!r}, draws=4, workers=1, engine='toy_engine:ToyEngine')\n"
    )
    (tmp_path / "script.py").write_text(code)
    raising = ",".join(map(str, range(4)))
    paths = os.pathsep.join([str(TESTS.parent), str(TESTS)])
    done = said(tmp_path, sys.executable, "script.py", env={**environment(), "TOY_RAISE": raising, "PYTHONPATH": paths})
    assert done.returncode == 1
    assert "why    RuntimeError: a defect at draw" in done.stderr
