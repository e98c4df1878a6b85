"""Gaussian copula: the asked correlation, nothing else changed, contradictions refused."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mc.correlation import Copula, semidefinite_root
from mc.experiment import Inputs
from mc.plan import Block

COUNT = 400_000
PAIRS = [("doping", "oxide", 0.6), ("oxide", "length", -0.3), ("doping", "length", 0.1)]


def draw(names, pairs, block_size=COUNT):
    """All draws of one block, joined."""
    parts = list(Inputs(seed=3, names=names, copula=Copula.of_pairs(pairs)).slices(Block(0, block_size)))
    return {name: np.concatenate([part[name] for part in parts]) for name in parts[0]}


def test_sample_correlations():
    draws = draw(("doping", "oxide", "length", "width"), PAIRS)
    asked = PAIRS + [("width", name, 0.0) for name in ("doping", "oxide", "length")]
    for first, second, correlation in asked:
        sample = np.corrcoef(draws[first], draws[second])[0, 1]
        # standard error of a normal sample's correlation
        assert abs(sample - correlation) < 5 * (1 - correlation**2) / np.sqrt(COUNT)


def test_each_input_stays_standard_normal():
    for values in draw(("doping", "oxide", "length"), PAIRS).values():
        assert abs(values.mean()) < 5 / np.sqrt(COUNT)
        assert abs(values.var() - 1) < 5 * np.sqrt(2 / COUNT)


@pytest.mark.parametrize("correlation", [1.0, -1.0])
def test_complete_correlation(correlation):
    draws = draw(("doping", "oxide"), [("doping", "oxide", correlation)], 1000)
    assert np.array_equal(draws["oxide"], correlation * draws["doping"])


def test_complete_correlation_of_three():
    draws = draw(("a", "b", "c"), [("a", "b", 1.0), ("a", "c", 0.5), ("b", "c", 0.5)], 1000)
    assert np.array_equal(draws["a"], draws["b"])


def test_zero_correlation_changes_nothing():
    plain, paired = (draw(("a", "b"), pairs, 1000) for pairs in ([], [("a", "b", 0.0)]))
    assert all(np.array_equal(plain[name], paired[name]) for name in ("a", "b"))


def test_unpaired_inputs_are_unchanged():
    plain, paired = (draw(("width", "doping", "oxide"), pairs, 1000) for pairs in ([], PAIRS[:1]))
    assert np.array_equal(plain["width"], paired["width"])
    # and the first of a pair keeps its own stream: the partner is the one that is mixed
    assert np.array_equal(plain["doping"], paired["doping"])
    assert not np.array_equal(plain["oxide"], paired["oxide"])


@pytest.mark.parametrize("names", [("oxide",), ("length",), ("length", "oxide"), ("width", "doping")])
def test_the_answer_does_not_depend_on_the_subset_asked_for(names):
    everything = draw(("doping", "oxide", "length", "width"), PAIRS, 1000)
    some = draw(names, PAIRS, 1000)
    assert all(np.array_equal(some[name], everything[name]) for name in names)


def test_needed_draws_partners_and_no_strangers():
    copula = Copula.of_pairs(PAIRS[:1])
    assert set(copula.needed(("oxide", "width"))) == {"oxide", "doping", "width"}
    assert copula.needed(("width",)) == ("width",)
    assert Copula().needed(("width", "oxide")) == ("width", "oxide")


@pytest.mark.parametrize(
    "pairs",
    [
        [("a", "b", 0.9), ("b", "c", 0.9), ("a", "c", -0.9)],
        [("a", "b", 0.9), ("b", "c", 0.9)],  # a and c are then uncorrelated, which 0.9 twice forbids
        [("a", "b", 1.0), ("a", "c", 0.5), ("b", "c", 0.4)],
    ],
)
def test_contradictions_are_refused(pairs):
    with pytest.raises(ValueError, match="contradict each other"):
        Copula.of_pairs(pairs)


@pytest.mark.parametrize("pair", [("a", "b", 1.01), ("a", "b", -2.0), ("a", "b", np.nan), ("a", "a", 0.5)])
def test_nonsense_pairs_are_refused(pair):
    with pytest.raises(ValueError, match=f"between {pair[0]} and {pair[1]}"):
        Copula.of_pairs([pair])


@settings(deadline=None, derandomize=True, max_examples=100)
@given(size=st.integers(1, 7), rank=st.integers(1, 7), seed=st.integers(0, 10**6))
def test_root_of_any_correlation_matrix(size, rank, seed):
    # rows of unit length make a correlation matrix of the given rank: singular ones included
    rows = np.random.default_rng(seed).standard_normal((size, rank))
    rows /= np.linalg.norm(rows, axis=1, keepdims=True)
    root = semidefinite_root(rows @ rows.T)
    assert np.array_equal(root, np.tril(root))
    assert root @ root.T == pytest.approx(rows @ rows.T, abs=1e-6)
