"""Disks that refuse: what is stored stays, and the words say what to do."""

import os
import resource
import shutil
import signal
import sqlite3
import struct
import subprocess
import sys
from pathlib import Path

import pytest
from toy_owner import IDENTITY, carry

from stabcheck.errors import RunFileBusy, RunFileError
from stabcheck.outcome import Finished, Outcome, Survival
from stabcheck.store import DrawColumn, DrawRow, RunFile, lock
from stabcheck.store.schema import VERSION

TESTS = Path(__file__).parent.parent
COLUMNS = [DrawColumn("parameter", "number")]


def made(path: Path) -> RunFile:
    return RunFile.create(path, identity=IDENTITY, bodies=["b"], columns=COLUMNS)


def refused_until_full(run: RunFile) -> tuple[RunFileError, int]:
    """Store draws until the disk refuses; how many were stored before."""
    number = 0
    while True:
        row = DrawRow(number=number, state=os.urandom(20_000), values=bytes(8))
        try:
            run.add_draws([row])
        except RunFileError as error:
            return error, number
        number += 1
        assert number < 10_000


@pytest.fixture
def small_disk(tmp_path):
    """A disk of one megabyte."""
    folder = tmp_path / "disk"
    folder.mkdir()
    mount = shutil.which("mount")
    done = mount and subprocess.run(
        [mount, "-t", "tmpfs", "-o", "size=1m", "tmpfs", folder], capture_output=True, check=False
    )
    if not done or done.returncode:
        pytest.skip("only root may mount; the limit of the file size is tested instead")
    yield folder
    subprocess.run(["umount", folder], check=True)


def test_a_full_disk_is_said_in_words_and_what_was_stored_is_safe(small_disk):
    path = small_disk / "x.run"
    with pytest.raises(RunFileError), made(path) as run:
        error, stored = refused_until_full(run)
        assert error.what in ("the disk is full", "the disk refuses the run file")
        assert "everything stored before is safe" in error.do and error.where == str(path)
        raise error
    (small_disk / "x.run.lock").unlink(missing_ok=True)
    with RunFile.open(path) as run:
        assert run.draw_count() == stored > 10


def test_a_run_goes_on_when_there_is_space_again(small_disk, tmp_path):
    filler = small_disk / "filler"
    filler.write_bytes(bytes(900_000))
    with pytest.raises(RunFileError, match="disk"):
        carry(small_disk / "x.run", 3000, 0)
    filler.unlink()
    shutil.copytree(small_disk, tmp_path / "larger")
    assert carry(tmp_path / "larger" / "x.run", 60, 0) == carry(tmp_path / "measure.run", 60, 0)


def test_a_limit_of_the_file_size_is_said_in_words_and_what_was_stored_is_safe(tmp_path):
    path = tmp_path / "x.run"
    code = (
        "import resource, sys\n"
        "from pathlib import Path\n"
        "resource.setrlimit(resource.RLIMIT_FSIZE, (600_000, 600_000))\n"
        "import test_disk\n"
        "run = test_disk.made(Path(sys.argv[1]))\n"
        "error, stored = test_disk.refused_until_full(run)\n"
        "run.close(clean=False)\n"
        "print(stored, '|', error.what, '|', error.do)\n"
    )
    python_path = os.pathsep.join(map(str, (TESTS.parent, TESTS, TESTS / "faults")))
    environment = {**os.environ, "PYTHONPATH": python_path}
    done = subprocess.run(
        [sys.executable, "-c", code, path], capture_output=True, text=True, env=environment, timeout=60
    )
    assert done.returncode == 0, done.stderr
    stored, what, do = done.stdout.strip().split(" | ")
    assert what in ("the disk is full", "the disk refuses the run file") and "everything stored before is safe" in do
    with RunFile.open(path) as run:
        assert run.draw_count() == int(stored) > 10


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write everywhere")
def test_a_folder_that_may_not_be_written_is_said_in_words(tmp_path):
    folder = tmp_path / "closed"
    folder.mkdir(mode=0o500)
    with pytest.raises(RunFileError, match="the folder of the run file cannot be written"):
        made(folder / "x.run")


def test_a_file_system_that_is_mounted_for_reading_is_said_in_words(small_disk):
    subprocess.run(["mount", "-o", "remount,ro", small_disk], check=True)
    with pytest.raises(RunFileError, match=r"cannot be written.*\n.*\n  why    Read-only file system"):
        made(small_disk / "x.run")


def test_a_finished_run_can_be_read_where_nothing_can_be_written(small_disk):
    with made(small_disk / "x.run") as run:
        run.add_draws([DrawRow(number=0, state=b"", values=bytes(8), refused="e < 0 (b)")])
    subprocess.run(["mount", "-o", "remount,ro", small_disk], check=True)
    with RunFile.open(small_disk / "x.run") as run:
        assert run.refused() == {"e < 0 (b)": 1}


