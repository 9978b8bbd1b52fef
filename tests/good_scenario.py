"""A scenario without a flaw, for tests to read and to spoil. The system is invented."""

GOOD = """\
title = "Two planets"
notes = "invented"

[star]
mass = "0.81 ± 0.03 Msun"
radius = "0.76 ± 0.02 Rsun"
age = "5 ± 2 Gyr"

[elements]
frame = "jacobi"
fit = "keplerian"
epoch = "2459000.0 BJD_TDB"
data_span = "1200 d"

[plane]
nodes = "equal"

[planets.b]
period = "4.31 ± 0.0005 d"
eccentricity = "0.03 +0.02 -0.01"
omega_star = "120 ± 15 deg"
time_of_periastron = "2459001.10 ± 0.02 BJD_TDB"
mass_sin_i = "5.2 ± 0.6 Mearth"
inclination = "88.2 ± 0.3 deg"
radius = "1.7 ± 0.1 Rearth"

[planets.c]
period = "8.90 ± 0.001 d"
eccentricity = "< 0.1 (95 %)"
omega_planet = "uniform(0, 360) deg"
time_of_conjunction = "2458998.42 ± 0.01 BJD_TDB"
semi_amplitude = "2.3 ± 0.2 m/s"
impact_parameter = "0.4 ± 0.1"

[companion]
semi_major_axis = "40 ± 3 au"
eccentricity = 0.2
omega_star = "30 deg"
mean_anomaly = "uniform(0, 360) deg"
mass = "0.2 ± 0.02 Msun"
inclination = "80 deg"

[draws]
seed = 20260101

[physics]
relativity = true

[integration]
method = "trace"
span = "1e5 inner orbits"

[endings]
mass_radius = "chen-kipping-2017"
stop_approach = "0.001 au"
stop_distance = "100 au"
"""

CARTESIAN = """\
[star]
mass = "1 Msun"

[elements]
frame = "cartesian"
epoch = "2459000.0 BJD_TDB"

[planets.b]
mass = "1 Mjup"
position = ["5.2 au", "0 au", "0 au"]
velocity = ["0 au/d", "13.06 ± 0.01 km/s", "0 m/s"]

[draws]
seed = 0

[integration]
span = "1e4 yr"
"""


def spoilt(old: str, new: str, good: str = GOOD) -> str:
    """Put ``new`` for the only ``old`` of a good scenario."""
    assert good.count(old) == 1, f"{old!r} stands {good.count(old)} times in the scenario"
    return good.replace(old, new)
