"""Draws from sample files: rows stay whole, weights count, and the shipped files are what their generator makes."""

import importlib.util
from pathlib import Path

import numpy as np
import pytest
from invented_scenarios import HEAD, RICH, assert_same_bits, fields_of, planet, scenario_of
from scipy import stats

from stabcheck.constants import DEGREE_RAD, M_S_AU_D, TWO_PI
from stabcheck.ensemble import Ensemble, central, draw, phase_error_deg, source
from stabcheck.errors import PlanError, SampleFileError
from stabcheck.scenario import Scenario


def column(name: str, unit: str = "") -> str:
    return f'{{ column = "{name}", unit = "{unit}" }}' if unit else f'{{ column = "{name}" }}'


FROM_SAMPLES = f"""
[planets.b]
period = {column("P", "d")}
eccentricity = {column("e")}
omega_star = {column("w", "deg")}
mean_longitude_star = {column("l", "deg")}
semi_amplitude = {column("K", "m/s")}
inclination = "80 ± 2 deg"
"""


def samples(count: int = 300) -> dict[str, np.ndarray]:
    rng = np.random.default_rng(3)
    step = rng.standard_normal((5, count))
    return {
        "P": 100.0 + step[0],
        "l": (355.0 + 8.0 * step[0] + 2.0 * step[1]) % 360.0,
        "e": 0.2 + 0.03 * step[2],
        "w": (10.0 + 20.0 * step[3]) % 360.0,
        "K": 30.0 + 2.0 * step[2] + step[4],
        "lnp": -0.5 * (step**2).sum(axis=0),
        "walker": np.repeat(np.arange(3), count // 3),
    }


def from_samples(
    folder: Path, columns: dict[str, np.ndarray], extra: str = "", planet_b: str = FROM_SAMPLES
) -> Scenario:
    np.savez(folder / "posterior.npz", **columns)
    return scenario_of(HEAD, planet_b, f'[samples]\nfile = "posterior.npz"\n{extra}', folder=folder)


def kept_whole(found: Ensemble, columns: dict[str, np.ndarray]) -> bool:
    """Do all columns of every draw come from the row that it names?"""
    names = {"P": "period", "e": "eccentricity", "w": "omega_star", "l": "mean_longitude_star", "K": "semi_amplitude"}
    factor = {"w": DEGREE_RAD, "l": DEGREE_RAD, "K": M_S_AU_D}
    drawn = {name: found.parameters[f"planets.b.{key}"] for name, key in names.items()}
    return all(np.array_equal(drawn[n], columns[n][found.source_row] * factor.get(n, 1.0)) for n in names)


def test_rows_of_a_sample_file_are_used_whole_and_once_each(tmp_path):
    columns = samples()
    found = draw(from_samples(tmp_path, columns, 'chain = "walker"\n'), 0, 300)
    assert kept_whole(found, columns)
    assert np.array_equal(np.sort(found.source_row), np.arange(300))
    assert not np.array_equal(found.source_row, np.arange(300))
    assert np.array_equal(found.chain, columns["walker"][found.source_row])
    assert (found.weight == 1.0).all()


def test_control_a_column_from_other_rows_is_noticed(tmp_path):
    columns = samples()
    found = draw(from_samples(tmp_path, columns), 0, 300)
    assert not kept_whole(found, columns | {"l": np.roll(columns["l"], 1)})


def test_what_is_correlated_in_the_file_is_correlated_in_the_draws(tmp_path):
    columns = samples()
    found = draw(from_samples(tmp_path, columns), 0, 300)
    longitude = np.mod(found.parameters["planets.b.mean_longitude_star"] + np.pi, TWO_PI)
    assert np.corrcoef(found.period_d[:, 0], longitude)[0, 1] > 0.95
    assert phase_error_deg(from_samples(tmp_path, columns))["b"] == pytest.approx(np.hypot(8.0, 2.0), rel=0.25)


def test_what_is_no_column_is_drawn_beside_the_rows(tmp_path):
    found = draw(from_samples(tmp_path, samples()), 0, 300)
    alone = draw(scenario_of(HEAD, planet(inclination="80 ± 2 deg")), 0, 300)
    assert np.array_equal(found.inclination_rad, alone.inclination_rad)


def test_draws_from_samples_do_not_depend_on_the_pieces(tmp_path):
    for extra in ("", 'log_weight = "lnp"\n'):
        opened = source(from_samples(tmp_path, samples(), extra))
        pieces = [fields_of(draw(opened, first, 50)) for first in range(0, 300, 50)]
        joined = {name: np.concatenate([part[name] for part in pieces]) for name in pieces[0]}
        assert_same_bits(joined, fields_of(draw(opened, 0, 300)))


def test_more_draws_than_rows_are_refused_with_both_numbers(tmp_path):
    opened = source(from_samples(tmp_path, samples()))
    assert opened.most_draws == 300
    with pytest.raises(PlanError) as refused:
        draw(opened, 290, 11)
    assert "301" in refused.value.what and "300" in refused.value.what


def test_weighted_rows_come_as_often_as_their_weights_say(tmp_path):
    columns = samples() | {"weight": np.where(np.arange(300) < 100, 0.0, np.arange(300.0))}
    opened = source(from_samples(tmp_path, columns, 'weight = "weight"\n'))
    found = draw(opened, 0, 20_000)
    assert opened.most_draws is None
    assert kept_whole(found, columns)
    counts = np.bincount(found.source_row, minlength=300)
    expected = 20_000 * columns["weight"] / columns["weight"].sum()
    assert counts[:100].sum() == 0
    assert stats.chisquare(counts[100:], expected[100:]).pvalue > 0.01
    assert stats.chisquare(counts[100:], np.full(200, 100.0)).pvalue < 1e-6  # control: the raw rows
    assert (found.weight == 1.0).all()


def test_an_opened_source_reads_the_file_no_more(tmp_path):
    opened = source(from_samples(tmp_path, samples()))
    before = draw(opened, 0, 300)
    (tmp_path / "posterior.npz").unlink()
    assert_same_bits(fields_of(before), fields_of(draw(opened, 0, 300)))
    assert len(opened.content_hash) == 64
    assert source(RICH["jacobi, own planes"]).content_hash == ""


def test_a_sample_that_is_no_orbit_keeps_its_number_too(tmp_path):
    columns = samples()
    columns["e"][17] = -0.01
    found = draw(from_samples(tmp_path, columns), 0, 300)
    assert found.refused[found.source_row == 17].tolist() == ["e < 0 (b)"]
    assert np.count_nonzero(found.refused != "") == 1


def test_no_mass_gives_a_velocity_to_a_face_on_orbit(tmp_path):
    columns = samples() | {"i": np.where(np.arange(300) == 5, 0.0, 60.0)}
    text = FROM_SAMPLES.replace('"80 ± 2 deg"', column("i", "deg"))
    found = draw(from_samples(tmp_path, columns, planet_b=text), 0, 300)
    assert found.refused[found.source_row == 5].tolist() == ["no mass gives this K (b)"]
    assert np.count_nonzero(found.refused != "") == 1


def test_a_missing_column_is_refused_with_the_nearest_name(tmp_path):
    columns = samples()
    columns["K_b"] = columns.pop("K")
    with pytest.raises(SampleFileError, match="'K'"):
        source(from_samples(tmp_path, columns))


def dated(folder: Path, offset: str) -> Scenario:
    text = FROM_SAMPLES.replace(
        f"mean_longitude_star = {column('l', 'deg')}",
        f'time_of_conjunction = {{ column = "T", unit = "BJD_TDB"{offset} }}',
    )
    columns = samples() | {"T": 9000.0 + np.arange(300) / 1000}
    return from_samples(folder, columns, planet_b=text)


def test_reduced_dates_in_a_column_need_their_offset(tmp_path):
    with pytest.raises(SampleFileError, match="offset"):
        source(dated(tmp_path, ""))
    times = draw(dated(tmp_path, ", offset = 2450000"), 0, 300).parameters["planets.b.time_of_conjunction"]
    assert 2459000.0 <= times.min() < times.max() < 2459000.3


def test_a_unit_in_the_file_that_contradicts_the_scenario_is_refused_by_the_parameters_name(tmp_path):
    from astropy import units
    from astropy.table import Table

    columns = samples()
    table = Table(columns | {"K": columns["K"] * units.km / units.s, "w": columns["w"] * units.deg})
    table.write(tmp_path / "posterior.ecsv", format="ascii.ecsv")
    scenario = scenario_of(HEAD, FROM_SAMPLES, '[samples]\nfile = "posterior.ecsv"\n', folder=tmp_path)
    with pytest.raises(SampleFileError, match=r"planets\.b\.semi_amplitude"):
        source(scenario)


# ---------------------------------------------------------------------------------------------------------------------
# Central values


def test_the_central_row_of_samples_is_the_best_one_where_the_file_knows_it(tmp_path):
    columns = samples()
    row = central(from_samples(tmp_path, columns, 'log_probability = "lnp"\n'))
    assert row.source_row.tolist() == [np.argmax(columns["lnp"])]
    assert row.period_d[0, 0] == columns["P"][np.argmax(columns["lnp"])]


def test_the_central_row_of_samples_without_a_best_one_is_marked_as_no_row(tmp_path):
    row = central(from_samples(tmp_path, samples()))
    assert row.source_row.tolist() == [-1]
    assert row.period_d[0, 0] == pytest.approx(np.median(samples()["P"]), rel=1e-14)
    # Angles about 0°: the middle of 355° and 5° is 0°, not 180°.
    apart = np.degrees(row.parameters["planets.b.mean_longitude_star"][0]) - 355.0
    assert abs((apart + 180.0) % 360.0 - 180.0) < 2.0


def test_weights_count_in_the_central_row(tmp_path):
    columns = samples() | {"weight": np.where(samples()["P"] > 100.5, 1.0, 1e-9)}
    row = central(from_samples(tmp_path, columns, 'weight = "weight"\n'))
    assert row.period_d[0, 0] == pytest.approx(np.median(columns["P"][columns["P"] > 100.5]), rel=1e-3)


# ---------------------------------------------------------------------------------------------------------------------
# What is shipped


@pytest.mark.parametrize("name", ["giant_pair_near_2to1", "corner_survives"])
def test_the_shipped_sample_scenarios_are_read_and_all_their_draws_are_orbits(project, name):
    opened = source(Scenario.read(project / "scenarios" / f"{name}.toml"))
    found = draw(opened, 0, 600)
    assert set(found.refused) == {""}
    assert central(opened).source_row[0] >= 0
    assert opened.samples.effective_rows > 400


def test_periods_and_phases_of_the_shipped_giant_pair_are_correlated(project):
    found = draw(Scenario.read(project / "scenarios" / "giant_pair_near_2to1.toml"), 0, 600).parameters
    assert np.corrcoef(found["planets.c.period"], found["planets.c.mean_longitude_star"])[0, 1] > 0.5


def test_the_shipped_sample_files_are_what_their_generator_makes(project):
    spec = importlib.util.spec_from_file_location("make_samples", project / "scenarios" / "make_samples.py")
    generator = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(generator)
    for name, text in generator.files().items():
        there = (project / "scenarios" / name).read_text(encoding="utf-8")
        assert there.splitlines()[:20] == text.splitlines()[:20] and "invented" in there
        last_digit = 1.01e-5  # rounding may fall either way on another machine
        assert numbers_of(there) == pytest.approx(numbers_of(text), abs=last_digit), name
        changed = there.rstrip()[:-4] + "9999"  # control: another number at the very end
        assert numbers_of(changed) != pytest.approx(numbers_of(text), abs=last_digit), name


def numbers_of(text: str) -> np.ndarray:
    rows = [line.split(",") for line in text.splitlines() if line and (line[0].isdigit() or line[0] == "-")]
    return np.array(rows, dtype=float).ravel()
