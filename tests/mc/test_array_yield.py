"""Arrays with spares against scipy's binomial law; defects against their limits."""

import numpy as np
import pytest
from scipy.stats import binom, nbinom

from mc.array_yield import array_failure, defect_yield


@pytest.mark.parametrize("parts, blocks, spares", [(100, 1, 0), (100, 4, 2), (103, 4, 2), (10, 3, 0), (7, 7, 1)])
def test_blocks_with_spares_are_a_product_of_binomials(parts, blocks, spares):
    share = np.array([1e-4, 0.01, 0.2, 0.9])
    sizes = [len(block) for block in np.array_split(np.arange(parts), blocks)]
    expected = 1 - np.prod([binom.cdf(spares, size, share) for size in sizes], axis=0)
    assert array_failure(share, parts, blocks, spares) == pytest.approx(expected, rel=1e-9, abs=1e-14)


def test_a_tiny_failure_of_many_parts_keeps_its_digits():
    # a thousand million parts without spares: K p, to the first order
    assert array_failure(np.array([1e-20]), 10**9)[0] == pytest.approx(1e-11, rel=1e-9, abs=0)


def test_what_surely_fails_and_what_cannot():
    assert array_failure(np.array([0.0, 1.0]), 10, 2, 1).tolist() == [0.0, 1.0]
    assert array_failure(np.array([1.0]), 4, 1, 4).tolist() == [0.0], "a spare for every part"


@pytest.mark.parametrize("mean, clustering", [(0.5, 2.0), (3.0, 0.7)])
def test_clustered_defects(mean, clustering):
    expected = nbinom.pmf(0, clustering, clustering / (clustering + mean))
    assert defect_yield(mean, clustering) == pytest.approx(expected, rel=1e-12)
    assert defect_yield(mean, 1e9) == pytest.approx(np.exp(-mean), rel=1e-6)
