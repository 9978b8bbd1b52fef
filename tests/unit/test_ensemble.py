"""Draws as arrays: what is drawn, from which numbers, and which draws are not orbits. All systems are invented."""

import numpy as np
import pytest
from invented_scenarios import (
    COMPANION,
    EQUAL_NODES,
    FREE_NODES,
    HEAD,
    PLANE,
    RICH,
    SCATTERED,
    B,
    C,
    D,
    assert_same_bits,
    coplanar,
    fields_of,
    one,
    planet,
    scenario_of,
    without,
)
from scipy import stats

from stabcheck.build import states
from stabcheck.constants import DEGREE_RAD, EARTH_RADIUS_AU, M_S_AU_D, SUN_RADIUS_AU, TWO_PI
from stabcheck.distribution import Isotropic
from stabcheck.ensemble import Ensemble, central, draw, phase_error_deg, source, sources
from stabcheck.errors import PlanError
from stabcheck.orbit import mutual_inclination
from stabcheck.radius import radius_au_from_mass_msun
from stabcheck.random import uniforms
from stabcheck.scenario import Scenario

DRAWS = 10_000


# ---------------------------------------------------------------------------------------------------------------------
# Randomness belongs to the draw


@pytest.mark.parametrize("scenario", RICH.values(), ids=RICH)
@pytest.mark.parametrize("piece, total", [(1, 400), (7, 5000), (4096, 5000)])
def test_draws_are_the_same_bit_for_bit_in_whatever_pieces_they_are_made(scenario, piece, total):
    opened = source(scenario)
    pieces = [fields_of(draw(opened, first, min(piece, total - first))) for first in range(0, total, piece)]
    joined = {name: np.concatenate([part[name] for part in pieces]) for name in pieces[0]}
    assert_same_bits(joined, fields_of(draw(opened, 0, total)))


def test_control_numbers_that_belong_to_the_call_and_not_to_the_draw_are_noticed(monkeypatch):
    monkeypatch.setattr(sources, "uniforms", lambda seed, name, first, count: uniforms(seed, name, 0, count))
    opened = source(RICH["jacobi, own planes"])
    assert draw(opened, 5, 5).period_d[0, 0] != draw(opened, 0, 10).period_d[5, 0]


def test_five_thousand_draws_begin_with_the_same_one_thousand():
    scenario = RICH["jacobi, own planes"]
    longer = {name: values[:1000] for name, values in fields_of(draw(scenario, 0, 5000)).items()}
    assert_same_bits(longer, fields_of(draw(scenario, 0, 1000)))


def test_a_draw_of_a_far_number_is_made_alone():
    opened = source(RICH["jacobi, own planes"])
    alone = draw(opened, 10**12 + 5, 1)
    assert alone.period_d[0, 0] == draw(opened, 10**12, 10).period_d[5, 0]
    assert alone.first == 10**12 + 5


def test_no_draws_at_all_are_an_empty_ensemble():
    assert draw(RICH["jacobi, own planes"], 0, 0).period_d.shape == (0, 3)


def test_a_planet_more_changes_no_number_of_the_others():
    two = draw(scenario_of(HEAD, EQUAL_NODES, B, D), 0, 100)
    three = draw(scenario_of(HEAD, EQUAL_NODES, C, B, D), 0, 100)
    assert set(two.parameters) < set(three.parameters)
    for name, values in two.parameters.items():
        assert np.array_equal(values, three.parameters[name]), name


def test_another_seed_changes_every_number():
    one = draw(scenario_of(HEAD, EQUAL_NODES, B, C), 0, 100)
    other = draw(scenario_of(HEAD.replace("seed = 7", "seed = 8"), EQUAL_NODES, B, C), 0, 100)
    for name, values in one.parameters.items():
        repeats = 50 if name.endswith(".side") else 0  # a coin falls alike half of the time
        assert np.count_nonzero(values == other.parameters[name]) <= 1.4 * repeats, name


