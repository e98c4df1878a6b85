"""Variance components of nested levels by restricted maximum likelihood, for residuals whose local variance has a known form.

A value is fixed effects (linearised), plus one normal deviation for each level's unit, plus local scatter of variance
(known + sum of sizes times known shapes)/count. Nested levels are swept one after the other, from the finest to the
coarsest, so the cost grows with the number of values and nothing of their square is ever made.
Source: H. D. Patterson and R. Thompson, Biometrika 58, 545 (1971) (from memory); the sweep is the matrix inversion lemma, level by level.
"""

from dataclasses import dataclass, field

import numpy as np
from scipy import stats
from scipy.optimize import minimize

from mc.intervals import Estimate

SMALLEST = 1e-6  # of the values' variance: where a component counts as none
LARGEST = 1e3
HALVED = 0.01  # of a logarithm: how finely an interval's ends are found
SHARP = 0.2  # error of a component's logarithm below which its likelihood is normal in the logarithm


@dataclass(frozen=True, kw_only=True)
class Nested:
    """Values to be split into components.

    residuals : values less their fitted mean, shape (values,)
    fixed : derivatives of the mean by its parameters, shape (values, parameters); may have no column
    levels : for each level, coarsest first, the unit of every value as a whole number from 0; nested
    known : local variance that is known, shape (values,)
    shapes : for each local component what its size is multiplied by, each of shape (values,)
    differences : further values that no level and no fixed effect enters, for instance differences of pairs, or None
    difference_known, difference_shapes : theirs
    """

    residuals: np.ndarray
    fixed: np.ndarray
    levels: tuple[np.ndarray, ...]
    known: np.ndarray
    shapes: tuple[np.ndarray, ...]
    differences: np.ndarray | None = None
    difference_known: np.ndarray | None = None
    difference_shapes: tuple[np.ndarray, ...] = ()


@dataclass(frozen=True, kw_only=True)
class Components:
    """Fitted components.

    levels : variances of the levels, coarsest first, as estimates
    local : sizes of the local components, as estimates
    """

    levels: tuple[Estimate, ...]
    local: tuple[Estimate, ...] = field(default_factory=tuple)


class Restricted:
    """Twice the negative restricted log-likelihood of nested values, as a function of all sizes."""

    def __init__(self, values: Nested):
        order = np.lexsort(values.levels[::-1]) if values.levels else np.arange(len(values.residuals))
        self._known, self._shapes = values.known[order], [shape[order] for shape in values.shapes]
        columns = [np.ones(len(order)), *values.fixed[order].T, values.residuals[order]]
        self._columns = np.column_stack(columns)
        self._starts = self._nesting([codes[order] for codes in values.levels])
        self._values = values
        self._kept: tuple = (None, None, None)

    @staticmethod
    def _nesting(levels):
        """For each level, finest first, where its units begin among the units of the next finer one, or among the rows."""
        starts, below = [], None
        for codes in levels[::-1]:
            first = np.flatnonzero(np.diff(codes, prepend=codes[0] - 1))  # sorted: every unit is one run
            starts.append(first if below is None else np.searchsorted(below, first))
            below = first
        return starts

    def _local(self, sizes):
        """Log determinant of the local part, and the products of the columns summed over each of the finest units."""
        key = tuple(sizes)
        if self._kept[0] == key:
            return self._kept[1:]
        variance = self._known + sum((size * shape for size, shape in zip(sizes, self._shapes)), 0.0)
        variance = np.maximum(variance, 1e-300)
        first = self._starts[0] if self._starts else np.zeros(1, int)
        count = self._columns.shape[1]
        matrix = np.empty((len(first), count, count))
        for a in range(count):
            scaled = self._columns[:, a] / variance
            for b in range(a, count):
                matrix[:, a, b] = matrix[:, b, a] = np.add.reduceat(scaled * self._columns[:, b], first)
        self._kept = key, float(np.log(variance).sum()) + self._apart(sizes), matrix
        return self._kept[1:]

    def _apart(self, sizes) -> float:
        """What the differences add."""
        values = self._values
        if values.differences is None or not len(values.differences):
            return 0.0
        variance = values.difference_known + sum(size * shape for size, shape in zip(sizes, values.difference_shapes))
        variance = np.maximum(variance, 1e-300)
        return float((np.log(variance) + values.differences**2 / variance).sum())

    def __call__(self, levels, local) -> float:
        """levels, local : variances of the levels and sizes of the local components."""
        total, matrix = self._local(local)
        above = [*self._starts[1:], np.zeros(1, int)]
        for variance, first in zip(levels[::-1], above):
            swept = 1 + variance * matrix[:, 0, 0]
            total += np.log(swept).sum()
            matrix = matrix - (variance / swept)[:, None, None] * matrix[:, :, :1] * matrix[:, :1, :]
            matrix = np.add.reduceat(matrix, first, axis=0)
        whole = matrix.sum(axis=0)
        inner, cross = whole[1:-1, 1:-1], whole[1:-1, -1]
        explained = 0.0
        if len(inner):
            total += np.linalg.slogdet(inner)[1]
            explained = cross @ np.linalg.pinv(inner, hermitian=True) @ cross
        return float(total + whole[-1, -1] - explained)


