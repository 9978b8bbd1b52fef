"""Figures of a run: verdicts over a plane, survival with time, parameters before and after, indicators."""

import math
from collections.abc import Callable, Sequence
from functools import wraps
from pathlib import Path
from typing import TYPE_CHECKING, Any, ParamSpec, TypeVar

import numpy as np

from stabcheck.arrays import Array, Flags
from stabcheck.errors import StabcheckError
from stabcheck.report.answer import Answer, answer_of
from stabcheck.report.columns import Column, described, drawn_columns, element_columns
from stabcheck.report.quantiles import mean_direction_deg
from stabcheck.report.style import (
    ALL_FILL,
    COLUMN_MM,
    DOTS_PER_INCH,
    HATCHES,
    LIVING_LINE,
    MARKS,
    PAGE_MM,
    REGULAR_LINE,
    SETTINGS,
    TALLEST_MM,
    inches,
)
from stabcheck.report.table_of_draws import RunTable
from stabcheck.verdict import Verdict

P = ParamSpec("P")
T = TypeVar("T")

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

KEPT = ("regular", "unsettled", "chaotic")
PANELS_ACROSS = 4
PANEL_HEIGHT_MM = 36.0
MANY = 3000
"""More marks than this go into a PDF as an image, so that the page still opens at once."""


def styled(draw: Callable[P, T]) -> Callable[P, T]:
    """Draw under our settings and leave those of the caller alone."""

    @wraps(draw)
    def with_settings(*args: P.args, **kwargs: P.kwargs) -> T:
        import matplotlib

        with matplotlib.rc_context(SETTINGS):
            return draw(*args, **kwargs)

    return with_settings


def write_figures(table: RunTable, folder: Path, *, plane: tuple[str, str] | None = None) -> list[Path]:
    """Write every figure as PNG (200 dpi) and PDF.

    Parameters
    ----------
    table : RunTable
        Only its settled prefix is drawn.
    folder : Path
        Made if missing.
    plane : pair of str, optional
        Names of the two columns of the verdict plane; the two that survival shifts most if not given.

    Returns
    -------
    list of Path
        The files written, the same bytes for the same table and versions.
    """
    answer = answer_of(table)
    orbits = table.prefix().orbits()
    named = [("verdicts", verdict_plane(answer, orbits, plane)), ("survival", survival_with_time(answer))]
    pages = before_and_after(answer, orbits)
    named += [(f"parameters_{page}" if len(pages) > 1 else "parameters", one) for page, one in enumerate(pages, 1)]
    named += [("indicators", indicators(answer, orbits))]
    folder.mkdir(parents=True, exist_ok=True)  # only now: a plane that is not there leaves nothing behind
    return [path for name, figure in named for path in saved(figure, folder / name)]


@styled
def verdict_plane(answer: Answer, orbits: RunTable, plane: tuple[str, str] | None = None) -> "Figure":
    """Every orbit as a mark of its verdict, over two columns.

    Raises
    ------
    StabcheckError
        If a named column does not exist; the message lists those that do.
    """
    figure, axes = _page(COLUMN_MM, 92.0)
    chosen = chosen_plane(answer, orbits, plane)
    if not chosen:
        return _nothing(figure, axes, "no two parameters differ from draw to draw" if len(orbits) else "no orbit")
    x, y = (unrolled(column, orbits) for column in chosen)
    for word in reversed(Verdict):  # the most frequent of a usual run first, so that it hides nothing
        _scatter(axes, x, y, np.asarray(orbits.verdict == word), str(word), len(orbits))
    axes.set_xlabel(chosen[0].label)
    axes.set_ylabel(chosen[1].label)
    _few_ticks(axes)
    figure.legend(loc="outside upper left", ncols=3, columnspacing=1.0, handletextpad=0.2)
    return figure


