"""A scenario: the TOML file that says what is asked, checked whole when it is read.

Quantities are texts as in `quantity`: ``"4.31 ± 0.05 d"``, ``"0.03 +0.02 -0.01"``, ``"< 0.1 (95 %)"``,
``"uniform(0, 360) deg"``, or columns of a sample file, ``{ column = "P_b", unit = "d" }``. "Fixed" below means a value
without error. Nothing is implied: what is missing is an error that says what would do; the few defaults that exist are
given here and are printed by ``preview``. Keys:

``title``, ``notes``
    Texts, optional.

``[star]``
    ``mass`` (required), ``radius`` (without it the star is a point that cannot be hit), ``age`` (to compare the span
    with). ``position`` and ``velocity`` only for Cartesian states; without them the star is at the origin, at rest.

``[elements]``
    ``frame`` (required): ``"jacobi"``, each orbit about the centre of mass of everything inside it;
    ``"astrocentric"``, about the star; ``"cartesian"``, positions and velocities, any origin.
    ``fit`` (required unless Cartesian): ``"keplerian"``, a sum of orbits that do not disturb each other, or
    ``"dynamical"``, osculating at the epoch.
    ``epoch``: ``"2459000.0 BJD_TDB"`` (or ``BJD_UTC``; ``BJD`` if the source does not say). The instant of the phases
    and t = 0. Required if a phase is a time; all times are in its scale. Reduced dates are refused.
    ``data_span``: time span of the data, centred on the epoch; for the departure from the Keplerian sum.
    ``independent_omega_and_periastron_time = true`` confirms that ω (known to worse than 20°) and the time of
    periastron are to be drawn independently.

``[plane]``, optional
    ``inclination``: of one plane common to all planets, any angle or ``"isotropic"``. Planets then have none of their
    own.
    ``mutual_scatter``: scale of a Rayleigh distribution of each planet's tilt to that plane, fixed, its direction in
    the plane uniform. Without it all planets lie in the plane.
    ``nodes``: for planets with inclinations of their own and no ``node``: ``"equal"`` (all 0) or ``"isotropic"``
    (uniform).

``[planets.NAME]``, one or more, and ``[companion]``, a bound star outside of them
    Size: ``period`` or ``semi_major_axis``, in the frame.
    ``eccentricity`` (required; 0 for circular).
    ω: ``omega_star`` or ``omega_planet``; may be absent only if the eccentricity is fixed at 0.
    Phase, exactly one: ``mean_anomaly``, ``mean_longitude_star``, ``mean_longitude_planet`` (node + ω + mean anomaly,
    with the ω of the star or the planet; the node counts only where it is a number in this table),
    ``time_of_conjunction`` (inferior conjunction, true anomaly 90° - ω_star), ``time_of_periastron``. Angles are those
    at the epoch.
    Mass, exactly one: ``mass`` (true), ``mass_sin_i``, ``semi_amplitude`` (K of the star). A companion has a true
    mass.
    Tilt: ``inclination`` (0 to 180 deg) or ``impact_parameter`` (needs the radius of the star; i and 180° - i are
    drawn with half the draws each), or from [plane]. ``"isotropic independent"`` draws the direction of this planet's
    orbit for itself, which makes half of the pairs retrograde. A companion without a tilt of its own lies in the
    common plane like a planet, with the scatter.
    ``node``: required where more than one body has its own tilt, unless [plane] has ``nodes``; with one body 0.
    ``radius``: without it, and without ``mass_radius``, the planet is a point.
    ``position``, ``velocity``: Cartesian only, ``["1.0 au", "0 au", "0 au"]`` and ``["0 au/d", "30 km/s", "0 m/s"]``.

``[samples]``, optional
    ``file`` (beside the scenario; .csv, .ecsv or .npz), ``weight`` or ``log_weight`` (columns; without them the rows
    weigh the same), ``chain`` (column), ``log_probability`` (column, says which row is the best).

``[draws]``
    ``seed`` (required): a whole number, 0 to 2^63 - 1.

``[physics]``
    ``relativity`` (default false).

``[integration]``
    ``span`` (required): ``"1e5 inner orbits"``, ``"1e4 outer orbits"``, ``"10 secular cycles"``, ``"1 Myr"``.
    ``engine`` (default ``"auto"``, which is ``"rebound"``), ``method`` (default ``"auto"``; ``"whfast"``, ``"trace"``,
    ``"ias15"``), ``steps_per_periastron`` (default 25, above 16), ``indicator`` (default true).

``[endings]``, optional
    ``ejection_distance`` (default 30 times the largest axis), ``stop_approach``, ``stop_distance`` (rules of yours
    that stop a draw, counted apart from physical endings), ``mass_radius = "chen-kipping-2017"`` (radii where none is
    given).

``[rearranged]``, optional
    ``axis_share`` (default 0.3): an axis that moved by more than this share of its first value.
"""

