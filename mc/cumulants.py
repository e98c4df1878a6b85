"""Sums of independent parts by their cumulants: quadrature over single inputs, and the Cornish-Fisher normal score."""

from collections.abc import Callable, Sequence
from functools import cache
from typing import NamedTuple

import numpy as np
from scipy.special import log_ndtr, ndtri_exp

NODES = 12  # exact for polynomials up to degree 23 in one input

REACH = 8.0  # sigmas up to which the Cornish-Fisher expansion is used
NEWTON_STEPS = 5
LEAST_SLOPE = 0.1  # keeps a step finite where the expansion is no longer increasing


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
    logarithm is additive, an approximation otherwise; `measured_interaction` says by how much it misses.
    Source: X. Zhang and M. D. Pandey, Struct. Saf. 43, 28 (2013) (from memory): multiplicative dimension reduction.
    """
    nodes, weights = normal_nodes()
    base = np.asarray(model({}))
    mean, second, third, fourth = base.astype(float), *np.zeros((3, *base.shape))
    for name in names:
        values = np.asarray(model({name: nodes.reshape(-1, *[1] * max(base.ndim, 1))}))
        factor = np.broadcast_to(values, (nodes.size, *base.shape)) if base.ndim else values.reshape(-1)
        average = _weighted(weights, factor)
        deviation = (factor - average) / average
        squared = deviation * deviation
        others = [_weighted(weights, power) for power in (squared, squared * deviation, squared * squared)]
        second, third, fourth = _moments_of_product((second, third, fourth), others)
        mean = mean * (average / base)
    return np.array([mean, mean**2 * second, mean**3 * third, mean**4 * (fourth - 3 * second**2)])


def _moments_of_product(one, other):
    """Central moments 2 to 4 of (1 + x)(1 + y) from those of independent x and y of mean 0; nothing cancels."""
    (a2, a3, a4), (b2, b3, b4) = one, other
    return (
        a2 + b2 + a2 * b2,
        a3 + b3 + 6 * a2 * b2 + 3 * a3 * b2 + 3 * a2 * b3 + a3 * b3,
        a4 * (1 + 6 * b2 + 4 * b3 + b4) + 4 * a3 * (3 * b2 + 3 * b3 + b4) + 6 * a2 * (b2 + 2 * b3 + b4) + b4,
    )


class Interaction(NamedTuple):
    """By how much a model's cumulants differ from those of its product form.

    mean, variance : factors [1]; skew, excess : shifts of the skewness and of the excess kurtosis [1]
    """

    mean: float = 1.0
    variance: float = 1.0
    skew: float = 0.0
    excess: float = 0.0

    def applied(self, cumulants):
        """Cumulants of shape (4, ...) of a product form, corrected."""
        mean, variance, third, fourth = cumulants
        return np.array(
            [
                self.mean * mean,
                self.variance * variance,
                self.variance**1.5 * (third + self.skew * variance**1.5),
                self.variance**2 * (fourth + self.excess * variance**2),
            ]
        )


def measured_interaction(model: Callable[[dict], np.ndarray], draws) -> Interaction:
    """How a model departs from its product form, both on the same draws.

    model : as in `product_cumulants`, with the shape of the draws
    draws : standard normals by input name, each (n,)
    The draws are shared, so the error is far below that of a cumulant itself.
    """
    base = model({})
    product = np.prod([model({name: normal}) / base for name, normal in draws.items()], axis=0)
    whole = model(draws) / base
    if np.ptp(whole) == 0:
        return Interaction()
    mean, sigma, skew, excess = standardise(_sample_cumulants(whole))
    alone_mean, alone_sigma, alone_skew, alone_excess = standardise(_sample_cumulants(product))
    return Interaction(mean / alone_mean, (sigma / alone_sigma) ** 2, skew - alone_skew, excess - alone_excess)


def _sample_cumulants(values):
    mean = values.mean()
    centered = values - mean
    second = (centered**2).mean()
    return np.array([mean, second, (centered**3).mean(), (centered**4).mean() - 3 * second**2])


def _weighted(weights, values):
    """Weighted sum over the first axis, in a fixed order whatever linear-algebra library is there."""
    return np.einsum("k,k...->...", weights, values)


def standardise(cumulants):
    """Mean, sigma, skewness and excess kurtosis from four cumulants of shape (4, ...)."""
    mean, variance, third, fourth = cumulants
    sigma = np.sqrt(variance)
    return mean, sigma, third / (variance * sigma), fourth / (variance * variance)


def value_from_score(score, skew, excess):
    """Standardised value at a normal score: the x with P(X <= x) = Phi(score).

    score : normal score; skew, excess : of X; any shapes that broadcast
    Range: skew well below 1, as for a sum of several parts; increasing there. Beyond REACH the correction stays what it
    is at REACH, since the expansion's powers would take over.
    Source: E. A. Cornish and R. A. Fisher, Rev. Inst. Int. Stat. 5, 307 (1937); M. Abramowitz and I. A. Stegun, 26.2.49
    (memory).
    """
    near = np.clip(score, -REACH, REACH)
    square = near * near
    return score + skew / 6 * (square - 1) + near * (excess / 24 * (square - 3) - skew**2 / 36 * (2 * square - 5))


def score_from_value(standard, skew, excess):
    """Normal score of a standardised value, the inverse of `value_from_score` by Newton's method.

    standard : (x - mean)/sigma; skew, excess : of X; any shapes that broadcast
    Inverting is some thirty times more accurate than the expansion in the other direction, and never turns back.
    Source: as `value_from_score`.
    """
    score = standard - skew / 6 * (np.clip(standard, -REACH, REACH) ** 2 - 1)
    for _ in range(NEWTON_STEPS):
        near = np.clip(score, -REACH, REACH)
        square = near * near
        slope = 1 + skew / 3 * near + excess / 8 * (square - 1) - skew**2 / 36 * (6 * square - 5)
        slope = np.where(near == score, np.maximum(slope, LEAST_SLOPE), 1)
        score = score - (value_from_score(score, skew, excess) - standard) / slope
    return score


def score_of_largest(normal, count: int):
    """Normal score of the largest of `count` independent values, at the probability of one standard normal.

    normal : standard normal, any shape
    count : how many, >= 1
    Returns w with Phi(w)^count = Phi(normal).
    Source: law of the maximum; in logarithms, so that neither tail loses digits.
    """
    return ndtri_exp(np.minimum(log_ndtr(normal) / count, -1e-300))
