"""The answer as numbers and as text: whole, plain, and honest where there is little to say."""

import json
from dataclasses import replace

import numpy as np
import pytest
from made_up_draws import broken, facts, mixed, survived, table, unknown

from stabcheck.constants import EARTH_MSUN, YEAR_D
from stabcheck.outcome import Ending, Motion, Trust
from stabcheck.report.answer import answer_of
from stabcheck.report.columns import described, drawn_columns, element_columns
from stabcheck.report.tables import WIDTH, as_text, headline
from stabcheck.verdict import Verdict

DEGENERATE = {
    "no draw": lambda: table([], 0),
    "no draw is finished": lambda: table([], 5),
    "no draw is an orbit": lambda: table([], 3, refused=(0, 1, 2)),
    "one draw": lambda: table([survived(0)]),
    "all survived": lambda: table([survived(n) for n in range(50)]),
    "all broken": lambda: table([broken(n) for n in range(50)]),
    "all unknown": lambda: table([unknown(n, Trust.PROCESS_DIED, np.nan) for n in range(9)]),
}


@pytest.fixture(scope="module")
def answer():
    return answer_of(mixed())


@pytest.mark.parametrize("case", DEGENERATE)
def test_little_to_say_is_said_in_text_and_in_strict_json(case):
    found = answer_of(DEGENERATE[case]())
    assert json.loads(json.dumps(found.as_dict(), allow_nan=False))
    text = as_text(found)
    assert "nan" not in text.replace("resonan", "").lower()
    assert all(len(line) <= WIDTH for line in text.splitlines())


def test_counts_add_up(answer):
    counts = answer.counts
    assert counts.orbits + sum(counts.refused.values()) == counts.settled == counts.asked == 600
    assert sum(counts.verdicts.values()) == counts.orbits
    assert [one.count for one in answer.verdicts] == list(counts.verdicts.values())
    assert sum(one.count for one in answer.endings) == counts.verdicts["broken"]


def test_fractions_are_of_the_orbits_and_refused_draws_are_counted_apart():
    found = answer_of(table([survived(0), broken(1)], 4, refused=(2, 3)))
    assert found.survived.share_least == 0.5 and found.survived.orbits == 2
    assert found.counts.refused == {"e < 0 (c)": 2}


def test_survived_is_every_verdict_but_broken_and_unknown(answer):
    words = answer.counts.verdicts
    assert answer.survived.count == sum(words[str(v)] for v in Verdict if v not in (Verdict.BROKEN, Verdict.UNKNOWN))
    assert answer.kept.count == answer.survived.count - words["rearranged"]


def test_what_a_distance_rule_stopped_is_shown_apart_and_said_to_be_no_physical_end():
    found = answer_of(table([broken(0, ending=Ending.DISTANCE_RULE), broken(1), survived(2)]))
    counted = {one.name: one.count for one in found.endings}
    assert counted == {"ejected": 1, "hit star": 0, "planets collided": 0, "distance rule": 1}
    assert any("distance rule" in sentence and "physical" in sentence for sentence in found.cautions)
    assert "by distance rule" in as_text(found)


def test_the_span_is_given_in_years_orbits_cycles_and_stellar_ages():
    found = answer_of(table([survived(n) for n in range(5)], secular_cycle_d=np.full(5, 2e4 * YEAR_D)))
    assert found.spans.years.middle == pytest.approx(1e5)
    assert found.spans.inner_orbits.middle == pytest.approx(1e5 * YEAR_D / 4.3, rel=1e-3)
    assert found.spans.outer_orbits.middle == pytest.approx(1e5 * YEAR_D / 9.1, rel=1e-3)
    assert found.spans.secular_cycles.middle == pytest.approx(5.0)
    assert found.spans.stellar_ages.middle == pytest.approx(2e-5)
    assert any("0.002 % of the star's age" in sentence for sentence in found.cautions)


@pytest.mark.parametrize(
    "words",
    [
        "independent is an assumption",
        "medians",
        "is not a solution",
        "sum of Keplerian orbits",
        "tides, relativity",
        "planets that nobody has seen",
        "neither condemns nor acquits",
        "not orbits",
        "within the span followed",
    ],
)
def test_the_reader_is_cautioned(answer, words):
    assert any(words in sentence for sentence in answer.cautions)


def test_no_caution_is_given_without_its_reason():
    plan = {**facts().plan, "relativity": True}
    calm = facts(asked=400, source="samples", fit="dynamical", physical_radii=True, plan=plan)
    sentences = " ".join(answer_of(table([survived(n) for n in range(400)], facts=calm)).cautions)
    for words in ("assumption", "Keplerian", "relativity", "points", "not orbits", "effective", "unknown"):
        assert words not in sentences, words


def test_fewer_than_two_hundred_effective_draws_are_warned_about():
    few = answer_of(table([survived(n) for n in range(150)]))
    many = answer_of(table([survived(n) for n in range(250)]))
    assert any("below 200" in sentence for sentence in few.cautions)
    assert not any("below 200" in sentence for sentence in many.cautions)


