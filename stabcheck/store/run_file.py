"""One run as a file: draws, outcomes, checkpoints, a log. One writer, many readers, right after a power cut."""

import contextlib
import json
import os
import sqlite3
import time
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from types import TracebackType
from typing import Any, Self

from stabcheck.errors import ResumeRefused, RunFileError
from stabcheck.outcome import Checkpoint, Finished, HandOver, Message
from stabcheck.store import identity as identities
from stabcheck.store import schema
from stabcheck.store.killpoints import here
from stabcheck.store.lock import WriterLock, refuse_network
from stabcheck.store.reading import Readable
from stabcheck.store.rows import (
    OUTCOME_FIELDS,
    DrawColumn,
    DrawRow,
    Row,
    row_of,
)


class RunFile(Readable):
    """A run file, open for reading or, for one process at a time, for writing. Use it in a ``with`` statement.

    Attributes
    ----------
    path : Path
    identity : dict
        What must agree for a resume.
    bodies : tuple of str
        Planets in the ensemble's order, without the star.
    columns : tuple of DrawColumn
        What the numbers of a draw's row are.
    scenario_text : str
        The scenario as it was given.
    """

    def __init__(self, path: Path, sql: sqlite3.Connection, lock: WriterLock | None) -> None:
        self.path, self._sql, self._lock = path, sql, lock
        try:
            self.identity: dict[str, Any] = json.loads(self.about("identity"))
            self.bodies: tuple[str, ...] = tuple(json.loads(self.about("bodies")))
            self.scenario_text = self.about("scenario text")
            columns = self._rows("SELECT kind, name, body FROM columns ORDER BY position")
        except BaseException:
            sql.close()
            raise
        self.columns = tuple(DrawColumn(*row) for row in columns)

    # -- opening and closing

    @classmethod
    def create(
        cls,
        path: Path,
        *,
        identity: Mapping[str, Any],
        bodies: Sequence[str],
        columns: Sequence[DrawColumn],
        scenario_text: str = "",
    ) -> Self:
        """Make a new run file and open it for writing.

        It is built beside its place and then moved there, so that a run file is whole or not there at all.

        Raises
        ------
        RunFileError
            If there is a file already, or the place cannot be used.
        RunFileBusy
            If another process writes it.
        """
        path = Path(path)
        refuse_network(path)
        lock = WriterLock(path)
        try:
            if path.exists():
                raise RunFileError(
                    "there is a file already",
                    where=str(path),
                    why="nothing is ever overwritten",
                    do="give another name, or continue it",
                )
            text = identities.canonical_text(identity)
            about = {
                "identity": text,
                "identity sha256": identities.digest(text),
                "bodies": json.dumps(list(bodies)),
                "scenario text": scenario_text,
                "created": _now(),
            }
            _build(path, about, columns)
            here("run file created")
            return cls(path, _connected(path, writing=True), lock)
        except BaseException:
            lock.release()
            raise

    @classmethod
    def open(cls, path: Path, *, for_writing: bool = False, identity: Mapping[str, Any] | None = None) -> Self:
        """Open a run file; with ``identity``, only if it was made with the same one, asked before anything is touched.

        Raises
        ------
        ResumeRefused
            If the identity differs; the error lists by what.
        RunFileBusy
            If it is to be written and another process does.
        RunFileError
            If it is missing, foreign, damaged, of another version, or on a network file system.
        """
        path = Path(path)
        if not path.is_file():
            raise RunFileError(
                "there is no such run file", where=str(path), do="check the name, or start a run with `screen`"
            )
        look = cls(path, _connected(path, writing=False), None)
        try:
            if identity is not None:
                look.require(identity)
        except ResumeRefused:
            look.close()
            raise
        if not for_writing:
            return look
        look.close()
        refuse_network(path)
        lock = WriterLock(path)
        try:
            return cls(path, _connected(path, writing=True), lock)
        except BaseException:
            lock.release()
            raise

    def require(self, identity: Mapping[str, Any]) -> None:
        """Refuse to go on with anything else than what the file was made with.

        Raises
        ------
        ResumeRefused
            With the items that differ.
        """
        differing = identities.differing(self.identity, identities.plain(identity))
        if differing:
            raise ResumeRefused(differing, where=str(self.path))

    def close(self, *, clean: bool = True) -> None:
        """Close the file; after a clean end it is one file again that can be copied. Twice is fine."""
        try:
            if self._lock is not None and clean:
                self._gather()
        finally:
            self._sql.close()
            if self._lock is not None:
                self._lock.release()
                self._lock = None

    def _gather(self) -> None:
        """Bring everything into the one file; a reader that is in the way leaves it safe, but in two files."""
        with plain(self.path):
            self._sql.execute("PRAGMA busy_timeout = 2000")
            in_the_way = self._sql.execute("PRAGMA wal_checkpoint(TRUNCATE)").fetchone()[0]
            try:
                mode = "" if in_the_way else self._sql.execute("PRAGMA journal_mode = DELETE").fetchone()[0]
            except sqlite3.OperationalError as problem:
                if problem.sqlite_errorname != "SQLITE_BUSY":
                    raise
                mode = ""
        if mode != "delete":
            self.log("still read", "another program reads the file: to copy it now, copy its -wal file too")

    def __enter__(self) -> Self:
        return self

    def __exit__(self, kind: type[BaseException] | None, _: BaseException | None, __: TracebackType | None) -> None:
        # After a failure, no more writing than SQLite does by itself: the disk may be what failed.
        self.close(clean=kind is None or not issubclass(kind, RunFileError))

    # -- writing

    def add_draws(self, rows: Sequence[DrawRow]) -> None:
        """Store draws, all of these rows or none; an equal row that is there already is fine.

        Raises
        ------
        RunFileError
            If another row has the number of one of them.
        """
        with self._transaction():
            flat = [row.as_row() for row in rows]
            self._insert(schema.INSERT_DRAW, flat, schema.SELECT_DRAW, DRAW_FIELDS)
        here("draws added")

    def record(self, messages: Sequence[Message]) -> None:
        """Store what an engine sent, all of it or nothing; what is there already in the same form is fine.

        Raises
        ------
        RunFileError
            If a draw has another outcome already, or is not in the file, or its disk refuses.
        """
        finished = [m for m in messages if isinstance(m, Finished)]
        reached = {m.number: m for m in messages if isinstance(m, Checkpoint)}  # the last one of each draw
        if any(isinstance(m, HandOver) for m in messages):
            raise RunFileError(
                "a hand-over cannot be stored", why="the runner has to carry it out or store it as a checkpoint"
            )
        here("before commit")
        with self._transaction():
            rows = [row_of(m.outcome) for m in finished]
            self._insert(schema.INSERT_OUTCOME, rows, schema.SELECT_OUTCOME, OUTCOME_FIELDS)
            self._sql.executemany("DELETE FROM checkpoints WHERE number = ?", [(row[0],) for row in rows])
            flat = [(m.number, m.blob, m.steps_done) for m in reached.values()]
            self._sql.executemany(schema.INSERT_CHECKPOINT, flat)
            self._sql.executemany(schema.INSERT_WARNING, [(text,) for m in finished for text in m.warnings])
        if reached:
            here("checkpoint stored")

    def log(self, event: str, text: str) -> None:
        """Note something that is no result: a start, a stop, a death, a retry."""
        with self._transaction():
            self._sql.execute("INSERT INTO log (time, event, text) VALUES (?, ?, ?)", (_now(), event, text))

    def say_about(self, item: str, value: str) -> None:
        """Store or change one item of what the file says about itself; never of its identity."""
        if item.startswith("identity"):
            raise RunFileError("the identity of a run never changes", where=str(self.path))
        with self._transaction():
            self._sql.execute(schema.UPSERT_ABOUT, (item, value))

    def _insert(self, insert: str, rows: list[Row], select: str, names: Sequence[str]) -> None:
        before = self._sql.total_changes
        self._sql.executemany(insert, rows)
        if self._sql.total_changes - before == len(rows):
            return
        for row in rows:
            stored = self._sql.execute(select, (row[0],)).fetchone()
            if stored != row:
                raise _another(self.path, names, stored, row)

    @contextlib.contextmanager
    def _transaction(self) -> Iterator[None]:
        if self._lock is None:
            raise RunFileError("the run file is open for reading only", where=str(self.path))
        with plain(self.path):
            self._sql.execute("BEGIN IMMEDIATE")
            try:
                yield
                here("in commit")
                self._sql.execute("COMMIT")
            except BaseException:
                if self._sql.in_transaction:  # a full disk has rolled back by itself
                    self._sql.execute("ROLLBACK")
                raise
        here("after commit")


