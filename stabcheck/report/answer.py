"""The answer of a run as numbers: fractions, survival with time, limits before and after, numerics, cautions."""

import math
from collections.abc import Mapping
from dataclasses import asdict, dataclass
from enum import StrEnum
from typing import Any

import numpy as np

from stabcheck.outcome import Ending
from stabcheck.report.cautions import cautions_of
from stabcheck.report.columns import described, drawn_columns, varies
from stabcheck.report.constrained import ConstrainedTable, constrained_table
from stabcheck.report.from_run_file import run_table
from stabcheck.report.intervals import CONFIDENCE, Fraction, fraction
from stabcheck.report.numerics import Numerics, counted, numerics_of
from stabcheck.report.spans import Spans, spans_of
from stabcheck.report.survival import SurvivalCurve, survival_curve
from stabcheck.report.table_of_draws import RunFacts, RunTable
from stabcheck.report.weights import Weighting
from stabcheck.store import RunFile
from stabcheck.verdict import STAYED, Verdict


@dataclass(frozen=True, slots=True, kw_only=True)
class Counts:
    """How many draws there are of what.

    Parameters
    ----------
    asked : int
        Draws asked for.
    settled : int
        Draws 0 .. settled - 1 are finished or refused; the answer is made of these alone.
    finished_later : int
        Draws beyond those that are finished too; not used, because broken draws finish first.
    refused : dict of str to int
        Settled draws that are not orbits, by reason.
    orbits : int
    verdicts : dict of str to int
    effective : float
        Independent draws that the orbits are worth (Kish).
    """

    asked: int
    settled: int
    finished_later: int
    refused: Mapping[str, int]
    orbits: int
    verdicts: Mapping[str, int]
    effective: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Answer:
    """What a run says, and how far to believe it."""

    facts: RunFacts
    confidence: float
    counts: Counts
    survived: Fraction
    kept: Fraction
    """Survived and not rearranged."""
    verdicts: tuple[Fraction, ...]
    endings: tuple[Fraction, ...]
    spans: Spans
    survival: SurvivalCurve
    constrained: ConstrainedTable
    numerics: Numerics
    cautions: tuple[str, ...]

    @property
    def is_preliminary(self) -> bool:
        """Whether draws that were asked for are still open."""
        return self.counts.settled < self.counts.asked

    def as_dict(self) -> dict[str, Any]:
        """Plain numbers, words, lists and dicts, ready for JSON; what is not known is None."""
        plain: dict[str, Any] = _plain(asdict(self))
        plain["preliminary"] = self.is_preliminary
        plain["most_shifted"] = [row.name for row in self.constrained.by_shift()]
        return plain


def answer_of(run: RunTable | RunFile, *, confidence: float = CONFIDENCE) -> Answer:
    """Make the answer from the draws that are settled.

    Parameters
    ----------
    run : RunTable or RunFile
        Finished or live: only its longest prefix of settled draws is used.
    confidence : float

    Returns
    -------
    Answer
    """
    table = run if isinstance(run, RunTable) else run_table(run)
    settled = table.prefix()
    orbits = settled.orbits()
    weighting = weighting_of(orbits)
    spans = spans_of(orbits)
    constrained = constrained_table(described(orbits), orbits.verdict, weighting)
    return Answer(
        facts=table.facts,
        confidence=confidence,
        counts=_counts(table, settled, orbits, weighting),
        survived=_share("survived", orbits, [str(word) for word in STAYED], weighting, confidence),
        kept=_share("kept", orbits, ["regular", "unsettled", "chaotic"], weighting, confidence),
        verdicts=tuple(_share(str(word), orbits, [str(word)], weighting, confidence) for word in reversed(Verdict)),
        endings=_endings(orbits, weighting, confidence),
        spans=spans,
        survival=survival_curve(orbits, weighting, confidence=confidence),
        constrained=constrained,
        numerics=numerics_of(orbits),
        cautions=cautions_of(settled, orbits, spans, constrained),
    )


def weighting_of(orbits: RunTable) -> Weighting:
    """Group draws by source row and chain; what was drawn stands in where all draws have one fate."""
    drawn = tuple(column.values for column in drawn_columns(orbits) if varies(column))
    return Weighting.of(orbits.weight, orbits.source_row, orbits.chain, drawn)


def _counts(table: RunTable, settled: RunTable, orbits: RunTable, weighting: Weighting) -> Counts:
    beyond = table.done[len(settled) :]
    return Counts(
        asked=max(table.facts.asked, len(table)),
        settled=len(settled),
        finished_later=int(beyond.sum()),
        refused=counted(settled.refused),
        orbits=len(orbits),
        verdicts={str(word): int((orbits.verdict == word).sum()) for word in reversed(Verdict)},
        effective=weighting.kish(),
    )


def _share(name: str, orbits: RunTable, words: list[str], weighting: Weighting, confidence: float) -> Fraction:
    hit = np.isin(orbits.verdict, words)
    unknown = np.asarray(orbits.verdict == Verdict.UNKNOWN)
    return fraction(name, hit, unknown & ~hit, weighting, confidence=confidence)


def _endings(orbits: RunTable, weighting: Weighting, confidence: float) -> tuple[Fraction, ...]:
    broken, unknown = (np.asarray(orbits.verdict == word) for word in (Verdict.BROKEN, Verdict.UNKNOWN))
    return tuple(
        fraction(str(ending), broken & (orbits.outcome.ending == ending), unknown, weighting, confidence=confidence)
        for ending in Ending
        if ending is not Ending.NONE
    )


def _plain(value: Any) -> Any:
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple | np.ndarray):
        return [_plain(item) for item in value]
    if isinstance(value, StrEnum):
        return str(value)
    if isinstance(value, np.generic):
        return _plain(value.item())
    return None if isinstance(value, float) and not math.isfinite(value) else value
