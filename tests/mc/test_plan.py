"""Plans: blocks cover exactly, longer runs extend shorter ones, and precision is asked of whole rounds."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mc.plan import Block, Plan

counts = st.integers(1, 5000)


@settings(deadline=None, derandomize=True)
@given(samples=counts, block_size=st.integers(1, 700))
def test_blocks_cover_exactly(samples, block_size):
    plan = Plan(samples=samples, block_size=block_size)
    blocks = list(plan.blocks(0, samples))
    assert len(blocks) == plan.count(0, samples)
    assert [block.number for block in blocks] == list(range(len(blocks)))
    assert all(block.size == block_size for block in blocks[:-1])
    assert 1 <= blocks[-1].size <= block_size
    assert sum(block.size for block in blocks) == samples


@settings(deadline=None, derandomize=True)
@given(shorter=counts, longer=counts, block_size=st.integers(1, 700))
def test_a_longer_run_starts_with_the_shorter_ones_blocks(shorter, longer, block_size):
    shorter, longer = sorted((shorter, longer))
    plan = Plan(samples=longer, block_size=block_size)
    whole = shorter // block_size
    assert list(plan.blocks(0, longer))[:whole] == list(plan.blocks(0, shorter))[:whole]
    # going on after whole blocks gives what one round would have given
    joined = [*plan.blocks(0, whole * block_size), *plan.blocks(whole * block_size, longer)]
    assert joined == list(plan.blocks(0, longer))


def test_a_fixed_number_is_one_round():
    plan = Plan(samples=1050, block_size=100)
    assert plan.first_target() == 1050
    assert plan.next_target(1050, half_width=np.inf) == 1050
    assert list(plan.blocks(0, 1050))[-1] == Block(10, 50)


def test_a_precision_starts_with_the_pilot():
    assert Plan(samples=10**6, block_size=100, precision=0.1, minimum_blocks=3).first_target() == 300
    assert Plan(samples=250, block_size=100, precision=0.1, minimum_blocks=3).first_target() == 250


PLAN = Plan(samples=10_000, block_size=100, precision=0.1)


@pytest.mark.parametrize(
    "done, half_width, target",
    [
        (400, 0.1, 400),  # reached
        (400, 0.05, 400),  # more than reached
        (400, 0.0, 400),
        (400, 0.2, 1700),  # twice too wide: four times the samples, 5 % more, whole blocks
        (400, 0.1001, 500),  # a hair too wide: one block more at least
        (9900, 0.1001, 10_000),
        (400, 5.0, 10_000),  # never above what may be spent
        (400, np.inf, 10_000),
        (10_000, 0.2, 10_000),  # all spent
    ],
)
def test_next_target(done, half_width, target):
    assert PLAN.next_target(done, half_width) == target


@settings(deadline=None, derandomize=True)
@given(blocks=st.integers(1, 99), ratio=st.floats(0.01, 1e6), samples=st.integers(9901, 10**6))
def test_targets_are_whole_blocks_forward(blocks, ratio, samples):
    plan = Plan(samples=samples, block_size=100, precision=1.0)
    done = blocks * 100
    target = plan.next_target(done, ratio)
    assert target == done if ratio <= 1 else done < target <= samples
    assert target % 100 == 0 or target == samples
    # by the root law the target reaches the precision, unless all is spent
    assert target == samples or ratio * np.sqrt(done / target) <= 1


@pytest.mark.parametrize("name", ["samples", "block_size", "minimum_blocks"])
def test_counts_below_one_are_refused(name):
    with pytest.raises(ValueError, match=f"{name}.* 1 or more"):
        Plan(**({"samples": 10, "block_size": 10} | {name: 0}))


@pytest.mark.parametrize("precision", [0.0, -1.0, np.nan])
def test_nonsense_precision_is_refused(precision):
    with pytest.raises(ValueError, match="precision must be above 0"):
        Plan(samples=10, block_size=10, precision=precision)