def test_parameters_are_drawn_independently_of_each_other():
    parameters = draw(RICH["jacobi, own planes"], 0, DRAWS).parameters
    correlations = np.corrcoef(list(parameters.values())) - np.eye(len(parameters))
    assert np.abs(correlations).max() < 4.5 / np.sqrt(DRAWS)  # the largest of some 150, each with sigma 1/sqrt(n)


def test_a_stretch_before_draw_0_is_refused():
    with pytest.raises(PlanError, match="draws -1 to 8"):
        draw(RICH["jacobi, own planes"], -1, 10)


# ---------------------------------------------------------------------------------------------------------------------
# Inclinations and nodes


def isotropic_inclinations() -> np.ndarray:
    return draw(scenario_of(HEAD, PLANE, coplanar(B), coplanar(D)), 0, DRAWS).inclination_rad[:, 0]


def is_isotropic(inclination_rad: np.ndarray) -> bool:
    """P(i < x) = 1 - cos x on 0 to 90° (orbit normals without a preferred direction)."""
    return bool(stats.kstest(np.cos(inclination_rad), "uniform").pvalue > 0.01)


def test_the_common_plane_is_isotropic():
    inclination = isotropic_inclinations()
    assert is_isotropic(inclination)
    # Geometry: median 60°, mean sin i = π/4, P(i < 10°) = 0.015192246988, P(1/sin i > 2) = 0.133974596216.
    assert np.degrees(np.median(inclination)) == pytest.approx(60.0, abs=4 * 0.66)  # sigma of a median of 1e4
    assert np.sin(inclination).mean() == pytest.approx(np.pi / 4, abs=4 * 0.223 / np.sqrt(DRAWS))
    for share, flags in ((0.015192246988, inclination < 10 * DEGREE_RAD), (0.133974596216, np.sin(inclination) < 0.5)):
        assert stats.binomtest(np.count_nonzero(flags), DRAWS, share).pvalue > 0.001


def test_control_inclinations_uniform_in_i_are_rejected(monkeypatch):
    """The sampler is spoilt, not the test: mean sin i would be 2/π = 0.6366."""
    monkeypatch.setattr(Isotropic, "at", lambda self, u: 0.5 * np.pi * np.asarray(u))
    spoilt = isotropic_inclinations()
    assert not is_isotropic(spoilt)
    assert np.sin(spoilt).mean() == pytest.approx(0.6366, abs=0.013)


def test_planets_of_a_common_plane_share_it():
    ensemble = draw(scenario_of(HEAD, PLANE, coplanar(B), coplanar(D)), 0, 50)
    assert np.array_equal(ensemble.inclination_rad[:, 0], ensemble.inclination_rad[:, 1])
    assert not ensemble.node_rad.any()


def test_planets_drawn_one_by_one_are_retrograde_to_each_other_half_of_the_time():
    planets = [without(p, "inclination") + 'inclination = "isotropic independent"\n' for p in (B, D)]
    found = draw(scenario_of(HEAD, FREE_NODES, *planets), 0, DRAWS)
    apart = mutual_inclination(*(a[:, k] for k in (0, 1) for a in (found.inclination_rad, found.node_rad)))
    assert stats.kstest(0.5 * (1.0 - np.cos(apart)), "uniform").pvalue > 0.01
    assert stats.binomtest(np.count_nonzero(apart > 0.5 * np.pi), DRAWS, 0.5).pvalue > 0.001