def chosen_plane(answer: Answer, orbits: RunTable, plane: tuple[str, str] | None) -> tuple[Column, ...]:
    """The two named columns, or those that survival shifts most; none if fewer than two differ between draws."""
    columns = {column.name: column for column in described(orbits)}
    if plane is not None:
        # A column may be asked for by its name in the scenario, too.
        columns |= {column.name: column for column in (*drawn_columns(orbits), *element_columns(orbits))}
        columns |= {name.replace(" ", "_"): column for name, column in columns.items()}  # as the export has it
        missing = [name for name in plane if name not in columns]
        if missing:
            raise StabcheckError(
                f"there is no column {', '.join(map(repr, missing))} to draw",
                where="verdict plane",
                why="the plane is made of two columns of the draws",
                do=f"name two of: {', '.join(columns)}",
            )
        return columns[plane[0]], columns[plane[1]]
    ranked = [row.name for row in answer.constrained.by_shift()]
    names = [*ranked, *(name for name in columns if name not in ranked)][:2]
    return tuple(columns[name] for name in names) if len(names) == 2 else ()


def unrolled(column: Column, orbits: RunTable) -> Array:
    """Values for an axis: angles are cut opposite their mean direction, not at 0."""
    if not column.circular:
        return column.values
    centre, _ = mean_direction_deg(column.values, orbits.weight)
    return centre + (column.values - centre + 180.0) % 360.0 - 180.0


def _scatter(axes: "Axes", x: Array, y: Array, chosen: Flags, word: str, total: int) -> None:
    mark = MARKS[word]
    crowd = min(1.0, math.sqrt(400.0 / max(total, 1)))
    axes.scatter(
        x[chosen],
        y[chosen],
        s=max(3.0, mark.size * crowd),
        marker=mark.marker,
        c="none" if mark.hollow else mark.colour,
        edgecolors=mark.colour if mark.hollow else None,
        linewidths=0.8 if mark.marker == "x" or mark.hollow else 0.0,
        label=f"{word} {int(chosen.sum())}",
        rasterized=total > MANY,
        zorder=3.0 if mark.hollow else 2.0,
        clip_on=False,
    )


@styled
def survival_with_time(answer: Answer) -> "Figure":
    """Share of the orbits that outlives a time: the two bounds that unknown draws leave, and the limits around them."""
    figure, axes = _page(COLUMN_MM, 75.0)
    curve = answer.survival
    if not curve.time.size:
        return _nothing(figure, axes, "no orbit")
    unknown = answer.survived.unknown
    band = f"{100 * curve.confidence:g} % limits, pointwise"
    axes.fill_between(curve.time, curve.lower, curve.upper, color="#d5dde5", linewidth=0, label=band, step="post")
    known = f"orbits: {answer.counts.orbits}" if not unknown else f"{unknown} unknown draws: survived"
    steps: dict[str, Any] = {"drawstyle": "steps-post", "clip_on": False}
    axes.plot(curve.time, curve.share_most, color=LIVING_LINE, label=known, **steps)
    if unknown:
        lost = f"{unknown} unknown draws: broken when last known"
        axes.plot(curve.time, curve.share_least, color="#e07b00", linestyle=(0, (4, 2)), label=lost, **steps)
    axes.set_xscale("log")
    axes.set_xlim(curve.time[0], curve.time[-1])
    axes.set_ylim(0.0, 1.0)
    axes.set_xlabel(f"time [{curve.unit}]")
    axes.set_ylabel("share that survives longer")
    figure.legend(loc="outside upper left")
    return figure


