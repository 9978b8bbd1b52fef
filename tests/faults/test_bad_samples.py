"""A catalogue of sample files that cannot be used, each with its refusal; and of files that only look bad."""

import io
import math
import zipfile
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from stabcheck.errors import SampleFileError
from stabcheck.posterior import Roles, Samples, read_samples

GOOD = "P_b,e_b,w\n1.0,0.1,1\n2.0,0.2,3\n"
PLAIN = Roles(values=("P_b", "e_b"))
WEIGHTED = Roles(values=("P_b", "e_b"), weight="w")
LOG_WEIGHTED = Roles(values=("P_b", "e_b"), log_weight="w")
CHAINED = Roles(values=("P_b", "e_b"), chain="w")
RANKED = Roles(values=("P_b", "e_b"), log_probability="w")

ECSV = """# %ECSV 1.0
# ---
# datatype:
# - {name: P_b, unit: d, datatype: float64}
# - {name: e_b, datatype: float64}
# schema: astropy-2.0
P_b e_b
1.0 0.1
2.0 0.2
"""
WORDS = ECSV.replace("e_b, datatype: float64", "e_b, datatype: string")


def npz(**arrays) -> bytes:
    target = io.BytesIO()
    np.savez(target, **arrays)
    return target.getvalue()


def archive_of(*members: tuple[str, bytes]) -> bytes:
    target = io.BytesIO()
    with zipfile.ZipFile(target, "w") as archive:
        for name, content in members:
            archive.writestr(name, content)
    return target.getvalue()


def npy(array) -> bytes:
    target = io.BytesIO()
    np.save(target, array)
    return target.getvalue()


TWO = np.array([1.0, 2.0])
WHOLE = npz(P_b=np.arange(1.0, 100.0), e_b=np.full(99, 0.1))
HUGE = npy(TWO).replace(b"(2,), ", b"(99999999999999,), ".ljust(6))  # a header that promises what is not there

