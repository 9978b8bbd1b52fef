"""Quantities: what a table prints becomes the distribution that the documentation says, checked by its moments."""

import math
import warnings
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate, stats

from stabcheck.errors import QuantityError
from stabcheck.quantity import (
    UNITS,
    Column,
    Dimension,
    Distribution,
    Fixed,
    HalfNormal,
    Isotropic,
    LogUniform,
    Normal,
    TruncatedNormal,
    TwoPieceNormal,
    Uniform,
    from_toml,
    parse,
)

QUADRATURE = 1e-8
"""Relative tolerance of moments: adaptive quadrature over u asks for 1.5e-8 of its own and ends far below it."""

DEGREE = math.pi / 180.0


def number(text: str) -> Distribution:
    return parse(text, Dimension.NUMBER).distribution


def moment(distribution: Distribution, of: Callable[[float], float] = lambda x: x) -> float:
    """Expectation of a function of the value: the integral over the uniform number from 0 to 1, split at the median."""

    def integrand(u: float) -> float:
        return of(float(distribution.at(np.array([u]))[0]))

    halves = (integrate.quad(integrand, low, high, epsabs=0.0, limit=400) for low, high in ((0.0, 0.5), (0.5, 1.0)))
    return math.fsum(half[0] for half in halves)


def mean_and_variance(distribution: Distribution) -> tuple[float, float]:
    mean = moment(distribution)
    return mean, moment(distribution, lambda x: (x - mean) ** 2)


# ---------------------------------------------------------------------------------------------------------------------
# Distributions

AGAINST_SCIPY = [
    ("1.27 ± 0.05", stats.norm(1.27, 0.05)),
    ("normal(-3, 0.1)", stats.norm(-3.0, 0.1)),
    ("half-normal(0.05)", stats.halfnorm(scale=0.05)),
    ("< 0.3 (95 %)", stats.halfnorm(scale=0.3 / stats.halfnorm.ppf(0.95))),
    ("< 2 (68.27 %)", stats.halfnorm(scale=2.0 / stats.halfnorm.ppf(0.6827))),
    ("truncated normal(0.1, 0.05, 0, 1)", stats.truncnorm(-2.0, 18.0, loc=0.1, scale=0.05)),
    ("truncated normal(0, 1, 2, 3)", stats.truncnorm(2.0, 3.0)),
    ("truncated normal(1, 0.2, 0, 1)", stats.truncnorm(-5.0, 0.0, loc=1.0, scale=0.2)),
    ("uniform(-1, 4)", stats.uniform(-1.0, 5.0)),
    ("log-uniform(1, 10)", stats.loguniform(1.0, 10.0)),
    ("log-uniform(0.01, 100)", stats.loguniform(0.01, 100.0)),
]


@pytest.mark.parametrize(("text", "reference"), AGAINST_SCIPY, ids=[text for text, _ in AGAINST_SCIPY])
def test_mean_and_variance_are_those_of_the_reference_library(text: str, reference: Any) -> None:
    mean, variance = mean_and_variance(number(text))
    assert mean == pytest.approx(float(reference.mean()), rel=QUADRATURE)
    assert variance == pytest.approx(float(reference.var()), rel=QUADRATURE)


@pytest.mark.parametrize(("text", "reference"), AGAINST_SCIPY, ids=[text for text, _ in AGAINST_SCIPY])
def test_quantiles_are_those_of_the_reference_library(text: str, reference: Any) -> None:
    u = np.array([1e-6, 0.025, 0.1587, 0.5, 0.8413, 0.975, 1.0 - 1e-6])
    # 1e-9: the reference finds quantiles of the truncated normal through logarithms, which costs it that much.
    assert number(text).at(u) == pytest.approx(reference.ppf(u), rel=1e-9, abs=1e-12)


