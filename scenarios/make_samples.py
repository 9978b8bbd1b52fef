"""Make the sample files of two scenarios again. Both systems are invented: there are no such stars and no such fits.

    python make_samples.py            writes the files beside this one
    python make_samples.py --check    says whether they are still what this makes

Each file imitates what a fit to velocities leaves behind: a Gaussian cloud in the parameters that such data fix best
(period and mean longitude in the middle of the data, K, e cos omega, e sin omega), brought to the epoch of the
scenario, so that period and longitude there are correlated, and so are e and omega.
"""

import sys
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from scipy.special import ndtri

from stabcheck.random import uniforms

HERE = Path(__file__).parent
INVENTED = "invented data: no such star, no such fit; made by make_samples.py"
TURN_DEG = 360.0


@dataclass(frozen=True, kw_only=True)
class Planet:
    """What the cloud of one planet is centred on, with one standard deviation of each; omega is the star's."""

    name: str
    period_d: tuple[float, float]
    longitude_deg: tuple[float, float]
    semi_amplitude_m_s: tuple[float, float]
    e_cos: tuple[float, float]
    e_sin: tuple[float, float]


Columns = dict[str, np.ndarray]


def giant_pair() -> Columns:
    """Two giants near 2:1, 600 rows of equal weight; the epoch is the first velocity, 1,500 d before the middle."""
    star = (1.04, 0.04)
    b = Planet(
        name="b",
        period_d=(214.2, 0.8),
        longitude_deg=(121.0, 5.0),
        semi_amplitude_m_s=(41.0, 1.6),
        e_cos=(0.07, 0.05),
        e_sin=(-0.11, 0.05),
    )
    c = Planet(
        name="c",
        period_d=(437.5, 3.0),
        longitude_deg=(302.0, 6.0),
        semi_amplitude_m_s=(36.0, 1.8),
        e_cos=(-0.04, 0.07),
        e_sin=(0.09, 0.07),
    )
    # Near 2:1 an eccentricity of the inner planet looks like a part of the outer one's signal, and the other way round.
    return cloud(20260102, 600, star, (b, c), before_middle_d=1500.0, linked={("e_sin_b", "semi_amplitude_c"): -0.6})


def corner() -> Columns:
    """Two heavy giants whose best orbits all but cross, 1,500 rows with weights as nested sampling gives them."""
    star = (1.21, 0.05)
    b = Planet(
        name="b",
        period_d=(311.0, 1.1),
        longitude_deg=(48.0, 3.0),
        semi_amplitude_m_s=(71.0, 3.5),
        e_cos=(0.16, 0.09),
        e_sin=(0.10, 0.09),
    )
    c = Planet(
        name="c",
        period_d=(838.0, 10.0),
        longitude_deg=(205.0, 6.0),
        semi_amplitude_m_s=(62.0, 5.0),
        e_cos=(-0.27, 0.12),
        e_sin=(0.12, 0.12),
    )
    linked = {("e_cos_b", "e_cos_c"): -0.5}
    return cloud(20260103, 1500, star, (b, c), before_middle_d=1100.0, linked=linked, wide=1.3)


def cloud(
    seed: int,
    rows: int,
    star_msun: tuple[float, float],
    planets: tuple[Planet, ...],
    *,
    before_middle_d: float,
    linked: dict[tuple[str, str], float],
    wide: float = 1.0,
) -> Columns:
    """Draw rows of correlated parameters.

    ``wide`` above 1 draws from a cloud that is wider by this factor and adds the log-weights that make up for it.
    """
    kinds = {"period": "period_d", "longitude": "longitude_deg", "semi_amplitude": "semi_amplitude_m_s"}
    kinds |= {"e_cos": "e_cos", "e_sin": "e_sin"}
    centres = {"star": star_msun}
    centres |= {f"{kind}_{planet.name}": getattr(planet, field) for planet in planets for kind, field in kinds.items()}
    steps = {name: np.asarray(ndtri(uniforms(seed, name, 0, rows))) for name in centres}
    log_density = -0.5 * sum(step**2 for step in steps.values())
    for (one, other), share in linked.items():
        steps[other] = share * steps[one] + np.sqrt(1.0 - share**2) * steps[other]
    values = {name: mean + sigma * wide * steps[name] for name, (mean, sigma) in centres.items()}
    columns: Columns = {"M_star": values["star"]}
    for planet in planets:
        columns |= at_epoch(planet.name, values, before_middle_d)
    columns["lnp"] = wide**2 * log_density  # rows come from the wide cloud, whose logarithm is flatter by wide²
    if wide != 1.0:
        columns["lnw"] = (wide**2 - 1.0) * log_density
    return columns


def at_epoch(name: str, values: Columns, before_middle_d: float) -> Columns:
    """Bring one planet's parameters to the epoch and to the columns that the scenario reads."""
    period = values[f"period_{name}"]
    e_cos, e_sin = values[f"e_cos_{name}"], values[f"e_sin_{name}"]
    return {
        f"P_{name}": period,
        f"K_{name}": values[f"semi_amplitude_{name}"],
        f"e_{name}": np.hypot(e_cos, e_sin),
        f"omega_star_{name}": np.degrees(np.arctan2(e_sin, e_cos)) % TURN_DEG,
        f"mean_longitude_star_{name}": (values[f"longitude_{name}"] - TURN_DEG * before_middle_d / period) % TURN_DEG,
    }


UNITS = {"M": "M_sun", "P": "d", "K": "m / s", "e": "", "omega": "deg", "mean": "deg", "lnp": "", "lnw": ""}


def csv_text(columns: Columns) -> str:
    """Comma-separated text with a comment on top."""
    lines = [f"# {INVENTED}", ",".join(columns)]
    return "\n".join([*lines, *(",".join(row) for row in printed(columns))]) + "\n"


def ecsv_text(columns: Columns) -> str:
    """The same as an ECSV table with the unit of every column."""
    head = ["%ECSV 1.0", "---", "delimiter: ','", "datatype:"]
    for name in columns:
        unit = UNITS[name.split("_")[0]]
        head.append(f"- {{name: {name}, {f'unit: {unit}, ' if unit else ''}datatype: float64}}")
    head += [f"meta: {{comments: ['{INVENTED}']}}", "schema: astropy-2.0"]
    lines = [f"# {line}" for line in head] + [",".join(columns)]
    return "\n".join([*lines, *(",".join(row) for row in printed(columns))]) + "\n"


def printed(columns: Columns) -> list[list[str]]:
    """Cells of each row, with digits well below the errors."""
    return [[f"{value:.5f}" for value in row] for row in zip(*columns.values(), strict=True)]


def files() -> dict[str, str]:
    """Name and text of each file."""
    return {"giant_pair_near_2to1.csv": csv_text(giant_pair()), "corner_survives.ecsv": ecsv_text(corner())}


def main(check: bool) -> int:
    """Write the files, or compare them with what stands there; returns how many differ."""
    differing = 0
    for name, text in files().items():
        if check:
            same = (HERE / name).read_text(encoding="utf-8") == text
            differing += not same
            print(f"{name}: {'as made here' if same else 'NOT what this makes'}")
        else:
            (HERE / name).write_text(text, encoding="utf-8")
            print(f"{name}: written")
    return differing


if __name__ == "__main__":
    sys.exit(main(check="--check" in sys.argv[1:]))
