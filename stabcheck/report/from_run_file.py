"""From a run file to the table of draws that a report is made from."""

import tomllib
from dataclasses import fields, replace
from typing import Any

import numpy as np

from stabcheck.arrays import AnyArray, Array, DrawPlanet, Integers, PerDraw
from stabcheck.ensemble import Ensemble
from stabcheck.errors import RunFileError
from stabcheck.outcome import Outcome
from stabcheck.quantity import Dimension, parse
from stabcheck.report.table_of_draws import (
    COUNTS,
    PLANETS,
    WORDS,
    OutcomeColumns,
    RunFacts,
    RunTable,
)
from stabcheck.scenario import Frame, Span, SpanKind
from stabcheck.span import span_d
from stabcheck.store import Draws, RunFile

ELEMENTS = (
    "mass_msun",
    "radius_au",
    "period_d",
    "semi_major_axis_au",
    "eccentricity",
    "inclination_rad",
    "node_rad",
    "omega_planet_rad",
    "mean_anomaly_rad",
    "semi_amplitude_m_s",
)
DEPARTURES = 5
"""Orbits whose velocity curve is compared with its Keplerian sum."""


def run_table(run: RunFile, facts: RunFacts | None = None) -> RunTable:
    """Read a run, live or ended, into columns.

    Parameters
    ----------
    run : RunFile
        Open for reading is enough.
    facts : RunFacts, optional
        What to say about the run as a whole; read from the file if not given.

    Returns
    -------
    RunTable

    Raises
    ------
    RunFileError
        If the file lacks the columns of elements.
    """
    draws = run.draws()
    number = draws.number
    ensemble = stored_ensemble(run, draws)
    facts = facts or facts_of(run, ensemble)
    outcomes = run.outcomes(upto=int(number.size))
    return RunTable(
        facts=facts,
        bodies=run.bodies,
        number=number,
        refused=np.asarray(draws.refused, dtype=np.str_),
        done=np.isin(number, outcomes["number"]),
        weight=draws.weight,
        source_row=draws.source_row,
        chain=draws.chain,
        star_mass_msun=ensemble.star_mass_msun,
        secular_cycle_d=_secular_cycle_d(ensemble, bool(facts.plan.get("relativity", False))),
        parameters=ensemble.parameters,
        elements={name: getattr(ensemble, name) for name in ELEMENTS},
        outcome=_spread(outcomes, int(number.size), len(run.bodies)),
    )


def stored_ensemble(run: RunFile, draws: Draws) -> Ensemble:
    """Put the stored columns back into the shape they had when they were drawn; nothing is drawn again."""
    shaped = {name: _per_body(run, draws, name) for name in ELEMENTS}
    return Ensemble(
        first=0,
        bodies=run.bodies,
        frame=Frame(str(tomllib.loads(run.scenario_text)["elements"]["frame"])),
        star_mass_msun=_column(run, draws, "star_mass_msun"),
        star_radius_au=_column(run, draws, "star_radius_au"),
        refused=np.asarray(draws.refused, dtype=object),
        weight=draws.weight,
        source_row=draws.source_row,
        chain=draws.chain,
        position_au=None,
        velocity_au_d=None,
        parameters={c.name: draws.column(c.kind, c.name, c.body) for c in draws.columns if c.kind == "parameter"},
        **shaped,
    )


def facts_of(run: RunFile, ensemble: Ensemble) -> RunFacts:
    """Read what is true of a run as a whole from its scenario and identity."""
    scenario, asked = tomllib.loads(run.scenario_text), _asked(run)
    endings = scenario.get("endings", {})
    bodies = [*scenario.get("planets", {}).values(), *([scenario["companion"]] if "companion" in scenario else [])]
    return RunFacts(
        title=str(scenario.get("title", run.path.stem)),
        asked=asked,
        seed=int(scenario["draws"]["seed"]),
        source="samples" if "samples" in scenario else "table",
        frame=str(scenario["elements"]["frame"]),
        fit=str(scenario["elements"].get("fit", "dynamical")),
        span=str(scenario["integration"]["span"]),
        plan=_of_identity(run, "plan"),
        versions=_of_identity(run, "versions"),
        command=f"stabcheck screen {run.path.stem}.toml --draws {asked}",
        physical_radii=bool(endings.get("mass_radius")) or all("radius" in body for body in bodies),
        mass_radius=str(endings.get("mass_radius", "")) if not all("radius" in body for body in bodies) else "",
        inclinations=_inclinations(scenario),
        star_age_d=_days(scenario.get("star", {}).get("age")),
        keplerian_departure_m_s=_departure_m_s(scenario, ensemble),
    )


