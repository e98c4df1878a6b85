"""Pair yields whose tail counting cannot reach: the failure probability of one pair by the rare-event estimator.

A chip of K pairs fails with probability 1 - E(1 - p)^K over dies. Where this is small it is K p to a relative error of
K p itself, so one pair is enough.
"""

from dataclasses import dataclass, replace

import numpy as np

from mc.correlation import Copula
from mc.intervals import Estimate
from mc.rare import RareEstimate, failure_probability
from studies.pairing import Arrangement, Candidate


@dataclass(frozen=True, kw_only=True)
class PairMargin:
    """Limit state of one pair: the limit less the size of its error, a function of independent standard normals.

    arrangement : of a single pair; candidate, limit : as in `PairChips`; names : inputs, in the order of the columns
    """

    arrangement: Arrangement
    candidate: Candidate
    limit: float
    names: tuple[str, ...]
    copula: Copula

    @classmethod
    def of(cls, arrangement: Arrangement, candidate: Candidate, limit: float) -> "PairMargin":
        """Margin of the first pair of an arrangement."""
        single = replace(arrangement, pairs=1)
        copula = arrangement.population.copula
        names = copula.needed((*single.die_names(), *single.pair_names()))
        return cls(arrangement=single, candidate=candidate, limit=limit, names=names, copula=copula)

    def __call__(self, points):
        draws = dict(zip(self.names, np.ascontiguousarray(points.T)))
        used = (*self.arrangement.die_names(), *self.arrangement.pair_names())
        (error,) = self.arrangement.errors(self.copula.mix(draws, used), self.candidate)
        return self.limit - np.abs(error)


def pair_failure(arrangement: Arrangement, candidate: Candidate, limit: float, seed: int) -> RareEstimate:
    """Probability that one pair is outside its limit."""
    margin = PairMargin.of(arrangement, candidate, limit)
    return failure_probability(margin, len(margin.names), seed=seed)


def yields_of(failure: RareEstimate, pairs: int) -> tuple[Estimate, Estimate]:
    """Pair yield and chip yield from the failure probability of one pair."""

    def inside(count):
        value, low, high = (
            -np.expm1(count * np.log1p(-min(p, 1.0))) for p in (failure.value, failure.low, failure.high)
        )
        method = f"rare events: {failure.method}"
        loss = Estimate(
            value=float(value), low=float(low), high=float(high), level=failure.level, n=failure.calls, method=method
        )
        return loss.complement()

    return inside(1), inside(pairs)
