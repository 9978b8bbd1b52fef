"""MEGNO's sums on problems whose answer is known, and what its convergence statement says."""

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from stabcheck.chaos.megno import convergence, next_sums
from stabcheck.outcome import Motion


def averaged(times: np.ndarray, ln_delta: np.ndarray) -> np.ndarray:
    """⟨Y⟩ at the times of a series of ln |δ|, by the function that the kernels compile."""
    sum_y = sum_mean = 0.0
    out = [0.0]
    for k in range(1, times.size):
        before, step = times[k - 1] - times[0], times[k] - times[k - 1]
        sum_y, sum_mean = next_sums(sum_y, sum_mean, before, step, ln_delta[k] - ln_delta[k - 1])
        out.append(sum_mean / (before + step))
    return np.array(out)


def henon_heiles(y: float, px: float, span: float) -> tuple[np.ndarray, np.ndarray]:
    """Orbit x = 0, p_y = 0 of the Hénon-Heiles system with its tangent vector, by SciPy's DOP853."""

    def rates(_: float, s: np.ndarray) -> list[float]:
        x, y_, p, q, dx, dy, dp, dq = s
        return [p, q, -x - 2 * x * y_, -y_ - x * x + y_ * y_, dp, dq,
                -dx - 2 * (y_ * dx + x * dy), -dy - 2 * (x * dx - y_ * dy)]  # fmt: skip

    times = np.arange(0.0, span + 0.1, 0.25)
    start = [0.0, y, px, 0.0, 0.5, 0.4, 0.6, 0.3]
    ln_delta = np.zeros(times.size)
    state, grown = np.array(start), 0.0
    for first in range(0, times.size - 1, 400):  # the tangent vector is scaled back before it can overflow
        part = times[first : first + 401]
        found = solve_ivp(rates, (part[0], part[-1]), state, "DOP853", part, rtol=1e-10, atol=1e-12).y
        length = np.linalg.norm(found[4:], axis=0)
        ln_delta[first : first + part.size] = np.log(length) + grown
        state = found[:, -1].copy()
        state[4:] /= length[-1]
        grown += np.log(length[-1])
    return times, ln_delta - ln_delta[0]


# Orbits of Skokos, Bountis & Antonopoulos 2007, Physica D 231, 30 (from memory), at H = 1/8; values recomputed with
# independent code: regular <Y>(5000) = 1.912, chaotic exponent 0.045 (literature about 0.047, from memory).
REGULAR, CHAOTIC = (0.55, 0.241695400591), (-0.016, 0.499741202357)


def test_a_regular_orbit_of_henon_heiles_tends_to_two():
    times, ln_delta = henon_heiles(*REGULAR, 2000.0)
    found = convergence(times[1:], averaged(times, ln_delta)[1:], ln_delta[1:])
    assert 1.8 < found.megno < 2.1  # the tolerance of a finite run: it converges as 1/t
    assert found.motion is Motion.REGULAR
    assert np.isnan(found.lyapunov_time_d)


def test_a_chaotic_orbit_of_henon_heiles_has_the_exponent_of_the_literature():
    times, ln_delta = henon_heiles(*CHAOTIC, 2000.0)
    found = convergence(times[1:], averaged(times, ln_delta)[1:], ln_delta[1:])
    assert found.motion is Motion.CHAOTIC
    assert 0.035 < 1.0 / found.lyapunov_time_d < 0.06  # a single orbit over a finite time


def test_pure_exponential_growth_gives_half_the_exponent_times_the_time():
    times = np.linspace(0.0, 1000.0, 4001)
    found = convergence(times[1:], averaged(times, 0.03 * times)[1:], 0.03 * times[1:])
    assert found.megno == pytest.approx(15.0, rel=1e-3)  # λt/2; the sum's first steps are of order step/time
    assert found.lyapunov_time_d == pytest.approx(1.0 / 0.03, rel=1e-9)


def test_linear_growth_gives_two():
    times = np.linspace(1.0, 10_001.0, 40_001)
    assert averaged(times - 1.0, np.log(times))[-1] == pytest.approx(2.0, abs=0.02)  # 1/t and ln t/t terms


def test_a_constant_tangent_vector_gives_zero():
    times = np.linspace(0.0, 100.0, 401)
    assert averaged(times, np.zeros(401))[-1] == 0.0


def test_log_differences_over_coarse_stretches_give_the_same_as_over_fine_ones():
    times = np.linspace(0.0, 5000.0, 50_001)
    ln_delta = np.log1p(times) + 0.5 * np.sin(7.0 * times)
    fine, coarse = averaged(times, ln_delta)[-1], averaged(times[::8], ln_delta[::8])[-1]
    assert coarse == pytest.approx(fine, abs=5e-3)  # the first steps of a sum are of order step over time


def test_a_series_that_has_not_decided_is_unsettled():
    times = np.linspace(1.0, 100.0, 100)
    assert convergence(times, np.linspace(2.0, 4.0, 100), np.log(times)).motion is Motion.UNSETTLED


def test_a_high_but_flat_series_is_not_called_chaotic():
    times = np.linspace(1.0, 100.0, 100)
    assert convergence(times, np.full(100, 6.0), np.log(times)).motion is Motion.UNSETTLED


def test_below_two_is_calm_too():
    times = np.linspace(1.0, 100.0, 100)
    assert convergence(times, np.full(100, 1.2), np.log(times)).motion is Motion.REGULAR


def test_a_handful_of_samples_decides_nothing():
    times = np.linspace(1.0, 10.0, 10)
    assert convergence(times, np.full(10, 2.0), np.log(times)).motion is Motion.UNSETTLED
    assert np.isnan(convergence(np.empty(0), np.empty(0), np.empty(0)).megno)
