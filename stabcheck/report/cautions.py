"""What a reader of the answer must know before believing it, in plain sentences."""

from collections.abc import Iterator

import numpy as np

from stabcheck.chaos.megno import SETTLED_CYCLES
from stabcheck.report.constrained import FEWEST_EFFECTIVE, ConstrainedTable
from stabcheck.report.spans import Spans
from stabcheck.report.table_of_draws import RunTable

FEW_CYCLES = SETTLED_CYCLES
"""A span of fewer slow secular cycles has not shown what eccentricities come to."""


def cautions_of(table: RunTable, orbits: RunTable, spans: Spans, constrained: ConstrainedTable) -> tuple[str, ...]:
    """List what limits this answer.

    Parameters
    ----------
    table, orbits : RunTable
        All settled draws, and those of them that are orbits.
    spans : Spans
    constrained : ConstrainedTable

    Returns
    -------
    tuple of str
    """
    if not len(orbits):
        return ("No draw is settled as an orbit, so there is nothing to conclude yet.", *_refused(table))
    parts = (_span(spans), _source(table), _refused(table), _sample(constrained), _counts(orbits), _physics(table))
    return tuple(sentence for part in parts for sentence in part)


def _span(spans: Spans) -> Iterator[str]:
    yield f"'survived' and every verdict mean: within the span followed, {spans.in_words()}; nothing is extrapolated."
    if not np.isfinite(spans.stellar_ages.middle):
        yield "The star's age is not given, so the span is not compared with it."
    if spans.secular_cycles.least < FEW_CYCLES:
        yield (
            f"The span is only {spans.secular_cycles.least:.2g} cycles of the slowest secular mode: a draw that looks "
            f"calm is called regular from {FEW_CYCLES:g} cycles on and unsettled before."
        )
    yield (
        "MEGNO alone neither condemns nor acquits: chaotic draws survived their span, "
        "and draws near 2 may still turn out chaotic later."
    )


def _source(table: RunTable) -> Iterator[str]:
    facts = table.facts
    if facts.source == "table":
        yield (
            "The draws come from a table of values and errors: that its errors are independent is an assumption, "
            "and correlations between parameters of the fit are lost."
        )
    yield "A set of medians, here or in a table, is not a solution: take rows of the exported table instead."
    if facts.fit == "keplerian":
        yield _keplerian(facts.keplerian_departure_m_s)


def _keplerian(departure_m_s: float) -> str:
    start = "The elements are those of a sum of Keplerian orbits, taken as osculating at the epoch"
    if not np.isfinite(departure_m_s):
        return f"{start}; how far the integrated velocity curve departs from that sum was not computed."
    largest = f"{departure_m_s:.2g} m/s in the first few orbits"
    return f"{start}; over the data the integrated velocity curve departs from that sum by up to {largest}."


def _refused(table: RunTable) -> Iterator[str]:
    refused = int((~table.is_orbit).sum())
    if refused:
        yield (
            f"{refused} of {len(table)} draws are not orbits and were left out, neither clipped nor drawn again: "
            "this shapes the prior that 'before' shows."
        )


def _sample(constrained: ConstrainedTable) -> Iterator[str]:
    for which, number in (
        ("orbits", constrained.effective_before),
        ("orbits that live", constrained.effective_kept),
        ("regular orbits", constrained.effective_regular),
    ):
        if number < FEWEST_EFFECTIVE:
            yield (
                f"Only {number:.0f} effective draws of the {which} are left (below {FEWEST_EFFECTIVE}): "
                "limits and shifts made from them are coarse."
            )


def _counts(orbits: RunTable) -> Iterator[str]:
    unknown = int((orbits.verdict == "unknown").sum())
    if unknown:
        yield (
            f"The fate of {unknown} draws is unknown; each fraction runs from none to all of them counted in, "
            "and no draw is left out for it."
        )
    stopped = int((orbits.outcome.ending == "distance rule").sum())
    if stopped:
        yield f"{stopped} draws were stopped by a distance rule of the scenario, which is not a physical end."
    if _is_flat(orbits):
        yield (
            "All orbits of a draw lie in exactly one plane: planets that cross there collide far more often, and are "
            "ejected or fall into the star less often, than planets whose planes differ by a degree."
        )


def _is_flat(orbits: RunTable) -> bool:
    angles = [orbits.elements[name] for name in ("inclination_rad", "node_rad") if name in orbits.elements]
    return len(orbits.bodies) > 1 and len(angles) == 2 and all(bool(np.all(angle == angle[:, :1])) for angle in angles)


def _physics(table: RunTable) -> Iterator[str]:
    left_out = ["tides", "planets that nobody has seen"]
    if not table.facts.plan.get("relativity", False):
        left_out.insert(1, "relativity")
    yield f"Not modelled: {', '.join(left_out[:-1])} and {left_out[-1]}."
    if not table.facts.physical_radii:
        yield "Planets without a radius are points: they cannot collide; what would have is counted as what came after."