def _inclinations(scenario: dict[str, Any]) -> str:
    """Say how inclinations and nodes came about."""
    if scenario["elements"]["frame"] == "cartesian":
        return ""
    plane = scenario.get("plane", {})
    if "inclination" not in plane:
        nodes = f"; nodes: {plane['nodes']}" if "nodes" in plane else ""
        return f"Inclinations and nodes are those given for each planet{nodes}."
    common = plane["inclination"]
    drawn = "isotropic (cos i uniform, 0 to 90 deg)" if common == "isotropic" else _in_words(common)
    scatter = plane.get("mutual_scatter")
    tilt = f"tilted by a Rayleigh law of scale {_in_words(scatter)} about it" if scatter else "exactly coplanar in it"
    return f"One plane common to all orbits has an inclination of {drawn}; the orbits are {tilt}."


def _in_words(value: Any) -> str:
    return f"column {value['column']}" if isinstance(value, dict) else str(value)


def _asked(run: RunFile) -> int:
    """Draws asked for; a run that stopped before its first note has said nothing yet, and what is stored counts."""
    try:
        return int(run.about("draws asked"))
    except RunFileError:
        return run.draw_count()


def _days(text: Any) -> float:
    """Central value of a time; NaN where it is not given, or a column of samples."""
    return float(parse(text, Dimension.TIME).central) if isinstance(text, str) else float("nan")


def _departure_m_s(scenario: dict[str, Any], ensemble: Ensemble) -> float:
    """Largest departure of the velocity curve from the Keplerian sum over the data, of the first few orbits."""
    data_span_d = _days(scenario["elements"].get("data_span"))
    keplerian = scenario["elements"].get("fit") == "keplerian"
    orbits = np.flatnonzero(np.asarray(ensemble.refused == ""))[:DEPARTURES]
    if not keplerian or not np.isfinite(data_span_d) or not orbits.size or len(ensemble.bodies) < 2:
        return float("nan")
    from stabcheck.velocity import departure_m_s

    few = _rows(ensemble, orbits)
    return float(np.max([departure_m_s(few, row, data_span_d).largest_m_s for row in range(orbits.size)]))


def _rows(ensemble: Ensemble, rows: Integers) -> Ensemble:
    values = {f.name: getattr(ensemble, f.name) for f in fields(ensemble)}
    taken: dict[str, Any] = {name: value[rows] for name, value in values.items() if isinstance(value, np.ndarray)}
    return replace(ensemble, **taken, parameters={})


def _secular_cycle_d(ensemble: Ensemble, relativity: bool) -> PerDraw:
    if not len(ensemble.refused):
        return np.zeros(0)
    return span_d(Span(1.0, SpanKind.SECULAR_CYCLES), ensemble, relativity=relativity)


def _of_identity(run: RunFile, item: str) -> dict[str, Any]:
    found = run.identity.get(item)
    if not isinstance(found, dict):
        raise RunFileError(
            f"the identity of the run has no {item}",
            where=str(run.path),
            why="without it the methods text cannot say what ran",
            do="report on it with the version that wrote it",
        )
    return found


def _column(run: RunFile, draws: Draws, name: str, body: str = "") -> Array:
    try:
        return draws.column("element", name, body)
    except KeyError as problem:
        raise RunFileError(
            f"the run file has no {name} {body}".strip(), where=str(run.path), why="its draws are not whole"
        ) from problem


def _per_body(run: RunFile, draws: Draws, name: str) -> DrawPlanet:
    return np.stack([_column(run, draws, name, body) for body in run.bodies], axis=1)


def _spread(outcomes: dict[str, AnyArray], draws: int, planets: int) -> OutcomeColumns:
    """Put the columns of finished draws into the rows of their numbers."""
    rows = outcomes["number"]
    if not rows.size:
        return OutcomeColumns.of([], draws, planets)
    columns: dict[str, Any] = {
        name: _placed(name, outcomes[name], rows, draws, planets)
        for name in Outcome.__dataclass_fields__
        if name not in ("number", "bodies", "history")
    }
    bodies = np.array(["+".join(map(str, those)) for those in outcomes["bodies"]], dtype=np.str_)
    return OutcomeColumns(**columns, ending_bodies=_placed("ending", bodies, rows, draws, planets))


def _placed(name: str, values: AnyArray, rows: AnyArray, draws: int, planets: int) -> AnyArray:
    if name in PLANETS:
        spread: AnyArray = np.full((draws, planets), np.nan)
        if values.shape[1]:
            spread[rows] = values
        return spread
    shape = (draws, *values.shape[1:])
    whole = name in WORDS or name in COUNTS or name in ("rearranged", "closest_pair")
    spread = np.zeros(shape, dtype=values.dtype) if whole else np.full(shape, np.nan)
    spread[rows] = values
    return spread
