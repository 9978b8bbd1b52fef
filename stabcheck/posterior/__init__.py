"""Files of posterior samples: one format a file here, one kind of value out of all of them.

===========  =========================================  ==========================
name ends    what it is                                 units
===========  =========================================  ==========================
``.csv``     comma-separated text with column names     stated by the scenario
``.ecsv``    the same with astropy's header             stated by both, must agree
``.npz``     NumPy archive, one array a column          stated by the scenario
===========  =========================================  ==========================
"""

import hashlib
from collections.abc import Callable, Sequence
from pathlib import Path

from stabcheck.errors import SampleFileError
from stabcheck.posterior import csv, ecsv, npz
from stabcheck.posterior.samples import Roles, Samples, StatedUnit, Table, check_unit, checked

__all__ = ["Roles", "Samples", "StatedUnit", "check_unit", "read_samples"]

READERS: dict[str, Callable[[bytes, Sequence[str], str], Table]] = {
    ".csv": csv.read,
    ".ecsv": ecsv.read,
    ".npz": npz.read,
}


def read_samples(path: Path, roles: Roles) -> Samples:
    """Read a file of posterior samples, once and whole.

    Parameters
    ----------
    path : Path
        Its ending says the format.
    roles : Roles
        The columns that are wanted. Others may hold anything.

    Returns
    -------
    Samples
        With the SHA-256 of the very bytes that were read.

    Raises
    ------
    SampleFileError
        If the file cannot be read, has another format than its name says, or holds what cannot be used.
    """
    where = str(path)
    if path.suffix.lower() not in READERS:
        raise SampleFileError(
            f"files that end in {path.suffix!r} are not read",
            where=where,
            why=f"the ending says the format; there are {', '.join(READERS)}",
            do="write the samples in one of these formats",
        )
    content = _bytes_of(path)
    table = READERS[path.suffix.lower()](content, roles.wanted, where)
    digest = hashlib.sha256(content).hexdigest()
    return checked(table, roles, name=path.name, where=where, content_hash=digest)


def _bytes_of(path: Path) -> bytes:
    try:
        return path.read_bytes()
    except OSError as error:
        raise SampleFileError(
            "the file of samples cannot be read",
            where=str(path),
            why=error.strerror or str(error),
            do="a relative name in [samples] starts at the folder of the scenario",
        ) from error
