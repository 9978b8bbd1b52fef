"""The methods paragraph of a run and the references of exactly what it did."""

import math
import textwrap
from collections.abc import Iterator

from stabcheck.report.answer import Answer
from stabcheck.report.references import STEPS, bibtex_of, keys_of
from stabcheck.report.spans import Range, brief

WIDTH = 100
CITED_PACKAGES = ("numpy", "scipy", "matplotlib", "numba")


def steps_taken(answer: Answer) -> tuple[str, ...]:
    """Name everything this run did that somebody is to be cited for, in the order of the paragraph.

    Parameters
    ----------
    answer : Answer

    Returns
    -------
    tuple of str
        Keys of ``references.STEPS``.
    """
    facts, numerics = answer.facts, answer.numerics
    found = (
        ("jacobi elements of a velocity fit", facts.frame == "jacobi" and facts.fit == "keplerian"),
        (f"radii {facts.mass_radius}", bool(facts.mass_radius)),
        (f"engine {facts.engine}", bool(numerics.methods)),
        *((f"method {method}", True) for method in _methods(answer)),
        ("step rule", numerics.map_steps > 0 or bool(numerics.step_d)),
        ("secular cycles", math.isfinite(answer.spans.secular_cycles.middle)),
        ("relativity", bool(facts.plan.get("relativity", False))),
        ("megno", numerics.measured_megno > 0),
        ("frequency drift", numerics.measured_drift > 0),
        ("wilson limits", True),
        ("effective number", True),
        *((f"package {name}", name in facts.versions) for name in CITED_PACKAGES),
    )
    return tuple(step for step, taken in found if taken)


def methods_text(answer: Answer) -> str:
    """Write the methods paragraph, wrapped, with citation keys in square brackets.

    Raises
    ------
    StabcheckError
        If the run took a step that has no reference.
    """
    keys_of(steps_taken(answer))
    paragraphs = (_draws(answer), _integration(answer), _indicators(answer), _statistics(answer), _software(answer))
    return "\n\n".join(textwrap.fill(" ".join(sentences), WIDTH) for sentences in paragraphs) + "\n"


def bibtex(answer: Answer) -> str:
    """Write BibTeX of exactly what the run did, in the order of the methods paragraph."""
    return bibtex_of(keys_of(steps_taken(answer)))


def _methods(answer: Answer) -> tuple[str, ...]:
    """Methods in use at an end, and those that began, or resolved encounters in between, and gave the draw over."""
    begun = answer.facts.plan.get("method", "auto")
    handed = bool(answer.numerics.handovers)
    first = begun if begun != "auto" else "whfast"
    taken = [*([first] if answer.numerics.map_steps > 0 else []), "ias15"] if handed else []
    return tuple(dict.fromkeys([*answer.numerics.methods, *taken]))


def _cite(*steps: str) -> str:
    return "[" + ", ".join(key for step in steps for key in STEPS[step]) + "]"


def _draws(answer: Answer) -> Iterator[str]:
    facts, counts = answer.facts, answer.counts
    source = {
        "table": "from a table of values and errors, taken as independent",
        "samples": "as rows of a posterior sample, so that correlations are kept",
    }[facts.source]
    some = "the first " if answer.is_preliminary else ""
    yield f"We drew {some}{counts.settled} sets of elements and masses {source} (seed {facts.seed})."
    refused = sum(counts.refused.values())
    if refused:
        reasons = "; ".join(f"{reason}: {number}" for reason, number in counts.refused.items())
        yield f"Of these, {refused} are not orbits and were left out without replacement ({reasons})."
    if facts.source == "table":
        yield (
            "Unequal errors were read as median and central 68 %, half of the probability on each side; an upper limit "
            "as a half-normal with that quantile."
        )
    yield _frame(answer)
    if facts.mass_radius:
        yield f"Radii follow the mass-radius relation {_cite(f'radii {facts.mass_radius}')}."


def _frame(answer: Answer) -> str:
    facts = answer.facts
    kind = {
        "keplerian": "come from a sum of Keplerian orbits and are used as osculating at the epoch",
        "dynamical": "are osculating at the epoch",
    }.get(facts.fit, "are given at the epoch")
    if facts.frame == "cartesian":
        return "The draws are positions and velocities at the epoch."
    cited = (
        f" {_cite('jacobi elements of a velocity fit')}" if (facts.frame, facts.fit) == ("jacobi", "keplerian") else ""
    )
    return f"Elements are {facts.frame}{cited} and {kind}. {facts.inclinations}".rstrip()


def _integration(answer: Answer) -> Iterator[str]:
    facts, numerics, plan = answer.facts, answer.numerics, answer.facts.plan
    if not numerics.methods:
        yield "No draw was integrated."
        return
    yield f"Each of the {answer.counts.orbits} orbits was followed for {facts.span} ({_span(answer)}) or to its end"
    yield f"with {facts.engine.upper()} {facts.versions.get(facts.engine, '')} {_cite(f'engine {facts.engine}')}."
    total = sum(numerics.methods.values())
    shares = [f"{m.upper()} {_cite(f'method {m}')} for {100 * n / total:.1f} %" for m, n in numerics.methods.items()]
    yield f"The method in use at the end was {', '.join(shares)} of the draws."
    if numerics.step_d:
        yield _step_rule(answer)
    if numerics.handovers:
        yield _handovers(answer)
    if plan.get("relativity", False):
        yield f"Relativity was included as a potential that moves the periastron at its rate {_cite('relativity')}."
    else:
        yield "Relativity was left out."
    yield "Tides and unseen planets were left out."
    if numerics.energy_error:
        yield (
            f"Relative energy errors of trusted draws have a median of {numerics.energy_error[1]:.1e} and stay below "
            f"{numerics.energy_error[-1]:.1e}."
        )
    yield _endings(answer)


