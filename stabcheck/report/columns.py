"""What a draw is described by, in the units that are published: one name, one unit a column."""

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from stabcheck.arrays import PerDraw
from stabcheck.constants import (
    DEGREE_RAD,
    EARTH_MSUN,
    EARTH_RADIUS_AU,
    M_S_AU_D,
    SUN_RADIUS_AU,
    YEAR_D,
)
from stabcheck.report.table_of_draws import RunTable


@dataclass(frozen=True, slots=True)
class Kind:
    """A published unit: its name, what one internal unit is in it, and whether the values go round a circle."""

    unit: str
    factor: float = 1.0
    circular: bool = False


EARTH_MASSES, SUN_MASSES = Kind("Mearth", 1 / EARTH_MSUN), Kind("Msun")
EARTH_RADII, SUN_RADII = Kind("Rearth", 1 / EARTH_RADIUS_AU), Kind("Rsun", 1 / SUN_RADIUS_AU)
DAYS, AU, NONE, METRES_A_SECOND = Kind("d"), Kind("au"), Kind(""), Kind("m/s", 1 / M_S_AU_D)
DEGREES, ROUND = Kind("deg", 1 / DEGREE_RAD), Kind("deg", 1 / DEGREE_RAD, True)

ELEMENTS: dict[str, tuple[str, Kind]] = {
    "mass_msun": ("m", EARTH_MASSES),
    "radius_au": ("R", EARTH_RADII),
    "period_d": ("P", DAYS),
    "semi_major_axis_au": ("a", AU),
    "eccentricity": ("e", NONE),
    "inclination_rad": ("i", DEGREES),
    "node_rad": ("node", ROUND),
    "omega_planet_rad": ("omega_planet", ROUND),
    "mean_anomaly_rad": ("M", ROUND),
    "semi_amplitude_m_s": ("K", Kind("m/s")),
}
"""Fields of the ensemble: short name and unit."""

DRAWN: dict[str, Kind] = {
    "mass": EARTH_MASSES,
    "mass_sin_i": EARTH_MASSES,
    "radius": EARTH_RADII,
    "age": Kind("Gyr", 1 / (YEAR_D * 1e9)),
    "period": DAYS,
    "semi_major_axis": AU,
    "eccentricity": NONE,
    "omega_star": ROUND,
    "omega_planet": ROUND,
    "mean_anomaly": ROUND,
    "mean_longitude_star": ROUND,
    "mean_longitude_planet": ROUND,
    "time_of_conjunction": Kind("BJD"),
    "time_of_periastron": Kind("BJD"),
    "semi_amplitude": METRES_A_SECOND,
    "inclination": DEGREES,
    "impact_parameter": NONE,
    "node": ROUND,
    "mutual_scatter": DEGREES,
    "tilt": DEGREES,
    "tilt_direction": ROUND,
    "side": NONE,
    "position": AU,
    "velocity": Kind("au/d"),
}
"""Keys of the scenario that can be drawn, and what its geometry leaves open; ``side`` tells i from 180° - i."""

SHORT = {
    "mass": "m",
    "mass_sin_i": "m sin i",
    "radius": "R",
    "period": "P",
    "semi_major_axis": "a",
    "eccentricity": "e",
    "mean_anomaly": "M",
    "mean_longitude_star": "lambda_star",
    "mean_longitude_planet": "lambda_planet",
    "time_of_conjunction": "T_conj",
    "time_of_periastron": "T_peri",
    "semi_amplitude": "K",
    "inclination": "i",
    "impact_parameter": "impact",
}
"""Names on axes and in tables, where the whole name of the scenario has no room."""

SAID_ALREADY = {"omega_star", "omega_planet", "side", "tilt", "tilt_direction", "age"}
"""Drawn, but the elements say the same (or nothing depends on it): in the export, not in tables and figures."""

HEAVY = {"mass": SUN_MASSES, "mass_sin_i": SUN_MASSES, "mass_msun": SUN_MASSES}
HEAVY |= {"radius": SUN_RADII, "radius_au": SUN_RADII}


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """One described quantity of every draw, in its published unit."""

    name: str
    unit: str
    circular: bool
    values: PerDraw

    @property
    def label(self) -> str:
        """Name with unit, for axes and headers."""
        return f"{self.name} [{self.unit}]" if self.unit else self.name


