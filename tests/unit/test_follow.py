"""One draw in detail: the outcome of a screen, its very steps, the right angles, a state to begin from again."""

import csv
import json
import math
import signal
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import rebound
from page_reach import reach_inches

from stabcheck import cli
from stabcheck.constants import GM_SUN_AU3_D2
from stabcheck.ensemble import draw as drawn
from stabcheck.errors import PlanError
from stabcheck.follow import follow
from stabcheck.follow.files import REBUILD
from stabcheck.kepler import Elements, state_from_elements
from stabcheck.outcome import Survival
from stabcheck.report.follow_figures import angles, encounter_figure, orbits, time_unit
from stabcheck.report.style import COLUMN_MM, MM_PER_INCH, PAGE_MM, TALLEST_MM
from stabcheck.resonance import nearest_resonance, sector_of
from stabcheck.scenario import Scenario
from stabcheck.screen import screen
from stabcheck.series import distance_hill, series_of
from stabcheck.store import RunFile

QUIET = """
title = "two planets"
[star]
mass = "1 Msun"
radius = "1 Rsun"
[elements]
frame = "FRAME"
fit = "dynamical"
epoch = "2459000 BJD_TDB"
[plane]
inclination = "70 deg"
mutual_scatter = "3 deg"
[planets.b]
period = "10 ± 0.01 d"
eccentricity = "0.05"
omega_planet = "uniform(0, 360) deg"
mean_anomaly = "40 deg"
mass = "5 Mearth"
[planets.c]
period = "OUTER d"
eccentricity = "0.08"
omega_planet = "uniform(0, 360) deg"
mean_anomaly = "200 deg"
mass = "60 Mearth"
[draws]
seed = 5
[integration]
span = "300 inner orbits"
[endings]
mass_radius = "chen-kipping-2017"
"""
CLOSE = QUIET.replace("60 Mearth", "3 Mjup").replace("5 Mearth", "1 Mjup")
COLLIDES = 2
"""A draw of it that collides within six orbits, too soon for the machine to have a say."""


def scenario(outer: str = "23", frame: str = "jacobi", text: str = QUIET) -> Scenario:
    return Scenario.from_text(text.replace("OUTER", outer).replace("FRAME", frame))


@pytest.fixture(scope="module")
def quiet():
    return follow(scenario(), draw=2)


@pytest.fixture(scope="module")
def broken():
    return follow(scenario("12.5", text=CLOSE), draw=COLLIDES)


def test_the_outcome_is_that_of_a_screen(quiet, tmp_path):
    # Bits, not closeness: a draw that one looks at in detail must be the draw that was counted.
    run = screen(scenario(), draws=3, workers=0, run_file=tmp_path / "r.run")
    with RunFile.open(run.path) as opened:
        stored = opened.outcomes()
    for name in ("energy_error", "megno", "closest_hill", "closest_time_d", "step_d", "time_d"):
        assert stored[name][2] == getattr(quiet.outcome, name), name
    assert stored["megno"][1] != quiet.outcome.megno  # control: another draw


@pytest.mark.parametrize("followed", ["quiet", "broken"])
def test_the_series_is_made_of_the_steps_that_decided(followed, request):
    one = request.getfixturevalue(followed)
    assert one.exact
    assert one.series.time_d[0] == 0.0
    assert one.series.time_d[-1] == pytest.approx(one.outcome.time_d, rel=1e-12)  # a sum of steps, rounded
    assert np.all(np.diff(one.series.time_d) > 0)


def test_a_quiet_draw_has_a_row_in_each_interval_and_no_encounter(quiet):
    assert quiet.outcome.survival is Survival.SURVIVED
    assert len(quiet.series.time_d) > 1500  # 2049, less where a step of the map is longer than an interval
    assert quiet.encounter is None


def test_a_broken_draw_ends_with_its_encounter_step_by_step(broken):
    assert broken.outcome.survival is Survival.BROKEN
    near = broken.encounter
    assert near is not None and len(near.time_d) > 100
    assert near.time_d.max() <= broken.outcome.time_d
    # Ends of steps miss the closest moment by a part of a step; IAS15 takes some dozens in an encounter.
    assert near.distance_hill.min() == pytest.approx(broken.outcome.closest_hill, rel=0.5)


def test_control_steps_that_are_not_the_engines_are_noticed(monkeypatch):
    from stabcheck.engines.rebound import replay

    taken = replay._advance

    def off_by_a_bit(simulation, steps):
        taken(simulation, steps)
        simulation.particles[1].x = math.nextafter(simulation.particles[1].x, 1e9)

    monkeypatch.setattr(replay, "_advance", off_by_a_bit)
    # Two blocks at least are needed to compare the end of one with the start of the next.
    long = scenario(text=QUIET.replace("300 inner", "3000 inner"))
    assert not follow(long, draw=2).exact


