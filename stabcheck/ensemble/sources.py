"""Where the numbers of a draw come from: distributions, rows of a sample file, and what the geometry leaves open.

A source is opened once and gives the values of any stretch of draws, the same whatever the stretch.
"""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from stabcheck.arrays import Array, Integers, PerDraw
from stabcheck.constants import GM_SUN_AU3_D2, TWO_PI
from stabcheck.errors import PlanError, SampleFileError
from stabcheck.orbit import period_d_from_semi_major_axis_au
from stabcheck.posterior import Roles, Samples, check_unit, read_samples
from stabcheck.quantity import Column, Dimension, Quantity
from stabcheck.random import permutation, rows_by_weight, uniforms
from stabcheck.scenario import Frame, Nodes, Planet, Scenario
from stabcheck.scenario_tables import FIRST_DATE, LAST_DATE

COMPANION = "companion"
ROWS = "samples"
"""Name of the random stream that chooses rows of the sample file."""

Values = Mapping[str, PerDraw]
"""Each quantity by its name in the scenario, in the units used inside."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Source:
    """A scenario whose sample file has been read and whose bodies have been put in order.

    Parameters
    ----------
    scenario : Scenario
    bodies : tuple of str
        Planets by central period, the companion star last.
    samples : Samples or None
        The rows of the sample file.
    order : (row,) array of int or None
        Row of draw 0, 1, ... where rows weigh the same.
    cumulative : (row,) array or None
        Running sum of the weights where they do not.
    """

    scenario: Scenario
    bodies: tuple[str, ...]
    samples: Samples | None
    order: Integers | None
    cumulative: Array | None

    @property
    def content_hash(self) -> str:
        """SHA-256 of the sample file, empty without one; part of a run's identity."""
        return self.samples.content_hash if self.samples else ""

    @property
    def most_draws(self) -> int | None:
        """How many draws there can be: the rows of a file without weights, else no limit."""
        return None if self.order is None else len(self.order)

    def rows(self, first: int, count: int) -> Integers:
        """Say which row of the sample file each draw is, -1 without a file.

        Raises
        ------
        PlanError
            If there are fewer rows of equal weight than draws.
        """
        _demand_stretch(first, count)
        if self.cumulative is not None:
            return rows_by_weight(self.cumulative, uniforms(self.scenario.draws.seed, ROWS, first, count))
        if self.order is None or self.samples is None:
            return np.full(count, -1, dtype=np.int64)
        if first + count > len(self.order):
            raise PlanError(
                f"{first + count} draws were asked for, but {self.samples.name} has {len(self.order)} rows",
                where="[samples]",
                why="rows of equal weight are used once each; using them again would pretend to more than is known",
                do=f"ask for at most {len(self.order)} draws, or thin the chain less",
            )
        return self.order[first : first + count]

    def values(self, first: int, count: int) -> Values:
        """Values of every quantity, and of what the geometry leaves open, for draws ``first`` to ``first + count - 1``.

        Returns
        -------
        mapping of str to (draw,) array
            Besides the quantities of the scenario: ``NAME.side`` (1 where an impact parameter is read as an
            inclination beyond 90°), ``NAME.tilt`` and ``NAME.tilt_direction`` (against the common plane) and
            ``NAME.node`` (isotropic).
        """
        rows, seed = self.rows(first, count), self.scenario.draws.seed
        drawn = {
            name: self._column(quantity.distribution)[rows]
            if isinstance(quantity.distribution, Column)
            else quantity.at(uniforms(seed, name, first, count))
            for name, quantity in self.scenario.quantities().items()
        }
        return drawn | {name: _open(self.scenario, name, uniforms(seed, name, first, count)) for name in self.left_open}

    @property
    def left_open(self) -> tuple[str, ...]:
        """Names of what is drawn though it is no quantity of the scenario."""
        names = []
        for body in self.bodies:
            table, prefix = table_of(self.scenario, body), prefix_of(self.scenario, body)
            if table.impact_parameter is not None:
                names.append(f"{prefix}.side")
            if is_tilted(self.scenario, body):
                names += [f"{prefix}.tilt", f"{prefix}.tilt_direction"]
            elif has_open_node(self.scenario, body):
                names.append(f"{prefix}.node")
        return tuple(names)

    def central_values(self) -> tuple[Values, int]:
        """One row: the best row of the sample file if it says which that is, else the median of each quantity alone.

        Returns
        -------
        (mapping of str to (1,) array, int)
            The values, and the row of the sample file or -1. Without a row this is a row of medians, which is not a
            solution of any fit. What the geometry leaves open is 0: no tilt, nodes together, inclination up to 90°.
        """
        best = self.samples.best_row if self.samples else None
        values = {
            name: np.array([self._central(quantity, best)]) for name, quantity in self.scenario.quantities().items()
        }
        return values | {name: np.zeros(1) for name in self.left_open}, -1 if best is None else best

    def _central(self, quantity: Quantity, best: int | None) -> float:
        if not isinstance(quantity.distribution, Column):
            return quantity.central
        column = self._column(quantity.distribution)
        if best is not None:
            return float(column[best])
        weights = np.ones(len(column)) if self.samples is None or self.samples.weights is None else self.samples.weights
        return _mean_direction(column, weights) if quantity.dimension is Dimension.ANGLE else median(column, weights)

    def _column(self, column: Column) -> Array:
        assert self.samples is not None  # a scenario with columns and without a file is refused when it is read
        return column.inside(self.samples.columns[column.name])


