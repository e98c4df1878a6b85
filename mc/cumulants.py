"""Sums of independent parts by their cumulants: quadrature over single inputs, and the Cornish-Fisher normal score."""

from collections.abc import Callable, Sequence

import numpy as np
from scipy.special import log_ndtr, ndtri_exp

NODES = 12  # exact for polynomials up to degree 23 in one input

REACH = 8.0  # sigmas up to which the Cornish-Fisher expansion is used


def normal_nodes(count: int = NODES):
    """Nodes and weights for the mean of a function of one standard normal.

    Returns (nodes, weights), each (count,); exact for polynomials up to degree 2 count - 1.
    Source: Gauss-Hermite quadrature, numpy.
    """
    nodes, weights = np.polynomial.hermite_e.hermegauss(count)
    return nodes, weights / weights.sum()


def additive_cumulants(model: Callable[[dict], np.ndarray], names: Sequence[str]):
    """First four cumulants of a model of independent standard normals, from one input at a time.

    model : function of a dictionary of normals; inputs left out are 0; an input given as (NODES, 1) must broadcast
        against whatever else the model holds, for instance (dies,)
    names : the inputs
    Returns cumulants, shape (4, ...) with the model's own shape behind.
    The model is replaced by the sum of its one-input functions, whose cumulants add: exact for additive models, an
    approximation that leaves out interactions otherwise. A brute-force twin in the tests shows what is left out.
    Source: S. Rahman and H. Xu, Probab. Eng. Mech. 19, 393 (2004) (memory): univariate dimension reduction.
    """
    nodes, weights = normal_nodes()
    base = np.asarray(model({}))
    cumulants = np.zeros((4, *base.shape))
    cumulants[0] = base
    for name in names:
        values = model({name: nodes[:, None]}) + np.zeros_like(base)
        mean = weights @ values
        centered = values - mean
        second = weights @ centered**2
        cumulants[0] += mean - base
        cumulants[1] += second
        cumulants[2] += weights @ centered**3
        cumulants[3] += weights @ centered**4 - 3 * second**2
    return cumulants


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