@pytest.mark.parametrize("frame", ["jacobi", "astrocentric"])
def test_the_first_row_is_what_was_drawn(frame):
    asked = scenario(frame=frame)
    one, ensemble = follow(asked, draw=2).series.elements, drawn(asked, 2, 1)
    # Through a state and back: rounding of some 1e-16 over e for the angles.
    for name in ("semi_major_axis_au", "eccentricity", "inclination_rad", "node_rad", "omega_planet_rad"):
        apart = getattr(one, name)[0] - getattr(ensemble, name)[0]
        assert np.all(np.abs(np.mod(apart + 1.0, 2.0 * np.pi) - 1.0) < 1e-12), name


@pytest.mark.parametrize("frame", ["jacobi", "astrocentric"])
def test_elements_agree_with_rebound(frame):
    asked = scenario(frame=frame)
    followed = follow(asked, draw=2)
    task, one = followed.task, followed.series.elements
    sim = rebound.Simulation()
    sim.G = GM_SUN_AU3_D2
    for k in range(3):
        x, y, z = task.position_au[k]
        vx, vy, vz = task.velocity_au_d[k]
        sim.add(m=task.mass_msun[k], x=x, y=y, z=z, vx=vx, vy=vy, vz=vz)
    about = [None, None] if frame == "jacobi" else [sim.particles[0]] * 2
    for k, primary in enumerate(about):
        orbit = sim.particles[k + 1].orbit(primary=primary)
        assert one.semi_major_axis_au[0, k] == pytest.approx(orbit.a, rel=1e-12)
        assert one.eccentricity[0, k] == pytest.approx(orbit.e, rel=1e-10)
        assert one.node_rad[0, k] == pytest.approx(orbit.Omega % (2 * np.pi), abs=1e-10)


@pytest.mark.parametrize(
    ("ratio", "expected"),
    [(2.003, (2, 1)), (1.49, (3, 2)), (1.4, (7, 5)), (1.667, (5, 3)), (3.02, (3, 1)), (1.44, (3, 2))],
)
def test_the_nearest_resonance_is_of_low_order(ratio, expected):
    found = nearest_resonance(ratio)
    assert (found.p, found.q) == expected
    assert found.offset == pytest.approx(ratio * found.q / found.p - 1.0)


@pytest.mark.parametrize("ratio", [0.8, 1.0, 17.0, math.nan])
def test_a_ratio_that_is_near_nothing_has_no_resonance(ratio):
    assert nearest_resonance(ratio) is None


def test_coefficients_of_every_angle_sum_to_zero():
    # d'Alembert: Murray & Dermott (1999), Solar System Dynamics, section 6.4
    for ratio in np.linspace(1.05, 4.0, 200):
        found = nearest_resonance(float(ratio))
        for k in range(found.order + 1 if found else 0):
            assert sum(found.coefficients(k)) == 0
            assert abs(found.coefficients(k)[2]) + abs(found.coefficients(k)[3]) == found.order


def test_an_angle_is_written_as_it_is_computed():
    symbols = ("λ_b", "λ_c", "ϖ_b", "ϖ_c")
    assert [nearest_resonance(2.0).angle_text(k, symbols) for k in (0, 1)] == ["2λ_c − λ_b − ϖ_b", "2λ_c − λ_b − ϖ_c"]
    assert nearest_resonance(1.4).angle_text(1, symbols) == "7λ_c − 5λ_b − ϖ_b − ϖ_c"
    longitude, apsis = np.array([[0.3, 1.1]]), np.array([[0.2, 0.9]])
    by_hand = 7 * 1.1 - 5 * 0.3 - 0.2 - 0.9
    assert nearest_resonance(1.4).angle_rad(1, longitude, apsis)[0] == pytest.approx(by_hand % (2 * np.pi))


def made_orbit(omega, anomaly, inclination, node, gm, period_d):
    a = np.cbrt(gm * (period_d / (2 * np.pi)) ** 2)
    parts = {"semi_major_axis_au": a, "eccentricity": 0.1, "inclination_rad": inclination, "node_rad": node}
    elements = Elements(
        **{k: np.array([v]) for k, v in (parts | {"omega_planet_rad": omega, "mean_anomaly_rad": anomaly}).items()}
    )
    position, velocity = state_from_elements(np.array([gm]), elements)
    return np.concatenate([position[0], velocity[0]])


