"""What every number, table and figure of a report is made from: columns over the draws 0 .. n-1, in memory."""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, fields, is_dataclass, replace
from typing import Any

import numpy as np

from stabcheck.arrays import Array, DrawPlanet, Flags, Integers, PerDraw
from stabcheck.outcome import Outcome
from stabcheck.verdict import Words, verdicts

NOT_SETTLED = ""
"""The verdict of a draw that is refused or not finished."""


@dataclass(frozen=True, slots=True, kw_only=True)
class RunFacts:
    """What is true of a run as a whole.

    Parameters
    ----------
    asked : int
        Draws asked for in total.
    source : str
        ``"table"`` (values with independent errors) or ``"samples"`` (rows of a posterior sample).
    frame, fit, span : str
        As the scenario states them; ``span`` in its words.
    star_age_d, keplerian_departure_m_s : float
        NaN where not given or not computed; the departure is the largest of the first few orbits.
    plan : dict
        ``Plan.identity()`` of the run.
    versions : dict of str to str
        Versions of what changes numbers.
    command : str
        The command that repeats the run.
    physical_radii : bool
        Whether every planet has a radius.
    mass_radius : str
        Name of the mass-radius relation in use, empty for none.
    inclinations : str
        How inclinations and nodes came about, as a sentence; empty where the states were given.
    """

    title: str
    asked: int
    seed: int
    source: str
    frame: str
    fit: str
    span: str
    plan: Mapping[str, Any]
    versions: Mapping[str, str]
    command: str
    physical_radii: bool = False
    mass_radius: str = ""
    inclinations: str = ""
    star_age_d: float = np.nan
    keplerian_departure_m_s: float = np.nan
    engine: str = "rebound"


@dataclass(frozen=True, slots=True, kw_only=True)
class OutcomeColumns:
    """The fields of ``stabcheck.outcome.Outcome`` as columns; empty word, NaN or 0 where a draw has no outcome."""

    survival: Words
    ending: Words
    trust: Words
    motion: Words
    rearranged: Flags
    time_d: PerDraw
    span_d: PerDraw
    method: Words
    step_d: PerDraw
    energy_error: PerDraw
    orbit_energy_error: PerDraw
    closest_hill: PerDraw
    closest_au: PerDraw
    closest_pair: Integers
    closest_time_d: PerDraw
    departure_time_d: PerDraw
    a_least_au: DrawPlanet
    a_most_au: DrawPlanet
    e_most: DrawPlanet
    e_least: DrawPlanet
    fewest_steps_per_periastron: PerDraw
    megno: PerDraw
    megno_time_d: PerDraw
    megno_wander: PerDraw
    lyapunov_time_d: PerDraw
    drift: DrawPlanet
    restarts: Integers
    handovers: Integers
    returns: Integers
    handover_time_d: PerDraw
    handover_why: Words
    map_steps: Integers
    adaptive_steps: Integers
    ending_bodies: Words
    """Indices of the bodies of the ending, joined by ``+``."""

    @classmethod
    def of(cls, outcomes: Iterable[Outcome], draws: int, planets: int) -> "OutcomeColumns":
        """Put outcomes, in any order, into the rows of their numbers."""
        found = {outcome.number: outcome for outcome in outcomes if outcome.number < draws}
        columns = {f.name: _column(f.name, found, draws, planets) for f in fields(cls) if f.name != "ending_bodies"}
        bodies = ["+".join(map(str, found[row].bodies)) if row in found else "" for row in range(draws)]
        return cls(**columns, ending_bodies=np.array(bodies, dtype=np.str_))