def test_two_errors_mean_a_median_with_half_of_the_draws_on_each_side_and_68_percent_inside() -> None:
    value = parse("1.2 +0.3 -0.2", Dimension.NUMBER)
    u = stats.norm.cdf([-2.0, -1.0, 0.0, 1.0, 2.0])
    assert value.at(u) == pytest.approx([0.8, 1.0, 1.2, 1.5, 1.8], rel=1e-14)
    assert value.central == pytest.approx(1.2, rel=1e-15)
    assert value.sigma == pytest.approx(0.25, rel=1e-14)


def test_two_errors_have_the_mean_and_variance_of_two_halves_of_normals() -> None:
    # The reference puts it together from two half-normals of the reference library, half the weight each.
    median, lower, upper = 0.03, 0.01, 0.02
    above, below = stats.halfnorm(scale=upper), stats.halfnorm(scale=lower)
    mean = median + 0.5 * (above.mean() - below.mean())
    variance = 0.5 * (above.moment(2) + below.moment(2)) - (mean - median) ** 2
    assert mean_and_variance(number("0.03 +0.02 -0.01")) == pytest.approx((mean, variance), rel=QUADRATURE)
    documented = (
        median + (upper - lower) / math.sqrt(2.0 * math.pi),
        (upper**2 + lower**2) / 2.0 - (upper - lower) ** 2 / (2.0 * math.pi),
    )
    assert (mean, variance) == pytest.approx(documented, rel=1e-14)


def test_control_a_value_read_as_mode_or_with_the_mean_of_its_errors_is_noticed() -> None:
    median, lower, upper = 0.03, 0.01, 0.02
    # Value as mode with a continuous density: the share below it is lower / (lower + upper), not one half.
    u = 0.5
    below_mode = lower / (lower + upper)
    as_mode = median + upper * stats.norm.ppf(0.5 + 0.5 * (u - below_mode) / (1.0 - below_mode))
    symmetric = stats.norm(median, 0.5 * (lower + upper))
    ours = mean_and_variance(number("0.03 +0.02 -0.01"))
    assert as_mode != pytest.approx(number("0.03 +0.02 -0.01").at(np.array([u]))[0], rel=0.05)
    assert symmetric.mean() != pytest.approx(ours[0], rel=0.05)


def test_an_upper_limit_has_its_stated_share_below_it_and_its_most_probable_value_at_zero() -> None:
    limit = parse("< 0.3 (95 %)", Dimension.NUMBER)
    assert limit.at(np.array([0.95])) == pytest.approx([0.3], rel=1e-14)
    density = 1e-4 / np.diff(limit.at(np.array([0.1, 0.1001, 0.5, 0.5001, 0.9, 0.9001])))[::2]
    assert density[0] > density[1] > density[2]
    scale = 0.3 / 1.959963984540054  # the two-sided 95 % point of a normal, from memory
    assert limit.distribution == HalfNormal(pytest.approx(scale, rel=1e-12))  # type: ignore[arg-type]
    mean, variance = mean_and_variance(limit.distribution)
    assert mean == pytest.approx(scale * math.sqrt(2.0 / math.pi), rel=QUADRATURE)
    assert variance == pytest.approx(scale**2 * (1.0 - 2.0 / math.pi), rel=QUADRATURE)


def test_control_a_limit_read_as_one_sigma_or_as_the_edge_of_a_uniform_is_noticed() -> None:
    ours = mean_and_variance(number("< 0.3 (95 %)"))
    for wrong in (stats.halfnorm(scale=0.3), stats.uniform(0.0, 0.3), stats.halfnorm(scale=0.3 / stats.norm.ppf(0.95))):
        assert (wrong.mean(), wrong.var()) != pytest.approx(ours, rel=0.05)


def test_the_smallest_uniform_number_gives_a_limit_that_is_above_zero() -> None:
    assert number("< 0.3 (95 %)").at(np.array([2.0**-54]))[0] > 0.0


