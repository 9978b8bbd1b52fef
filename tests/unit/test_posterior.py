"""Readers of sample files: what comes out of a good one."""

import hashlib
import sys

import numpy as np
import pytest

from stabcheck.errors import SampleFileError
from stabcheck.posterior import Roles, check_unit, read_samples
from stabcheck.quantity import Dimension, from_toml

PERIODS = np.array([10.0, 11.5, 1.0 / 3.0, 9.999999999999998])
ECCENTRICITIES = np.array([0.0, 0.1, 0.2, 5e-324])
LOG_WEIGHTS = np.array([-1000.0, -1001.0, -np.inf, -1000.0])
ROLES = Roles(values=("P_b", "e_b"))


def write_csv(path, **columns):
    lines = [",".join(columns)] + [",".join(repr(float(v)) for v in row) for row in zip(*columns.values(), strict=True)]
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")


def write_npz(path, **columns):
    np.savez_compressed(path, **columns)


def write_ecsv(path, **columns):
    from astropy.table import Table

    Table(columns).write(path, format="ascii.ecsv")


WRITERS = {".csv": write_csv, ".ecsv": write_ecsv, ".npz": write_npz}


@pytest.mark.parametrize("ending", WRITERS)
def test_every_format_gives_back_each_number_bit_for_bit(tmp_path, ending):
    path = tmp_path / f"posterior{ending}"
    WRITERS[ending](path, other=PERIODS, P_b=PERIODS, e_b=ECCENTRICITIES)
    samples = read_samples(path, ROLES)
    assert np.array_equal(samples.columns["P_b"], PERIODS)
    assert np.array_equal(samples.columns["e_b"], ECCENTRICITIES)
    assert set(samples.columns) == {"P_b", "e_b"}
    assert samples.rows == 4


def test_the_ending_may_be_in_capitals_and_the_name_is_kept_without_its_folder(tmp_path):
    path = tmp_path / "POSTERIOR.CSV"
    write_csv(path, P_b=PERIODS, e_b=ECCENTRICITIES)
    assert read_samples(path, ROLES).name == "POSTERIOR.CSV"


def test_the_hash_is_that_of_the_bytes_and_one_changed_digit_changes_it(tmp_path):
    path = tmp_path / "posterior.csv"
    write_csv(path, P_b=PERIODS, e_b=ECCENTRICITIES)
    before = read_samples(path, ROLES).content_hash
    assert before == hashlib.sha256(path.read_bytes()).hexdigest()
    path.write_bytes(path.read_bytes().replace(b"11.5", b"11.6"))
    assert read_samples(path, ROLES).content_hash != before


@pytest.mark.parametrize("ending", [".csv", ".npz"])
def test_integers_of_either_byte_order_are_numbers_too(tmp_path, ending):
    path = tmp_path / f"posterior{ending}"
    WRITERS[ending](path, P_b=np.array([1, 2], dtype=">i4"), e_b=np.array([0.0, 0.5], dtype=">f8"))
    samples = read_samples(path, ROLES)
    assert samples.columns["P_b"].tolist() == [1.0, 2.0]
    assert samples.columns["P_b"].dtype == np.float64


def weighted(tmp_path, weights, **roles):
    path = tmp_path / "posterior.csv"
    write_csv(path, P_b=PERIODS, e_b=ECCENTRICITIES, w=weights)
    return read_samples(path, Roles(values=("P_b", "e_b"), **roles))


def test_weights_are_normalised(tmp_path):
    samples = weighted(tmp_path, [1.0, 2.0, 0.0, 1.0], weight="w")
    assert samples.weights.tolist() == [0.25, 0.5, 0.0, 0.25]
    assert samples.effective_rows == pytest.approx(1 / (0.25**2 + 0.5**2 + 0.25**2), rel=1e-14)


def test_weights_at_the_edge_of_the_numbers_do_not_overflow(tmp_path):
    assert weighted(tmp_path, [1e308, 1e308, 1e308, 0.0], weight="w").weights[:3].tolist() == [1 / 3] * 3


