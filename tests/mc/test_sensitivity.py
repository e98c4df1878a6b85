"""Shares of a variance, from runs in which only some inputs vary."""

import numpy as np
import pytest
from scipy import stats

from mc.experiment import Experiment, Inputs
from mc.intervals import Summary
from mc.plan import Plan
from mc.runner import run
from mc.sensitivity import variance_share
from mc.tally import Grid, Moments

SIGMAS = {"doping": 3.0, "oxide": 4.0, "length": 12.0}
VARIANCE = 13.0**2


def additive(draws):
    """A sum of normals; an input that is left out stays at its middle."""
    size = len(next(iter(draws.values())))
    return sum((SIGMAS[name] * draws.get(name, np.zeros(size)) for name in SIGMAS), start=np.full(size, 100.0))


def summary(names, samples=100_000):
    """Summary of a run in which only `names` vary."""
    experiment = Experiment.prepare(additive, Inputs(seed=0, names=tuple(names)))
    return Summary(run(experiment, Plan(samples=samples, block_size=2**14))[0])


@pytest.fixture(scope="module")
def shares():
    whole = summary(SIGMAS)
    return {name: variance_share(summary([name]), whole) for name in SIGMAS}


def test_each_share_is_its_part_of_the_variance(shares):
    for name, share in shares.items():
        assert share.low < SIGMAS[name] ** 2 / VARIANCE < share.high
        assert (share.level, share.n) == (0.95, 100_000)


def test_shares_of_an_additive_model_sum_to_one(shares):
    assert sum(share.low for share in shares.values()) < 1 < sum(share.high for share in shares.values())
    # Derived: with common draws what is left over is twice the sample covariances of the parts, each of which has
    # standard error s t/sqrt(n).
    pairs = [(3, 4), (3, 12), (4, 12)]
    error = 2 * np.sqrt(sum((first * second) ** 2 for first, second in pairs) / 100_000) / VARIANCE
    assert abs(sum(share.value for share in shares.values()) - 1) < 5 * error


def test_everything_is_all_of_it():
    whole = summary(SIGMAS)
    assert variance_share(whole, whole).value == 1.0


def test_groups_of_inputs():
    share = variance_share(summary(["doping", "oxide"]), summary(SIGMAS))
    assert share.low < 25 / VARIANCE < share.high


def test_level_widens_the_interval():
    part, whole = summary(["oxide"]), summary(SIGMAS)
    narrow, wide = (variance_share(part, whole, level) for level in (0.5, 0.999))
    assert wide.low < narrow.low < narrow.value < narrow.high < wide.high


def test_the_interval_is_conservative():
    # 1000 repeats of 500 samples; the runs share draws, so coverage may only lie above the 95 % (less chance)
    random = np.random.default_rng(2)
    grid = Grid(center=np.zeros(1), scale=np.ones(1))
    held = 0
    for _ in range(1000):
        parts = random.standard_normal((2, 500)) * [[2.0], [1.0]]
        part, whole = (Summary(Moments.of(grid, [row[None]])) for row in (parts[0], parts.sum(axis=0)))
        share = variance_share(part, whole)
        held += share.low <= 0.8 <= share.high
    assert held / 1000 > 0.95 - 5 * np.sqrt(0.95 * 0.05 / 1000)
    assert held / 1000 > stats.norm.cdf(1.96)  # it is in fact far above, since four fifths of the whole are the part