def test_an_isotropic_plane_has_its_median_at_60_degrees_and_a_mean_sine_of_pi_over_4() -> None:
    # P(i < x) = 1 - cos x; common practice, no source.
    plane = parse("isotropic", Dimension.ANGLE)
    assert plane.central == pytest.approx(60.0 * DEGREE, rel=1e-15)
    assert moment(plane.distribution, math.sin) == pytest.approx(math.pi / 4.0, rel=QUADRATURE)
    assert moment(plane.distribution, math.cos) == pytest.approx(0.5, rel=QUADRATURE)
    below_10 = plane.at(np.array([0.015192246988]))  # 1 - cos 10°
    assert below_10 == pytest.approx([10.0 * DEGREE], rel=1e-11)  # as many digits as are written above
    doubled = plane.at(np.array([0.133974596216]))  # 1 - √3/2: true mass above 2 m sin i, i < 30°
    assert doubled == pytest.approx([30.0 * DEGREE], rel=1e-11)


def test_control_ten_thousand_inclinations_tell_isotropic_from_uniform() -> None:
    u = (np.arange(10_000) + 0.5) / 10_000  # the most even ten thousand draws
    right = parse("isotropic", Dimension.ANGLE).at(u)
    wrong = parse("uniform(0, 90) deg", Dimension.ANGLE).at(u)
    assert np.mean(np.sin(right)) == pytest.approx(math.pi / 4.0, abs=3e-3)  # three times 0.22 / √10000, rounded up
    assert np.mean(np.sin(wrong)) == pytest.approx(2.0 / math.pi, abs=3e-3)
    assert abs(np.mean(np.sin(wrong)) - math.pi / 4.0) > 0.1


def test_near_face_on_an_isotropic_inclination_keeps_its_digits() -> None:
    u = np.array([1e-18, 1e-12])
    assert parse("isotropic", Dimension.ANGLE).at(u) == pytest.approx(np.sqrt(2.0 * u), rel=1e-12)


def test_planets_isotropic_one_by_one_are_retrograde_half_of_the_time() -> None:
    free = parse("isotropic independent", Dimension.ANGLE)
    assert free.central == pytest.approx(math.pi / 2.0)
    assert moment(free.distribution, math.cos) == pytest.approx(0.0, abs=1e-9)  # quadrature about a cancelling sum
    assert moment(free.distribution, math.sin) == pytest.approx(math.pi / 4.0, rel=QUADRATURE)


ALL_KINDS: list[Distribution] = [
    Fixed(1.5),
    Normal(1.0, 0.1),
    TwoPieceNormal(1.0, 0.1, 0.4),
    HalfNormal(0.3),
    TruncatedNormal(0.1, 0.05, 0.0, 1.0),
    TruncatedNormal(0.0, 1.0, 4.0, 5.0),
    TruncatedNormal(0.0, 1.0, -5.0, -4.0),
    Uniform(0.0, 6.0),
    LogUniform(1.0, 10.0),
    Isotropic(),
    Isotropic(both_senses=True),
]


@pytest.mark.parametrize("kind", ALL_KINDS, ids=repr)
def test_a_row_does_not_depend_on_the_rows_it_is_drawn_with(kind: Distribution) -> None:
    u = (np.random.Generator(np.random.Philox(5)).integers(0, 2**53, 1037) + 0.5) * 2.0**-53
    whole = kind.at(u)
    for size in (1, 3, 8, 500):
        pieces = [kind.at(np.ascontiguousarray(u[start : start + size])) for start in range(0, len(u), size)]
        assert np.array_equal(np.concatenate(pieces), whole)


@pytest.mark.parametrize("kind", ALL_KINDS, ids=repr)
def test_values_rise_with_the_uniform_number_and_are_finite_to_its_ends(kind: Distribution) -> None:
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        values = kind.at(np.array([2.0**-54, 1e-12, 0.01, 0.3, 0.5, 0.7, 0.99, 1.0 - 1e-12, 1.0 - 2.0**-53]))
    assert np.isfinite(values).all()
    assert (np.diff(values) >= 0.0).all()


