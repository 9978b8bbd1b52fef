"""Which of the planetary systems that fit the data could have survived, and how sure is that?

The promised names are in ``__all__``. They are loaded when first used, so that ``import stabcheck`` costs nothing.
``screen`` and ``follow`` are modules with a function of the same name: ``stabcheck.screen.screen(...)``.
"""

from importlib import import_module
from typing import Any

__version__ = "0.1.0"

_HOME = {
    "Scenario": "stabcheck.scenario",
    "StabcheckError": "stabcheck.errors",
    "understood": "stabcheck.preview",
    "RunFile": "stabcheck.store",
    "answer_of": "stabcheck.report.answer",
    "run_table": "stabcheck.report.from_run_file",
}
# Not functions: a module of the same name, once imported, would take the function's place here.
_MODULES = ("follow", "report", "screen", "shipped")

__all__ = [
    "RunFile",
    "Scenario",
    "StabcheckError",
    "answer_of",
    "follow",
    "report",
    "run_table",
    "screen",
    "shipped",
    "understood",
]


def __getattr__(name: str) -> Any:
    if name in _MODULES:
        return import_module(f"stabcheck.{name}")
    if name in _HOME:
        value = getattr(import_module(_HOME[name]), name)
        globals()[name] = value
        return value
    raise AttributeError(f"module 'stabcheck' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
