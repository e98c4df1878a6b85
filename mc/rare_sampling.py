"""From regions to an estimate: the mixture that samples them, its training, and the weights of a fresh sample."""

from dataclasses import dataclass
from math import ceil

import numpy as np
from scipy.special import ndtr

from mc.rare_calls import CountedLimitState
from mc.rare_diagnostics import UNRELIABLE_SHAPE, tail_shape, variation
from mc.rare_mixture import WIDEST, Mixture, log_normal, refitted, reweighted, second_moment

FIRST_SPREAD = 0.35  # along a normal, before any fit
WHOLE_SHARE = 0.1  # weight of the components that stand for all failures at once
CONTINUOUS_SHARE = 0.7  # the same where half-spaces explain little
LEAST_CHANCE = 1e-3  # a region starts with at least this share of the largest one's weight
TRIAL = 300  # draws of a round of training, more for many components
MOST_TRIAL = 2000  # draws of a round where many will be needed anyway
DRAWS_PER_COMPONENT = 10  # at least, in a round; twice as many in the final sample
MOST_ROUNDS = 6
FEWEST_FINAL = 500
SEEN = 0.7  # share of the draws that the last mixture needed, which its refit is not believed to undercut
HEAVY = 1.0  # more draws per Pareto shape of the last weights: with a heavy tail the spread seen is mostly too small
ALLOWANCE = 1.3  # the need of draws is judged by the draws of the fit, so it is underrated


def first_mixture(regions, failures) -> Mixture:
    """A component for every region, and two for all failures at once: about their mean, and alike in all directions.

    regions : see `Regions`; failures : roughly drawn by their probability, shape (m, dimension); may be none
    """
    chances = ndtr(-regions.distances)
    weights = np.maximum(chances, LEAST_CHANCE * chances.max(initial=0.0))
    centers = regions.normals * (regions.distances + 1 / np.maximum(regions.distances, 1.0))[:, None]
    mixture = Mixture(
        weights=weights / weights.sum() if weights.size else weights,
        centers=centers,
        normals=regions.normals,
        along=np.full(len(centers), FIRST_SPREAD),
        across=np.ones(len(centers)),
    )
    if not len(failures):
        return mixture
    return _with_whole(mixture, failures, CONTINUOUS_SHARE if regions.continuous or not weights.size else WHOLE_SHARE)


def _with_whole(mixture, failures, share):
    """The mixture and two components that stand for all failures at once, with a share of the weight."""
    center = failures.mean(axis=0)
    normal = center / max(np.linalg.norm(center), 1e-12)
    offsets = failures - center
    heights = offsets @ normal
    across = np.sqrt(max(1.0, ((offsets**2).sum(axis=1) - heights**2).mean() / max(center.size - 1, 1)))
    radius = max(1.0, np.sqrt((failures**2).mean()))
    total = mixture.weights.sum()
    return Mixture(
        weights=np.append(mixture.weights * (1 - share), [share / 2, share / 2] if total else [0.5, 0.5]),
        centers=np.vstack([mixture.centers, center, np.zeros_like(center)]),
        normals=np.vstack([mixture.normals, normal, np.zeros_like(center)]),
        along=np.append(mixture.along, [np.clip(heights.std(), FIRST_SPREAD, WIDEST), radius]),
        across=np.append(mixture.across, [across, radius]),
    )


@dataclass(frozen=True, kw_only=True, eq=False)
class Sample:
    """A fresh sample of a mixture.

    mixture : what it was drawn from; weights : zero where the limit state holds, shape (n,)
    failures : points that failed, shape (m, dimension)
    """

    mixture: Mixture
    weights: np.ndarray
    failures: np.ndarray

    @classmethod
    def drawn(cls, state: CountedLimitState, random, mixture, count) -> "Sample":
        """A sample of `count` points and their importance weights."""
        points = mixture.draw(random, count)
        failed = state.failed(points)
        weights = np.where(failed, np.exp(log_normal(points) - mixture.log_density(points)), 0.0)
        return cls(mixture=mixture, weights=weights, failures=points[failed])

    @property
    def shape(self):
        """Pareto shape of the largest weights [1]."""
        return tail_shape(self.weights[self.weights > 0])

    def draws_for(self, target):
        """Draws of the same mixture that would reach a coefficient of variation."""
        return self.weights.size * (variation(self.weights) / target) ** 2


