"""Where a plan is computed: in this process, or on joblib's workers. The answer has the same bits either way."""

from collections.abc import Callable, Iterable
from typing import Any

from joblib import Parallel, delayed

from mc.plan import Block, Plan

LARGEST_BATCH = 8  # blocks a message to a worker
Progress = Callable[[int, int], None]


def _quiet(done: int, total: int) -> None:
    """Progress that tells nobody."""


def run_blocks(task: Callable[[Block], Any], blocks: Iterable[Block], *, jobs=1, backend="loky"):
    """Results of a task for every block, in block order, as they come.

    task : pure function of a block; must pickle for process backends
    jobs : number of workers; 1 runs here
    backend : any joblib backend, by name
    """
    if jobs == 1:
        return (task(block) for block in blocks)
    blocks = list(blocks)
    if backend == "multiprocessing":  # joblib hands its results on only when all are there: a few blocks at a time
        return _in_lots(task, blocks, Parallel(n_jobs=jobs, backend=backend), 4 * jobs)
    # several blocks a message, so that scheduling costs little, but enough messages to share the work evenly
    batch = max(1, min(LARGEST_BATCH, len(blocks) // (6 * jobs)))
    parallel = Parallel(
        n_jobs=jobs, backend=backend, return_as="generator", batch_size=batch, pre_dispatch=3 * batch * jobs
    )
    return parallel(delayed(task)(block) for block in blocks)


def _in_lots(task, blocks, parallel, size):
    for start in range(0, len(blocks), size):
        yield from parallel(delayed(task)(block) for block in blocks[start : start + size])


def run(task, plan: Plan, *, half_width=None, jobs=1, backend="loky", progress: Progress = _quiet):
    """Run a plan to its end and return the sum of its tallies, added in block order.

    task : function of a Block that returns a tally, anything with `+`
    half_width : function of the summed tally, the half-width that `plan.precision` speaks of
    progress : called with samples done and samples aimed at, after every block
    Returns (tally, samples).
    """
    if plan.precision is not None and half_width is None:
        raise ValueError("a plan with a precision needs half_width, the measure that the precision speaks of")
    done, target, total = 0, plan.first_target(), None
    while done < target:
        for block, tally in zip(
            plan.blocks(done, target), run_blocks(task, plan.blocks(done, target), jobs=jobs, backend=backend)
        ):
            total = tally if total is None else total + tally
            progress(block.number * plan.block_size + block.size, target)
        done = target
        if plan.precision is not None:
            target = plan.next_target(done, half_width(total))
    return total, done
