"""From regions to an estimate: the mixture that samples them, its training, and the weights of a fresh sample."""

from dataclasses import dataclass, replace
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
MOST_ROUNDS = 8
GROWTH = 2  # of a round over the one before: the first mixtures are not worth many draws
STALLED = 2  # rounds that saved less than they cost, after which training ends: one may be ill luck
FEWEST_FINAL = 500
FEWEST_FITTED = 5  # failures
CLEAR_SHAPE = 0.5  # Pareto shape of a final sample up to which no other is drawn
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
    mixture = Mixture.of(
        weights=weights / weights.sum() if weights.size else weights,
        centers=centers,
        normals=regions.normals,
        along=np.full(len(centers), FIRST_SPREAD),
        across=np.ones(len(centers)),
    )
    if not len(failures):
        return mixture
    return _with_whole(mixture, failures, CONTINUOUS_SHARE if regions.continuous or not weights.size else WHOLE_SHARE)


def plane_component(normal, distance) -> Mixture:
    """The component of one half-space: normal (dimension,), distance [sigmas]."""
    center = normal * (distance + 1 / max(distance, 1.0))
    return Mixture.of(np.ones(1), center[None], normal[None], np.array([FIRST_SPREAD]), np.ones(1))


def _with_whole(mixture, failures, share):
    """The mixture and two components that stand for all failures at once, with a share of the weight."""
    center = failures.mean(axis=0)
    normal = center / max(np.linalg.norm(center), 1e-12)
    offsets = failures - center
    heights = offsets @ normal
    across = np.sqrt(max(1.0, ((offsets**2).sum(axis=1) - heights**2).mean() / max(center.size - 1, 1)))
    radius = max(1.0, np.sqrt((failures**2).mean()))
    whole = Mixture.of(
        weights=np.array([0.5, 0.5]),
        centers=np.array([center, np.zeros_like(center)]),
        normals=np.array([normal, np.zeros_like(center)]),
        along=[np.clip(heights.std(), FIRST_SPREAD, WIDEST), radius],
        across=[across, radius],
    )
    return mixture.joined_by(whole, share if len(mixture.weights) else 1.0)


@dataclass(frozen=True, kw_only=True, eq=False)
class Sample:
    """A fresh sample of a mixture.

    mixture : what it was drawn from; weights : zero where the limit state holds, shape (n,)
    failed : whether it does not, shape (n,); failures : points that failed, shape (m, dimension)
    """

    mixture: Mixture
    weights: np.ndarray
    failed: np.ndarray
    failures: np.ndarray

    @classmethod
    def drawn(cls, state: CountedLimitState, random, mixture, count) -> "Sample":
        """A sample of `count` points and their importance weights."""
        points = mixture.draw(random, count)
        return cls.of(mixture, points, state.failed(points))

    @classmethod
    def of(cls, mixture, points, failed) -> "Sample":
        """A sample that was drawn: points (n, dimension), and which of them failed, shape (n,)."""
        weights = np.where(failed, np.exp(log_normal(points) - mixture.log_density(points)), 0.0)
        return cls(mixture=mixture, weights=weights, failed=failed, failures=points[failed])

    @property
    def shape(self):
        """Pareto shape of the largest weights [1]."""
        return tail_shape(self.weights[self.weights > 0])

    def draws_for(self, target):
        """Draws of the same mixture that would reach a coefficient of variation."""
        return self.weights.size * (variation(self.weights) / target) ** 2


@dataclass(frozen=True, kw_only=True, eq=False)
class Training:
    """Trial samples so far, the mixture to draw from next, its weights before any fit, and the draws it should need."""

    samples: list[Sample]
    mixture: Mixture
    prior: np.ndarray
    need: float

    @classmethod
    def begun(cls, mixture, samples=(), fitted=False) -> "Training":
        """Before the first round: a mixture, fitted or not to whatever samples there are already.

        Samples of one region alone would draw the components of all the others there.
        """
        prior, samples = mixture.weights, list(samples)
        if fitted and samples:
            failures, scores = pooled(samples)
            if len(failures) >= FEWEST_FITTED:
                mixture = reweighted(refitted(mixture, failures, scores), failures, scores, prior)
        return cls(samples=samples, mixture=mixture, prior=prior, need=np.inf)

    def joined_by(self, mixture: Mixture, share) -> "Training":
        """The training with components added, which take a share of the weight."""
        prior = np.append(self.prior * (1 - share), mixture.weights * share)
        return replace(self, mixture=self.mixture.joined_by(mixture, share), prior=prior, need=np.inf)


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