def test_rows_drawn_twice_lower_the_effective_number():
    outcomes = [survived(n) for n in range(300)]
    found = answer_of(table(outcomes, source_row=np.arange(300) // 2))
    assert found.counts.effective == pytest.approx(150)
    assert any("below 200" in sentence for sentence in found.cautions)


def test_the_parameter_that_decides_is_the_most_shifted(answer):
    assert [row.name for row in answer.constrained.by_shift()[:2]] == ["e c", "m c"]
    first = answer.constrained.by_shift()[0]
    assert first.shift < -5 * first.shift_error and first.narrowing < 0.9


def test_a_parameter_that_decides_nothing_moves_by_chance_alone(answer):
    idle = [row for row in answer.constrained.rows if row.name in ("m b", "P b", "e b", "i b", "i c")]
    assert len(idle) == 5
    # Five numbers: the largest of them exceeds 3.3 standard errors once in 200 samples.
    assert max(abs(row.shift) / row.shift_error for row in idle) < 3.3


def test_after_leaves_out_rearranged_draws_and_unknown_ones():
    outcomes = [survived(0), survived(1, rearranged=True), unknown(2), survived(3, Motion.CHAOTIC), broken(4)]
    found = answer_of(table(outcomes)).constrained
    assert (found.effective_before, found.effective_kept, found.effective_regular) == (5, 2, 1)


def test_angles_about_zero_keep_their_narrow_limits(answer):
    rows = {row.name: row for row in answer.constrained.rows}
    assert rows["omega_planet b"].before.sigma == pytest.approx(17, abs=2)  # drawn with 0.3 rad
    assert not rows["M b"].before.directed and np.isnan(rows["M b"].shift)


def test_what_does_not_vary_is_left_out_and_what_is_the_same_stands_once(answer):
    names = [row.name for row in answer.constrained.rows]
    assert "node b" not in names and "m star" not in names
    assert "e c" in names and "planets.c.eccentricity" not in names


def test_columns_are_in_published_units():
    made = table([survived(0)], elements={"mass_msun": np.array([[EARTH_MSUN, 3 * EARTH_MSUN]])}, parameters={})
    columns = {column.label: column.values for column in element_columns(made)}
    assert columns["m c [Mearth]"] == pytest.approx([3.0], rel=1e-15)
    drawn = table([survived(0)], parameters={"star.mass": np.array([0.8]), "planets.b.omega_star": np.array([np.pi])})
    assert {c.label: float(c.values[0]) for c in drawn_columns(drawn)} == {
        "star.mass [Msun]": 0.8,
        "planets.b.omega_star [deg]": 180.0,
    }


def test_mutual_inclination_counts_the_nodes():
    tilt, node = np.deg2rad([[90.0, 90.0], [90.0, 91.0]]), np.deg2rad([[0.0, 40.0], [0.0, 0.0]])
    period = np.array([[1.0, 2.0], [1.0, 2.5]])
    elements = {"inclination_rad": tilt, "node_rad": node, "period_d": period}
    made = table([survived(0), survived(1)], elements=elements, parameters={})
    mutual = {column.name: column.values for column in described(made)}["mutual i c/b"]
    assert mutual == pytest.approx([40.0, 1.0], abs=1e-12)


def test_energy_errors_are_those_of_trusted_draws():
    outcomes = [survived(0, energy_error=1e-9), unknown(1, Trust.ENERGY, energy_error=1e-2)]
    found = answer_of(table(outcomes)).numerics
    assert found.energy_error[-1] == 1e-9 and found.trust == {"energy": 1, "ok": 1}


def test_the_answer_does_not_depend_on_draws_beyond_the_prefix():
    early = [survived(n) if n % 3 else broken(n) for n in range(30)]
    late = [broken(n) for n in range(31, 90)]
    one, other = (answer_of(table(outcomes, 90)).as_dict() for outcomes in (early, [*early, *late]))
    assert one.pop("counts") != other.pop("counts")
    assert one == other


def test_the_text_says_that_it_is_preliminary():
    assert headline(answer_of(table([survived(0)], 3))).startswith("Two invented planets\nPRELIMINARY: 1 of 3")


def test_the_text_is_aligned_and_fits_the_terminal(answer):
    lines = as_text(answer).splitlines()
    assert max(len(line) for line in lines) <= WIDTH
    shares = [line for line in lines if " to " in line and line.startswith(("survived", "  regular", "  broken"))]
    assert len({line.rindex(" to ") for line in shares}) == 1


def test_long_names_and_dates_still_fit():
    draws = 50
    when = 2459000.12345 + 1e-3 * np.random.default_rng(1).normal(size=draws)
    made = table([survived(n) for n in range(draws)], parameters={"planets.outermost.time_of_conjunction": when})
    text = as_text(answer_of(made))
    assert max(len(line) for line in text.splitlines()) <= WIDTH and "2459000.123" in text


def test_json_has_the_versions_the_seed_and_the_command(answer):
    found = answer.as_dict()
    assert found["facts"]["seed"] == 7 and found["facts"]["versions"]["rebound"] == "5.2.2"
    assert found["facts"]["command"].startswith("stabcheck screen") and found["preliminary"] is False


def test_draws_in_exactly_one_plane_are_told_that_they_collide_more_often():
    inclined = mixed()
    flat_angles = {name: np.zeros_like(inclined.elements[name]) for name in ("inclination_rad", "node_rad")}
    flat = replace(inclined, elements={**inclined.elements, **flat_angles})
    told = [any("exactly one plane" in sentence for sentence in answer_of(one).cautions) for one in (flat, inclined)]
    assert told == [True, False]
