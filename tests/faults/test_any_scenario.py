"""Any scenario goes the whole way from preview to export, or is refused in words; ``fuzz.py`` tries many more."""

import csv
import os
import subprocess
import sys
from collections import Counter
from pathlib import Path

import pytest
import whole_way
from any_scenario import ANY, Written
from good_scenario import CARTESIAN, GOOD, spoilt
from hypothesis import HealthCheck, given, settings

TESTS = Path(__file__).parent.parent


@pytest.mark.slow
def test_any_scenario_goes_the_whole_way_or_is_refused_in_words(tmp_path, monkeypatch):
    monkeypatch.setattr("stabcheck.preview.cost.MEASURED_S", 0.002)
    seen: Counter[str] = Counter()

    @settings(
        max_examples=25,
        derandomize=True,
        deadline=None,
        database=None,
        suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large],
    )
    @given(written=ANY)
    def try_one(written: Written) -> None:
        folder = tmp_path / str(seen.total())
        seen[whole_way.carried(written, folder, figures=not seen["done"])["end"]] += 1

    try_one()
    assert seen["done"] >= 5 and seen["refused"] >= 3  # neither is the only thing that ever happens


def test_control_what_leaks_to_the_terminal_is_noticed(monkeypatch):
    def noisy(*_: object) -> int:
        os.write(2, b"a library in C says something\n")
        return 0

    monkeypatch.setattr(whole_way.cli, "main", noisy)
    with pytest.raises(whole_way.Wrong, match="in C says"):
        whole_way.demand_done(whole_way.spoken("preview"))


def test_control_a_refusal_without_its_parts_is_noticed():
    with pytest.raises(whole_way.Wrong, match="parts are missing"):
        whole_way.demand_refusal(whole_way.Said(["preview"], code=2, err="Error: no\n  where  here\n"))


def commanded(folder: Path, *words: str) -> subprocess.CompletedProcess[str]:
    environment = {**os.environ, "PYTHONPATH": str(TESTS.parent)}
    command = [sys.executable, "-m", "stabcheck", *words]
    return subprocess.run(
        command, cwd=folder, env=environment, capture_output=True, text=True, timeout=120, check=False
    )


@pytest.mark.parametrize(
    "text",
    [GOOD.replace("1e5 inner orbits", whole_way.SPAN), CARTESIAN.replace("1e4 yr", whole_way.SPAN)],
    ids=["elements", "vectors"],
)
def test_in_processes_of_their_own_the_commands_go_the_whole_way(tmp_path, text):
    (tmp_path / "x.toml").write_text(text)
    assert commanded(tmp_path, "preview", "x.toml").stderr == ""
    done = commanded(tmp_path, "screen", "x.toml", "--draws", "3", "--workers", "1")
    assert done.returncode == 0, done.stderr
    for words in (("report", "x.run"), ("export", "x.run", "x.csv")):
        said = commanded(tmp_path, *words)
        assert (said.returncode, said.stderr) == (0, ""), said.stderr
    with (tmp_path / "x.csv").open() as table:
        assert [row["state"] for row in csv.DictReader(table)] == ["done"] * 3


def test_in_a_process_of_its_own_a_bad_scenario_is_refused_by_each_command_alike(tmp_path):
    (tmp_path / "x.toml").write_text(spoilt("0.03 +0.02 -0.01", "1.03 +0.02 -0.01"))
    said = [commanded(tmp_path, *words) for words in (("preview", "x.toml"), ("screen", "x.toml", "--draws", "3"))]
    assert said[0].stderr == said[1].stderr
    for each in said:
        assert each.returncode == 2 and "where  x.toml, [planets.b] eccentricity" in each.stderr
    assert [file.name for file in tmp_path.iterdir()] == ["x.toml"]  # nothing was begun