@styled
def before_and_after(answer: Answer, orbits: RunTable) -> "list[Figure]":
    """Each parameter of all orbits, of those that live, and of those that are regular; one panel a parameter."""
    columns = described(orbits)
    if not columns:
        figure, axes = _page(COLUMN_MM, 40.0)
        return [_nothing(figure, axes, "no parameter differs from draw to draw" if len(orbits) else "no orbit")]
    per_page = PANELS_ACROSS * int((TALLEST_MM - 12.0) // PANEL_HEIGHT_MM)
    starts = range(0, len(columns), per_page)
    return [_panels(answer, orbits, columns[start : start + per_page]) for start in starts]


def _panels(answer: Answer, orbits: RunTable, columns: Sequence[Column]) -> "Figure":
    across = min(PANELS_ACROSS, len(columns))
    down = math.ceil(len(columns) / across)
    figure = new_figure(PAGE_MM * across / PANELS_ACROSS if across > 1 else COLUMN_MM, 12.0 + PANEL_HEIGHT_MM * down)
    grid = figure.subplots(down, across, squeeze=False)
    for axes, column in zip(grid.flat, columns, strict=False):
        _panel(axes, column, orbits)
    for axes in list(grid.flat)[len(columns) :]:
        axes.set_visible(False)
    handles, labels = grid.flat[0].get_legend_handles_labels()
    figure.legend(handles, labels, loc="outside upper left", ncols=3 if across > 2 else 1)
    return figure


def _panel(axes: "Axes", column: Column, orbits: RunTable) -> None:
    values, weight, verdict = unrolled(column, orbits), orbits.weight, orbits.verdict
    kept, regular = np.isin(verdict, KEPT), np.asarray(verdict == Verdict.REGULAR)
    edges = _edges(values)
    rows = np.ones_like(kept)
    groups: list[tuple[Flags, str, dict[str, Any]]] = [
        (rows, "orbits", {"histtype": "stepfilled", "color": ALL_FILL}),
        (kept, "survived, not rearranged", {"histtype": "step", "color": LIVING_LINE}),
        (regular, "regular", {"histtype": "step", "color": REGULAR_LINE, "linestyle": (0, (3, 1.5))}),
    ]
    for chosen, name, look in groups:
        if weight[chosen].sum() > 0:  # a density of nothing is no curve; its count is in the legend all the same
            axes.hist(values[chosen], bins=edges.tolist(), weights=weight[chosen], density=True, **look)
        axes.plot([], [], label=f"{name} {int(chosen.sum())}", **_legend_look(look))
    axes.set_xlabel(column.label)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    axes.set_xlim(edges[0], edges[-1])
    axes.margins(y=0.08)
    if column.circular:
        _round_ticks(axes)
    else:
        _few_ticks(axes, 4)


def _legend_look(look: dict[str, Any]) -> dict[str, Any]:
    filled = look["histtype"] == "stepfilled"
    return {"color": look["color"], "linestyle": look.get("linestyle", "-"), "linewidth": 6.0 if filled else 1.2}


def _edges(values: Array) -> Array:
    if not values.size:
        return np.linspace(0.0, 1.0, 4)
    least, most = float(values.min()), float(values.max())
    if not most > least:
        half = abs(least) * 0.01 or 1.0
        return np.linspace(least - half, least + half, 4)
    bins = int(np.clip(2 * values.size ** (1 / 3), 5, 40))  # Rice's rule
    return np.linspace(least, most, bins + 1)


@styled
def indicators(answer: Answer, orbits: RunTable) -> "Figure":
    """MEGNO by fate, and the drift of the mean motions; how many draws have neither is said."""
    figure = new_figure(PAGE_MM, 75.0)
    left, right = figure.subplots(1, 2)
    measured = np.isfinite(orbits.outcome.drift).any(axis=1)
    drift = np.abs(np.nan_to_num(orbits.outcome.drift, nan=0.0)).max(axis=1, initial=0.0)
    _by_fate(left, orbits.outcome.megno, orbits, "MEGNO at its end", always=(1.0, 10.0))
    _by_fate(right, np.where(measured, drift, np.nan), orbits, "largest relative drift of a mean motion")
    left.axvline(2.0, color="#e07b00", linewidth=0.8, linestyle=(0, (1, 1)), label="2: quasi-periodic")
    handles, labels = left.get_legend_handles_labels()
    figure.legend(handles, labels, loc="outside upper left", ncols=4)
    return figure


def _by_fate(axes: "Axes", values: Array, orbits: RunTable, label: str, always: tuple[float, ...] = ()) -> None:
    """Histogram over the logarithm; what is zero or negative has none and is counted in the title."""
    fate = np.where(orbits.verdict == "unknown", "unknown", orbits.outcome.survival)
    positive = np.isfinite(values) & (values > 0)
    logs = np.log10(values[positive])
    edges = 10.0 ** _edges(np.concatenate([logs, np.log10(always)]))
    bottom = np.zeros(edges.size - 1)
    for name, (colour, hatch) in HATCHES.items():
        heights = np.histogram(values[positive & (fate == name)], edges)[0].astype(np.float64)
        look: dict[str, Any] = {"facecolor": colour, "edgecolor": "black", "linewidth": 0.4, "hatch": hatch * 2}
        count = int((fate == name).sum())
        axes.bar(edges[:-1], heights, np.diff(edges), bottom, align="edge", label=f"{name} {count}", **look)
        bottom = bottom + heights
    axes.set_title(_what_is_shown(values, positive), loc="left", fontsize=7.0)
    axes.set_xlabel(label)
    axes.set_ylabel("draws")
    axes.set_xscale("log")
    axes.set_ylim(0.0, max(1.0, 1.08 * float(bottom.max())))
    _whole_numbers(axes)


def _what_is_shown(values: Array, positive: Flags) -> str:
    missing, zero = int(np.isnan(values).sum()), int((~positive & ~np.isnan(values)).sum())
    without = f", without a logarithm {zero}" if zero else ""
    return f"shown {int(positive.sum())}, not measured {missing}{without}"


def _whole_numbers(axes: "Axes") -> None:
    from matplotlib.ticker import MaxNLocator

    axes.yaxis.set_major_locator(MaxNLocator(integer=True, nbins=5))


def _round_ticks(axes: "Axes") -> None:
    """Ticks of an angle: parts of a turn, and read modulo a turn where the axis goes on beyond it."""
    from matplotlib.ticker import FuncFormatter, MaxNLocator

    axes.xaxis.set_major_locator(MaxNLocator(nbins=3, steps=[1, 1.5, 3, 4.5, 6, 9, 10]))
    axes.xaxis.set_major_formatter(FuncFormatter(lambda degrees, _: f"{degrees % 360.0:g}"))


def _few_ticks(axes: "Axes", most: int = 5) -> None:
    from matplotlib.ticker import MaxNLocator

    axes.xaxis.set_major_locator(MaxNLocator(nbins=most - 1, min_n_ticks=2))
    if axes.get_ylabel():
        axes.yaxis.set_major_locator(MaxNLocator(nbins=most))


def new_figure(width_mm: float, height_mm: float) -> "Figure":
    """Make an empty figure of this size."""
    # Not pyplot: it keeps every figure in a global list, and would pick a screen to draw on.
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=inches(width_mm, height_mm), layout="constrained")
    FigureCanvasAgg(figure)
    return figure


def _page(width_mm: float, height_mm: float) -> "tuple[Figure, Axes]":
    figure = new_figure(width_mm, height_mm)
    return figure, figure.subplots()


def _nothing(figure: "Figure", axes: "Axes", why: str) -> "Figure":
    axes.set_axis_off()
    axes.text(0.5, 0.5, f"nothing to draw: {why}", ha="center", va="center", transform=axes.transAxes)
    return figure


@styled
def saved(figure: "Figure", stem: Path) -> list[Path]:
    """Write a figure as PNG and PDF."""
    png, pdf = stem.with_suffix(".png"), stem.with_suffix(".pdf")
    # No date and no program: the same table gives the same bytes.
    figure.savefig(png, dpi=DOTS_PER_INCH, metadata={"Software": None})
    figure.savefig(pdf, dpi=DOTS_PER_INCH, metadata={"CreationDate": None, "Creator": None, "Producer": None})
    return [png, pdf]
