"""Direction of a failure region that no plane bounds: noise, yes or no, stairs, corners.

Failures at the true spread tell the direction best but are not to be had without it; at an inflated spread they are
common and tell little. So the spread comes down as fast as what is known of the direction allows.
"""

from dataclasses import dataclass

import numpy as np
from scipy.special import log_ndtr, ndtri

from mc.rare_calls import CountedLimitState
from mc.rare_diagnostics import effective_sample_size
from mc.rare_mixture import Mixture
from mc.rare_sampling import Sample

LOCAL = 0.5  # power of the weights that a stage uses: half of it keeps to the region next to the center
STAGE = 200  # draws of a stage
MOST_MISSES = 3  # stages with fewer
MOST_STAGES = 8  # and one more for every ten dimensions
TILT = 1.3  # sideways error of a stage's center, in its spreads, that is put up with: weights then vary by exp(TILT^2)
SETTLED = 1.0  # the same at the end
CHAINED = 2.0  # independent failures that a pilot's chains are worth
FEWEST_FAILURES = 8  # of a stage
COMPACT = 0.55  # spread of a region's heights [sigmas], above which it is not one region
LOWEST = 0.6  # least height of a region, in its mean height
FIRST_SPREADS = (2.0, 3.0, 4.0, 5.0)
FIRST = 300  # draws at each
COMMON = 0.1  # share that must fail


@dataclass(frozen=True, kw_only=True, eq=False)
class Descent:
    """Where a region lies.

    normal : unit vector, shape (dimension,); distance : at which the region begins [sigmas]
    samples : those of its stages that had no inflated spread
    compact : whether it is one region, as far as its failures tell
    """

    normal: np.ndarray
    distance: float
    samples: tuple[Sample, ...]
    compact: bool

    @property
    def failures(self):
        """Failures of the last stage, shape (m, dimension)."""
        return self.samples[-1].failures


def inflated(state: CountedLimitState, random, reserve=0):
    """Independent failures at the least spread at which they are common, shape (m, dimension), and that spread."""
    failures, spread = np.empty((0, state.dimension)), FIRST_SPREADS[0]
    for spread in FIRST_SPREADS:
        if state.left < FIRST + reserve:
            break
        points = spread * random.standard_normal((FIRST, state.dimension))
        failures = points[state.failed(points)]
        if len(failures) >= COMMON * FIRST:
            break
    return failures, spread


def mean_beyond(distance):
    """Mean of a standard normal beyond a distance [1]."""
    return np.exp(-0.5 * distance**2 - 0.5 * np.log(2 * np.pi) - log_ndtr(-distance))


def descent(state: CountedLimitState, random, failures, spread=None, reserve=0, known_regions=None) -> Descent | None:
    """The one region around some failures, or None where next to nothing fails there outside of known regions.

    failures : shape (m, dimension); spread : at which they were drawn independently; None for a pilot's chains
    Each stage draws about the mean that failures should have at its spread and adds their weighted mean to what is
    known, by the information in it: the direction of a mean of m failures at height h is known to dimension/(m h^2).
    Source: cross entropy over a falling spread, R. Y. Rubinstein and D. P. Kroese, The Cross-Entropy Method, 2004;
    C. G. Bucher, Struct. Saf. 31, 504 (2009) (both from memory).
    """
    dimension = state.dimension
    mean = failures.mean(axis=0) / (spread or 1.0)
    length = np.linalg.norm(mean)
    worth = len(failures) if spread else min(CHAINED, len(failures))
    noise = dimension / worth
    height = np.sqrt(max(length**2 - noise, 0.25 * length**2, 1e-12))
    total, known = worth * height * mean, worth * height**2 / dimension
    distance = height * (spread or 1.0)
    last, samples, misses = spread or np.inf, [], 0
    for _ in range(MOST_STAGES + dimension // 10):
        if state.left < STAGE + reserve:
            break
        last = spread = float(np.clip(distance / (TILT * np.sqrt(known)), 1.0, last))
        normal = total / np.linalg.norm(total)
        height = mean_beyond(distance / spread)
        points = height * normal + random.standard_normal((STAGE, dimension))
        failed = state.failed(spread * points)
        if known_regions is not None:
            failed &= ~known_regions.explain(spread * points)
        share = (failed.sum() + 0.5) / (STAGE + 1)
        distance = spread * max(height / np.sqrt(1 + 1 / known) - ndtri(share), 0.5)
        if spread == 1.0:
            samples.append(Sample.of(Mixture.single(height * normal), points, failed))
        if failed.sum() < FEWEST_FAILURES:
            misses += 1
            if misses == MOST_MISSES:
                return None
            continue
        points = points[failed]
        heights = points @ normal
        weights = np.exp(LOCAL * height * (heights.min() - heights))
        size = effective_sample_size(weights)
        mean = weights @ points / weights.sum() - (1 - LOCAL) * height * normal
        risen = max(mean @ normal, 0.1)
        weights = np.exp(height * (heights.min() - heights))
        total = total + size * risen * mean
        known += size * risen**2 / dimension
        if spread == 1.0 and height <= SETTLED * np.sqrt(known):
            return _judged(total / np.linalg.norm(total), points, weights, tuple(samples))
    return Descent(normal=total / np.linalg.norm(total), distance=distance, samples=tuple(samples), compact=False)


def _judged(normal, points, weights, samples):
    """The region of weighted failures, not compact where they scatter along its normal as no single region does."""
    heights, shares = points @ normal, weights / weights.sum()
    mean = shares @ heights
    deviation = np.sqrt(shares @ (heights - mean) ** 2)
    compact = deviation <= COMPACT and heights.min() >= LOWEST * mean
    return Descent(normal=normal, distance=float(mean - deviation), samples=samples, compact=bool(compact))