@pytest.mark.parametrize("node", [0.0, 1.0, 4.0])
@pytest.mark.parametrize("inclination", [0.3, 1.5])
def test_angles_do_not_depend_on_where_longitudes_are_counted_from(node, inclination):
    mass = np.array([1.0, 0.0, 0.0])
    gm = GM_SUN_AU3_D2
    b, c = made_orbit(0.4, 1.0, inclination, node, gm, 10.0), made_orbit(1.5, 2.2, inclination, node, gm, 20.0)
    heavy = np.array([1.0, 1e-9, 1e-9])  # so that something turns; moves the elements by 1e-9
    series = series_of("astrocentric", ("b", "c"), heavy, np.zeros(1), np.stack([np.zeros(6), b, c])[None])
    pair = series.pairs[0]
    assert mass[1] == 0.0
    assert pair.apsidal_difference_rad[0] == pytest.approx(1.1, abs=1e-7)
    by_hand = 2 * (1.5 + 2.2) - (0.4 + 1.0) - 0.4
    assert pair.angles_rad[0][0] == pytest.approx(by_hand % (2 * np.pi), abs=1e-7)


def test_an_orbit_retrograde_to_the_invariable_plane_has_no_longitude():
    gm = GM_SUN_AU3_D2
    b, c = made_orbit(0.4, 1.0, 3.0, 0.0, gm, 10.0), made_orbit(1.5, 2.2, 0.1, 0.0, gm, 20.0)
    mass = np.array([1.0, 1e-6, 1e-3])
    series = series_of("astrocentric", ("b", "c"), mass, np.zeros(1), np.stack([np.zeros(6), b, c])[None])
    assert np.isnan(series.pairs[0].apsidal_difference_rad[0])
    assert np.isfinite(series.elements.omega_planet_rad).all()


def test_a_distance_of_one_mutual_hill_radius_is_one():
    mass = np.array([1.0, 1e-3, 2e-3])
    # Both at r = 1 ± d/2 on one side: R = (3e-3/3)^(1/3) (r1 + r2)/2 = 0.1 (r1 + r2)/2
    state = np.zeros((1, 3, 6))
    centre = 0.95 * 1e-3 / (1 + 1e-3)
    state[0, 1, 0], state[0, 2, 0] = 0.95, 1.05 + centre  # Jacobi distances 0.95 and 1.05
    assert distance_hill(mass, state, 1, 2)[0] == pytest.approx((0.1 + centre) / 0.1)


def test_the_sector_of_an_angle_goes_over_zero():
    seen = sector_of(np.radians([350.0, 10.0, 20.0, np.nan]))
    assert np.degrees(seen.centre_rad) == pytest.approx(5.0)
    assert np.degrees(seen.half_width_rad) == pytest.approx(15.0)
    assert np.degrees(sector_of(np.linspace(0, 2 * np.pi, 100)).half_width_rad) > 175.0


def test_the_initial_state_can_be_begun_again_in_rebound(quiet, tmp_path, monkeypatch):
    follow(scenario(), draw=2, out=tmp_path)
    monkeypatch.chdir(tmp_path)
    place: dict[str, object] = {}
    exec("\n".join(REBUILD), place)
    sim, saved = place["sim"], json.loads((tmp_path / "initial_state.json").read_text())
    assert saved["rebuild"] == list(REBUILD)
    [stage] = saved["stages"]
    sim.steps(quiet.outcome.map_steps)
    # WHFast from the same doubles takes the same steps, bit for bit; t is summed and carries rounding.
    state = np.array([[p.x, p.y, p.z, p.vx, p.vy, p.vz] for p in sim.particles])
    again = series_of("jacobi", ("b", "c"), quiet.task.mass_msun, np.zeros(1), state[None])
    assert again.elements.semi_major_axis_au[0].tolist() == quiet.series.elements.semi_major_axis_au[-1].tolist()
    assert stage["method"] == "whfast" and stage["step_d"] == quiet.outcome.step_d


def test_the_folder_holds_everything_with_units(tmp_path):
    followed = follow(scenario("12.5", text=CLOSE), draw=COLLIDES, out=tmp_path / "new")
    names = {file.name for file in followed.files}
    figures = {f"{name}.{kind}" for name in ("orbits", "angles", "encounter") for kind in ("png", "pdf")}
    texts = {"series.csv", "encounter.csv", "outcome.json", "initial_state.json", "summary.txt"}
    assert names == figures | texts
    assert all(file.stat().st_size > 0 for file in followed.files)
    with (tmp_path / "new" / "series.csv").open(encoding="utf-8") as file:
        header, first, *rows = list(csv.reader(file))
    assert header[:7] == [
        "t [d]", "a b [au]", "e b", "i b [deg]", "node b [deg]", "omega_planet b [deg]", "mean longitude b [deg]",
    ]  # fmt: skip
    assert "distance b-c [mutual Hill radii]" in header and len(rows) + 1 == len(followed.series.time_d)
    assert float(first[1]) == followed.series.elements.semi_major_axis_au[0, 0]
    told = json.loads((tmp_path / "new" / "outcome.json").read_text())
    assert told["verdict"] == "broken" and told["series"]["exact"] is True