def improved(samples, target, prior):
    """The last mixture refitted to all samples, and the draws it should need to reach a coefficient of variation.

    prior : weights of the components before any fit, shape (k,)
    Where the refit would do worse than the mixture it came from, that one is kept.
    """
    old = samples[-1].mixture
    failures, scores = pooled(samples)
    if len(failures) < FEWEST_FITTED:
        return old, np.inf
    moved = refitted(old, failures, scores)
    choices = [reweighted(mixture, failures, scores, prior) for mixture in (old, moved)]
    moments = [second_moment(mixture, failures, scores) for mixture in choices]
    best = int(np.argmin(moments))
    foreseen = ALLOWANCE * max(moments[best] / scores.sum() ** 2 - 1, 0.0) / target**2
    heavy = 1 + HEAVY * np.clip(samples[-1].shape, 0.0, UNRELIABLE_SHAPE)
    return choices[best], heavy * max(foreseen, SEEN * samples[-1].draws_for(target))


def trained(state: CountedLimitState, random, training: Training, target, trial=TRIAL) -> Training:
    """Rounds of trial draws and refits, as long as a round promises to save more draws than it costs.

    trial : draws of the first round
    """
    samples, mixture, prior, need = list(training.samples), training.mixture, training.prior, np.inf
    size, stalled = max(trial, DRAWS_PER_COMPONENT * prior.size), 0
    for _ in range(MOST_ROUNDS):
        if state.left < size + FEWEST_FINAL:
            break
        samples.append(Sample.drawn(state, random, mixture, size))
        before = need
        mixture, need = improved(samples, target, prior)
        stalled += before - need < size < before < np.inf
        if need < 2 * size or stalled == STALLED:
            break
        size = int(max(size, min(need / 4, GROWTH * size, MOST_TRIAL)))
    return Training(samples=samples, mixture=mixture, prior=prior, need=need)


def combined(finals) -> Sample:
    """Several samples as one of the mixture of their mixtures, so that none has to be thrown away.

    Source: balance heuristic, as in `pooled`.
    """
    if len(finals) == 1:
        return finals[0]
    sizes = np.array([sample.weights.size for sample in finals])
    total, mixture = sizes[0], finals[0].mixture
    for size, sample in zip(sizes[1:], finals[1:], strict=True):
        total += size
        mixture = mixture.joined_by(sample.mixture, size / total)
    failures = np.concatenate([sample.failures for sample in finals])
    weights = np.zeros(total)
    failed = np.concatenate([sample.failed for sample in finals])
    weights[failed] = np.exp(log_normal(failures) - mixture.log_density(failures))
    return Sample(mixture=mixture, weights=weights, failed=failed, failures=failures)


def final_sample(state: CountedLimitState, random, training: Training, target, attempts=3):
    """A fresh sample whose size was settled before it was drawn.

    Where it turns out far less precise than foreseen, or its weights unreliable, it joins the training and another is
    drawn and joined to it, as long as calls last: to keep the better looking one alone would favour low estimates.
    More than half of what is left is not spent on one that cannot reach the target: a last resort needs calls too.
    Returns the sample, or None when there are no calls for one.
    """
    finals, samples, mixture, need, whole = [], training.samples, training.mixture, training.need, None
    for _ in range(attempts):
        least = max(FEWEST_FINAL, 2 * DRAWS_PER_COMPONENT * mixture.weights.size)
        size = max(least, ceil(need) if need < state.left else state.left // 2)
        if size > state.left:
            break
        finals.append(Sample.drawn(state, random, mixture, size))
        whole = combined(finals)
        if variation(whole.weights) <= ALLOWANCE * target and whole.shape <= CLEAR_SHAPE:
            break
        samples = [*samples, finals[-1]]
        mixture, need = improved(samples, target, training.prior)
    return whole
