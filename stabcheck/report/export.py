"""One row a draw, for the next tool: CSV with a ``name [unit]`` header, or ECSV with units as such."""

import contextlib
import csv
import io
import math
import os
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from stabcheck.arrays import AnyArray
from stabcheck.constants import YEAR_D
from stabcheck.errors import StabcheckError
from stabcheck.report.columns import derived_columns, drawn_columns, element_columns
from stabcheck.report.from_run_file import run_table
from stabcheck.report.table_of_draws import RunTable
from stabcheck.store import RunFile

NUMBERS: tuple[tuple[str, str, float], ...] = (
    ("time", "yr", 1 / YEAR_D),
    ("span", "yr", 1 / YEAR_D),
    ("step", "d", 1.0),
    ("energy_error", "", 1.0),
    ("orbit_energy_error", "", 1.0),
    ("closest_hill", "", 1.0),
    ("closest_time", "yr", 1 / YEAR_D),
    ("departure_time", "yr", 1 / YEAR_D),
    ("fewest_steps_per_periastron", "", 1.0),
    ("megno", "", 1.0),
    ("megno_time", "yr", 1 / YEAR_D),
    ("megno_wander", "", 1.0),
    ("lyapunov_time", "yr", 1 / YEAR_D),
    ("handover_time", "yr", 1 / YEAR_D),
)
"""Numbers of an outcome: name without its internal unit, published unit, factor."""
PLANETS = (("a_least_au", "au"), ("a_most_au", "au"), ("e_least", ""), ("e_most", ""), ("drift", ""))
COUNTS = ("restarts", "handovers", "returns", "map_steps", "adaptive_steps")


@dataclass(frozen=True, slots=True)
class Field:
    """One exported column."""

    name: str
    unit: str
    values: AnyArray

    @property
    def header(self) -> str:
        """Name with unit, as the first line of a CSV file has it."""
        return f"{self.name} [{self.unit}]" if self.unit else self.name


def exported(table: RunTable, only: Sequence[str] = ()) -> tuple[Field, ...]:
    """List the columns of an export, in published units.

    Parameters
    ----------
    table : RunTable
    only : sequence of str
        Verdicts to keep; empty keeps every draw, with ``state`` telling the refused and the unfinished ones.

    Returns
    -------
    tuple of Field
        Number, state, verdict and axes, weight and origin, what was drawn, elements, numbers of the outcome.
    """
    rows = table.take(np.isin(table.verdict, list(only))) if only else table
    return tuple(_fields(rows))


def write_csv(table: RunTable, path: Path, only: Sequence[str] = ()) -> None:
    """Write one row a draw as CSV (RFC 4180, line ends as on Unix); the same table gives the same bytes.

    Numbers have the shortest digits that give the same double back; what was not measured is an empty cell.
    """
    fields = exported(table, only)
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow([field.header for field in fields])
    columns = [[_cell(value) for value in field.values.tolist()] for field in fields]
    writer.writerows(zip(*columns, strict=True))
    _placed(path, text.getvalue())


def write_ecsv(table: RunTable, path: Path, only: Sequence[str] = ()) -> None:
    """Write one row a draw as ECSV, which any reader of astropy tables takes with its units."""
    text = _ecsv_text(exported(table, only), _about(table))
    _placed(path, text)


def export(run: Path, out: Path) -> int:
    """Write every draw of a run file as CSV or ECSV, by the ending of the name.

    Parameters
    ----------
    run, out : Path

    Returns
    -------
    int
        Draws written.

    Raises
    ------
    StabcheckError
        If the name ends in neither; nothing is written.
    """
    writers = {".csv": write_csv, ".ecsv": write_ecsv}
    if out.suffix not in writers:
        raise StabcheckError(
            f"no table can be written as {out.suffix or 'a file without ending'!r}",
            where=str(out),
            why="the ending says the format",
            do="end the name with .csv or .ecsv",
        )
    with RunFile.open(run) as opened:
        table = run_table(opened)
    writers[out.suffix](table, out)
    return len(table)


