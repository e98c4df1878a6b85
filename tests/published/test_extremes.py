"""Largest of several normals against the list's section 6: quadrature, and Clark's rows through the public runner."""

import numpy as np
import pytest
from scipy import stats
from scipy.integrate import quad
from scipy.special import log_ndtr, ndtr

from mc.correlation import Copula
from mc.cumulants import score_of_largest
from mc.experiment import Experiment, Inputs, LawModel
from mc.intervals import Summary
from mc.laws import Normal
from mc.plan import Plan
from mc.runner import run

FIVE_STANDARD_ERRORS = 2 * stats.norm.cdf(5) - 1


def largest_power_mean(count, power):
    """Mean of a power of the largest of `count` standard normals, over the one normal that drives it."""
    return quad(lambda z: score_of_largest(z, count) ** power * stats.norm.pdf(z), -12, 12, epsabs=1e-10, limit=200)[0]


# Derived (exact mathematics): means to six digits.
@pytest.mark.parametrize(
    "count, printed",
    [
        (2, "0.564190"),
        (3, "0.846284"),
        (4, "1.029375"),
        (5, "1.162964"),
        (6, "1.267206"),
        (10, "1.538753"),
        (20, "1.867475"),
        (100, "2.507594"),
        (1000, "3.241436"),
    ],
)
def test_expected_maximum(count, printed):
    assert f"{largest_power_mean(count, 1):.6f}" == printed


# Derived: standard deviations to six digits.
@pytest.mark.parametrize("count, printed", [(10, "0.586808"), (100, "0.429424")])
def test_spread_of_the_maximum(count, printed):
    variance = largest_power_mean(count, 2) - largest_power_mean(count, 1) ** 2
    assert f"{np.sqrt(variance):.6f}" == printed


# Derived: Phi(w)^count = Phi(z), read in whichever tail holds the digits.
@pytest.mark.parametrize("count", [1, 2, 30, 10_000, 10**8])
def test_both_tails_keep_their_digits(count):
    lower = np.linspace(-30, 0, 61)
    assert count * log_ndtr(score_of_largest(lower, count)) == pytest.approx(log_ndtr(lower), rel=1e-10)
    upper = np.linspace(0.5, 36, 72)
    survival_of_one = -np.expm1(np.log1p(-ndtr(-upper)) / count)
    # d ln Q(w) = -w dw up here: a score to 1e-12 of itself moves the tail's logarithm by w^2 times that
    log_tail = log_ndtr(-score_of_largest(upper, count))
    assert np.all(np.abs(log_tail - np.log(survival_of_one)) < 1e-12 * (40 + upper**2))


def larger(values):
    """The larger of two values."""
    return np.maximum(values["first"], values["second"])


# C. E. Clark, Oper. Res. 9, 145 (1961); values derived from its exact two moments. Second argument of each law: sigma.
@pytest.mark.parametrize(
    "first, second, correlation, mean, variance",
    [
        ((0, 1), (0, 1), 0.0, 0.564190, 0.681690),
        ((0, 1), (0, 1), 0.5, 0.398942, 0.840845),
        ((0, 1), (1, 1), 0.0, 1.199641, 0.760502),
        ((10, 1), (9, 2), 0.25, 10.395593, 1.373526),
    ],
)
def test_clark(first, second, correlation, mean, variance):
    laws = {"first": Normal(mean=first[0], sigma=first[1]), "second": Normal(mean=second[0], sigma=second[1])}
    inputs = Inputs(seed=1961, names=tuple(laws), copula=Copula.of_pairs([("first", "second", correlation)]))
    experiment = Experiment.prepare(LawModel(model=larger, laws=laws), inputs)
    # 4 million samples: five standard errors are 0.2 to 0.3 % of sigma, a fiftieth of what the correlations change
    tally, samples = run(experiment, Plan(samples=2**22, block_size=2**18))
    assert samples == 2**22
    summary = Summary(tally, level=FIVE_STANDARD_ERRORS)
    assert summary.mean().low < mean < summary.mean().high
    assert summary.sigma().low < np.sqrt(variance) < summary.sigma().high
