"""A preview as text for a terminal, at most 100 columns wide: one function a section, lines out."""

import math
import textwrap
from collections.abc import Iterator, Sequence

from stabcheck.constants import EARTH_MSUN, EARTH_RADIUS_AU, JUPITER_MSUN, YEAR_D
from stabcheck.preview.parts import CostFacts, FrameFacts, PairFacts, PlanetFacts, RateFacts, SpanFacts

WIDTH = 100
STAR_FROM_MSUN, GIANT_FROM_MSUN = 0.05, 100.0 * EARTH_MSUN
"""From here on masses are printed in that of the Sun, of Jupiter."""


def columns(rows: Sequence[Sequence[str]]) -> Iterator[str]:
    """Align a table: the first column to the left, the others to the right."""
    widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
    for first, *others in rows:
        cells = [first.ljust(widths[0]), *(text.rjust(width) for text, width in zip(others, widths[1:], strict=True))]
        yield "  ".join(cells).rstrip()


def wrapped(text: str, first: str = "", later: str = "  ") -> list[str]:
    """Break a sentence into lines."""
    return textwrap.wrap(text, WIDTH, initial_indent=first, subsequent_indent=later, break_long_words=False)


def planet_lines(planets: Sequence[PlanetFacts]) -> Iterator[str]:
    """Elements at the central values."""
    head = ("", "P (d)", "a (au)", "e", "ω planet", "ω star", "M", "i", "node", "K (m/s)", "mass", "radius")
    yield from columns([head, *(_planet_row(one) for one in planets)])


def _planet_row(one: PlanetFacts) -> tuple[str, ...]:
    angles = (one.omega_planet_deg, one.omega_star_deg, one.mean_anomaly_deg, one.inclination_deg, one.node_deg)
    return (
        one.name,
        f"{one.period_d:.7g}",
        f"{one.semi_major_axis_au:.5g}",
        f"{one.eccentricity:.4g}",
        *(f"{angle:.1f}°" for angle in angles),
        f"{one.semi_amplitude_m_s:.4g}",
        mass_text(one.mass_msun),
        f"{one.radius_au / EARTH_RADIUS_AU:.3g} Rearth" if one.radius_au > 0.0 else "point",
    )


def mass_text(mass_msun: float) -> str:
    """A mass in the unit that people use for its kind."""
    if mass_msun >= STAR_FROM_MSUN:
        return f"{mass_msun:.4g} Msun"
    if mass_msun >= GIANT_FROM_MSUN:
        return f"{mass_msun / JUPITER_MSUN:.4g} Mjup"
    return f"{mass_msun / EARTH_MSUN:.4g} Mearth"


def time_lines(planets: Sequence[PlanetFacts], scale: str) -> Iterator[str]:
    """Next conjunctions and periastra: a wrong ω is seen here at once."""
    head = ("next at or after the epoch, " + scale, "inferior conjunction (transit side)", "periastron")
    rows = ((one.name, f"{one.conjunction:.4f}", _or_dash(one.periastron, ".4f")) for one in planets)
    yield from columns([head, *rows])


def pair_lines(pairs: Sequence[PairFacts]) -> Iterator[str]:
    """Neighbours."""
    head = (
        "neighbours",
        "period ratio",
        "nearest p:q",
        "offset",
        "separation (mutual Hill radii)",
        "mutual inclination",
    )
    yield from columns([head, *(_pair_row(pair) for pair in pairs)])


def _pair_row(pair: PairFacts) -> tuple[str, ...]:
    near = f"{pair.resonance[0]}:{pair.resonance[1]}" if pair.resonance else "none"
    offset = f"{100 * pair.offset:+.2f} %" if pair.resonance else ""
    return (
        f"{pair.inner}-{pair.outer}",
        f"{pair.period_ratio:.5g}",
        near,
        offset,
        f"{pair.separation_hill:.3g}",
        f"{pair.mutual_inclination_deg:.3g}°",
    )


