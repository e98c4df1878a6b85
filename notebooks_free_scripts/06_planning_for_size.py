"""How long would a very large run take on many workers, and what would hold it up? Predicted from what is measured here.

Run: python notebooks_free_scripts/06_planning_for_size.py            (about half a minute)
     python notebooks_free_scripts/06_planning_for_size.py --short    (a few seconds: same code, fewer blocks)

A worker computes blocks; the one process that adds their tallies receives, adds and keeps them. The first part is shared
by all workers, the second is not: where it is the larger one, more workers do not help, larger blocks do.
"""

import pickle
import sys
import tempfile
from importlib.resources import files
from pathlib import Path
from time import perf_counter

import numpy as np

from mc.experiment import Experiment, GroupedExperiment, Inputs
from mc.ledger import Ledger
from mc.plan import Block, Plan
from mc.runner import run
from studies import spread
from studies.population import Population
from studies.process_file import load_process

SHORT = "--short" in sys.argv
BLOCKS = 40 if SHORT else 400
WIDTHS = np.geomspace(0.12, 2, 11)
EVALUATIONS = 1e12
NETWORK = 1e8  # bytes a second into the process that adds: a slow gigabit line; an assumption


def task():
    """The spread study's own task: eleven widths on the same draws."""
    population = Population(load_process(files("studies.examples") / "option_a.toml"), "n")
    names = tuple(item.name for item in population.inputs if item.cause not in spread.WITHOUT_EFFECT)
    model = spread.Thresholds(
        population=population,
        geometries=tuple(population.geometry(width, 0.13) for width in WIDTHS),
        drain_voltage=0.05,
        groups=(names,),
    )
    return GroupedExperiment(experiment=Experiment.prepare(model, Inputs(seed=1, names=names, copula=population.copula)))


def seconds(work, repeats):
    """Seconds of one repeat."""
    started = perf_counter()
    for number in range(repeats):
        work(number)
    return (perf_counter() - started) / repeats


ours = task()
tallies = [ours(Block(number, spread.BLOCK)) for number in range(8)]
computing = seconds(lambda number: ours(Block(number, spread.BLOCK)), max(4, BLOCKS // 20))
message = pickle.dumps(tallies[0])  # joblib's own way between processes of one run; never read from a file
unpacking = seconds(lambda _: pickle.loads(message), BLOCKS)
plan = Plan(samples=BLOCKS * spread.BLOCK, block_size=spread.BLOCK)
with tempfile.TemporaryDirectory() as folder:
    ledger = Ledger(Path(folder) / "blocks.sqlite")
    started = perf_counter()
    run(lambda block: tallies[block.number % 8], plan, ledger=ledger.part("size"))  # nothing but adding and keeping
    adding = (perf_counter() - started) / BLOCKS
    ledger.close()

per_block = spread.BLOCK * len(WIDTHS)
blocks = EVALUATIONS / per_block
print(f"a block: {per_block} device evaluations in {1e3 * computing:.1f} ms, a tally of {len(message) / 1e3:.0f} kB;")
print(f"adding and keeping it takes {1e3 * (adding + unpacking):.2f} ms of the one process that adds")
print(f"{EVALUATIONS:.0e} device evaluations are {blocks:.2g} blocks")
serial = blocks * max(adding + unpacking, len(message) / NETWORK)
what = "the network into the adding process" if len(message) / NETWORK > adding + unpacking else "the adding process"
for workers in (10, 100, 1000):
    shared = blocks * computing / workers
    limit = "the workers" if shared >= serial else what
    print(f"{workers:5d} workers: {max(shared, serial) / 3600:8.2f} h, held up by {limit}")
print(f"more than {computing / (serial / blocks):.0f} workers do not help; blocks k times larger let k times more of them in")
assert computing > 3 * (adding + unpacking), "adding costs as much as computing: blocks are too small"
