"""The ledger: what was kept comes back, a run goes on with the same bits, damage and rivals are noticed."""

import os
import signal
import sqlite3
import subprocess
import sys

import numpy as np
import pytest

from mc.codec import encode
from mc.experiment import Experiment, Inputs
from mc.groups import Grouped
from mc.ledger import Ledger, LedgerError, LedgerInUse
from mc.plan import Plan
from mc.runner import results, run

INPUTS = Inputs(seed=4, names=("a", "b"), slice_size=100)
SIZE = 250


def model(draws):
    return np.stack([draws["a"] + draws["b"] ** 2, np.exp(draws["b"])])


EXPERIMENT = Grouped(task=Experiment.prepare(model, INPUTS))


class Stopped(Exception):
    pass


def stopping(after):
    """Progress that stops a run after a number of blocks."""
    seen = []

    def progress(done, target):
        seen.append(done)
        if len(seen) == after:
            raise Stopped

    return progress


def half_width(groups):
    total = groups.total()
    return 3 * np.sqrt(total.central_moments()[1][0] / total.count)


def bits(groups):
    return [encode(part) for part in groups.parts().values()]


@pytest.fixture
def ledger(tmp_path):
    made = Ledger(tmp_path / "blocks.sqlite")
    yield made
    made.close()


PLANS = [
    Plan(samples=40 * SIZE, block_size=SIZE),
    Plan(samples=40 * SIZE + 99, block_size=SIZE),
    Plan(samples=10**6, block_size=SIZE, precision=0.045),
]


@pytest.mark.parametrize("plan", PLANS, ids=["whole", "cut", "precision"])
@pytest.mark.parametrize("after", [1, 4, 5, 39])
def test_a_stopped_run_goes_on_with_the_same_bits(ledger, plan, after):
    expected, samples = run(EXPERIMENT, plan, half_width=half_width)
    part, done = ledger.part("spread"), []
    with pytest.raises(Stopped):
        run(EXPERIMENT, plan, half_width=half_width, ledger=part, progress=stopping(after))
    found = run(EXPERIMENT, plan, half_width=half_width, ledger=part, progress=lambda *at: done.append(at))
    assert found[1] == samples and bits(found[0]) == bits(expected)
    assert done[0][0] == (after + 1) * SIZE, "a block that was kept was done again"


def test_a_longer_run_takes_over_a_shorter_one(ledger):
    part, done = ledger.part("spread"), []
    run(EXPERIMENT, Plan(samples=10 * SIZE + 7, block_size=SIZE), ledger=part)
    longer = Plan(samples=30 * SIZE, block_size=SIZE)
    found, _ = run(EXPERIMENT, longer, ledger=part, progress=lambda *at: done.append(at))
    assert bits(found) == bits(run(EXPERIMENT, longer)[0]) and len(done) == 20
    with pytest.raises(ValueError, match="fewer"):
        run(EXPERIMENT, Plan(samples=SIZE, block_size=SIZE), ledger=part)


def test_a_tally_without_groups_goes_on_too(ledger):
    task, plan, part = EXPERIMENT.task, Plan(samples=12 * SIZE, block_size=SIZE), ledger.part("spread")
    with pytest.raises(Stopped):
        run(task, plan, ledger=part, progress=stopping(5))
    assert encode(run(task, plan, ledger=part)[0]) == encode(run(task, plan)[0])


def test_runs_and_parts_are_kept_apart(ledger):
    plan = Plan(samples=3 * SIZE, block_size=SIZE)
    run(EXPERIMENT, plan, ledger=ledger.part("one"), name="a")
    for part, name in (("one", "b"), ("two", "a")):
        assert ledger.part(part).sums(name) == (0, 0, {})
    assert ledger.part("one").sums("a")[:2] == (3, 3 * SIZE)


def test_single_results(ledger):
    calls = []

    def task(value):
        calls.append(value)
        return {"value": np.array([value, 2.0])}

    items = {"first": 1.0, "second": 5.0}
    found = results(task, items, ledger=ledger.part("loss"), name="widths")
    again = results(task, items | {"third": 7.0}, ledger=ledger.part("loss"), name="widths")
    assert calls == [1.0, 5.0, 7.0]
    assert [each["value"][0] for each in again] == [1.0, 5.0, 7.0] and len(found) == 2
    assert ledger.part("loss").result("other", "first") is None


def test_what_it_says_of_itself(ledger):
    ledger.describe({"fingerprint": "f", "version": "1"})
    assert ledger.about() == {"fingerprint": "f", "version": "1"}
    run(EXPERIMENT, Plan(samples=SIZE, block_size=SIZE), ledger=ledger.part("one"))
    ledger.clear()
    assert ledger.about() == {} and ledger.part("one").sums("run") == (0, 0, {})


def test_a_second_process_is_refused(tmp_path, ledger):
    code = f"from mc.ledger import Ledger; Ledger({str(tmp_path / 'blocks.sqlite')!r})"
    finished = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True)
    assert "LedgerInUse" in finished.stderr
    with pytest.raises(LedgerInUse):
        Ledger(tmp_path / "blocks.sqlite")


@pytest.mark.parametrize("damage", ["garbage", "cut", "scrambled"])
def test_damage_is_noticed(tmp_path, damage):
    path = tmp_path / "blocks.sqlite"
    ledger = Ledger(path)
    run(EXPERIMENT, Plan(samples=20 * SIZE, block_size=SIZE), ledger=ledger.part("one"))
    ledger.close()
    data = bytearray(path.read_bytes())
    if damage == "garbage":
        path.write_bytes(b"not a database at all" * 100)
    elif damage == "cut":
        path.write_bytes(data[: len(data) // 2])
    else:
        connection = sqlite3.connect(path)
        (value,) = connection.execute("select value from sums limit 1").fetchone()
        connection.execute("update sums set value = ?", (value[:-1] + bytes([value[-1] ^ 1]),))
        connection.commit()
        connection.close()
    with pytest.raises(LedgerError, match="damaged"):
        Ledger(path).part("one").sums("run")


def test_a_folder_that_cannot_be_written(tmp_path):
    with pytest.raises(LedgerError, match="cannot be written"):
        Ledger(tmp_path / "missing" / "blocks.sqlite")


KILLED = """
import os, signal, sys
sys.path.insert(0, {folder!r})
from test_ledger import EXPERIMENT, SIZE
from mc.ledger import Ledger
from mc.plan import Plan
import mc.runner
from mc.runner import run
mc.runner.KEEP_EVERY = 0
def progress(done, target):
    if done == 17 * SIZE:
        os.kill(os.getpid(), signal.SIGKILL)
run(EXPERIMENT, Plan(samples=40 * SIZE, block_size=SIZE), ledger=Ledger({path!r}).part("one"), progress=progress)
"""


def test_a_killed_process_leaves_whole_blocks(tmp_path):
    path = str(tmp_path / "blocks.sqlite")
    code = KILLED.format(folder=os.path.dirname(__file__), path=path)
    killed = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True)
    assert killed.returncode == -signal.SIGKILL, killed.stderr
    part, plan = Ledger(path).part("one"), Plan(samples=40 * SIZE, block_size=SIZE)
    assert part.sums("run")[0] == 17
    assert bits(run(EXPERIMENT, plan, ledger=part)[0]) == bits(run(EXPERIMENT, plan)[0])
