"""What following one draw in detail gives, as a value."""

from dataclasses import asdict, dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from stabcheck.arrays import Array
from stabcheck.constants import DEGREE_RAD
from stabcheck.outcome import Outcome
from stabcheck.plan import Plan, Task
from stabcheck.resonance import sector_of
from stabcheck.series import Encounter, PairSeries, Series
from stabcheck.store.identity import plain
from stabcheck.verdict import Verdict, verdict

if TYPE_CHECKING:
    from stabcheck.engines.rebound.replay import Turn


@dataclass(frozen=True, slots=True, kw_only=True)
class Followed:
    """One draw followed in detail.

    Attributes
    ----------
    title : str
        Of the scenario.
    number : int or None
        Number of the draw; None for the central values.
    medians : bool
        Central values that are medians, each taken alone: not a solution of the fit.
    frame : str
        Of the elements in ``series``.
    task, plan
        What the engine was given.
    outcome : Outcome
        The same as ``screen`` stores for this draw.
    warnings : tuple of str
        Of the libraries.
    stages : tuple of Turn
        Where each method took over, with its step and the state there.
    series : Series
    exact : bool
        Whether the series is made of the very steps that decided the outcome, bit for bit.
    encounter : Encounter or None
        Step by step around the encounter that mattered; None if there was none.
    files : tuple of Path
        What was written.
    """

    title: str
    number: int | None
    medians: bool
    frame: str
    task: Task
    plan: Plan
    outcome: Outcome
    warnings: tuple[str, ...]
    stages: "tuple[Turn, ...]"
    series: Series
    exact: bool
    encounter: Encounter | None
    files: tuple[Path, ...] = ()

    @property
    def verdict(self) -> Verdict:
        """One word."""
        one = self.outcome
        return verdict(one.survival, one.rearranged, one.motion, one.trust)

    @property
    def name(self) -> str:
        """What was followed: ``draw 17`` or ``central values``."""
        return "central values" if self.number is None else f"draw {self.number}"

    def as_text(self) -> str:
        """Lines of at most 100 characters for a terminal."""
        from stabcheck.follow.text import lines_of

        return "\n".join(lines_of(self))

    def as_dict(self) -> dict[str, Any]:
        """Plain numbers and words, ready for JSON: the outcome and where the angles were; the series is in its file."""
        stages = [{"from_d": one.time_d, "method": one.method, "step_d": one.step_d} for one in self.stages]
        made: dict[str, Any] = plain(
            {
                "title": self.title,
                "draw": self.number,
                "medians": self.medians,
                "verdict": str(self.verdict),
                "bodies": list(self.series.bodies),
                "outcome": {name: _listed(value) for name, value in asdict(self.outcome).items()},
                "series": {"rows": len(self.series.time_d), "frame": self.frame, "exact": self.exact},
                "pairs": [_pair_facts(pair, self.series.bodies) for pair in self.series.pairs],
                "stages": stages,
                "warnings": list(self.warnings),
                "files": [str(file) for file in self.files],
            }
        )
        return made


def symbols_of(pair: PairSeries, bodies: tuple[str, ...]) -> tuple[str, str, str, str]:
    """Plain symbols for λ and ϖ of both bodies, inner first."""
    inner, outer = bodies[pair.inner], bodies[pair.outer]
    return f"λ_{inner}", f"λ_{outer}", f"ϖ_{inner}", f"ϖ_{outer}"


def angles_of(pair: PairSeries, bodies: tuple[str, ...]) -> list[tuple[str, Array]]:
    """Apsidal difference and resonant angles of a pair, each with its text."""
    symbols = symbols_of(pair, bodies)
    named = [(f"{symbols[3]} − {symbols[2]}", pair.apsidal_difference_rad)]
    if pair.resonance is not None:
        named += [(pair.resonance.angle_text(k, symbols), values) for k, values in enumerate(pair.angles_rad)]
    return named


def _pair_facts(pair: PairSeries, bodies: tuple[str, ...]) -> dict[str, Any]:
    near = pair.resonance
    angles = []
    for text, values in angles_of(pair, bodies):
        sector = sector_of(values)
        half_deg = sector.half_width_rad / DEGREE_RAD
        angles.append({"angle": text, "centre_deg": sector.centre_rad / DEGREE_RAD, "half_width_deg": half_deg})
    return {
        "inner": bodies[pair.inner],
        "outer": bodies[pair.outer],
        "nearest_resonance": f"{near.p}:{near.q}" if near else None,
        "offset": near.offset if near else None,
        "angles": angles,
    }


def _listed(value: Any) -> Any:
    return value.tolist() if isinstance(value, np.ndarray) else value
