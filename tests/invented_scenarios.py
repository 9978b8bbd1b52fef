"""Invented scenarios as texts, and what tests of ensembles do with them."""

import dataclasses
from pathlib import Path

import numpy as np

from stabcheck.build import states
from stabcheck.ensemble import Ensemble, draw
from stabcheck.scenario import Scenario

HEAD = """
[star]
mass = "0.9 ± 0.05 Msun"
radius = "0.85 ± 0.02 Rsun"
[elements]
frame = "jacobi"
fit = "keplerian"
epoch = "2459000.0 BJD_TDB"
[draws]
seed = 7
[integration]
span = "1e4 inner orbits"
"""
B = """
[planets.b]
period = "4.31 ± 0.0005 d"
eccentricity = "0.1 ± 0.02"
omega_star = "120 ± 15 deg"
time_of_conjunction = "2458998.42 ± 0.01 BJD_TDB"
semi_amplitude = "12.3 ± 0.5 m/s"
inclination = "88.2 ± 0.3 deg"
"""
C = """
[planets.c]
period = "9.7 ± 0.002 d"
eccentricity = "< 0.1 (95 %)"
omega_planet = "uniform(0, 360) deg"
time_of_conjunction = "2458995.1 ± 0.02 BJD_TDB"
mass_sin_i = "20 +3 -2 Mearth"
impact_parameter = "0.4 ± 0.1"
"""
D = """
[planets.d]
semi_major_axis = "0.31 ± 0.01 au"
eccentricity = "truncated normal(0.05, 0.05, 0, 1)"
omega_star = "uniform(0, 360) deg"
mean_longitude_star = "33 ± 4 deg"
mass = "log-uniform(1, 30) Mearth"
inclination = "91 ± 1 deg"
"""
EQUAL_NODES = '[plane]\nnodes = "equal"\n'
FREE_NODES = '[plane]\nnodes = "isotropic"\n'
PLANE = '[plane]\ninclination = "isotropic"\n'
SCATTERED = '[plane]\ninclination = "70 ± 5 deg"\nmutual_scatter = "3 deg"\n'
COMPANION = """
[companion]
semi_major_axis = "60 ± 5 au"
eccentricity = "uniform(0, 0.6)"
omega_planet = "uniform(0, 360) deg"
mean_anomaly = "uniform(0, 360) deg"
mass = "0.3 ± 0.02 Msun"
inclination = "isotropic independent"
node = "uniform(0, 360) deg"
"""


def without(text: str, *keys: str) -> str:
    return "\n".join(line for line in text.splitlines() if line.split(" = ")[0] not in keys) + "\n"


def scenario_of(*parts: str, folder: Path = Path(".")) -> Scenario:
    return Scenario.from_text("".join(parts), folder=folder)


def coplanar(planet: str) -> str:
    return without(planet, "inclination", "impact_parameter")


RICH = {
    "jacobi, own planes": scenario_of(HEAD, EQUAL_NODES, B, C, D),
    "astrocentric, free nodes": scenario_of(HEAD.replace("jacobi", "astrocentric"), FREE_NODES, B, C, D),
    "scattered about a plane, companion": scenario_of(
        HEAD, SCATTERED, coplanar(B), coplanar(C), coplanar(D), COMPANION
    ),
}


def fields_of(ensemble: Ensemble) -> dict[str, np.ndarray]:
    fields = {f.name: getattr(ensemble, f.name) for f in dataclasses.fields(ensemble)}
    arrays = {name: value for name, value in fields.items() if isinstance(value, np.ndarray)}
    built = states(ensemble)
    return arrays | ensemble.parameters | {"x": built.position_au, "v": built.velocity_au_d}


def assert_same_bits(one: dict[str, np.ndarray], other: dict[str, np.ndarray]) -> None:
    assert one.keys() == other.keys()
    for name, values in one.items():
        assert values.dtype == other[name].dtype and values.shape == other[name].shape, name
        as_bits = np.ndarray.tolist if values.dtype == object else np.ndarray.tobytes
        assert as_bits(values) == as_bits(other[name]), name


def planet(**keys: str) -> str:
    """A planet without errors; keys replace those given here, None takes one out."""
    base = {"period": "20 d", "eccentricity": "0.3", "omega_star": "50 deg", "mean_anomaly": "10 deg", "mass": "1 Mjup"}
    base |= {"inclination": "90 deg"}
    lines = [f'{key} = "{value}"' for key, value in (base | keys).items() if value is not None]
    return "\n".join(["[planets.b]", *lines]) + "\n"


def one(**keys: str) -> Ensemble:
    return draw(scenario_of(HEAD.replace(" ± 0.05", "").replace(" ± 0.02", ""), planet(**keys)), 0, 1)
