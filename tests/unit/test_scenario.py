"""Scenarios: what is read, what identifies it, and which defaults were taken. What is refused is in ``faults``."""

import json
import math
import pickle
import re
import tomllib
from pathlib import Path
from typing import Any

import pytest
from good_scenario import CARTESIAN, GOOD, spoilt
from pydantic import ValidationError

import stabcheck.scenario
from stabcheck.quantity import Column, Fixed, HalfNormal, Isotropic, TwoPieceNormal
from stabcheck.scenario import Epoch, FitKind, Frame, Nodes, Scenario, Span, SpanKind
from stabcheck.scenario_keys import TABLES

ONE_PLANE = """\
[star]
mass = "1 Msun"
[elements]
frame = "astrocentric"
fit = "dynamical"
[plane]
inclination = "isotropic"
mutual_scatter = "2 deg"
[planets.c]
period = "20 d"
eccentricity = 0
mean_longitude_star = "20 deg"
mass = "1 Mjup"
[planets.b]
semi_major_axis = "0.05 au"
eccentricity = 0.1
omega_planet = "10 deg"
mean_anomaly = "uniform(0, 360) deg"
semi_amplitude = "30 m/s"
[draws]
seed = 1
[integration]
span = "10 secular cycles"
"""


def read(text: str) -> Scenario:
    return Scenario.from_text(text, "test.toml")


def test_every_key_of_a_table_arrives_in_the_units_used_inside() -> None:
    scenario = read(GOOD)
    assert scenario.star.mass.central == 0.81
    assert scenario.star.age is not None and scenario.star.age.central == pytest.approx(5e9 * 365.25, rel=1e-15)
    assert scenario.elements.frame is Frame.JACOBI and scenario.elements.fit is FitKind.KEPLERIAN
    assert scenario.elements.epoch == Epoch(2459000.0, "BJD_TDB")
    assert scenario.elements.data_span == 1200.0
    assert scenario.plane is not None and scenario.plane.nodes is Nodes.EQUAL
    b, c = scenario.planets["b"], scenario.planets["c"]
    assert b.eccentricity is not None and b.eccentricity.distribution == TwoPieceNormal(0.03, 0.01, 0.02)
    assert b.omega_star is not None and b.omega_star.central == pytest.approx(math.radians(120.0), rel=1e-15)
    assert b.time_of_periastron is not None and b.time_of_periastron.central == 2459001.10
    assert c.eccentricity is not None and isinstance(c.eccentricity.distribution, HalfNormal)
    assert c.semi_amplitude is not None
    assert c.semi_amplitude.central * 149_597_870_700.0 / 86_400.0 == pytest.approx(2.3, rel=1e-14)  # IAU 2012 B2
    assert scenario.companion is not None and scenario.companion.mass is not None
    assert scenario.draws.seed == 20260101
    assert scenario.physics.relativity is True
    assert scenario.integration.method == "trace"
    assert scenario.integration.span == Span(1e5, SpanKind.INNER_ORBITS)
    assert scenario.endings.stop_distance == 100.0 and scenario.endings.ejection_distance is None
    assert scenario.endings.mass_radius == "chen-kipping-2017"


def test_bodies_stand_in_the_order_of_the_file_and_the_companion_is_last() -> None:
    assert read(GOOD).body_names == ("b", "c", "companion")
    assert read(ONE_PLANE).body_names == ("c", "b")


def test_quantities_are_all_that_is_drawn_or_fixed_by_their_full_names() -> None:
    quantities = read(GOOD).quantities()
    assert {"star.mass", "star.radius", "star.age", "planets.b.period", "companion.mass"} < set(quantities)
    assert len(quantities) == 3 + 7 + 6 + 6
    assert quantities["companion.eccentricity"].distribution == Fixed(0.2)
    plane = read(ONE_PLANE).quantities()
    assert plane["plane.inclination"].distribution == Isotropic()
    assert plane["plane.mutual_scatter"].is_fixed


def test_cartesian_states_need_no_elements_and_are_dynamical() -> None:
    scenario = read(CARTESIAN)
    assert scenario.elements.fit is FitKind.DYNAMICAL
    quantities = scenario.quantities()
    assert quantities["planets.b.position.x"].central == 5.2
    assert quantities["planets.b.velocity.y"].sigma > 0.0
    assert ("star.position, star.velocity", "at the origin, at rest") in scenario.defaults_used()
    moved = spoilt(
        'mass = "1 Msun"',
        'mass = "1 Msun"\nposition = ["0 au", "0 au", "0 km"]\nvelocity = ["1 m/s", "0 m/s", "0 m/s"]',
        CARTESIAN,
    )
    assert "star.velocity.x" in read(moved).quantities()


def test_a_companion_without_a_tilt_lies_in_the_common_plane() -> None:
    companion = '[companion]\nperiod = "90 yr"\neccentricity = 0\nmean_longitude_planet = "3 deg"\nmass = "0.3 Msun"\n'
    scenario = read(ONE_PLANE + companion)
    assert scenario.companion is not None and scenario.companion.inclination is None
    tilted = read(ONE_PLANE + companion + 'inclination = "40 deg"\nnode = "uniform(0, 360) deg"\n')
    assert tilted.companion is not None and tilted.companion.node is not None