def test_tilts_to_the_common_plane_are_rayleigh_distributed_in_every_direction():
    found = draw(scenario_of(HEAD, SCATTERED, coplanar(B), coplanar(D)), 0, DRAWS)
    common = found.parameters["plane.inclination"]
    tilt = mutual_inclination(common, np.zeros(DRAWS), found.inclination_rad[:, 0], found.node_rad[:, 0])
    assert stats.kstest(tilt, stats.rayleigh(scale=3 * DEGREE_RAD).cdf).pvalue > 0.01
    assert stats.kstest(tilt, stats.halfnorm(scale=3 * DEGREE_RAD).cdf).pvalue < 1e-6  # control
    assert stats.kstest(found.parameters["planets.b.tilt_direction"] / TWO_PI, "uniform").pvalue > 0.01
    both = mutual_inclination(*(a[:, k] for k in (0, 1) for a in (found.inclination_rad, found.node_rad)))
    # Two independent small tilts: their difference has Rayleigh scale √2 as large; 3° is small to (3°)²/6 = 5e-4.
    assert both.mean() == pytest.approx(3 * DEGREE_RAD * np.sqrt(np.pi), rel=4 * 0.523 / np.sqrt(DRAWS) + 5e-4)


def test_an_impact_parameter_leaves_both_inclinations_and_is_found_again():
    found = draw(scenario_of(HEAD, EQUAL_NODES, B, C), 0, DRAWS)
    inclination, side = found.inclination_rad[:, 1], found.parameters["planets.c.side"]
    fine = found.refused == ""
    assert stats.binomtest(np.count_nonzero(side), DRAWS, 0.5).pvalue > 0.001
    assert np.array_equal(inclination[fine] > 0.5 * np.pi, side[fine] == 1.0)
    # Winn (2010), arXiv:1001.2010, eq. 7, written out with the star's omega.
    e, omega_star = found.eccentricity[:, 1], found.omega_planet_rad[:, 1] + np.pi
    shape = (1 - e**2) / (1 + e * np.sin(omega_star))
    impact = found.semi_major_axis_au[:, 1] * np.abs(np.cos(inclination)) / found.star_radius_au * shape
    assert impact[fine] == pytest.approx(found.parameters["planets.c.impact_parameter"][fine], rel=1e-9)


def test_nodes_are_as_stated():
    both = [coplanar(p) + 'inclination = "85 deg"\n' for p in (B, D)]
    assert not draw(scenario_of(HEAD, EQUAL_NODES, *both), 0, 9).node_rad.any()
    free = draw(scenario_of(HEAD, FREE_NODES, *both), 0, DRAWS)
    assert stats.kstest(free.node_rad[:, 0] / TWO_PI, "uniform").pvalue > 0.01
    assert np.array_equal(free.node_rad[:, 0], free.parameters["planets.b.node"])
    stated = draw(scenario_of(HEAD, *(p + f'node = "{k} deg"\n' for k, p in ((-10, both[0]), (20, both[1])))), 0, 2)
    assert np.degrees(stated.node_rad[0]) == pytest.approx([350.0, 20.0], rel=1e-14)


# ---------------------------------------------------------------------------------------------------------------------
# Omega, phases, masses


def test_the_omega_of_the_star_is_half_a_turn_from_the_planets():
    star, its_planet = one(omega_star="50 deg"), one(omega_star=None, omega_planet="230 deg")
    assert star.omega_planet_rad[0, 0] == pytest.approx(its_planet.omega_planet_rad[0, 0], rel=1e-15)
    assert np.degrees(star.omega_planet_rad[0, 0]) == pytest.approx(230.0, rel=1e-15)


def seen_at_epoch(ensemble: Ensemble) -> tuple[np.ndarray, np.ndarray]:
    built = states(ensemble)
    return built.position_au[0, 1] - built.position_au[0, 0], built.velocity_au_d[0, 1] - built.velocity_au_d[0, 0]


@pytest.mark.parametrize("cycles", [0, 3, -50])
def test_at_its_time_of_conjunction_a_planet_stands_in_front_of_its_star(cycles):
    """z points away from the observer; the epoch is a whole number of periods after the conjunction."""
    time = f"{2459000.0 - 20.0 * cycles} BJD_TDB"
    x, _ = seen_at_epoch(one(mean_anomaly=None, time_of_conjunction=time))
    assert x[2] < 0.0
    assert np.hypot(x[0], x[1]) < 1e-10 * abs(x[2])
    wrong, _ = seen_at_epoch(one(mean_anomaly=None, time_of_periastron=time))  # control: another event's time
    assert np.hypot(wrong[0], wrong[1]) > 0.1 * abs(wrong[2])


