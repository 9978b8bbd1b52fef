"""Posterior samples: named columns with units and weights, whatever file they came from."""

import difflib
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from stabcheck.arrays import Array, Integers, PerDraw
from stabcheck.errors import SampleFileError
from stabcheck.quantity import Column, Dimension, Quantity

SAME_UNIT = 1e-3
"""Two units are the same when their sizes agree to this share. Standards differ by less (kinds of year: 4e-5); the
nearest two that must not be confused, mean and equatorial radius of Jupiter, differ by 2e-2."""


@dataclass(frozen=True, slots=True)
class StatedUnit:
    """A unit as a sample file states it, and its size in the units used inside."""

    text: str
    dimension: Dimension
    factor: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """What a reader hands over: the columns that were asked for, not yet checked for numbers that make no sense.

    Parameters
    ----------
    names : sequence of str
        Every column of the file, in its order.
    columns : mapping of str to (row,) array
        The columns asked for that the file has.
    units : mapping of str to StatedUnit
        Units that the file states, for these columns.
    place : function of int to str
        Says where a row (from 0) stands in the file, for messages.
    """

    names: Sequence[str]
    columns: Mapping[str, Array]
    units: Mapping[str, StatedUnit] = field(default_factory=dict)
    place: Callable[[int], str] = field(default=lambda row: f"row {row + 1}")


@dataclass(frozen=True, slots=True, kw_only=True)
class Samples:
    """The rows of a sample file.

    Parameters
    ----------
    name : str
        Name of the file without its folder.
    content_hash : str
        SHA-256 of its bytes.
    columns : mapping of str to (row,) array
        Columns as the file gives them, in the file's units.
    units : mapping of str to StatedUnit
        Units that the file itself states; empty for formats that state none.
    weights : (row,) array or None
        They sum to 1; None when all rows weigh the same.
    chain : (row,) array of int or None
        Label of the chain that each row came from.
    best_row : int or None
        Row of the largest log-probability, when the file has such a column.
    """

    name: str
    content_hash: str
    columns: Mapping[str, Array]
    units: Mapping[str, StatedUnit]
    weights: PerDraw | None
    chain: Integers | None
    best_row: int | None

    @property
    def rows(self) -> int:
        """Number of rows."""
        return len(next(iter(self.columns.values())))

    @property
    def effective_rows(self) -> float:
        """Number of equally weighted rows that would be as good, (Σw)²/Σw² (Kish 1965, Survey Sampling)."""
        return float(self.rows) if self.weights is None else float(1.0 / np.sum(self.weights**2))


@dataclass(frozen=True, slots=True, kw_only=True)
class Roles:
    """Which columns of a file are wanted, and for what."""

    values: tuple[str, ...]
    weight: str | None = None
    log_weight: str | None = None
    chain: str | None = None
    log_probability: str | None = None

    @property
    def wanted(self) -> tuple[str, ...]:
        """Every column that must be there, each once."""
        extra = (self.weight, self.log_weight, self.chain, self.log_probability)
        return tuple(dict.fromkeys([*self.values, *(name for name in extra if name is not None)]))


def checked(table: Table, roles: Roles, *, name: str, where: str, content_hash: str) -> Samples:
    """Make samples of a table, or refuse it.

    Parameters
    ----------
    table : Table
        What the reader of the format found.
    roles : Roles
        What is wanted from it.
    name, where, content_hash : str
        Name of the file, its path for messages, and the hash of its bytes.

    Raises
    ------
    SampleFileError
        If a column is missing or has no rows, columns differ in length, a cell is not a finite number, or weights are
        negative or all 0.
    """
    _same_length(table, where)
    for column in roles.wanted:
        below_is_fine = column in (roles.log_weight, roles.log_probability) and column not in roles.values
        _finite(table, column, where, minus_infinity=below_is_fine)
    return Samples(
        name=name,
        content_hash=content_hash,
        columns={column: table.columns[column] for column in roles.wanted},
        units=dict(table.units),
        weights=_weights(table, roles, where),
        chain=_labels(table, roles.chain, where),
        best_row=_best(table, roles.log_probability, where),
    )


def check_names(names: Sequence[str], wanted: Sequence[str], where: str) -> None:
    """Refuse a file that names a column twice, or lacks one.

    Raises
    ------
    SampleFileError
        With the nearest name for a missing column.
    """
    repeated = sorted({name for name in names if list(names).count(name) > 1})
    if repeated:
        raise SampleFileError(
            f"the column name {repeated[0]!r} stands there twice",
            where=where,
            why="it cannot be known which of the two is meant",
            do="rename one of them",
        )
    missing = [name for name in wanted if name not in names]
    if missing:
        raise SampleFileError(
            f"there is no column {missing[0]!r}",
            where=where,
            why=f"the scenario asks for it; the file has {_listed(names)}",
            do=_nearest(missing[0], names),
        )


