"""The rule that chooses a method, as a table of cases."""

import numpy as np
import pytest

from stabcheck.errors import PlanError
from stabcheck.method import choose
from stabcheck.plan import Method, Plan


def chosen(masses, axes, eccentricities, method=Method.AUTO):
    return choose(np.array(masses), np.array(axes), np.array(eccentricities), Plan(method=method))


@pytest.mark.parametrize(
    ("masses", "axes", "eccentricities", "expected"),
    [
        ([1.0, 1e-5, 1e-5], [0.1, 0.2], [0.0, 0.3], Method.WHFAST),
        ([1.0, 1e-2, 1e-3], [0.1, 0.2], [0.5, 0.89], Method.WHFAST),
        ([1.0, 1e-5, 1e-5], [0.1, 2.0], [0.0, 0.93], Method.IAS15),
        ([1.0, 1e-3, 0.5], [1.0, 30.0], [0.1, 0.5], Method.WHFAST),
        ([1.0, 1e-3, 0.5], [1.0, 8.0], [0.1, 0.5], Method.IAS15),
        ([1.0, 0.3, 1e-3], [0.2, 2.0], [0.1, 0.1], Method.IAS15),
        ([1.0, 0.3], [0.2], [0.1], Method.WHFAST),
        ([1.0, 1e-5, 1e-5], [0.1, -2.0], [0.0, 1.5], Method.IAS15),
    ],
)
def test_the_rule_is_this_table(masses, axes, eccentricities, expected):
    assert chosen(masses, axes, eccentricities).method is expected


def test_the_reason_is_given_in_words():
    assert "0.93" in chosen([1.0, 1e-5, 1e-5], [0.1, 2.0], [0.0, 0.93]).why
    assert "4.0 times" in chosen([1.0, 1e-3, 0.5], [1.0, 8.0], [0.1, 0.5]).why


def test_a_method_that_the_scenario_names_is_taken():
    assert chosen([1.0, 1e-5], [0.1], [0.95], Method.WHFAST).method is Method.WHFAST


def test_a_method_as_bare_text_is_refused():
    with pytest.raises(PlanError, match="method is 'ias15'"):
        Plan(method="ias15")  # type: ignore[arg-type]
