"""Which keys a scenario has: those that are unknown, missing, twice there in other words, or in the wrong table.

This looks at the file as TOML gives it, before any value is read; what values mean together is in `scenario_checks`.
Every check answers with all the problems it finds, so that a file is put right in one go.
"""

import difflib
import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from stabcheck.constants import TWO_PI
from stabcheck.errors import QuantityError
from stabcheck.quantity import Dimension, Fixed, Uniform, from_toml
from stabcheck.scenario_tables import (
    Draws,
    Elements,
    Endings,
    Integration,
    Physics,
    Plane,
    Planet,
    Rearranged,
    Samples,
    Star,
    Table,
)

SIZES = ("period", "semi_major_axis")
OMEGAS = ("omega_star", "omega_planet")
PHASES = ("mean_anomaly", "mean_longitude_star", "mean_longitude_planet", "time_of_conjunction", "time_of_periastron")
TIMES = ("time_of_conjunction", "time_of_periastron")
MASSES = ("mass", "mass_sin_i", "semi_amplitude")
TILTS = ("inclination", "impact_parameter")
STATE = ("position", "velocity")
ORBIT = (*SIZES, "eccentricity", *OMEGAS, *PHASES, *TILTS, "node", "mass_sin_i", "semi_amplitude")

TABLES: Mapping[str, type[Table]] = {
    **{"star": Star, "elements": Elements, "plane": Plane, "companion": Planet, "samples": Samples, "draws": Draws},
    **{"physics": Physics, "integration": Integration, "endings": Endings, "rearranged": Rearranged},
}
REQUIRED_TABLES = {
    "star": "the star, with its mass",
    "elements": "what the elements refer to: frame, fit, epoch",
    "planets": "a table [planets.NAME] for each planet",
    "draws": "the seed of the random numbers",
    "integration": "how long to follow, span",
}

_ROUND = "mean_longitude_star, mean_longitude_planet or time_of_conjunction"
"""The phases that mean something whatever ω is."""
_WHOSE = "every ω says whose it is: the star's (velocity papers) and the planet's differ by 180°"
_MEANT: Mapping[str, tuple[str, ...]] = {
    **dict.fromkeys(("omega", "w", "ω", "argument_of_periastron", "pericenter", "omega_deg"), OMEGAS),
    **dict.fromkeys(("mean_longitude", "longitude", "lambda", "λ"), ("mean_longitude_star", "mean_longitude_planet")),
    **dict.fromkeys(("phase", "M", "M0"), ("mean_anomaly",)),
    **dict.fromkeys(
        ("T0", "t0", "Tc", "tc", "T_conj", "t_conj", "transit_time", "time_of_transit"), ("time_of_conjunction",)
    ),
    **dict.fromkeys(("Tp", "tp", "T_peri", "t_peri", "time_of_pericenter"), ("time_of_periastron",)),
    **dict.fromkeys(("e", "ecc"), ("eccentricity",)),
    **dict.fromkeys(("P", "per"), ("period",)),
    **dict.fromkeys(("a", "sma", "axis"), ("semi_major_axis",)),
    **dict.fromkeys(("m", "true_mass"), ("mass",)),
    **dict.fromkeys(("msini", "m_sin_i", "minimum_mass"), ("mass_sin_i",)),
    **dict.fromkeys(("K", "k"), ("semi_amplitude",)),
    **dict.fromkeys(("i", "inc", "incl"), ("inclination",)),
    **dict.fromkeys(("b", "impact"), ("impact_parameter",)),
    **dict.fromkeys(("Omega", "Ω", "ascending_node"), ("node",)),
    **dict.fromkeys(("R", "r"), ("radius",)),
}
"""What people write elsewhere, and the keys that would do here."""


@dataclass(frozen=True, slots=True)
class Problem:
    """One thing that is wrong in a scenario; ``place`` is the table, ``key`` empty if it is about the whole table."""

    place: str
    key: str
    what: str
    why: str
    do: str


