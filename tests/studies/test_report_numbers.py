"""Numbers of the report are rounded to what is known of them."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from studies.report_numbers import NOTHING, alike, number_with_interval, plain_number

INF, NAN = math.inf, math.nan


@pytest.mark.parametrize(
    "triple, plus_minus, text, interval",
    [
        ((233.1481, 233.1002, 233.1961), True, "233.148", "± 0.048"),
        ((5393.62, 5390.0, 5397.2), True, "5393.6", "± 3.6"),
        ((0.6801, 0.6504, 0.7079), False, "0.680", "0.650 to 0.708"),
        ((1.9e-10, 1.6e-10, 2.2e-10), False, "1.90 × 10⁻¹⁰", "1.60 × 10⁻¹⁰ to 2.20 × 10⁻¹⁰"),
        ((12345.0, 11345.0, 13345.0), True, "12345", "± 1000"),
        ((-0.0001, -0.0501, 0.0499), True, "0.000", "± 0.050"),
        ((18.58, -INF, 19.58), False, "18.6", "no bound to 19.6"),
        ((7.0, 7.0, 7.0), True, "7", ""),
        ((INF, 0.5, INF), False, "none", "more than 0.5"),
        ((INF, INF, INF), False, "none", "no bound"),
        ((NAN, NAN, NAN), True, NOTHING, "not known"),
        ((0.0, 0.0, 3.7e-5), False, "0", "0 to 3.7 × 10⁻⁵"),
    ],
)
def test_a_number_with_its_interval(triple, plus_minus, text, interval):
    assert number_with_interval(*triple, plus_minus=plus_minus)[:2] == (text, interval)


@pytest.mark.parametrize(
    "triple, text, interval",
    [
        ((99.9996, 99.977, 99.99999), "99.9996", "99.977 to 99.99999"),
        ((100.0, 99.977, 100.0), "100.000", "99.977 to 100.000"),
        ((100 - 1e-12, 99.977, 100.0), "> 99.99999999", "99.977 to 100.000"),
        ((90.06, 89.61, 90.49), "90.06", "89.61 to 90.49"),
    ],
)
def test_a_yield_below_all_chips_is_not_shown_as_all_chips(triple, text, interval):
    assert number_with_interval(*triple, plus_minus=False, whole=100.0)[:2] == (text, interval)


def test_a_share_too_small_to_matter():
    assert number_with_interval(3e-5, 2e-5, 4e-5, plus_minus=True, least=0.01)[:2] == ("< 0.01", "")
    assert number_with_interval(0.02, 0.0199, 0.0201, plus_minus=True, least=0.01)[:2] == ("0.02", "± < 0.01")
    assert number_with_interval(56.17, 55.56, 56.78, plus_minus=True, least=0.01)[:2] == ("56.17", "± 0.61")


@pytest.mark.parametrize(
    "value, text",
    [
        (0.13, "0.13"),
        (4_000_000, "4\u202f000\u202f000"),
        (1.4e17, "1.4 × 10¹⁷"),
        (0, "0"),
        (-20, "-20"),
        (NAN, NOTHING),
    ],
)
def test_a_number_without_an_interval(value, text):
    assert plain_number(value, 10) == text


def test_numbers_of_a_column():
    assert alike([0.12, 0.2, 2.0]) == ["0.12", "0.2", "2"]  # as asked
    assert alike([233.1712, 201.9634, 187.0911]) == ["233.2", "202.0", "187.1"]
    assert alike([0.1041, 200.0, 1.3862]) == ["0.1041", "200", "1.386"]
    assert alike([NAN, 0.28958]) == [NOTHING, "0.2896"]


@given(st.floats(1e-12, 1e9), st.floats(1e-6, 0.5), st.sampled_from((-1, 1)))
def test_rounding_moves_a_number_by_less_than_a_tenth_of_its_uncertainty(size, relative, sign):
    value, width = sign * size, size * relative
    cell = number_with_interval(value, value - width, value + width, plus_minus=True)
    mantissa, _, power = cell.text.replace("\u202f", "").partition(" × 10")
    power = power.translate(str.maketrans("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "-0123456789"))
    assert abs(float(mantissa) * 10.0 ** int(power or 0) - value) <= max(0.1 * width, 0.51 * 10.0**-8, 1e-12 * size)
    assert cell.sort == value
