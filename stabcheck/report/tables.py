"""The answer as text for a terminal, at most 100 columns wide."""

import math
import textwrap
from collections.abc import Iterator, Mapping, Sequence

import numpy as np

from stabcheck.report.answer import Answer
from stabcheck.report.constrained import FEWEST_FOR_SHIFT, ConstrainedRow, Limits
from stabcheck.report.intervals import Fraction
from stabcheck.report.spans import Range, brief
from stabcheck.report.survival import SurvivalCurve

WIDTH = 100
SHIFTS_SHOWN = 5
LONGEST_NAME = 24
LONGEST_NUMBER = 13
"""Five of these and a name fit a line; dates with errors below a second lose digits here, not in the JSON."""


def as_text(answer: Answer, *, limits: bool = True) -> str:
    """Write the whole answer as aligned text.

    Parameters
    ----------
    answer : Answer
    limits : bool
        Whether to list all limits of every parameter, before and after.

    Returns
    -------
    str
        Lines of at most 100 characters; no colour, nothing beyond what a plain terminal shows.
    """
    sections = (
        _head(answer),
        _fractions(answer),
        _spans(answer),
        _survival(answer.survival),
        _constrained(answer),
        _limits(answer) if limits else iter(()),
        _numerics(answer),
        _cautions(answer),
        _provenance(answer),
    )
    return "\n\n".join("\n".join(section) for section in map(list, sections) if section) + "\n"


def headline(answer: Answer) -> str:
    """Write the counts and fractions alone, for the end of a run and for progress."""
    return "\n\n".join("\n".join(section) for section in (_head(answer), _fractions(answer))) + "\n"


def aligned(rows: Sequence[Sequence[str]], left: int = 1) -> list[str]:
    """Columns as wide as they must be; the first ``left`` to the left, the others to the right."""
    widths = [max(len(row[column]) for row in rows) for column in range(len(rows[0]))]
    return [
        "  ".join(
            text.ljust(width) if column < left else text.rjust(width)
            for column, (text, width) in enumerate(zip(row, widths, strict=True))
        ).rstrip()
        for row in rows
    ]


def _head(answer: Answer) -> Iterator[str]:
    counts = answer.counts
    yield from _wrapped(answer.facts.title)
    state = "PRELIMINARY: " if answer.is_preliminary else ""
    yield from _wrapped(f"{state}{counts.settled} of {counts.asked} draws settled, {counts.orbits} of them orbits")
    if counts.finished_later:
        yield f"finished later ones, not used because broken draws finish first: {counts.finished_later}"
    for reason, number in counts.refused.items():
        yield from _wrapped(f"{number} not an orbit: {reason}", indent="  ")
    if counts.orbits and not math.isclose(counts.effective, counts.orbits):
        yield f"worth {counts.effective:.1f} independent draws (weights, repeated rows)"


def _fractions(answer: Answer) -> Iterator[str]:
    limits = f"{100 * answer.confidence:g} % limits"
    rows: list[tuple[str, ...]] = [("of the orbits", "draws", "unknown", "share", limits)]
    rows += [_fraction_row(one) for one in (answer.survived, answer.kept)]
    rows += [_fraction_row(one, "  ") for one in answer.verdicts]
    rows += [_fraction_row(one, "  by ") for one in answer.endings if one.count]
    names = {"survived": "survived (stayed bound)", "kept": "survived, not rearranged"}
    return iter(aligned([(names.get(row[0], row[0]), *row[1:]) for row in rows]))


def _fraction_row(one: Fraction, indent: str = "") -> tuple[str, ...]:
    least, most = share_text(one.share_least), share_text(one.share_most)
    share = least if one.unknown == 0 or one.name == "unknown" else f"{least} .. {most}"
    bracket = f"{share_text(one.lower)} to {share_text(one.upper)}"
    open_ = "" if one.name == "unknown" else str(one.unknown)
    return indent + one.name, str(one.count), open_, share, bracket


def share_text(share: float) -> str:
    """Four decimals: the limits of 0 of 5000 must not read as 0."""
    return "-" if math.isnan(share) else f"{share:.4f}"


def _spans(answer: Answer) -> Iterator[str]:
    spans = answer.spans
    rows = [("span asked", spans.asked)]
    units: tuple[tuple[str, Range], ...] = (
        ("years", spans.years),
        ("inner orbits", spans.inner_orbits),
        ("outer orbits", spans.outer_orbits),
        ("slowest secular cycles", spans.secular_cycles),
        ("stellar ages", spans.stellar_ages),
    )
    rows += [(f"  in {name}", brief(value) if math.isfinite(value.middle) else "not known") for name, value in units]
    return iter(aligned(rows, left=2))


def _survival(curve: SurvivalCurve) -> Iterator[str]:
    if not curve.time.size:
        return
    rows = [(f"survives beyond [{curve.unit}]", "share", f"{100 * curve.confidence:g} % limits")]
    for at in _decades(curve):
        least, most = share_text(curve.share_least[at]), share_text(curve.share_most[at])
        share = least if least == most else f"{least} .. {most}"
        rows.append((f"  {curve.time[at]:.3g}", share, f"{curve.lower[at]:.4f} to {curve.upper[at]:.4f}"))
    yield from aligned(rows)
    yield from _wrapped(curve.note, indent="  ")


def _decades(curve: SurvivalCurve) -> list[int]:
    """About two points a decade, always with the last."""
    last = curve.time.size - 1
    decades = math.log10(curve.time[-1] / curve.time[0])
    points = max(2, min(12, round(2 * decades) + 1))
    return sorted({round(share * last) for share in np.linspace(0, 1, points)})


