"""What a preview derives, held against worked values from outside, and what it warns of."""

import json
import math
import re
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest

from stabcheck.build import states
from stabcheck.ensemble import central
from stabcheck.plan import Plan
from stabcheck.preview import Preview, understood
from stabcheck.preview.cost import START_S, cost_of
from stabcheck.preview.orbits import elements_in, nearest_resonance, other_reading
from stabcheck.preview.rates import Response, circularisation_time_d, tidal_rate_rad_d
from stabcheck.preview.text import WIDTH, duration, mass_text
from stabcheck.scenario import Scenario
from stabcheck.screen import screen

TWO_PI = 2.0 * math.pi
SOLVER = 1e-10  # relative: a root was found or angles were turned in double precision

TWO_PLANETS = """
title = "two"
[star]
mass = "1 Msun"
radius = "1 Rsun"
age = "5 Gyr"
[elements]
frame = "jacobi"
fit = "keplerian"
epoch = "2459000 BJD_TDB"
[plane]
inclination = "90 deg"
[planets.c]
period = "40 ± 0.01 d"
eccentricity = "0.1"
omega_star = "200 deg"
mean_anomaly = "140 deg"
mass = "1 Mjup"
radius = "1 Rjup"
[planets.b]
period = "10 d"
eccentricity = "0.3"
omega_star = "40 deg"
time_of_periastron = "2459000 BJD_TDB"
mass = "1 Mearth"
radius = "1 Rearth"
[draws]
seed = 1
[physics]
relativity = true
[integration]
span = "1e8 inner orbits"
"""

# Jupiter and Saturn as Jacobi elements: masses 1/1047.348644 and 1/3497.9018 (Luzum et al. 2011), rounded axes.
GIANTS = """
[star]
mass = "1 Msun"
[elements]
frame = "jacobi"
fit = "dynamical"
[plane]
inclination = "0 deg"
[planets.jupiter]
semi_major_axis = "5.2026 au"
eccentricity = "0.0485"
omega_planet = "14 deg"
mean_anomaly = "20 deg"
mass = "0.0009547918983127075 Msun"
[planets.saturn]
semi_major_axis = "9.5549 au"
eccentricity = "0.0555"
omega_planet = "93 deg"
mean_anomaly = "317 deg"
mass = "0.00028588567008942334 Msun"
[draws]
seed = 1
[integration]
span = "1e5 yr"
"""


def seen(text: str = TWO_PLANETS, *changes: tuple[str, str]) -> Preview:
    for old, new in changes:
        assert old in text, old
        text = text.replace(old, new)
    return understood(Scenario.from_text(text))


