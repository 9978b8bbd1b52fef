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
