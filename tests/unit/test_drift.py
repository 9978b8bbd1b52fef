"""Frequency drift on series whose frequencies are known."""

import numpy as np
import pytest

from stabcheck.chaos.drift import drift, frequency_rad


def test_a_frequency_is_found_to_rounding_off_the_grid_of_the_transform():
    index = np.arange(500)
    assert frequency_rad(np.exp(1j * 0.3217 * index)) == pytest.approx(0.3217, abs=1e-12)


def test_a_second_term_moves_the_frequency_by_little():
    index = np.arange(2048)
    series = np.exp(1j * 0.3217 * index) + 0.05 * np.exp(1j * 1.1 * index)
    assert frequency_rad(series) == pytest.approx(0.3217, abs=1e-9)


def test_a_quadratic_phase_gives_the_drift_of_its_halves():
    """θ = 2π(t + κt²/2): the mean rates of the halves differ by (κT/2)/(1 + κT/4) (exact)."""
    kappa, count = 1e-8, 10_000
    times = np.arange(count, dtype=float)
    longitudes = 2 * np.pi * (0.137 * times + kappa * times**2 / 2)
    expected = (kappa * count / 2) / (0.137 + kappa * count / 4)
    found = drift(longitudes[:, None], np.array([2 * np.pi * 0.137]))
    assert found[0] == pytest.approx(expected, rel=1e-3)  # the window weighs the middle of a half, not its whole


def test_a_regular_series_drifts_less_than_the_window_can_see():
    """Printed by the same experiment elsewhere: Hann window 2e-13, straight line 4e-9, ends alone 2.4e-7."""
    times = np.arange(20_000, dtype=float)
    longitudes = 2 * np.pi * 0.137 * times + 0.01 * np.sin(2 * np.pi * times / 37.3 + 0.4)
    assert drift(longitudes[:, None], np.array([2 * np.pi * 0.137]))[0] < 1e-11


def test_control_the_ends_of_the_halves_alone_are_noticed():
    times = np.arange(20_000, dtype=float)
    longitudes = 2 * np.pi * 0.137 * times + 0.01 * np.sin(2 * np.pi * times / 37.3 + 0.4)
    first = (longitudes[9_999] - longitudes[0]) / 9_999
    second = (longitudes[19_999] - longitudes[10_000]) / 9_999
    assert abs(1 - second / first) > 1e-8


def test_samples_further_apart_than_an_orbit_give_the_same_drift():
    times = np.arange(200_000, dtype=float)
    longitudes = 2 * np.pi * (0.137 * times + 1e-9 * times**2 / 2)
    fine = drift(longitudes[:, None], np.array([2 * np.pi * 0.137]))[0]
    coarse = drift(longitudes[::97, None], np.array([2 * np.pi * 0.137 * 97]))[0]
    assert coarse == pytest.approx(fine, rel=1e-2)


def test_too_few_samples_or_a_missing_one_give_nan():
    longitudes = np.linspace(0, 100, 40)[:, None]
    assert np.isnan(drift(longitudes, np.array([2.5]))[0])
    longer = np.linspace(0, 100, 200)[:, None]
    longer[150] = np.nan
    assert np.isnan(drift(longer, np.array([0.5]))[0])
