"""Figures of one draw: orbits with time, apsidal and resonant angles, the encounter that mattered."""

import math
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from stabcheck.arrays import Array
from stabcheck.constants import DEGREE_RAD, YEAR_D
from stabcheck.report.figures import new_figure, saved, styled
from stabcheck.report.style import COLUMN_MM, PAGE_MM, PLANET_LOOKS, TALLEST_MM
from stabcheck.resonance import sector_of
from stabcheck.series import Encounter, PairSeries, Series

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

UNITS = (("d", 1.0), ("yr", YEAR_D), ("kyr", 1e3 * YEAR_D), ("Myr", 1e6 * YEAR_D), ("Gyr", 1e9 * YEAR_D))
LOGARITHMIC_FROM = 4.0
"""Ratio of largest to smallest distance from which the axis is logarithmic."""
Panel = tuple[str, Array]
"""Title and angle."""
PANELS_ACROSS, PANEL_HEIGHT_MM = 3, 34.0


def write_follow_figures(series: Series, encounter: Encounter | None, folder: Path) -> list[Path]:
    """Write the figures of one draw as PNG and PDF.

    Parameters
    ----------
    series : Series
    encounter : Encounter or None
        Without it there is no figure of it.
    folder : Path
        Must exist.

    Returns
    -------
    list of Path
        Files written.
    """
    named = [("orbits", orbits(series))]
    pages = angles(series)
    named += [(f"angles_{page}" if len(pages) > 1 else "angles", one) for page, one in enumerate(pages, 1)]
    if encounter is not None:
        named.append(("encounter", encounter_figure(encounter, series.bodies)))
    return [path for name, figure in named for path in saved(figure, folder / name)]


def time_unit(longest_d: float) -> tuple[str, float]:
    """Name the unit in which a time reads well, and its length in days."""
    return next(unit for unit in reversed(UNITS) if longest_d >= 2.0 * unit[1] or unit is UNITS[0])


@styled
def orbits(series: Series) -> "Figure":
    """Semi-major axes with the band from periastron to apastron, and eccentricities, over one column."""
    figure = new_figure(COLUMN_MM, 100.0)
    upper, lower = figure.subplots(2, 1, sharex=True, gridspec_kw={"height_ratios": (3, 2)})
    unit, unit_d = time_unit(float(series.time_d[-1]))
    time = series.time_d / unit_d
    axis, e = series.elements.semi_major_axis_au, series.elements.eccentricity
    bound = np.where(axis > 0.0, axis, np.nan)
    for k, body in enumerate(series.bodies):
        colour, dashes = PLANET_LOOKS[k % len(PLANET_LOOKS)]
        inner, outer = bound[:, k] * (1.0 - e[:, k]), bound[:, k] * (1.0 + e[:, k])
        upper.fill_between(time, inner, outer, color=colour, alpha=0.3, linewidth=0, rasterized=True)
        upper.plot(time, bound[:, k], color=colour, linestyle=dashes, linewidth=0.8, label=body)
        lower.plot(time, np.where(axis[:, k] > 0.0, e[:, k], np.nan), color=colour, linestyle=dashes, linewidth=0.8)
    _distance_axis(upper, bound * (1.0 - e), bound * (1.0 + e))
    upper.set_ylabel("a, periastron to apastron [au]")
    lower.set_ylabel("e")
    lower.set_ylim(bottom=0.0)
    lower.set_xlabel(f"time [{unit}]")
    lower.set_xlim(0.0, float(time[-1]))
    figure.legend(loc="outside upper left", ncols=4, columnspacing=1.0)
    return figure


def _distance_axis(axes: "Axes", nearest: Array, furthest: Array) -> None:
    from matplotlib.ticker import LogLocator, NullFormatter, ScalarFormatter

    with np.errstate(invalid="ignore"):
        least, most = float(np.nanmin(nearest)), float(np.nanmax(furthest))
    if not (least > 0.0 and most / least > LOGARITHMIC_FROM):
        axes.set_ylim(bottom=0.0)
        return
    axes.set_yscale("log")
    axes.yaxis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0)))
    axes.yaxis.set_major_formatter(ScalarFormatter())
    axes.yaxis.set_minor_formatter(NullFormatter())