def check_unit(samples: Samples, parameter: str, quantity: Quantity, where: str) -> None:
    """Refuse a column whose unit in the file is not the one that the scenario states.

    Parameters
    ----------
    samples : Samples
        The file.
    parameter : str
        Name of the quantity in the scenario.
    quantity : Quantity
        The quantity; nothing is checked unless it is a column of the file.
    where : str
        For the message.

    Raises
    ------
    SampleFileError
        If the units differ in kind or in size. A file that states no unit for the column is fine.
    """
    stated = samples.units.get(quantity.column or "")
    if stated is None or not isinstance(quantity.distribution, Column):
        return
    kind = Dimension.TIME if quantity.dimension is Dimension.DATE else quantity.dimension
    if stated.dimension is not kind:
        raise _unit_refused(quantity, parameter, stated, where, f"that is a {stated.dimension}, not a {kind}")
    ratio = stated.factor / quantity.distribution.unit_factor
    if abs(ratio - 1.0) > SAME_UNIT:
        raise _unit_refused(quantity, parameter, stated, where, f"its unit is {ratio:.6g} times the scenario's")


def _unit_refused(quantity: Quantity, parameter: str, stated: StatedUnit, where: str, why: str) -> SampleFileError:
    return SampleFileError(
        f"column {quantity.column!r} is in {stated.text!r} in the file, which contradicts {parameter} in the scenario",
        where=where,
        why=why,
        do=f"correct the unit of {parameter} in the scenario, or that of the column in the file",
    )


def _same_length(table: Table, where: str) -> None:
    lengths = {name: len(values) for name, values in table.columns.items()}
    if len(set(lengths.values())) > 1:
        raise SampleFileError(
            "the columns differ in length",
            where=where,
            why="; ".join(f"{name} has {length} rows" for name, length in lengths.items()),
            do="write every column from the same rows",
        )
    if not lengths or not next(iter(lengths.values())):
        raise SampleFileError("there are no rows", where=where, do="write at least one row of samples")


def _finite(table: Table, column: str, where: str, *, minus_infinity: bool) -> None:
    values = table.columns[column]
    fine = np.isfinite(values) | (minus_infinity & (values == -np.inf))
    if not fine.all():
        row = int(np.flatnonzero(~fine)[0])
        raise SampleFileError(
            f"column {column!r} holds {values[row]} in {table.place(row)}",
            where=where,
            why=f"{np.count_nonzero(~fine)} of {len(values)} cells of this column are not finite numbers",
            do="leave such rows out when writing the file, and say so in the paper",
        )


def _weights(table: Table, roles: Roles, where: str) -> PerDraw | None:
    if roles.weight is not None:
        weights = _not_negative(table, roles.weight, where)
    elif roles.log_weight is not None:
        weights = _from_logarithms(table, roles.log_weight, where)
    else:
        return None
    if np.all(weights == weights[0]):
        return None  # equal weights are no weights: rows are then used once each
    return weights / np.sum(weights)


def _not_negative(table: Table, column: str, where: str) -> PerDraw:
    weights = table.columns[column]
    if (weights < 0.0).any():
        row = int(np.flatnonzero(weights < 0.0)[0])
        raise SampleFileError(
            f"the weight in column {column!r} is {weights[row]:g} in {table.place(row)}",
            where=where,
            why="a weight is never negative",
            do='if the column holds logarithms, write log_weight = "..." in [samples]',
        )
    largest = float(np.max(weights))
    if largest == 0.0:
        raise SampleFileError(f"every weight in column {column!r} is 0", where=where, do="name another column")
    return weights / largest  # scaled before anything is summed, so that no sum can overflow


def _from_logarithms(table: Table, column: str, where: str) -> PerDraw:
    logarithms = table.columns[column]
    largest = float(np.max(logarithms))
    if largest == -np.inf:
        raise SampleFileError(f"every log-weight in column {column!r} is -inf", where=where, do="name another column")
    return np.exp(logarithms - largest)


def _labels(table: Table, column: str | None, where: str) -> Integers | None:
    if column is None:
        return None
    values = table.columns[column]
    whole = (values == np.floor(values)) & (np.abs(values) < 2.0**53) & (values >= 0.0)
    if not whole.all():
        row = int(np.flatnonzero(~whole)[0])
        raise SampleFileError(
            f"the chain in column {column!r} is {values[row]!r} in {table.place(row)}",
            where=where,
            why="chains are known by whole numbers from 0",
            do="number the chains 0, 1, 2, ...",
        )
    return values.astype(np.int64)


def _best(table: Table, column: str | None, where: str) -> int | None:
    if column is None:
        return None
    best = int(np.argmax(table.columns[column]))
    if table.columns[column][best] == -np.inf:
        raise SampleFileError(f"every cell in column {column!r} is -inf", where=where, do="name another column")
    return best


def _nearest(name: str, names: Sequence[str]) -> str:
    near = difflib.get_close_matches(name, names, n=1) or difflib.get_close_matches(name.lower(), names, n=1)
    return f"did you mean {near[0]!r}?" if near else "name a column of the file"


def _listed(names: Sequence[str], most: int = 20) -> str:
    shown = ", ".join(repr(name) for name in names[:most])
    return shown + (f" and {len(names) - most} more" if len(names) > most else "") if names else "none"
