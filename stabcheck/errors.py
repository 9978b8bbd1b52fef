"""Everything stabcheck refuses, in one family. Each refusal says what, where, why and what to do instead.

::

    StabcheckError                 catch this one
    ├── QuantityError              a text is not a quantity, or its unit does not fit
    ├── ScenarioError              a scenario is incomplete, contradictory or has unknown keys
    ├── SampleFileError            a file of posterior samples cannot be used
    ├── PlanError                  a run was asked for that cannot be planned
    ├── RunFileError               a run file is missing, foreign, damaged, or its disk refuses
    │   ├── RunFileBusy            another process writes it
    │   └── ResumeRefused          it was made with something else; `differing` says with what
    ├── WorkerError                the workers cannot be started or keep dying before any work
    └── PlatformError              this machine cannot run stabcheck
"""

from collections.abc import Mapping
from typing import Any


class StabcheckError(Exception):
    """Whatever stabcheck refuses.

    Attributes
    ----------
    what, where, why, do : str
        The four parts of the message; empty where there is nothing to say.
    """

    def __init__(self, what: str, *, where: str = "", why: str = "", do: str = "") -> None:
        super().__init__(what)
        self.what, self.where, self.why, self.do = what, where, why, do

    def __str__(self) -> str:
        lines = [self.what]
        lines += [f"  {label:<6} {text}" for label, text in self._parts() if text]
        return "\n".join(lines)

    def __reduce__(self) -> tuple[Any, ...]:
        return (_rebuilt, (type(self), dict(self.__dict__)))

    def _parts(self) -> tuple[tuple[str, str], ...]:
        return ("where", self.where), ("why", self.why), ("do", self.do)


def _rebuilt(kind: type[StabcheckError], attributes: dict[str, Any]) -> StabcheckError:
    error = kind.__new__(kind)
    Exception.__init__(error, attributes.get("what", ""))
    error.__dict__.update(attributes)
    return error


class QuantityError(StabcheckError):
    """A text is not a quantity, or its unit does not fit."""


class ScenarioError(StabcheckError):
    """A scenario is incomplete, contradictory or has unknown keys."""


class SampleFileError(StabcheckError):
    """A file of posterior samples cannot be used."""


class PlanError(StabcheckError):
    """A run was asked for that cannot be planned."""


class RunFileError(StabcheckError):
    """A run file is missing, foreign, damaged, or its disk refuses."""


class RunFileBusy(RunFileError):
    """Another process writes this run file."""


class ResumeRefused(RunFileError):
    """The run file was made with something else.

    Attributes
    ----------
    differing : dict of str to (then, now)
        The items of the identity that do not agree.
    """

    def __init__(self, differing: Mapping[str, tuple[Any, Any]], *, where: str) -> None:
        items = "; ".join(f"{item}: {then!r} then, {now!r} now" for item, (then, now) in differing.items())
        super().__init__(
            "the run file was made with something else and is not continued",
            where=where,
            why=items,
            do="give another --run-file, or go back to what it was made with; nothing in it was changed",
        )
        self.differing = dict(differing)


class WorkerError(StabcheckError):
    """The workers cannot be started, or keep dying before any work."""


class PlatformError(StabcheckError):
    """This machine cannot run stabcheck."""
