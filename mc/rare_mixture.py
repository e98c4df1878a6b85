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
AXES = 4  # of a component at most
NARROW = 0.8  # a further axis is worth having from this widened spread down
BROAD = 1.5  # and from this multiple of the variance across up


@dataclass(frozen=True, kw_only=True, eq=False)
class Mixture:
    """Shifted normals with a spread of their own along a few axes each, and a wide twin inside every component.

    weights : sum 1, shape (k,)
    centers : shape (k, dimension)
    axes : of every component, orthonormal, the first one its normal; zero where it needs no more, and all zero for a
        component that is alike in all directions, shape (k, a, dimension)
    along : spreads along the axes, shape (k, a); that of a zero axis is `across`
    across : spread in all other directions, shape (k,)
    Source of the defence: T. Hesterberg, Technometrics 37, 185 (1995) (from memory).
    """

    weights: np.ndarray
    centers: np.ndarray
    axes: np.ndarray
    along: np.ndarray
    across: np.ndarray

    @classmethod
    def of(cls, weights, centers, normals, along, across) -> "Mixture":
        """Components with one axis each, or none where the normal is zero: normals (k, dimension), along (k,)."""
        count, dimension = centers.shape
        more = min(AXES, dimension)
        axes = np.zeros((count, more, dimension))
        axes[:, 0] = normals
        every = np.repeat(np.asarray(across, dtype=float)[:, None], more, axis=1)
        every[:, 0] = along
        return cls(weights=weights, centers=centers, axes=axes, along=every, across=np.asarray(across, dtype=float))

    @classmethod
    def single(cls, center) -> "Mixture":
        """The standard normal, moved to a center of shape (dimension,)."""
        one = np.ones(1)
        return cls.of(one, center[None], np.zeros((1, center.size)), one, one)

    @property
    def wide(self):
        """Spread of the wide twins along the axes, shape (k, 1)."""
        return np.maximum(self.across, 1.0)[:, None]

    def joined_by(self, other: "Mixture", share) -> "Mixture":
        """These components and another mixture's, which take a share of the weight."""
        weights = np.append(self.weights * (1 - share), other.weights * share)
        parts = {
            name: np.concatenate([getattr(self, name), getattr(other, name)])
            for name in ("centers", "axes", "along", "across")
        }
        return Mixture(weights=weights, **parts)

    def draw(self, random, count):
        """Points, shape (count, dimension); the components get their shares of them by systematic sampling."""
        places = (random.random() + np.arange(count)) / count
        chosen = np.minimum(np.searchsorted(np.cumsum(self.weights), places), self.weights.size - 1)
        wide = random.random(count) < WIDE
        along = np.where(wide[:, None], self.wide[chosen], self.along[chosen])
        noise = random.standard_normal((count, self.centers.shape[1]))
        axes, across = self.axes[chosen], self.across[chosen][:, None]
        stretched = (along - across) * np.einsum("nd,nad->na", noise, axes)
        return self.centers[chosen] + across * noise + np.einsum("na,nad->nd", stretched, axes)

    def log_components(self, points):
        """Logarithm of every component's density at points (n, dimension), shape (n, k), up to (2 pi)^(-d/2)."""
        count, more, dimension = self.axes.shape
        squared = (points**2).sum(axis=1)[:, None] - 2 * points @ self.centers.T + (self.centers**2).sum(axis=1)
        upright = (points @ self.axes.reshape(-1, dimension).T).reshape(-1, count, more)
        upright = (upright - np.einsum("kd,kad->ka", self.centers, self.axes)) ** 2
        sideways = np.maximum(squared - upright.sum(axis=2), 0.0) / self.across**2
        constant = (dimension - more) * np.log(self.across)

        def twin(along):
            inverse = np.broadcast_to(along, self.along.shape)
            return (
                -0.5 * (np.einsum("nka,ka->nk", upright, inverse**-2) + sideways)
                - np.log(inverse).sum(axis=1)
                - constant
            )

        narrow = np.log(1 - WIDE) + twin(self.along)
        return np.logaddexp(narrow, np.log(WIDE) + twin(self.wide))

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
    axes = mixture.axes.copy()
    for index, share in enumerate(shares.T):
        mass = share.sum()
        if mass <= 1e-6 * scores.sum():
            continue
        size = mass**2 / (share**2).sum()
        share = share / mass
        trust = size / (size + DOUBT)
        normal, directed = axes[index, 0], axes[index, 0].any()
        if directed:
            moved = share @ points - centers[index]
            upright = (moved @ normal) * normal
            sideways = moved - upright
            noise = (dimension - 1) * across[index] ** 2 / size
            trust_place = max(0.0, 1 - noise / max(sideways @ sideways, 1e-300))
            centers[index] += trust * upright + trust_place * sideways
            normal = centers[index] / np.linalg.norm(centers[index])
        offsets = points - centers[index]
        covariance = (share[:, None] * offsets).T @ offsets
        axes[index] = 0.0
        variance = normal @ covariance @ normal
        rest = np.trace(covariance) - variance
        spreads = np.full(axes.shape[1], np.nan)
        if directed:
            axes[index, 0] = normal
            spreads[0] = np.clip(WIDENED * np.sqrt(variance), NARROWEST, WIDEST)
            further, variances = further_axes(covariance, normal, size, axes.shape[1] - 1)
            axes[index, 1 : 1 + len(further)] = further
            spreads[1 : 1 + len(further)] = np.clip(
                np.where(variances < 1, WIDENED, 1.0) * np.sqrt(variances), NARROWEST, None
            )
            rest -= variances.sum()
        left = dimension - directed - np.isfinite(spreads[1:]).sum()
        sideways = np.sqrt(rest / left) if left else 1.0
        before = across[index]
        across[index] += trust * (max(sideways, 1.0) - before)
        along[index, 0] += trust * (spreads[0] - along[index, 0]) if directed else 0.0
        along[index, 1:] = before + trust * (spreads[1:] - before)
        along[index] = np.where(axes[index].any(axis=1), along[index], across[index])
    return replace(mixture, centers=centers, axes=axes, along=along, across=across)


def further_axes(covariance, normal, size, most):
    """Directions at right angles to the normal in which failures spread far less or more than in the others.

    covariance : of the failures of a component, shape (dimension, dimension); size : effective number of them
    Returns unit vectors (a, dimension) and variances along them (a,), a <= most. An eigenvalue must lie outside of what
    chance makes of a unit covariance: V. A. Marchenko and L. A. Pastur, Math. USSR Sb. 1, 457 (1967) (from memory).
    """
    ratio = np.sqrt((normal.size - 1) / size)
    if most < 1 or ratio >= 0.7:
        return np.empty((0, normal.size)), np.empty(0)
    away = np.eye(normal.size) - np.outer(normal, normal)
    values, vectors = np.linalg.eigh(away @ covariance @ away)
    values, vectors = values[1:], vectors[:, 1:]  # the first is the normal's own
    variances = np.maximum(values / (1 - ratio) ** 2, 1e-12)
    middle = max(1.0, np.median(values))
    narrow = WIDENED * np.sqrt(variances) < NARROW
    broad = values > BROAD * (1 + ratio) ** 2 * middle
    variances = np.where(narrow, variances, values)
    chosen = np.flatnonzero(narrow | broad)
    chosen = chosen[np.argsort(-np.abs(np.log(variances[chosen] / middle)))][:most]
    return vectors[:, chosen].T, variances[chosen]
