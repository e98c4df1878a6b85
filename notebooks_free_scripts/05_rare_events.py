"""How many calls does a rare failure cost, and does its interval hold? Limit states whose answers are known exactly.

Run: python notebooks_free_scripts/05_rare_events.py            (half a minute)
     python notebooks_free_scripts/05_rare_events.py --short    (a few seconds, the tests' choice: fewer seeds)

Each case is (name, limit state, dimension, probability). The last column is how many times more draws plain counting
would need for an interval of the same relative width.
"""

import sys

import numpy as np
from scipy import integrate, stats
from scipy.special import log_ndtr, ndtr, ndtri

from mc.rare import failure_probability

SHORT = "--short" in sys.argv
SEEDS = range(4 if SHORT else 40)


def unit_vectors(count, dimension, seed=0):
    """Orthonormal directions, shape (count, dimension)."""
    return np.linalg.qr(np.random.default_rng(seed).standard_normal((dimension, count)))[0].T


def linear(dimension, distance):
    normal = unit_vectors(1, dimension)[0]
    return f"linear at {distance}", lambda points: distance - points @ normal, dimension, ndtr(-distance)


def separate(count, dimension, distance, units=1.0):
    """Half-spaces at right angles, each margin in a unit of its own; inclusion and exclusion give the union."""
    normals = unit_vectors(count, dimension)
    name = f"{count} regions" + (", odd units" if np.size(units) > 1 else "")
    probability = -np.expm1(count * np.log1p(-ndtr(-distance)))
    return name, lambda points: ((distance - points @ normals.T) * units).min(axis=1), dimension, probability


def symmetric(pairs, dimension, distance):
    normals = unit_vectors(pairs, dimension)
    probability = -np.expm1(pairs * np.log1p(-2 * ndtr(-distance)))
    name = f"{2 * pairs} regions, opposite"
    return name, lambda points: distance - np.abs(points @ normals.T).max(axis=1), dimension, probability


def sum_of_squares(dimension, probability):
    most = stats.chi2.isf(probability, dimension)
    return "sum of squares", lambda points: most - (points**2).sum(axis=1), dimension, probability


def sum_of_exponentials(dimension, probability):
    most = stats.gamma.isf(probability, dimension)
    return "sum of exponentials", lambda points: most + log_ndtr(-points).sum(axis=1), dimension, probability


def poisson_product(mean, count, dimension):
    """Two Poisson numbers both at or above a count: two steep stairs, flat between the steps."""
    stairs = -ndtri(stats.poisson.sf(np.arange(100), mean))

    def limit_state(points):
        return count - 0.5 - np.searchsorted(stairs, points[:, :2]).min(axis=1)

    return "two Poisson tails", limit_state, dimension, stats.poisson.sf(count - 1, mean) ** 2


def four_branches():
    """Series system of four branches. Source: P. H. Waarts, thesis, TU Delft (2000), with k = 6 (from memory)."""

    def limit_state(points):
        along, across = (points[:, 0] + points[:, 1]) / np.sqrt(2), (points[:, 0] - points[:, 1]) / np.sqrt(2)
        return np.minimum(3 + 0.2 * across**2 - np.abs(along), np.sqrt(2) * (3 - np.abs(across)))

    def density(across):
        return stats.norm.pdf(across) * 2 * ndtr(-(3 + 0.2 * across**2))

    curved = integrate.quad(density, -3, 3, epsabs=0, epsrel=1e-10)[0]
    return "four branches", limit_state, 2, 2 * ndtr(-3.0) + curved


def yes_or_no(dimension, distance):
    normal = unit_vectors(1, dimension, seed=1)[0]
    return "yes or no", lambda points: np.where(points @ normal >= distance, -1.0, 1.0), dimension, ndtr(-distance)


def corner(count, dimension, probability):
    """Several half-spaces at right angles that must all be reached."""
    normals, distance = unit_vectors(count, dimension), -ndtri(probability ** (1 / count))
    return f"corner of {count}", lambda points: (distance - points @ normals.T).max(axis=1), dimension, probability


def sphere_and_plane(dimension, probability):
    """The sphere in all inputs but the last, the plane in that one; each alone has the probability that is given."""
    square, distance = stats.chi2.isf(probability, dimension - 1), -ndtri(probability)

    def limit_state(points):
        return np.minimum(square - (points[:, :-1] ** 2).sum(axis=1), distance - points[:, -1])

    return "sphere and plane", limit_state, dimension, probability * (2 - probability)


CASES = [
    linear(2, 3.0),
    linear(10, 4.5),
    linear(40, 4.5),
    linear(40, 6.0),
    linear(100, 6.0),
    symmetric(1, 10, 4.9),
    symmetric(2, 24, 6.0),
    separate(6, 12, 5.0, units=np.array([1.0, 1e3, 1e-3, 1e6, 10.0, 0.1])),
    separate(20, 20, 5.3),
    sum_of_squares(20, 1e-6),
    sum_of_squares(100, 1e-9),
    sum_of_exponentials(5, 1e-6),
    poisson_product(4.0, 12, 6),
    four_branches(),
    yes_or_no(10, 4.75),
    yes_or_no(100, 4.75),
    corner(2, 10, 1e-6),
]


def against_the_truth(limit_state, dimension, probability):
    """Estimates over the seeds: median calls, error, share of intervals that hold, share flagged, ratio to counting."""
    runs = [failure_probability(limit_state, dimension, seed=seed) for seed in SEEDS]
    sure = [run for run in runs if not run.flagged] or runs
    error = np.sqrt(np.mean([(run.value / probability - 1) ** 2 for run in sure]))
    held = np.mean([run.low <= probability <= run.high for run in sure])
    ratio = np.median([(1 - probability) / probability / run.cov**2 / run.calls for run in sure])
    return np.median([run.calls for run in runs]), error, held, 1 - len(sure) / len(runs), ratio


if __name__ == "__main__":
    print(
        f"{'case':24}{'inputs':>7}{'probability':>13}{'calls':>8}{'error':>7}{'held':>6}{'flagged':>9}{'counting':>10}"
    )
    held_everywhere = []
    for name, limit_state, dimension, probability in CASES:
        calls, error, held, flagged, ratio = against_the_truth(limit_state, dimension, probability)
        print(
            f"{name:24}{dimension:7}{probability:13.2e}{calls:8.0f}{error:7.1%}{held:6.0%}{flagged:9.0%}{ratio:10.0e}"
        )
        held_everywhere.append(held)
        assert error < 0.25
        assert flagged <= 0.25
        if probability < 3e-6:
            assert ratio > 1e3
        if probability < 3e-9:
            assert ratio > 1e6
    print(f"intervals that hold, all cases: {np.mean(held_everywhere):.1%} of {len(SEEDS)} seeds each")
    assert np.mean(held_everywhere) > 0.88