@dataclass(slots=True)
class _Keys:
    """The keys of one table, with the problems found in it and what its unknown keys were probably meant to be."""

    place: str
    table: Mapping[str, Any]
    problems: list[Problem] = field(default_factory=list)
    meant: set[str] = field(default_factory=set)

    def say(self, what: str, why: str, do: str, key: str = "") -> None:
        self.problems.append(Problem(self.place, key, what, why, do))

    def given(self, keys: Sequence[str]) -> list[str]:
        return [key for key in keys if key in self.table]

    def exactly_one(self, keys: Sequence[str], name: str, why: str) -> None:
        given = self.given(keys)
        if len(given) > 1:
            self.say(
                f"{name} is given twice: {every(given)}",
                "they may disagree, and none is preferred",
                f"keep one of {every(given)}",
            )
        if not given and not self.meant.intersection(keys):
            self.say(f"{name} is missing", why, f"give {either(keys)}")

    def none_of(self, keys: Sequence[str], why: str, do: str) -> None:
        for key in self.given(keys):
            self.say(f"{key} does not belong here", why, do, key)


# ---------------------------------------------------------------------------------------------------------------------
# Which keys are there


def key_problems(content: Mapping[str, Any]) -> list[Problem]:
    """Find keys that are unknown, missing, or exclude each other.

    Parameters
    ----------
    content : mapping
        The file as TOML gives it.

    Returns
    -------
    list of Problem
        Empty if there is none.
    """
    bodies, shape_problems = _bodies(content)
    tables = {name: content[name] for name in TABLES if isinstance(content.get(name), Mapping)}
    problems = [*_top_level(content), *shape_problems]
    for name, table in tables.items():
        if name not in ("companion", "elements"):
            problems += _single_table(name, table)
    cartesian = _is_cartesian(tables.get("elements", {}), bodies)
    problems += _elements(tables.get("elements"), bodies, cartesian)
    for place, body in bodies.items():
        problems += _body(place, body, tables, cartesian)
    if not cartesian:
        problems += _nodes(bodies, tables.get("plane", {}))
    return problems


def _top_level(content: Mapping[str, Any]) -> Iterator[Problem]:
    known = ["title", "notes", "planets", *TABLES]
    for key in content:
        if key not in known:
            yield _unknown("", key, known)
    for name, holds in REQUIRED_TABLES.items():
        if name not in content:
            shown = "planets.b" if name == "planets" else name
            yield Problem(
                "",
                "",
                f"the table [{shown}] is missing",
                f"it holds {holds}; nothing of it has a default",
                f"add [{shown}]",
            )
    for name in (*TABLES, "planets"):
        if name in content and not isinstance(content[name], Mapping):
            shown = "planets.b" if name == "planets" else name
            yield Problem(
                "", name, f"{name} is not a table", "", f"write [{shown}] on a line of its own, its keys below"
            )


def _bodies(content: Mapping[str, Any]) -> tuple[dict[str, Mapping[str, Any]], list[Problem]]:
    """Tables of planets and companion by the place they stand in."""
    planets = content.get("planets")
    bodies: dict[str, Mapping[str, Any]] = {}
    problems = []
    if isinstance(planets, Mapping):
        if not planets:
            problems.append(Problem("planets", "", "there is no planet", "", "add a table [planets.b]"))
        for name, table in planets.items():
            problems += _planet_name(name)
            if isinstance(table, Mapping):
                bodies[f"planets.{name}"] = table
            else:
                do = "write [planets.b] on a line of its own, the keys of planet b below"
                problems.append(
                    Problem("planets", name, f"planets.{name} is not a table", "each planet has its own", do)
                )
    if isinstance(content.get("companion"), Mapping):
        bodies["companion"] = content["companion"]
    return bodies, problems


