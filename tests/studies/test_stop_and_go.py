"""A run that is stopped at any moment goes on from there and ends with the same bytes."""

import random
import signal
import sqlite3
import subprocess
import sys
import time

import pytest

from mc.ledger import Ledger
from studies.demo import write_demo
from studies.keeping import LEDGER

JOB = """
title = "stop and go"
[settings]
seed = 7
samples = SAMPLES
[process]
option_a = "option_a.toml"
option_b = "option_b.toml"
[[question]]
ask = "spread"
process = ["option_a", "option_b"]
device = "n"
length_um = 0.13
width_um = [0.12, 0.4]
[[question]]
ask = "timing"
process = "option_a"
length_um = 0.13
width_um = [0.16]
period_ps = 7000
paths = 1500
stages = 40
wire_capacitance_ff = 0.4
supply_v = 0.6
[[question]]
ask = "pair"
process = "option_a"
device = "n"
kind = "differential pair"
limit_mv = 3
pairs = 2
yield = 0.9
length_um = 1
gm_over_i_per_v = 18
"""


@pytest.fixture
def job(tmp_path):
    write_demo(tmp_path)

    def write(samples):
        (tmp_path / "job.toml").write_text(JOB.replace("SAMPLES", str(samples)))
        return tmp_path / "job.toml"

    return write


def tables(folder):
    return {path.name: path.read_bytes() for path in folder.glob("*.csv")}


def command(job, folder, *more):
    return [sys.executable, "-m", "studies.cli", "run", str(job), "--out", str(folder), "--jobs", "1", *more]


def blocks_done(folder):
    """Blocks that the folder's ledger holds."""
    ledger = Ledger(folder / LEDGER)
    try:
        return sum(blocks for (blocks,) in ledger._read("select blocks from progress"))
    finally:
        ledger.close()


def test_five_kills_at_random_moments(job, tmp_path, widthwise):
    path, folder, dice = job(20_000), tmp_path / "killed", random.Random(3)
    assert widthwise("run", path, "--out", tmp_path / "whole", "--jobs", 1).code == 0
    kills, kept = 0, []
    while kills < 5:
        running = subprocess.Popen(command(path, folder), stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        while running.poll() is None and not (folder / LEDGER).exists():
            time.sleep(0.01)
        time.sleep(dice.uniform(0.1, 0.5))
        running.send_signal(signal.SIGKILL)
        if running.wait() == 0:
            break  # it was quicker than the killer
        kills += 1
        kept.append(blocks_done(folder))
    assert kept == sorted(kept) and kills >= 2, "the runs ended before they could be killed"
    finished = subprocess.run(command(path, folder), capture_output=True, text=True)
    assert finished.returncode == 0, finished.stderr
    assert tables(folder) == tables(tmp_path / "whole")


def test_a_longer_run_takes_over_the_shorter_one_s_blocks(job, tmp_path, widthwise):
    assert widthwise("run", job(17_000), "--out", tmp_path / "grown", "--jobs", 1).code == 0
    before = blocks_done(tmp_path / "grown")
    assert widthwise("run", job(25_000), "--out", tmp_path / "grown", "--jobs", 1).code == 0
    assert widthwise("run", job(25_000), "--out", tmp_path / "whole", "--jobs", 1).code == 0
    assert tables(tmp_path / "grown") == tables(tmp_path / "whole") and blocks_done(tmp_path / "grown") > before


def test_a_shorter_run_is_refused_unless_replace(job, tmp_path, widthwise):
    widthwise("run", job(17_000), "--out", tmp_path / "out", "--jobs", 1)
    finished = widthwise("run", job(2000), "--out", tmp_path / "out", "--jobs", 1)
    assert finished.code == 2 and finished.err.count("\n") == 1
    assert "samples are kept already" in finished.err and "--replace" in finished.err
    assert widthwise("run", job(2000), "--out", tmp_path / "out", "--jobs", 1, "--replace").code == 0


@pytest.mark.parametrize("change", ["seed = 8", 'title = "stop and go"\n# a comment'])
def test_what_was_changed_meanwhile_is_noticed(job, tmp_path, widthwise, change):
    path = job(2000)
    widthwise("run", path, "--out", tmp_path / "out", "--jobs", 1)
    for name in ("record.json",):
        (tmp_path / "out" / name).unlink()  # as a run leaves it that was killed
    old = change.split("=")[0]
    text = "\n".join(change if line.startswith(old) else line for line in path.read_text().splitlines())
    path.write_text(text)
    code = widthwise("run", path, "--out", tmp_path / "out", "--jobs", 1).code
    assert code == (2 if "seed" in change else 0)


def test_another_version_is_noticed(job, tmp_path, widthwise, monkeypatch):
    path = job(2000)
    widthwise("run", path, "--out", tmp_path / "out", "--jobs", 1)
    monkeypatch.setattr("studies.job.__version__", "99")
    finished = widthwise("run", path, "--out", tmp_path / "out", "--jobs", 1)
    assert finished.code == 2 and "add --replace" in finished.err


def test_a_second_run_in_the_same_folder_is_refused(job, tmp_path, widthwise):
    path, folder = job(2000), tmp_path / "out"
    widthwise("run", path, "--out", folder, "--jobs", 1)
    ledger = Ledger(folder / LEDGER)
    finished = widthwise("run", path, "--out", folder, "--jobs", 1)
    ledger.close()
    assert (finished.code, finished.err) == (2, f"{folder}: another run is using it\n")


@pytest.mark.parametrize("damage", ["cut", "scrambled", "garbage"])
def test_a_damaged_ledger_is_said_and_replaced(job, tmp_path, widthwise, damage):
    path, folder = job(17_000), tmp_path / "out"
    widthwise("run", path, "--out", folder, "--jobs", 1)
    ledger = folder / LEDGER
    if damage == "scrambled":
        connection = sqlite3.connect(ledger)
        connection.execute("update sums set value = substr(value, 1, length(value) - 1)")
        connection.commit()
        connection.close()
    else:
        data = ledger.read_bytes()
        ledger.write_bytes(data[: len(data) // 2] if damage == "cut" else b"garbage" * 1000)
    finished = widthwise("run", path, "--out", folder, "--jobs", 1)
    assert finished.code == 2 and finished.err.count("\n") == 1 and f"{LEDGER} is damaged" in finished.err
    assert widthwise("run", path, "--out", folder, "--jobs", 1, "--replace").code == 0


def test_an_interrupted_run_says_how_to_go_on(job, tmp_path, widthwise, monkeypatch):
    path, folder = job(70_000), tmp_path / "out"  # a whole block of the first question
    blocks = []

    def interrupted(self, *arguments):
        blocks.append(arguments)
        raise KeyboardInterrupt

    with monkeypatch.context() as patch:
        patch.setattr("studies.chip.Stage.path_cumulants", interrupted)
        finished = widthwise("run", path, "--out", folder, "--jobs", 1)
    assert (finished.code, finished.err) == (130, "stopped; the same command goes on from here\n") and blocks
    assert blocks_done(folder) > 0