def source(scenario: Scenario) -> Source:
    """Open the source of a scenario's draws: read and check the sample file, put the bodies in order.

    Parameters
    ----------
    scenario : Scenario

    Returns
    -------
    Source
        To be used again for every stretch of draws.

    Raises
    ------
    SampleFileError
        If the sample file cannot be used.
    """
    samples = _samples(scenario)
    weights = samples.weights if samples else None
    opened = Source(
        scenario=scenario,
        bodies=scenario.body_names,
        samples=samples,
        order=permutation(scenario.draws.seed, ROWS, samples.rows) if samples and weights is None else None,
        cumulative=None if weights is None else np.cumsum(weights),
    )
    return Source(
        scenario=scenario,
        bodies=_by_period(scenario, opened.central_values()[0]),
        samples=samples,
        order=opened.order,
        cumulative=opened.cumulative,
    )


def table_of(scenario: Scenario, body: str) -> Planet:
    """Give the table of a body."""
    if body == COMPANION and scenario.companion is not None:
        return scenario.companion
    return scenario.planets[body]


def prefix_of(scenario: Scenario, body: str) -> str:
    """Give the start of the names of a body's quantities."""
    return COMPANION if body == COMPANION and scenario.companion is not None else f"planets.{body}"


def has_own_plane(scenario: Scenario, body: str) -> bool:
    """Say whether a body comes with an inclination of its own and not with the common plane's."""
    table = table_of(scenario, body)
    return table.inclination is not None or table.impact_parameter is not None


def is_tilted(scenario: Scenario, body: str) -> bool:
    """Say whether a body's orbit is tilted against the common plane by a drawn angle."""
    scattered = scenario.plane is not None and scenario.plane.mutual_scatter is not None
    return scattered and not has_own_plane(scenario, body)


def has_open_node(scenario: Scenario, body: str) -> bool:
    """Say whether a body's node is drawn though it is no quantity of the scenario."""
    isotropic = scenario.plane is not None and scenario.plane.nodes is Nodes.ISOTROPIC
    return isotropic and table_of(scenario, body).node is None and not is_tilted(scenario, body)


def median(values: Array, weights: Array) -> float:
    """Smallest value that has at least half of the weight at or below it, or the middle of two that share it."""
    order = np.argsort(values, kind="stable")
    below = np.cumsum(weights[order])
    half = 0.5 * below[-1]
    low, high = np.searchsorted(below, half, side="left"), np.searchsorted(below, half, side="right")
    return float(0.5 * (values[order[low]] + values[order[min(high, len(values) - 1)]]))


