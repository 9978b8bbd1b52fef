"""A number as a table prints it, ``"1.27 ± 0.05 Mjup"``, becomes a distribution in the units used inside.

What may be written, and what it means::

    "1.2 Mjup"                          a value without error: the same in every draw
    "1.2 ± 0.1 Mjup"   (+/-, +-)        normal: mean 1.2, standard deviation 0.1
    "1.2 +0.3 -0.2 Mjup"                two-piece normal: the value is the median, half of the draws lie on each side,
                                        68 % of them between 1.0 and 1.5 (16th and 84th percentile)
    "< 0.3 (95 %)"                      upper limit: half-normal from 0 of which 95 % lie below 0.3
    "normal(1.2, 0.1) Mjup"             mean, standard deviation
    "truncated normal(0.1, 0.05, 0, 1)" mean and standard deviation of the whole normal, then the two limits
    "half-normal(0.05)"                 from 0, standard deviation of the whole normal
    "uniform(0, 360) deg"
    "log-uniform(1, 10) Mearth"
    "isotropic"                         inclination: cos i uniform between 0 and 1
    "isotropic independent"             inclination: cos i uniform between -1 and 1, each planet for itself

Units: Msun Mjup Mearth; Rsun Rjup Rearth au km m; d h min s yr (365.25 d) kyr Myr Gyr; deg rad; m/s km/s au/d. Dates
are written with their time scale, BJD_TDB, BJD_UTC or BJD (scale not stated by the source), errors in days. Numbers
without a unit are for what has none (eccentricity, impact parameter). A column of a sample file is written
``{ column = "P_b", unit = "d" }``; dates in a column may be reduced, with what is to be added:
``{ column = "T_b", unit = "BJD_TDB", offset = 2454833 }``.

Masses are GM ratios to the nominal solar one (IAU 2015 Resolution B3): "Mjup" is GM of Jupiter over GM of the Sun.
"""

import difflib
import math
import re
from collections.abc import Callable, Mapping
from dataclasses import asdict, dataclass
from enum import StrEnum
from typing import Any

import numpy as np

from stabcheck import constants as c
from stabcheck.arrays import Array
from stabcheck.distribution import (
    Column,
    Distribution,
    Fixed,
    HalfNormal,
    Isotropic,
    LogUniform,
    Normal,
    TruncatedNormal,
    TwoPieceNormal,
    Uniform,
)
from stabcheck.errors import QuantityError

__all__ = [
    "AMBIGUOUS",
    "UNITS",
    "Column",
    "Dimension",
    "Distribution",
    "Fixed",
    "HalfNormal",
    "Isotropic",
    "LogUniform",
    "Normal",
    "Quantity",
    "TruncatedNormal",
    "TwoPieceNormal",
    "Uniform",
    "from_toml",
    "parse",
]


class Dimension(StrEnum):
    """What a quantity measures; each has one unit inside."""

    MASS = "mass"
    """Msun"""
    LENGTH = "length"
    """au"""
    TIME = "time"
    """d"""
    ANGLE = "angle"
    """rad"""
    SPEED = "speed"
    """au/d"""
    NUMBER = "number"
    DATE = "date"
    """BJD in days"""


UNITS: Mapping[Dimension, Mapping[str, float]] = {
    Dimension.MASS: {"Msun": 1.0, "Mjup": c.JUPITER_MSUN, "Mearth": c.EARTH_MSUN},
    Dimension.LENGTH: {
        "au": 1.0,
        "Rsun": c.SUN_RADIUS_AU,
        "Rjup": c.JUPITER_RADIUS_AU,
        "Rearth": c.EARTH_RADIUS_AU,
        "km": 1e3 / c.AU_M,
        "m": 1.0 / c.AU_M,
    },
    Dimension.TIME: {
        "d": 1.0,
        "h": 3600.0 / c.DAY_S,
        "min": 60.0 / c.DAY_S,
        "s": 1.0 / c.DAY_S,
        "yr": c.YEAR_D,
        "kyr": 1e3 * c.YEAR_D,
        "Myr": 1e6 * c.YEAR_D,
        "Gyr": 1e9 * c.YEAR_D,
    },
    Dimension.ANGLE: {"deg": c.DEGREE_RAD, "rad": 1.0},
    Dimension.SPEED: {"m/s": c.M_S_AU_D, "km/s": 1e3 * c.M_S_AU_D, "au/d": 1.0},
    Dimension.NUMBER: {"": 1.0},
    Dimension.DATE: {"BJD_TDB": 1.0, "BJD_UTC": 1.0, "BJD": 1.0},
}
"""Units a dimension is written in, and what one of them is in the unit inside."""