def test_a_truncated_normal_never_leaves_its_limits() -> None:
    u = np.concatenate([np.logspace(-16, -1, 500), 1.0 - np.logspace(-15.9, -1, 500)])
    for low, high in ((0.0, 1.0), (4.0, 5.0), (-5.0, -4.0), (-1.0, 8.0)):
        values = TruncatedNormal(0.0, 1.0, low, high).at(u)
        assert low <= values.min() and values.max() <= high


def test_the_upper_tail_of_a_normal_is_the_mirror_of_the_lower_one() -> None:
    u = np.array([0.1, 0.25, 0.5, 0.75, 0.9])
    upper, lower = TruncatedNormal(0.0, 1.0, 4.0, 5.0).at(u), TruncatedNormal(0.0, 1.0, -5.0, -4.0).at(u)
    assert upper == pytest.approx(-lower[::-1], rel=1e-13)


def test_an_array_of_any_shape_keeps_its_shape() -> None:
    u = np.full((3, 2), 0.5)
    for kind in ALL_KINDS:
        assert kind.at(u).shape == (3, 2)


# ---------------------------------------------------------------------------------------------------------------------
# Reading


@pytest.mark.parametrize(
    "text",
    [
        "1.2±0.1",
        "1.2 ± 0.1",
        "1.2 +/- 0.1",
        "1.2 +- 0.1",
        " 1.2\xa0±\u2009.1 ",
        "1.2 +0.1 -0.1",
        "1.2 +0.1 −0.1",
        "1.2 -0.1 +0.1",
        "1.2 +0.1/-0.1",
        "12e-1 ± 1e-1",
        "+1.2 ± 0.1",
        "normal(1.2, 0.1)",
        "Normal( 1.2 ,0.1 )",
    ],
)
def test_one_value_may_be_spelt_in_many_ways(text: str) -> None:
    assert number(text) == Normal(1.2, 0.1)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("1.2", Fixed(1.2)),
        ("-110.47", Fixed(-110.47)),
        ("1.2 +0.3 -0.2", TwoPieceNormal(1.2, 0.2, 0.3)),
        ("1.2 -0.2 +0.3", TwoPieceNormal(1.2, 0.2, 0.3)),
        ("uniform(0, 1)", Uniform(0.0, 1.0)),
        ("log-uniform(1, 10)", LogUniform(1.0, 10.0)),
        ("truncated normal(0.1, 0.05, 0, 1)", TruncatedNormal(0.1, 0.05, 0.0, 1.0)),
        ("half-normal(0.05)", HalfNormal(0.05)),
    ],
)
def test_each_form_is_read_as_documented(text: str, expected: Distribution) -> None:
    assert number(text) == expected


@pytest.mark.parametrize(
    "text", ["< 3 (95 %) Mjup", "< 3 Mjup (95 %)", "<3Mjup(95%)", "≤ 3 Mjup (95.0 %)", "< 3 (95 %) M_jup"]
)
def test_the_unit_of_a_limit_may_stand_on_either_side_of_its_confidence(text: str) -> None:
    assert parse(text, Dimension.MASS).at(np.array([0.95]))[0] == pytest.approx(3.0 * UNITS[Dimension.MASS]["Mjup"])


def test_units_are_those_of_the_reference_library() -> None:
    from astropy import constants, units

    # 2e-7: the library goes through G and kilograms for masses, where ratios keep all digits but the last printed one.
    per = {
        "Mjup": (constants.GM_jup / constants.GM_sun).decompose().value,
        "Mearth": (constants.GM_earth / constants.GM_sun).decompose().value,
        "Rsun": units.R_sun.to(units.au),
        "Rjup": units.R_jup.to(units.au),
        "Rearth": units.R_earth.to(units.au),
        "km": units.km.to(units.au),
        "m": units.m.to(units.au),
        "h": units.h.to(units.d),
        "min": units.min.to(units.d),
        "s": units.s.to(units.d),
        "yr": units.yr.to(units.d),
        "kyr": units.kyr.to(units.d),
        "Myr": units.Myr.to(units.d),
        "Gyr": units.Gyr.to(units.d),
        "deg": units.deg.to(units.rad),
        "m/s": (units.m / units.s).to(units.au / units.d),
        "km/s": (units.km / units.s).to(units.au / units.d),
    }
    ours = {name: factor for known in UNITS.values() for name, factor in known.items()}
    assert {name: ours[name] for name in per} == pytest.approx(per, rel=1e-14)
    assert {name for name in set(ours) - set(per)} == {
        "",
        "Msun",
        "au",
        "d",
        "rad",
        "au/d",
        "BJD",
        "BJD_TDB",
        "BJD_UTC",
    }