def drawn_columns(table: RunTable) -> Iterator[Column]:
    """What was drawn, under the scenario's names."""
    for name, values in table.parameters.items():
        kind = _kind_of_drawn(name)
        yield Column(name=name, unit=kind.unit, circular=kind.circular, values=values * kind.factor)


def element_columns(table: RunTable) -> Iterator[Column]:
    """Elements and masses of each planet at the epoch, and the star's mass."""
    yield Column(name="m star", unit="Msun", circular=False, values=table.star_mass_msun)
    for field, (short, usual) in ELEMENTS.items():
        for planet, body in enumerate(table.bodies):
            kind = HEAVY.get(field, usual) if body == "companion" else usual
            if field in table.elements:
                values = table.elements[field][:, planet] * kind.factor
                yield Column(name=f"{short} {body}", unit=kind.unit, circular=kind.circular, values=values)


def derived_columns(table: RunTable) -> Iterator[Column]:
    """Period ratios and mutual inclinations of neighbours."""
    for inner, outer in zip(range(len(table.bodies) - 1), range(1, len(table.bodies)), strict=True):
        pair = f"{table.bodies[outer]}/{table.bodies[inner]}"
        period = table.elements["period_d"]
        yield Column(name=f"P ratio {pair}", unit="", circular=False, values=period[:, outer] / period[:, inner])
        tilt = _mutual_inclination_rad(table, inner, outer) / DEGREE_RAD
        yield Column(name=f"mutual i {pair}", unit="deg", circular=False, values=tilt)


def described(table: RunTable) -> tuple[Column, ...]:
    """Everything that varies from draw to draw, once: elements, derived, and what was drawn beyond them."""
    seen: set[bytes] = set()
    columns: list[Column] = []
    drawn = [_shortly(c) for c in drawn_columns(table) if c.name.split(".")[-1] not in SAID_ALREADY]
    for column in (*element_columns(table), *derived_columns(table), *drawn):
        # A hundred-millionth: a drawn column and the element made of it differ in the last digits.
        key = (np.round(column.values, 8) + 0.0).tobytes()
        if varies(column) and key not in seen:
            columns.append(column)
        seen.add(key)
    return tuple(columns)


def _shortly(column: Column) -> Column:
    """``planets.c.time_of_conjunction`` as ``T_conj c``."""
    place, *keys = column.name.split(".")
    body, keys = (keys[0], keys[1:]) if place == "planets" else (place, keys)
    words = [SHORT.get(keys[0], keys[0]), *keys[1:], body] if keys else [body]
    return replace(column, name=" ".join(words))


def varies(column: Column) -> bool:
    """Whether the draws differ in it by more than rounding."""
    finite = column.values[np.isfinite(column.values)]
    return bool(finite.size) and bool(np.ptp(finite) > 1e-12 * np.abs(finite).max())


def _kind_of_drawn(name: str) -> Kind:
    """Unit of a scenario key such as ``planets.b.mass``; the star's and companion's masses are in solar ones."""
    parts = [part for part in name.split(".") if part not in ("x", "y", "z")]
    heavy = parts[0] in ("star", "companion")
    usual = DRAWN.get(parts[-1], Kind("internal units"))
    return HEAVY.get(parts[-1], usual) if heavy else usual


def _mutual_inclination_rad(table: RunTable, one: int, other: int) -> PerDraw:
    tilt, node = table.elements["inclination_rad"], table.elements["node_rad"]
    turn = node[:, one] - node[:, other]
    # Half-angle form: the cosine loses half the digits for nearly coplanar orbits.
    square = np.sin(0.5 * (tilt[:, one] - tilt[:, other])) ** 2
    square = square + np.sin(tilt[:, one]) * np.sin(tilt[:, other]) * np.sin(0.5 * turn) ** 2
    return np.asarray(2 * np.arcsin(np.sqrt(np.clip(square, 0.0, 1.0))))
