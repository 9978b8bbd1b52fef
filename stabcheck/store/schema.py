"""Tables of the run file, its marks, and the words for what SQLite refuses."""

import contextlib
import sqlite3
from collections.abc import Iterator
from pathlib import Path

from stabcheck.errors import RunFileError
from stabcheck.store.rows import OUTCOME_CODECS, OUTCOME_FIELDS

APPLICATION_ID = 0x5374_6368  # "Stch"
VERSION = 1
"""Raised whenever a table changes its meaning; `refuse_version` says what happens to files of another version."""


def _outcome_table() -> str:
    described = [f"{name} {codec.sql}" for name, codec in zip(OUTCOME_FIELDS, OUTCOME_CODECS, strict=True)]
    described[0] = "number INTEGER PRIMARY KEY REFERENCES draws"
    return f"CREATE TABLE outcomes ({', '.join(described)})"


TABLES = (
    "CREATE TABLE about (item TEXT PRIMARY KEY, value TEXT NOT NULL)",
    "CREATE TABLE columns (position INTEGER PRIMARY KEY, kind TEXT NOT NULL, name TEXT NOT NULL, body TEXT NOT NULL)",
    "CREATE TABLE draws (number INTEGER PRIMARY KEY, state BLOB, numbers BLOB NOT NULL, refused TEXT NOT NULL,"
    " weight REAL, source_row INTEGER NOT NULL, chain INTEGER NOT NULL)",
    "CREATE INDEX not_orbits ON draws (refused, number) WHERE refused <> ''",  # counted every second for the progress
    _outcome_table(),
    "CREATE TABLE checkpoints (number INTEGER PRIMARY KEY REFERENCES draws, blob BLOB NOT NULL, steps_done REAL)",
    "CREATE TABLE log (entry INTEGER PRIMARY KEY, time TEXT NOT NULL, event TEXT NOT NULL, text TEXT NOT NULL)",
    "CREATE TABLE warnings (text TEXT PRIMARY KEY, count INTEGER NOT NULL)",
)

_OUTCOME_MARKS = ",".join("?" * len(OUTCOME_FIELDS))
OUTCOME_LIST = ", ".join(OUTCOME_FIELDS)
INSERT_OUTCOME = f"INSERT INTO outcomes ({OUTCOME_LIST}) VALUES ({_OUTCOME_MARKS}) ON CONFLICT (number) DO NOTHING"
SELECT_OUTCOME = f"SELECT {OUTCOME_LIST} FROM outcomes WHERE number = ?"
INSERT_DRAW = (
    "INSERT INTO draws (number, state, numbers, refused, weight, source_row, chain) VALUES (?,?,?,?,?,?,?)"
    " ON CONFLICT (number) DO NOTHING"
)
SELECT_DRAW = "SELECT number, state, numbers, refused, weight, source_row, chain FROM draws WHERE number = ?"
INSERT_CHECKPOINT = (
    "INSERT INTO checkpoints (number, blob, steps_done) SELECT ?1, ?2, ?3"
    " WHERE NOT EXISTS (SELECT 1 FROM outcomes WHERE number = ?1)"
    " ON CONFLICT (number) DO UPDATE SET blob = excluded.blob, steps_done = excluded.steps_done"
)
INSERT_WARNING = "INSERT INTO warnings (text, count) VALUES (?, 1) ON CONFLICT (text) DO UPDATE SET count = count + 1"
UPSERT_ABOUT = "INSERT INTO about VALUES (?, ?) ON CONFLICT (item) DO UPDATE SET value = excluded.value"
SELECT_PENDING = (
    "SELECT d.number, d.state, c.blob FROM draws d LEFT JOIN outcomes o ON o.number = d.number"
    " LEFT JOIN checkpoints c ON c.number = d.number"
    " WHERE d.number >= ? AND d.number < ? AND d.refused = '' AND o.number IS NULL ORDER BY d.number LIMIT ?"
)
SELECT_FIRST_PENDING = (
    "SELECT d.number FROM draws d LEFT JOIN outcomes o ON o.number = d.number"
    " WHERE d.number >= ? AND d.refused = '' AND o.number IS NULL ORDER BY d.number LIMIT 1"
)
SELECT_CLASSES = (
    "SELECT survival, rearranged, motion, trust, COUNT(*), TOTAL(MIN(1.0, time_d / span_d)) FROM outcomes"
    " WHERE number >= ? AND number < ? GROUP BY survival, rearranged, motion, trust"
)


