"""How the numbers were made: methods, steps, energy errors, restarts, hand-overs, and what is not trusted and why."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from stabcheck.arrays import PerDraw
from stabcheck.outcome import Trust
from stabcheck.report.table_of_draws import RunTable
from stabcheck.verdict import Words

LEVELS = (0.0, 0.5, 0.9, 0.99, 1.0)


@dataclass(frozen=True, slots=True, kw_only=True)
class Numerics:
    """What a referee asks about the integrations.

    Parameters
    ----------
    methods, trust, handovers, restarts : dict of str to int
        Draws by method in use at the end, by trust, by reason of a hand-over, by number of restarts.
    step_d, energy_error, orbit_energy_error, steps_per_periastron : tuple of float
        Smallest, median, 90 %, 99 % and largest; energy errors of trusted draws only.
    times_handed, times_returned : int
        How often, over all draws, a method that resolves encounters took over, and how often it gave back.
    measured_megno, measured_drift : int
        Draws with a MEGNO, with a frequency drift.
    """

    methods: Mapping[str, int]
    trust: Mapping[str, int]
    handovers: Mapping[str, int]
    restarts: Mapping[str, int]
    times_handed: int
    times_returned: int
    step_d: tuple[float, ...]
    energy_error: tuple[float, ...]
    orbit_energy_error: tuple[float, ...]
    steps_per_periastron: tuple[float, ...]
    measured_megno: int
    measured_drift: int
    map_steps: int
    adaptive_steps: int


def numerics_of(table: RunTable) -> Numerics:
    """Count and rank what the integrations of finished orbits left behind."""
    out = table.outcome
    trusted = np.asarray(out.trust == Trust.OK)
    return Numerics(
        methods=counted(out.method),
        trust=counted(out.trust),
        handovers=counted(out.handover_why),
        restarts=counted(out.restarts[out.restarts > 0].astype(np.str_)),
        times_handed=int(out.handovers.sum()),
        times_returned=int(out.returns.sum()),
        step_d=ranked(out.step_d),
        energy_error=ranked(np.abs(out.energy_error[trusted])),
        orbit_energy_error=ranked(np.abs(out.orbit_energy_error[trusted])),
        steps_per_periastron=ranked(out.fewest_steps_per_periastron),
        measured_megno=int(np.isfinite(out.megno).sum()),
        measured_drift=int(np.isfinite(out.drift).any(axis=1).sum()),
        map_steps=int(out.map_steps.sum()),
        adaptive_steps=int(out.adaptive_steps.sum()),
    )


def counted(words: Words) -> dict[str, int]:
    """Count words, the most frequent first; the empty word is not one."""
    found, numbers = np.unique(words[words != ""], return_counts=True)
    pairs = zip(found.tolist(), numbers.tolist(), strict=True)
    return dict(sorted(((str(word), int(number)) for word, number in pairs), key=lambda pair: (-pair[1], pair[0])))


def ranked(values: PerDraw) -> tuple[float, ...]:
    """Smallest, median, 90 %, 99 % and largest of what was measured; empty if nothing was."""
    finite = values[np.isfinite(values)]
    return tuple(float(value) for value in np.quantile(finite, LEVELS)) if finite.size else ()
