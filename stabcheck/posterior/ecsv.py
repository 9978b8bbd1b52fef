"""Samples from ECSV tables, the text format of astropy that states the unit of each column."""

import io
import warnings
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from stabcheck.arrays import Array
from stabcheck.errors import SampleFileError
from stabcheck.posterior.csv import text_of
from stabcheck.posterior.samples import StatedUnit, Table, check_names
from stabcheck.quantity import Dimension

if TYPE_CHECKING:
    from astropy.table import Table as AstropyTable

FIRST_LINE = "# %ECSV"


def read(content: bytes, wanted: Sequence[str], where: str) -> Table:
    """Read the wanted columns of an ECSV table with their units.

    Parameters
    ----------
    content : bytes
        UTF-8 text of an ECSV table.
    wanted : sequence of str
        Names of columns.
    where : str
        The path, for messages.

    Raises
    ------
    SampleFileError
        If this is not such a table, a column is missing, holds something else than numbers or has empty cells, or its
        unit is not understood.
    """
    text = text_of(content, where)
    if not text.lstrip().startswith(FIRST_LINE):
        raise SampleFileError(
            "this is not an ECSV table" if text.strip() else "the file is empty",
            where=where,
            why=f"an ECSV table starts with {FIRST_LINE!r}",
            do="a table without that header is read when its name ends in .csv",
        )
    table = _parsed(text, where)
    names = [str(name) for name in table.colnames]
    check_names(names, wanted, where)
    units = {name: _unit(table[name], name, where) for name in wanted}
    return Table(
        names=names,
        columns={name: _column(table[name], name, where) for name in wanted},
        units={name: unit for name, unit in units.items() if unit is not None},
    )


def _parsed(text: str, where: str) -> "AstropyTable":
    from astropy.table import Table as AstropyTable

    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # an unknown unit warns here; it is refused below, with its column
            # Lines, and never one text: a text without a line end would be taken for a file name or an address.
            return AstropyTable.read(io.StringIO(text, newline=None).read().split("\n"), format="ascii.ecsv")
    except Exception as error:  # the reader promises no set of exceptions; whatever it is, the table is not usable
        raise SampleFileError(
            "the ECSV table cannot be read",
            where=where,
            why=f"{type(error).__name__}: {error}",
            do="write it with astropy's Table.write(file, format='ascii.ecsv')",
        ) from error


def _column(column: Any, name: str, where: str) -> Array:
    kind = getattr(getattr(column, "dtype", None), "kind", "")
    if kind not in tuple("fiu") or column.ndim != 1:
        raise SampleFileError(
            f"column {name!r} does not hold one real number a row",
            where=where,
            why=f"it is a {type(column).__name__} of type {getattr(column, 'dtype', 'unknown')}",
            do="write floats",
        )
    empty = np.flatnonzero(np.asarray(getattr(column, "mask", np.zeros(len(column), dtype=bool))))
    if empty.size:
        raise SampleFileError(
            f"column {name!r} has {empty.size} empty cells, the first in row {empty[0] + 1}",
            where=where,
            why="a missing value is not guessed",
            do="leave such rows out",
        )
    return np.ascontiguousarray(np.asarray(column), dtype=np.float64)


def _unit(column: Any, name: str, where: str) -> StatedUnit | None:
    from astropy import units

    unit = getattr(column, "unit", None)
    if unit is None:
        return None
    inside = {
        Dimension.MASS: units.M_sun,
        Dimension.LENGTH: units.au,
        Dimension.TIME: units.d,
        Dimension.ANGLE: units.rad,
        Dimension.SPEED: units.au / units.d,
        Dimension.NUMBER: units.dimensionless_unscaled,
    }
    for dimension, own in inside.items():
        if not isinstance(unit, units.UnrecognizedUnit) and unit.is_equivalent(own):
            return StatedUnit(text=str(unit), dimension=dimension, factor=float(unit.to(own)))
    raise SampleFileError(
        f"the unit {str(unit)!r} of column {name!r} is not understood",
        where=where,
        why="it is none of mass, length, time, angle, speed or pure number",
        do="correct the unit in the file's header, or remove it and state it in the scenario",
    )
