"""Why a draw is not an orbit. Nothing is clipped and nothing drawn again: the number keeps its row, and its reason."""

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from stabcheck.arrays import DrawPlanet, Flags, PerDraw

Reasons = NDArray[np.object_]
"""(draw,) of str, empty for a draw that is an orbit"""

NOT_POSITIVE = {
    "period": "P <= 0",
    "semi_major_axis": "a <= 0",
    "mass": "m <= 0",
    "mass_sin_i": "m sin i <= 0",
    "semi_amplitude": "K <= 0",
    "radius": "radius <= 0",
}


def first_reasons(bodies: Mapping[str, str], values: Mapping[str, PerDraw], count: int) -> Reasons:
    """Find the draws whose very values make no orbit.

    Parameters
    ----------
    bodies : mapping of str to str
        Name of each body and the start of the names of its quantities, in the order of the ensemble.
    values : mapping of str to (draw,) array
        As drawn.
    count : int
        Number of draws.

    Returns
    -------
    (draw,) array of str
        Several reasons are joined by ``"; "`` in a fixed order: not a number, star, plane, bodies one by one.
    """
    return _joined(_faults(bodies, values), count)


def _faults(bodies: Mapping[str, str], values: Mapping[str, PerDraw]) -> Iterable[tuple[str, Flags]]:
    for name, drawn in values.items():
        yield f"not a number ({name.removeprefix('planets.')})", ~np.isfinite(drawn)
    for kind in ("mass", "radius"):
        if f"star.{kind}" in values:
            yield f"star {kind} <= 0", values[f"star.{kind}"] <= 0.0
    if "plane.inclination" in values:
        yield "inclination not between 0 and 180 deg (plane)", _beyond(values["plane.inclination"])
    for body, prefix in bodies.items():
        own = {kind: values[f"{prefix}.{kind}"] for kind in _KINDS if f"{prefix}.{kind}" in values}
        for kind, drawn in own.items():
            for text, flags in _body_faults(kind, drawn):
                yield f"{text} ({body})", flags


_KINDS = ("period", "semi_major_axis", "eccentricity", "mass", "mass_sin_i", "semi_amplitude", "inclination",
          "impact_parameter", "radius")  # fmt: skip


def _body_faults(kind: str, drawn: PerDraw) -> Iterable[tuple[str, Flags]]:
    if kind in NOT_POSITIVE:
        yield NOT_POSITIVE[kind], drawn <= 0.0
    elif kind == "eccentricity":
        yield "e < 0", drawn < 0.0
        yield "e >= 1", drawn >= 1.0
    elif kind == "inclination":
        yield "inclination not between 0 and 180 deg", _beyond(drawn)
    else:
        # Read as its mirror image it would fold the distribution that the scenario states.
        yield "impact parameter < 0", drawn < 0.0


def _beyond(inclination_rad: PerDraw) -> Flags:
    return (inclination_rad < 0.0) | (inclination_rad > np.pi * (1.0 + 1e-15))  # 180 deg may be rounded up


def later_reasons(
    first: Reasons,
    bodies: Sequence[str],
    *,
    mass_given: Sequence[str],
    star_radius_au: PerDraw,
    mass_msun: DrawPlanet,
    inclination_rad: DrawPlanet,
    elements: Mapping[str, DrawPlanet],
) -> Reasons:
    """Find the draws whose values are fine one by one, but do not go together.

    Parameters
    ----------
    first : (draw,) array of str
        What was found before; only draws without a reason are looked at.
    bodies : sequence of str
    mass_given : sequence of str, one a body
        What each mass was worked out from.
    star_radius_au : (draw,) array
        0 where it is not known.
    mass_msun, inclination_rad : (draw, planet) arrays
    elements : mapping of str to (draw, planet) array
        Everything that must be finite, with ``semi_major_axis_au`` and ``eccentricity``.

    Returns
    -------
    (draw,) array of str
        A new array. An impact parameter beyond the star's limb is no reason: such a planet does not transit, but it
        is on an orbit, and how far a transit may graze depends on the planet's own radius.
    """
    fine = np.array([not reason for reason in first], dtype=np.bool_)
    misfits = _misfits(fine, bodies, mass_given, star_radius_au, mass_msun, inclination_rad, elements)
    return np.where(fine, _joined(misfits, len(first)), first)


def _misfits(
    fine: Flags,
    bodies: Sequence[str],
    mass_given: Sequence[str],
    star_radius_au: PerDraw,
    mass_msun: DrawPlanet,
    inclination_rad: DrawPlanet,
    elements: Mapping[str, DrawPlanet],
) -> Iterable[tuple[str, Flags]]:
    # A body without an answer leaves all that depend on it without one, so `fine` shrinks with each cause found.
    for k, body in enumerate(bodies):
        lost = fine & ~np.isfinite(inclination_rad[:, k])
        yield f"no inclination gives this impact parameter ({body})", lost
        fine = fine & ~lost
    for k, body in enumerate(bodies):
        lost = fine & ~np.isfinite(mass_msun[:, k])
        yield f"no mass gives this {_SAID.get(mass_given[k], 'mass')} ({body})", lost
        fine = fine & ~lost
    for k, body in enumerate(bodies):  # only vectors get here with a body that is not bound
        lost = fine & (elements["eccentricity"][:, k] >= 1.0)
        yield f"e >= 1 ({body})", lost
        fine = fine & ~lost
    for k, body in enumerate(bodies):
        for name, values in elements.items():
            lost = fine & ~np.isfinite(values[:, k])
            yield f"not a number ({body}.{name})", lost
            fine = fine & ~lost
    for k, body in enumerate(bodies):
        periastron_au = elements["semi_major_axis_au"][:, k] * (1.0 - elements["eccentricity"][:, k])
        yield f"periastron inside the star ({body})", fine & (periastron_au <= star_radius_au)


_SAID = {"semi_amplitude": "K", "mass_sin_i": "m sin i"}


def _joined(faults: Iterable[tuple[str, Any]], count: int) -> Reasons:
    reasons: list[list[str]] = [[] for _ in range(count)]
    for text, flags in faults:
        for row in np.flatnonzero(flags):
            reasons[row].append(text)
    found = np.empty(count, dtype=object)
    found[:] = ["; ".join(texts) for texts in reasons]
    return found