DRAW_FIELDS = ("number", "state", "numbers", "refused", "weight", "source_row", "chain")
plain = schema.plain_words


LEFT_BY_A_KILL = ("SQLITE_READONLY_ROLLBACK", "SQLITE_READONLY_RECOVERY")
"""Whoever only reads must not play a journal back that was left by a process killed at the wrong moment."""


def _connected(path: Path, *, writing: bool) -> sqlite3.Connection:
    with plain(path):
        if writing:
            return _to_write(path)
        try:
            return _opened(path, "mode=ro")
        except sqlite3.OperationalError as problem:
            if problem.sqlite_errorname in LEFT_BY_A_KILL and schema.is_marked(path):
                _opened(path, "mode=rw").close()  # plays it back
                return _opened(path, "mode=ro")
            if problem.sqlite_errorname == "SQLITE_READONLY_DIRECTORY" and not _has_company(path):
                return _opened(path, "mode=ro&immutable=1")  # the whole of it is in the one file, which stays as it is
            raise


def _to_write(path: Path) -> sqlite3.Connection:
    sql = _opened(path, "mode=rw")
    try:
        sql.execute("PRAGMA journal_mode = WAL")
        sql.execute("PRAGMA synchronous = FULL")
        sql.execute("PRAGMA foreign_keys = ON")
    except BaseException:
        sql.close()
        raise
    return sql