def test_a_folder_that_is_not_there_is_said_in_words(tmp_path):
    with pytest.raises(RunFileError, match=r"cannot be written.*\n.*nowhere\n  why    No such file"):
        made(tmp_path / "nowhere" / "x.run")


def test_a_run_file_that_is_not_there_is_said_in_words(tmp_path):
    with pytest.raises(RunFileError, match="there is no such run file"):
        RunFile.open(tmp_path / "x.run")


def test_a_network_file_system_is_refused_before_anything_is_made(tmp_path, monkeypatch):
    monkeypatch.setattr(lock, "file_system_of", lambda folder: "nfs4")
    with pytest.raises(RunFileError, match=r"network file system \(nfs4\)"):
        made(tmp_path / "x.run")
    assert not list(tmp_path.iterdir())


def test_a_run_file_on_a_network_file_system_may_be_read(tmp_path, monkeypatch):
    made(tmp_path / "x.run").close()
    monkeypatch.setattr(lock, "file_system_of", lambda folder: "nfs4")
    RunFile.open(tmp_path / "x.run").close()
    with pytest.raises(RunFileError, match="network file system"):
        RunFile.open(tmp_path / "x.run", for_writing=True)


@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="reads /proc")
def test_the_type_of_a_file_system_is_told_by_its_own_mount(small_disk):
    assert lock.file_system_of(Path("/proc")) == "proc"
    assert lock.file_system_of(small_disk) == "tmpfs"


@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="reads /proc")
def test_names_of_mounts_with_spaces_are_read_and_the_longest_wins(tmp_path, monkeypatch):
    lines = [
        "1 0 8:1 / / rw - ext4 /dev/sda rw",
        f"2 1 0:9 / {tmp_path!s}/with\\040space rw shared:7 - nfs4 server:/x rw",
        f"3 1 0:9 / {tmp_path!s}/with rw - xfs /dev/b rw",
    ]
    monkeypatch.setattr(Path, "read_text", lambda self, **_: "\n".join(lines))
    assert lock.file_system_of(tmp_path / "with space" / "deep") == "nfs4"
    assert lock.file_system_of(tmp_path / "without") == "ext4"


def test_a_second_writer_in_another_process_is_refused_by_name(tmp_path):
    path = tmp_path / "x.run"
    code = (
        "import pathlib, sys, toy_owner\n"
        "run = toy_owner.opened(pathlib.Path(sys.argv[1]))\n"
        "print('open', flush=True)\n"
        "input()\n"
    )
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(map(str, (TESTS.parent, TESTS)))}
    process = subprocess.Popen(
        [sys.executable, "-c", code, path], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True, env=environment
    )
    assert process.stdout is not None and process.stdout.readline() == "open\n"
    with pytest.raises(RunFileBusy, match=f"process {process.pid} on "):
        RunFile.open(path, for_writing=True)
    process.send_signal(signal.SIGKILL)
    process.communicate()
    RunFile.open(path, for_writing=True).close()


def test_a_file_of_another_program_is_refused_and_not_changed(tmp_path):
    path = tmp_path / "x.run"
    with sqlite3.connect(path) as sql:
        sql.execute("CREATE TABLE t (a)")
    sql.close()
    before = path.read_bytes()
    for writing in (False, True):
        with pytest.raises(RunFileError, match="not a run file of stabcheck"):
            RunFile.open(path, for_writing=writing)
    assert path.read_bytes() == before


@pytest.mark.parametrize("content", [b"", b"a,b\n1,2\n" * 200])
def test_an_empty_file_and_a_text_are_refused(tmp_path, content):
    (tmp_path / "x.run").write_bytes(content)
    with pytest.raises(RunFileError, match="not a run file of stabcheck"):
        RunFile.open(tmp_path / "x.run", for_writing=True)
    assert (tmp_path / "x.run").read_bytes() == content


@pytest.mark.parametrize("version, word", [(VERSION + 1, "newer"), (VERSION - 1, "older")])
def test_a_file_of_another_schema_version_is_refused_and_not_changed(tmp_path, version, word):
    path = tmp_path / "x.run"
    made(path).close()
    with sqlite3.connect(path) as sql:
        sql.execute(f"PRAGMA user_version = {version}")
    sql.close()
    before = path.read_bytes()
    with pytest.raises(RunFileError, match=f"version {version}.*\n(.*\n)*.*{word} stabcheck"):
        RunFile.open(path, for_writing=True)
    assert path.read_bytes() == before