import os
import tomllib
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any, Self

from pydantic import ModelWrapValidatorHandler, PrivateAttr, ValidationError, ValidationInfo, model_validator
from pydantic_core import ErrorDetails

from stabcheck.errors import ScenarioError
from stabcheck.quantity import Quantity
from stabcheck.scenario_checks import SAMPLE_FILES, Content, value_problems
from stabcheck.scenario_keys import Problem, key_problems
from stabcheck.scenario_tables import (
    Draws,
    Elements,
    Endings,
    Epoch,
    FitKind,
    Frame,
    Integration,
    Nodes,
    Physics,
    Plane,
    Planet,
    Rearranged,
    Samples,
    Span,
    SpanKind,
    Star,
    Table,
    Text,
)

__all__ = [
    "Draws",
    "Elements",
    "Endings",
    "Epoch",
    "FitKind",
    "Frame",
    "Integration",
    "Nodes",
    "Physics",
    "Plane",
    "Planet",
    "Rearranged",
    "Samples",
    "Scenario",
    "Span",
    "SpanKind",
    "Star",
]

LARGEST_FILE_BYTES = 1_000_000
MOST_PROBLEMS_SHOWN = 12
EXCLUDED_FROM_IDENTITY = {
    "elements": ("data_span", "independent_omega_and_periastron_time"),
    "samples": ("file",),
}
"""Keys that change no draw and no outcome; the sample file is known by its content, which is hashed elsewhere."""


class Scenario(Table):
    """What is asked of a run. Read one with `Scenario.read`; every instance has passed all checks."""

    title: Text = ""
    notes: Text = ""
    star: Star
    elements: Elements
    plane: Plane | None = None
    planets: dict[str, Planet]
    companion: Planet | None = None
    samples: Samples | None = None
    draws: Draws
    physics: Physics = Physics()
    integration: Integration
    endings: Endings = Endings()
    rearranged: Rearranged = Rearranged()

    _name: str = PrivateAttr("scenario")
    _folder: Path = PrivateAttr(Path("."))
    _text: str = PrivateAttr("")

    @classmethod
    def read(cls, path: Path) -> Self:
        """Read a scenario file.

        Parameters
        ----------
        path : Path
            A TOML file; its folder is where the sample file is looked for.

        Raises
        ------
        ScenarioError
            If it cannot be opened, is not TOML, or if anything in it is unknown, missing, contradictory or not finite.
            The message names the first problem in full and lists the others.
        """
        path = Path(path)
        try:
            if path.stat().st_size > LARGEST_FILE_BYTES:
                raise ScenarioError(
                    "the file is too large for a scenario",
                    where=str(path),
                    why="it is above 1 MB",
                    do="give the TOML file, not samples",
                )
            text = path.read_bytes().decode("utf-8-sig")
        except UnicodeDecodeError as error:
            raise ScenarioError(
                "the scenario is not a text", where=str(path), why=str(error), do="save it as UTF-8"
            ) from error
        except (OSError, ValueError) as error:  # a path with a null byte is a ValueError
            why, do = getattr(error, "strerror", None) or str(error), "check the path"
            raise ScenarioError("the scenario cannot be opened", where=str(path), why=why, do=do) from error
        return cls.from_text(text, path.name, path.parent)

    @classmethod
    def from_text(cls, text: str, name: str = "scenario", folder: Path = Path(".")) -> Self:
        """Read a scenario from a text in TOML; ``name`` stands in messages, ``folder`` is where sample files are.

        Raises
        ------
        ScenarioError
            As `read`.
        """
        context = {"name": name, "folder": Path(folder)}
        scenario = cls.model_validate(_toml(text, name), context=context)
        scenario._text = text
        return scenario

    @model_validator(mode="wrap")
    @classmethod
    def _checked_whole(cls, content: Any, build: ModelWrapValidatorHandler[Self], info: ValidationInfo) -> Self:
        if not isinstance(content, Mapping):
            return build(content)
        context: Mapping[str, Any] = info.context or {}
        name, folder = str(context.get("name", "scenario")), Path(context.get("folder", "."))
        problems = [*_not_finite(content, ()), *key_problems(content)]
        try:
            scenario = build(content)
        except ValidationError as error:
            problems += _from_pydantic(error.errors(include_url=False, include_input=False), problems)
        else:
            problems += [*value_problems(scenario._content()), *_sample_file(scenario.samples, folder)]
            scenario._name, scenario._folder = name, folder
        if problems:
            raise _as_error(problems, name)
        return scenario

    @property
    def name(self) -> str:
        """Name of the file it was read from."""
        return self._name

    @property
    def folder(self) -> Path:
        """Folder of the file it was read from."""
        return self._folder

    @property
    def text(self) -> str:
        """The file as it was read."""
        return self._text

    @property
    def sample_path(self) -> Path | None:
        """Where the sample file is, None without one."""
        return self._folder / self.samples.file if self.samples else None

    @property
    def bodies(self) -> dict[str, Planet]:
        """Planets in the file's order, the companion last, by name."""
        return {**self.planets, **({"companion": self.companion} if self.companion else {})}

    @property
    def body_names(self) -> tuple[str, ...]:
        """Names of the planets in the file's order; the companion last as "companion"."""
        return tuple(self.bodies)

    def quantities(self) -> dict[str, Quantity]:
        """All that is drawn or fixed, by name: ``star.mass``, ``plane.inclination``, ``planets.b.period``, ...

        Components of vectors are called ``planets.b.position.x`` and so on.
        """
        found = [*_quantities_of("star", self.star), *_quantities_of("plane", self.plane)]
        for place, body in self._places().items():
            found += _quantities_of(place, body)
        return dict(found)

    def canonical(self) -> dict[str, Any]:
        """What decides draws and outcomes, as plain values for the identity of a run.

        Units are those inside; spellings, order, title, notes, file names and what only the report uses are not in it.
        A default is in it as if it had been written.
        """
        tables = {name: _canonical_table(name, table) for name, table in self._tables().items()}
        tables["planets"] = {name: _canonical_table("planets", planet) for name, planet in sorted(self.planets.items())}
        return dict(sorted(tables.items()))

    def defaults_used(self) -> list[tuple[str, str]]:
        """Key and value of each default that was taken, for ``preview``."""
        return [*_table_defaults(self), *_meaning_of_absence(self)]

    def _tables(self) -> dict[str, Table]:
        return {name: table for name in type(self).model_fields if isinstance(table := getattr(self, name), Table)}

    def _places(self) -> dict[str, Planet]:
        return {name if name == "companion" else f"planets.{name}": body for name, body in self.bodies.items()}

    def _content(self) -> Content:
        return Content(
            star=self.star,
            elements=self.elements,
            plane=self.plane,
            bodies=self._places(),
            samples=self.samples,
            endings=self.endings,
            quantities=self.quantities(),
        )


