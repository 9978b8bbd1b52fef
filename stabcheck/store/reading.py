"""What can be read from a run file, by its writer and by anybody else while it is written."""

import sqlite3
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from stabcheck.arrays import AnyArray
from stabcheck.errors import RunFileError
from stabcheck.outcome import Motion, Outcome, Survival, Trust
from stabcheck.plan import Task
from stabcheck.store import schema
from stabcheck.store.rows import OUTCOME_FIELDS, DrawColumn, Draws, Row, draws_of, outcome_columns, outcome_of

PAGE = 256
"""Tasks read at once: no query stays open while rows are written, and memory does not grow with the run."""

ClassOfDraws = tuple[Survival, bool, Motion, Trust]


class Readable:
    """The reading half of a run file; every answer is of one instant."""

    path: Path
    columns: tuple[DrawColumn, ...]
    _sql: sqlite3.Connection

    def about(self, item: str) -> str:
        """Give one item of what the file says about itself.

        Raises
        ------
        RunFileError
            If it says nothing about it.
        """
        rows = self._rows("SELECT value FROM about WHERE item = ?", (item,))
        if not rows:
            raise RunFileError(
                f"the run file says nothing about {item!r}",
                where=str(self.path),
                why="it is damaged",
                do="take a copy from before",
            )
        return str(rows[0][0])

    def draw_count(self) -> int:
        """How many draws are stored; they are numbered from 0 without a gap."""
        return int(self._rows("SELECT COALESCE(MAX(number) + 1, 0) FROM draws")[0][0])

    def finished_count(self, upto: int | None = None) -> int:
        """How many draws (with numbers below ``upto``) have an outcome."""
        return int(self._rows("SELECT COUNT(*) FROM outcomes WHERE number < ?", (_upto(upto),))[0][0])

    def refused(self, upto: int | None = None) -> dict[str, int]:
        """Count the draws (with numbers below ``upto``) that are not orbits, by reason."""
        query = (
            "SELECT refused, COUNT(*) FROM draws WHERE refused <> '' AND number < ? GROUP BY refused ORDER BY refused"
        )
        return dict(self._rows(query, (_upto(upto),)))

    def tasks_pending(self, upto: int, first: int = 0) -> Iterator[Task]:
        """Give the unfinished draws from ``first`` to ``upto - 1`` that are orbits, in order, read lazily."""
        while page := self._rows(schema.SELECT_PENDING, (first, upto, PAGE)):
            for number, state, blob in page:
                yield Task.from_bytes(number, state, blob or b"")
            first = page[-1][0] + 1

    def prefix_done(self, start: int = 0) -> int:
        """Say how many draws from number 0 on are done without a gap; ``start`` is a number known to be within."""
        pending = self._rows(schema.SELECT_FIRST_PENDING, (start,))
        return int(pending[0][0]) if pending else self.draw_count()

    def classes(self, first: int = 0, upto: int | None = None) -> dict[ClassOfDraws, tuple[int, float]]:
        """Count finished draws by what their verdict follows from.

        Returns
        -------
        dict of (survival, rearranged, motion, trust) to (count, sum of the shares of the span that were followed)
        """
        rows = self._rows(schema.SELECT_CLASSES, (first, _upto(upto)))
        return {(Survival(s), bool(r), Motion(m), Trust(t)): (count, share) for s, r, m, t, count, share in rows}

    def checkpoint_shares(self) -> dict[int, float]:
        """Say what share of its span each draw under way has done by its stored checkpoint."""
        return dict(self._rows("SELECT number, steps_done FROM checkpoints ORDER BY number"))

    def outcomes(self, upto: int | None = None) -> dict[str, AnyArray]:
        """Give the outcomes of draws with numbers below ``upto`` as one array a field of ``Outcome``, by number."""
        return outcome_columns(self._outcome_rows(upto))

    def each_outcome(self, upto: int | None = None) -> Iterator[Outcome]:
        """Give the outcomes of draws with numbers below ``upto`` one by one, by number."""
        return map(outcome_of, self._outcome_rows(upto))

    def outcome(self, number: int) -> Outcome | None:
        """Give the outcome of one draw, or None if it has none yet."""
        rows = self._rows(schema.SELECT_OUTCOME, (number,))
        return outcome_of(rows[0]) if rows else None

    def task(self, number: int) -> Task | None:
        """Give the start of one draw, or None if it is not stored or not an orbit."""
        rows = self._rows("SELECT state FROM draws WHERE number = ? AND state IS NOT NULL", (number,))
        return Task.from_bytes(number, rows[0][0]) if rows else None

    def draws(self, upto: int | None = None) -> Draws:
        """Give the draws with numbers below ``upto`` as arrays."""
        query = "SELECT number, numbers, refused, weight, source_row, chain FROM draws WHERE number < ? ORDER BY number"
        return draws_of(self._rows(query, (_upto(upto),)), self.columns)

    def warnings(self) -> dict[str, int]:
        """Count the warnings of the libraries while draws were followed."""
        return dict(self._rows("SELECT text, count FROM warnings ORDER BY text"))

    def log_entries(self) -> list[tuple[str, str, str]]:
        """Give time, event and text of everything that was logged."""
        return self._rows("SELECT time, event, text FROM log ORDER BY entry")

    def dump(self) -> str:
        """Write all outcomes as text in a form that is equal, byte for byte, if and only if they are."""
        lines = ["\t".join(OUTCOME_FIELDS)]
        for row in self._outcome_rows(None):
            lines.append("\t".join(v.hex() if isinstance(v, bytes) else repr(v) for v in row))
        return "\n".join(lines) + "\n"

    def _outcome_rows(self, upto: int | None) -> list[Row]:
        return self._rows(
            f"SELECT {schema.OUTCOME_LIST} FROM outcomes WHERE number < ? ORDER BY number", (_upto(upto),)
        )

    def _rows(self, query: str, values: Row = ()) -> list[Any]:
        with schema.plain_words(self.path):
            return self._sql.execute(query, values).fetchall()


def _upto(upto: int | None) -> int:
    return 2**62 if upto is None else upto
