"""Cornish-Fisher scores against exact sums of gammas, and the score of the largest of many.

A sum of 20 gammas is a gamma, so its normal scores are known exactly. Errors below are measured, rounded up, and given
for skews that 20 parts of shape 1, 4 and 10 leave.
"""

import numpy as np
import pytest
from scipy import stats
from scipy.special import log_ndtr

from mc.cumulants import score_from_value, score_of_largest, value_from_score

PARTS = 20


def gamma_sum(shape):
    """Skew and excess of a sum of 20 gammas, and its exact standardised values at the scores -5 to 5."""
    total = stats.gamma(PARTS * shape)
    scores = np.linspace(-5, 5, 201)
    lower, upper = total.ppf(stats.norm.cdf(scores)), total.isf(stats.norm.sf(scores))
    values = (np.where(scores < 0, lower, upper) - total.mean()) / total.std()
    return 2 / np.sqrt(PARTS * shape), 6 / (PARTS * shape), scores, values


# largest error within 3 and within 5 sigma: of the value at a score, and of the score at a value
MEASURED = [
    (1.0, (0.0046, 0.032), (0.0083, 0.096)),
    (4.0, (0.00054, 0.0038), (0.00072, 0.0061)),
    (10.0, (0.00014, 0.00093), (0.00016, 0.0013)),
]


@pytest.mark.parametrize("shape, value_errors, score_errors", MEASURED)
def test_against_exact_gamma_sums(shape, value_errors, score_errors):
    skew, excess, scores, values = gamma_sum(shape)
    value_error = np.abs(value_from_score(scores, skew, excess) - values)
    score_error = np.abs(score_from_value(values, skew, excess) - scores)
    for reach, value_limit, score_limit in zip((3, 5), value_errors, score_errors):
        near = np.abs(scores) <= reach
        assert 0.9 * value_limit < value_error[near].max() < value_limit
        assert 0.9 * score_limit < score_error[near].max() < score_limit


def test_better_than_a_normal_law():
    skew, excess, scores, values = gamma_sum(4.0)
    for reach in (3, 5):
        near = np.abs(scores) <= reach
        plain = np.abs(values - scores)[near].max()
        assert np.abs(value_from_score(scores, skew, excess) - values)[near].max() < plain / 50
        assert np.abs(score_from_value(values, skew, excess) - scores)[near].max() < plain / 4


@pytest.mark.parametrize("expand, given", [(value_from_score, "scores"), (score_from_value, "values")])
def test_error_falls_with_the_cube_of_the_skew(expand, given):
    # terms of skew and skew^2 are kept, so four times the parts, half the skew, leave an eighth
    errors = []
    for shape in (10.0, 40.0, 160.0):
        skew, excess, scores, values = gamma_sum(shape)
        places, exact = (scores, values) if given == "scores" else (values, scores)
        errors.append(np.abs(expand(places, skew, excess) - exact)[np.abs(scores) <= 3].max())
    for coarse, fine in zip(errors, errors[1:]):
        assert 7.5 < coarse / fine < 9


@pytest.mark.parametrize("skew", [-0.3, 0.025, 0.1, 0.3])
def test_inverse_of_each_other(skew):
    # to the last digits where the expansion is used, and beyond, where its correction stays constant
    scores = np.linspace(-12, 12, 241)
    there = value_from_score(scores, skew, 1.5 * skew**2)
    assert score_from_value(there, skew, 1.5 * skew**2) == pytest.approx(scores, rel=1e-12, abs=1e-12)


def test_normal_without_skew_and_excess():
    places = np.linspace(-8, 8, 33)
    assert np.array_equal(score_from_value(places, 0.0, 0.0), places)
    assert np.array_equal(value_from_score(places, 0.0, 0.0), places)


def test_mirrored_skew_mirrors_the_scores():
    places = np.linspace(-4, 4, 33)
    for expand in (score_from_value, value_from_score):
        assert expand(-places, -0.3, 0.1) == pytest.approx(-expand(places, 0.3, 0.1), rel=1e-12, abs=1e-12)


@pytest.mark.parametrize("skew", [0.05, 0.2, 0.45])
def test_monotone_out_to_five_sigma_for_gamma_sums(skew):
    places = np.linspace(-4, 8, 1001)
    assert np.all(np.diff(score_from_value(places, skew, 1.5 * skew**2)) > 0)
    assert np.all(np.diff(value_from_score(np.linspace(-5, 5, 1001), skew, 1.5 * skew**2)) > 0)


def test_largest_of_one_is_itself():
    normals = np.linspace(-30, 36, 133)
    assert score_of_largest(normals, 1) == pytest.approx(normals, rel=1e-12, abs=1e-15)


@pytest.mark.parametrize("count", [2, 17, 1000])
def test_largest_against_its_own_law(count):
    normals = np.linspace(-6, 6, 49)
    largest = score_of_largest(normals, count)
    assert count * log_ndtr(largest) == pytest.approx(log_ndtr(normals), rel=1e-12)
    assert np.all(np.diff(largest) > 0)


def test_largest_against_sampled_maxima():
    random = np.random.default_rng(4)
    maxima = random.standard_normal((20_000, 50)).max(axis=1)
    driven = score_of_largest(random.standard_normal(20_000), 50)
    # two samples of one law: a p-value below 1e-6 is as rare as five standard errors
    assert stats.ks_2samp(maxima, driven).pvalue > 1e-6


def test_largest_grows_with_the_count():
    scores = [float(score_of_largest(0.3, count)) for count in (1, 2, 10, 10**4, 10**9)]
    assert np.all(np.diff(scores) > 0)