def _span(answer: Answer) -> str:
    spans = answer.spans
    known = [(spans.years, "yr"), (spans.inner_orbits, "orbits of the innermost planet")]
    known += [
        (spans.outer_orbits, "of the outermost"),
        (spans.secular_cycles, f"cycles of the slowest secular mode {_cite('secular cycles')}"),
    ]
    words = [f"{brief(value)} {unit}" for value, unit in known if math.isfinite(value.middle)]
    if math.isfinite(spans.stellar_ages.middle):
        words.append(f"{100 * spans.stellar_ages.middle:.2g} % of the star's age")
    return ", ".join(words)


def _step_rule(answer: Answer) -> str:
    plan, numerics = answer.facts.plan, answer.numerics
    restarts, steps = sum(numerics.restarts.values()), (numerics.step_d[0], numerics.step_d[1], numerics.step_d[-1])
    return (
        f"Maps took a fixed step of 1/{plan['steps_per_periastron']:g} of the shortest effective period at periastron "
        f"{_cite('step rule')}, {brief(Range(*steps))} d; a draw whose step became coarser than "
        f"1/{plan['fewest_steps_per_periastron']:g} began again with a smaller one, at most "
        f"{plan['most_restarts']} times ({restarts} draws did)."
    )


def _handovers(answer: Answer) -> str:
    plan, numerics = answer.facts.plan, answer.numerics
    reasons = ", ".join(f"{reason}: {number}" for reason, number in numerics.handovers.items())
    return (
        f"Where two planets came within {plan['handover_hill']:g} momentary mutual Hill radii (with the distances from "
        "the centre of mass of all inside in place of the axes), or an orbit became unbound, a draw was "
        f"followed on by IAS15 {_cite('method ias15')} from a stored state at least one outer orbit before, and given "
        f"back to the map after ten quiet outer orbits (draws: {reasons}; {numerics.times_handed} times in all, "
        f"{numerics.times_returned} given back)."
    )


def _endings(answer: Answer) -> str:
    plan, given = answer.facts.plan, answer.facts.plan.get("ejection_distance_au")
    distance = (
        f"{given:g} au"
        if given is not None and math.isfinite(given)
        else f"{plan['ejection_axes']:g} times the largest initial semi-major axis"
    )
    return (
        f"A planet is ejected when it is unbound and further than {distance} from the barycentre; a draw is called "
        f"rearranged when it survives and a semi-major axis has moved by more than "
        f"{100 * plan['rearranged_share']:g} % or two planets have changed order."
    )


def _indicators(answer: Answer) -> Iterator[str]:
    numerics = answer.numerics
    if numerics.measured_megno:
        yield (
            f"Motion was judged from MEGNO {_cite('megno')}, measured for {numerics.measured_megno} draws with the "
            "tangent map: regular if it settles near 2 over the last half of its run, chaotic if it goes on growing, "
            "otherwise unsettled."
        )
    else:
        yield "No indicator of chaos was measured, so that no draw is called regular or chaotic."
    if numerics.measured_drift:
        yield (
            f"The drift of each mean motion between the two halves of the span {_cite('frequency drift')} is given for "
            f"{numerics.measured_drift} draws."
        )
    yield "Chaotic motion alone does not make a draw unstable."


def _statistics(answer: Answer) -> Iterator[str]:
    survived, percent = answer.survived, f"{100 * answer.confidence:g} %"
    yield (
        f"Fractions are of all {answer.counts.orbits} orbits and run from the lower {percent} limit with none of the "
        f"draws of unknown fate ({survived.unknown}) counted in to the upper limit with all of them "
        f"{_cite('wilson limits')}."
    )
    if answer.counts.orbits:
        yield f"The surviving fraction is {survived.lower:.3f} to {survived.upper:.3f} (survived: {survived.count})."
    table = answer.constrained
    yield (
        "Limits after are those of draws that survived and were not rearranged; effective numbers "
        f"{_cite('effective number')} are {table.effective_before:.0f} before and {table.effective_kept:.0f} after."
    )
    if answer.counts.effective < answer.counts.orbits * (1 - 1e-9):
        yield "Limits account for weights, repeated rows and, where chains are given, correlation along them."


def _software(answer: Answer) -> Iterator[str]:
    versions = answer.facts.versions
    words = []
    for name, version in versions.items():
        step = f"package {name}"
        words.append(f"{name} {version}" + (f" {_cite(step)}" if name in CITED_PACKAGES else ""))
    yield f"Software: {', '.join(words)}."
    yield f"The run is repeated by: {answer.facts.command}"