def _constrained(answer: Answer) -> Iterator[str]:
    table = answer.constrained
    if not table.rows:
        return
    yield "parameters before and after: median ± half the central 68 %; after = survived, not rearranged"
    rows = [("parameter", "before", "after", "shift/sigma", "width")]
    yield from aligned(rows + [_row(row) for row in table.rows])
    numbers = (table.effective_before, table.effective_kept, table.effective_regular)
    yield "effective draws: {:.1f} before, {:.1f} after, {:.1f} after and regular".format(*numbers)
    shifted = [f"{row.name} ({row.shift:+.2f})" for row in table.by_shift()[:SHIFTS_SHOWN]]
    if table.effective_kept < FEWEST_FOR_SHIFT:
        yield from _wrapped(
            f"fewer than {FEWEST_FOR_SHIFT} independent draws live: no error of a shift is given, none is singled out"
        )
    elif shifted:
        yield from _wrapped("most shifted: " + ", ".join(shifted))
        yield from _wrapped(
            f"(± is what chance alone leaves of a shift if those that live were a random part of all; of "
            f"{len(table.rows)} parameters, some go beyond twice that by chance)"
        )


def _limits(answer: Answer) -> Iterator[str]:
    table = answer.constrained
    for title, chosen in (("before", "before"), ("after", "kept"), ("after and regular", "regular")):
        if not table.rows:
            return
        yield from [""] if title != "before" else []
        header = (f"limits {title}", "2.5 %", "16 %", "50 %", "84 %", "97.5 %")
        yield from aligned([header, *((_name(row), *_five(getattr(row, chosen), decimals(row))) for row in table.rows)])


def _row(row: ConstrainedRow) -> tuple[str, ...]:
    error = "" if math.isnan(row.shift_error) else f" ± {row.shift_error:.2f}"
    shift = "-" if math.isnan(row.shift) else f"{row.shift:+.2f}{error}"
    width = "-" if math.isnan(row.narrowing) else f"{row.narrowing:.2f}"
    digits = decimals(row)
    return _name(row), _middle(row.before, digits), _middle(row.kept, digits), shift, width


def _name(row: ConstrainedRow) -> str:
    unit = f" [{row.unit}]" if row.unit else ""
    room = LONGEST_NAME - len(unit)
    return (row.name if len(row.name) <= room else row.name[: room - 17] + "..." + row.name[-14:]) + unit


def _middle(limits: Limits, digits: int) -> str:
    if not math.isfinite(limits.median):
        return "-"
    if not limits.directed:
        return "all round"
    return f"{limits.median:.{digits}f} ± {limits.sigma:.{digits}f}"


def _five(limits: Limits, digits: int) -> list[str]:
    if not math.isfinite(limits.median) or not limits.directed:
        return ["" if math.isfinite(limits.median) else "-"] * 4 + [_middle(limits, digits)]
    return [f"{value:.{digits}f}" for value in limits.values]


def decimals(row: ConstrainedRow) -> int:
    """As many as show two digits of the smaller half-width, before or after, if there is room."""
    widths = [limits.sigma for limits in (row.before, row.kept) if limits.sigma > 0]
    largest = max((abs(value) for value in row.before.values if math.isfinite(value)), default=0.0)
    room = LONGEST_NUMBER - len(f"-{largest:.0f}.")
    return max(0, min(room, 1 - math.floor(math.log10(min(widths))))) if widths else 4


def _numerics(answer: Answer) -> Iterator[str]:
    found = answer.numerics
    rows = [("numerics", "")]
    rows += [("  method at the end", _listed(found.methods)), ("  trust", _listed(found.trust))]
    times = f"; in all {found.times_handed} times, given back {found.times_returned}" if found.handovers else ""
    rows += [("  handed over", (_listed(found.handovers) or "none") + times)]
    rows += [("  restarts", _listed(found.restarts) or "none")]
    ranked = (
        ("  step [d]", found.step_d),
        ("  |energy error|", found.energy_error),
        ("  same, smallest orbit", found.orbit_energy_error),
        ("  steps per periastron", found.steps_per_periastron),
    )
    rows += [(name, _ranks(values)) for name, values in ranked]
    yield from (line for row in rows for line in _hanging(*row))
    yield "  (least, median, 90 %, 99 %, largest; energy errors of trusted draws)"


def _hanging(name: str, text: str) -> list[str]:
    return textwrap.wrap(f"{name:<24}{text}", WIDTH, subsequent_indent=" " * 24, drop_whitespace=True) or [name]


def _ranks(values: tuple[float, ...]) -> str:
    return "  ".join(f"{value:.3g}" for value in values) or "not measured"


def _listed(numbers: Mapping[str, int]) -> str:
    return ", ".join(f"{word} {number}" for word, number in numbers.items())


def _cautions(answer: Answer) -> Iterator[str]:
    yield "keep in mind"
    for sentence in answer.cautions:
        yield from textwrap.wrap(sentence, WIDTH, initial_indent="  - ", subsequent_indent="    ")


def _provenance(answer: Answer) -> Iterator[str]:
    facts = answer.facts
    yield from _wrapped("made with " + ", ".join(f"{name} {version}" for name, version in facts.versions.items()))
    yield from _wrapped(f"seed {facts.seed}; repeat with: {facts.command}")


def _wrapped(text: str, indent: str = "") -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent=indent, subsequent_indent=indent)