def rate_lines(rates: Sequence[RateFacts], modes_deg_century: Sequence[float], *, relativity: bool) -> Iterator[str]:
    """What turns the orbits, side by side."""
    head = ("turn of periastron (deg/century)", "relativity", "tide *", "tide rounds e in *")
    yield from columns([head, *(_rate_row(one) for one in rates)])
    modes = ", ".join(f"{rate:.3g}" for rate in modes_deg_century) or "none"
    added = "with relativity" if relativity else "without relativity"
    slowest = f"; slowest cycle {duration(36_000.0 / abs(modes_deg_century[0]) * YEAR_D)}" if modes_deg_century else ""
    yield from wrapped(f"secular modes (Laplace-Lagrange, {added}): {modes} deg/century{slowest}")
    if assumed := sorted(
        {(one.love_number, one.quality_factor) for one in rates if not math.isnan(one.tide_deg_century)}
    ):
        said = ", or ".join(f"k2 = {love:g} and Q = {quality:g}" for love, quality in assumed)
        yield from wrapped(f"* equilibrium tide in the planet, {said} assumed: uncertain by a factor of ten or more")
    else:
        yield "* not computed: no planet has a radius"


def _rate_row(one: RateFacts) -> tuple[str, ...]:
    rounding = "-" if math.isnan(one.circularisation_yr) else duration(one.circularisation_yr * YEAR_D)
    return one.name, f"{one.relativity_deg_century:.3g}", _or_dash(one.tide_deg_century, ".3g"), rounding


def frame_lines(frame: Sequence[FrameFacts], stated: str) -> Iterator[str]:
    """The other reading of the table."""
    head = (f"if these were not {stated} elements", "period", "e")
    rows = ((one.name, f"{100 * one.period_shift:+.3f} %", f"{one.eccentricity_shift:+.4f}") for one in frame)
    yield from columns([head, *rows])


def span_line(asked: str, span: SpanFacts) -> str:
    """The span in all its units."""
    if math.isnan(span.years):
        return f"span {asked}: not defined for the central values"
    cycles = f"{span.secular_cycles:.3g} slowest secular cycles" if span.secular_cycles > 0.0 else "no secular cycle"
    age = "age of the star not given" if math.isnan(span.star_ages) else f"{span.star_ages:.2g} of the star's age"
    return (
        f"span {asked}: {duration(span.years * YEAR_D)}, {span.inner_orbits:.3g} inner orbits, "
        f"{span.outer_orbits:.3g} outer orbits, {cycles}, {age}"
    )


def cost_lines(cost: CostFacts) -> Iterator[str]:
    """Method, time and disk; the caution stands beside the number."""
    step = "steps of its own choice" if math.isnan(cost.step_d) else f"steps of {cost.step_d:.4g} d"
    yield from wrapped(f"method {cost.method}, {step}, {cost.steps_per_draw:.2g} a draw: {cost.why}")
    each, total = duration(cost.seconds_per_draw / 86_400.0), duration(cost.seconds / 86_400.0)
    cores = "1 core" if cost.cores == 1 else f"{cost.cores} cores"
    yield from wrapped(
        f"{cost.draws} draws: about {total} here on {cores} ({each} a draw and core), an estimate from a moment of "
        "plain steps as if every draw were followed to its span; broken draws end early, close encounters cost more"
    )
    size = cost.bytes_per_draw * cost.draws / 1e6
    yield from wrapped(
        f"run file about {size:.2g} MB ({cost.bytes_per_draw / 1e3:.1f} kB a draw), besides checkpoints while it runs; "
        f"a fraction near one half will be known to ± {cost.half_width:.2g} (95 %), if no draw stays unknown"
    )


def duration(days: float) -> str:
    """A length of time in the unit that makes it readable."""
    if not math.isfinite(days):
        return "never"
    for unit, length_d in (
        ("Gyr", 1e9 * YEAR_D),
        ("Myr", 1e6 * YEAR_D),
        ("kyr", 1e3 * YEAR_D),
        ("yr", YEAR_D),
        ("d", 1.0),
    ):
        if days >= length_d:
            return f"{days / length_d:.3g} {unit}"
    for unit, length_d in (("h", 1.0 / 24.0), ("min", 1.0 / 1440.0)):
        if days >= length_d:
            return f"{days / length_d:.2g} {unit}"
    return f"{days * 86_400.0:.2g} s"


def _or_dash(value: float, form: str) -> str:
    return "-" if math.isnan(value) else format(value, form)