def _planet_name(name: str) -> Iterator[Problem]:
    if not re.fullmatch(r"[\w+' -]{1,32}", name) or name != name.strip():
        do = "use letters, digits, _, - and +, 32 at most"
        yield Problem(
            "planets", name[:40], f"{name[:40]!r} is not a name for a planet", "names go into tables and files", do
        )
    if name in ("star", "companion"):
        yield Problem(
            "planets",
            name,
            f"a planet is called {name!r}",
            f"that is the word for the {name} itself",
            "choose another name",
        )


def _single_table(place: str, table: Mapping[str, Any]) -> list[Problem]:
    keys = _Keys(place, table)
    _refuse_unknown(keys, TABLES[place])
    for key, entry in TABLES[place].model_fields.items():
        if entry.is_required() and key not in table and key not in keys.meant:
            keys.say(f"{key} is missing", "it has no default", f"add {key} to [{place}]", key)
    if place == "plane":
        _plane(keys)
    if place == "samples" and len(keys.given(("weight", "log_weight"))) == 2:
        keys.say("weights are given twice: weight and log_weight", "they may disagree", "keep one of them", "weight")
    if place == "star" and ("position" in table) != ("velocity" in table):
        keys.say("the star has only one of position and velocity", "a state needs both", "give both or none")
    return keys.problems


def _plane(keys: _Keys) -> None:
    if not keys.table:
        keys.say("the table is empty", "", "give inclination, nodes, or leave the table out")
    if "mutual_scatter" in keys.table and "inclination" not in keys.table:
        why = "planets with inclinations of their own are not scattered about a common plane"
        keys.say(
            "mutual_scatter without inclination", why, "give the inclination of the common plane too", "mutual_scatter"
        )
    if "inclination" in keys.table and keys.table.get("nodes", "equal") != "equal":
        why = "planets in one plane share its node; others would tilt them to each other by up to twice the inclination"
        keys.say(
            "a common plane and nodes that are not equal",
            why,
            "leave nodes out; for tilted orbits use mutual_scatter",
            "nodes",
        )


def _is_cartesian(elements: Mapping[str, Any], bodies: Mapping[str, Mapping[str, Any]]) -> bool:
    if "frame" in elements:
        return bool(elements["frame"] == "cartesian")
    return any("position" in body for body in bodies.values())


def _elements(
    table: Mapping[str, Any] | None, bodies: Mapping[str, Mapping[str, Any]], cartesian: bool
) -> list[Problem]:
    if table is None:
        return []
    keys = _Keys("elements", table)
    _refuse_unknown(keys, Elements)
    if "frame" not in {*table, *keys.meant}:
        keys.say(
            "frame is missing",
            "a period or axis about the star and one about the centre of mass of all inside differ by up to 0.8 % "
            "behind a Jupiter at 2:1: enough to leave a resonance",
            'give frame = "jacobi" (nearest to what a sum of velocity curves fits), "astrocentric" (about the star) or '
            '"cartesian" (positions and velocities)',
            "frame",
        )
    if cartesian:
        keys.none_of(
            ("data_span", "independent_omega_and_periastron_time"), "states are given, not elements", "leave it out"
        )
        if table.get("fit", "dynamical") == "keplerian":
            why = "positions and velocities are those of one instant: osculating by nature"
            keys.say("fit is keplerian, but states are given", why, 'leave fit out or write "dynamical"', "fit")
        return keys.problems
    if "fit" not in {*table, *keys.meant}:
        keys.say(
            "fit is missing",
            "elements of a sum of undisturbed orbits are means, those of an N-body fit osculate at the epoch",
            'give fit = "keplerian" or "dynamical"',
            "fit",
        )
    if "epoch" not in {*table, *keys.meant} and any(key in body for body in bodies.values() for key in TIMES):
        keys.say(
            "epoch is missing",
            "phases are given as times, and every planet is brought to one instant",
            'give epoch = "2459000.0 BJD_TDB" (or BJD_UTC, BJD), best near the middle of the data',
            "epoch",
        )
    return keys.problems


