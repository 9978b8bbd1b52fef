"""What was understood from a scenario, what it implies, and what a run will cost: the library twin of ``preview``."""

import math
from collections.abc import Iterator
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

from stabcheck.build import States, states
from stabcheck.constants import YEAR_D
from stabcheck.ensemble import Ensemble, central, phase_error_deg, source
from stabcheck.planning import plan_of
from stabcheck.preview import cautions, text
from stabcheck.preview.cost import cost_of
from stabcheck.preview.orbits import elements_in, other_reading, pairs_of, planets_of
from stabcheck.preview.parts import CostFacts, FrameFacts, PairFacts, PlanetFacts, RateFacts, SpanFacts
from stabcheck.preview.rates import DEG_CENTURY, modes_rad_d, rates_of
from stabcheck.scenario import Frame, Scenario, Span, SpanKind
from stabcheck.span import span_d
from stabcheck.store.identity import plain
from stabcheck.velocity import departure_m_s

__all__ = ["Preview", "understood"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Preview:
    """What a scenario says and implies, at its central values.

    Attributes
    ----------
    title, frame, fit, epoch, time_scale, span_asked : str
        ``time_scale`` is the one of the times below; without an epoch they are days after it.
    star_mass_msun, star_radius_au, star_age_yr : float
        NaN where not given.
    order_changed : bool
        Whether the bodies are in another order than in the file: they are sorted by period.
    defaults : tuple of (key, value)
    planets, pairs, rates, other_frame : tuples, one entry a body or pair
    modes_deg_century : tuple of float
        Secular apsidal modes, slowest first.
    departure_m_s : float
        Largest departure of the N-body velocity curve from the Keplerian sum; NaN if not asked for.
    cost : CostFacts or None
        None if the central values are not an orbit, or cannot be integrated by the method.
    cautions : tuple of str
    """

    title: str
    frame: str
    fit: str
    epoch: str
    time_scale: str
    span_asked: str
    relativity: bool
    star_mass_msun: float
    star_radius_au: float
    star_age_yr: float
    order_changed: bool
    defaults: tuple[tuple[str, str], ...]
    planets: tuple[PlanetFacts, ...]
    pairs: tuple[PairFacts, ...]
    rates: tuple[RateFacts, ...]
    modes_deg_century: tuple[float, ...]
    other_frame: tuple[FrameFacts, ...]
    span: SpanFacts
    departure_m_s: float
    cost: CostFacts | None
    cautions: tuple[str, ...]

    def as_dict(self) -> dict[str, Any]:
        """Plain numbers, words, lists and dicts, ready for JSON; what is not known is None."""
        made: dict[str, Any] = plain(asdict(self))
        return made

    def as_text(self) -> str:
        """Lines of at most 100 characters for a terminal (tables of long names may be wider)."""
        sections = [
            self._head(),
            text.planet_lines(self.planets),
            text.time_lines(self.planets, self.time_scale),
            text.pair_lines(self.pairs) if self.pairs else (),
            text.rate_lines(self.rates, self.modes_deg_century, relativity=self.relativity),
            text.frame_lines(self.other_frame, self.frame) if len(self.other_frame) > 1 else (),
            text.wrapped(text.span_line(self.span_asked, self.span)),
            text.cost_lines(self.cost) if self.cost else (),
            (line for key, value in self.defaults for line in text.wrapped(f"default {key}: {value}", "", "    ")),
            (line for caution in self.cautions for line in text.wrapped(caution, "! ", "  ")),
        ]
        return "\n\n".join("\n".join(lines) for lines in map(list, sections) if lines) + "\n"

    def _head(self) -> Iterator[str]:
        yield from text.wrapped(self.title or "(no title)")
        kind = "jacobi elements of cartesian states"
        if self.frame != Frame.CARTESIAN:
            kind = f"{self.frame} elements of a {self.fit} fit"
        yield from text.wrapped(
            f"{len(self.planets)} bodies, {kind}, epoch {self.epoch}; star "
            f"{text.mass_text(self.star_mass_msun)}; central values"
        )
        order = ", ".join(one.name for one in self.planets)
        yield f"sorted by period, not as in the file: {order}" if self.order_changed else f"by period: {order}"


def understood(scenario: Path | Scenario, *, draws: int = 1000) -> Preview:
    """Say what was understood from a scenario, what it implies, and how long a run will take here.

    Parameters
    ----------
    scenario : Path or Scenario
    draws : int
        How many draws to plan for.

    Returns
    -------
    Preview

    Raises
    ------
    ScenarioError
        If the scenario cannot be used; the message says what would do.
    SampleFileError
        If its sample file cannot be used.
    """
    asked = scenario if isinstance(scenario, Scenario) else Scenario.read(Path(scenario))
    opened = source(asked)
    row = central(opened)
    epoch = asked.elements.epoch
    modes = tuple(float(rate) * DEG_CENTURY for rate in modes_rad_d(row, relativity=asked.physics.relativity))
    pairs, rates = pairs_of(row), rates_of(row)
    span = _span_facts(asked, row)
    built = None if row.refused[0] else states(row)
    frame = other_reading(row) if built and row.frame != Frame.CARTESIAN and len(row.bodies) > 1 else ()
    departure = _departure(asked, row, built)
    cost = _cost(asked, row, built, span, draws) if built and math.isfinite(span.years) else None
    warned = (
        *cautions.not_an_orbit(row),
        *cautions.about_the_draws(asked, row, phase_error_deg(opened)),
        *cautions.about_the_system(row, pairs, frame),
        *cautions.about_the_physics(asked, rates, modes),
        *cautions.about_the_fit(asked, departure),
        *cautions.about_the_span(span),
        *cautions.about_the_cost(asked, bool(built) and cost is None and math.isfinite(span.years)),
    )
    return Preview(
        title=asked.title,
        frame=str(asked.elements.frame),
        fit=str(asked.elements.fit),
        epoch=str(epoch) if epoch else "not given",
        time_scale=epoch.scale if epoch else "days after it",
        span_asked=str(asked.integration.span),
        relativity=asked.physics.relativity,
        star_mass_msun=float(row.star_mass_msun[0]),
        star_radius_au=float(row.star_radius_au[0]) or math.nan,
        star_age_yr=asked.star.age.central / YEAR_D if asked.star.age else math.nan,
        order_changed=row.bodies != asked.body_names,
        defaults=tuple(asked.defaults_used()),
        planets=planets_of(row, epoch.bjd if epoch else 0.0),
        pairs=pairs,
        rates=rates,
        modes_deg_century=modes,
        other_frame=frame,
        span=span,
        departure_m_s=departure,
        cost=cost,
        cautions=warned,
    )


def _span_facts(asked: Scenario, row: Ensemble) -> SpanFacts:
    def days(span: Span) -> float:
        return float(span_d(span, row, relativity=asked.physics.relativity)[0])

    length_d = days(asked.integration.span)
    cycle_d = days(Span(1.0, SpanKind.SECULAR_CYCLES))
    return SpanFacts(
        years=length_d / YEAR_D,
        inner_orbits=length_d / days(Span(1.0, SpanKind.INNER_ORBITS)),
        outer_orbits=length_d / days(Span(1.0, SpanKind.OUTER_ORBITS)),
        secular_cycles=0.0 if math.isnan(cycle_d) else length_d / cycle_d,
        star_ages=length_d / asked.star.age.central if asked.star.age else math.nan,
    )


def _departure(asked: Scenario, row: Ensemble, built: States | None) -> float:
    data_span_d = asked.elements.data_span
    if built is None or data_span_d is None or len(row.bodies) < 2:
        return math.nan
    return departure_m_s(row, 0, data_span_d, built).largest_m_s


def _cost(asked: Scenario, row: Ensemble, built: States, span: SpanFacts, draws: int) -> CostFacts | None:
    return cost_of(
        built,
        elements_in(Frame.JACOBI, built),
        row.period_d[0],
        span.years * YEAR_D,
        plan_of(asked),
        draws=draws,
        parameters=len(row.parameters),
    )