@dataclass(frozen=True, kw_only=True, eq=False)
class Training:
    """Trial samples so far, the mixture to draw from next, and the draws it should need."""

    samples: list[Sample]
    mixture: Mixture
    need: float


def pooled(samples):
    """Failures of several samples and their scores, which sum to the failure probability.

    Source: balance heuristic, E. Veach and L. J. Guibas, SIGGRAPH 95, 419 (1995) (from memory).
    """
    failures = np.concatenate([sample.failures for sample in samples])
    sizes = np.array([sample.weights.size for sample in samples])
    logs = np.stack([sample.mixture.log_density(failures) for sample in samples])
    log_pool = np.logaddexp.reduce(logs + np.log(sizes)[:, None], axis=0)
    scores = np.exp(log_normal(failures) - log_pool)
    return failures[scores > 0], scores[scores > 0]


def improved(samples, target):
    """The last mixture refitted to all samples, and the draws it should need to reach a coefficient of variation.

    Where the refit would do worse than the mixture it came from, that one is kept.
    """
    old = samples[-1].mixture
    failures, scores = pooled(samples)
    if len(failures) < 5:
        return old, np.inf
    moved = refitted(old, failures, scores)
    choices = [reweighted(mixture, failures, scores, samples[0].mixture.weights) for mixture in (old, moved)]
    moments = [second_moment(mixture, failures, scores) for mixture in choices]
    best = int(np.argmin(moments))
    foreseen = ALLOWANCE * max(moments[best] / scores.sum() ** 2 - 1, 0.0) / target**2
    heavy = 1 + HEAVY * np.clip(samples[-1].shape, 0.0, UNRELIABLE_SHAPE)
    return choices[best], heavy * max(foreseen, SEEN * samples[-1].draws_for(target))


def trained(state: CountedLimitState, random, mixture, target, trial=TRIAL) -> Training:
    """Rounds of trial draws and refits, as long as a round promises to save more draws than it costs.

    trial : draws of the first round
    """
    size = max(trial, DRAWS_PER_COMPONENT * mixture.weights.size)
    samples, need = [], np.inf
    for _ in range(MOST_ROUNDS):
        if state.left < size + FEWEST_FINAL:
            break
        samples.append(Sample.drawn(state, random, mixture, size))
        before = need
        mixture, need = improved(samples, target)
        if need < 2 * size or before - need < size < before < np.inf:
            break
        size = int(max(size, min(need / 4, MOST_TRIAL)))
    return Training(samples=samples, mixture=mixture, need=need)


def final_sample(state: CountedLimitState, random, training: Training, target, attempts=3):
    """A fresh sample whose size was settled before it was drawn.

    Where it turns out far less precise than foreseen, or its weights unreliable, it joins the training and another is
    drawn, as long as calls last.
    More than half of what is left is not spent on one that cannot reach the target: a last resort needs calls too.
    Returns the sample, or None when there are no calls for one.
    """
    sample, samples, mixture, need = None, training.samples, training.mixture, training.need
    for _ in range(attempts):
        least = max(FEWEST_FINAL, 2 * DRAWS_PER_COMPONENT * mixture.weights.size)
        size = max(least, ceil(need) if need < state.left else state.left // 2)
        if size > state.left:
            break
        sample = Sample.drawn(state, random, mixture, size)
        if variation(sample.weights) <= ALLOWANCE * target and sample.shape <= UNRELIABLE_SHAPE:
            break
        samples = [*samples, sample]
        mixture, need = improved(samples, target)
    return sample
