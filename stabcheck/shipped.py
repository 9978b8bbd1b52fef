"""The scenarios that come with stabcheck: list them, copy one to work on it."""

import shutil
import tomllib
from dataclasses import dataclass
from pathlib import Path

from stabcheck.errors import StabcheckError


@dataclass(frozen=True, slots=True)
class Shipped:
    """One scenario that comes with stabcheck.

    Attributes
    ----------
    name : str
        How it is asked for.
    title : str
        Its own title.
    files : tuple of Path
        The scenario, then the sample file that it names, if any.
    """

    name: str
    title: str
    files: tuple[Path, ...]


def folder() -> Path:
    """Find the folder of the shipped scenarios: inside an installed package, beside it in a checkout.

    Raises
    ------
    StabcheckError
        If this installation has none.
    """
    package = Path(__file__).parent
    places = (package / "scenarios_shipped", package.parent / "scenarios")
    for place in places:
        if next(place.glob("*.toml"), None):
            return place
    raise StabcheckError(
        "this installation has no scenarios",
        where=" or ".join(str(place) for place in places),
        why="a wheel carries them inside the package, a checkout beside it",
        do="install stabcheck again from its wheel or from a clone",
    )


def listed(place: Path | None = None) -> tuple[Shipped, ...]:
    """List the shipped scenarios by name.

    Parameters
    ----------
    place : Path, optional
        Look here instead.
    """
    return tuple(_described(file) for file in sorted((place or folder()).glob("*.toml")))


def copy(name: str, to: Path = Path(), *, place: Path | None = None) -> tuple[Path, ...]:
    """Copy a shipped scenario, and the sample file that it names, into a folder.

    Parameters
    ----------
    name : str
        With or without ``.toml``.
    to : Path
        The folder; made if it is not there.
    place : Path, optional
        Copy from here instead.

    Returns
    -------
    tuple of Path
        The new files, the scenario first.

    Raises
    ------
    StabcheckError
        If there is no such scenario, or a file of that name is there already: nothing is overwritten.
    """
    known = {one.name: one for one in listed(place)}
    found = known.get(name.removesuffix(".toml"))
    if found is None:
        raise StabcheckError(
            f"there is no shipped scenario {name!r}", where="scenarios", do=f"take one of {', '.join(known)}"
        )
    new = tuple(to / file.name for file in found.files)
    for file in new:
        if file.exists():
            raise StabcheckError(
                f"{file.name} is there already", where=str(to), why="nothing is overwritten", do="give another folder"
            )
    to.mkdir(parents=True, exist_ok=True)
    for source, target in zip(found.files, new, strict=True):
        shutil.copyfile(source, target)
    return new


def _described(file: Path) -> Shipped:
    table = tomllib.loads(file.read_text(encoding="utf-8"))
    samples = table.get("samples", {}).get("file")
    files = (file,) if samples is None else (file, file.parent / samples)
    return Shipped(file.stem, str(table.get("title", "")), files)
