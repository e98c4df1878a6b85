"""Tallies: merging is adding, far-off skewed data lose no digits, quantiles are within a cell, holes are refused."""

import pickle

import numpy as np
import pytest
from scipy import stats

from mc.intervals import Summary
from mc.tally import CELLS, CELLS_PER_SIGMA, Grid, Moments, Tally

COUNT = 200_000


@pytest.fixture(scope="module")
def values():
    """Three outputs: normal, skewed, skewed and far from zero."""
    random = np.random.default_rng(11)
    gamma = random.gamma(4.0, 0.5, COUNT)
    return np.stack([random.standard_normal(COUNT), gamma, 1e6 + 1e-3 * gamma])


@pytest.fixture(scope="module")
def grid(values):
    return Grid.from_pilot(values[:, :4096])


@pytest.fixture(scope="module")
def whole(grid, values):
    return Tally.of(grid, [values])


@pytest.mark.parametrize("cuts", [(1,), (100_000,), (7, 8, 9000, 150_000)])
def test_merging_equals_one_pass(grid, values, whole, cuts):
    parts = [Tally.of(grid, [part]) for part in np.split(values, cuts, axis=1)]
    merged = sum(parts[1:], start=parts[0])
    sliced = Tally.of(grid, np.split(values, cuts, axis=1))
    for other in (merged, sliced):
        assert other.count == whole.count
        # a sum of n numbers of order one is known to n roundings at worst
        assert other.powers == pytest.approx(whole.powers, rel=1e-12, abs=COUNT * np.finfo(float).eps)
        assert np.array_equal(other.cells, whole.cells)
        assert np.array_equal(other.smallest, whole.smallest)
        assert np.array_equal(other.largest, whole.largest)


def test_every_sample_is_in_a_cell(whole):
    assert whole.cells.sum(axis=1).tolist() == [COUNT] * 3


def test_moments_against_numpy_and_scipy(whole, values):
    mean, second, third, fourth = whole.central_moments()
    # 1e6 is taken away exactly before the twins' turn: they would lose the digits that the tally must keep
    shift = np.array([0.0, 0.0, 1e6])[:, None]
    near = values - shift
    assert mean - shift[:, 0] == pytest.approx(near.mean(axis=1), rel=1e-6)
    assert second == pytest.approx(near.var(axis=1), rel=1e-10)
    assert third / second**1.5 == pytest.approx(stats.skew(near, axis=1), rel=1e-9)
    assert fourth / second**2 == pytest.approx(stats.kurtosis(near, axis=1, fisher=False), rel=1e-9)


def test_the_textbook_shortcut_would_have_failed(values):
    # why the tally is shifted: sum of squares minus squared sum, in doubles, at mean 1e6 and sigma 1e-3
    far = values[2]
    shortcut = np.mean(far**2) - np.mean(far) ** 2
    assert abs(shortcut / far.var() - 1) > 1


def test_a_grid_far_off_costs_few_digits(values):
    # a pilot that misses the mean by a sigma and the scale by a factor of three
    center, scale = values.mean(axis=1), values.std(axis=1)
    second = Tally.of(Grid(center=center + scale, scale=3 * scale), [values]).central_moments()[1]
    assert second == pytest.approx(scale**2, rel=1e-10)


@pytest.mark.parametrize("output", [0, 1, 2])
def test_quantiles_are_within_one_cell(grid, values, whole, output):
    cell = grid.scale[output] / CELLS_PER_SIGMA
    for probability in (1e-5, 1e-4, 0.001, 0.02, 0.25, 0.5, 0.9, 0.999, 0.9999, 0.99999):
        ours = whole.value_at_rank(output, probability * COUNT)
        # "inverted_cdf" is the sample at which the share is reached; interpolating rules leave it in the far tails
        assert abs(ours - np.quantile(values[output], probability, method="inverted_cdf")) <= cell
        if 0.02 <= probability <= 0.9:
            assert abs(ours - np.quantile(values[output], probability)) <= cell


def test_ranks_at_the_ends_are_the_extremes(values, whole):
    for output in range(3):
        assert whole.value_at_rank(output, 0) == values[output].min()
        assert whole.value_at_rank(output, COUNT) == values[output].max()


def test_quantiles_never_fall(whole):
    ranks = np.linspace(0, COUNT, 5001)
    for output in range(3):
        assert np.all(np.diff([whole.value_at_rank(output, rank) for rank in ranks]) >= 0)


@pytest.mark.parametrize("hole", [np.nan, np.inf, -np.inf])
@pytest.mark.parametrize("tally", [Tally, Moments])
def test_a_value_that_is_not_finite_is_refused(grid, values, hole, tally):
    broken = values[:, :100].copy()
    broken[1, 57] = hole
    with pytest.raises(FloatingPointError, match="output 1 of a model is not finite"):
        tally.of(grid, [values[:, :100], broken])


def test_opposite_infinities_do_not_cancel(grid, values):
    broken = values[:, :100].copy()
    broken[2, :2] = np.inf, -np.inf
    with np.errstate(invalid="ignore"), pytest.raises(FloatingPointError, match="output 2"):
        Tally.of(grid, [broken])


@pytest.mark.parametrize("constant", [0.0, 0.5, -3.0, 1e6])
def test_an_output_that_does_not_vary(constant):
    same = np.full((1, 5000), constant)
    summary = Summary(Tally.of(Grid.from_pilot(same[:, :4096]), [same]))
    assert (summary.mean().value, summary.mean().low, summary.mean().high) == (constant, constant, constant)
    assert (summary.sigma().value, summary.sigma().low, summary.sigma().high) == (0.0, 0.0, 0.0)
    assert summary.quantile(0.3).value == constant


def test_moments_are_those_of_the_tally(grid, values, whole):
    moments = Moments.of(grid, [values])
    assert np.array_equal(moments.powers, whole.powers)
    assert moments.count == whole.count
    assert not hasattr(moments, "cells")


def test_size_does_not_depend_on_the_count(grid, values, whole):
    doubled = whole + whole
    assert doubled.count == 2 * COUNT
    # all but the digits of the counts themselves; a tally of few samples fills fewer cells and is smaller
    assert abs(len(pickle.dumps(doubled)) - len(pickle.dumps(whole))) < 64
    assert len(pickle.dumps(Tally.of(grid, [values[:, :10]]))) < len(pickle.dumps(whole)) < CELLS * 8 * len(values)


def test_a_tally_travels_whole(whole):
    found = pickle.loads(pickle.dumps(whole))
    assert np.array_equal(found.cells, whole.cells) and np.array_equal(found.powers, whole.powers)
    assert found.count == whole.count and (found + whole).count == 2 * whole.count
