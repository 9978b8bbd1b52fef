"""The mass-radius relation against the printed one (Chen & Kipping 2017, ApJ 834, 17; digits from memory)."""

import numpy as np
import pytest

from stabcheck import radius
from stabcheck.constants import EARTH_MSUN, EARTH_RADIUS_AU, JUPITER_MSUN, JUPITER_RADIUS_AU


def test_the_lines_meet_at_the_constants_that_the_authors_give():
    # As the authors give them (from memory). All are rounded medians of one fit, so they meet to a last digit only.
    assert radius.constants()[1] == pytest.approx(-0.0925, abs=0.001)
    assert radius.constants()[2] == pytest.approx(1.25, abs=0.01)
    assert radius.constants()[3] == pytest.approx(-2.85, abs=0.01)


def test_the_relation_is_continuous_and_a_control_with_a_wrong_slope_is_not(monkeypatch):
    masses = np.array([m * (1 + s) * EARTH_MSUN for m in radius.TRANSITIONS_EARTH for s in (-1e-9, 1e-9)])
    jumps = np.diff(np.log(radius.radius_au_from_mass_msun(masses)))[::2]
    assert np.abs(jumps).max() < 1e-8  # slope below 1 times the relative step of 2e-9
    monkeypatch.setattr(radius, "constants", lambda: (0.00346, -0.05, 1.25, -2.85))
    jumps = np.diff(np.log(radius.radius_au_from_mass_msun(masses)))[::2]
    assert np.abs(jumps).max() > 1e-2


def test_earth_and_jupiter_have_about_their_own_radius():
    # The relation is a mean: its scatter is 4 % for rocky worlds and 7 % for giants; giants lie above Jupiter itself.
    assert radius.radius_au_from_mass_msun(np.array([EARTH_MSUN]))[0] == pytest.approx(EARTH_RADIUS_AU, rel=0.04)
    assert radius.radius_au_from_mass_msun(np.array([JUPITER_MSUN]))[0] == pytest.approx(JUPITER_RADIUS_AU, rel=0.25)


def test_a_mass_of_nothing_is_a_point_and_a_negative_one_has_no_radius():
    found = radius.radius_au_from_mass_msun(np.array([0.0, -1.0, np.nan]))
    assert found[0] == 0.0
    assert np.isnan(found[1:]).all()


def test_a_radius_does_not_depend_on_the_neighbours_in_the_array():
    masses = np.geomspace(1e-8, 0.2, 1001)
    together = radius.radius_au_from_mass_msun(masses)
    alone = np.array([radius.radius_au_from_mass_msun(masses[k : k + 1])[0] for k in range(masses.size)])
    assert np.array_equal(together, alone)