ALIASES: Mapping[str, str] = {
    **{f"M_{body}": f"M{body}" for body in ("sun", "jup", "earth")},
    **{f"R_{body}": f"R{body}" for body in ("sun", "jup", "earth")},
    **{"M☉": "Msun", "M⊙": "Msun", "M♃": "Mjup", "MJup": "Mjup", "M⊕": "Mearth", "MEarth": "Mearth"},
    **{"R☉": "Rsun", "R⊙": "Rsun", "R♃": "Rjup", "RJup": "Rjup", "R⊕": "Rearth", "REarth": "Rearth"},
    **{"AU": "au", "day": "d", "days": "d", "hr": "h", "hours": "h", "year": "yr", "years": "yr"},
    **{"°": "deg", "degrees": "deg", "m s-1": "m/s", "m s^-1": "m/s", "km s-1": "km/s", "au/day": "au/d"},
}
"""Other spellings that can mean one thing only."""

AMBIGUOUS: Mapping[str, str] = {
    **{"MJ": "Mjup", "M_J": "Mjup", "ME": "Mearth", "M_E": "Mearth", "Me": "Mearth", "M_e": "Mearth", "MS": "Msun"},
    **{
        "RJ": "Rjup",
        "R_J": "Rjup",
        "RE": "Rearth",
        "R_E": "Rearth",
        "Re": "Rearth",
        "RS": "Rsun",
        "a": "yr",
        "y": "yr",
    },
    **{"JD": "BJD", "HJD": "BJD", "MJD": "BJD", "BMJD": "BJD", "BKJD": "BJD", "BTJD": "BJD", "HJD_UTC": "BJD_UTC"},
}
"""Units that are met in tables but refused, and what is probably meant."""

NORMAL_16TH = 0.5 * math.erfc(math.sqrt(0.5))
"""Share of a normal below its mean less one standard deviation, 0.1587."""

LEAST = 1e-150
"""Numbers nearer to 0 than this, or beyond its inverse, leave no room to be squared: refused."""

LEAST_TRUNCATED_SHARE = 1e-6
"""A truncated normal that keeps less of the normal than this is a slip of the pen, not a measurement."""


@dataclass(frozen=True, slots=True)
class Quantity:
    """A value with what is known of it, in the unit inside (Msun, au, d, rad, au/d, BJD).

    Attributes
    ----------
    text : str
        As the user wrote it.
    dimension : Dimension
    distribution : one of the classes above
    unit : str
        The unit it was written in; for a date its time scale.
    """

    text: str
    dimension: Dimension
    distribution: Distribution
    unit: str

    @property
    def is_fixed(self) -> bool:
        """True if every draw has the same value."""
        return isinstance(self.distribution, Fixed)

    @property
    def column(self) -> str | None:
        """Name of the column of the sample file, None if the value is not from there."""
        return self.distribution.name if isinstance(self.distribution, Column) else None

    def at(self, u: Array) -> Array:
        """Inverse distribution function.

        Parameters
        ----------
        u : array
            Uniform numbers between 0 and 1.

        Returns
        -------
        array of the same shape
            In the unit inside; each entry depends on its own ``u`` only.

        Raises
        ------
        QuantityError
            If the quantity is a column.
        """
        return self.distribution.at(np.ascontiguousarray(u, dtype=np.float64))

    @property
    def central(self) -> float:
        """Median; NaN for a column."""
        return math.nan if self.column else float(self.at(np.array([0.5]))[0])

    @property
    def sigma(self) -> float:
        """Half the distance from the 16th to the 84th percentile, 0 if fixed; NaN for a column."""
        if self.column:
            return math.nan
        low, high = self.at(np.array([NORMAL_16TH, 1.0 - NORMAL_16TH]))
        return float(high - low) / 2.0

    def record(self) -> dict[str, Any]:
        """Give the distribution as plain values: what decides the draws, however it was written."""
        return {"kind": type(self.distribution).__name__, **asdict(self.distribution)}


# ---------------------------------------------------------------------------------------------------------------------
# Reading


