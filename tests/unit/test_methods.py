"""The methods text says what ran, and cites exactly that."""

import re

import pytest
from made_up_draws import broken, facts, mixed, survived, table

from stabcheck.errors import StabcheckError
from stabcheck.report.answer import answer_of
from stabcheck.report.methods import bibtex, methods_text, steps_taken
from stabcheck.report.references import ENTRIES, STEPS, bibtex_of, keys_of


def keys_in(text):
    return {key for group in re.findall(r"\[([a-z0-9, \n]+)\]", text) for key in re.split(r",\s*", group.strip())}


def entries_in(text):
    return set(re.findall(r"@\w+\{(\w+),", text))


@pytest.fixture(scope="module")
def answer():
    return answer_of(mixed())


def test_the_text_cites_exactly_the_entries_it_comes_with(answer):
    assert keys_in(methods_text(answer)) == entries_in(bibtex(answer)) != set()


def test_a_step_without_a_reference_is_an_error():
    with pytest.raises(StabcheckError, match="no reference"):
        keys_of(["method leapfrog"])


def test_a_run_with_an_unknown_method_is_refused_instead_of_left_uncited():
    with pytest.raises(StabcheckError, match="leapfrog"):
        methods_text(answer_of(table([survived(0, method="leapfrog")])))


@pytest.mark.parametrize(
    "method, key", [("whfast", "reintamayo2015"), ("ias15", "reinspiegel2015"), ("trace", "lu2024")]
)
def test_only_the_methods_that_ran_are_cited(method, key):
    found = entries_in(bibtex(answer_of(table([survived(n, method=method) for n in range(3)]))))
    assert found & {"reintamayo2015", "reinspiegel2015", "lu2024"} == {key}


def test_the_map_is_cited_too_where_every_draw_was_handed_over():
    steps = steps_taken(answer_of(table([broken(n, method="ias15", map_steps=100) for n in range(3)])))
    assert "method ias15" in steps and "method whfast" in steps


@pytest.mark.parametrize(
    "changes, key",
    [
        ({"plan": {**facts().plan, "relativity": True}}, "nobili1986"),
        ({"mass_radius": "chen-kipping-2017"}, "chen2017"),
        ({"versions": {"numba": "0.68.1"}}, "lam2015"),
    ],
)
def test_what_was_on_is_cited_and_what_was_off_is_not(changes, key):
    outcomes = [survived(0), survived(1)]
    on, off = (answer_of(table(outcomes, facts=made)) for made in (facts(asked=2, **changes), facts(asked=2)))
    assert key in entries_in(bibtex(on)) and key not in entries_in(bibtex(off))


def test_jacobi_elements_of_a_velocity_fit_are_argued_for():
    for frame, fit, cited in (("jacobi", "keplerian", True), ("astrocentric", "keplerian", False)):
        made = answer_of(table([survived(0)], facts=facts(asked=1, frame=frame, fit=fit)))
        assert ("lissauer2001" in entries_in(bibtex(made))) is cited


def test_without_an_indicator_none_is_cited_and_the_text_says_so():
    nan = float("nan")
    made = answer_of(table([survived(0, megno=nan, drift=[nan, nan])]))
    assert "cincotta2000" not in entries_in(bibtex(made)) and "robutel2001" not in entries_in(bibtex(made))
    assert "No indicator" in methods_text(made)


def test_the_text_has_the_numbers_of_the_run(answer):
    text = " ".join(methods_text(answer).split())
    counts = answer.counts
    for words in (
        f"{counts.settled} sets of elements",
        f"{sum(counts.refused.values())} are not orbits",
        f"{counts.orbits} orbits was followed for 1e5 yr",
        "1/25 of the shortest effective period",
        "within 3 momentary mutual Hill radii",
        "Relativity was left out.",
        "median and central 68 %",
        "30 times the largest initial semi-major axis",
        "0.002 % of the star's age",
        "seed 7",
        "lower 95 % limit",
    ):
        assert words in text, words


def test_methods_of_a_run_without_orbits_can_be_written():
    assert "No draw was integrated" in methods_text(answer_of(table([], 2, refused=(0, 1))))


def test_every_step_names_entries_that_exist_and_every_entry_has_a_step():
    cited = {key for keys in STEPS.values() for key in keys}
    assert cited == set(ENTRIES)


def test_entries_are_whole_and_their_braces_match():
    for key in ENTRIES:
        text = bibtex_of([key])
        assert text.count("{") == text.count("}") and f"{{{key}," in text
        fields = dict(re.findall(r"^  (\w+) += \{(.*)\},?$", text, flags=re.M))
        assert {"author", "title", "year"} <= set(fields) and all(fields.values())
        if text.startswith("@article"):
            assert {"journal", "volume", "pages", "doi"} <= set(fields)