def make_tables(sql: sqlite3.Connection) -> None:
    """Turn an empty database into an empty run file."""
    sql.execute(f"PRAGMA application_id = {APPLICATION_ID}")
    sql.execute(f"PRAGMA user_version = {VERSION}")
    for table in TABLES:
        sql.execute(table)


def is_marked(path: Path) -> bool:
    """Look into the header of a file, which is there whatever state SQLite left the rest in: is it a run file?

    References
    ----------
    SQLite, Database File Format, section 1.3: the application id is the big-endian integer at offset 68.
    """
    with path.open("rb") as file:
        return file.read(72)[68:] == APPLICATION_ID.to_bytes(4, "big")


def refuse_foreign(sql: sqlite3.Connection, path: Path) -> None:
    """Refuse a database that is not a run file, or one of another version.

    Version 1 is the only one so far, so there is nothing older to bring up to date; the first change of a table must
    come with a step that does, or with the sentence below.

    Raises
    ------
    RunFileError
        If it is one of those.
    """
    application = sql.execute("PRAGMA application_id").fetchone()[0]
    version = sql.execute("PRAGMA user_version").fetchone()[0]
    if application != APPLICATION_ID:
        raise RunFileError(
            "this is not a run file of stabcheck",
            where=str(path),
            why="it is a database of another program, or an empty one",
            do="give another --run-file; nothing in it was changed",
        )
    if version != VERSION:
        newer = version > VERSION
        raise RunFileError(
            f"the run file has schema version {version}, this stabcheck knows version {VERSION}",
            where=str(path),
            why=f"it was written by {'a newer' if newer else 'an older'} stabcheck",
            do=f"use {'a newer stabcheck' if newer else 'the version that wrote it'}; nothing in it was changed",
        )


@contextlib.contextmanager
def plain_words(path: Path) -> Iterator[None]:
    """Say in words what SQLite refuses.

    Raises
    ------
    RunFileError
        For whatever SQLite raises inside.
    """
    try:
        yield
    except sqlite3.DatabaseError as problem:
        raise _worded(problem, path) from problem


_SAFE = "everything stored before is safe"
_WORDS = {
    "SQLITE_FULL": ("the disk is full", f"free some space and give the same command again; {_SAFE}"),
    "SQLITE_IOERR": ("the disk refuses the run file", f"check disk and quota, then repeat the command; {_SAFE}"),
    "SQLITE_READONLY": ("the run file cannot be written", "check its permissions and those of its folder"),
    "SQLITE_CANTOPEN": ("the run file cannot be opened", "check that it exists, with its folder, and may be read"),
    "SQLITE_PERM": ("the run file cannot be opened", "check its permissions"),
    "SQLITE_BUSY": ("the run file is locked by another program", "close what reads it, then try again"),
    "SQLITE_NOTADB": ("this is not a run file of stabcheck", "give another --run-file; nothing in it was changed"),
    "SQLITE_CORRUPT": (
        "the run file is damaged",
        "take a copy from before; `sqlite3 FILE .recover` may save rows of this one",
    ),
}


def _worded(problem: sqlite3.DatabaseError, path: Path) -> RunFileError:
    name = getattr(problem, "sqlite_errorname", "")
    for known, (what, do) in _WORDS.items():
        if name.startswith(known):
            return RunFileError(what, where=str(path), why=str(problem), do=do)
    return RunFileError("the run file refuses", where=str(path), why=f"{problem} {name}".strip(), do=_SAFE)
