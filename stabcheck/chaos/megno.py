"""MEGNO from differences of the logarithm of a tangent vector, and what may be said from it.

With δ the tangent vector, Y(t) = (2/t) ∫ (δ̇/δ) t' dt' and its running average ⟨Y⟩ = (1/t) ∫ Y dt' (Cincotta & Simó
2000). The integral is summed from exact differences of ln |δ| over the steps, each weighted with the time of its
middle: the instantaneous rate δ̇/δ sampled at step ends has a bias at periastron that makes regular eccentric orbits
look chaotic.
⟨Y⟩ tends to 2 for quasi-periodic motion and to λt/2 for an exponent λ.

References
----------
Cincotta, P. M. & Simó, C. (2000), A&AS 147, 205.
"""

from dataclasses import dataclass

import numpy as np

from stabcheck.arrays import Array
from stabcheck.outcome import Motion

SETTLED_ABOVE = 0.5
"""⟨Y⟩ of regular motion stays below 2 + this over the last half (common practice, no source). One-sided: below 2 is
calm too."""

SETTLED_WANDER = 0.3
"""Regular: ⟨Y⟩ moves by less than this over the last half of the run (slow secular terms leave ± 0.2; measured)."""

SETTLED_CYCLES = 3.0
"""Regular only from this many cycles of the slowest secular mode on: before, slow terms have not shown themselves
("several" is common practice, no source). Of compact four-planet draws near 2 after 1e3 orbits, two in five were
chaotic by 1e4 (measured)."""

CHAOTIC_FROM = 5.0
"""Chaotic: ⟨Y⟩ ends above this, twice the limit of regular motion and more (common practice, no source) ..."""

CHAOTIC_RISE = 1.3
"""... and has risen by this factor over the last half; linear growth gives 2, a bounded excursion about 1."""


def next_sums(sum_y: float, sum_mean: float, before_d: float, step_d: float, growth: float) -> tuple[float, float]:
    """Carry the two sums of MEGNO over one step.

    Parameters
    ----------
    sum_y : float
        2 ∫ (δ̇/δ) t' dt' up to ``before_d``.
    sum_mean : float
        ∫ Y dt' up to ``before_d``; ⟨Y⟩ is this over the time.
    before_d, step_d : float
        Time since MEGNO began, and the step that follows.
    growth : float
        Difference of ln |δ| over the step.

    Returns
    -------
    (sum_y, sum_mean)
        The sums at the end of the step. Plain arithmetic: the kernels compile this very function.
    """
    sum_y += 2.0 * (before_d + 0.5 * step_d) * growth
    sum_mean += sum_y / (before_d + step_d) * step_d
    return sum_y, sum_mean


@dataclass(frozen=True, slots=True)
class Convergence:
    """What a series of ⟨Y⟩ says."""

    megno: float
    wander: float
    motion: Motion
    lyapunov_time_d: float
    """NaN unless the motion is chaotic."""


def convergence(times_d: Array, megno: Array, ln_delta: Array) -> Convergence:
    """Say whether ⟨Y⟩ has settled, grows as in chaos, or has not decided.

    Parameters
    ----------
    times_d : (sample,) array
        Times since MEGNO began, increasing.
    megno, ln_delta : (sample,) array
        ⟨Y⟩ and the logarithm of the length of the tangent vector at these times.

    Returns
    -------
    Convergence
        ``unsettled`` if fewer than 16 samples were taken, or if neither statement holds. The Lyapunov time is the
        inverse slope of ln |δ| over the last half of the run (half, because the start is dominated by the choice of δ).
    """
    usable = np.isfinite(megno) & np.isfinite(ln_delta)
    times_d, megno, ln_delta = times_d[usable], megno[usable], ln_delta[usable]
    if times_d.size < 16:
        last = float(megno[-1]) if megno.size else float("nan")
        return Convergence(last, float("nan"), Motion.UNSETTLED, float("nan"))
    late = times_d >= 0.5 * times_d[-1]
    wander = float(np.max(megno[late]) - np.min(megno[late]))
    motion = _motion(megno[late], wander)
    lyapunov = _lyapunov_time_d(times_d[late], ln_delta[late]) if motion is Motion.CHAOTIC else float("nan")
    return Convergence(float(megno[-1]), wander, motion, lyapunov)


def _motion(late: Array, wander: float) -> Motion:
    if late[-1] >= CHAOTIC_FROM and late[-1] >= CHAOTIC_RISE * late[0]:
        return Motion.CHAOTIC
    if np.max(late) <= 2.0 + SETTLED_ABOVE and wander <= SETTLED_WANDER:
        return Motion.REGULAR
    return Motion.UNSETTLED


def _lyapunov_time_d(times_d: Array, ln_delta: Array) -> float:
    centred = times_d - np.mean(times_d)
    slope = float(np.sum(centred * ln_delta) / np.sum(centred * centred))
    return 1.0 / slope if slope > 0.0 else float("nan")
