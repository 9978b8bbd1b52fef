"""What the command may load before it has anything to do: asking for help must not wait for a compiler or a plot."""

import json
import subprocess
from collections.abc import Callable
from pathlib import Path

import pytest

Run = Callable[..., subprocess.CompletedProcess[str]]

# Prints the top-level modules that the command line loaded, beyond the standard library and what was there before.
LOADED_BY = """
import contextlib, io, json, sys
before = set(sys.modules)
if sys.argv[1] == "import":
    __import__(sys.argv[2])
else:
    from stabcheck.cli import main
    with contextlib.redirect_stdout(io.StringIO()) as said:
        try:
            code = main(sys.argv[2:])
        except SystemExit as end:
            code = end.code
    assert code == 0 and said.getvalue(), (code, said.getvalue())
new = {name.partition(".")[0] for name in set(sys.modules) - before}
print(json.dumps(sorted(name for name in new if name not in sys.stdlib_module_names)))
"""

SCENARIO = """
[star]
mass = "1 Msun"
[elements]
frame = "jacobi"
fit = "keplerian"
epoch = "2459000 BJD_TDB"
[plane]
inclination = "88 deg"
[planets.b]
period = "10 d"
eccentricity = "0"
mean_longitude_planet = "40 deg"
mass = "1 Mearth"
[planets.c]
period = "25 d"
eccentricity = "0"
mean_longitude_planet = "140 deg"
mass = "2 Mearth"
[draws]
seed = 1
[integration]
span = "1e4 inner orbits"
"""


def loaded_by(run_python: Run, *arguments: str) -> set[str]:
    done = run_python(LOADED_BY, *arguments)
    assert done.returncode == 0, done.stderr
    return set(json.loads(done.stdout.splitlines()[-1]))


@pytest.mark.parametrize(
    "words", [["--help"], ["--version"], ["screen", "--help"], ["preview", "--help"], ["scenarios"]]
)
def test_asking_for_help_loads_nothing_but_the_command_line_library(run_python: Run, words: list[str]) -> None:
    assert loaded_by(run_python, "command", *words) <= {"stabcheck", "click"}


def test_the_package_itself_loads_nothing(run_python: Run) -> None:
    assert loaded_by(run_python, "import", "stabcheck") == {"stabcheck"}


def test_preview_of_a_table_stays_light(run_python: Run, tmp_path: Path) -> None:
    file = tmp_path / "two.toml"
    file.write_text(SCENARIO)
    loaded = loaded_by(run_python, "command", "preview", str(file))
    assert not loaded & {"numba", "llvmlite", "matplotlib", "astropy", "pandas", "multiprocess"}


def test_control_a_heavy_library_is_noticed(run_python: Run) -> None:
    assert "numpy" in loaded_by(run_python, "import", "stabcheck.arrays")