def _about(table: RunTable) -> dict[str, Any]:
    facts = table.facts
    about = {"title": facts.title, "frame": facts.frame, "fit": facts.fit, "seed": facts.seed, "span": facts.span}
    return about | {"command": facts.command, "versions": dict(facts.versions)}


def _ecsv_text(fields: Sequence[Field], about: dict[str, Any]) -> str:
    """Write ECSV by astropy, the only place here that knows it."""
    from astropy import units
    from astropy.table import Column, Table

    # A date in BJD has the unit day; the name of the column says that it is a date.
    known = {"Mearth": units.M_earth, "Msun": units.M_sun, "Rearth": units.R_earth, "Rsun": units.R_sun}
    known |= {"BJD": units.d, "": None}
    columns = [
        Column(field.values, name=field.name, unit=known.get(field.unit, field.unit or None)) for field in fields
    ]
    text = io.StringIO()
    Table(columns, meta=about).write(text, format="ascii.ecsv", delimiter=",")
    return text.getvalue()


def _placed(path: Path, text: str) -> None:
    """Write beside the place and move there, so that a file is whole or not there."""
    beside = path.with_name(path.name + ".new")
    try:
        beside.write_text(text, encoding="utf-8", newline="\n")
        os.replace(beside, path)
    except OSError as problem:
        with contextlib.suppress(OSError):
            beside.unlink()
        raise OSError(problem.errno, problem.strerror, str(path)) from problem


def _cell(value: Any) -> str:
    if isinstance(value, float):
        return "" if math.isnan(value) else repr(value)
    return str(value)


def _fields(table: RunTable) -> Iterator[Field]:
    out = table.outcome
    yield Field("number", "", table.number)
    yield Field("state", "", _state(table))
    yield Field("refused", "", table.refused)
    yield Field("verdict", "", table.verdict)
    for name in ("survival", "ending", "motion", "trust"):
        yield Field(name, "", getattr(out, name))
    yield Field("rearranged", "", out.rearranged)
    yield Field("ending_bodies", "", _named(table, out.ending_bodies))
    yield Field("weight", "", table.weight)
    yield Field("source_row", "", table.source_row)
    yield Field("chain", "", table.chain)
    columns = [*drawn_columns(table), *element_columns(table), *derived_columns(table)]
    yield from (Field(column.name.replace(" ", "_"), column.unit, column.values) for column in columns)
    yield from _outcome_fields(table)


def _outcome_fields(table: RunTable) -> Iterator[Field]:
    out = table.outcome
    yield Field("method", "", out.method)
    yield Field("handover_why", "", out.handover_why)
    for name, unit, factor in NUMBERS:
        internal = name if hasattr(out, name) else f"{name}_d"
        yield Field(name, unit, getattr(out, internal) * factor)
    # In Hill radii the closest approach of an eccentric pair need not be the one that is closest in au.
    yield Field("distance_at_closest_hill", "au", out.closest_au)
    pair = np.array(["+".join(map(str, two)) if any(two) else "" for two in out.closest_pair.tolist()], dtype=np.str_)
    yield Field("closest_pair", "", _named(table, pair))
    for name, unit in PLANETS:
        values = getattr(out, name)
        short = name.removesuffix("_au")
        yield from (Field(f"{short}_{body}", unit, values[:, planet]) for planet, body in enumerate(table.bodies))
    yield from (Field(name, "", getattr(out, name)) for name in COUNTS)


def _state(table: RunTable) -> AnyArray:
    finished = np.where(table.done, "done", "not finished")
    return np.where(table.is_orbit, finished, "refused")


def _named(table: RunTable, indices: AnyArray) -> AnyArray:
    """Turn ``2+1`` into the names of the bodies; 0 is the star."""
    names = ("star", *table.bodies)
    words = ["+".join(names[int(index)] for index in text.split("+")) if text else "" for text in indices.tolist()]
    return np.array(words, dtype=np.str_)