# name of the case: (ending, content, roles, words that the refusal must hold)
CATALOGUE = {
    "empty text": (".csv", "", PLAIN, ["empty"]),
    "comments only": (".csv", "# made by nobody\n\n", PLAIN, ["empty", "comments"]),
    "header only": (".csv", "P_b,e_b\n", PLAIN, ["no rows"]),
    "no header": (".csv", "1.0,0.1\n2.0,0.2\n", PLAIN, ["no line of column names"]),
    "header hidden in a comment": (".csv", "# P_b,e_b\n1.0,0.1\n", PLAIN, ["no line of column names"]),
    "missing column": (".csv", GOOD.replace("e_b", "ecc_b"), PLAIN, ["no column 'e_b'", "did you mean 'ecc_b'?"]),
    "wrong case": (".csv", GOOD.replace("P_b", "p_b"), PLAIN, ["no column 'P_b'", "did you mean 'p_b'?"]),
    "no weight column": (".csv", GOOD.replace(",w", ",v"), WEIGHTED, ["no column 'w'"]),
    "words in a cell": (".csv", GOOD.replace("0.2", "none"), PLAIN, ["'e_b'", "'none'", "line 3"]),
    "empty cell": (".csv", GOOD.replace("0.2", ""), PLAIN, ["'e_b'", "line 3", "the cell is empty"]),
    "underscore in a number": (".csv", GOOD.replace("2.0", "2_0"), PLAIN, ["'P_b'", "'2_0'", "line 3"]),
    "two decimal points": (".csv", GOOD.replace("2.0", "2.0.1"), PLAIN, ["'P_b'", "'2.0.1'", "line 3"]),
    "cell too few": (".csv", GOOD.replace("2.0,0.2,3", "2.0,0.2"), PLAIN, ["line 3", "2 cells", "3 column names"]),
    "cell too many": (".csv", GOOD.replace("2.0,0.2,3", "2.0,0.2,3,4"), PLAIN, ["line 3", "4 cells"]),
    "decimal commas": (".csv", GOOD.replace("2.0", "2,0"), PLAIN, ["line 3", "decimal point"]),
    "semicolons": (".csv", GOOD.replace(",", ";"), PLAIN, ["only commas"]),
    "blanks between columns": (".csv", GOOD.replace(",", " "), PLAIN, ["only commas"]),
    "NaN": (".csv", GOOD.replace("0.2", "nan"), PLAIN, ["'e_b' holds nan", "line 3"]),
    "infinity": (".csv", GOOD.replace("2.0", "-inf"), PLAIN, ["'P_b' holds -inf", "line 3"]),
    "overflow": (".csv", GOOD.replace("2.0", "1e999"), PLAIN, ["'P_b' holds inf", "line 3"]),
    "column twice": (".csv", "P_b,e_b,e_b\n1,0.1,0.1\n", PLAIN, ["'e_b'", "twice"]),
    "open quotation": (".csv", 'P_b,e_b\n"1.0,0.1\n', PLAIN, ["not comma-separated"]),
    "cell of a megabyte": (".csv", "P_b,e_b\n" + "1" * 1_000_000 + ",0.1\n", PLAIN, ["not comma-separated"]),
    "zero bytes": (".csv", b"P_b,e_b\n1.0,\x000.1\n", PLAIN, ["byte 13", "not a text"]),
    "random bytes": (".csv", bytes(range(1, 256)) * 4, PLAIN, ["byte 128", "not UTF-8"]),
    "Latin-1": (".csv", "P_b,e_b,größe\n".encode("latin-1"), PLAIN, ["not UTF-8"]),
    "UTF-16": (".csv", GOOD.encode("utf-16"), PLAIN, ["UTF-16"]),
    "archive named as text": (".csv", WHOLE, PLAIN, ["not a text"]),
    "negative weight": (".csv", GOOD.replace(",3", ",-3"), WEIGHTED, ["weight", "-3", "line 3", "log_weight"]),
    "weights all 0": (".csv", GOOD.replace(",1\n", ",0\n").replace(",3", ",0"), WEIGHTED, ["every weight", "0"]),
    "NaN weight": (".csv", GOOD.replace(",3", ",nan"), WEIGHTED, ["'w' holds nan", "line 3"]),
    "infinite weight": (".csv", GOOD.replace(",3", ",inf"), WEIGHTED, ["'w' holds inf", "line 3"]),
    "infinite log-weight": (".csv", GOOD.replace(",3", ",inf"), LOG_WEIGHTED, ["'w' holds inf"]),
    "log-weights all -inf": (".csv", "P_b,e_b,w\n1,0.1,-inf\n2,0.2,-inf\n", LOG_WEIGHTED, ["every log-weight"]),
    "NaN log-probability": (".csv", GOOD.replace(",3", ",nan"), RANKED, ["'w' holds nan"]),
    "log-probability all -inf": (".csv", "P_b,e_b,w\n1,0.1,-inf\n2,0.2,-inf\n", RANKED, ["every cell"]),
    "half a chain": (".csv", GOOD.replace(",3", ",1.5"), CHAINED, ["chain", "1.5", "whole numbers"]),
    "chain below 0": (".csv", GOOD.replace(",3", ",-1"), CHAINED, ["chain", "-1", "whole numbers"]),
    "text named as ECSV": (".ecsv", GOOD, PLAIN, ["not an ECSV table", ".csv"]),
    "empty ECSV": (".ecsv", "", PLAIN, ["empty"]),
    "ECSV header only": (".ecsv", ECSV[: ECSV.index("1.0 0.1")], PLAIN, ["no rows"]),
    "ECSV header cut off": (".ecsv", ECSV[:40], PLAIN, ["cannot be read"]),
    "ECSV with broken YAML": (".ecsv", ECSV.replace("{name: P_b,", "{name P_b"), PLAIN, ["cannot be read"]),
    "ECSV ragged": (".ecsv", ECSV.replace("2.0 0.2", "2.0"), PLAIN, ["cannot be read"]),
    "ECSV with an empty cell": (".ecsv", ECSV.replace("2.0 0.2", '"" 0.2'), PLAIN, ["'P_b'", "1 empty", "row 2"]),
    "ECSV with NaN": (".ecsv", ECSV.replace("2.0 0.2", "nan 0.2"), PLAIN, ["'P_b' holds nan", "row 2"]),
    "ECSV column of words": (".ecsv", WORDS, PLAIN, ["'e_b'", "real number"]),
    "ECSV column missing": (".ecsv", ECSV.replace("e_b", "e_c"), PLAIN, ["no column 'e_b'", "'e_c'"]),
    "ECSV column twice": (".ecsv", ECSV.replace("e_b", "P_b"), PLAIN, []),
    "ECSV unknown unit": (".ecsv", ECSV.replace("unit: d", "unit: fortnights"), PLAIN, ["'fortnights'", "'P_b'"]),
    "ECSV unit of temperature": (".ecsv", ECSV.replace("unit: d", "unit: K"), PLAIN, ["'K'", "'P_b'"]),
    "empty archive": (".npz", b"", PLAIN, ["empty"]),
    "text named as archive": (".npz", GOOD, PLAIN, ["not a NumPy archive"]),
    "one array, no archive": (".npz", npy(TWO), PLAIN, ["not a NumPy archive"]),
    "archive without arrays": (".npz", archive_of(), PLAIN, ["no column 'P_b'", "the file has none"]),
    "archive cut off in the middle": (".npz", WHOLE[: len(WHOLE) // 2], PLAIN, ["damaged"]),
    "archive cut off at the end": (".npz", WHOLE[:-30], PLAIN, ["damaged"]),
    "archive with a damaged byte": (".npz", WHOLE[:400] + b"\xff" + WHOLE[401:], PLAIN, ["damaged"]),
    "pickled array": (".npz", npz(P_b=np.array([1.0, None], dtype=object), e_b=TWO), PLAIN, ["'P_b'", "pickled"]),
    "arrays of unequal length": (".npz", npz(P_b=TWO, e_b=TWO[:1]), PLAIN, ["length", "P_b has 2", "e_b has 1"]),
    "two-dimensional array": (".npz", npz(P_b=TWO.reshape(2, 1), e_b=TWO), PLAIN, ["'P_b'", "(2, 1)"]),
    "single number": (".npz", npz(P_b=np.float64(1.0), e_b=TWO), PLAIN, ["'P_b'", "()"]),
    "array of words": (".npz", npz(P_b=np.array(["1.0", "2.0"]), e_b=TWO), PLAIN, ["'P_b'", "real numbers"]),
    "complex array": (".npz", npz(P_b=TWO + 1j, e_b=TWO), PLAIN, ["'P_b'", "real numbers"]),
    "array of flags": (".npz", npz(P_b=TWO > 1, e_b=TWO), PLAIN, ["'P_b'", "real numbers"]),
    "array missing": (".npz", npz(P_b=TWO, ecc_b=TWO), PLAIN, ["no column 'e_b'", "did you mean 'ecc_b'?"]),
    "arrays without rows": (".npz", npz(P_b=TWO[:0], e_b=TWO[:0]), PLAIN, ["no rows"]),
    "NaN in an array": (".npz", npz(P_b=np.array([1.0, math.nan]), e_b=TWO), PLAIN, ["'P_b' holds nan", "row 2"]),
    "member that is no array": (".npz", archive_of(("P_b.npy", b"hello"), ("e_b.npy", npy(TWO))), PLAIN, []),
    "array larger than the machine": (".npz", archive_of(("P_b.npy", HUGE), ("e_b.npy", npy(TWO))), PLAIN, ["damaged"]),
    "unknown ending": (".h5", GOOD, PLAIN, ["'.h5'", ".csv", ".ecsv", ".npz"]),
    "no ending": ("", GOOD, PLAIN, ["''", ".csv"]),
}


def written(folder: Path, ending: str, content: str | bytes) -> Path:
    path = folder / f"posterior{ending}"
    path.write_bytes(content.encode() if isinstance(content, str) else content)
    return path


@pytest.mark.parametrize("case", CATALOGUE, ids=str)
def test_a_bad_file_is_refused_with_the_reason_and_its_path(tmp_path, case):
    ending, content, roles, words = CATALOGUE[case]
    path = written(tmp_path, ending, content)
    with pytest.raises(SampleFileError) as refused:
        read_samples(path, roles)
    assert str(path) in refused.value.where and refused.value.do
    for word in words:
        assert word in str(refused.value)


def test_the_catalogue_has_many_cases_and_its_good_files_are_read(tmp_path):
    """The control of the catalogue: what the cases are made from is not refused."""
    assert len(CATALOGUE) >= 25
    for ending, content in ((".csv", GOOD), (".ecsv", ECSV), (".npz", npz(P_b=TWO, e_b=np.array([0.1, 0.2])))):
        samples = read_samples(written(tmp_path, ending, content), PLAIN)
        assert samples.columns["P_b"].tolist() == [1.0, 2.0]
        assert samples.columns["e_b"].tolist() == [0.1, 0.2]


def test_a_missing_file_is_refused(tmp_path):
    with pytest.raises(SampleFileError, match="No such file"):
        read_samples(tmp_path / "nowhere.csv", PLAIN)


def test_a_folder_is_refused(tmp_path):
    (tmp_path / "posterior.csv").mkdir()
    with pytest.raises(SampleFileError, match="directory"):
        read_samples(tmp_path / "posterior.csv", PLAIN)


FINE = {
    "byte-order mark": GOOD.encode("utf-8-sig"),
    "line ends of Windows": GOOD.replace("\n", "\r\n").encode(),
    "line ends of old machines": GOOD.replace("\n", "\r").encode(),
    "comments": ("# made up\n" + GOOD.replace("2.0", "# another\n2.0")).encode(),
    "blank lines": GOOD.replace("\n", "\n\n").encode(),
    "no last line end": GOOD.rstrip().encode(),
    "blanks around cells": GOOD.replace(",", " , ").encode(),
    "quotation marks": GOOD.replace("P_b", '"P_b"').replace("2.0", '"2.0"').encode(),
    "exponents": GOOD.replace("2.0", "0.2E+1").encode(),
    "another column of words": GOOD.replace("w", "note").replace(",1\n", ",good\n").encode(),
}


@pytest.mark.parametrize("case", FINE, ids=str)
def test_a_file_that_only_looks_bad_is_read(tmp_path, case):
    samples = read_samples(written(tmp_path, ".csv", FINE[case]), PLAIN)
    assert samples.columns["P_b"].tolist() == [1.0, 2.0]
    assert samples.columns["e_b"].tolist() == [0.1, 0.2]


@pytest.mark.parametrize("ending", [".csv", ".ecsv", ".npz"])
def test_an_opened_pickle_is_a_thing_of_the_past(tmp_path, ending):
    """A pickle that would write a file when opened writes none, whatever the file is called."""

    class Trap:
        def __reduce__(self):
            return (Path.touch, (tmp_path / "sprung",))

    content = archive_of(("P_b.npy", npy(np.array([Trap(), Trap()], dtype=object))), ("e_b.npy", npy(TWO)))
    with pytest.raises(SampleFileError):
        read_samples(written(tmp_path, ending, content), PLAIN)
    assert not (tmp_path / "sprung").exists()


SEEDS = {".csv": GOOD.encode(), ".ecsv": ECSV.encode(), ".npz": npz(P_b=TWO, e_b=TWO)}


@pytest.mark.parametrize("ending", SEEDS)
@settings(derandomize=True, max_examples=150, deadline=None, database=None)
@given(data=st.data())
def test_damaged_bytes_are_read_or_refused_and_never_anything_else(tmp_path_factory, ending, data):
    seed = SEEDS[ending]
    kind = data.draw(st.sampled_from(["replaced", "cut", "inserted", "any"]))
    place = data.draw(st.integers(0, len(seed)))
    some = data.draw(st.binary(min_size=1, max_size=12))
    content = {
        "replaced": seed[:place] + some + seed[place + len(some) :],
        "cut": seed[:place],
        "inserted": seed[:place] + some + seed[place:],
        "any": seed[:4] + some * 20,
    }[kind]
    try:
        found = read_samples(written(tmp_path_factory.mktemp("fuzz"), ending, content), PLAIN)
    except SampleFileError as refused:
        assert refused.what and refused.where
    else:
        assert isinstance(found, Samples)
        assert all(np.isfinite(column).all() for column in found.columns.values())
