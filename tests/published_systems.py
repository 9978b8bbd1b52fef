"""Systems with a published outcome: what is expected of each, and their way through the command line.

The scenarios with the sources of their numbers are in ``published/systems``. Their span is the horizon on which the
published statement is tested; a test may use a shorter one.
"""

import csv
import re
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from stabcheck import cli

FOLDER = Path(__file__).parent / "published" / "systems"
YEARS = re.compile(r'^span = "([\d.e]+) yr"', re.MULTILINE)
MASSES = re.compile(r'^(mass|mass_sin_i|semi_amplitude) = "([\d.e+-]+) (\S+)"', re.MULTILINE)
ECCENTRICITIES = re.compile(r'^eccentricity = "[\d.]+"', re.MULTILINE)

Change = Callable[[str], str]
Row = dict[str, str]
"""One draw of an export: column without its unit, and the cell."""


def scenario_of(name: str) -> str:
    return (FOLDER / f"{name}.toml").read_text(encoding="utf-8")


def horizon_yr(text: str) -> float:
    (years,) = YEARS.findall(text)
    return float(years)


def screened(text: str, folder: Path, *, draws: int = 1, workers: int = 0) -> list[Row]:
    """Take a scenario through ``screen`` and ``export``, as words of the command line, and read the table back."""
    scenario, run, table = folder / "system.toml", folder / "system.run", folder / "system.csv"
    scenario.write_text(text, encoding="utf-8")
    words = ["screen", str(scenario), "--draws", str(draws), "--workers", str(workers), "--run-file", str(run)]
    assert cli.main(words) == cli.EXIT_DONE
    assert cli.main(["export", str(run), str(table)]) == cli.EXIT_DONE
    with table.open(encoding="utf-8", newline="") as file:
        return [{name.split(" [")[0]: cell for name, cell in row.items()} for row in csv.DictReader(file)]


def largest_eccentricities(row: Row) -> list[float]:
    """One a planet, from the innermost outwards."""
    return [float(cell) for name, cell in row.items() if name.startswith("e_most_")]


def on_span(years: float) -> Change:
    return lambda text: _every(YEARS, f'span = "{years!r} yr"', text)


def masses_times(factor: float) -> Change:
    """Change the planets' masses (or what stands for them), not the star's."""

    def change(text: str) -> str:
        star, planets = text.split("[elements]")
        return star + "[elements]" + _every(MASSES, lambda m: f'{m[1]} = "{float(m[2]) * factor!r} {m[3]}"', planets)

    return change


def circular(text: str) -> str:
    return _every(ECCENTRICITIES, 'eccentricity = "0"', text)


def instead(old: str, new: str, times: int = 1) -> Change:
    def change(text: str) -> str:
        assert text.count(old) == times, f"{old!r} stands {text.count(old)} times in the scenario"
        return text.replace(old, new)

    return change


def _every(pattern: re.Pattern[str], new: str | Callable[[re.Match[str]], str], text: str) -> str:
    changed, count = pattern.subn(new, text)
    assert count, f"{pattern.pattern!r} is nowhere in the scenario"
    return changed


def eccentricities(value: float) -> Change:
    return lambda text: _every(ECCENTRICITIES, f'eccentricity = "{value}"', text)


def clones(key: str, value: str) -> Change:
    """Displace one number by less than its last digit from draw to draw: the fate of a chaotic system is a fraction."""
    return instead(f'{key} = "{value}"', f'{key} = "{value} ± 1e-9"')


ANY_PHASE = 'mean_anomaly = "uniform(0, 360) deg"'
PHASES_OF_HW_VIR = ('time_of_periastron = "2449840 BJD"', 'time_of_periastron = "2454500 BJD"')


def hw_vir_at_any_phase(text: str) -> str:
    for phase in PHASES_OF_HW_VIR:
        text = instead(phase, ANY_PHASE)(text)
    return text


