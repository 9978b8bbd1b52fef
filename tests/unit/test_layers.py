"""Imports look back along the line only: a layer can be understood and replaced with what stands before it."""

import ast
import json
import subprocess
from collections.abc import Callable, Iterator
from graphlib import CycleError, TopologicalSorter
from pathlib import Path

import pytest

LINE = """
constants errors arrays random distribution quantity kepler masses orbit radius scenario_tables scenario_keys
scenario_checks scenario posterior resolved physical ensemble criteria span build velocity resonance series plan
planning outcome verdict method chaos engines store batch preview screen report follow shipped cli __main__
""".split()  # noqa: SIM905 (a line, not a list)

# Loaded before the line is walked, so that importing forty modules one by one takes seconds, not minutes.
LIBRARIES = ("numpy", "pydantic", "click", "numba", "rebound")

IMPORT_EACH_ON_ITS_OWN = """
import json, os, sys, traceback
for library in json.loads(sys.argv[2]):
    __import__(library)
assert not any(name.startswith("stabcheck") for name in sys.modules)
failed = {}
for name in json.loads(sys.argv[1]):
    reader, writer = os.pipe()
    if os.fork() == 0:
        try:
            __import__(name)
            text = ""
        except BaseException:
            text = traceback.format_exc() or "failed"
        os.write(writer, text.encode()[-4000:])
        os._exit(0)
    os.close(writer)
    with os.fdopen(reader) as pipe:
        if said := pipe.read():
            failed[name] = said
    os.wait()
print(json.dumps(failed))
"""


def modules_of(package: Path) -> dict[str, Path]:
    """Dotted name (with the package's own) -> file."""
    names = {}
    for file in sorted(package.rglob("*.py")):
        if not (file.parent / "__init__.py").exists():
            continue  # a script beside data, such as the one that made the samples of a scenario
        parts = (package.name, *file.relative_to(package).with_suffix("").parts)
        names[".".join(parts[:-1] if parts[-1] == "__init__" else parts)] = file
    return names


def imports_of(package: Path, *, at_import_only: bool = False) -> Iterator[tuple[str, str]]:
    """Pairs (module, module of the same package that it imports).

    Those inside functions and for type checkers count too, unless only what happens at import is asked for.
    """
    modules = modules_of(package)
    for module, file in modules.items():
        tree = ast.parse(file.read_text())
        for node in _at_import(tree) if at_import_only else ast.walk(tree):
            for name in _imported_names(node, module, is_package=file.name == "__init__.py"):
                while name not in modules and "." in name:  # "stabcheck.plan.Plan" is a name in stabcheck.plan
                    name = name.rpartition(".")[0]
                if name in modules and name not in (module, package.name):
                    yield module, name


def _at_import(node: ast.AST) -> Iterator[ast.AST]:
    yield node
    later = isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef | ast.Lambda)
    if later or (isinstance(node, ast.If) and "TYPE_CHECKING" in ast.unparse(node.test)):
        return
    for inner in ast.iter_child_nodes(node):
        yield from _at_import(inner)


def _imported_names(node: ast.AST, module: str, *, is_package: bool) -> list[str]:
    if isinstance(node, ast.Import):
        return [alias.name for alias in node.names]
    if isinstance(node, ast.ImportFrom):
        base = node.module or ""
        if node.level:
            up = module.split(".") if is_package else module.split(".")[:-1]
            base = ".".join([*up[: len(up) - node.level + 1], *filter(None, [node.module])])
        return [f"{base}.{alias.name}" for alias in node.names]
    return []


def reaching_forward(package: Path) -> list[str]:
    """Imports that do not look back along the line."""
    return [
        f"{module} reaches forward to {imported}"
        for module, imported in imports_of(package)
        if "." in module and LINE.index(imported.split(".")[1]) > LINE.index(module.split(".")[1])
    ]


def loop_in(package: Path) -> list[str]:
    graph: dict[str, set[str]] = {name: set() for name in modules_of(package)}
    for module, imported in imports_of(package, at_import_only=True):
        graph[module].add(imported)
    try:
        TopologicalSorter(graph).prepare()
    except CycleError as error:
        return list(error.args[1])
    return []


@pytest.fixture
def small_package(tmp_path: Path) -> Callable[..., Path]:
    """Make a package with these files, for the controls."""

    def make(**files: str) -> Path:
        folder = tmp_path / "stabcheck"
        folder.mkdir()
        for name, text in {"__init__": "", **files}.items():
            (folder / f"{name}.py").write_text(text)
        return folder

    return make


def test_every_module_stands_on_the_line(package: Path) -> None:
    layers = {name.split(".")[1] for name in modules_of(package) if "." in name}
    assert not layers - set(LINE)


def test_imports_look_back_along_the_line_only(package: Path) -> None:
    assert not reaching_forward(package)


def test_there_is_no_import_loop(package: Path) -> None:
    assert not loop_in(package)


def test_plan_and_outcome_know_nothing_of_scenarios(package: Path) -> None:
    pairs = set(imports_of(package))
    for module in ("stabcheck.plan", "stabcheck.outcome"):
        assert not {imported for one, imported in pairs if one == module} & {"stabcheck.scenario", "stabcheck.ensemble"}


def test_each_module_can_be_imported_on_its_own(
    package: Path, run_python: Callable[..., subprocess.CompletedProcess[str]]
) -> None:
    names = [name for name in modules_of(package) if name != "stabcheck.__main__"]
    done = run_python(IMPORT_EACH_ON_ITS_OWN, json.dumps(names), json.dumps(LIBRARIES))
    assert done.returncode == 0, done.stderr
    assert json.loads(done.stdout.splitlines()[-1]) == {}


@pytest.mark.parametrize(
    "text",
    [
        "from stabcheck.engines import base",
        "import stabcheck.engines",
        "from .engines import base",
        "def f():\n    from stabcheck.engines.base import Engine\n",
    ],
)
def test_control_an_import_that_looks_forward_is_noticed(small_package: Callable[..., Path], text: str) -> None:
    assert reaching_forward(small_package(orbit=text, engines="base = 1"))


def test_control_a_loop_is_noticed(small_package: Callable[..., Path]) -> None:
    assert loop_in(small_package(orbit="import stabcheck.plan", plan="from stabcheck.orbit import x"))
