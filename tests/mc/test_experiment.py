"""Experiments: a model meets its draws, the pilot is part of the run, memory does not grow with the samples."""

import gc
import tracemalloc

import numpy as np
import pytest

from mc.correlation import Copula
from mc.experiment import PILOT, Experiment, GroupedExperiment, Inputs, LawModel
from mc.intervals import Summary
from mc.laws import Normal, Uniform
from mc.plan import Block, Plan
from mc.runner import run
from mc.tally import Grid, Moments

LAWS = {"load": Normal(mean=10.0, sigma=2.0), "share": Uniform(low=0.0, high=1.0)}
INPUTS = Inputs(seed=0, names=("load", "share"))


def power(values):
    """One output, shape (n,)."""
    return values["load"] * values["share"]


def both(values):
    """Two outputs, shape (2, n)."""
    return np.stack([values["load"], power(values)])


def test_exactly_the_named_inputs_are_handed_on():
    # a partner that came along would vary in a run that is to show what the others do without it
    inputs = Inputs(seed=0, names=("load",), copula=Copula.of_pairs([("share", "load", 0.5)]))
    assert set(next(inputs.slices(Block(0, 10)))) == {"load"}


def test_law_model_hands_on_values_of_its_laws():
    draws = next(INPUTS.slices(Block(0, 50)))
    values = LawModel(model=both, laws=LAWS)(draws)
    load, share = (LAWS[name].from_normal(draws[name]) for name in ("load", "share"))
    assert np.array_equal(values, [load, load * share])


def test_a_product_of_independent_laws():
    experiment = Experiment.prepare(LawModel(model=both, laws=LAWS), INPUTS)
    tally, samples = run(experiment, Plan(samples=400_000, block_size=2**16))
    assert samples == tally.count == 400_000
    # means multiply; variance of a product of independent factors: E[x^2] E[y^2] - (E[x] E[y])^2
    load, product = Summary(tally, 0), Summary(tally, 1)
    sigma = np.sqrt(104 / 3 - 25)
    assert abs(load.mean().value - 10) < 5 * 2 / np.sqrt(samples)
    assert abs(product.mean().value - 5) < 5 * sigma / np.sqrt(samples)
    assert abs(product.sigma().value / sigma - 1) < 5 * np.sqrt((product.kurtosis - 1) / 4 / samples)


def test_the_pilot_is_the_beginning_of_block_zero():
    experiment = Experiment.prepare(LawModel(model=power, laws=LAWS), INPUTS)
    summary = Summary(experiment(Block(0, PILOT)))
    assert experiment.grid.center[0] == pytest.approx(summary.mean().value, rel=1e-12)
    # so the first power of the pilot's own samples is nothing but rounding
    assert abs(experiment(Block(0, PILOT)).powers[0, 0]) < 1e-9


def test_a_single_output_may_be_flat():
    flat = Experiment.prepare(LawModel(model=power, laws=LAWS), INPUTS)
    deep = Experiment.prepare(LawModel(model=both, laws=LAWS), INPUTS)
    assert np.array_equal(flat(Block(2, 999)).powers[0], deep(Block(2, 999)).powers[1])


def test_moments_may_be_all_that_is_kept():
    tally = Experiment.prepare(LawModel(model=power, laws=LAWS), INPUTS, tally=Moments)(Block(0, 999))
    assert type(tally) is Moments


def logarithm(draws):
    """Not finite for half of the draws."""
    with np.errstate(invalid="ignore"):
        return np.log(draws["load"])


def test_a_model_that_is_not_finite_is_refused():
    # beside the pilot too: nothing may be prepared and then counted without the hole
    experiment = Experiment.prepare(logarithm, INPUTS)
    with pytest.raises(FloatingPointError, match="output 0 of a model is not finite"):
        experiment(Block(1, 100))


def peak_bytes(samples):
    """Most memory held at once during a run."""
    experiment = Experiment.prepare(LawModel(model=power, laws=LAWS), INPUTS)
    gc.collect()  # what other tests left in cycles must not be freed in mid-run
    tracemalloc.start()
    run(experiment, Plan(samples=samples, block_size=2**14))
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    return peak


def test_memory_does_not_grow_with_the_samples():
    # 8 and 64 blocks; a run of one or two has not yet held a sum beside a block and their new sum
    assert peak_bytes(2**20) < 1.1 * peak_bytes(2**17)


def test_what_is_not_finite_names_the_inputs_furthest_out():
    def model(draws):
        return np.where(draws["a"] > 2.5, np.nan, draws["a"] + draws["b"] + draws["c"] + draws["d"])

    inputs = Inputs(seed=1, names=("a", "b", "c", "d"), slice_size=50)
    experiment = Experiment(model=model, inputs=inputs, grid=Grid(center=np.zeros(1), scale=np.ones(1)))
    with pytest.raises(FloatingPointError, match=r"not finite at .*a = \+[23]\.\d\d sigma") as raised:
        experiment(Block(0, 5000))
    assert str(raised.value).count(" sigma") == 3


def test_groups_of_slices_add_up_to_the_blocks():
    inputs = Inputs(seed=1, names=("a",), slice_size=100)
    experiment = Experiment.prepare(lambda draws: draws["a"], inputs)
    grouped, samples = run(GroupedExperiment(experiment=experiment), Plan(samples=4250, block_size=800))
    plain, _ = run(experiment, Plan(samples=4250, block_size=800))
    total = grouped.total()
    assert samples == total.count == grouped.group_sizes().sum() == 4250 and len(grouped.sizes) == 32
    assert np.array_equal(total.cells, plain.cells) and np.allclose(total.powers, plain.powers, rtol=1e-12)
    with pytest.raises(FloatingPointError, match=r"not finite at a = "):
        bad = Experiment(model=lambda draws: draws["a"] / 0.0 * 0.0, inputs=inputs, grid=experiment.grid)
        with np.errstate(all="ignore"):
            GroupedExperiment(experiment=bad)(Block(0, 100))
