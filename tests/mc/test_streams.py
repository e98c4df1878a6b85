"""Streams: reproducible, apart from each other, and standard normal."""

import numpy as np
import pytest
from scipy import stats

from mc.experiment import Inputs
from mc.plan import Block
from mc.streams import Streams, generator

COUNT = 10**6


@pytest.fixture(scope="module")
def draws():
    return generator(0, "width", 0).standard_normal(COUNT)


def test_seed_zero_is_a_seed(draws):
    again = generator(0, "width", 0).standard_normal(1000)
    assert np.array_equal(again, draws[:1000])
    assert not np.any(generator(1, "width", 0).standard_normal(1000) == again)


def test_a_negative_seed_is_refused():
    with pytest.raises(ValueError, match="non-negative"):
        generator(-1, "width", 0)


def test_a_new_name_changes_no_other_draw():
    alone = Streams(5, 3, ["width"]).take(100)
    crowd = Streams(5, 3, ["length", "width", "a third with spaces", "Länge"]).take(100)
    assert np.array_equal(alone["width"], crowd["width"])
    assert set(crowd) == {"length", "width", "a third with spaces", "Länge"}


def test_a_stream_does_not_depend_on_other_blocks():
    # block 7 read after others, and alone
    for block in range(7):
        Streams(5, block, ["width"]).take(10)
    assert np.array_equal(Streams(5, 7, ["width"]).take(10)["width"], generator(5, "width", 7).standard_normal(10))


def test_slices_join_to_the_same_stream():
    whole = Streams(2, 0, ["width"]).take(1000)["width"]
    sliced = Streams(2, 0, ["width"])
    parts = [sliced.take(count)["width"] for count in (1, 7, 0, 492, 500)]
    assert np.array_equal(np.concatenate(parts), whole)


@pytest.mark.parametrize("slice_size", [1, 999, 4096, 10**9])
def test_slice_size_does_not_matter(slice_size):
    inputs = Inputs(seed=2, names=("width", "length"), slice_size=slice_size)
    joined = np.concatenate([part["length"] for part in inputs.slices(Block(4, 5000))])
    assert np.array_equal(joined, generator(2, "length", 4).standard_normal(5000))


def test_a_shorter_block_is_the_beginning_of_a_longer_one():
    inputs = Inputs(seed=2, names=("width",))
    short, long = (np.concatenate([part["width"] for part in inputs.slices(Block(1, size))]) for size in (300, 20_000))
    assert np.array_equal(long[:300], short)


@pytest.mark.parametrize(
    "other", [(0, "width", 1), (0, "length", 0), (1, "width", 0), (2**64, "width", 0), (0, "Width", 0), (0, "", 0)]
)
def test_streams_are_uncorrelated(draws, other):
    # the sample correlation of independent streams has standard error 1/sqrt(n); also with either stream one step late
    second = generator(*other).standard_normal(COUNT)
    for lag in (0, 1):
        for first, later in ((draws, second), (second, draws)):
            correlation = np.corrcoef(first[: COUNT - lag], later[lag:])[0, 1]
            assert abs(correlation) < 5 / np.sqrt(COUNT)


def test_moments_are_those_of_a_standard_normal(draws):
    # standard error of the mean of z^k is sqrt((E z^2k - (E z^k)^2)/n)
    for power, moment, doubled in ((1, 0, 1), (2, 1, 3), (3, 0, 15), (4, 3, 105)):
        assert abs(np.mean(draws**power) - moment) < 5 * np.sqrt((doubled - moment**2) / COUNT)


def test_law_is_the_standard_normal(draws):
    # a Kolmogorov-Smirnov p-value below 1e-6 is as rare as five standard errors
    assert stats.kstest(draws, "norm").pvalue > 1e-6


def test_tails_are_those_of_a_standard_normal(draws):
    for cut in (3.0, 4.0, 4.5):
        expected = COUNT * stats.norm.sf(cut)
        for beyond in (np.sum(draws > cut), np.sum(draws < -cut)):
            assert abs(beyond - expected) < 5 * np.sqrt(expected)


def test_first_draws_of_many_blocks_are_normal_too():
    # neighbouring block numbers seed neighbouring streams: their first values must not line up
    firsts = np.array([generator(0, "width", block).standard_normal() for block in range(4000)])
    assert stats.kstest(firsts, "norm").pvalue > 1e-6
    assert abs(np.corrcoef(firsts[:-1], firsts[1:])[0, 1]) < 5 / np.sqrt(4000)