def test_planets_may_be_isotropic_one_by_one_when_it_is_spelled_out() -> None:
    text = spoilt('nodes = "equal"', 'nodes = "isotropic"')
    scenario = read(text.replace("88.2 ± 0.3 deg", "isotropic independent"))
    tilt = scenario.planets["b"].inclination
    assert tilt is not None and tilt.distribution == Isotropic(both_senses=True)


def test_one_planet_needs_no_node() -> None:
    text = GOOD[: GOOD.index("[planets.c]")] + GOOD[GOOD.index("[draws]") :]
    assert ("node", "0 (a single orbit)") in read(text.replace('[plane]\nnodes = "equal"\n', "")).defaults_used()


def test_a_wide_omega_with_a_time_of_periastron_is_taken_when_confirmed() -> None:
    confirmed = spoilt("[plane]", "independent_omega_and_periastron_time = true\n\n[plane]")
    scenario = read(confirmed.replace("120 ± 15 deg", "120 ± 40 deg"))
    assert scenario.elements.independent_omega_and_periastron_time


@pytest.mark.parametrize(
    ("text", "span"),
    [
        ("1e5 inner orbits", Span(1e5, SpanKind.INNER_ORBITS)),
        ("1 inner orbit", Span(1.0, SpanKind.INNER_ORBITS)),
        ("2000 outer orbits", Span(2000.0, SpanKind.OUTER_ORBITS)),
        ("10 secular cycles", Span(10.0, SpanKind.SECULAR_CYCLES)),
        ("365.25 d", Span(1.0, SpanKind.YEARS)),
        ("3 kyr", Span(3000.0, SpanKind.YEARS)),
        ("1.5Myr", Span(1.5e6, SpanKind.YEARS)),
        ("1 Gyr", Span(1e9, SpanKind.YEARS)),
    ],
)
def test_a_span_is_years_or_cycles_of_its_own(text: str, span: Span) -> None:
    assert read(spoilt("1e5 inner orbits", text)).integration.span == span


def test_columns_of_a_sample_file_may_stand_for_any_quantity(tmp_path: Path) -> None:
    (tmp_path / "rows.csv").write_text("P,T\n4.31,100\n")
    text = spoilt('"4.31 ± 0.0005 d"', '{ column = "P", unit = "d" }')
    text = text.replace('"2459001.10 ± 0.02 BJD_TDB"', '{ column = "T", unit = "BJD_TDB", offset = 2458900 }')
    text += '[samples]\nfile = "rows.csv"\nchain = "chain"\n'
    scenario = Scenario.from_text(text, "test.toml", tmp_path)
    time = scenario.planets["b"].time_of_periastron
    assert time is not None and time.distribution == Column("T", 1.0, 2458900.0)
    assert scenario.sample_path == tmp_path / "rows.csv"
    assert ("samples.weight", "none: all rows weigh the same") in scenario.defaults_used()


def test_a_file_is_read_as_its_text_is(tmp_path: Path) -> None:
    path = tmp_path / "two.toml"
    path.write_bytes(b"\xef\xbb\xbf" + GOOD.replace("\n", "\r\n").encode())  # byte-order mark and line ends of Windows
    scenario = Scenario.read(path)
    assert scenario.canonical() == read(GOOD).canonical()
    assert (scenario.name, scenario.folder) == ("two.toml", tmp_path)


def test_every_shipped_scenario_is_read(project: Path) -> None:
    files = sorted((project / "scenarios").glob("*.toml"))
    assert {"compact_four", "giant_and_outer_eccentric"} <= {file.stem for file in files}
    for file in files:
        assert Scenario.read(file).title


# ---------------------------------------------------------------------------------------------------------------------
# Identity and defaults


def test_the_canonical_form_is_plain_json_and_says_where_nothing_is() -> None:
    for text in (GOOD, ONE_PLANE, CARTESIAN):
        form = read(text).canonical()
        assert json.loads(json.dumps(form, allow_nan=False)) == form
        assert list(form) == sorted(form)


def in_another_order(text: str) -> str:
    """The same tables and keys from the last to the first."""
    tables = re.split(r"\n(?=\[)", text[text.index("[star]") :])
    return "\n".join("\n".join([lines[0], *reversed(lines[1:])]) for t in reversed(tables) if (lines := t.split("\n")))