def test_at_its_time_of_periastron_a_planet_is_nearest():
    x, v = seen_at_epoch(one(mean_anomaly=None, time_of_periastron="2459020.0 BJD_TDB"))
    assert x @ v == pytest.approx(0.0, abs=1e-12)
    found = one()
    assert np.linalg.norm(x) == pytest.approx(found.semi_major_axis_au[0, 0] * 0.7, rel=1e-12)


def test_mean_longitudes_of_star_and_planet_belong_to_their_own_omega():
    direct = one(mean_anomaly="10 deg")
    of_star = one(mean_anomaly=None, mean_longitude_star="60 deg")  # omega_star 50 + 10
    of_planet = one(mean_anomaly=None, mean_longitude_planet="240 deg")  # omega_planet 230 + 10
    for found in (of_star, of_planet):
        assert found.mean_anomaly_rad[0, 0] == pytest.approx(direct.mean_anomaly_rad[0, 0], rel=1e-13)


def test_a_node_counts_in_the_mean_longitude_only_where_the_planets_table_gives_it():
    given_here = one(mean_anomaly=None, mean_longitude_planet="270 deg", node="30 deg")
    assert np.degrees(given_here.mean_anomaly_rad[0, 0]) == pytest.approx(10.0, rel=1e-13)
    keys = {"mean_anomaly": None, "mean_longitude_planet": "240 deg"}
    drawn = draw(scenario_of(HEAD, FREE_NODES, planet(**keys)), 0, 20)
    assert np.degrees(drawn.mean_anomaly_rad[:, 0]) == pytest.approx(np.full(20, 10.0), rel=1e-12)
    assert np.ptp(drawn.node_rad) > 1.0


def test_a_circular_orbit_needs_no_omega_and_its_longitude_places_it():
    bare = {"eccentricity": "0", "omega_star": None, "mean_anomaly": None}
    x, _ = seen_at_epoch(one(**bare, mean_longitude_planet="0 deg"))
    assert x[0] > 0.0 and abs(x[2]) < 1e-12  # at the node
    y, _ = seen_at_epoch(one(**bare, mean_longitude_star="180 deg"))
    assert y == pytest.approx(x, abs=1e-12)


CARRIED = {"period": "20 ± {p} d", "mean_anomaly": None, "time_of_periastron": "2458000.0 ± {t} BJD_TDB"}


def carried(p: float, t: float) -> Scenario:
    keys = {key: value and value.format(p=p, t=t) for key, value in CARRIED.items()}
    return scenario_of(HEAD, planet(**keys))


@pytest.mark.parametrize("p, t", [(0.001, 0.5), (0.01, 0.001), (0.02, 0.5)])
def test_a_phase_is_carried_to_the_epoch_with_its_error(p, t):
    """1,000 d are 50 cycles: the error is that of the time and 50 times that of the period, in quadrature."""
    sigma_rad = TWO_PI * np.hypot(t, 50 * p) / 20.0
    found = draw(carried(p, t), 0, DRAWS).mean_anomaly_rad[:, 0]
    apart = np.mod(found + np.pi, TWO_PI) - np.pi
    assert stats.kstest(apart, stats.norm(0.0, sigma_rad).cdf).pvalue > 0.01
    assert stats.kstest(apart, stats.norm(0.0, 1.1 * sigma_rad).cdf).pvalue < 1e-3  # control
    assert phase_error_deg(carried(p, t))["b"] == pytest.approx(np.degrees(sigma_rad), rel=1e-9)


def test_a_phase_that_is_lost_becomes_uniform_by_itself():
    scenario = carried(1.0, 0.1)
    assert phase_error_deg(scenario)["b"] > 120.0
    assert stats.kstest(draw(scenario, 0, DRAWS).mean_anomaly_rad[:, 0] / TWO_PI, "uniform").pvalue > 0.01