def _opened(path: Path, how: str) -> sqlite3.Connection:
    sql = sqlite3.connect(f"{path.absolute().as_uri()}?{how}", uri=True, isolation_level=None, timeout=30.0)
    try:
        schema.refuse_foreign(sql, path)
    except BaseException:
        sql.close()
        raise
    return sql


def _has_company(path: Path) -> bool:
    return any(path.with_name(path.name + ending).exists() for ending in ("-wal", "-journal"))


def _build(path: Path, about: Mapping[str, str], columns: Sequence[DrawColumn]) -> None:
    beside = path.with_name(path.name + ".new")
    for left in (beside, beside.with_name(beside.name + "-journal")):
        left.unlink(missing_ok=True)  # of a start that was killed; we hold the lock
    with plain(path), contextlib.closing(sqlite3.connect(beside, isolation_level=None)) as sql:
        sql.execute("PRAGMA synchronous = FULL")
        sql.execute("BEGIN")
        schema.make_tables(sql)
        sql.executemany("INSERT INTO about VALUES (?, ?)", about.items())
        numbered = [(k, c.kind, c.name, c.body) for k, c in enumerate(columns)]
        sql.executemany("INSERT INTO columns VALUES (?, ?, ?, ?)", numbered)
        sql.execute("COMMIT")
    os.rename(beside, path)
    folder = os.open(path.parent, os.O_RDONLY)
    try:
        os.fsync(folder)  # or the new name may be lost in a power cut
    finally:
        os.close(folder)


def _another(path: Path, names: Sequence[str], stored: Row, row: Row) -> RunFileError:
    where = [f"{n}: {s!r} stored, {r!r} now" for n, s, r in zip(names, stored, row, strict=True) if s != r]
    return RunFileError(
        f"draw {row[0]} is in the run file already, and differs",
        where=str(path),
        why="; ".join(each if len(each) < 200 else each[:200] + "..." for each in where),
        do="report this with both files: the same draw must give the same row, bit for bit, on one machine",
    )


def _now() -> str:
    return time.strftime("%Y-%m-%d %H:%M:%S%z")