_PLAIN = r"(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?"
_SIGNED = rf"[+-]?{_PLAIN}"
_VALUE = re.compile(rf"({_SIGNED})\s*(.*)")
_SYMMETRIC = re.compile(rf"(?:±|\+/-|\+-)\s*({_SIGNED})\s*(.*)")
_UP_DOWN = re.compile(rf"\+\s*({_PLAIN})[\s,/]*-\s*({_PLAIN})\s*(.*)")
_DOWN_UP = re.compile(rf"-\s*({_PLAIN})[\s,/]*\+\s*({_PLAIN})\s*(.*)")
_LIMIT = re.compile(rf"[<≤]=?\s*({_SIGNED})\s*([^()]*?)\s*(?:\(([^()]*)\)\s*(.*))?")
_SHARE = re.compile(rf"({_PLAIN})\s*%")
_CALL = re.compile(r"([A-Za-z][A-Za-z -]*?)\s*\(([^()]*)\)\s*(.*)")
_NOT_A_NUMBER = re.compile(r"(?i)(?<![a-z])(nan|inf|infinity)(?![a-z])")
_AS_PLAIN = str.maketrans({"−": "-", "–": "-", "\u00a0": " ", "\u2009": " ", "\u202f": " "})  # minus, en dash, spaces
_FORMS = 'write "1.2", "1.2 ± 0.1", "1.2 +0.3 -0.2" or "< 0.3 (95 %)", then the unit; or normal(..), uniform(..), ...'


def parse(text: str, dimension: Dimension) -> Quantity:
    """Read a quantity.

    Parameters
    ----------
    text : str
        One of the forms in this module's docstring.
    dimension : Dimension
        What the place it stands in needs.

    Raises
    ------
    QuantityError
        If it is none of the forms, its unit is missing or measures something else, a number is not finite, an error
        is zero or negative, or a limit has no confidence.
    """
    clean = " ".join(text.translate(_AS_PLAIN).split())
    if not clean or len(clean) > 200:
        raise _bad(text, "it is empty" if not clean else "it is longer than 200 characters", _FORMS)
    if found := _NOT_A_NUMBER.search(clean):
        raise _bad(
            text, f"{found[1]} is not a value", "write a finite number, or leave the key out if it may be absent"
        )
    distribution, unit = _read(clean, text, dimension)
    _refuse_unfit(distribution, text, dimension)
    return Quantity(text, dimension, distribution, unit)


def from_toml(value: object, dimension: Dimension) -> Quantity:
    """Read a quantity from what TOML gave: a text, a number where there is no unit, or ``{ column, unit }``.

    Raises
    ------
    QuantityError
        As `parse`, and for a bare number where a unit is needed.
    """
    if isinstance(value, Quantity) and value.dimension is dimension:
        return value
    if isinstance(value, str):
        return parse(value, dimension)
    if isinstance(value, Mapping):
        return _column(value, dimension)
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise _bad(value, f"it is {_kind(value)}", _FORMS)
    if dimension is not Dimension.NUMBER:
        raise _bad(
            value, "a number without a unit could be anything", f'write "{value} UNIT", with {_listed(dimension)}'
        )
    return parse(repr(value), dimension)


def _read(clean: str, text: str, dimension: Dimension) -> tuple[Distribution, str]:
    if clean in ("isotropic", "isotropic independent"):
        return Isotropic(both_senses=clean != "isotropic"), ""
    if clean[0] in "<≤":
        return _read_limit(clean, text, dimension)
    if clean[0] in ">≥":
        raise _bad(
            text, "a lower limit does not say how far up", 'write a distribution: "uniform(a, b)", "log-uniform(..)"'
        )
    if call := _CALL.fullmatch(clean):
        return _read_call(call, text, dimension)
    if plain := _VALUE.fullmatch(clean):
        return _read_plain(plain[1], plain[2], text, dimension)
    raise _bad(text, "it is not one of the known forms", _FORMS)


def _read_plain(number: str, rest: str, text: str, dimension: Dimension) -> tuple[Distribution, str]:
    if both := _SYMMETRIC.fullmatch(rest):
        factor, unit = _unit(both[2], text, dimension)
        return Normal(_number(number, text) * factor, _error(both[1], text) * factor), unit
    for pattern, up, down in ((_UP_DOWN, 1, 2), (_DOWN_UP, 2, 1)):
        if sides := pattern.fullmatch(rest):
            factor, unit = _unit(sides[3], text, dimension)
            value, upper, lower = _number(number, text), _error(sides[up], text), _error(sides[down], text)
            return _two_pieces(value * factor, lower * factor, upper * factor), unit
    _refuse_known_slips(rest, text)
    factor, unit = _unit(rest, text, dimension)
    return Fixed(_number(number, text) * factor), unit


def _two_pieces(median: float, lower: float, upper: float) -> Distribution:
    return Normal(median, upper) if lower == upper else TwoPieceNormal(median, lower, upper)