def _samples(scenario: Scenario) -> Samples | None:
    if scenario.samples is None:
        return None
    quantities = scenario.quantities()
    asked = scenario.samples
    roles = Roles(
        values=tuple(dict.fromkeys(q.column for q in quantities.values() if q.column is not None)),
        weight=asked.weight,
        log_weight=asked.log_weight,
        chain=asked.chain,
        log_probability=asked.log_probability,
    )
    path = scenario.folder / asked.file
    samples = read_samples(path, roles)
    for name, quantity in quantities.items():
        check_unit(samples, name, quantity, str(path))
        _check_dates(samples, name, quantity, str(path))
    return samples


def _check_dates(samples: Samples, name: str, quantity: Quantity, where: str) -> None:
    if not isinstance(quantity.distribution, Column) or quantity.dimension is not Dimension.DATE:
        return
    dates = quantity.distribution.inside(samples.columns[quantity.distribution.name])
    low, high = float(np.min(dates)), float(np.max(dates))
    if low < FIRST_DATE or high > LAST_DATE:
        raise SampleFileError(
            f"column {quantity.column!r}, {name} in the scenario, holds dates between {low} and {high}",
            where=where,
            why="whole dates lie between 2 400 000 and 2 600 000 (1858 to 2406); these are reduced",
            do="say in the scenario what the file left off: { column = ..., unit = ..., offset = 2450000 }",
        )


def _open(scenario: Scenario, name: str, uniform: PerDraw) -> PerDraw:
    kind = name.rpartition(".")[2]
    if kind == "side":
        return np.where(uniform < 0.5, 0.0, 1.0)
    if kind == "tilt":
        plane = scenario.plane
        assert plane is not None and plane.mutual_scatter is not None  # that is why there is a tilt
        return plane.mutual_scatter.central * np.sqrt(-2.0 * np.log(uniform))  # Rayleigh; u and 1 - u are alike
    return TWO_PI * uniform


def _by_period(scenario: Scenario, central: Values) -> tuple[str, ...]:
    planets = [body for body in scenario.body_names if prefix_of(scenario, body) != COMPANION]
    periods = {body: _central_period_d(scenario, body, central) for body in planets}
    return (*sorted(planets, key=lambda body: periods[body]), *scenario.body_names[len(planets) :])


def _central_period_d(scenario: Scenario, body: str, central: Values) -> float:
    """Period about the star alone: good enough to put planets in order."""
    prefix, table = prefix_of(scenario, body), table_of(scenario, body)
    if table.period is not None:
        return float(central[f"{prefix}.period"][0])
    gm = GM_SUN_AU3_D2 * central["star.mass"]
    if scenario.elements.frame is Frame.CARTESIAN:
        axis = _central_axis_au(scenario, prefix, gm, central)
    else:
        axis = central[f"{prefix}.semi_major_axis"]
    period = float(period_d_from_semi_major_axis_au(axis, gm)[0])
    return period if np.isfinite(period) else np.inf


def _central_axis_au(scenario: Scenario, prefix: str, gm_au3_d2: PerDraw, central: Values) -> PerDraw:
    r2, v2 = np.zeros(1), np.zeros(1)
    for axis in "xyz":
        for kind in ("position", "velocity"):
            own = central[f"{prefix}.{kind}.{axis}"] - central.get(f"star.{kind}.{axis}", np.zeros(1))
            if kind == "position":
                r2 = r2 + own * own
            else:
                v2 = v2 + own * own
    return np.asarray(1.0 / (2.0 / np.sqrt(r2) - v2 / gm_au3_d2))


def _mean_direction(angle_rad: Array, weights: Array) -> float:
    return float(np.arctan2(np.sum(weights * np.sin(angle_rad)), np.sum(weights * np.cos(angle_rad))) % TWO_PI)


def _demand_stretch(first: int, count: int) -> None:
    if first < 0 or count < 0:
        raise PlanError(
            f"draws {first} to {first + count - 1} were asked for",
            where="ensemble",
            why="draws are numbered from 0",
            do="ask for a stretch that begins at 0 or later",
        )