@dataclass(frozen=True, slots=True, kw_only=True)
class Survivor:
    """A system that stays, and what an independent N-body run of the same elements gave (regression values).

    Attributes
    ----------
    short_yr : float
        Ten thousand inner orbits or more, and a tenth of the horizon where that is longer than it costs.
    largest_e : tuple of float
        From the innermost outwards, over the horizon.
    short_reaches : bool
        Whether the largest eccentricities are met within the short span too; else they are upper limits there.
    megno : tuple of float
        Least and most over the horizon, and ``short_megno`` over the short span; regular unless said.
    lyapunov_yr : float
        0 where the motion is not chaotic.
    control, turns : Change, str
        A change that must turn this of the checks.
    """

    name: str
    short_yr: float
    largest_e: tuple[float, ...]
    control: Change
    turns: str
    short_reaches: bool = True
    megno: tuple[float, float] = (1.8, 2.5)
    short_megno: tuple[float, float] = (1.8, 2.5)
    lyapunov_yr: float = 0.0
    energy_bound: float = 1e-5


ANY = (0.0, float("inf"))
QUARTER_LATER = instead("2453300 BJD", "2453394.775 BJD")  # of the 379.1 d of c: the resonant angle turns by 180 deg

SURVIVORS = (
    # Chaos with a short Lyapunov time is published. The independent run printed 76.8 yr for it, as the inverse slope
    # of MEGNO, which is half the exponent: 38.4 yr. The error of the energy swings up to 1e-5 in a plain REBOUND run of
    # the same map and ends at 1.2e-6; the larger bound is for the swing.
    Survivor(
        name="gj876",
        short_yr=1e3,
        largest_e=(0.263, 0.04, 0.085),
        megno=(5.0, float("inf")),
        short_megno=(5.0, float("inf")),
        lyapunov_yr=76.8 / 2,
        energy_bound=2e-5,
        control=instead('"jacobi"', '"astrocentric"'),  # the outer planet reaches 0.25
        turns="eccentricity",
    ),
    Survivor(
        name="hd82943",
        short_yr=6e3,
        largest_e=(0.468, 0.224),
        control=instead("mean_anomaly", "mean_longitude_star", 2),  # as one catalogue has it
        turns="survival",
    ),
    Survivor(
        name="hd60532",
        short_yr=6e3,
        largest_e=(0.295, 0.134),
        control=instead('eccentricity = "0.038"', 'eccentricity = "0.6"'),
        turns="survival",
    ),
    # That it is chaotic is a finding of the independent run, no paper: regression values, on the horizon only. On
    # 5e3 yr the same run has 2.0.
    Survivor(
        name="hd73526",
        short_yr=6e3,
        largest_e=(0.418, 0.287),
        megno=(4.0, float("inf")),
        short_megno=ANY,
        lyapunov_yr=6520 / 2,
        control=QUARTER_LATER,
        turns="survival",
    ),
    # Chaotic by the independent run: regression values.
    Survivor(
        name="muara",
        short_yr=1e4,
        largest_e=(0.253, 0.13, 0.103),
        megno=(5.0, float("inf")),
        short_megno=(5.0, float("inf")),
        lyapunov_yr=216 / 2,
        control=masses_times(10.0),
        turns="survival",
    ),
    Survivor(
        name="hd12661",
        short_yr=1.5e4,
        largest_e=(0.378, 0.336),
        control=instead('eccentricity = "0.031"', 'eccentricity = "0.7"'),
        turns="survival",
    ),
    # The lower limit is not that of the others: secular terms of the distant d are slow, the independent run has 1.84,
    # and four first tangent vectors gave 1.64 to 2.01 on the short span.
    Survivor(
        name="47uma",
        short_yr=3e4,
        largest_e=(0.07, 0.116, 0.16),
        megno=(1.5, 2.5),
        short_megno=(1.5, 2.5),
        control=masses_times(10.0),
        turns="survival",
    ),
    Survivor(
        name="upsand",
        short_yr=300.0,
        largest_e=(0.028, 0.3, 0.253),
        short_reaches=False,
        control=masses_times(5.0),
        turns="megno",
    ),
    Survivor(
        name="hd141399",
        short_yr=3e3,
        largest_e=(0.06, 0.056, 0.129, 0.264),
        short_reaches=False,
        control=instead("omega_star", "omega_planet", 4),  # moves the phases: they are times of conjunction
        turns="eccentricity",
    ),
    Survivor(
        name="hd4732",
        short_yr=1e4,
        largest_e=(0.197, 0.243),
        short_reaches=False,
        control=instead('period = "2732 d"', 'period = "450 d"'),
        turns="survival",
    ),
    Survivor(name="hd40307", short_yr=200.0, largest_e=(0.001, 0.001, 0.0), control=masses_times(100.0), turns="megno"),
    Survivor(
        name="kepler60", short_yr=200.0, largest_e=(0.028, 0.032, 0.023), control=masses_times(30.0), turns="survival"
    ),
    Survivor(
        name="kepler30",
        short_yr=1e3,
        largest_e=(0.109, 0.012, 0.038),
        control=instead("omega_star", "omega_planet", 3),  # moves the phases: they are times of conjunction
        turns="eccentricity",
    ),
    Survivor(
        name="k2138-circular",
        short_yr=80.0,
        largest_e=(0.008, 0.006, 0.006, 0.003, 0.002, 0.0),
        control=eccentricities(0.3),
        turns="survival",
    ),
    Survivor(
        name="outer-planets",
        short_yr=1.2e5,
        largest_e=(0.062, 0.087, 0.071, 0.016),
        short_reaches=False,
        control=masses_times(50.0),
        turns="survival",
    ),
    Survivor(
        name="eight-planets",
        short_yr=2.5e3,
        largest_e=(0.207, 0.007, 0.017, 0.099, 0.056, 0.054, 0.052, 0.008),
        control=masses_times(300.0),
        turns="survival",
    ),
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Broken:
    """A system that breaks, as the share of some draws that must be broken on its span.

    Attributes
    ----------
    departed_yr : float
        Median time of the first change of an axis by more than 30 % in the independent run; 0 where it says none.
    setting, control : Change
        How its draws differ, and what makes all of them survive.
    """

    name: str
    span_yr: float
    draws: int
    least_broken: int
    departed_yr: float
    control: Change
    setting: Change = str
    label: str = ""


def small_and_circular(text: str) -> str:
    return circular(masses_times(0.001)(text))


# Scattering planets live for a while that is a matter of chance: of forty displaced twins of one system nine in ten
# broke on the span, and the least number is the one that a share of 0.9 misses once in six hundred times or less.
BROKEN = (
    Broken(name="hd67087", span_yr=1e4, draws=1, least_broken=1, departed_yr=77.2, control=instead('"0.76"', '"0.3"')),
    Broken(name="k2138-limits-as-values", span_yr=1e2, draws=1, least_broken=1, departed_yr=0.0, control=circular),
    Broken(
        name="bd202457",
        span_yr=3e3,
        draws=10,
        least_broken=6,
        departed_yr=4.65,
        setting=clones("eccentricity", "0.15"),
        control=small_and_circular,
    ),
    Broken(
        name="hwvir-2009",
        span_yr=2e4,
        draws=10,
        least_broken=6,
        departed_yr=142.0,
        setting=clones("eccentricity", "0.31"),
        control=small_and_circular,
    ),
    Broken(
        name="nsvs14256825",
        span_yr=5e3,
        draws=20,
        least_broken=14,
        departed_yr=10.9,
        control=small_and_circular,
    ),
)
HW_VIR_AT_ANY_PHASE = Broken(
    name="hwvir-2009",
    span_yr=2e4,
    draws=20,
    least_broken=14,
    departed_yr=18.3,
    setting=hw_vir_at_any_phase,
    control=small_and_circular,
    label="any phase",
)
NOT_ASSERTED = ("hd37124", "hd10180", "kepler9", "hd128311-keplerian", "hd102272")