@pytest.fixture(scope="module", autouse=True)
def short_measurement() -> Iterator[None]:
    """The speed itself is nobody's business here."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr("stabcheck.preview.cost.MEASURED_S", 0.01)
        yield


@pytest.fixture(scope="module")
def two(short_measurement: None) -> Preview:
    return seen()


def said(preview: Preview, words: str) -> bool:
    return any(words in caution for caution in preview.cautions)


def test_bodies_are_sorted_by_period_and_it_says_so(two: Preview) -> None:
    assert [one.name for one in two.planets] == ["b", "c"]
    assert two.order_changed and "not as in the file" in two.as_text()


def test_conjunction_and_periastron_are_the_worked_ones(two: Preview) -> None:
    # P = 10 d, e = 0.3, ω of the star 40°: transit side 0.756923131974 d after periastron. Formulas of Winn (2010),
    # arXiv:1001.2010, section 2, worked with numpy alone.
    planet = two.planets[0]
    assert planet.periastron == 2459000.0
    assert planet.conjunction - 2459000.0 == pytest.approx(0.756923131974, abs=1e-9)  # a BJD resolves 5e-10 d


def test_control_the_other_omega_gives_the_other_conjunction() -> None:
    # Same source: occultation 7.234199496297 d after periastron.
    wrong = seen(TWO_PLANETS, ('omega_star = "40 deg"', 'omega_planet = "40 deg"')).planets[0]
    assert wrong.conjunction - 2459000.0 == pytest.approx(7.234199496297, abs=1e-9)


def test_both_omegas_are_half_a_turn_apart(two: Preview) -> None:
    for planet in two.planets:
        assert (planet.omega_planet_deg - planet.omega_star_deg) % 360.0 == pytest.approx(180.0)


def test_the_semi_amplitude_of_jupiter_is_twelve_and_a_half_metres_a_second() -> None:
    # 12.5 m/s, common practice, no source (the value that every textbook prints); half a unit of its last digit.
    edge_on = seen(GIANTS, ('inclination = "0 deg"', 'inclination = "90 deg"'))
    assert edge_on.planets[0].semi_amplitude_m_s == pytest.approx(12.5, abs=0.05)


def test_jupiter_and_saturn_are_as_many_mutual_hill_radii_apart_as_printed() -> None:
    # Mean-axis definition of Chambers, Wetherill & Boss (1996): 7.89 for J2000 axes; axes here differ by 2e-3.
    apart = seen(GIANTS).pairs[0].separation_hill
    assert apart == pytest.approx(7.89, abs=0.05)
    assert abs(apart - 11.18) > 1.0  # control: the definition with the inner axis


@pytest.mark.parametrize(
    ("ratio", "resonance", "offset"),
    [
        (61.1166 / 30.0881, (2, 1), 0.01563),  # GJ 876 c, b: Rivera et al. (2010), ApJ 719, 890, from memory
        (10759.22 / 4332.59, (5, 2), -0.00667),  # Saturn and Jupiter, the great inequality
        (1.52, (3, 2), 0.01333),
    ],
)
def test_the_nearest_resonance_is_the_known_one(ratio: float, resonance: tuple[int, int], offset: float) -> None:
    named, found = nearest_resonance(ratio)
    assert named == resonance
    assert found == pytest.approx(offset, abs=1e-5)


@pytest.mark.parametrize("ratio", [4.6, 12.0, math.nan])
def test_no_resonance_is_named_where_none_is_near(ratio: float) -> None:
    named, offset = nearest_resonance(ratio)
    assert named is None
    assert math.isnan(offset)


def test_states_read_back_in_the_other_frame_are_the_worked_ones() -> None:
    # Jacobi elements above, turned into states and read about the star, worked with numpy alone.
    read = elements_in("astrocentric", states(central(Scenario.from_text(GIANTS))))
    assert read.semi_major_axis_au[0, 1] == pytest.approx(9.601367309524, rel=SOLVER)
    assert read.eccentricity[0, 1] == pytest.approx(0.0583663673909, rel=SOLVER)


def test_states_read_back_in_their_own_frame_are_what_was_written() -> None:
    row = central(Scenario.from_text(GIANTS))
    read = elements_in("jacobi", states(row))
    assert read.semi_major_axis_au == pytest.approx(row.semi_major_axis_au, rel=SOLVER)
    assert read.eccentricity == pytest.approx(row.eccentricity, rel=1e-9)  # a small difference of order 0.05


def test_the_other_frame_moves_the_outer_period_only() -> None:
    inner, outer = other_reading(central(Scenario.from_text(GIANTS)))
    assert abs(inner.period_shift) < 1e-12  # the innermost orbit is the same in both frames
    assert 1e-3 < abs(outer.period_shift) < 1e-2  # 0.8 % between the two readings of these very states (10781, 10865 d)
    massless = replace(central(Scenario.from_text(GIANTS)))
    massless.mass_msun[0, 0] = 1e-12
    assert abs(other_reading(massless)[1].period_shift) < 1e-9  # control: without a massive inner planet no shift


def test_relativity_turns_a_hot_jupiter_by_the_worked_rate() -> None:
    # 6πGM/(c²a(1-e²)) an orbit: 1.926194613 degrees a century at 0.05 au, e = 0.1, one solar mass.
    hot = seen(GIANTS, ("5.2026 au", "0.05 au"), ('"0.0485"', '"0.1"'), ("0.0009547918983127075", "1e-12"))
    assert hot.rates[0].relativity_deg_century == pytest.approx(1.926194613, rel=1e-8)


def test_the_circularisation_time_is_the_worked_one() -> None:
    # (2/21)(Q/k2)(1/n)(m/M)(a/R)^5, Goldreich & Soter (1966): one Jupiter at 0.05 au about one solar mass with Q = 1e5
    # and k2 = 0.37 takes 0.5481519615 Gyr.
    n = TWO_PI / (365.25689838404 * 0.05**1.5)
    time_d = circularisation_time_d(n, 1047.5655146605, 0.0004778945025452 / 0.05, Response(0.37, 1e5))
    assert time_d / 365.25e9 == pytest.approx(0.5481519615, rel=2e-4)  # the period formula above is for m = 0
    swapped = circularisation_time_d(n, 1047.5655146605, 0.0004778945025452 / 0.05, Response(0.37, 1e5 * 1.5 / 0.37))
    assert swapped / 365.25e9 != pytest.approx(0.5481519615, rel=0.5)  # control: Q' in place of Q


def test_a_tide_turns_small_close_orbits_as_the_fifth_power_says() -> None:
    near, far = (tidal_rate_rad_d(1.0, 1000.0, size, 0.0, 0.5) for size in (0.02, 0.01))
    assert near / far == pytest.approx(32.0)


def test_planets_without_radius_get_no_tide() -> None:
    preview = seen(GIANTS)
    assert all(math.isnan(one.tide_deg_century) for one in preview.rates)
    assert "no planet has a radius" in preview.as_text()


def test_the_secular_rates_of_jupiter_and_saturn_are_the_printed_ones() -> None:
    # Murray & Dermott (1999), Solar System Dynamics, chapter 7: 9.63435e-4 and 6.09908e-3 degrees a year, printed for
    # a = 5.202545 and 9.554841 au and slightly other masses (2e-4): half a per cent.
    preview = seen(GIANTS)
    assert preview.modes_deg_century == pytest.approx([0.0963435, 0.609908], rel=5e-3)
    assert preview.span.secular_cycles == pytest.approx(1e5 * 9.63435e-4 / 360.0, rel=5e-3)


def test_the_span_is_given_in_all_its_units(two: Preview) -> None:
    assert two.span.inner_orbits == pytest.approx(1e8)
    assert two.span.outer_orbits == pytest.approx(2.5e7)
    assert two.span.years == pytest.approx(1e9 / 365.25)
    assert two.span.star_ages == pytest.approx(1e9 / 365.25 / 5e9)


def test_a_span_of_three_cycles_is_three_cycles() -> None:
    assert seen(GIANTS, ('"1e5 yr"', '"3 secular cycles"')).span.secular_cycles == pytest.approx(3.0)


def test_the_text_fits_a_terminal_and_the_values_are_json(two: Preview) -> None:
    assert max(map(len, two.as_text().splitlines())) <= WIDTH
    plain = json.loads(json.dumps(two.as_dict(), allow_nan=False))
    assert plain["planets"][0]["period_d"] == 10.0
    assert plain["departure_m_s"] is None


def test_every_default_is_printed(two: Preview) -> None:
    for key, value in two.defaults:
        assert f"default {key}: {value}"[:60] in re.sub(r"\n {4}", " ", two.as_text())


def test_a_full_system_is_warned_of_nothing_but_what_is_always_true(two: Preview) -> None:
    assert said(two, "not modelled: tides")
    assert said(two, "errors of a table are drawn independently")
    for words in ("Hill radii, below", "cannot collide", "relativity is off", "as good as uniform", "wrapped normal"):
        assert not said(two, words)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (("40 ± 0.01 d", "10.5 ± 0.01 d"), "mutual Hill radii, below 2√3"),
        (('\nradius = "1 Rearth"', ""), "b: no radius, so points that cannot collide"),
        (("relativity = true", "relativity = false"), "relativity is off, but it turns b"),
        (('"140 deg"', '"140 ± 50 deg"'), "c: at the epoch its phase is uncertain by 50°"),
        (('"140 deg"', '"uniform(0, 360) deg"'), "as good as uniform"),
        (('"40 ± 0.01 d"', '"40 d"'), "nothing is drawn"),
        (('"1e8 inner orbits"', '"1 secular cycles"'), "cycles of the slowest secular mode"),
        (('age = "5 Gyr"\n', ""), "age is not given"),
        (('epoch = "2459000 BJD_TDB"', 'epoch = "2459000 BJD_TDB"\ndata_span = "400 d"'), "by up to"),
        (('mass = "1 Mearth"', 'mass = "5 Mjup"'), "if the source meant the other frame"),
    ],
)
def test_a_caution_comes_with_its_cause_and_not_without(two: Preview, change: tuple[str, str], words: str) -> None:
    assert said(seen(TWO_PLANETS, change), words)
    assert not said(two, words)


def test_central_values_that_are_no_orbit_are_said_and_cost_nothing() -> None:
    # Periastron of 0.1 au x (1 - 0.99) = 0.001 au lies inside a star of 0.0047 au.
    preview = seen(TWO_PLANETS, ('eccentricity = "0.3"', 'eccentricity = "0.99"'))
    assert said(preview, "the central values are not an orbit")
    assert preview.cost is None
    assert json.dumps(preview.as_dict(), allow_nan=False)


def test_the_cost_grows_with_span_draws_and_what_is_stored() -> None:
    built = states(central(Scenario.from_text(GIANTS)))
    jacobi = elements_in("jacobi", built)
    period = central(Scenario.from_text(GIANTS)).period_d[0]
    one = cost_of(built, jacobi, period, 1e7, Plan(), draws=1000, parameters=3)
    assert one.seconds == pytest.approx(START_S + one.seconds_per_draw * math.ceil(1000 / one.cores))
    few = cost_of(built, jacobi, period, 1e7, Plan(), draws=10, parameters=3)
    assert few.seconds < one.seconds
    assert few.half_width > one.half_width
    assert one.steps_per_draw == pytest.approx(1e7 / one.step_d)
    assert one.step_d < period[0] / 25.0  # shorter than the circular rule: the orbit is eccentric
    assert one.half_width == pytest.approx(0.031, abs=5e-4)  # 1.96 √(1/4/1000)


@pytest.mark.parametrize(
    ("days", "text"),
    [(math.inf, "never"), (365.25e9, "1 Gyr"), (730.5, "2 yr"), (3.0, "3 d"), (0.125, "3 h"), (5e-4, "43 s")],
)
def test_a_length_of_time_is_written_in_a_readable_unit(days: float, text: str) -> None:
    assert duration(days) == text


@pytest.mark.parametrize(("mass_msun", "unit"), [(3e-6, "Mearth"), (1e-3, "Mjup"), (0.2, "Msun")])
def test_a_mass_is_written_in_the_unit_of_its_kind(mass_msun: float, unit: str) -> None:
    assert mass_text(mass_msun).endswith(unit)


@pytest.mark.slow
def test_the_run_file_grows_by_what_was_said_to_a_quarter(tmp_path: Path) -> None:
    text = TWO_PLANETS.replace('"1e8 inner orbits"', '"30 inner orbits"').replace('"1 Mearth"', '"1 ± 0.1 Mearth"')
    scenario, path = Scenario.from_text(text), tmp_path / "two.run"
    sizes = []
    for draws in (200, 600):
        screen(scenario, draws=draws, run_file=path, workers=0)
        sizes.append(path.stat().st_size)
    cost = understood(scenario).cost
    assert cost is not None
    assert cost.bytes_per_draw == pytest.approx((sizes[1] - sizes[0]) / 400, rel=0.25)


def test_central_values_that_the_method_gives_up_at_once_have_no_cost_and_it_is_said() -> None:
    at_one_place = TWO_PLANETS.replace('frame = "jacobi"', 'frame = "astrocentric"')
    tables = at_one_place.split("[planets.c]")
    planet = tables[1][tables[1].index("\n") : tables[1].index("[", 1)]
    same = f"{tables[0]}[planets.c]{planet}[planets.b]{planet}"
    rest = '[draws]\nseed = 1\n[integration]\nmethod = "trace"\nspan = "10 inner orbits"\n'
    seen = understood(Scenario.from_text(same + rest), draws=5)
    assert seen.cost is None
    assert any("method trace fails on the central values" in caution for caution in seen.cautions)
    assert json.dumps(seen.as_dict(), allow_nan=False)
