"""Differences of two options' numbers and where they cross over: coverage on populations whose truth is known."""

import numpy as np
import pytest

from mc.intervals import Estimate
from studies.differences import crossings, difference, differences
from studies.numbers import Number

WIDTHS = [0.2, 0.3, 0.45, 0.7, 1.0]
GROUPS, PER_GROUP = 24, 400


def estimate(value, low, high, n=1000):
    return Estimate(value=value, low=low, high=high, level=0.95, n=n, method="given")


def number(value, low, high, without=None, sizes=None, width_um=None, name="vth_sigma_mv"):
    return Number(
        name=name, width_um=width_um, better=-1, estimate=estimate(value, low, high), without=without, sizes=sizes
    )


def gaussian_options(seed, crossing_um):
    """Means of two options at every width, which share most of their noise and are equal at a known width."""
    random = np.random.default_rng(seed)
    shared = random.standard_normal((GROUPS, PER_GROUP, len(WIDTHS)))
    options = []
    for slope in (0.0, 0.05):
        own = random.standard_normal((GROUPS, PER_GROUP, len(WIDTHS)))
        values = 10 + 0.7 * random.standard_normal((GROUPS, PER_GROUP, 1)) + 0.5 * shared + 0.1 * own
        values = values + slope * np.log(np.array(WIDTHS) / crossing_um)
        whole = values.mean(axis=(0, 1))
        without = (values.sum(axis=(0, 1)) - values.sum(axis=1)) / (PER_GROUP * (GROUPS - 1))
        half = 1.96 * values.std() / np.sqrt(GROUPS * PER_GROUP)
        options.append(
            tuple(
                number(whole[k], whole[k] - half, whole[k] + half, without[:, k], np.full(GROUPS, PER_GROUP), width)
                for k, width in enumerate(WIDTHS)
            )
        )
    return options


def test_a_known_crossover_is_inside_its_interval():
    held = 0
    for seed in range(100):
        found = crossings(differences(*gaussian_options(seed, 0.5), same=False))
        held += any(each.low <= 0.5 <= each.high for each in found)
    assert held >= 93


def test_options_that_do_not_cross():
    for seed in range(20):
        found = crossings(differences(*gaussian_options(seed, 0.02), same=False))
        assert not [each for each in found if each.low > 0 and np.isfinite(each.high)]


def test_a_paired_difference_is_the_jackknife_of_the_difference():
    first, second = (option[2] for option in gaussian_options(7, 0.5))
    found = difference(first, second, same=False)
    assert found.paired and found.change.low < found.change.value < found.change.high
    assert found.change.value == second.estimate.value - first.estimate.value
    # delete-a-group errors of a mean: spread of the groups' own differences
    change = second.without - first.without
    expected = np.sqrt((GROUPS - 1) / GROUPS * ((change - change.mean()) ** 2).sum())
    assert (found.change.high - found.change.value) / 2.0687 == pytest.approx(expected, rel=1e-4)


def test_the_same_process_differs_by_exactly_nothing():
    first, second = (option[0] for option in gaussian_options(1, 0.5))
    found = difference(first, second, same=True)
    assert (found.change.value, found.change.low, found.change.high, found.sign) == (0, 0, 0, 0)


def test_numbers_that_share_no_samples_add_their_errors():
    found = difference(number(1.0, 0.7, 1.1), number(3.0, 2.6, 3.3), same=False)
    assert not found.paired
    assert found.change.low == pytest.approx(2 - np.hypot(0.4, 0.1)) and found.change.high == pytest.approx(
        2 + np.hypot(0.3, 0.3)
    )


@pytest.mark.parametrize("other", [np.full(5, 1.0), None], ids=["groups differ", "none"])
def test_other_groups_are_not_paired(other):
    first = number(1.0, 0.9, 1.1, np.full(4, 1.0), np.full(4, 10))
    second = number(1.0, 0.9, 1.1, other, None if other is None else np.full(5, 10))
    assert not difference(first, second, same=False).paired


def test_what_is_out_of_reach_has_no_bound():
    found = difference(number(1.0, 0.9, 1.1), number(np.inf, 0.5, np.inf), same=False)
    assert found.change.low == -np.inf and found.change.high == np.inf and found.sign == 0


def test_samples_that_would_show_a_difference():
    found = difference(number(1.0, 0.9, 1.1), number(1.05, 0.95, 1.15), same=False)
    # the interval is sqrt(0.02) wide to either side; to see 0.05 with a power of four in five takes 2.04 times (0.1414/0.05)^2
    assert found.sign == 0 and found.samples_to_show() == pytest.approx(1000 * 2.04 * 8, rel=1e-6)


def test_a_crossing_s_interval_is_where_the_bounds_cross():
    # the difference rises by 1 a factor e of width and is zero at 0.5 um; bounds 0.4 to either side are crossed e^0.4 away
    options = []
    for slope in (0.0, 1.0):
        values = slope * np.log(np.array(WIDTHS) / 0.5)
        half = 0.4 / np.sqrt(2)
        options.append(
            tuple(number(value, value - half, value + half, width_um=width) for value, width in zip(values, WIDTHS))
        )
    (found,) = crossings(differences(*options, same=False))
    assert found.value == pytest.approx(0.5, rel=1e-12)
    assert found.low == pytest.approx(0.5 * np.exp(-0.4), rel=1e-12)
    assert found.high == pytest.approx(0.5 * np.exp(0.4), rel=1e-12)
