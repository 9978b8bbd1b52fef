"""The tables of a scenario file, one frozen model each: what a key may hold by itself. `scenario` documents the keys.

What keys mean together (exactly one phase, no radius no impact parameter, ...) is checked in `scenario_checks`.
"""

import difflib
import re
from collections.abc import Callable
from dataclasses import dataclass
from enum import StrEnum
from typing import Annotated, Any

from pydantic import BaseModel, ConfigDict, PlainValidator
from pydantic_core import PydanticCustomError

from stabcheck.constants import YEAR_D
from stabcheck.errors import QuantityError
from stabcheck.quantity import Dimension, Isotropic, Quantity, from_toml

FIRST_DATE, LAST_DATE = 2_400_000.0, 2_600_000.0
"""1858 and 2406: a date outside is reduced, or has a digit too many or too few."""


class Frame(StrEnum):
    """What the elements refer to."""

    JACOBI = "jacobi"
    """Each orbit about the centre of mass of everything inside it."""
    ASTROCENTRIC = "astrocentric"
    """Each orbit about the star."""
    CARTESIAN = "cartesian"
    """Positions and velocities, whatever the origin."""


class FitKind(StrEnum):
    """What kind of model was fitted."""

    KEPLERIAN = "keplerian"
    """A sum of orbits that do not disturb each other."""
    DYNAMICAL = "dynamical"
    """Orbits that do; the elements are osculating at the epoch."""


class Nodes(StrEnum):
    """How the nodes lie where planets have none of their own."""

    EQUAL = "equal"
    ISOTROPIC = "isotropic"


class SpanKind(StrEnum):
    """What the length of a run is counted in."""

    YEARS = "yr"
    INNER_ORBITS = "inner orbits"
    OUTER_ORBITS = "outer orbits"
    SECULAR_CYCLES = "secular cycles"


@dataclass(frozen=True, slots=True)
class Span:
    """How long a draw is followed: ``value`` of ``kind`` (Julian years, or cycles of its own)."""

    value: float
    kind: SpanKind

    def __str__(self) -> str:
        return f"{self.value:g} {self.kind}"


@dataclass(frozen=True, slots=True)
class Epoch:
    """The instant that the phases belong to."""

    bjd: float
    scale: str
    """BJD_TDB, BJD_UTC or BJD (not stated)."""

    def __str__(self) -> str:
        return f"{self.bjd!r} {self.scale}"


# ---------------------------------------------------------------------------------------------------------------------
# What one key may hold


Check = Callable[[Quantity], tuple[str, str] | None]
"""Why a quantity does not fit and what to write; None if it fits. Columns are checked row by row, not here."""


def refusal(what: str, why: str, do: str) -> PydanticCustomError:
    """Make the error that pydantic collects; `scenario` reads the parts back from its context."""
    return PydanticCustomError("stabcheck", "{what}", {"what": what, "why": why, "do": do})


def _positive(quantity: Quantity) -> tuple[str, str] | None:
    fits = quantity.central > 0.0
    return None if fits else ("its central value is not above 0", "write a positive value")


def _not_negative(quantity: Quantity) -> tuple[str, str] | None:
    return None if quantity.central >= 0.0 else ("its central value is negative", "write 0 or a positive value")


def _fixed(quantity: Quantity) -> tuple[str, str] | None:
    return None if quantity.is_fixed else ("it is the same in every draw", "write one value without an error")


def _bound(quantity: Quantity) -> tuple[str, str] | None:
    if 0.0 <= quantity.central < 1.0:
        return None
    return "its central value is not between 0 and 1: not a bound orbit", "write an eccentricity, 0 <= e < 1"


def _whole_date(quantity: Quantity) -> tuple[str, str] | None:
    if FIRST_DATE <= quantity.central <= LAST_DATE:
        return None
    return (
        "the date is not between 2 400 000 and 2 600 000 (1858 to 2406): a reduced date, or a wrong number of digits",
        "add the offset that the source left off (2 400 000, 2 400 000.5, 2 450 000, 2 454 833, 2 457 000, ...)",
    )


def _direction(quantity: Quantity) -> tuple[str, str] | None:
    if not isinstance(quantity.distribution, Isotropic):
        return None
    return "only inclinations are isotropic", 'write "uniform(0, 360) deg"'


_MIRRORED = "change the sign of the inclination and add 180 deg to node and ω: the same orbit"


def _tilt(quantity: Quantity) -> tuple[str, str] | None:
    half_turn = 3.1415926535897936  # a last digit above π, for 180 deg written in other ways
    return None if 0.0 <= quantity.central <= half_turn else ("it is not between 0 and 180 deg", _MIRRORED)


def _own_tilt(quantity: Quantity) -> tuple[str, str] | None:
    if isinstance(quantity.distribution, Isotropic) and not quantity.distribution.both_senses:
        return (
            "drawing each planet isotropically makes half of the pairs retrograde and must be spelled out",
            'for one plane common to all write inclination = "isotropic" in [plane]; if you mean it planet by planet, '
            'write "isotropic independent" and nodes = "isotropic" in [plane]',
        )
    return _tilt(quantity)