@pytest.mark.parametrize(
    "same",
    [
        in_another_order(GOOD),
        spoilt('"Two planets"', '"Another title"').replace('"invented"', '"other notes"'),
        GOOD.replace(" ± ", " +/- "),
        spoilt("+0.02 -0.01", "-0.01 +0.02"),
        spoilt("4.31 ± 0.0005 d", "normal(4.310, 5e-4) d"),
        spoilt('data_span = "1200 d"\n', ""),
        spoilt("[plane]", "independent_omega_and_periastron_time = true\n\n[plane]"),
        spoilt('method = "trace"', 'method = "trace"\nengine = "auto"\nsteps_per_periastron = 25\nindicator = true'),
        GOOD + "[rearranged]\naxis_share = 0.3\n",
        GOOD.replace(" = ", "="),
    ],
)
def test_what_changes_no_number_does_not_change_the_canonical_form(same: str) -> None:
    assert json.dumps(read(same).canonical()) == json.dumps(read(GOOD).canonical())  # their order too


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("4.31 ±", "4.3100001 ±"),
        ("+0.02 -0.01", "+0.01 -0.02"),
        ("omega_star = \"120", "omega_planet = \"120"),
        ("time_of_periastron", "time_of_conjunction"),
        ("mass_sin_i", "mass"),
        ('"jacobi"', '"astrocentric"'),
        ('"keplerian"', '"dynamical"'),
        ('nodes = "equal"', 'nodes = "isotropic"'),
        ("20260101", "20260102"),
        ("relativity = true", "relativity = false"),
        ("1e5 inner", "1e5 outer"),
        ('"trace"', '"ias15"'),
        ("[planets.b]", "[planets.x]"),
        ('stop_distance = "100 au"', 'stop_distance = "101 au"'),
        ('mass_radius = "chen-kipping-2017"\n', ""),
        ('radius = "1.7 ± 0.1 Rearth"\n', ""),
        ('"2459000.0 BJD_TDB"', '"2459000.5 BJD_TDB"'),
    ],
)  # fmt: skip
def test_what_changes_numbers_changes_the_canonical_form(old: str, new: str) -> None:
    assert read(spoilt(old, new)).canonical() != read(GOOD).canonical()


def test_the_canonical_form_holds_no_file_name(tmp_path: Path) -> None:
    forms = []
    for name in ("one.csv", "two.csv"):
        (tmp_path / name).write_text("P\n4.31\n")
        text = spoilt('"4.31 ± 0.0005 d"', '{ column = "P", unit = "d" }') + f'[samples]\nfile = "{name}"\n'
        forms.append(Scenario.from_text(text, "test.toml", tmp_path).canonical())
    assert forms[0] == forms[1]
    assert "csv" not in json.dumps(forms) and str(tmp_path) not in json.dumps(forms)


def test_defaults_are_listed_where_they_were_taken_and_only_there() -> None:
    used = dict(read(ONE_PLANE).defaults_used())
    assert used["physics.relativity"] == "false"
    assert used["integration.steps_per_periastron"] == "25.0"
    assert used["rearranged.axis_share"] == "0.3"
    assert used["elements.epoch"] == "not given: t = 0 is the epoch of the phases"
    assert used["star.radius"].startswith("none") and used["radius of c, b"].startswith("none")
    assert "plane.mutual_scatter" not in used
    good = dict(read(GOOD).defaults_used())
    assert good["integration.engine"] == "auto"
    assert good["radius of c, companion"] == "from the mass (chen-kipping-2017)"
    assert not {"physics.relativity", "integration.method", "elements.epoch", "star.radius"} & set(good)


def test_a_default_written_out_is_not_listed_any_more() -> None:
    written = ONE_PLANE + 'engine = "auto"\n'
    assert "integration.engine" in dict(read(ONE_PLANE).defaults_used())
    assert "integration.engine" not in dict(read(written).defaults_used())


# ---------------------------------------------------------------------------------------------------------------------
# The value object


def test_what_was_read_cannot_be_changed() -> None:
    scenario = read(GOOD)
    with pytest.raises(ValidationError):
        scenario.draws.seed = 3
    with pytest.raises(ValidationError):
        scenario.title = "other"


def test_a_scenario_survives_the_way_between_processes() -> None:
    scenario = read(GOOD)
    again = pickle.loads(pickle.dumps(scenario))
    assert again == scenario and again.text == GOOD and again.canonical() == scenario.canonical()


def test_a_scenario_built_without_a_file_is_checked_in_the_same_way() -> None:
    content: dict[str, Any] = tomllib.loads(GOOD)
    assert Scenario.model_validate(content).canonical() == read(GOOD).canonical()
    del content["elements"]["frame"]
    with pytest.raises(stabcheck.scenario.ScenarioError, match="frame is missing"):
        Scenario.model_validate(content)


def test_every_key_is_documented() -> None:
    documented = stabcheck.scenario.__doc__ or ""
    keys = {key for model in TABLES.values() for key in model.model_fields} | {"title", "notes"}
    assert {key for key in keys if f"``{key}" not in documented} == set()
    assert {name for name in TABLES if f"[{name}]" not in documented} == set()
    assert "``omega``" not in documented  # control: a word that is no key is not found


def test_nothing_heavy_is_loaded_to_read_a_scenario(run_python: Any) -> None:
    code = "import sys, stabcheck.scenario; print(*sys.modules)"
    loaded = set(run_python(code).stdout.split())
    assert "stabcheck.scenario" in loaded
    assert not {"numba", "rebound", "matplotlib", "astropy", "pandas", "scipy.optimize", "scipy.stats"} & loaded