def fit_components(
    values: Nested, degrees: tuple[int, ...], level: float = 0.95, *, intervals: bool = True, begin=None
) -> Components:
    """Variance components with profile-likelihood intervals.

    degrees : degrees of freedom of each level, for the small-sample factor 1 + 1/(3 df) of the likelihood ratio
    intervals : whether they are wanted; without, the bounds are 0 and infinite
    begin : sizes near the answer, levels first, that save time; or None
    Returns Components; the lower bound is 0 where the data do not exclude none.
    Source of the factor: D. N. Lawley, Biometrika 43, 295 (1956) (from memory), for the variance of a normal sample.
    """
    likelihood = Restricted(values)
    number = len(values.levels)
    scale = float(np.median(np.abs(values.residuals)) / 0.6745) ** 2 or float(np.var(values.residuals)) or 1.0
    units = np.array([scale] * number + [scale / float(np.median(shape)) for shape in values.shapes])

    def deviance(logs):
        sizes = units * np.exp(logs)
        return likelihood(sizes[:number], sizes[number:])

    first = np.full(len(units), np.log(0.3))
    if begin is not None:
        first = np.log(np.clip(np.asarray(begin, float) / units, 1e-3, 1e2))  # off the ends, where nothing slopes
    best = _least(deviance, first)
    errors = _curvature_errors(deviance, best) if intervals else best
    estimates = []
    for place in range(len(units)):
        held = [other for other in range(len(units)) if other != place and (place >= number or other < number)]
        freedom = degrees[place] if place < number else len(values.residuals) - values.fixed.shape[1]
        cut = stats.chi2.ppf(level, 1) * (1 + 1 / (3 * max(freedom, 1)))
        if not intervals:
            low, high = 0.0, np.inf
        elif errors[place] < SHARP:
            low, high = np.exp(best[place] + np.sqrt(cut) * np.array([-1, 1]) * errors[place])
        else:
            low, high = _profile(deviance, best, place, held, cut)
        none = best[place] <= np.log(SMALLEST) + 0.5
        estimates.append(
            Estimate(
                value=0.0 if none else float(units[place] * np.exp(best[place])),
                low=float(units[place] * low),
                high=float(units[place] * high),
                level=level,
                n=len(values.residuals),
                method="REML, profile likelihood" if errors[place] >= SHARP else "REML, curvature of the log",
            )
        )
    return Components(levels=tuple(estimates[:number]), local=tuple(estimates[number:]))


def _curvature_errors(deviance, best) -> np.ndarray:
    """Standard errors of the logarithms from the curvature of the deviance; infinite at an end and where it has none."""
    inside = np.flatnonzero((best > np.log(SMALLEST) + 0.5) & (best < np.log(LARGEST) - 0.5))
    errors, count, step = np.full(len(best), np.inf), len(inside), 0.05
    if not count:
        return errors

    def at(moves):
        point = best.copy()
        point[inside] += step * np.asarray(moves)
        return deviance(point)

    middle, unit = at(np.zeros(count)), np.eye(count)
    matrix = np.empty((count, count))
    for a in range(count):
        for b in range(a + 1):
            if a == b:
                matrix[a, a] = at(unit[a]) + at(-unit[a]) - 2 * middle
            else:
                matrix[a, b] = matrix[b, a] = (
                    at(unit[a] + unit[b]) + at(-unit[a] - unit[b]) - at(unit[a] - unit[b]) - at(unit[b] - unit[a])
                ) / 4
    if np.linalg.eigvalsh(matrix)[0] > 0:
        errors[inside] = step * np.sqrt(2 * np.diag(np.linalg.inv(matrix)))
    return errors


def _least(deviance, start):
    bounds = [(np.log(SMALLEST), np.log(LARGEST))] * len(start)
    return minimize(deviance, start, method="L-BFGS-B", bounds=bounds, options={"ftol": 1e-11}).x


def _profile(deviance, best, place, held, cut):
    """Ends of a component's interval in its unit, the components `held` refitted at every value."""
    least, warm = deviance(best), best.copy()

    def excess(log):
        def inner(logs):
            point = warm.copy()
            point[place], point[held] = log, logs
            return deviance(point)

        if held:
            warm[held] = _least(inner, warm[held])
        point = warm.copy()
        point[place] = log
        return deviance(point) - least - cut

    ends = []
    for limit in (np.log(SMALLEST), np.log(LARGEST)):
        warm[:] = best
        step, inside = np.sign(limit - best[place]) * 0.25, best[place]
        outside = inside
        while True:
            outside = np.clip(inside + step, np.log(SMALLEST), np.log(LARGEST))
            if excess(outside) > 0 or outside in (np.log(SMALLEST), np.log(LARGEST)):
                break
            inside, step = outside, 2 * step
        if excess(outside) <= 0:
            ends.append(0.0 if limit < 0 else np.inf)
            continue
        while abs(outside - inside) > HALVED:  # bisection: a likelihood refitted at every step has some noise
            middle = (inside + outside) / 2
            inside, outside = (inside, middle) if excess(middle) > 0 else (middle, outside)
        ends.append(float(np.exp((inside + outside) / 2)))
    return ends
