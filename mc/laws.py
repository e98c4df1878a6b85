"""Laws of random inputs, each a monotone function of one standard normal.

Every law has one method, `from_normal(z)`. Laws are frozen and refuse nonsense when they are made (ValueError).
"""

from dataclasses import dataclass

import numpy as np
from scipy.special import ndtr, ndtri


def _require(condition, message):
    if not condition:
        raise ValueError(message)


@dataclass(frozen=True, kw_only=True)
class Normal:
    """Normal law. mean, sigma >= 0: in the input's own unit."""

    mean: float = 0.0
    sigma: float

    def __post_init__(self):
        _require(np.isfinite(self.mean) and 0 <= self.sigma < np.inf, "a normal law needs a finite mean and sigma >= 0")

    def from_normal(self, z):
        """Value at the standard normal z (any shape)."""
        scaled = self.sigma * z
        return scaled + self.mean if self.mean else scaled  # a deviation has mean 0: one pass over the array less


@dataclass(frozen=True, kw_only=True)
class Lognormal:
    """Lognormal law by its own mean > 0 and standard deviation sigma >= 0, moved by `shift`."""

    mean: float
    sigma: float
    shift: float = 0.0

    def __post_init__(self):
        _require(0 < self.mean < np.inf and 0 <= self.sigma < np.inf, "a lognormal law needs mean > 0 and sigma >= 0")
        _require(np.isfinite(self.shift), "a lognormal law needs a finite shift")

    def from_normal(self, z):
        """Value at the standard normal z (any shape)."""
        variance = np.log1p((self.sigma / self.mean) ** 2)
        return self.shift + self.mean * np.exp(np.sqrt(variance) * z - variance / 2)


@dataclass(frozen=True, kw_only=True)
class TruncatedNormal:
    """Normal law of the given mean and sigma, cut symmetrically at `cut` sigmas; its own spread is a little smaller."""

    mean: float = 0.0
    sigma: float
    cut: float

    def __post_init__(self):
        _require(
            np.isfinite(self.mean) and 0 <= self.sigma < np.inf and self.cut > 0,
            "a truncated normal law needs a finite mean, sigma >= 0 and cut > 0",
        )

    def from_normal(self, z):
        """Value at the standard normal z (any shape)."""
        outside = ndtr(-self.cut)
        # the smaller tail is mapped and mirrored, so that neither tail loses digits
        tail = outside + (1 - 2 * outside) * ndtr(-np.abs(z))
        return self.mean - self.sigma * np.sign(z) * ndtri(tail)


@dataclass(frozen=True, kw_only=True)
class Uniform:
    """Uniform law between low and high, low <= high."""

    low: float
    high: float

    def __post_init__(self):
        _require(-np.inf < self.low <= self.high < np.inf, "a uniform law needs finite low <= high")

    def from_normal(self, z):
        """Value at the standard normal z (any shape)."""
        return self.low + (self.high - self.low) * ndtr(z)


@dataclass(frozen=True, kw_only=True)
class Empirical:
    """Law of measured values: the quantile function that runs linearly through the sorted sample.

    values : at least two finite numbers; value k of n stands at probability (k - 1/2)/n; nothing lies beyond the sample.
    """

    values: tuple[float, ...]

    def __post_init__(self):
        _require(
            len(self.values) >= 2 and np.all(np.isfinite(self.values)),
            "an empirical law needs two finite values or more",
        )
        object.__setattr__(self, "values", tuple(sorted(float(value) for value in self.values)))

    def from_normal(self, z):
        """Value at the standard normal z (any shape)."""
        count = len(self.values)
        return np.interp(ndtr(z), (np.arange(count) + 0.5) / count, self.values)


Law = Normal | Lognormal | TruncatedNormal | Uniform | Empirical