@styled
def angles(series: Series) -> "list[Figure]":
    """Apsidal difference and resonant angles of each pair of neighbours as points; pages as tall as a journal's."""
    panels = [_panels_of(pair, series.bodies) for pair in series.pairs]
    rows = [one[start : start + PANELS_ACROSS] for one in panels for start in range(0, len(one), PANELS_ACROSS)]
    per_page = int((TALLEST_MM - 10.0) // PANEL_HEIGHT_MM)
    return [_angle_page(series.time_d, rows[first : first + per_page]) for first in range(0, len(rows), per_page)]


def _angle_page(time_d: Array, rows: Sequence[Sequence[Panel]]) -> "Figure":
    across = max(len(row) for row in rows)
    figure = new_figure(max(COLUMN_MM, PAGE_MM * across / PANELS_ACROSS), 10.0 + PANEL_HEIGHT_MM * len(rows))
    grid = figure.subplots(len(rows), across, squeeze=False, sharex=True)
    unit, unit_d = time_unit(float(time_d[-1]))
    for place, row in enumerate(rows):
        below = len(rows[place + 1]) if place + 1 < len(rows) else 0
        for column, axes in enumerate(grid[place]):
            if column >= len(row):
                axes.set_visible(False)
                continue
            _angle_panel(axes, time_d / unit_d, row[column][1], row[column][0])
            if column >= below:  # nothing stands under it
                axes.set_xlabel(f"time [{unit}]")
                axes.tick_params(labelbottom=True)
    return figure


def _panels_of(pair: PairSeries, bodies: Sequence[str]) -> list[Panel]:
    inner, outer = (_upright(bodies[place]) for place in (pair.inner, pair.outer))
    symbols = [rf"$\lambda_{{{inner}}}$", rf"$\lambda_{{{outer}}}$", rf"$\varpi_{{{inner}}}$", rf"$\varpi_{{{outer}}}$"]
    panels = [(f"{symbols[3]} − {symbols[2]}", pair.apsidal_difference_rad)]
    if pair.resonance is not None:
        for k, values in enumerate(pair.angles_rad):
            panels.append((pair.resonance.angle_text(k, symbols), values))
    return panels


def _upright(name: str) -> str:
    kept = "".join(letter for letter in name if letter not in "\\{}$^%#&~")
    return rf"\mathrm{{{kept}}}".replace("_", r"\_").replace(" ", r"\ ")


def _angle_panel(axes: "Axes", time: Array, angle_rad: Array, title: str) -> None:
    degrees = angle_rad / DEGREE_RAD
    centre = sector_of(angle_rad).centre_rad
    around_zero = math.cos(centre) > 0.0  # cut the circle where the angle is not
    low = -180.0 if around_zero else 0.0
    axes.plot(
        time, np.mod(degrees - low, 360.0) + low, linestyle="none", marker=".", markersize=1.6,
        markeredgewidth=0, color=PLANET_LOOKS[0][0], rasterized=True,
    )  # fmt: skip
    axes.set_ylim(low, low + 360.0)
    axes.set_yticks([low, low + 90.0, low + 180.0, low + 270.0, low + 360.0])
    axes.set_xlim(0.0, float(time[-1]))
    axes.set_title(f"{title} [deg]", loc="left", fontsize=7.5)


@styled
def encounter_figure(encounter: Encounter, bodies: Sequence[str]) -> "Figure":
    """Distance of the two bodies, step by step, around the time that mattered."""
    figure = new_figure(COLUMN_MM, 65.0)
    axes = figure.subplots()
    first, second = (("star", *bodies)[body] for body in (encounter.first, encounter.second))
    in_hill = bool(np.all(np.isfinite(encounter.distance_hill)))
    distance = encounter.distance_hill if in_hill else encounter.distance_au
    since = encounter.time_d - encounter.at_d
    axes.plot(since, distance, color=PLANET_LOOKS[0][0], marker=".", markersize=2.0, linewidth=0.8)
    if encounter.touch_au > 0.0:
        per_au = float(distance[-1] / encounter.distance_au[-1])
        axes.axhline(encounter.touch_au * per_au, color="#e07b00", linestyle=(0, (4, 2)), linewidth=0.8)
        axes.annotate(
            "radii touch",
            (0.02, encounter.touch_au * per_au),
            xycoords=("axes fraction", "data"),
            xytext=(0, 2),
            textcoords="offset points",
            fontsize=7.0,
        )
    axes.set_yscale("log")
    unit, unit_d = time_unit(encounter.at_d)
    axes.set_xlabel(f"time since {encounter.at_d / unit_d:.6g} {unit} [d]")
    axes.set_ylabel(f"distance {first}–{second} [{'mutual Hill radii' if in_hill else 'au'}]")
    return figure
