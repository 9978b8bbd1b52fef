"""How figures look: sizes of a journal column, letters one can read there, and marks that survive a grey copy."""

from dataclasses import dataclass
from typing import Any

from stabcheck.verdict import Verdict

COLUMN_MM, PAGE_MM, TALLEST_MM = 88.0, 180.0, 230.0
DOTS_PER_INCH = 200
MM_PER_INCH = 25.4

SETTINGS: Any = {
    "font.family": "DejaVu Sans",  # comes with matplotlib: the same letters on every machine
    "font.size": 8.0,
    "axes.labelsize": 8.0,
    "axes.titlesize": 8.0,
    "xtick.labelsize": 7.0,
    "ytick.labelsize": 7.0,
    "legend.fontsize": 7.0,
    "axes.linewidth": 0.6,
    "lines.linewidth": 1.2,
    "hatch.linewidth": 0.5,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "legend.frameon": False,
    "pdf.fonttype": 42,
    "svg.hashsalt": "stabcheck",
    "axes.formatter.useoffset": False,
}


@dataclass(frozen=True, slots=True)
class Mark:
    """How one class is drawn; the lightness of the colours differs in steps, so a grey copy keeps them apart."""

    colour: str
    marker: str
    size: float
    hollow: bool = False


MARKS: dict[str, Mark] = {
    Verdict.REGULAR: Mark("#0b3c5d", "o", 9.0),
    Verdict.BROKEN: Mark("#b8402a", "x", 12.0),
    Verdict.REARRANGED: Mark("#7f78c8", "^", 13.0),
    Verdict.CHAOTIC: Mark("#e39a1f", "s", 11.0),
    Verdict.UNSETTLED: Mark("#a8d8b9", "D", 11.0),
    Verdict.UNKNOWN: Mark("#000000", "o", 16.0, hollow=True),
}

ALL_FILL, LIVING_LINE, REGULAR_LINE = "#cfcfcf", "#0b3c5d", "#e07b00"
"""Of all orbits, of those that live, of those that are regular."""
HATCHES = {"survived": ("#0b3c5d", ""), "broken": ("#e9b7a6", "////"), "unknown": ("#ffffff", "....")}

PLANET_LOOKS: tuple[tuple[str, Any], ...] = (
    ("#0b3c5d", "-"),
    ("#e07b00", "-"),
    ("#7f78c8", "-"),
    ("#3f9b6c", "-"),
    ("#b8402a", (0, (4, 1.5))),
    ("#4fa9d6", (0, (4, 1.5))),
    ("#8c6d1f", (0, (4, 1.5))),
    ("#606060", (0, (1, 1))),
)
"""Colour and dashes of the planets, from the inside out."""


def inches(width_mm: float, height_mm: float) -> tuple[float, float]:
    """Size of a figure."""
    return width_mm / MM_PER_INCH, height_mm / MM_PER_INCH