@pytest.mark.parametrize(
    ("text", "dimension", "inside"),
    [
        ("1 Msun", Dimension.MASS, 1.0),
        ("1 M☉", Dimension.MASS, 1.0),
        ("360°", Dimension.ANGLE, 2.0 * math.pi),
        ("1 yr", Dimension.TIME, 365.25),
        ("2459000.123456 BJD_TDB", Dimension.DATE, 2459000.123456),
        ("1 AU", Dimension.LENGTH, 1.0),
        ("149597870.7 km", Dimension.LENGTH, 1.0),
    ],
)
def test_a_value_is_brought_to_the_unit_inside(text: str, dimension: Dimension, inside: float) -> None:
    assert parse(text, dimension).central == pytest.approx(inside, rel=1e-15)


def test_a_date_keeps_its_time_scale_and_its_digits() -> None:
    date = parse("2459001.10 ± 0.02 BJD_UTC", Dimension.DATE)
    assert date.unit == "BJD_UTC"
    assert date.distribution == Normal(2459001.10, 0.02)


def test_errors_and_limits_carry_the_unit_of_the_value() -> None:
    mass = parse("1.2 +0.3 -0.2 Mjup", Dimension.MASS).distribution
    jupiter = UNITS[Dimension.MASS]["Mjup"]
    assert mass == TwoPieceNormal(1.2 * jupiter, 0.2 * jupiter, 0.3 * jupiter)


def test_a_bare_number_is_read_only_where_nothing_has_a_unit() -> None:
    assert from_toml(0.03, Dimension.NUMBER).distribution == Fixed(0.03)
    assert from_toml(0, Dimension.NUMBER).distribution == Fixed(0.0)
    for dimension in set(Dimension) - {Dimension.NUMBER}:
        with pytest.raises(QuantityError) as caught:
            from_toml(4.31, dimension)
        assert all(unit in caught.value.do for unit in UNITS[dimension])


def test_a_column_has_a_name_a_factor_and_an_offset_and_no_value() -> None:
    column = from_toml({"column": "P_b", "unit": "h"}, Dimension.TIME)
    assert (column.column, column.is_fixed) == ("P_b", False)
    assert math.isnan(column.central) and math.isnan(column.sigma)
    date = from_toml({"column": "T", "unit": "BJD_TDB", "offset": 2454833}, Dimension.DATE).distribution
    assert isinstance(date, Column)
    assert date.inside(np.array([100.25])) == pytest.approx([2454933.25], rel=1e-15)
    with pytest.raises(QuantityError):
        column.at(np.array([0.5]))


def test_the_record_of_a_quantity_forgets_how_it_was_written_and_nothing_else() -> None:
    one, same = parse("1.20 +/- 0.10 d", Dimension.TIME), parse("normal(1.2, 0.1) d", Dimension.TIME)
    assert one.record() == same.record() == {"kind": "Normal", "mean": 1.2, "sigma": 0.1}
    assert parse("1.2 ± 0.11 d", Dimension.TIME).record() != one.record()


