"""The folder of a followed draw: series, encounter, outcome, initial state, text, figures."""

import csv
import io
import json
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from stabcheck.arrays import Array
from stabcheck.constants import DEGREE_RAD, GM_SUN_AU3_D2
from stabcheck.follow.followed import Followed, angles_of
from stabcheck.report.follow_figures import write_follow_figures
from stabcheck.series import Encounter, Series
from stabcheck.store.identity import plain

Column = tuple[str, Array]

REBUILD = (
    "import json, pathlib, rebound",
    "saved = json.loads(pathlib.Path('initial_state.json').read_text(encoding='utf-8'))",
    "sim = rebound.Simulation()",
    "sim.G = saved['G_au3_d2_msun']",
    "for body in saved['bodies']:",
    "    x, y, z, vx, vy, vz = body['position_au'] + body['velocity_au_d']",
    "    sim.add(m=body['mass_msun'], r=body['radius_au'], x=x, y=y, z=z, vx=vx, vy=vy, vz=vz)",
    "sim.integrator = saved['stages'][0]['method']",
    "if saved['stages'][0]['step_d'] is not None:",
    "    sim.dt = saved['stages'][0]['step_d']",
)
"""How to rebuild the first stage in REBOUND; it stands in the saved state."""


def write_files(followed: Followed, folder: Path) -> Iterator[Path]:
    """Write everything into a folder, made if missing; give the files."""
    folder.mkdir(parents=True, exist_ok=True)
    texts = {
        "summary.txt": followed.as_text() + "\n",
        "outcome.json": _json(followed.as_dict()),
        "initial_state.json": _json(initial_state(followed)),
        "series.csv": _csv(series_columns(followed.series)),
    }
    if followed.encounter is not None:
        texts["encounter.csv"] = _csv(encounter_columns(followed.encounter, followed.series.bodies))
    for name, text in texts.items():
        (folder / name).write_text(text, encoding="utf-8")
        yield folder / name
    yield from write_follow_figures(followed.series, followed.encounter, folder)


def series_columns(series: Series) -> list[Column]:
    """Name the columns of the time series, with units; angles in degrees within [0, 360)."""
    one, longitude = series.elements, series.mean_longitude_rad
    columns: list[Column] = [("t [d]", series.time_d)]
    for k, body in enumerate(series.bodies):
        columns += [
            (f"a {body} [au]", one.semi_major_axis_au[:, k]),
            (f"e {body}", one.eccentricity[:, k]),
            (f"i {body} [deg]", one.inclination_rad[:, k] / DEGREE_RAD),
            (f"node {body} [deg]", one.node_rad[:, k] / DEGREE_RAD),
            (f"omega_planet {body} [deg]", one.omega_planet_rad[:, k] / DEGREE_RAD),
            (f"mean longitude {body} [deg]", longitude[:, k] / DEGREE_RAD),
        ]
    for pair in series.pairs:
        columns += [(f"{text} [deg]", values / DEGREE_RAD) for text, values in angles_of(pair, series.bodies)]
        inner, outer = series.bodies[pair.inner], series.bodies[pair.outer]
        columns.append((f"distance {inner}-{outer} [mutual Hill radii]", pair.distance_hill))
    return columns


def encounter_columns(encounter: Encounter, bodies: Sequence[str]) -> list[Column]:
    """Name the columns of an encounter, with units."""
    first, second = (("star", *bodies)[body] for body in (encounter.first, encounter.second))
    columns = [("t [d]", encounter.time_d), (f"distance {first}-{second} [au]", encounter.distance_au)]
    if encounter.first:
        columns.append((f"distance {first}-{second} [mutual Hill radii]", encounter.distance_hill))
    return columns


def initial_state(followed: Followed) -> dict[str, Any]:
    """Everything that is needed to begin this draw elsewhere, exactly: doubles in their shortest form."""
    task = followed.task
    names = ("star", *followed.series.bodies)
    about = (
        "Barycentric state at the epoch, and at each time from which another method went on. The series was made by "
        "these stages; IAS15 was begun afresh every 2048 steps, so a run that is not will depart from it in time as "
        "chaos does."
    )
    return {
        "about": f"{followed.name} of: {followed.title}. {about}",
        "units": "au, day, solar mass",
        "G_au3_d2_msun": GM_SUN_AU3_D2,
        "bodies": [
            {
                "name": name,
                "mass_msun": float(task.mass_msun[k]),
                "radius_au": float(task.radius_au[k]),
                "position_au": task.position_au[k].tolist(),
                "velocity_au_d": task.velocity_au_d[k].tolist(),
            }
            for k, name in enumerate(names)
        ],
        "span_d": task.span_d,
        "followed_until_d": followed.outcome.time_d,
        "relativity": _relativity(followed) if followed.plan.relativity else None,
        "stages": [
            {
                "from_d": one.time_d,
                "method": one.method,
                "step_d": None if np.isnan(one.step_d) else one.step_d,
                "position_au": one.state[:, :3].tolist(),
                "velocity_au_d": one.state[:, 3:].tolist(),
            }
            for one in followed.stages
        ],
        "rebuild": list(REBUILD),
    }


def _relativity(followed: Followed) -> dict[str, Any]:
    from stabcheck.engines.rebound.relativity import STRENGTH

    return {
        "acceleration": "of each planet: -A d / |d|^4, with d from the star; of the star: minus the planet's mass over "
        "its own times that. The lines in rebuild leave it out",
        "A_au4_d2": STRENGTH * float(followed.task.mass_msun[0]) ** 2,
    }


def _json(value: dict[str, Any]) -> str:
    return json.dumps(plain(value), indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def _csv(columns: Sequence[Column]) -> str:
    """CSV (RFC 4180, line ends as on Unix); shortest digits that give the same double back, nothing where NaN."""
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow([name for name, _ in columns])
    cells = [["" if value != value else repr(value) for value in values.tolist()] for _, values in columns]
    writer.writerows(zip(*cells, strict=True))
    return text.getvalue()
