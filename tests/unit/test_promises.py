"""The names that are promised: few, documented, and there whatever was imported before."""

import json
import subprocess
from collections.abc import Callable
from pathlib import Path

import pytest

import stabcheck

MOST_NAMES = 25


@pytest.mark.parametrize("name", stabcheck.__all__)
def test_every_promised_name_has_a_docstring_and_a_place_in_the_reference(name: str, project: Path) -> None:
    assert getattr(stabcheck, name).__doc__
    assert f"| `{name}` |" in (project / "DEVELOPERS.md").read_text()


def test_few_names_are_promised() -> None:
    assert len(stabcheck.__all__) <= MOST_NAMES
    assert set(stabcheck.__all__) <= set(dir(stabcheck))


def test_a_name_that_is_not_there_is_an_attribute_error() -> None:
    with pytest.raises(AttributeError, match="no_such_name"):
        _ = stabcheck.no_such_name


def test_promised_names_mean_the_same_whatever_was_imported_before(
    run_python: Callable[..., subprocess.CompletedProcess[str]],
) -> None:
    # A submodule, once imported, becomes an attribute of the package and takes the place of a function of its name.
    code = """
import importlib, json, sys
import stabcheck
for module in json.loads(sys.argv[1]):
    importlib.import_module(module)
print(json.dumps({name: type(getattr(stabcheck, name)).__name__ for name in stabcheck.__all__}))
"""
    modules = [
        f"stabcheck.{name}" for name in ("screen", "follow", "report", "shipped", "preview", "store", "scenario")
    ]
    kinds = []
    for before in ([], modules):
        done = run_python(code, json.dumps(before))
        assert done.returncode == 0, done.stderr
        kinds.append(json.loads(done.stdout))
    assert kinds[0] == kinds[1]


def test_the_package_says_that_it_is_typed(package: Path) -> None:
    assert (package / "py.typed").is_file()


def test_the_version_is_the_same_everywhere(project: Path) -> None:
    assert f"\nversion: {stabcheck.__version__}\n" in (project / "CITATION.cff").read_text()
    assert f"\n## {stabcheck.__version__}" in (project / "CHANGELOG.md").read_text()
