"""Intervals against scipy and statsmodels, and against what they mean. Coverage has a file of its own."""

import numpy as np
import pytest
from scipy import stats
from statsmodels.stats.proportion import proportion_confint
from statsmodels.stats.weightstats import DescrStatsW

from mc.intervals import (
    Estimate,
    Summary,
    bounded_mean,
    fraction_exact,
    fraction_wilson,
    mean_interval,
    quantile_ranks,
    sigma_chi_square,
    sigma_kurtosis_aware,
    skew_interval,
)
from mc.tally import Grid, Tally

FRACTIONS = [(0, 1), (1, 1), (0, 50), (50, 50), (1, 50), (4, 20), (37, 200), (5, 10**6), (999_999, 10**6)]
LEVELS = [0.5, 0.95, 0.999]


@pytest.mark.parametrize("successes, n", FRACTIONS)
@pytest.mark.parametrize("level", LEVELS)
@pytest.mark.parametrize(
    "make, scipy_name, statsmodels_name", [(fraction_exact, "exact", "beta"), (fraction_wilson, "wilson", "wilson")]
)
def test_fractions(make, scipy_name, statsmodels_name, successes, n, level):
    ours = make(successes, n, level)
    twin = stats.binomtest(successes, n).proportion_ci(level, scipy_name)
    # scipy searches for its exact limits with brentq, whose absolute tolerance is 2e-12
    assert (ours.low, ours.high) == pytest.approx((twin.low, twin.high), rel=1e-9, abs=4e-12)
    others = proportion_confint(successes, n, 1 - level, method=statsmodels_name)
    assert (ours.low, ours.high) == pytest.approx(others, rel=1e-9, abs=1e-15)
    assert (ours.value, ours.level, ours.n) == (successes / n, level, n)


@pytest.mark.parametrize("successes, n", [(0, 1), (0, 50), (1, 50), (4, 100), (37, 2000), (5, 1_000_000)])
def test_bounded_mean_of_rare_yes_and_no_is_nearly_the_exact_binomial(successes, n):
    # for rare yeses the gamma law is the Poisson limit of the exact interval, wider by no more than a few percent
    ours, exact = bounded_mean(successes, successes, n), fraction_exact(successes, n)
    assert ours.value == exact.value
    assert exact.high * 0.99 < ours.high < max(exact.high * 1.06, 1.0)
    assert exact.low * 0.9 <= ours.low <= exact.low * 1.06


@pytest.mark.parametrize("center", [0.0, -2.0])
def test_bounded_mean_is_narrower_for_smooth_values(center):
    values = stats.norm.cdf(center + np.random.default_rng(5).standard_normal(4000))
    smooth = bounded_mean(values.sum(), (values**2).sum(), 4000)
    binomial = fraction_exact(values.sum(), 4000)
    assert smooth.value == pytest.approx(values.mean(), rel=1e-12)
    assert binomial.low < smooth.low < smooth.value < smooth.high < binomial.high
    # far from the ends and for many samples it is the normal interval of a mean, and one value of 1 above
    half = 1.959964 * values.std(ddof=1) / np.sqrt(4000)
    assert smooth.value - smooth.low == pytest.approx(half, rel=0.04)
    assert smooth.high - smooth.value == pytest.approx(half + 1 / 4000, rel=0.06)


def test_a_rare_loss_that_no_sample_met_is_allowed_for():
    # three and a bit over n: what no event in n trials bounds at 97.5 %
    assert bounded_mean(1e-9, 1e-12, 1000).high == pytest.approx(3.689e-3, rel=1e-3)


@pytest.mark.parametrize("constant", [0.0, 1e-300, 1e-12, 0.1, 0.3, 0.7, 1.0])
def test_bounded_mean_of_values_that_do_not_vary(constant):
    # the variance is then 0, or what rounding makes of it: neither may give NaN or leave the value outside
    values = np.full(10_000, constant)
    interval = bounded_mean(values.sum(), (values * values).sum(), 10_000)
    assert 0 <= interval.low <= interval.value <= interval.high <= 1


@pytest.mark.parametrize("n", [2, 10, 1000])
def test_mean(n):
    sample = np.random.default_rng(n).gamma(2.0, size=n)
    ours = mean_interval(sample.mean(), sample.var(ddof=1), n, level=0.9)
    assert (ours.low, ours.high) == pytest.approx(DescrStatsW(sample).tconfint_mean(alpha=0.1), rel=1e-9)


def test_one_sample_sets_no_bound_on_the_mean():
    assert (mean_interval(3.0, 0.0, 1).low, mean_interval(3.0, 0.0, 1).high) == (-np.inf, np.inf)