@pytest.mark.parametrize(
    ("text", "dimension", "words"),
    [
        ("", Dimension.TIME, "empty"),
        ("1.2 +0.3 --0.2 d", Dimension.TIME, "two signs"),
        ("1.2 +0.3 -−0.2 d", Dimension.TIME, "two signs"),
        ("1.2 + 0.3 d", Dimension.TIME, "blank error"),
        ("1.2 ± 0.1 ± 0.2 d", Dimension.TIME, "quadrature"),
        ("1.2 ± 0 d", Dimension.TIME, "error of 0"),
        ("0.0 +0.02 -0.0", Dimension.NUMBER, "error of 0"),
        ("4.31(5) d", Dimension.TIME, "write it out"),
        ("< 3 Mjup", Dimension.MASS, "confidence"),
        ("< 3 (2 sigma) Mjup", Dimension.MASS, "percent"),
        ("< -3 (95 %) Mjup", Dimension.MASS, "above 0"),
        ("< 3 (0.95 %) Mjup", Dimension.MASS, "above 50"),
        ("< 3 (50 %) Mjup", Dimension.MASS, "above 50"),
        ("< 3 (100 %) Mjup", Dimension.MASS, "below 100"),
        ("isotropic", Dimension.TIME, "inclination"),
        ("1 MJ", Dimension.MASS, "write Mjup"),
        ("1 mjup", Dimension.MASS, "write Mjup"),
        ("1 M", Dimension.MASS, "not a known unit"),
        ("1 Mjup", Dimension.LENGTH, "unit of mass"),
        ("2459000 JD", Dimension.DATE, "8 minutes"),
        ("< 2459000 (95 %) BJD_TDB", Dimension.DATE, "zero"),
        ("log-uniform(0, 10)", Dimension.NUMBER, "above 0"),
        ("log-uniform(3, 1)", Dimension.NUMBER, "lower limit"),
        ("normal(1)", Dimension.NUMBER, "2 numbers"),
        ("normal(1, -1)", Dimension.NUMBER, "above 0"),
        ("truncated normal(0, 0.01, 0.5, 1)", Dimension.NUMBER, "millionth"),
        ("inf d", Dimension.TIME, "inf is not a value"),
        ("1 ± nan d", Dimension.TIME, "nan is not a value"),
        ("1e400 d", Dimension.TIME, "too large"),
        ("1e200 Gyr", Dimension.TIME, "beyond"),
    ],
)
def test_what_cannot_be_read_is_refused_with_the_reason(text: str, dimension: Dimension, words: str) -> None:
    with pytest.raises(QuantityError) as caught:
        parse(text, dimension)
    assert words in str(caught.value)
    assert caught.value.why and caught.value.do


FINITE = st.floats(1e-6, 1e6)


@settings(max_examples=200, derandomize=True, deadline=None, database=None)
@given(
    value=st.integers(-(10**9), 10**9).map(lambda n: n / 1e3),
    upper=FINITE,
    lower=FINITE,
    dimension=st.sampled_from(list(Dimension)),
)
def test_any_value_with_two_errors_is_read_back(value: float, upper: float, lower: float, dimension: Dimension) -> None:
    unit, factor = next(iter(UNITS[dimension].items()))
    distribution = parse(f"{value!r} +{upper!r} -{lower!r} {unit}", dimension).distribution
    steps = distribution.at(stats.norm.cdf([-1.0, 0.0, 1.0]))
    expected = [(value - lower) * factor, value * factor, (value + upper) * factor]
    assert steps == pytest.approx(expected, rel=1e-9, abs=1e-9 * factor * (1.0 + abs(value) + upper + lower))


@settings(max_examples=300, derandomize=True, deadline=None, database=None)
@given(
    text=st.text(alphabet="0123456789.+-±<>() %eE,dMjupabtrnifolgs", max_size=24),
    dimension=st.sampled_from(list(Dimension)),
)
def test_any_text_is_read_or_refused_in_words(text: str, dimension: Dimension) -> None:
    try:
        quantity = parse(text, dimension)
    except QuantityError as error:
        assert error.why and error.do
    else:
        assert math.isfinite(quantity.central)