def _refuse_known_slips(rest: str, text: str) -> None:
    if re.search(r"\+.*-\s*-|-\s*-|\+\s*-\s*\d", rest):
        raise _bad(
            text,
            "the lower error has two signs: tables store it as a negative number already",
            'write it with one minus: "1.2 +0.3 -0.2"',
        )
    if rest.startswith("("):
        raise _bad(text, "an error in brackets can be read in two ways", 'write it out: "4.31 ± 0.05", then the unit')
    if re.match(r",\s*\d", rest):
        raise _bad(text, "a comma stands where a decimal point is meant", "write a decimal point")
    if rest[:1] in ("±", "+", "-"):
        raise _bad(
            text,
            "of its error not everything can be read; a blank error is an unknown one, not zero",
            'write "value ± error" or "value +upper -lower", or the value alone if it is to be the same in every draw',
        )


def _read_limit(clean: str, text: str, dimension: Dimension) -> tuple[Distribution, str]:
    limit = _LIMIT.fullmatch(clean)
    if not limit:
        raise _bad(text, "it is not an upper limit that can be read", 'write "< 0.3 (95 %)", then the unit')
    if not limit[3]:
        raise _bad(
            text,
            "an upper limit says nothing without its confidence",
            'add it, "< 0.3 (95 %)", which is drawn from a half-normal; or write a distribution, "uniform(0, 0.3)"',
        )
    confidence = _SHARE.fullmatch(limit[3].strip())
    share = _number(confidence[1], text) / 100.0 if confidence else 0.0
    if not 0.5 < share < 1.0:
        raise _bad(text, f"({limit[3]}) is not a confidence", "write it in percent, above 50 and below 100: (95 %)")
    factor, unit = _unit(limit[2] or limit[4] or "", text, dimension)
    value = _number(limit[1], text)
    if not value > 0.0:
        raise _bad(text, "an upper limit must be above 0", "write the limit as a positive number")
    return HalfNormal.below(value * factor, share), unit


def _read_call(call: re.Match[str], text: str, dimension: Dimension) -> tuple[Distribution, str]:
    name = call[1].lower()
    if name not in _CALLS:
        near = difflib.get_close_matches(name, _CALLS, n=1)
        do = f"write {near[0]}(..)" if near else f"write one of {', '.join(_CALLS)}"
        raise _bad(text, f"{call[1]!r} is not a distribution", do)
    count, scales, build = _CALLS[name]
    parts = [part.strip() for part in call[2].split(",")]
    if len(parts) != count or not all(re.fullmatch(_SIGNED, part) for part in parts):
        needed = f"{name} takes {count} number{'s' * (count > 1)}"
        raise _bad(text, needed, "put only numbers into the brackets, and the unit after them: uniform(0, 360) deg")
    numbers = [_number(part, text) for part in parts]
    if not all(numbers[k] > 0.0 for k in scales):
        raise _bad(text, f"a width or limit of {name} that must be above 0 is not", "write a positive number")
    if name not in ("normal", "half-normal") and not numbers[-2] < numbers[-1]:
        raise _bad(text, "the lower limit is not below the upper one", f"write {name}(.., lower, upper)")
    factor, unit = _unit(call[3], text, dimension)
    return build(*(number * factor for number in numbers)), unit


_CALLS: Mapping[str, tuple[int, tuple[int, ...], Callable[..., Distribution]]] = {
    "normal": (2, (1,), Normal),
    "truncated normal": (4, (1,), TruncatedNormal),
    "half-normal": (1, (0,), HalfNormal),
    "uniform": (2, (), Uniform),
    "log-uniform": (2, (0, 1), LogUniform),
}
"""Name: how many numbers, which of them must be positive, what they build."""


def _refuse_unfit(distribution: Distribution, text: str, dimension: Dimension) -> None:
    values = [value for value in asdict(distribution).values() if isinstance(value, float)]
    if not all(value == 0.0 or LEAST < abs(value) < 1.0 / LEAST for value in values):  # NaN is refused too
        raise _bad(text, "a number is beyond what can be computed with", "check its exponent and its unit")
    if isinstance(distribution, Isotropic) and dimension is not Dimension.ANGLE:
        raise _bad(text, f"only an inclination can be isotropic, not a {dimension}", _FORMS)
    if isinstance(distribution, HalfNormal | LogUniform) and dimension is Dimension.DATE:
        raise _bad(
            text, "a date is not counted from a zero that means anything", 'write "date ± error" or "uniform(..)"'
        )
    if isinstance(distribution, Uniform | TruncatedNormal) and not distribution.low < distribution.high:
        raise _bad(text, "its limits are too close together to be told apart", "write a fixed value")
    if isinstance(distribution, TruncatedNormal) and not distribution.share() >= LEAST_TRUNCATED_SHARE:
        raise _bad(
            text, "less than a millionth of the normal lies between the limits", "check the limits, or use uniform(..)"
        )
    turns = (distribution.high - distribution.low) / c.TWO_PI if isinstance(distribution, Uniform) else 0.0
    if dimension is Dimension.ANGLE and turns > 1.0 + 1e-12:  # 360 deg is 2π only to rounding
        raise _bad(text, "more than a full turn counts some angles twice", 'write "uniform(0, 360) deg"')


