"""Outcomes and draws as rows of the run file and back. Arrays are blobs of little-endian doubles, never pickles."""

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, fields
from typing import Any, NamedTuple, get_type_hints

import numpy as np

from stabcheck.arrays import AnyArray, Array, Integers, PerDraw
from stabcheck.outcome import Ending, Motion, Outcome, Survival, Trust

Row = tuple[Any, ...]


class Codec(NamedTuple):
    """How one kind of field is stored."""

    sql: str
    to_sql: Callable[[Any], Any]
    from_sql: Callable[[Any], Any]


def _real(value: Any) -> float | None:
    # + 0.0: SQLite keeps no sign of zero, so none may go in, or an equal row would print differently.
    return None if math.isnan(value) else float(value) + 0.0


def _counts(value: Sequence[int]) -> str:
    return " ".join(str(int(count)) for count in value)


def _array(blob: bytes) -> Array:
    return np.frombuffer(blob, dtype="<f8").astype(np.float64)


def _word(kind: type) -> Codec:
    return Codec("TEXT NOT NULL", str, kind)


_TUPLE = Codec("TEXT NOT NULL", _counts, lambda text: tuple(int(count) for count in text.split()))
_CODECS: dict[Any, Codec] = {
    int: Codec("INTEGER NOT NULL", int, int),
    bool: Codec("INTEGER NOT NULL", int, bool),
    str: _word(str),
    float: Codec("REAL", _real, lambda value: math.nan if value is None else value),
    Array: Codec("BLOB NOT NULL", lambda value: np.asarray(value, dtype="<f8").tobytes(), _array),
    tuple[int, ...]: _TUPLE,
    tuple[int, int]: _TUPLE,
    **{kind: _word(kind) for kind in (Survival, Ending, Trust, Motion)},
}
_HINTS = get_type_hints(Outcome)
OUTCOME_FIELDS = tuple(f.name for f in fields(Outcome))
OUTCOME_CODECS = tuple(_CODECS[_HINTS[name]] for name in OUTCOME_FIELDS)


def row_of(outcome: Outcome) -> Row:
    """Flatten an outcome, one value a field."""
    return tuple(c.to_sql(getattr(outcome, name)) for name, c in zip(OUTCOME_FIELDS, OUTCOME_CODECS, strict=True))


def outcome_of(row: Row) -> Outcome:
    """Undo `row_of`; the enumerations refuse a word that is none of theirs."""
    named = zip(OUTCOME_FIELDS, OUTCOME_CODECS, row, strict=True)
    return Outcome(**{name: codec.from_sql(value) for name, codec, value in named})


def outcome_columns(rows: Sequence[Row]) -> dict[str, AnyArray]:
    """Turn rows of outcomes into one array a field.

    Returns
    -------
    dict of str to array
        Words as arrays of str, numbers as (draw,) arrays; ``closest_pair`` is (draw, 2), the arrays per planet are
        (draw, planet) with NaN in rows that have none, ``bodies`` is an array of tuples.
    """
    return {
        name: _column(name, codec, [row[k] for row in rows])
        for k, (name, codec) in enumerate(zip(OUTCOME_FIELDS, OUTCOME_CODECS, strict=True))
    }


def _column(name: str, codec: Codec, stored: list[Any]) -> AnyArray:
    kind = _HINTS[name]
    if kind == Array:
        return _rectangle([_array(blob) for blob in stored])
    if kind == tuple[int, int]:
        return np.array([codec.from_sql(text) for text in stored], dtype=np.int64).reshape(-1, 2)
    if kind == tuple[int, ...]:
        tuples = np.empty(len(stored), dtype=object)
        tuples[:] = [codec.from_sql(text) for text in stored]
        return tuples
    if codec.sql.startswith("TEXT"):
        return np.array(stored, dtype=np.str_)
    values = [codec.from_sql(value) for value in stored]
    return np.array(values, dtype={int: np.int64, bool: np.bool_, float: np.float64}[kind])


def _rectangle(arrays: list[Array]) -> Array:
    width = max((each.size for each in arrays), default=0)
    table = np.full((len(arrays), width), math.nan)
    for k, each in enumerate(arrays):
        table[k, : each.size] = each
    return table


@dataclass(frozen=True, slots=True, order=True)
class DrawColumn:
    """What one number of a draw's row is: a drawn ``parameter``, or an ``element`` of a body."""

    kind: str
    name: str
    body: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class DrawRow:
    """One draw as it is stored.

    Parameters
    ----------
    number : int
    state : bytes
        ``Task.as_bytes`` of its start; empty for a draw that is not an orbit.
    values : bytes
        Little-endian doubles, one for each `DrawColumn` of the run.
    refused : str
        Why it is not an orbit; empty if it is one.
    weight : float
    source_row, chain : int
        -1 where there is no sample file.
    """

    number: int
    state: bytes
    values: bytes
    refused: str = ""
    weight: float = 1.0
    source_row: int = -1
    chain: int = -1

    def as_row(self) -> Row:
        """Flatten in the order of the table's columns."""
        state = self.state or None
        weight = _real(self.weight)
        return self.number, state, self.values, self.refused, weight, int(self.source_row), int(self.chain)


@dataclass(frozen=True, slots=True, kw_only=True)
class Draws:
    """The draws of a run as arrays; the first axis is the draw, in the order of ``number``."""

    number: Integers
    refused: AnyArray
    weight: PerDraw
    source_row: Integers
    chain: Integers
    columns: tuple[DrawColumn, ...]
    values: Array
    """(draw, column)"""

    def column(self, kind: str, name: str, body: str = "") -> PerDraw:
        """Give one column, such as ``("element", "period_d", "b")`` or ``("parameter", "star.mass")``.

        Raises
        ------
        KeyError
            If the run has none of that name.
        """
        wanted = DrawColumn(kind, name, body)
        if wanted not in self.columns:
            raise KeyError(f"{wanted} is none of the columns of this run")
        column: PerDraw = self.values[:, self.columns.index(wanted)]
        return column


def draws_of(rows: Sequence[Row], columns: tuple[DrawColumn, ...]) -> Draws:
    """Turn rows of ``number, values, refused, weight, source_row, chain`` into arrays."""
    number, values, refused, weight, source_row, chain = zip(*rows, strict=True) if rows else ((),) * 6
    return Draws(
        number=np.array(number, dtype=np.int64),
        refused=np.array(refused, dtype=np.str_),
        weight=np.array([math.nan if w is None else w for w in weight], dtype=np.float64),
        source_row=np.array(source_row, dtype=np.int64),
        chain=np.array(chain, dtype=np.int64),
        columns=columns,
        values=np.frombuffer(b"".join(values), dtype="<f8").astype(np.float64).reshape(len(rows), len(columns)),
    )
