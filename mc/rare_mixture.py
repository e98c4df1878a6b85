"""Mixture of normals for importance sampling: its draws, its density, and its refit to weighted failures."""

from dataclasses import dataclass, replace

import numpy as np
from scipy.special import logsumexp

WIDE = 0.3  # share of every component that keeps the unit spread: the defence against weights without bound
NARROWEST, WIDEST = 0.12, 1.5  # spread along a normal
WIDENED = 1.5  # a fitted spread is taken this much wider, few failures underrate it
PRIOR_SHARE = 0.2  # of the weights before any fit, kept for ever: a region unlucky in the trials is not forgotten
DOUBT = 5  # failures whose worth of trust the old spread and height have
TURNS = 20


@dataclass(frozen=True, kw_only=True, eq=False)
class Mixture:
    """Shifted normals, narrow along one direction each, with a wide twin inside every component.

    weights : sum 1, shape (k,)
    centers : shape (k, dimension)
    normals : unit vectors, or zero for a component that is alike in all directions, shape (k, dimension)
    along, across : spread along the normal and in all other directions, shape (k,)
    Source of the defence: T. Hesterberg, Technometrics 37, 185 (1995) (from memory).
    """

    weights: np.ndarray
    centers: np.ndarray
    normals: np.ndarray
    along: np.ndarray
    across: np.ndarray

    @property
    def wide_along(self):
        """Spread of the wide twins along the normals, shape (k,)."""
        return np.maximum(self.across, 1.0)

    def draw(self, random, count):
        """Points, shape (count, dimension); the components get their shares of them by systematic sampling."""
        places = (random.random() + np.arange(count)) / count
        chosen = np.minimum(np.searchsorted(np.cumsum(self.weights), places), self.weights.size - 1)
        wide = random.random(count) < WIDE
        along = np.where(wide, self.wide_along[chosen], self.along[chosen])
        noise = random.standard_normal((count, self.centers.shape[1]))
        normals, across = self.normals[chosen], self.across[chosen]
        upright = np.einsum("nd,nd->n", noise, normals)
        return self.centers[chosen] + across[:, None] * noise + ((along - across) * upright)[:, None] * normals

    def log_components(self, points):
        """Logarithm of every component's density at points (n, dimension), shape (n, k), up to (2 pi)^(-d/2)."""
        squared = (points**2).sum(axis=1)[:, None] - 2 * points @ self.centers.T + (self.centers**2).sum(axis=1)
        upright = points @ self.normals.T - np.einsum("kd,kd->k", self.centers, self.normals)
        sideways = np.maximum(squared - upright**2, 0.0) / self.across**2
        directions = points.shape[1] - 1

        def twin(along):
            return -0.5 * ((upright / along) ** 2 + sideways) - np.log(along) - directions * np.log(self.across)

        narrow = np.log(1 - WIDE) + twin(self.along)
        return np.logaddexp(narrow, np.log(WIDE) + twin(self.wide_along))

    def log_density(self, points):
        """Logarithm of the density at points of shape (n, dimension), shape (n,), up to (2 pi)^(-d/2)."""
        return logsumexp(self.log_components(points) + np.log(self.weights), axis=1)


def log_normal(points):
    """Logarithm of the standard normal density at points of shape (n, dimension), shape (n,), up to (2 pi)^(-d/2)."""
    return -0.5 * (points**2).sum(axis=1)


def second_moment(mixture, points, scores):
    """Mean square of the weights a mixture would have, from draws of another: E[score * weight].

    points : failures, shape (m, dimension); scores : weights under the mixture they were drawn from, shape (m,)
    """
    return float((scores * np.exp(log_normal(points) - mixture.log_density(points))).sum())


def reweighted(mixture: Mixture, points, scores, prior) -> Mixture:
    """The mixture with weights of (nearly) least variance for given components.

    points, scores : as in `second_moment`; prior : weights of which a share is kept, shape (k,)
    Source: R. Douc, A. Guillin, J.-M. Marin and C. P. Robert, ESAIM Probab. Stat. 11, 427 (2007) (from memory).
    """
    logs = mixture.log_components(points)
    weights = mixture.weights
    for _ in range(TURNS):
        density = logsumexp(logs + np.log(weights), axis=1)
        squares = np.log(scores) + log_normal(points) - density
        shares = weights * np.exp(logs - density[:, None] + (squares - squares.max())[:, None]).sum(axis=0)
        weights = np.maximum(shares / shares.sum(), 1e-12)
    weights = (1 - PRIOR_SHARE) * weights / weights.sum() + PRIOR_SHARE * prior
    return replace(mixture, weights=weights / weights.sum())


def refitted(mixture: Mixture, points, scores) -> Mixture:
    """The mixture moved towards weighted failures: one step of cross entropy, with as much trust as there are failures.

    points, scores : as in `second_moment`
    Source: R. Y. Rubinstein and D. P. Kroese, The Cross-Entropy Method, 2004; O. Cappe, R. Douc, A. Guillin,
    J.-M. Marin and C. P. Robert, Stat. Comput. 18, 447 (2008); for the shrinkage of the sideways moves W. James and
    C. Stein, 4th Berkeley Symp. 1, 361 (1961) (all from memory).
    """
    dimension = points.shape[1]
    logs = mixture.log_components(points) + np.log(mixture.weights)
    shares = np.exp(logs - logsumexp(logs, axis=1)[:, None]) * scores[:, None]
    centers, along, across = mixture.centers.copy(), mixture.along.copy(), mixture.across.copy()
    normals = mixture.normals.copy()
    for index, share in enumerate(shares.T):
        mass = share.sum()
        if mass <= 1e-6 * scores.sum():
            continue
        size = mass**2 / (share**2).sum()
        share = share / mass
        trust_spread = size / (size + DOUBT)
        if normals[index].any():
            moved = share @ points - centers[index]
            upright = (moved @ normals[index]) * normals[index]
            sideways = moved - upright
            noise = (dimension - 1) * across[index] ** 2 / size
            trust_place = max(0.0, 1 - noise / max(sideways @ sideways, 1e-300))
            centers[index] += trust_spread * upright + trust_place * sideways
            normals[index] = centers[index] / np.linalg.norm(centers[index])
        offsets = points - centers[index]
        heights = offsets @ normals[index]
        sideways = np.sqrt(share @ ((offsets**2).sum(axis=1) - heights**2) / max(dimension - normals[index].any(), 1))
        across[index] += trust_spread * (max(sideways, 1.0) - across[index])
        if normals[index].any():
            spread = np.clip(WIDENED * np.sqrt(share @ heights**2), NARROWEST, WIDEST)
            along[index] += trust_spread * (spread - along[index])
        else:
            along[index] = across[index]
    return replace(mixture, centers=centers, normals=normals, along=along, across=across)