def _plane_tilt(quantity: Quantity) -> tuple[str, str] | None:
    if isinstance(quantity.distribution, Isotropic) and quantity.distribution.both_senses:
        return "a common plane has one direction, its mirror image is dynamically the same", 'write "isotropic"'
    return _tilt(quantity)


def _reader(dimension: Dimension, *checks: Check) -> Callable[[object], Quantity]:
    def read(value: object) -> Quantity:
        try:
            quantity = from_toml(value, dimension)
        except QuantityError as error:
            raise refusal(error.what, error.why, error.do) from error
        for check in checks:
            if (quantity.column is None or check is _fixed) and (found := check(quantity)):
                raise refusal(f"{quantity.text!r} does not fit", *found)
        return quantity

    return read


def _value_reader(dimension: Dimension, *checks: Check) -> Callable[[object], float]:
    read = _reader(dimension, _fixed, *checks)
    return lambda value: read(value).central


def _vector_reader(dimension: Dimension) -> Callable[[object], tuple[Quantity, ...]]:
    read = _reader(dimension)

    def read_vector(value: object) -> tuple[Quantity, ...]:
        if not isinstance(value, list | tuple) or len(value) != 3:
            raise refusal("a vector has three components", "", 'write ["1.2 au", "0 au", "-0.1 au"], with their unit')
        return tuple(read(component) for component in value)

    return read_vector


def _epoch(value: object) -> Epoch:
    if isinstance(value, Epoch):
        return value
    date = _reader(Dimension.DATE, _fixed, _whole_date)(value)
    return Epoch(date.central, date.unit)


_SPAN = re.compile(r"([+]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)\s*([A-Za-z][A-Za-z ]*)")
_SPAN_UNITS: dict[str, tuple[float, SpanKind]] = {
    **{"d": (1.0 / YEAR_D, SpanKind.YEARS), "yr": (1.0, SpanKind.YEARS), "kyr": (1e3, SpanKind.YEARS)},
    **{"Myr": (1e6, SpanKind.YEARS), "Gyr": (1e9, SpanKind.YEARS)},
    **{kind[:-1]: (1.0, kind) for kind in SpanKind if kind is not SpanKind.YEARS},
    **{str(kind): (1.0, kind) for kind in SpanKind if kind is not SpanKind.YEARS},
}


def _span(value: object) -> Span:
    if isinstance(value, Span):
        return value
    do = 'write "1e5 inner orbits", "1e4 outer orbits", "10 secular cycles" or "1 Myr" (d, yr, kyr, Myr, Gyr)'
    found = _SPAN.fullmatch(" ".join(value.split())) if isinstance(value, str) else None
    if not found or found[2] not in _SPAN_UNITS:
        raise refusal(f"{value!r} is not a length of time", "it needs a number and what it counts", do)
    factor, kind = _SPAN_UNITS[found[2]]
    length = float(found[1]) * factor
    if not 0.0 < length < 1e15:
        raise refusal(f"{value!r} cannot be followed", "it is not above 0 and below 1e15", do)
    return Span(length, kind)


def _choice(*words: str) -> Callable[[object], str]:
    listed = ", ".join(f'"{word}"' for word in words)

    def read(value: object) -> str:
        if isinstance(value, str) and value in words:
            return str(value)
        near = difflib.get_close_matches(value.lower(), words, n=1) if isinstance(value, str) else []
        do = f'write "{near[0]}" (of {listed})' if near else f"write one of {listed}"
        raise refusal(f"{value!r} is not known here", "", do)

    return read


def _chosen(kind: type[StrEnum]) -> Callable[[object], Any]:
    read = _choice(*(str(member) for member in kind))
    return lambda value: kind(read(value))


def _text(value: object) -> str:
    if not isinstance(value, str):
        raise refusal(f"{value!r} is not a text", "", "write it in quotes")
    return value


def _name(value: object) -> str:
    if not _text(value).strip():
        raise refusal("a name is empty", "", "write the name of the file or column in quotes, or leave the key out")
    return _text(value)


def _switch(value: object) -> bool:
    if not isinstance(value, bool):
        raise refusal(f"{value!r} is neither yes nor no", "", "write true or false, without quotes")
    return value


def _seed(value: object) -> int:
    if isinstance(value, bool) or not isinstance(value, int) or not 0 <= value < 2**63:
        raise refusal(
            f"{value!r} is not a seed", "the same seed gives the same draws", "write a whole number from 0 to 2^63 - 1"
        )
    return value


def _number_between(low: float, high: float, why: str) -> Callable[[object], float]:
    def read(value: object) -> float:
        if (
            isinstance(value, bool) or not isinstance(value, int | float) or not low < value < high
        ):  # NaN is refused too
            raise refusal(f"{value!r} does not fit", why, f"write a number above {low:g} and below {high:g}")
        return float(value)

    return read


