"""What the values of a scenario mean together, once each table can be read by itself.

Every check answers with all the problems it finds, so that a file is put right in one go.
"""

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from stabcheck.constants import DEGREE_RAD, GM_SUN_AU3_D2
from stabcheck.quantity import Isotropic, Quantity
from stabcheck.scenario_keys import PHASES, TIMES, Problem, either
from stabcheck.scenario_tables import Elements, Endings, Nodes, Plane, Planet, Samples, Star

WIDE_OMEGA_RAD = 20.0 * DEGREE_RAD
"""Where ω is known worse than this, its errors and those of the time of periastron decide the phase."""
SAMPLE_FILES = (".csv", ".ecsv", ".npz")


@dataclass(frozen=True, slots=True, kw_only=True)
class Content:
    """A scenario whose tables can be read."""

    star: Star
    elements: Elements
    plane: Plane | None
    bodies: Mapping[str, Planet]
    samples: Samples | None
    endings: Endings
    quantities: Mapping[str, Quantity]


def value_problems(content: Content) -> list[Problem]:
    """Find values that contradict each other, in tables that can be read one by one."""
    problems = [
        *_columns(content),
        *_two_periods_from_one_column(content),
        *_independent_tilts(content),
        *_endings(content),
    ]
    for place, body in content.bodies.items():
        problems += [*_time_scale(place, body, content.elements), *_wide_omega(place, body, content.elements)]
        problems += _face_on(place, body, content.plane)
    return [*problems, *_outermost(content)]


def _columns(content: Content) -> Iterator[Problem]:
    columns = [name for name, quantity in content.quantities.items() if quantity.column]
    if columns and content.samples is None:
        place, _, key = columns[0].rpartition(".")
        what = f"{len(columns)} quantities are columns, but there is no sample file"
        yield Problem(place, key, what, "", 'add [samples] with file = "posterior.csv"')
    if content.samples and not columns:
        do = 'write period = { column = "P_b", unit = "d" }, and so on, or take [samples] out'
        yield Problem("samples", "", "no quantity is taken from the sample file", "it would be ignored", do)


def _two_periods_from_one_column(content: Content) -> Iterator[Problem]:
    seen: dict[str, str] = {}
    for place, body in content.bodies.items():
        size = body.period or body.semi_major_axis
        if size and size.column:
            if size.column in seen:
                what = f"column {size.column!r} is the size of two orbits"
                yield Problem(place, "", what, f"{seen[size.column]} has it too", "give each body its own column")
            seen[size.column] = f"[{place}]"


def _independent_tilts(content: Content) -> Iterator[Problem]:
    nodes = content.plane.nodes if content.plane else None
    for place, body in content.bodies.items():
        free = body.inclination is not None and isinstance(body.inclination.distribution, Isotropic)
        if free and body.node is None and nodes is not Nodes.ISOTROPIC:
            why = "an isotropic direction has a node with no preferred direction either"
            do = 'write nodes = "isotropic" in [plane], or node = "uniform(0, 360) deg" here'
            yield Problem(place, "inclination", "isotropic inclination without isotropic node", why, do)


def _endings(content: Content) -> Iterator[Problem]:
    near, far = content.endings.stop_approach, content.endings.stop_distance
    if near is not None and far is not None and near >= far:
        do = "make stop_approach smaller than stop_distance"
        yield Problem(
            "endings", "stop_approach", "stop_approach is not below stop_distance", "each draw would stop at once", do
        )


def _time_scale(place: str, body: Planet, elements: Elements) -> Iterator[Problem]:
    for key in TIMES:
        time: Quantity | None = getattr(body, key)
        if time is not None and elements.epoch is not None and time.unit != elements.epoch.scale:
            what = f"{key} is in {time.unit}, the epoch in {elements.epoch.scale}"
            why = "one scenario has one time scale; UTC and TDB differ by more than a minute"
            yield Problem(
                place,
                key,
                what,
                why,
                f"convert one of them, so that all times are in {elements.epoch.scale} or {time.unit}",
            )


def _wide_omega(place: str, body: Planet, elements: Elements) -> Iterator[Problem]:
    omega, time = body.omega_star or body.omega_planet, body.time_of_periastron
    if omega is None or time is None or elements.independent_omega_and_periastron_time:
        return
    if omega.column or not omega.sigma > WIDE_OMEGA_RAD:
        return
    yield Problem(
        place,
        "time_of_periastron",
        f"ω is known to ±{omega.sigma / DEGREE_RAD:.0f} deg only, and is drawn independently of the time of periastron",
        "what the data fix is their combination, the mean longitude: independent draws lose it",
        f"give {either(('time_of_conjunction', *PHASES[1:3]))} instead; or use samples; or confirm with "
        "independent_omega_and_periastron_time = true in [elements]",
    )


def _face_on(place: str, body: Planet, plane: Plane | None) -> Iterator[Problem]:
    tilt = body.inclination or (plane.inclination if plane else None)
    if body.mass is None and tilt is not None and tilt.is_fixed and math.sin(tilt.central) < 1e-9:
        why = "a face-on orbit shows no velocity: sin i is 0, the mass without bound"
        yield Problem(
            place, "", "m sin i or K with an inclination of 0 or 180 deg", why, "give the true mass, or an inclination"
        )


def _outermost(content: Content) -> Iterator[Problem]:
    companion = content.bodies.get("companion")
    axis = _axis_au(companion, content.star) if companion else math.nan
    for place, body in content.bodies.items():
        if place != "companion" and axis <= _axis_au(body, content.star):  # False where one is a column
            why = "the orbit of a companion goes about everything else"
            do = "check its period or axis; a star in the middle of the planets cannot be followed"
            yield Problem("companion", "", f"the companion is not outside [{place}]", why, do)


def _axis_au(body: Planet, star: Star) -> float:
    if body.semi_major_axis:
        return body.semi_major_axis.central
    if body.period is None:
        return math.nan
    mass_msun = star.mass.central + (body.mass.central if body.mass else 0.0)
    return float((GM_SUN_AU3_D2 * mass_msun * (body.period.central / (2.0 * math.pi)) ** 2) ** (1.0 / 3.0))