def test_the_error_of_a_phase_at_the_epoch_is_its_own():
    longitude = scenario_of(HEAD, EQUAL_NODES, B, D)
    found = phase_error_deg(longitude)
    assert found["d"] == pytest.approx(4.0, rel=1e-9)
    assert found["b"] == pytest.approx(360 / 4.31 * np.hypot(0.01, 0.0005 * 1.58 / 4.31), rel=1e-6)
    assert phase_error_deg(scenario_of(HEAD, planet(mean_anomaly="uniform(0, 360) deg")))["b"] > 120.0


@pytest.mark.parametrize("frame", ["jacobi", "astrocentric"])
def test_masses_give_back_the_k_and_m_sin_i_they_came_from(frame):
    found = draw(scenario_of(HEAD.replace("jacobi", frame), EQUAL_NODES, B, C, D), 0, 500)
    fine = found.refused == ""
    k = found.parameters["planets.b.semi_amplitude"] / M_S_AU_D
    assert found.semi_amplitude_m_s[fine, 0] == pytest.approx(k[fine], rel=1e-12)
    sine = np.sin(found.inclination_rad[:, 1])
    assert (found.mass_msun[:, 1] * sine)[fine] == pytest.approx(
        found.parameters["planets.c.mass_sin_i"][fine], rel=1e-14
    )
    assert np.array_equal(found.mass_msun[:, 2], found.parameters["planets.d.mass"])


# ---------------------------------------------------------------------------------------------------------------------
# Bodies and radii


def test_bodies_stand_by_central_period_with_the_companion_last_whatever_the_order_of_the_file():
    scenario = scenario_of(HEAD, COMPANION, SCATTERED, coplanar(D), coplanar(C), coplanar(B))
    found = draw(scenario, 0, 3)
    assert found.bodies == ("b", "c", "d", "companion")
    assert found.mass_msun[:, 3] == pytest.approx(0.3, abs=0.1)
    assert (np.diff(found.period_d, axis=1) > 0).all()


def test_a_draw_whose_planets_change_places_is_built_in_the_scenarios_order():
    wide = coplanar(C).replace("9.7 ± 0.002 d", "9.7 ± 5 d")
    found = draw(scenario_of(HEAD, PLANE, coplanar(B), wide), 0, 1000)
    flipped = (found.period_d[:, 1] < found.period_d[:, 0]) & (found.refused == "")
    assert found.bodies == ("b", "c")
    assert np.count_nonzero(flipped) > 20
    assert np.isfinite(states(found).position_au[flipped]).all()


def test_radii_are_given_or_estimated_where_asked_for_or_those_of_points():
    text = planet(), planet(radius="1.7 Rearth"), '[endings]\nmass_radius = "chen-kipping-2017"\n'
    assert draw(scenario_of(HEAD, text[0]), 0, 1).radius_au[0, 0] == 0.0
    for end in ("", text[2]):
        assert draw(scenario_of(HEAD, text[1], end), 0, 1).radius_au[0, 0] == pytest.approx(1.7 * EARTH_RADIUS_AU)
    estimated = draw(scenario_of(HEAD, text[0], text[2]), 0, 1)
    assert np.array_equal(estimated.radius_au, radius_au_from_mass_msun(estimated.mass_msun))
    assert draw(scenario_of(without(HEAD, "radius"), text[0]), 0, 1).star_radius_au[0] == 0.0


# ---------------------------------------------------------------------------------------------------------------------
# Not an orbit