Mass = Annotated[Quantity, PlainValidator(_reader(Dimension.MASS, _positive))]
Length = Annotated[Quantity, PlainValidator(_reader(Dimension.LENGTH, _positive))]
Duration = Annotated[Quantity, PlainValidator(_reader(Dimension.TIME, _positive))]
Speed = Annotated[Quantity, PlainValidator(_reader(Dimension.SPEED, _positive))]
Angle = Annotated[Quantity, PlainValidator(_reader(Dimension.ANGLE, _direction))]
Date = Annotated[Quantity, PlainValidator(_reader(Dimension.DATE, _whole_date))]
Eccentricity = Annotated[Quantity, PlainValidator(_reader(Dimension.NUMBER, _bound))]
Impact = Annotated[Quantity, PlainValidator(_reader(Dimension.NUMBER, _not_negative))]
OwnTilt = Annotated[Quantity, PlainValidator(_reader(Dimension.ANGLE, _own_tilt))]
PlaneTilt = Annotated[Quantity, PlainValidator(_reader(Dimension.ANGLE, _plane_tilt))]
Scatter = Annotated[Quantity, PlainValidator(_reader(Dimension.ANGLE, _direction, _fixed, _positive))]
Position = Annotated[tuple[Quantity, Quantity, Quantity], PlainValidator(_vector_reader(Dimension.LENGTH))]
Velocity = Annotated[tuple[Quantity, Quantity, Quantity], PlainValidator(_vector_reader(Dimension.SPEED))]
Text = Annotated[str, PlainValidator(_text)]
Name = Annotated[str, PlainValidator(_name)]
Switch = Annotated[bool, PlainValidator(_switch)]
LengthAu = Annotated[float, PlainValidator(_value_reader(Dimension.LENGTH, _positive))]
DurationD = Annotated[float, PlainValidator(_value_reader(Dimension.TIME, _positive))]


# ---------------------------------------------------------------------------------------------------------------------
# The tables


class Table(BaseModel):
    """A table of the file; what is read stays as it is."""

    model_config = ConfigDict(frozen=True, extra="forbid")


class Star(Table):
    """[star]"""

    mass: Mass
    radius: Length | None = None
    age: Duration | None = None
    position: Position | None = None
    velocity: Velocity | None = None


class Elements(Table):
    """[elements]: what the numbers of the planets refer to; ``data_span`` in days."""

    frame: Annotated[Frame, PlainValidator(_chosen(Frame))]
    fit: Annotated[FitKind, PlainValidator(_chosen(FitKind))] = FitKind.DYNAMICAL
    """Compulsory but for Cartesian states, which are dynamical by nature; see `scenario_checks`."""
    epoch: Annotated[Epoch, PlainValidator(_epoch)] | None = None
    data_span: DurationD | None = None
    independent_omega_and_periastron_time: Switch = False


class Plane(Table):
    """[plane]: what is common to all planets."""

    inclination: PlaneTilt | None = None
    mutual_scatter: Scatter | None = None
    nodes: Annotated[Nodes, PlainValidator(_chosen(Nodes))] = Nodes.EQUAL


class Planet(Table):
    """[planets.NAME] or [companion]."""

    period: Duration | None = None
    semi_major_axis: Length | None = None
    eccentricity: Eccentricity | None = None
    omega_star: Angle | None = None
    omega_planet: Angle | None = None
    mean_anomaly: Angle | None = None
    mean_longitude_star: Angle | None = None
    mean_longitude_planet: Angle | None = None
    time_of_conjunction: Date | None = None
    time_of_periastron: Date | None = None
    mass: Mass | None = None
    mass_sin_i: Mass | None = None
    semi_amplitude: Speed | None = None
    inclination: OwnTilt | None = None
    impact_parameter: Impact | None = None
    node: Angle | None = None
    radius: Length | None = None
    position: Position | None = None
    velocity: Velocity | None = None


class Samples(Table):
    """[samples]: a file of posterior samples, used row by row."""

    file: Name
    weight: Name | None = None
    log_weight: Name | None = None
    chain: Name | None = None
    log_probability: Name | None = None


class Draws(Table):
    """[draws]"""

    seed: Annotated[int, PlainValidator(_seed)]


class Physics(Table):
    """[physics]"""

    relativity: Switch = False


class Integration(Table):
    """[integration]"""

    engine: Annotated[str, PlainValidator(_choice("auto", "rebound"))] = "auto"
    method: Annotated[str, PlainValidator(_choice("auto", "whfast", "trace", "ias15"))] = "auto"
    span: Annotated[Span, PlainValidator(_span)]
    steps_per_periastron: Annotated[
        float,
        PlainValidator(_number_between(16.0, 1e4, "a step coarser than 16 per periastron is outgrown at the start")),
    ] = 25.0
    indicator: Switch = True


class Endings(Table):
    """[endings]; distances in au, None where not given."""

    ejection_distance: LengthAu | None = None
    stop_approach: LengthAu | None = None
    stop_distance: LengthAu | None = None
    mass_radius: Annotated[str, PlainValidator(_choice("chen-kipping-2017"))] | None = None


class Rearranged(Table):
    """[rearranged]"""

    axis_share: Annotated[float, PlainValidator(_number_between(0.0, 1.0, "it is a share of the first axis"))] = 0.3
