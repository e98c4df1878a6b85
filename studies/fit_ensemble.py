"""How well the parameters are known: a cluster bootstrap, and a small-sample correction that knows lots from wafers and dies.

The clusters get independent exponential weights (the bootstrap of clusters: A. C. Davison and D. V. Hinkley, Bootstrap Methods
and their Application, 1997, sec. 3.8; A. C. Cameron, J. B. Gelbach, D. L. Miller, Rev. Econ. Stat. 90, 414 (2008); smooth
weights: D. B. Rubin, Ann. Stat. 9, 130 (1981)) and the mean is fitted again. Rows enter by their pseudo-values, the fitted
threshold plus what the soft loss lets through of the residual, so that a draw costs a fit of the cells and no more
(M. Salibian-Barrera and R. H. Zamar, Ann. Stat. 30, 556 (2002), use the same linear part; all from memory).

A few lots are too few clusters to resample. So the draws come from the coarsest level with FEWEST units or more, and each
parameter's draws are then stretched to the standard error and Student's factor of the coarsest level at which its own
influence differs by more than the next finer level explains (nested analysis of variance, pooled where it does not differ).
"""

from dataclasses import dataclass

import numpy as np
from joblib import Parallel, delayed
from scipy import sparse, stats

from studies.fit_mean import SOFT, Problem, covariance, nearby, row_weights

FEWEST = 8
LEAST_UNITS = 4  # of the finest level; with fewer the rows are taken as independent
BLOCK = 50  # draws of one stream
POOLED = 0.4  # probability above which two levels count as one; higher than usual, so that few lots are not overlooked


@dataclass(frozen=True, kw_only=True)
class Ensemble:
    """Draws of the free parameters.

    inner : what is searched, shape (draws, free); error : standard error of each, freedom : its degrees of freedom
    level : whose units were drawn; units : how many there are
    """

    inner: np.ndarray
    error: np.ndarray
    freedom: np.ndarray
    level: str
    units: int


def pseudo_residuals(residual, sigma, weight) -> np.ndarray:
    """What the soft loss lets through of residuals, scaled so that the influence on a least-squares fit is its own [V]."""
    score = residual * row_weights(residual, sigma)
    slope = (1 + (residual / sigma / SOFT) ** 2) ** -1.5
    return score * weight / max(float((slope * weight).sum() / max(weight.sum(), 1e-300)), 1e-3)


def draw(
    problem: Problem, inner, levels, of_row, residual, sigma, weight, *, draws: int, seed: int, jobs: int
) -> Ensemble:
    """The ensemble.

    levels : units of every row by level, coarsest first; residual, sigma [V], weight [1] : of every row
    """
    cells = len(problem.start.cells)
    passed = pseudo_residuals(residual, sigma, weight)
    precision = weight / sigma**2
    total = np.bincount(of_row, precision, cells)
    influence = _influence(problem, inner, of_row, passed * precision, total)
    leverage = _leverage(problem, inner, of_row, precision, total)
    error, freedom = _errors(influence / np.sqrt(1 - leverage)[:, None], levels, precision, len(inner), weight)
    level, codes = _clusters(levels, len(of_row))
    units = int(codes.max()) + 1
    at_cells = problem.cells(inner)
    counts = sparse.csr_matrix((precision, (of_row, codes)), shape=(cells, units))
    sums = sparse.csr_matrix((precision * passed, (of_row, codes)), shape=(cells, units))
    blocks = -(-draws // BLOCK)
    call = delayed(_block)
    made = Parallel(n_jobs=min(jobs, blocks))(
        call(problem, inner, counts, sums, at_cells, seed, block) for block in range(blocks)
    )
    drawn = np.concatenate(made)[:draws]
    spread = drawn.std(axis=0)
    wide = error * stats.t.ppf(0.975, freedom) / stats.norm.ppf(0.975)
    low, high = problem.bounds
    off = np.where(spread > 0, (drawn - drawn.mean(axis=0)) / np.where(spread > 0, spread, 1), 0.0)
    return Ensemble(
        inner=np.clip(inner + off * wide, low, high), error=error, freedom=freedom, level=level, units=units
    )


def _block(problem, inner, counts, sums, at_cells, seed, block) -> np.ndarray:
    stream = np.random.Generator(np.random.SFC64([seed, block]))
    found = np.empty((BLOCK, len(inner)))
    for number in range(BLOCK):
        share = stream.exponential(size=counts.shape[1])
        weight = counts @ share
        target = at_cells + np.divide(sums @ share, weight, out=np.zeros_like(weight), where=weight > 0)
        found[number] = nearby(problem, inner, target, weight)
    return found


def _clusters(levels, rows):
    """The coarsest level with enough units; the finest one, or single rows, when none has."""
    for name, codes in levels.items():
        if codes.max() + 1 >= FEWEST:
            return name, codes
    if levels:
        name, codes = list(levels.items())[-1]
        if codes.max() + 1 >= LEAST_UNITS:
            return name, codes
    return "row", np.arange(rows)


def _influence(problem, inner, of_row, pull, total) -> np.ndarray:
    """What every row adds to every parameter, to first order; shape (rows, free)."""
    lever = problem.jacobian(inner) @ covariance(problem, inner, total)
    return lever[of_row] * pull[:, None]


def _leverage(problem, inner, of_row, precision, total):
    jacobian = problem.jacobian(inner)
    of_cell = np.einsum("ij,jk,ik->i", jacobian, covariance(problem, inner, total), jacobian)
    return np.clip(of_cell[of_row] * precision, 0, 0.95)


def _errors(influence, levels, precision, free, weight):
    """Standard error of every parameter and its degrees of freedom."""
    rows = int((weight > 0).sum())
    chain = [(name, codes) for name, codes in levels.items() if codes.max() >= 1]
    squares = []  # for each level, coarsest first: variance of the estimate as that level sees it, and its freedom
    parents = np.zeros(len(influence), int)
    for _, codes in chain:
        units = int(codes.max()) + 1
        freedom = units - (int(parents.max()) + 1)
        if freedom > 0:
            squares.append((_between(influence, codes, parents, precision) * units / freedom, freedom))
            parents = codes
    left = rows - free - (int(parents.max()) + 1 if squares else 0)
    if left > 0 and parents.max() + 1 < LEAST_UNITS:  # what the rows of a die share makes them no units of their own
        squares = [((influence**2).sum(axis=0), left)]
    error, degrees = np.empty(influence.shape[1]), np.empty(influence.shape[1])
    for place in range(influence.shape[1]):
        variance, freedom = squares[0][0][place], squares[0][1]
        for finer, more in squares[1:]:
            if stats.f.sf(variance / max(finer[place], 1e-300), freedom, more) < POOLED:
                break
            variance = (freedom * variance + more * finer[place]) / (freedom + more)
            freedom += more
        error[place], degrees[place] = np.sqrt(variance), freedom
    return error, degrees


def _between(influence, codes, parents, precision) -> np.ndarray:
    """Sum of squares of the units' influences about their share of their parent's."""
    units = int(codes.max()) + 1
    sums = np.column_stack([np.bincount(codes, column, units) for column in influence.T])
    above = np.zeros(units, int)
    above[codes] = parents
    mass = np.bincount(codes, precision, units)
    whole = np.bincount(above, mass)
    share = mass / np.where(whole > 0, whole, 1)[above]
    totals = np.column_stack([np.bincount(above, column) for column in sums.T])
    return ((sums - share[:, None] * totals[above]) ** 2).sum(axis=0)
