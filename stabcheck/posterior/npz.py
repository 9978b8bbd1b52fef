"""Samples from a NumPy archive: one one-dimensional array a column. Pickled contents are never opened."""

import io
import struct
import tokenize
import zipfile
import zlib
from collections.abc import Sequence

import numpy as np

from stabcheck.arrays import AnyArray, Array
from stabcheck.errors import SampleFileError
from stabcheck.posterior.samples import Table, check_names

ZIP_MARK = b"PK"

# What zipfile, zlib and NumPy's reader of array headers were seen to raise, or say they raise, on damaged archives.
DAMAGE = (
    ValueError,
    TypeError,
    KeyError,
    EOFError,
    OSError,
    OverflowError,
    MemoryError,
    RuntimeError,  # encrypted; NotImplementedError, a compression unknown here, is one too
    SyntaxError,
    tokenize.TokenError,
    struct.error,
    zlib.error,
    zipfile.BadZipFile,
)


def read(content: bytes, wanted: Sequence[str], where: str) -> Table:
    """Read the wanted arrays of an archive.

    Parameters
    ----------
    content : bytes
        As written by ``numpy.savez`` or ``numpy.savez_compressed``.
    wanted : sequence of str
        Names of arrays.
    where : str
        The path, for messages.

    Returns
    -------
    Table
        Without units: the scenario states them.

    Raises
    ------
    SampleFileError
        If this is not such an archive or is damaged, or an array is missing, pickled, not of numbers or not
        one-dimensional.
    """
    if not content.startswith(ZIP_MARK):
        raise SampleFileError(
            "this is not a NumPy archive" if content else "the file is empty",
            where=where,
            do="write it with numpy.savez(file, column=array, ...)",
        )
    try:
        archive = np.load(io.BytesIO(content), allow_pickle=False)
    except DAMAGE as error:
        raise _damaged(error, where) from error
    with archive:
        names = list(archive.files)
        check_names(names, wanted, where)
        return Table(names=names, columns={name: _column(archive, name, where) for name in wanted})


def _column(archive: "np.lib.npyio.NpzFile", name: str, where: str) -> Array:
    try:
        values: AnyArray = archive[name]
    except DAMAGE as error:
        if "allow_pickle" in str(error):
            raise SampleFileError(
                f"array {name!r} is pickled and is not opened",
                where=where,
                why="opening a pickle runs whatever code stands in it",
                do="write the array as numbers: numpy.asarray(values, dtype=float)",
            ) from error
        raise _damaged(error, where) from error
    if not isinstance(values, np.ndarray) or values.dtype.kind not in "fiu":
        kind = values.dtype if isinstance(values, np.ndarray) else "raw bytes"
        raise SampleFileError(
            f"array {name!r} does not hold real numbers", where=where, why=f"it is of type {kind}", do="write floats"
        )
    if values.ndim != 1:
        raise SampleFileError(
            f"array {name!r} has the shape {values.shape}",
            where=where,
            why="a column has one value a row; how chains and walkers lie in an array is not guessed",
            do="flatten it, with the same order for every array",
        )
    return np.ascontiguousarray(values, dtype=np.float64)


def _damaged(error: BaseException, where: str) -> SampleFileError:
    return SampleFileError(
        "the archive is damaged or cut off", where=where, why=f"{type(error).__name__}: {error}", do="write it again"
    )