def _column(table: Mapping[Any, Any], dimension: Dimension) -> Quantity:
    text = "{ " + ", ".join(f"{key} = {value!r}" for key, value in table.items()) + " }"
    do = 'write { column = "NAME" }' if dimension is Dimension.NUMBER else 'write { column = "NAME", unit = "UNIT" }'
    if extra := sorted(str(key) for key in table if key not in ("column", "unit", "offset")):
        raise _bad(text, f"a column has no key {extra[0]!r}", do)
    name, unit_text, offset = table.get("column"), table.get("unit", ""), table.get("offset", 0.0)
    if not isinstance(name, str) or not name.strip() or not isinstance(unit_text, str):
        raise _bad(text, "the name of the column or its unit is missing or not a text", do)
    factor, unit = _unit(unit_text.strip(), text, dimension)
    if "offset" in table and dimension is not Dimension.DATE:
        raise _bad(text, "only reduced dates have an offset", do)
    if isinstance(offset, bool) or not isinstance(offset, int | float) or not abs(offset) < 1e8:  # NaN is refused too
        raise _bad(text, "the offset is not a number of days", "write offset = 2454833, say")
    return Quantity(text, dimension, Column(name, factor, float(offset)), unit)


def _unit(word: str, text: object, dimension: Dimension) -> tuple[float, str]:
    """Factor to the unit inside, and the unit's own name."""
    unit = ALIASES.get(word, word)
    if unit in UNITS[dimension]:
        return UNITS[dimension][unit], unit
    if not unit:
        raise _bad(text, f"it has no unit, and a {dimension} needs one", f"add {_listed(dimension)}")
    if dimension is Dimension.NUMBER:
        raise _bad(text, f"it has no unit here, so {word!r} cannot be read", "write the number alone")
    if unit[0] in "±+-":
        raise _bad(
            text, f"{unit!r} is left over after one error", "add statistical and systematic errors in quadrature"
        )
    other = [str(name) for name, units in UNITS.items() if unit in units]
    why = f"{word!r} is a unit of {other[0]}, and this is a {dimension}" if other else f"{word!r} is not a known unit"
    raise _bad(text, why, _nearest_unit(word, dimension))


def _nearest_unit(word: str, dimension: Dimension) -> str:
    known = UNITS[dimension]
    meant = AMBIGUOUS.get(word, "")
    if dimension is Dimension.DATE and meant:
        return (
            "convert to barycentric dates in full (reduced ones lack 2 400 000.5 or another offset; other clocks and "
            "places are off by up to 8 minutes) and write BJD_TDB, BJD_UTC or, if the scale is not known, BJD"
        )
    if meant not in known:
        near = {name.lower(): name for name in known}
        meant = next((near[name] for name in difflib.get_close_matches(word.lower(), near, n=1)), "")
    return f"write {meant}" if meant else f"write {_listed(dimension)}"


def _listed(dimension: Dimension) -> str:
    *head, last = UNITS[dimension]
    return f"{', '.join(head)} or {last}" if head else last


def _number(text: str, whole: str) -> float:
    value = float(text)
    if not math.isfinite(value):
        raise _bad(whole, f"{text} is too large for a number", "check its exponent and its unit")
    return value


def _error(text: str, whole: str) -> float:
    value = _number(text, whole)
    if value > 0.0:
        return value
    if value < 0.0:
        raise _bad(whole, "an error is negative", "write errors as positive numbers behind ±, or as +upper -lower")
    raise _bad(
        whole,
        "an error of 0 is not an error",
        'write the value alone if it is fixed; if it is a limit, "< 0.02 (84 %)" or a distribution',
    )


def _kind(value: object) -> str:
    names = {"bool": "true or false", "list": "a list", "datetime": "a calendar date", "date": "a calendar date"}
    return names.get(type(value).__name__, f"a {type(value).__name__}")


def _bad(value: object, why: str, do: str) -> QuantityError:
    shown = value if isinstance(value, str) else repr(value)
    shown = shown if len(shown) <= 80 else shown[:77] + "..."
    return QuantityError(
        f"{shown!r} cannot be read" if isinstance(value, str) else f"{shown} cannot be read", why=why, do=do
    )