def test_a_damaged_file_is_said_in_words(tmp_path):
    path = tmp_path / "x.run"
    with made(path) as run:
        run.add_draws([DrawRow(number=n, state=os.urandom(3000), values=bytes(8)) for n in range(100)])
    data = bytearray(path.read_bytes())
    data[4096:60_000] = os.urandom(60_000 - 4096)
    path.write_bytes(bytes(data))
    with pytest.raises(RunFileError) as refused, RunFile.open(path) as run:
        run.draws()
    assert refused.value.what in ("the run file is damaged", "this is not a run file of stabcheck")


def test_a_file_cut_short_is_said_in_words(tmp_path):
    path = tmp_path / "x.run"
    with made(path) as run:
        run.add_draws([DrawRow(number=n, state=os.urandom(3000), values=bytes(8)) for n in range(100)])
    os.truncate(path, 50_000)
    with pytest.raises(RunFileError, match="damaged"), RunFile.open(path) as run:
        run.draws()


def test_a_journal_cut_at_any_byte_leaves_a_prefix_of_the_commits(tmp_path):
    """As after a power cut: the disk holds the beginning of what was on its way."""
    path = tmp_path / "x.run"
    run = made(path)
    run.add_draws([DrawRow(number=n, state=bytes(100), values=bytes(8)) for n in range(20)])
    for n in range(20):
        usual = {"survival": Survival.SURVIVED, "time_d": 1.0, "span_d": 1.0, "method": "toy", "step_d": 1.0}
        run.record([Finished(Outcome(number=n, **usual))])
    main, journal = path.read_bytes(), Path(f"{path}-wal").read_bytes()
    run.close()
    seen = set()
    for cut in range(0, len(journal) + 1, len(journal) // 40):
        copy = tmp_path / "copy.run"
        copy.write_bytes(main)
        Path(f"{copy}-wal").write_bytes(journal[:cut])
        with RunFile.open(copy, for_writing=True) as cut_off:
            numbers = cut_off.outcomes()["number"].tolist()
        assert numbers == list(range(len(numbers)))
        seen.add(len(numbers))
    assert len(seen) > 5  # the cuts fell into many places


def leave_a_journal(path: Path) -> None:
    """Leave a run file as a kill at the switch to the write-ahead log does: page 1 new, its old content in a journal.

    The rollback journal is written as SQLite's "Database File Format", section 2.1 "The Rollback Journal", says: a
    header of one sector (magic, records, nonce, pages before, sector, page size), then page number, page, checksum.
    """
    before = path.read_bytes()
    size, sector, nonce = int.from_bytes(before[16:18], "big"), 512, 12345
    page = before[:size]
    check = (nonce + sum(page[at] for at in range(size - 200, 0, -200))) % 2**32
    magic = bytes.fromhex("d9d505f920a163d7")
    header = magic + struct.pack(">5I", 1, nonce, len(before) // size, sector, size)
    journal = header.ljust(sector, b"\0") + struct.pack(">I", 1) + page + struct.pack(">I", check)
    path.with_name(path.name + "-journal").write_bytes(journal)
    path.write_bytes(page[:18] + b"\2\2" + page[20:24] + b"half" + before[28:])


@pytest.mark.parametrize("way", ["read", "resume"])
def test_a_journal_that_a_kill_left_is_played_back_by_whoever_comes_next(tmp_path, way):
    path = tmp_path / "x.run"
    expected = carry(path, 5, 0)
    leave_a_journal(path)
    if way == "read":
        with RunFile.open(path) as run:
            assert run.dump() == expected
    else:
        assert carry(path, 20, 0) == carry(tmp_path / "whole.run", 20, 0)


def test_control_a_reader_alone_does_not_play_it_back(tmp_path):
    path = tmp_path / "x.run"
    made(path).close()
    leave_a_journal(path)
    sql = sqlite3.connect(f"{path.as_uri()}?mode=ro", uri=True)
    with pytest.raises(sqlite3.OperationalError) as refused:
        sql.execute("PRAGMA application_id")
    sql.close()
    assert refused.value.sqlite_errorname == "SQLITE_READONLY_ROLLBACK"


def test_the_journal_of_a_foreign_database_is_left_to_its_program(tmp_path):
    path = tmp_path / "x.run"
    with sqlite3.connect(path) as sql:
        sql.execute("CREATE TABLE t (x)")
    sql.close()
    leave_a_journal(path)
    damaged = path.read_bytes()
    with pytest.raises(RunFileError):
        RunFile.open(path)
    assert path.read_bytes() == damaged


def test_what_is_left_of_a_start_that_was_killed_does_not_matter(tmp_path):
    (tmp_path / "x.run.new").write_bytes(b"half a file")
    (tmp_path / "x.run.lock").write_bytes(b"")
    made(tmp_path / "x.run").close()
    assert [file.name for file in tmp_path.iterdir()] == ["x.run"]


def test_control_the_limit_of_the_file_size_is_not_in_force_here():
    assert resource.getrlimit(resource.RLIMIT_FSIZE)[0] == resource.RLIM_INFINITY
