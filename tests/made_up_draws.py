"""Tables of draws made by hand for the tests of the report; nothing in them was integrated."""

from dataclasses import replace

import numpy as np

from stabcheck.constants import EARTH_MSUN, YEAR_D
from stabcheck.outcome import Ending, Motion, Outcome, Survival, Trust
from stabcheck.plan import Plan
from stabcheck.report.table_of_draws import OutcomeColumns, RunFacts, RunTable

BODIES = ("b", "c")
SPAN_D = 1e5 * YEAR_D


def facts(**changes):
    usual = RunFacts(
        title="Two invented planets",
        asked=0,
        seed=7,
        source="table",
        frame="jacobi",
        fit="keplerian",
        span="1e5 yr",
        plan=Plan().identity(),
        versions={"stabcheck": "0.1.0", "rebound": "5.2.2", "numpy": "2.4.0"},
        command="stabcheck screen two.toml --draws 300",
        star_age_d=5e9 * YEAR_D,
    )
    return replace(usual, **changes)


def survived(number, motion=Motion.REGULAR, **changes):
    usual = {
        "survival": Survival.SURVIVED,
        "motion": motion,
        "time_d": SPAN_D,
        "span_d": SPAN_D,
        "method": "whfast",
        "step_d": 0.2,
        "energy_error": 1e-8,
        "orbit_energy_error": 3e-8,
        "fewest_steps_per_periastron": 24.0,
        "closest_hill": 5.0,
        "megno": 2.0 if motion is Motion.REGULAR else 40.0,
        "drift": np.array([1e-9, 1e-8]),
    }
    return Outcome(number=number, **(usual | changes))


def broken(number, time_d=1e3 * YEAR_D, ending=Ending.EJECTED, **changes):
    usual = {"motion": Motion.CHAOTIC, "method": "trace", "handover_why": "encounter", "bodies": (2,), "megno": 300.0}
    usual |= {"drift": np.empty(0), "time_d": time_d}
    return survived(number, **(usual | {"survival": Survival.BROKEN, "ending": ending} | changes))


def unknown(number, trust=Trust.BUDGET, time_d=1e4 * YEAR_D, **changes):
    return survived(number, **({"survival": Survival.UNKNOWN, "trust": trust, "time_d": time_d} | changes))


def table(outcomes, draws=None, *, refused=(), seed=1, parameters=None, elements=None, weight=None, **columns):
    """A table of hand-made outcomes; parameters are noise unless given."""
    outcomes = list(outcomes)
    draws = draws if draws is not None else len(outcomes) + len(refused)
    random = np.random.default_rng(seed)
    usual = {
        "mass_msun": np.abs(random.normal([5, 9], 1, (draws, 2))) * EARTH_MSUN,
        "period_d": random.normal([4.3, 9.1], 0.001, (draws, 2)),
        "semi_major_axis_au": random.normal([0.05, 0.083], 1e-4, (draws, 2)),
        "eccentricity": np.abs(random.normal(0.05, 0.03, (draws, 2))),
        "inclination_rad": np.deg2rad(random.normal(88, 1, (draws, 2))),
        "node_rad": np.zeros((draws, 2)),
        "omega_planet_rad": random.normal(0, 0.3, (draws, 2)) % (2 * np.pi),
        "mean_anomaly_rad": random.uniform(0, 2 * np.pi, (draws, 2)),
    }
    elements = usual if elements is None else elements
    reasons = np.full(draws, "", dtype="<U40")
    for row in refused:
        reasons[row] = "e < 0 (c)"
    done = np.zeros(draws, dtype=bool)
    done[[outcome.number for outcome in outcomes]] = True
    given = columns.pop("facts", None) or facts(asked=draws)
    return RunTable(
        facts=given,
        bodies=BODIES,
        number=np.arange(draws),
        refused=reasons,
        done=done,
        weight=np.ones(draws) if weight is None else weight,
        source_row=columns.pop("source_row", np.full(draws, -1)),
        chain=columns.pop("chain", np.full(draws, -1)),
        star_mass_msun=np.full(draws, 0.8),
        secular_cycle_d=columns.pop("secular_cycle_d", np.full(draws, np.nan)),
        parameters={"planets.c.eccentricity": elements["eccentricity"][:, 1]} if parameters is None else parameters,
        elements=elements,
        outcome=OutcomeColumns.of(outcomes, draws, len(BODIES)),
    )


def mixed(draws=600, seed=3, with_unknown=True):
    """A plausible ensemble: large eccentricity and mass break early, some are unknown, some refused."""
    random = np.random.default_rng(seed)
    refused = tuple(range(17, draws, 53))
    plain = table([], draws, refused=refused, seed=seed)
    e, m = plain.elements["eccentricity"][:, 1], plain.elements["mass_msun"][:, 1] / EARTH_MSUN
    danger = (e - 0.05) / 0.03 + 0.5 * (m - 9) + random.normal(0, 0.4, draws)
    outcomes = [_fate(row, danger[row], random, with_unknown) for row in range(draws) if row not in refused]
    return table(outcomes, draws, refused=refused, seed=seed)


def _fate(row, danger, random, with_unknown):
    drift = 10 ** random.normal(-8 + 2 * np.clip(danger, -1, 2), 0.5, 2)
    if with_unknown and random.uniform() < 0.03:
        return unknown(row, trust=Trust.ENERGY if random.uniform() < 0.5 else Trust.BUDGET, megno=np.nan, drift=drift)
    if danger > 1.0:
        time_d = SPAN_D * 10 ** (-4 * random.uniform())
        ending = Ending.EJECTED if random.uniform() < 0.6 else Ending.COLLIDED
        return broken(row, time_d, ending, megno=10 ** random.uniform(1, 3))
    if danger > 0.8:
        return survived(row, Motion.CHAOTIC, rearranged=True, drift=drift, megno=80.0)
    if danger > 0.4:
        return survived(row, Motion.CHAOTIC, drift=drift, megno=10 ** random.uniform(1, 2.5))
    if danger > 0.2:
        return survived(row, Motion.UNSETTLED, drift=drift, megno=random.uniform(2.1, 4))
    return survived(row, Motion.REGULAR, drift=drift, megno=random.normal(2, 0.01))
