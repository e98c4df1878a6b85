"""Where a plan is computed: in this process, or on joblib's workers. The answer has the same bits either way.

Finished blocks can be kept in a ledger; a run that was stopped goes on from there, with the same bits in the end.
"""

from collections.abc import Callable, Iterable, Iterator, Mapping
from itertools import islice
from time import monotonic
from typing import Any

from joblib import Parallel, delayed
from joblib.externals.loky.process_executor import TerminatedWorkerError

from mc.groups import Groups
from mc.ledger import Part
from mc.plan import Block, Plan

CONFIGURED = "configured"  # backend: whatever joblib's parallel_config says around the call, for instance a cluster
LARGEST_BATCH = 8  # blocks a message to a worker
KEEP_EVERY = 0.2  # seconds between two transactions of a ledger: a kill costs so much work, and writing 1 % of the time
TRIES = 3  # times a block is begun before a worker that dies over it ends the run
Progress = Callable[[int, int], None]


class FewerAsked(ValueError):
    """A run of fewer samples than a ledger already holds: none can be taken out of a sum."""


class WorkerLost(RuntimeError):
    """A worker was ended by the system, again and again at the same work."""


def _quiet(done: int, total: int) -> None:
    """Progress that tells nobody."""


def run_blocks(task: Callable[[Block], Any], blocks: Iterable[Block], *, jobs=1, backend="loky", count=None):
    """Results of a task for every block, in block order, as they come.

    task : pure function of a block; must pickle for process backends
    jobs : number of workers; 1 runs here
    backend : any joblib backend, by name, or CONFIGURED
    count : how many blocks there are, where `blocks` does not tell
    """
    if jobs == 1:
        return (task(block) for block in blocks)
    count = len(list(blocks)) if count is None else count
    if backend == "multiprocessing":  # joblib hands its results on only when all are there: a few blocks at a time
        return _in_lots(task, iter(blocks), _parallel(jobs, backend), 4 * jobs)
    # several blocks a message, so that scheduling costs little, but enough messages to share the work evenly
    batch = max(1, min(LARGEST_BATCH, count // (6 * jobs)))
    parallel = _parallel(jobs, backend, return_as="generator", batch_size=batch, pre_dispatch=3 * batch * jobs)
    return parallel(delayed(_done)(task, block) for block in blocks)


def _done(task, item):
    """A task's result; a function with a name of its own, which a cluster wants, and the task an argument it sends once."""
    return task(item)


def _parallel(jobs: int, backend: str, **options) -> Parallel:
    return Parallel(n_jobs=jobs, **({} if backend == CONFIGURED else {"backend": backend}), **options)


def _in_lots(task, blocks, parallel, size):
    while lot := list(islice(blocks, size)):
        yield from parallel(delayed(_done)(task, block) for block in lot)


def run(
    task,
    plan: Plan,
    *,
    half_width=None,
    jobs=1,
    backend="loky",
    progress: Progress = _quiet,
    ledger: Part | None = None,
    name="run",
):
    """Run a plan to its end and return the sum of its tallies, added in block order.

    task : function of a Block that returns a tally, anything with `+`
    half_width : function of the summed tally, the half-width that `plan.precision` speaks of
    progress : called with samples done and samples aimed at, after every block
    ledger, name : where whole blocks are kept soon after they are added, and what this run is called there
    Returns (tally, samples). Raises WorkerLost, FewerAsked.
    """
    if plan.precision is not None and half_width is None:
        raise ValueError("a plan with a precision needs half_width, the measure that the precision speaks of")
    blocks, target, total = _kept(ledger, name)
    done, target = blocks * plan.block_size, target if plan.precision is not None and target else plan.first_target()
    if done > target:
        raise FewerAsked(f"{done} samples are kept already, {target} are asked for: fewer cannot be taken out")
    while True:
        with _Keeper(ledger, name, target) as keeper:
            for block, tally in _surviving(task, plan, done, target, jobs, backend):
                total = tally if total is None else total + tally
                done = block.number * plan.block_size + block.size
                if block.size == plan.block_size:  # a cut block would stand in a longer run's way
                    keeper.add(block, total, tally)
                progress(done, target)
        if plan.precision is None:
            return total, done
        further = plan.next_target(done, half_width(total))
        if further == target:
            return total, done
        target = further


def _kept(ledger: Part | None, name: str) -> tuple[int, int, Any]:
    """Blocks done, samples aimed at, and the sum so far."""
    if ledger is None:
        return 0, 0, None
    blocks, target, sums = ledger.sums(name)
    if not sums:
        return 0, target, None
    return blocks, target, sums[-1] if set(sums) == {-1} else Groups.of_parts(sums)


class _Keeper:
    """Writes what whole blocks changed, at most once in KEEP_EVERY seconds, and what is left in the end."""

    def __init__(self, ledger: Part | None, name: str, target: int):
        self._ledger, self._name, self._target = ledger, name, target
        self._total, self._changed, self._blocks, self._written = None, set(), 0, monotonic()

    def __enter__(self):
        return self

    def __exit__(self, *_):
        self._write()

    def add(self, block: Block, total, tally) -> None:
        """Take note of a block that was added to the sum."""
        if self._ledger is None:
            return
        self._total, self._blocks = total, block.number + 1
        self._changed |= set(tally.tallies) if isinstance(tally, Groups) else {-1}
        if monotonic() - self._written >= KEEP_EVERY:
            self._write()

    def _write(self) -> None:
        if self._changed:
            parts = self._total.parts() if isinstance(self._total, Groups) else {-1: self._total}
            changed = {number: parts[number] for number in sorted(self._changed)}
            self._ledger.keep(self._name, self._blocks, self._target, changed)
            self._changed, self._written = set(), monotonic()


def _surviving(task, plan: Plan, done: int, target: int, jobs: int, backend: str) -> Iterator[tuple[Block, Any]]:
    """Blocks and their tallies in order; what a worker was doing when the system ended it is done again."""
    tries = 0
    while done < target:
        blocks = plan.blocks(done, target)
        results = run_blocks(task, blocks, jobs=jobs, backend=backend, count=plan.count(done, target))
        try:
            for block, tally in zip(plan.blocks(done, target), results):
                done, tries = block.number * plan.block_size + block.size, 0
                yield block, tally
        except TerminatedWorkerError:
            tries += 1
            if tries == TRIES:
                raise WorkerLost(
                    f"a worker was ended by the system {TRIES} times at block {done // plan.block_size}; fewer workers need "
                    "less memory"
                ) from None


def results(
    task: Callable[[Any], Any],
    items: Mapping[str, Any],
    *,
    jobs=1,
    backend="loky",
    progress: Progress = _quiet,
    ledger: Part | None = None,
    name="results",
) -> list:
    """Results of a task for every item, in order; those kept in a ledger are not computed again.

    task : pure function of an item; must pickle for process backends; its result must be storable where a ledger is given
    items : by names that tell them apart for ever
    The rest as in `run`.
    """
    known = {key: ledger.result(name, key) for key in items} if ledger else dict.fromkeys(items)
    open_keys = [key for key in items if known[key] is None]
    progress(len(items) - len(open_keys), len(items))
    tries = 0
    while open_keys:
        try:
            found = _parallel(jobs, backend, return_as="generator")(
                delayed(_done)(task, items[key]) for key in tuple(open_keys)
            )
            for key, value in zip(tuple(open_keys), found):
                known[key] = value
                open_keys.remove(key)
                tries = 0
                if ledger:
                    ledger.keep_result(name, key, value)
                progress(len(items) - len(open_keys), len(items))
        except TerminatedWorkerError:
            tries += 1
            if tries == TRIES:
                raise WorkerLost(
                    f"a worker was ended by the system {TRIES} times at '{open_keys[0]}'; fewer workers need less memory"
                ) from None
    return [known[key] for key in items]
