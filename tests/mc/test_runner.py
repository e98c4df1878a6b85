"""The answer has the same bits wherever it was computed."""

import os
import signal
import sys
import time
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

try:
    from joblib.externals import cloudpickle  # older joblibs carry their own
except ImportError:
    import cloudpickle

from mc.correlation import Copula
from mc.experiment import Experiment, Inputs
from mc.intervals import Summary
from mc.plan import Block, Plan
from mc.runner import WorkerLost, results, run, run_blocks

# A worker process cannot count on finding a test module by its name, so what is defined here travels by value.
cloudpickle.register_pickle_by_value(sys.modules[__name__])

PLACES = [(1, "loky"), (2, "loky"), (4, "loky"), (2, "threading"), (4, "threading")]
PLAN = Plan(samples=70_000, block_size=6_000)


def skewed(draws):
    """Two outputs of order one and of order 1e6, whose sums do round."""
    return np.stack([np.exp(0.3 * draws["width"]) + draws["length"] / 3, 1e6 + draws["length"]])


def skewed_and_late(draws):
    """The same, but blocks take very different times, and no order of theirs."""
    time.sleep(0.02 * abs(float(draws["width"][0])))
    return skewed(draws)


def experiment(model=skewed):
    inputs = Inputs(seed=0, names=("width", "length"), copula=Copula.of_pairs([("width", "length", 0.4)]))
    return Experiment.prepare(model, inputs)


def fingerprint(tally):
    """Every bit of a tally."""
    arrays = (tally.powers, tally.cells, tally.smallest, tally.largest, tally.grid.center, tally.grid.scale)
    return tally.count, *(array.tobytes() for array in arrays)


@pytest.fixture(scope="module")
def alone():
    """The run in this process that all others must repeat."""
    return fingerprint(run(experiment(), PLAN)[0])


@pytest.mark.parametrize("jobs, backend", PLACES)
def test_same_bits_anywhere(alone, jobs, backend):
    tally, samples = run(experiment(), PLAN, jobs=jobs, backend=backend)
    assert samples == 70_000
    assert fingerprint(tally) == alone


@pytest.mark.parametrize("jobs, backend", [(2, "loky"), (4, "threading")])
def test_same_bits_in_any_order_of_finishing(alone, jobs, backend):
    assert fingerprint(run(experiment(skewed_and_late), PLAN, jobs=jobs, backend=backend)[0]) == alone


finished = []


def later_blocks_first(block):
    """A tally that shows the order of adding: early blocks take longest. Threads share `finished`."""
    time.sleep(0.05 * max(4 - block.number, 0))
    finished.append(block.number)
    return (block.number,)


def test_blocks_are_added_in_order_though_later_ones_finish_first():
    finished.clear()
    order, _ = run(later_blocks_first, Plan(samples=60, block_size=10), jobs=4, backend="threading")
    assert order == (0, 1, 2, 3, 4, 5)
    assert sorted(finished) == list(order) and finished != list(order)


def test_a_longer_run_contains_the_shorter_one():
    short, long = (run(experiment(), Plan(samples=samples, block_size=6_000))[0] for samples in (12_000, 24_000))
    rest = list(run_blocks(experiment(), [Block(2, 6_000), Block(3, 6_000)]))
    assert fingerprint(short + rest[0] + rest[1]) == fingerprint(long)


@pytest.mark.parametrize("jobs, backend", [(1, "loky"), (2, "loky"), (2, "threading")])
def test_progress_is_told_after_every_block(jobs, backend):
    told = []
    run(experiment(), PLAN, jobs=jobs, backend=backend, progress=lambda *counts: told.append(counts))
    assert told == [(min(block * 6_000, 70_000), 70_000) for block in range(1, 13)]


def test_silent_by_default(capfd):
    run(experiment(), PLAN, jobs=2)
    assert capfd.readouterr() == ("", "")


def fails_in_block_three(block):
    """A task that fails once."""
    if block.number == 3:
        raise FloatingPointError("output 0 of a model is not finite")
    return 0


@pytest.mark.parametrize("jobs, backend", [(1, "loky"), (2, "loky"), (2, "threading")])
def test_a_failing_block_fails_the_run(jobs, backend):
    with pytest.raises(FloatingPointError, match="not finite"):
        run(fails_in_block_three, PLAN, jobs=jobs, backend=backend)


def half_width(tally):
    """Half-width of the first output's mean."""
    mean = Summary(tally).mean()
    return (mean.high - mean.low) / 2


PRECISE = Plan(samples=10**7, block_size=2_000, precision=0.004)


@pytest.mark.parametrize("jobs", [1, 2])
def test_a_precision_is_reached_without_waste(jobs):
    told = []
    tally, samples = run(
        experiment(), PRECISE, half_width=half_width, jobs=jobs, progress=lambda *counts: told.append(counts)
    )
    assert half_width(tally) <= PRECISE.precision
    assert samples == tally.count < PRECISE.samples
    # the root law: 5 % are added on purpose, and the pilot's variance has an error of its own
    pilot = 4 * PRECISE.block_size
    needed = samples * (half_width(tally) / PRECISE.precision) ** 2
    assert pilot < needed <= samples < 1.2 * needed
    assert told[3] == (pilot, pilot)
    assert told[-1] == (samples, samples)


def test_a_precision_driven_run_is_the_same_for_any_workers():
    runs = [run(experiment(), PRECISE, half_width=half_width, jobs=jobs) for jobs in (1, 2)]
    assert runs[0][1] == runs[1][1]
    assert fingerprint(runs[0][0]) == fingerprint(runs[1][0])
    # and the same as a fixed run of that length
    assert fingerprint(run(experiment(), Plan(samples=runs[0][1], block_size=2_000))[0]) == fingerprint(runs[0][0])


def test_a_precision_out_of_reach_stops_at_the_limit():
    plan = Plan(samples=15_000, block_size=2_000, precision=1e-6)
    tally, samples = run(experiment(), plan, half_width=half_width)
    assert samples == tally.count == 15_000
    assert half_width(tally) > plan.precision


@dataclass(frozen=True)
class Fragile:
    """A task whose worker is ended by the system at one block, until a file says that this has happened often enough."""

    folder: Path
    times: int

    def __call__(self, block):
        marks = list(self.folder.iterdir())
        if block.number == 5 and len(marks) < self.times:
            (self.folder / str(len(marks))).touch()
            os.kill(os.getpid(), signal.SIGKILL)
        return np.array([block.number, block.size])


def test_a_lost_workers_blocks_are_done_again(tmp_path):
    plan = Plan(samples=100, block_size=10)
    total, samples = run(Fragile(tmp_path, 2), plan, jobs=2)
    assert samples == 100 and np.array_equal(total, [45, 100])


def test_a_block_that_ends_every_worker_ends_the_run(tmp_path):
    with pytest.raises(WorkerLost, match="ended by the system 3 times at block"):
        run(Fragile(tmp_path, 99), Plan(samples=100, block_size=10), jobs=2)


def test_a_lost_workers_results_are_done_again(tmp_path):
    items = {str(number): Block(number, 1) for number in range(8)}
    found = results(Fragile(tmp_path, 1), items, jobs=2)
    assert [int(each[0]) for each in found] == list(range(8))