NOT_ORBITS = {
    "P <= 0 (b)": planet(period="truncated normal(20, 100, -50, 1000) d"),
    "a <= 0 (b)": planet(period=None, semi_major_axis="truncated normal(0.3, 1, -2, 9) au"),
    "e < 0 (b)": planet(eccentricity="0.1 ± 0.1"),
    "e >= 1 (b)": planet(eccentricity="0.8 ± 0.2"),
    "m <= 0 (b)": planet(mass="1 ± 1 Mjup"),
    "m sin i <= 0 (b)": planet(mass=None, mass_sin_i="1 ± 1 Mjup"),
    "K <= 0 (b)": planet(mass=None, semi_amplitude="10 ± 10 m/s"),
    "inclination not between 0 and 180 deg (b)": planet(inclination="3 ± 3 deg"),
    "impact parameter < 0 (b)": planet(inclination=None, impact_parameter="0.1 ± 0.1"),
    "no inclination gives this impact parameter (b)": planet(inclination=None, impact_parameter="40 ± 10"),
    "periastron inside the star (b)": planet(period="1 d", eccentricity="uniform(0, 0.99)"),
    "radius <= 0 (b)": planet(radius="1 ± 1 Rjup"),
}


@pytest.mark.parametrize("reason", NOT_ORBITS)
def test_a_draw_that_is_no_orbit_keeps_its_number_and_its_values_and_says_why(reason):
    found = draw(scenario_of(HEAD, NOT_ORBITS[reason]), 0, 1000)
    named = np.array([reason in text.split("; ") for text in found.refused])
    assert 1 <= np.count_nonzero(named) < 1000
    assert len(found.refused) == 1000
    built = states(found).position_au
    assert np.isnan(built[found.refused != ""]).all()
    assert np.isfinite(built[found.refused == ""]).all()


def test_the_star_can_be_the_reason_too():
    text = HEAD.replace("0.9 ± 0.05", "0.9 ± 0.9").replace("0.85 ± 0.02", "0.85 ± 0.85")
    found = draw(scenario_of(text, planet()), 0, 1000).refused
    assert {"", "star mass <= 0", "star radius <= 0", "star mass <= 0; star radius <= 0"} == set(found)


def test_several_reasons_are_joined_in_a_fixed_order():
    b = planet(eccentricity="0.05 ± 0.1", mass="1 ± 1 Mjup", node="0 deg")
    c = b.replace("planets.b", "planets.c").replace("20 d", "70 d")
    found = {text for text in draw(scenario_of(HEAD, b, c), 0, 5000).refused if text}
    order = ["e < 0 (b)", "m <= 0 (b)", "e < 0 (c)", "m <= 0 (c)"]
    assert "; ".join(order) in found
    for text in found:
        assert text.split("; ") == [reason for reason in order if reason in text]


def test_nothing_is_clipped_and_nothing_drawn_again():
    """What is left of a normal is a truncated normal: neither a heap at 0 nor a folded one."""
    found = draw(scenario_of(HEAD, planet(eccentricity="0.1 ± 0.1")), 0, DRAWS)
    drawn, fine = found.parameters["planets.b.eccentricity"], found.refused == ""
    assert np.array_equal(found.eccentricity[:, 0], drawn)
    assert stats.binomtest(np.count_nonzero(drawn < 0.0), DRAWS, stats.norm.cdf(-1.0)).pvalue > 0.001
    assert np.array_equal(~fine, (drawn < 0.0) | (drawn >= 1.0) | (found.refused == "periastron inside the star (b)"))
    left = stats.truncnorm(-1.0, 9.0, loc=0.1, scale=0.1).cdf
    assert stats.kstest(drawn[fine], left).pvalue > 0.01
    for wrong in (np.abs(drawn), np.maximum(drawn, 0.0)):  # controls: folded, clipped
        assert stats.kstest(wrong, left).pvalue < 1e-6


def test_a_refused_planet_does_not_blame_the_others():
    b = planet(inclination=None, mass=None, impact_parameter="40 ± 10", semi_amplitude="30 m/s", node="0 deg")
    c = planet(period="70 d", mass=None, semi_amplitude="20 m/s", node="0 deg").replace("planets.b", "planets.c")
    assert set(draw(scenario_of(HEAD, b, c), 0, 500).refused) == {"", "no inclination gives this impact parameter (b)"}