def _body(
    place: str, table: Mapping[str, Any], tables: Mapping[str, Mapping[str, Any]], cartesian: bool
) -> list[Problem]:
    keys = _Keys(place, table)
    _refuse_unknown(keys, Planet)
    if place == "companion":
        keys.none_of(
            ("mass_sin_i", "semi_amplitude"),
            "the mass of a companion star is not small: m sin i and K of a fit "
            "that took it for a planet are not usable",
            'give its true mass, mass = "0.2 Msun"',
        )
    if cartesian:
        _body_state(keys)
    else:
        _body_orbit(keys, tables)
    return keys.problems


def _body_state(keys: _Keys) -> None:
    keys.none_of(
        ORBIT, 'the frame is "cartesian": position and velocity say all', "leave it out, or choose another frame"
    )
    for key in (*STATE, "mass"):
        if key not in keys.table:
            keys.say(f"{key} is missing", 'the frame is "cartesian"', f"give {every((*STATE, 'mass'))}", key)


def _body_orbit(keys: _Keys, tables: Mapping[str, Mapping[str, Any]]) -> None:
    keys.none_of(STATE, "the frame is one of elements", 'leave it out, or write frame = "cartesian"')
    companion = keys.place == "companion"
    keys.exactly_one(
        SIZES, "the size of the orbit", "period and axis give each other through the masses inside the orbit"
    )
    keys.exactly_one(PHASES, "the phase", "where a planet is at the epoch decides what it meets; it has no default")
    masses = ("mass",) if companion else MASSES
    if not (companion and keys.given(MASSES)):
        keys.exactly_one(masses, "the mass", "true mass, m sin i and K are different things and are not guessed")
    if "eccentricity" not in keys.table and "eccentricity" not in keys.meant:
        do = 'give eccentricity = "0.03 +0.02 -0.01", "< 0.1 (95 %)" or, for a circular orbit, 0'
        keys.say("eccentricity is missing", "survival depends on it more than on anything else", do, "eccentricity")
    _omega(keys)
    _tilt(keys, tables, companion)


def _omega(keys: _Keys) -> None:
    given = keys.given(OMEGAS)
    if len(given) == 2:
        keys.say("ω is given twice: omega_star and omega_planet", _WHOSE, "keep one of them")
    if given or keys.meant.intersection(OMEGAS) or "eccentricity" not in keys.table:
        return
    circular = _is_zero(keys.table["eccentricity"])
    if circular is False:
        keys.say("ω is missing", f"the eccentricity is not fixed at 0; {_WHOSE}", f"give {either(OMEGAS)}")
    from_periastron = keys.given(("mean_anomaly", "time_of_periastron"))
    if circular and from_periastron and not _is_full_turn(keys.table[from_periastron[0]]):
        why = "a circular orbit has no periastron to count from"
        do = f"give {_ROUND} instead, or the ω that the source counted from, {either(OMEGAS)}"
        keys.say(f"{from_periastron[0]} of a circular orbit without ω", why, do, from_periastron[0])


def _is_zero(value: object) -> bool | None:
    """Say whether an eccentricity is fixed at 0; None if it cannot be read (which is reported elsewhere)."""
    try:
        return from_toml(value, Dimension.NUMBER).distribution == Fixed(0.0)
    except QuantityError:
        return None


def _is_full_turn(value: object) -> bool:
    """Say whether a phase is unknown altogether: then it does not matter what it is counted from."""
    try:
        phase = from_toml(value, Dimension.ANGLE).distribution
    except QuantityError:
        return False
    return isinstance(phase, Uniform) and phase.high - phase.low > TWO_PI * (1.0 - 1e-9)