@pytest.mark.parametrize("n", [2, 10, 1000])
def test_sigma_of_normal_values_by_its_definition(n):
    interval = sigma_chi_square(2.0, n, level=0.9)
    # at either end a sample variance of 2 lies at the 5 % point of its law
    assert stats.chi2.sf((n - 1) * 2.0 / interval.low**2, n - 1) == pytest.approx(0.05, rel=1e-9)
    assert stats.chi2.cdf((n - 1) * 2.0 / interval.high**2, n - 1) == pytest.approx(0.05, rel=1e-9)


@pytest.mark.parametrize("kurtosis", [1.8, 3.0, 9.0])
def test_kurtosis_aware_sigma_tends_to_the_delta_method(kurtosis):
    # relative error of a sigma is sqrt((kurtosis - 1)/(4 n)); what is left falls as 1/n, hence the tolerance
    n = 10**6
    interval = sigma_kurtosis_aware(4.0, kurtosis, n)
    half = 1.959964 * np.sqrt((kurtosis - 1) / (4 * n))
    assert np.log(interval.high / interval.low) / 2 == pytest.approx(half, rel=10 / n)
    assert interval.value == 2.0


def test_kurtosis_aware_sigma_is_the_chi_square_one_for_normal_values():
    aware, chi_square = sigma_kurtosis_aware(1.0, 3.0, 10_000), sigma_chi_square(1.0, 10_000)
    assert (aware.low, aware.high) == pytest.approx((chi_square.low, chi_square.high), rel=1e-3)


@pytest.mark.parametrize("n", [4, 20, 400])
def test_kurtosis_aware_sigma_holds_its_value_for_the_flattest_law(n):
    # half of the values at either of two places: kurtosis 1, the least there is
    interval = sigma_kurtosis_aware(1.0, 1.0, n)
    assert interval.low < interval.value < interval.high


@pytest.mark.parametrize("n", [20, 1000, 20_000, 10**7])
@pytest.mark.parametrize("probability", [0.001, 0.1, 0.5, 0.999])
@pytest.mark.parametrize("level", [0.9, 0.95])
def test_quantile_ranks_are_the_tightest_that_keep_both_tails(n, probability, level):
    low, high = quantile_ranks(probability, n, level)
    tail = (1 - level) / 2
    below = stats.binom(n, probability)
    # order statistic r lies above the quantile when fewer than r samples lie below it
    assert below.cdf(low - 1) <= tail < below.cdf(low)
    assert below.sf(high - 1) <= tail < below.sf(high - 2)
    # the same by the law of a uniform order statistic, beta(r, n - r + 1)
    if low >= 1:
        assert stats.beta.sf(probability, low, n - low + 1) <= tail
    if high <= n:
        assert stats.beta.cdf(probability, high, n - high + 1) <= tail


def test_quantile_ranks_by_counting():
    # median of 5: 0 to 5 of the samples lie below it with probabilities 1, 5, 10, 10, 5, 1 in 32
    assert quantile_ranks(0.5, 5, level=0.90) == (1, 5)
    assert quantile_ranks(0.5, 5, level=0.95) == (0, 6)


@pytest.mark.parametrize("probability, bounded", [(0.999, (True, False)), (0.5, (True, True)), (0.001, (False, True))])
def test_too_few_samples_set_no_bound(probability, bounded):
    values = np.random.default_rng(1).standard_normal((1, 200))
    quantile = Summary(Tally.of(Grid.from_pilot(values), [values])).quantile(probability)
    assert (np.isfinite(quantile.low), np.isfinite(quantile.high)) == bounded


def test_skew_of_three_values():
    # n = 3: variance 6 * 3 * 2 / (1 * 4 * 6) = 1.5
    interval = skew_interval(0.2, 3)
    assert (interval.high - interval.low) / 2 == pytest.approx(1.959964 * np.sqrt(1.5), rel=1e-6)


def test_summary_hands_on_its_level_and_output():
    values = np.random.default_rng(1).standard_normal((2, 500)) * [[1.0], [100.0]]
    summary = Summary(Tally.of(Grid.from_pilot(values), [values]), 1, level=0.5)
    for estimate in (summary.mean(), summary.sigma(), summary.skew(), summary.quantile(0.4)):
        assert (estimate.level, estimate.n) == (0.5, 500)
        assert estimate.low <= estimate.value <= estimate.high
        assert estimate.method
    assert summary.sigma().value == pytest.approx(values[1].std(ddof=1), rel=1e-9)


def test_an_estimate_in_another_unit():
    estimate = Estimate(value=0.1, low=0.05, high=np.inf, level=0.9, n=7, method="by hand").scaled(1e3)
    assert estimate == Estimate(value=100.0, low=50.0, high=np.inf, level=0.9, n=7, method="by hand")
    with pytest.raises(AttributeError):
        estimate.value = 0.0
