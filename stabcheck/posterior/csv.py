"""Samples from comma-separated text: one line of names, then one line a row; lines that start with # are comments."""

import csv
import io
from collections.abc import Iterator, Sequence

import numpy as np

from stabcheck.errors import SampleFileError
from stabcheck.posterior.samples import Table, check_names

UTF16_MARKS = (b"\xff\xfe", b"\xfe\xff")


def read(content: bytes, wanted: Sequence[str], where: str) -> Table:
    """Read the wanted columns of a text file.

    Parameters
    ----------
    content : bytes
        UTF-8, with or without byte-order mark; any line ends.
    wanted : sequence of str
        Names of columns; cells of other columns may hold anything.
    where : str
        The path, for messages.

    Returns
    -------
    Table
        Without units: the scenario states them.

    Raises
    ------
    SampleFileError
        If this is not such a text, a column is missing, a line has another number of cells than there are names, or a
        wanted cell is not a number.
    """
    lines = _NumberedLines(text_of(content, where))
    try:
        return _table(csv.reader(lines, strict=True, skipinitialspace=True), lines, wanted, where)
    except csv.Error as error:
        raise SampleFileError(
            "the text is not comma-separated values",
            where=f"{where}, line {lines.number}",
            why=str(error),
            do="look for a quotation mark that is not closed, or a file that was cut off",
        ) from error


def text_of(content: bytes, where: str) -> str:
    """Decode UTF-8 and refuse what is no text.

    Raises
    ------
    SampleFileError
        With the position of the first byte that is not text.
    """
    do = "save the table as UTF-8 text"
    if content.startswith(UTF16_MARKS):
        raise SampleFileError("the text is in UTF-16, not in UTF-8", where=where, do=do)
    if b"\0" in content:
        raise SampleFileError(f"byte {content.index(0) + 1} is 0: this is not a text", where=where, do=do)
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise SampleFileError(f"byte {error.start + 1} is not UTF-8", where=where, why=error.reason, do=do) from error


class _NumberedLines(Iterator[str]):
    """Lines of a text without comments and empty ones; knows the number of the line it gave last."""

    def __init__(self, text: str) -> None:
        self._lines = io.StringIO(text, newline=None)  # not splitlines(), which divides at form feeds too
        self.number = 0

    def __next__(self) -> str:
        for line in self._lines:
            self.number += 1
            if line.strip() and not line.lstrip().startswith("#"):
                return line
        raise StopIteration


def _table(cells: Iterator[list[str]], lines: _NumberedLines, wanted: Sequence[str], where: str) -> Table:
    names = _header(next(cells, None), where)
    check_names(names, wanted, where)
    places = [(names.index(name), name) for name in wanted]
    rows: list[list[float]] = []
    numbers: list[int] = []
    for row in cells:
        here = f"{where}, line {lines.number}"
        if len(row) != len(names):
            raise SampleFileError(
                f"this line has {len(row)} cells, but there are {len(names)} column names",
                where=here,
                do="mend the line; numbers have a decimal point, and only commas divide cells",
            )
        rows.append([_number(row[place], name, here) for place, name in places])
        numbers.append(lines.number)
    values = np.array(rows, dtype=np.float64).reshape(len(rows), len(places))
    columns = {name: np.ascontiguousarray(values[:, k]) for k, (_, name) in enumerate(places)}
    return Table(names=names, columns=columns, place=lambda row: f"line {numbers[row]}")


def _header(cells: list[str] | None, where: str) -> list[str]:
    do = "write the column names, divided by commas, in the first line that is not a comment"
    if cells is None:
        raise SampleFileError("the file is empty, or has only comments", where=where, do=do)
    names = [cell.strip() for cell in cells]
    if all(_is_number(name) for name in names):
        raise SampleFileError(
            "there is no line of column names", where=where, why="the first line holds only numbers", do=do
        )
    if len(names) == 1 and any(mark in names[0] for mark in ";\t "):
        raise SampleFileError(
            f"the line of column names has one cell: {names[0]!r}",
            where=where,
            why="only commas divide cells",
            do="write the table with commas",
        )
    return names


def _is_number(cell: str) -> bool:
    try:
        float(cell)
    except ValueError:
        return False
    return True


def _number(cell: str, column: str, here: str) -> float:
    # float() also takes 1_000, which in a data file is a slip; an infinite value is refused later, with its column
    if "_" not in cell and _is_number(cell):
        return float(cell)
    raise SampleFileError(
        f"column {column!r} holds {cell.strip()!r}",
        where=here,
        why="the cell is empty" if not cell.strip() else "that is not a number",
        do="write a number there, or leave the row out",
    )