@dataclass(frozen=True, slots=True, kw_only=True)
class RunTable:
    """Columns over consecutive draws from number 0.

    Parameters
    ----------
    facts : RunFacts
    bodies : tuple of str
        Planets in the order of the second axis, without the star; a bound star is called ``companion``.
    number, source_row, chain : (draw,) array of int
        -1 where there is no row or chain.
    refused : (draw,) array of str
        Empty, or why the draw is not an orbit.
    done : (draw,) array of bool
        Whether the draw has an outcome.
    weight, star_mass_msun : (draw,) array
    secular_cycle_d : (draw,) array
        Period of the slowest secular mode; NaN where there is none or it was not computed.
    parameters : dict of str to (draw,) array
        What was drawn, in internal units, under the scenario's names.
    elements : dict of str to (draw, planet) array
        Elements and masses at the epoch, in internal units, under the names of ``Ensemble``'s fields.
    outcome : OutcomeColumns
    """

    facts: RunFacts
    bodies: tuple[str, ...]
    number: Integers
    refused: Words
    done: Flags
    weight: PerDraw
    source_row: Integers
    chain: Integers
    star_mass_msun: PerDraw
    secular_cycle_d: PerDraw
    parameters: Mapping[str, PerDraw] = field(default_factory=dict)
    elements: Mapping[str, DrawPlanet] = field(default_factory=dict)
    outcome: OutcomeColumns

    def __len__(self) -> int:
        return int(self.number.size)

    @property
    def is_orbit(self) -> Flags:
        """(draw,) whether the draw is an orbit at all."""
        return np.asarray(self.refused == "")

    @property
    def verdict(self) -> Words:
        """(draw,) verdicts; empty where a draw is refused or not finished."""
        words = np.full(len(self), NOT_SETTLED, dtype="<U10")
        settled = self.done & self.is_orbit
        axes = self.outcome
        words[settled] = verdicts(
            axes.survival[settled], axes.rearranged[settled], axes.motion[settled], axes.trust[settled]
        )
        return words

    def take(self, rows: Any) -> "RunTable":
        """Keep some rows (a mask, a slice or indices of the first axis) of every column."""
        return replace(self, **_taken(self, rows), outcome=replace(self.outcome, **_taken(self.outcome, rows)))

    def prefix_length(self) -> int:
        """Count the draws before the first one that is neither finished nor refused."""
        open_rows = np.flatnonzero(~(self.done | ~self.is_orbit))
        return int(open_rows[0]) if open_rows.size else len(self)

    def prefix(self) -> "RunTable":
        """Keep the longest run of draws from number 0 on of which none is open.

        Draws that break finish first, so the draws finished so far are not a fair sample of all; the first ones are.
        """
        return self.take(slice(0, self.prefix_length()))

    def orbits(self) -> "RunTable":
        """Leave out what is not an orbit (it is counted elsewhere)."""
        return self.take(self.is_orbit)


def _taken(columns: Any, rows: Any) -> dict[str, Any]:
    found = {f.name: getattr(columns, f.name) for f in fields(columns)}
    return {
        name: {key: column[rows] for key, column in value.items()} if isinstance(value, Mapping) else value[rows]
        for name, value in found.items()
        if isinstance(value, Mapping | np.ndarray) and not is_dataclass(value)
    }


WORDS = ("survival", "ending", "trust", "motion", "method", "handover_why")
COUNTS = ("restarts", "handovers", "returns", "map_steps", "adaptive_steps")
PLANETS = ("a_least_au", "a_most_au", "e_most", "e_least", "drift")


def _column(name: str, found: Mapping[int, Outcome], draws: int, planets: int) -> Any:
    if name in WORDS:
        return np.array([str(getattr(found[row], name)) if row in found else "" for row in range(draws)], dtype=np.str_)
    if name == "rearranged":
        return np.array([row in found and found[row].rearranged for row in range(draws)], dtype=np.bool_)
    if name == "closest_pair":
        return np.array([found[row].closest_pair if row in found else (0, 0) for row in range(draws)]).reshape(draws, 2)
    if name in COUNTS:
        return np.array([getattr(found[row], name) if row in found else 0 for row in range(draws)], dtype=np.int64)
    if name in PLANETS:
        return _per_planet(name, found, draws, planets)
    return np.array([getattr(found[row], name) if row in found else np.nan for row in range(draws)], dtype=np.float64)


def _per_planet(name: str, found: Mapping[int, Outcome], draws: int, planets: int) -> Array:
    values = np.full((draws, planets), np.nan)
    for row, outcome in found.items():
        measured = np.asarray(getattr(outcome, name), dtype=np.float64)
        if measured.size:  # an empty array is the outcome's way to say "not measured"
            values[row] = measured
    return values