def test_log_weights_far_below_0_keep_their_ratio(tmp_path):
    """exp(-1000) is 0 in doubles: whoever takes it before scaling is left with nothing."""
    weights = weighted(tmp_path, LOG_WEIGHTS, log_weight="w").weights
    assert weights[0] / weights[1] == pytest.approx(np.e, rel=1e-14)
    assert weights[2] == 0.0
    assert weights.sum() == pytest.approx(1.0, rel=1e-15)
    assert np.exp(LOG_WEIGHTS).sum() == 0.0  # the control


def test_equal_weights_are_no_weights(tmp_path):
    samples = weighted(tmp_path, [0.3] * 4, weight="w")
    assert samples.weights is None
    assert samples.effective_rows == 4


def test_the_best_row_is_that_of_the_largest_log_probability(tmp_path):
    assert weighted(tmp_path, [-5.0, -3.0, -np.inf, -4.0], log_probability="w").best_row == 1


def test_chains_keep_their_labels(tmp_path):
    assert weighted(tmp_path, [0, 0, 7, 7], chain="w").chain.tolist() == [0, 0, 7, 7]


@pytest.fixture
def with_units(tmp_path):
    from astropy import units
    from astropy.table import Table

    path = tmp_path / "posterior.ecsv"
    columns = {"P_b": PERIODS * units.d, "e_b": ECCENTRICITIES, "K_b": PERIODS * units.m / units.s}
    columns |= {"m_b": PERIODS * units.M_jup, "R_b": PERIODS * units.R_earth, "omega_b": PERIODS * units.deg}
    Table(columns).write(path, format="ascii.ecsv")
    return read_samples(path, Roles(values=tuple(columns)))


def checked_against(samples, column, unit, dimension):
    quantity = from_toml({"column": column, "unit": unit} if unit else {"column": column}, dimension)
    check_unit(samples, f"planets.b.{column}", quantity, "posterior.ecsv")


@pytest.mark.parametrize(
    "column, unit, dimension",
    [
        ("P_b", "d", Dimension.TIME),
        ("P_b", "BJD_TDB", Dimension.DATE),
        ("K_b", "m/s", Dimension.SPEED),
        ("m_b", "Mjup", Dimension.MASS),
        ("R_b", "Rearth", Dimension.LENGTH),
        ("omega_b", "deg", Dimension.ANGLE),
        ("e_b", "", Dimension.NUMBER),
    ],
)
def test_a_unit_that_file_and_scenario_agree_on_is_fine(with_units, column, unit, dimension):
    checked_against(with_units, column, unit, dimension)


@pytest.mark.parametrize(
    "column, unit, dimension, words",
    [
        ("P_b", "yr", Dimension.TIME, "contradicts"),
        ("K_b", "km/s", Dimension.SPEED, "0.001 times"),
        ("m_b", "Mearth", Dimension.MASS, "contradicts"),
        ("R_b", "Rjup", Dimension.LENGTH, "contradicts"),
        ("omega_b", "rad", Dimension.ANGLE, "contradicts"),
        ("P_b", "Mjup", Dimension.MASS, "not a mass"),
        ("m_b", "BJD", Dimension.DATE, "not a time"),
        ("omega_b", "", Dimension.NUMBER, "not a number"),
    ],
)
def test_a_unit_that_contradicts_the_scenario_is_refused(with_units, column, unit, dimension, words):
    with pytest.raises(SampleFileError, match=words):
        checked_against(with_units, column, unit, dimension)


def test_a_file_that_states_no_unit_for_a_column_is_believed(with_units):
    assert "e_b" not in with_units.units
    checked_against(with_units, "e_b", "deg", Dimension.ANGLE)


def test_reading_plain_text_does_not_load_astropy(tmp_path):
    import subprocess

    path = tmp_path / "posterior.csv"
    write_csv(path, P_b=PERIODS, e_b=ECCENTRICITIES)
    script = (
        "import sys, pathlib; from stabcheck.posterior import Roles, read_samples;"
        f"read_samples(pathlib.Path({str(path)!r}), Roles(values=('P_b',)));"
        "sys.exit('astropy' in sys.modules)"
    )
    assert subprocess.run([sys.executable, "-c", script], check=False).returncode == 0
