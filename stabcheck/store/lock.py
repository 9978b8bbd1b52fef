"""One writer a run file: a lock on a side file that says who holds it, and no network file systems."""

import contextlib
import fcntl
import json
import os
import re
import socket
import sys
import time
from pathlib import Path

from stabcheck.errors import RunFileBusy, RunFileError

_WITH_DRIVER = {"9p", "acfs", "afs", "beegfs", "ceph", "cifs", "coda", "davfs", "gfs2", "glusterfs", "gpfs", "lustre"}
_MORE_DRIVERS = {
    "ncpfs",
    "nfs",
    "nfs4",
    "ocfs2",
    "orangefs",
    "panfs",
    "pvfs2",
    "smb",
    "smb2",
    "smb3",
    "smbfs",
    "wekafs",
}
_WITH_FUSE = {f"fuse.{kind}" for kind in ("ceph", "davfs", "glusterfs", "rclone", "s3fs", "sshfs")}
NETWORK_FILE_SYSTEMS = _WITH_DRIVER | _MORE_DRIVERS | _WITH_FUSE
"""Types as the kernel spells them, on which locks or shared memory of SQLite's WAL do not reach every machine."""


def file_system_of(folder: Path) -> str:
    """Name the type of file system that holds a folder, as Linux spells it; empty where it cannot be told."""
    if not sys.platform.startswith("linux"):
        return ""
    where = str(folder.resolve())
    best, kind = "", ""
    for line in Path("/proc/self/mountinfo").read_text(errors="surrogateescape").splitlines():
        mounted, _, rest = line.partition(" - ")
        point = re.sub(r"\\([0-7]{3})", lambda octal: chr(int(octal[1], 8)), mounted.split()[4])
        inside = where == point or where.startswith(point.rstrip("/") + "/")
        if inside and len(point) >= len(best):  # a later mount on the same point covers the earlier one
            best, kind = point, rest.split()[0]
    return kind


def refuse_network(path: Path) -> None:
    """Refuse a run file whose folder is on a network file system.

    Raises
    ------
    RunFileError
        If it is: two machines would not see each other's locks, and the file could be damaged.
    """
    kind = file_system_of(path.parent)
    if kind in NETWORK_FILE_SYSTEMS:
        raise RunFileError(
            f"the run file would be on a network file system ({kind})",
            where=str(path),
            why="its locks and shared memory do not reach other machines, so the file could be damaged",
            do="give a --run-file on a local disk and copy it when the run has ended",
        )


class WriterLock:
    """The right to write one run file, held until `release` or until this process ends, however it ends.

    Raises
    ------
    RunFileBusy
        If another process has it; host, process and start are named.
    RunFileError
        If the side file cannot be made.
    """

    def __init__(self, run_path: Path) -> None:
        self.path = run_path.with_name(run_path.name + ".lock")
        self._run_path = run_path
        while not self._taken():
            pass

    def _taken(self) -> bool:
        self._fd = self._opened()
        try:
            # Not lockf: that one belongs to the process and is lost when anybody in it closes the file.
            fcntl.flock(self._fd, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            holder = os.pread(self._fd, 4096, 0)
            os.close(self._fd)
            raise self._busy(holder) from None
        # Between opening and locking, the holder may have removed the file: then the lock is on a file without a name.
        with contextlib.suppress(FileNotFoundError):
            if os.path.samestat(os.fstat(self._fd), os.stat(self.path)):
                self._sign()
                return True
        os.close(self._fd)
        return False

    def _opened(self) -> int:
        try:
            return os.open(self.path, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o666)
        except OSError as problem:
            raise RunFileError(
                "the folder of the run file cannot be written",
                where=str(self.path.parent),
                why=problem.strerror or str(problem),
                do="give a --run-file in a folder that exists and that you may write",
            ) from problem

    def _sign(self) -> None:
        since = time.strftime("%Y-%m-%d %H:%M:%S")
        text = json.dumps({"host": socket.gethostname(), "pid": os.getpid(), "since": since}).encode()
        try:
            os.ftruncate(self._fd, 0)
            os.pwrite(self._fd, text, 0)
        except OSError as problem:
            os.close(self._fd)
            raise RunFileError(
                "the side file of the run file cannot be written",
                where=str(self.path),
                why=str(problem),
                do="check the space on the disk, or give a --run-file elsewhere",
            ) from problem

    def _busy(self, holder: bytes) -> RunFileBusy:
        try:
            known = json.loads(holder)
            who = f"process {known['pid']} on {known['host']}, since {known['since']}"
        except (ValueError, KeyError, TypeError):
            who = "a process that has not signed yet"
        return RunFileBusy(
            "another process is writing this run file",
            where=str(self._run_path),
            why=who,
            do="wait for it or stop it; `stabcheck report` may read the file meanwhile",
        )

    def release(self) -> None:
        """Give the right back and remove the side file; doing it twice is fine."""
        if self._fd >= 0:
            with contextlib.suppress(OSError):  # a folder that has become read-only: the lock itself goes with close
                self.path.unlink()
            os.close(self._fd)
            self._fd = -1
