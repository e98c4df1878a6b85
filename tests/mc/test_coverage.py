"""Coverage: over 1000 repeats a 95 % interval holds the truth 950 times, give or take four standard errors of 6.9 each.

The bounds asked for are tighter, 930 to 970. Seeds are fixed, so these either pass or show a fault.
"""

import numpy as np
import pytest
from scipy import stats

from mc.intervals import (
    Summary,
    bounded_mean,
    fraction_exact,
    fraction_wilson,
    sigma_chi_square,
)
from mc.tally import Grid, Moments, Tally

REPEATS = 1000

NORMAL = stats.norm(3.0, 0.5)
# Sums of exponential parts, skew 0.5 and 1.0, excess kurtosis 0.375 and 1.5: like counted dopants, though simpler.
MILD = stats.gamma(16.0)
SKEWED = stats.gamma(4.0)
EXPONENTIAL = stats.expon()


def coverage(law, n, estimate, truth, tally=Moments):
    """Share of repeats in which `estimate`, a function of a Summary of n samples, holds the truth."""
    random = np.random.default_rng(95)
    grid = Grid.from_pilot(law.rvs((1, 4096), random))
    held = 0
    for _ in range(REPEATS):
        interval = estimate(Summary(tally.of(grid, [law.rvs((1, n), random)])))
        held += interval.low <= truth <= interval.high
    return held / REPEATS


def assert_nominal(share):
    assert 0.93 <= share <= 0.97, share


@pytest.mark.parametrize("law, n", [(NORMAL, 5), (NORMAL, 200), (SKEWED, 500), (EXPONENTIAL, 1000)])
def test_mean(law, n):
    # skew moves a Student interval's coverage by about skew^2/n: nothing for the n chosen
    assert_nominal(coverage(law, n, Summary.mean, law.mean()))


@pytest.mark.parametrize("n", [3, 20, 400])
def test_sigma_chi_square(n):
    assert_nominal(coverage(NORMAL, n, lambda summary: sigma_chi_square(summary.variance, summary.n), NORMAL.std()))


def test_sigma_chi_square_is_not_for_heavy_tails():
    # why Summary.sigma is kurtosis-aware: excess kurtosis 6 widens the true interval by sqrt(1 + 6/2) = 2
    share = coverage(EXPONENTIAL, 2000, lambda summary: sigma_chi_square(summary.variance, summary.n), 1.0)
    expected = 2 * stats.norm.cdf(1.96 / 2) - 1
    assert abs(share - expected) < 5 * np.sqrt(expected * (1 - expected) / REPEATS)


@pytest.mark.parametrize("law, n", [(NORMAL, 400), (MILD, 2000), (SKEWED, 2000), (EXPONENTIAL, 5000)])
def test_sigma_kurtosis_aware(law, n):
    assert_nominal(coverage(law, n, Summary.sigma, law.std()))


def test_skew_of_normal_values():
    assert_nominal(coverage(NORMAL, 500, Summary.skew, 0.0))


@pytest.mark.parametrize("law, probability", [(NORMAL, 0.999), (SKEWED, 0.999), (NORMAL, 0.001), (SKEWED, 0.5)])
def test_quantile(law, probability):
    # ranks are whole, so the nominal coverage is a little above 95 %: at n = 20 000 and 0.1 %, 96 %
    share = coverage(law, 20_000, lambda summary: summary.quantile(probability), law.ppf(probability), tally=Tally)
    assert_nominal(share)


def fraction_coverage(make, p, n):
    """Exact coverage of a fraction's interval: the probability of every count whose interval holds p."""
    intervals = [make(successes, n) for successes in range(n + 1)]
    held = np.array([interval.low <= p <= interval.high for interval in intervals])
    return stats.binom.pmf(np.arange(n + 1), n, p) @ held


@pytest.mark.parametrize("p, n", [(0.5, 10), (0.1, 20), (0.01, 100), (0.3, 37), (0.97, 400), (0.2, 500)])
def test_the_exact_fraction_never_covers_less_than_it_says(p, n):
    assert fraction_coverage(fraction_exact, p, n) >= 0.95


@pytest.mark.parametrize("make", [fraction_exact, fraction_wilson])
@pytest.mark.parametrize("p, n", [(0.2, 500), (0.9, 600)])
def test_fractions(make, p, n):
    # Counts are whole, so coverage jumps about with p and n; here n p (1 - p) is large enough for both methods to lie
    # inside the band by enumeration, and the sampled repeats must agree with the enumeration.
    exact = fraction_coverage(make, p, n)
    assert_nominal(exact)
    successes = np.random.default_rng(17).binomial(n, p, REPEATS)
    share = np.mean([interval.low <= p <= interval.high for interval in (make(int(count), n) for count in successes)])
    assert_nominal(share)
    assert abs(share - exact) < 5 * np.sqrt(exact * (1 - exact) / REPEATS)


@pytest.mark.parametrize("center, spread, n", [(0.0, 1.0, 30), (-2.0, 1.0, 300), (-4.0, 2.0, 300), (-4.0, 1.0, 10**4)])
def test_bounded_mean_of_smooth_values(center, spread, n):
    # Probit-normal values, mean Phi(center/sqrt(1 + spread^2)). Those of the last row have a skew of 16, and their
    # sample variance is mostly too small before some thousands; the supposed value of 1 makes up for it, and more.
    truth = stats.norm.cdf(center / np.hypot(1, spread))
    random = np.random.default_rng(23)
    held = 0
    for _ in range(REPEATS):
        values = stats.norm.cdf(center + spread * random.standard_normal(n))
        interval = bounded_mean(values.sum(), values @ values, n)
        held += interval.low <= truth <= interval.high
    # conservative, since it allows for one value that was not met; among 30 that one weighs much
    assert 0.94 <= held / REPEATS <= (0.99 if n > 100 else 1)
