"""How well the phase of each body is known at the epoch, after it has been carried there."""

import math

import numpy as np

from stabcheck.arrays import Array
from stabcheck.constants import GM_SUN_AU3_D2, TWO_PI
from stabcheck.ensemble.resolved import PHASES, SIZES, given
from stabcheck.ensemble.sources import Source, Values, prefix_of, source, table_of
from stabcheck.orbit import period_d_from_semi_major_axis_au
from stabcheck.scenario import Frame, Scenario

SAMPLE_ROWS = 4096
"""Rows of a sample file that the error of a phase is measured on: it is then known to 1.5 %, enough for a warning."""


def phase_error_deg(scenario: Scenario | Source) -> dict[str, float]:
    """Say how well the phase of each body is known at the epoch.

    Parameters
    ----------
    scenario : Scenario or Source

    Returns
    -------
    dict of str to float
        Half the 16 to 84 % width in degrees, by body. Of a phase given as a time it holds the error of that time and
        the error of the period times the number of cycles to the epoch, in quadrature; of samples, with their
        correlation. Above some 120° the phase is as good as uniform (which has 122.9°). Empty for Cartesian scenarios.

    Raises
    ------
    SampleFileError
        If the sample file cannot be used.

    Notes
    -----
    The phase is the one that the scenario gives: an uncertain omega is not part of it.
    """
    opened = scenario if isinstance(scenario, Source) else source(scenario)
    if opened.scenario.elements.frame is Frame.CARTESIAN:
        return {}
    middle = opened.central_values()[0]
    return {body: float(np.degrees(_phase_error_rad(opened, body, middle))) for body in opened.bodies}


def _phase_error_rad(opened: Source, body: str, middle: Values) -> float:
    prefix, phase = prefix_of(opened.scenario, body), given(table_of(opened.scenario, body), PHASES)
    name, size = f"{prefix}.{phase}", f"{prefix}.{given(table_of(opened.scenario, body), SIZES)}"
    names = (name, size, "star.mass") if phase.startswith("time_of") else (name,)
    quantities = opened.scenario.quantities()
    if any(quantities[each].column for each in names):
        values = opened.values(0, min(SAMPLE_ROWS, opened.most_draws or SAMPLE_ROWS))
        apart = {each: values[each] - middle[each][0] for each in names}
        if len(names) == 1:
            return _half_width(np.mod(apart[name] + np.pi, TWO_PI) - np.pi)  # a file may wrap its angles anywhere
        return _half_width(sum(rate * apart[each] for each, rate in _rates(opened, names, middle).items()))
    if len(names) == 1:
        return quantities[name].sigma
    return math.hypot(*(rate * quantities[each].sigma for each, rate in _rates(opened, names, middle).items()))


def _rates(opened: Source, names: tuple[str, str, str], middle: Values) -> dict[str, float]:
    """How fast the phase at the epoch changes with the time it was given as, the size of the orbit, the star's mass."""
    time, size, star = names
    epoch = opened.scenario.elements.epoch
    assert epoch is not None  # a scenario with times and without an epoch is refused when it is read
    value, star_msun = float(middle[size][0]), float(middle[star][0])
    if size.endswith(".period"):
        period_d, by_size, by_star = value, 1.0 / value, 0.0
    else:  # P² goes with a³ over the mass; the planet's own mass does not matter here
        period_d = float(period_d_from_semi_major_axis_au(middle[size], GM_SUN_AU3_D2 * middle[star])[0])
        by_size, by_star = 1.5 / value, -0.5 / star_msun
    turns = (epoch.bjd - float(middle[time][0])) / period_d
    return {time: TWO_PI / period_d, size: TWO_PI * turns * by_size, star: TWO_PI * turns * by_star}


def _half_width(values: Array | float) -> float:
    low, high = np.percentile(np.asarray(values), [15.865525393145708, 84.13447460685429])
    return float(high - low) / 2.0