def test_a_transit_beyond_the_limb_is_still_an_orbit():
    found = draw(scenario_of(HEAD, planet(inclination=None, impact_parameter="1.5")), 0, 3)
    assert set(found.refused) == {""}


# ---------------------------------------------------------------------------------------------------------------------
# Central values


def test_the_central_row_of_a_table_holds_medians():
    row = central(scenario_of(HEAD, PLANE, coplanar(B), coplanar(D)))
    assert row.period_d[0, 0] == 4.31
    assert row.star_radius_au[0] == pytest.approx(0.85 * SUN_RADIUS_AU, rel=1e-15)
    assert np.degrees(row.inclination_rad) == pytest.approx(np.full((1, 2), 60.0), rel=1e-14)
    assert row.parameters["planets.d.mass"][0] == pytest.approx(np.sqrt(30.0) * 3.0035e-6, rel=1e-3)  # Earth over Sun
    assert row.source_row.tolist() == [-1]
    assert row.refused.tolist() == [""]


# ---------------------------------------------------------------------------------------------------------------------
# Cartesian states


def vector(values: np.ndarray, unit: str) -> str:
    return "[" + ", ".join(f'"{float(value)!r} {unit}"' for value in values) + "]"


def cartesian(ensemble: Ensemble, order: tuple[int, ...], shift: float = 0.0) -> Scenario:
    built = states(ensemble)
    text = without(HEAD, "frame", "fit", "epoch").replace("[elements]", '[elements]\nframe = "cartesian"')
    text = text.replace(" ± 0.05", "")
    text = text.replace("[elements]", f"position = {vector(built.position_au[0, 0] + shift, 'au')}\n"
                        f"velocity = {vector(built.velocity_au_d[0, 0] + shift, 'au/d')}\n[elements]", 1)  # fmt: skip
    text = text.replace('mass = "0.9 Msun"', f'mass = "{float(built.mass_msun[0, 0])!r} Msun"')
    for k in order:
        text += f'[planets.{ensemble.bodies[k]}]\nmass = "{float(built.mass_msun[0, k + 1])!r} Msun"\n'
        text += f"position = {vector(built.position_au[0, k + 1] + shift, 'au')}\n"
        text += f"velocity = {vector(built.velocity_au_d[0, k + 1] + shift, 'au/d')}\n"
    return scenario_of(text)


def test_states_come_back_as_the_elements_they_were_built_from_whatever_their_origin():
    made = draw(scenario_of(HEAD, EQUAL_NODES, B, C, D), 0, 1)
    for shift in (0.0, 0.25):
        found = draw(cartesian(made, (2, 0, 1), shift), 0, 2)
        assert found.bodies == ("b", "c", "d")
        assert found.position_au.shape == (2, 4, 3)
        for name in ("mass_msun", "period_d", "semi_major_axis_au", "inclination_rad", "semi_amplitude_m_s"):
            assert getattr(found, name)[1] == pytest.approx(getattr(made, name)[0], rel=1e-9), name
        assert found.eccentricity[1] == pytest.approx(made.eccentricity[0], abs=1e-9)
        built = states(found)
        assert built.position_au[1] == pytest.approx(states(made).position_au[0], abs=1e-12)


def test_a_state_that_is_not_bound_is_refused():
    made = draw(scenario_of(HEAD, EQUAL_NODES, B, D), 0, 1)
    scenario = cartesian(made, (0, 1))
    velocity = scenario.planets["d"].velocity
    assert velocity is not None
    text = scenario.text.replace(vector(np.array([v.central for v in velocity]), "au/d"),
                                 vector(np.array([3.0 * v.central for v in velocity]), "au/d"))  # fmt: skip
    refused = draw(scenario_of(text), 0, 1).refused[0]
    assert refused == "e >= 1 (d)"


def test_cartesian_states_have_no_phase_to_be_carried():
    assert phase_error_deg(cartesian(draw(scenario_of(HEAD, EQUAL_NODES, B, D), 0, 1), (0, 1))) == {}
