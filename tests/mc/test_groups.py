"""Tallies in groups, and the jackknife: against formulas, and its coverage on small repeats."""

import numpy as np
import pytest
from scipy import stats

from mc.groups import GROUPS, Grouped, Groups, jackknife_error, jackknife_half_width
from mc.plan import Plan
from mc.runner import run

VALUES = np.random.default_rng(1).exponential(size=6400)


def in_groups(values, count):
    return Groups(dict(enumerate(np.split(values, count))), {n: len(values) // count for n in range(count)})


class Sums:
    """A tally that remembers which blocks it saw, in their order."""

    def __init__(self, numbers):
        self.numbers = numbers

    def __add__(self, other):
        return Sums(self.numbers + other.numbers)


def one_block(block):
    return Sums([block.number])


def test_every_block_is_in_one_group_and_left_out_once():
    groups, samples = run(Grouped(task=one_block), Plan(samples=705, block_size=10))
    assert samples == 705 and groups.group_sizes().sum() == 705
    assert sorted(groups.total().numbers) == list(range(71))
    for left_out, rest in enumerate(groups.without_each()):
        assert sorted(rest.numbers) == [number for number in range(71) if number % GROUPS != left_out]


@pytest.mark.parametrize("count", [2, 3, 5])
def test_few_groups(count):
    groups = Groups({n: Sums([n]) for n in range(count)}, dict.fromkeys(range(count), 1))
    expected = [[n for n in range(count) if n != left_out] for left_out in range(count)]
    assert [rest.numbers for rest in groups.without_each()] == expected


def test_one_group_is_refused():
    with pytest.raises(ValueError, match="two or more"):
        Groups({0: Sums([0])}, {0: 1}).without_each()


def test_error_of_a_mean_is_the_spread_of_the_groups_means():
    parts = np.split(VALUES, 32)
    without = [(VALUES.sum() - part.sum()) / (VALUES.size - part.size) for part in parts]
    expected = np.std([part.mean() for part in parts], ddof=1) / np.sqrt(32)
    found = jackknife_error(VALUES.mean(), without, [part.size for part in parts])
    assert found == pytest.approx(expected, rel=1e-10, abs=0)


def test_unequal_groups():
    # a mean's error with groups of unequal size: variance of the group means, weighted by size (textbook formula)
    parts = np.split(VALUES, [1000, 1300, 2500, 2600, 4100, 5900])
    sizes = np.array([part.size for part in parts])
    without = [(VALUES.sum() - part.sum()) / (VALUES.size - part.size) for part in parts]
    means, total = np.array([part.mean() for part in parts]), VALUES.size
    expected = np.sqrt(((means - VALUES.mean()) ** 2 * sizes / (total - sizes)).mean())
    assert jackknife_error(VALUES.mean(), without, sizes) == pytest.approx(expected, rel=1e-10, abs=0)


def test_shape_and_what_is_not_finite():
    without = np.ones((4, 2, 3))
    without[2, 0, 1] = np.inf
    errors = jackknife_error(np.ones((2, 3)), without, [5, 5, 5, 5])
    assert errors.shape == (2, 3) and not np.isfinite(errors[0, 1])
    assert np.array_equal(np.isfinite(errors).sum(), 5) and errors[1, 2] == 0


@pytest.mark.parametrize(
    "statistic, truth",
    [(np.std, 1.0), (lambda v, axis: np.quantile(v, 0.9, axis=axis), stats.expon.ppf(0.9))],
    ids=["sigma", "quantile"],
)
def test_coverage(statistic, truth):
    random, held = np.random.default_rng(2), 0
    for _ in range(500):
        parts = random.exponential(size=(24, 200))
        whole = statistic(parts.ravel(), axis=0)
        without = [statistic(np.delete(parts, left_out, axis=0).ravel(), axis=0) for left_out in range(24)]
        held += abs(whole - truth) <= jackknife_half_width(whole, without, [200] * 24)
    assert 0.92 * 500 <= held <= 0.98 * 500
