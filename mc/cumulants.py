"""Sums of independent parts by their cumulants: quadrature over single inputs, and the Cornish-Fisher normal score."""

from collections.abc import Callable, Sequence
from functools import cache

import numpy as np
from scipy.special import log_ndtr, ndtri_exp

NODES = 12  # exact for polynomials up to degree 23 in one input

REACH = 8.0  # sigmas up to which the Cornish-Fisher expansion is used


@cache
def normal_nodes(count: int = NODES):
    """Nodes and weights for the mean of a function of one standard normal.

    Returns (nodes, weights), each (count,); exact for polynomials up to degree 2 count - 1.
    Source: Gauss-Hermite quadrature, numpy.
    """
    nodes, weights = np.polynomial.hermite_e.hermegauss(count)
    return nodes, weights / weights.sum()


def product_cumulants(model: Callable[[dict], np.ndarray], names: Sequence[str]):
    """First four cumulants of a positive model of independent standard normals, from one input at a time.

    model : positive function of a dictionary of normals; inputs left out are 0; an input given as (NODES, 1) must
        broadcast against whatever else the model holds, for instance (dies,)
    names : the inputs
    Returns cumulants, shape (4, ...) with the model's own shape behind.
    The model is replaced by its value at 0 times one factor per input, whose raw moments multiply: exact when the
    logarithm is additive, an approximation otherwise; `interaction_factors` says by how much it misses.
    Source: X. Zhang and M. D. Pandey, Struct. Saf. 43, 28 (2013) (from memory): multiplicative dimension reduction.
    """
    nodes, weights = normal_nodes()
    base = np.asarray(model({}))
    moments = np.ones((4, *base.shape))
    for name in names:
        factor = np.broadcast_to(model({name: nodes[:, None]}), (nodes.size, *base.shape)) / base
        power = factor
        for moment in moments:
            moment *= _weighted(weights, power)
            power = power * factor
    return _scaled(_cumulants_of_moments(moments), base)


def interaction_factors(model: Callable[[dict], np.ndarray], draws):
    """Cumulants of a model over those of its product form, both on the same draws.

    model : as in `product_cumulants`, with the shape of the draws
    draws : standard normals by input name, each (n,)
    Returns factors on the four cumulants, shape (4,). The draws are shared, so their error is far below that of a
    cumulant itself.
    """
    base = model({})
    product = base * np.prod([model({name: normal}) / base for name, normal in draws.items()], axis=0)
    return _sample_cumulants(model(draws) / base) / _sample_cumulants(product / base)


def _sample_cumulants(values):
    mean = values.mean()
    centered = values - mean
    second = (centered**2).mean()
    return np.array([mean, second, (centered**3).mean(), (centered**4).mean() - 3 * second**2])


def _cumulants_of_moments(moments):
    """Cumulants from raw moments of a ratio near one, so that little cancels."""
    mean, second, third, fourth = moments
    variance = second - mean**2
    fourth_central = fourth - 4 * third * mean + 6 * second * mean**2 - 3 * mean**4
    return np.array([mean, variance, third - 3 * mean * second + 2 * mean**3, fourth_central - 3 * variance**2])


def _scaled(cumulants, scale):
    return np.array([cumulant * scale**order for order, cumulant in enumerate(cumulants, start=1)])


def _weighted(weights, values):
    """Weighted sum over the first axis, in a fixed order whatever linear-algebra library is there."""
    return np.einsum("k,k...->...", weights, values)


def standardise(cumulants):
    """Mean, sigma, skewness and excess kurtosis from four cumulants of shape (4, ...)."""
    mean, variance, third, fourth = cumulants
    return mean, np.sqrt(variance), third / variance**1.5, fourth / variance**2


def score_from_value(standard, skew, excess):
    """Normal score of a standardised value: the w with P(X <= x) = Phi(w).

    standard : (x - mean)/sigma; skew, excess : of X; any shapes that broadcast
    Range: skew well below 1, as for a sum of several parts; monotone there. Beyond REACH sigmas the correction stays what
    it is at REACH, since the expansion's powers would take over and turn the probability back.
    Source: E. A. Cornish and R. A. Fisher, Rev. Inst. Int. Stat. 5, 307 (1937); M. Abramowitz and I. A. Stegun, 26.2.49
    inverted (memory).
    """
    near = np.clip(standard, -REACH, REACH)
    square = near**2
    first = skew / 6 * (square - 1)
    second = near * (excess / 24 * (square - 3) - skew**2 / 36 * (4 * square - 7))
    return standard - first - second


def value_from_score(score, skew, excess):
    """Standardised value at a normal score, the expansion in the other direction.

    Source: Cornish and Fisher 1937; Abramowitz and Stegun 26.2.49 (memory).
    """
    square = score**2
    first = skew / 6 * (square - 1)
    second = score * (excess / 24 * (square - 3) - skew**2 / 36 * (2 * square - 5))
    return score + first + second


def score_of_largest(normal, count: int):
    """Normal score of the largest of `count` independent values, at the probability of one standard normal.

    normal : standard normal, any shape
    count : how many, >= 1
    Returns w with Phi(w)^count = Phi(normal).
    Source: law of the maximum; in logarithms, so that neither tail loses digits.
    """
    log_each = log_ndtr(normal) / count
    # past one half the survival probability carries the digits: log(1 - exp(log_each))
    upper = -ndtri_exp(np.log(-np.expm1(np.minimum(log_each, -1e-300))))
    return np.where(log_each > -np.log(2), upper, ndtri_exp(log_each))
