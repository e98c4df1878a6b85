"""Timing yields whose tail a sample of dies cannot reach: by the rare-event estimator over dies and their slowest paths.

A chip's slowest path is a function of the die's normals and of one normal for each launching edge, so a chip that misses
its period is one failure region of a few dozen normals.
"""

from dataclasses import dataclass, field, replace

import numpy as np
from scipy.special import ndtri

from mc.codec import storable
from mc.correlation import Copula
from mc.experiment import Inputs
from mc.intervals import Estimate
from mc.rare import RareEstimate, failure_probability
from mc.runner import results
from mc.search import crossing_of_decreasing
from studies.chip import Stage, slowest_path
from studies.settings import Workers

FEWEST_LOST = 10  # dies that a sample must lose at the target's yield for counting to be trusted with it
FARTHEST = 8.0  # standard deviations beyond which an input is held
SLICE = 256  # dies at once; each is evaluated at some two hundred places
FLAT = -50.0  # margin of a die whose gates do not switch
SEARCH = 0.05  # relative tolerance of the failure probability in the search for a period


def beyond_counting(chip_yield: float, samples: int) -> bool:
    """Whether so many dies are too few to say how many chips miss such a yield."""
    return (1 - chip_yield) * samples < FEWEST_LOST


@dataclass(frozen=True, kw_only=True)
class PeriodMargin:
    """Limit state of one chip, a function of independent standard normals: logarithm of the period over its slowest path.

    stage, paths : see `studies.chip`; period : [s]
    names : independent inputs in the order of the columns; used : inputs of the dies; edges : inputs of `slowest_path`
    """

    stage: Stage
    paths: int
    period: float
    names: tuple[str, ...]
    used: tuple[str, ...]
    edges: tuple[str, ...]
    copula: Copula

    def __call__(self, points):
        held = np.ascontiguousarray(np.clip(points.T, -FARTHEST, FARTHEST))
        slowest = [self._slowest(held[:, start : start + SLICE]) for start in range(0, held.shape[1], SLICE)]
        with np.errstate(divide="ignore", invalid="ignore"):
            margin = np.log(self.period / np.concatenate(slowest))
        return np.where(np.isfinite(margin), margin, FLAT)

    def _slowest(self, held):
        die = self.copula.mix(dict(zip(self.names, held)), self.used)
        return slowest_path(self.stage.path_cumulants(die), [die[name] for name in self.edges], self.paths)


@dataclass(kw_only=True)
class Tail:
    """The share of chips of one width that miss a period, and the period that a target needs.

    margin : at the period asked for; seed : of the estimator
    failures : failure shares already estimated, by period [s]
    """

    margin: PeriodMargin
    seed: int
    failures: dict[float, RareEstimate] = field(default_factory=dict)

    @classmethod
    def of(cls, stage: Stage, paths: int, period: float, inputs: Inputs, edges: tuple[str, ...]) -> "Tail":
        """Tail of one width. inputs : of the dies, `edges` among them; the rest as in `PeriodMargin`."""
        margin = PeriodMargin(
            stage=stage,
            paths=paths,
            period=period,
            names=inputs.copula.needed(inputs.names),
            used=inputs.names,
            edges=edges,
            copula=inputs.copula,
        )
        return cls(margin=margin, seed=inputs.seed)

    def failure(self, period: float) -> RareEstimate:
        """Share of chips that miss a period [s]."""
        if period not in self.failures:
            margin = replace(self.margin, period=period)
            self.failures[period] = failure_probability(margin, len(margin.names), seed=self.seed)
        return self.failures[period]

    def chip_yield(self) -> Estimate:
        """Share of chips that meet the period asked for."""
        failed = self.failure(self.margin.period)
        loss = Estimate(
            value=failed.value,
            low=failed.low,
            high=failed.high,
            level=failed.level,
            n=failed.calls,
            method=f"rare events: {failed.method}",
        )
        return loss.complement()

    def period_at(self, target: float, mean: float, sigma: float) -> Estimate:
        """Period that a yield needs [s]. mean, sigma : of the slowest path, for a first guess [s]."""
        allowed = 1 - target
        guess = mean - sigma * ndtri(allowed)
        places = [guess - sigma, guess + sigma]

        def share(period):
            return max(self.failure(period).value, np.finfo(float).tiny)

        while share(places[-1]) > allowed:
            places.append(places[-1] + 2 * sigma)
        while share(places[0]) <= allowed and places[0] > mean:
            places.insert(0, places[0] - 2 * sigma)
        found = crossing_of_decreasing(share, allowed, places, tolerance=SEARCH)
        near = self.failure(found)
        slope = np.log(share(places[-1]) / share(places[0])) / (places[-1] - places[0])
        # the failure share's own bounds, moved along the curve's slope, give the period's
        value, low, high = (found + np.log(allowed / share) / slope for share in (near.value, near.low, near.high))
        return Estimate(
            value=value, low=low, high=high, level=near.level, n=near.calls, method="rare events: period of the target"
        )

    def dies(self) -> int:
        """Dies evaluated so far."""
        return sum(found.calls for found in self.failures.values())

    def doubts(self) -> tuple[str, ...]:
        """What the estimator says against its results, each once."""
        return tuple(dict.fromkeys(note for found in self.failures.values() for note in found.notes))


@storable
@dataclass(frozen=True, kw_only=True)
class TailAnswer:
    """What the tail of one width gives: yield at the period asked for, period that the target needs [s], dies, doubts."""

    chip_yield: Estimate
    period: Estimate
    dies: int
    doubts: tuple[str, ...]


def tail_answers(tails: list[Tail], target: float, slowest, workers: Workers) -> list[TailAnswer]:
    """The answers of every width. slowest : mean and sigma of each width's slowest path [s]"""
    items = {str(number): (tail, target, *guess) for number, (tail, guess) in enumerate(zip(tails, slowest))}
    return results(
        _answered, items, jobs=workers.jobs, backend=workers.backend, ledger=workers.ledger, name=f"tails of {slowest}"
    )


def _answered(item: tuple[Tail, float, float, float]) -> TailAnswer:
    tail, target, mean, sigma = item
    found = {"chip_yield": tail.chip_yield(), "period": tail.period_at(target, mean, sigma)}
    return TailAnswer(**found, dies=tail.dies(), doubts=tail.doubts())