def _tilt(keys: _Keys, tables: Mapping[str, Mapping[str, Any]], companion: bool) -> None:
    plane = tables.get("plane", {})
    given = keys.given(TILTS)
    if "inclination" in plane and not companion:
        keys.none_of(
            (*TILTS, "node"),
            "[plane] has an inclination: all planets lie in that plane",
            "leave it out here, or take inclination out of [plane] and give every planet its own",
        )
        return
    if not given and "inclination" in plane:
        keys.none_of(
            ("node",), "without an inclination of its own the companion lies in the common plane", "give both or none"
        )
        return
    if len(given) == 2:
        keys.say(
            "the inclination is given twice: inclination and impact_parameter", "they may disagree", "keep one of them"
        )
    if not given and not keys.meant.intersection(TILTS):
        why = "K and m sin i become masses through it, and mutual inclinations decide survival"
        do = 'give inclination or impact_parameter here, or [plane] with inclination = "isotropic" or "88 ± 1 deg"'
        keys.say("the inclination is missing", why, do)
    if "impact_parameter" in given and "radius" not in tables.get("star", {}):
        why = "it is counted in radii of the star"
        keys.say("impact_parameter without a radius of the star", why, "add radius to [star]", "impact_parameter")


def _nodes(bodies: Mapping[str, Mapping[str, Any]], plane: Mapping[str, Any]) -> Iterator[Problem]:
    """Nodes are needed where more than one body has an inclination of its own."""
    tilted = {place: body for place, body in bodies.items() if any(key in body for key in TILTS)}
    do = 'give node to each, or nodes = "equal" (small mutual inclinations) or "isotropic" in [plane]'
    if "inclination" in plane:
        if "companion" in tilted and "node" not in bodies["companion"]:
            why = "its inclination alone does not say how it lies to the common plane, whose node is 0"
            yield Problem(
                "companion", "node", "node is missing", why, 'give node = "uniform(0, 360) deg", or what is known'
            )
        return
    for place, body in tilted.items():
        if "nodes" in plane and "node" in body:
            yield Problem(
                place, "node", "node is given here and for all in [plane]", "they may disagree", "keep one of them"
            )
        if "nodes" not in plane and "node" not in body and len(bodies) > 1:
            why = "the mutual inclination is undetermined without the nodes; tables hardly ever give them"
            yield Problem(place, "node", "node is missing", why, do)


# ---------------------------------------------------------------------------------------------------------------------
# Unknown keys


def _refuse_unknown(keys: _Keys, model: type[Table]) -> None:
    for key in keys.table:
        if key in model.model_fields:
            continue
        known = list(model.model_fields)
        meant = _MEANT.get(key, ()) if model is Planet else ()
        if meant:
            whose = _WHOSE if "omega_star" in meant or "mean_longitude_star" in meant else ""
            keys.say(f"unknown key {key!r}", whose, f"write {either(meant)}", key)
        else:
            keys.problems.append(_unknown(keys.place, key, known))
        keys.meant.update(meant or difflib.get_close_matches(key, known, n=1))


def _unknown(place: str, key: str, known: Sequence[str]) -> Problem:
    homes = [f"[{name}]" for name, model in TABLES.items() if key in model.model_fields and name != place]
    homes = ["[planets.NAME]" if home == "[companion]" else home for home in homes]
    near = difflib.get_close_matches(key, known, n=1)
    shown = key if len(key) <= 40 else key[:37] + "..."
    if homes:
        return Problem(place, shown, f"unknown key {shown!r}", "", f"it belongs in {either(homes)}")
    do = f"write {near[0]}" if near else f"leave it out; the keys here are {', '.join(known)}"
    return Problem(place, shown, f"unknown key {shown!r}", "", do)


def either(words: Sequence[str]) -> str:
    """Join words: a, b or c."""
    return _joined(words, " or ")


def every(words: Sequence[str]) -> str:
    """Join words: a, b and c."""
    return _joined(words, " and ")


def _joined(words: Sequence[str], last: str) -> str:
    return last.join(part for part in (", ".join(words[:-1]), words[-1]) if part)