def test_text_fits_a_terminal_and_says_what_happened(quiet, broken):
    for one in (quiet, broken):
        assert max(len(line) for line in one.as_text().splitlines()) <= 100
    assert "planets collided, b and c" in broken.as_text()
    assert "all planets stayed" in quiet.as_text()
    assert "draw 2" in quiet.as_text()


def test_the_central_values_can_be_followed():
    followed = follow(scenario(), draw=None, central=True)
    assert followed.number is None and followed.medians
    assert "central values" in followed.as_text()


@pytest.mark.parametrize("asked", [{"draw": None}, {"draw": 1, "central": True}])
def test_either_a_draw_or_the_central_values_are_asked_for(asked):
    with pytest.raises(PlanError, match="central values"):
        follow(scenario(), **asked)


def test_a_draw_that_is_not_an_orbit_is_refused_with_its_reason():
    asked = scenario(text=QUIET.replace('"0.08"', '"0.8 ± 0.4"'))
    reasons = drawn(asked, 0, 50).refused
    number = next(n for n, reason in enumerate(reasons) if "e >= 1" in reason)
    with pytest.raises(PlanError, match="e >= 1"):
        follow(asked, draw=number)


def test_the_command_writes_a_folder_named_after_scenario_and_draw(tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    Path("two.toml").write_text(QUIET.replace("OUTER", "23").replace("FRAME", "jacobi"), encoding="utf-8")
    assert cli.main(["follow", "two.toml", "--draw", "2", "--json"]) == 0
    told = json.loads(capsys.readouterr().out)
    assert told["draw"] == 2 and all(Path(file).is_file() for file in told["files"])
    assert Path(told["files"][0]).parent == Path("two_draw_2")
    assert cli.main(["follow", "two.toml"]) == 2
    assert "either the number of a draw or the central values" in capsys.readouterr().err


def test_without_a_folder_nothing_is_written(quiet, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    assert follow(scenario(), draw=2).files == ()
    assert not list(Path().iterdir())


def test_ctrl_c_belongs_to_python_afterwards(quiet):
    before = signal.getsignal(signal.SIGINT)
    follow(scenario(), draw=2)
    assert signal.getsignal(signal.SIGINT) is before


def test_one_planet_alone_has_no_pairs(tmp_path):
    text = QUIET[: QUIET.index("[planets.c]")] + QUIET[QUIET.index("[draws]") :]
    followed = follow(scenario(text=text.replace('mutual_scatter = "3 deg"\n', "")), draw=0, out=tmp_path)
    assert followed.series.pairs == () and not (tmp_path / "angles.png").exists()
    assert "b" in followed.as_text()


def test_figures_fit_a_column_or_a_page(quiet, broken):
    from matplotlib.text import Text

    figures = [orbits(quiet.series), encounter_figure(broken.encounter, broken.series.bodies)]
    figures += [*angles(broken.series), *angles(quiet.series)]
    for figure in figures:
        figure.draw_without_rendering()
        width, _ = figure.get_size_inches()
        assert width * MM_PER_INCH == pytest.approx(COLUMN_MM) or COLUMN_MM < width * MM_PER_INCH <= PAGE_MM + 0.01
        assert min(text.get_fontsize() for text in figure.findobj(Text) if text.get_text()) >= 7.0
        assert reach_inches(figure) < 0.01  # the anti-aliased edge of a letter


def test_angles_of_many_planets_take_more_than_one_page(quiet):
    many = replace(quiet.series, pairs=quiet.series.pairs * 9)
    pages = angles(many)
    assert len(pages) > 1
    assert max(page.get_size_inches()[1] for page in pages) * MM_PER_INCH <= TALLEST_MM
    shown = sum(axes.get_visible() for page in pages for axes in page.axes)
    assert shown == 9 * (1 + len(quiet.series.pairs[0].angles_rad))


@pytest.mark.parametrize(("days", "unit"), [(100.0, "d"), (1000.0, "yr"), (1e6, "kyr"), (1e12, "Gyr")])
def test_times_are_told_in_a_unit_that_reads_well(days, unit):
    assert time_unit(days)[0] == unit
