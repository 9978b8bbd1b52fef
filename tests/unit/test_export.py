"""The exported table: every draw, units in the header, doubles whole, the same bytes twice."""

import csv

import numpy as np
import pytest
from made_up_draws import broken, mixed, survived, table, unknown

from stabcheck.errors import StabcheckError
from stabcheck.report.export import export, exported, write_csv, write_ecsv


def rows_of(path):
    with path.open(newline="", encoding="utf-8") as file:
        return list(csv.DictReader(file))


@pytest.fixture
def made():
    return table([survived(0), broken(1), unknown(3)], 5, refused=(2,))


def test_every_draw_has_a_row_and_its_state(tmp_path, made):
    write_csv(made, tmp_path / "draws.csv")
    rows = rows_of(tmp_path / "draws.csv")
    assert [row["number"] for row in rows] == ["0", "1", "2", "3", "4"]
    assert [row["state"] for row in rows] == ["done", "done", "refused", "done", "not finished"]
    assert [row["verdict"] for row in rows] == ["regular", "broken", "", "unknown", ""]
    assert rows[2]["refused"] == "e < 0 (c)" and rows[1]["ending_bodies"] == "c"


def test_units_stand_in_the_header(tmp_path, made):
    write_csv(made, tmp_path / "draws.csv")
    header = set(rows_of(tmp_path / "draws.csv")[0])
    assert {"m_star [Msun]", "m_b [Mearth]", "P_b [d]", "a_b [au]", "i_b [deg]", "time [yr]", "e_b"} <= header


def test_doubles_come_back_whole(tmp_path):
    whole = mixed(80)
    write_csv(whole, tmp_path / "draws.csv")
    read = [float(row["P_b [d]"]) for row in rows_of(tmp_path / "draws.csv")]
    assert read == whole.elements["period_d"][:, 0].tolist()  # equal, not nearly


def test_what_was_not_measured_is_an_empty_cell_and_never_a_sentinel(tmp_path, made):
    write_csv(made, tmp_path / "draws.csv")
    rows = rows_of(tmp_path / "draws.csv")
    assert rows[4]["megno"] == rows[0]["lyapunov_time [yr]"] == rows[4]["time [yr]"] == ""
    assert "nan" not in (tmp_path / "draws.csv").read_text().lower()


@pytest.mark.parametrize("write", [write_csv, write_ecsv])
def test_the_same_table_gives_the_same_bytes(tmp_path, write):
    for name in ("one", "other"):
        write(mixed(40), tmp_path / name)
    assert (tmp_path / "one").read_bytes() == (tmp_path / "other").read_bytes()
    write(mixed(40, seed=9), tmp_path / "third")
    assert (tmp_path / "one").read_bytes() != (tmp_path / "third").read_bytes()  # control


def test_ecsv_is_read_by_astropy_with_units_and_whole_doubles(tmp_path):
    from astropy import units
    from astropy.table import Table

    whole = mixed(60)
    write_ecsv(whole, tmp_path / "draws.ecsv")
    read = Table.read(tmp_path / "draws.ecsv", format="ascii.ecsv")
    assert len(read) == 60 and read["m_b"].unit == units.M_earth and read["P_b"].unit == units.d
    assert read["a_c"].unit == units.au and read["time"].unit == units.yr and read["i_b"].unit == units.deg
    assert read["P_b"].tolist() == whole.elements["period_d"][:, 0].tolist()
    assert read["verdict"].filled("").tolist() == whole.verdict.tolist()
    assert read.meta["seed"] == 7 and read.meta["frame"] == "jacobi"


def test_survivors_alone_can_be_taken_as_a_chain(made):
    fields = {field.name: field.values for field in exported(made, only=["regular", "chaotic"])}
    assert fields["number"].tolist() == [0]


def test_no_two_columns_share_a_name():
    headers = [field.header for field in exported(mixed(10))]
    assert len(set(headers)) == len(headers)


def test_a_name_with_another_ending_is_refused_before_anything_is_read(tmp_path):
    with pytest.raises(StabcheckError, match="csv"):
        export(tmp_path / "missing.run", tmp_path / "draws.xlsx")
    assert list(tmp_path.iterdir()) == []


def test_an_export_that_fails_leaves_no_half_file(tmp_path, made):
    with pytest.raises(OSError):
        write_csv(made, tmp_path / "no folder" / "draws.csv")
    assert list(tmp_path.iterdir()) == []


def test_numbers_that_are_infinite_stay_so(tmp_path):
    write_csv(table([broken(0, a_most_au=np.array([np.inf, 1.0]))]), tmp_path / "draws.csv")
    assert rows_of(tmp_path / "draws.csv")[0]["a_most_b [au]"] == "inf"