# ---------------------------------------------------------------------------------------------------------------------
# Values out


def _quantities_of(place: str, table: Table | None) -> Iterator[tuple[str, Quantity]]:
    for key in type(table).model_fields if table else ():
        value = getattr(table, key)
        if isinstance(value, Quantity):
            yield f"{place}.{key}", value
        elif isinstance(value, tuple):
            yield from ((f"{place}.{key}.{axis}", component) for axis, component in zip("xyz", value, strict=True))


def _canonical_table(name: str, table: Table) -> dict[str, Any]:
    left_out = EXCLUDED_FROM_IDENTITY.get(name, ())
    values = {key: getattr(table, key) for key in sorted(type(table).model_fields) if key not in left_out}
    return {key: _plain(value) for key, value in values.items() if value is not None}


def _plain(value: Any) -> Any:
    if isinstance(value, Quantity):
        return value.record()
    if isinstance(value, tuple):
        return [_plain(component) for component in value]
    if isinstance(value, Span):
        return {"value": value.value, "kind": str(value.kind)}
    if isinstance(value, Epoch):
        return {"bjd": value.bjd, "scale": value.scale}
    return value if isinstance(value, bool | int | float) else str(value)


def _table_defaults(scenario: Scenario) -> Iterator[tuple[str, str]]:
    for name, key in (
        ("physics", "relativity"),
        *(("integration", key) for key in ("engine", "method", "steps_per_periastron", "indicator")),
        ("rearranged", "axis_share"),
    ):
        table = getattr(scenario, name)
        if key not in table.model_fields_set:
            value = getattr(table, key)
            yield f"{name}.{key}", str(value).lower() if isinstance(value, bool) else f"{value}"


def _meaning_of_absence(scenario: Scenario) -> Iterator[tuple[str, str]]:
    cartesian = scenario.elements.frame is Frame.CARTESIAN
    if scenario.endings.ejection_distance is None:
        yield "endings.ejection_distance", "30 times the largest axis at the start"
    if scenario.elements.epoch is None:
        yield "elements.epoch", "not given: t = 0 is the epoch of the phases"
    if scenario.star.radius is None:
        yield "star.radius", "none: a point that cannot be hit"
    if cartesian and scenario.star.position is None:
        yield "star.position, star.velocity", "at the origin, at rest"
    if points := [name for name, body in scenario.bodies.items() if body.radius is None]:
        rule = scenario.endings.mass_radius
        yield (
            f"radius of {', '.join(points)}",
            f"from the mass ({rule})" if rule else "none: points that cannot collide",
        )
    if not cartesian:
        yield from _node_defaults(scenario)
    if scenario.samples and not (scenario.samples.weight or scenario.samples.log_weight):
        yield "samples.weight", "none: all rows weigh the same"


def _node_defaults(scenario: Scenario) -> Iterator[tuple[str, str]]:
    if scenario.plane and scenario.plane.inclination and not scenario.plane.mutual_scatter:
        yield "plane.mutual_scatter", "none: coplanar, all nodes 0"
    elif scenario.plane is None and len(scenario.bodies) == 1 and next(iter(scenario.bodies.values())).node is None:
        yield "node", "0 (a single orbit)"


# ---------------------------------------------------------------------------------------------------------------------
# Text in, problems out


def _toml(text: str, name: str) -> dict[str, Any]:
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        do = 'put texts and quantities in quotes, period = "4.31 d"; a key once in a table, a table once in the file'
        raise ScenarioError("the file is not valid TOML", where=name, why=str(error), do=do) from error
    except (ValueError, RecursionError) as error:  # integers of thousands of digits; brackets in thousands
        raise ScenarioError(
            "the file is not a scenario", where=name, why=str(error), do="check it for damage"
        ) from error


def _not_finite(value: Any, keys: tuple[str, ...]) -> Iterator[Problem]:
    """NaN, infinities and integers outside of 64 bits, wherever they stand (a text is looked at as a quantity)."""
    place, key = _place_and_key(keys)
    if isinstance(value, Mapping):
        for inner, content in value.items():
            yield from _not_finite(content, (*keys, inner))
    elif isinstance(value, list):
        for content in value:
            yield from _not_finite(content, keys)
    elif isinstance(value, float) and not abs(value) < float("inf"):
        yield Problem(place, key, f"{key} is {value}", "it is not a number to compute with", "write a finite number")
    elif isinstance(value, int) and not -(2**63) <= value < 2**63:
        yield Problem(
            place,
            key,
            f"{key} is too large a whole number",
            "TOML has 64 bits for them",
            "write it as 1e30, or smaller",
        )


def _from_pydantic(errors: Sequence[ErrorDetails], known: Sequence[Problem]) -> Iterator[Problem]:
    """Translate what the tables refused; what the look at the keys has said already is not said again."""
    said = {(problem.place, problem.key) for problem in known}
    for error in errors:
        place, key = _place_and_key(tuple(str(part) for part in error["loc"]))
        if error["type"] == "stabcheck":
            parts = error["ctx"]
            if (place, key) not in said:
                yield Problem(place, key, parts["what"], parts["why"], parts["do"])
        elif error["type"] not in ("missing", "extra_forbidden", "model_type", "dict_type"):
            yield Problem(place, key, "the value cannot be used", error["msg"], "see the keys in the documentation")


def _place_and_key(keys: tuple[str, ...]) -> tuple[str, str]:
    depth = 2 if keys[:1] == ("planets",) else 1
    return (".".join(keys[:depth]), ".".join(keys[depth:])) if len(keys) > depth else ("", ".".join(keys))


def _sample_file(samples: Samples | None, folder: Path) -> Iterator[Problem]:
    if samples is None:
        return
    path = folder / samples.file
    if path.suffix.lower() not in SAMPLE_FILES:
        why, do = "its ending says how to read it", f"give a file that ends in {', '.join(SAMPLE_FILES)}"
        yield Problem("samples", "file", f"{samples.file!r} is not a kind of sample file that can be read", why, do)
    elif not os.path.isfile(path):  # not path.is_file(): that raises for names too long
        do = "check the name; it is looked for beside the scenario"
        yield Problem("samples", "file", f"there is no sample file {samples.file!r}", f"looked for in {folder}", do)


def _as_error(problems: Sequence[Problem], name: str) -> ScenarioError:
    first, others = problems[0], problems[1:]
    shown = [f"{_where(problem, name)}: {problem.what}; {problem.do}" for problem in others[: MOST_PROBLEMS_SHOWN - 1]]
    if len(others) > len(shown):
        shown.append(f"and {len(others) - len(shown)} more")
    count = f" (the first of {len(problems)} problems)" if others else ""
    do = "\n  also   ".join((first.do, *shown))
    return ScenarioError(first.what + count, where=_where(first, name), why=first.why, do=do)


def _where(problem: Problem, name: str) -> str:
    table = f", [{problem.place}]" if problem.place else ""
    return f"{name}{table}{' ' if table else ', '}{problem.key}" if problem.key else f"{name}{table}"
