"""A cluster of separate processes on this machine: the same bits as alone, also when a worker is killed in mid-run."""

import os
import signal
import threading
import time

import pytest
from distributed import Client, LocalCluster

from mc.ledger import Ledger
from studies import cluster
from studies.demo import write_demo

JOB = """
title = "cluster"
[settings]
seed = 7
samples = 300_000
[process]
option_a = "option_a.toml"
[[question]]
ask = "spread"
process = "option_a"
device = "n"
length_um = 0.13
width_um = [0.12, 0.2, 0.4]
"""


@pytest.fixture(scope="module")
def three_workers():
    with LocalCluster(n_workers=3, threads_per_worker=1, processes=True, dashboard_address=None) as made:
        yield made


@pytest.fixture
def job(tmp_path):
    write_demo(tmp_path)
    (tmp_path / "job.toml").write_text(JOB)
    return tmp_path / "job.toml"


def tables(folder):
    return {path.name: path.read_bytes() for path in folder.glob("*.csv")}


def test_the_same_bits_as_alone_though_a_worker_is_killed(job, tmp_path, widthwise, three_workers):
    address = three_workers.scheduler_address
    with Client(address) as client:
        victim = next(iter(client.run(os.getpid).values()))
    killed = []

    def kill_in_mid_run():
        while not (tmp_path / "many" / "blocks.sqlite").exists():
            time.sleep(0.01)
        time.sleep(0.3)
        os.kill(victim, signal.SIGKILL)
        killed.append((tmp_path / "many" / "spread.csv").exists())

    killer = threading.Thread(target=kill_in_mid_run)
    killer.start()
    finished = widthwise("run", job, "--samples", 2_000_000, "--out", tmp_path / "many", "--cluster", address)
    killer.join()
    assert finished.code == 0, finished.err
    assert killed == [False], "the run was over before the worker was killed"
    assert widthwise("run", job, "--samples", 2_000_000, "--out", tmp_path / "alone", "--jobs", 1).code == 0
    assert tables(tmp_path / "many") == tables(tmp_path / "alone")


def test_a_scheduler_file_serves_too(job, tmp_path, widthwise, three_workers):
    with Client(three_workers.scheduler_address) as client:
        client.wait_for_workers(3, timeout=60)
        client.write_scheduler_file(str(tmp_path / "scheduler.json"))
    finished = widthwise("run", job, "--samples", 20_000, "--cluster", tmp_path / "scheduler.json")
    assert finished.code == 0, finished.err


def test_what_is_kept_on_one_machine_goes_on_on_many(job, tmp_path, widthwise, three_workers):
    folder = tmp_path / "out"
    assert widthwise("run", job, "--samples", 100_000, "--out", folder, "--jobs", 1).code == 0
    ledger = Ledger(folder / "blocks.sqlite")
    assert ledger.part("spread_1_option_a").sums("devices")[0] == 1
    ledger.close()
    assert widthwise("run", job, "--out", folder, "--cluster", three_workers.scheduler_address).code == 0
    assert widthwise("run", job, "--out", tmp_path / "alone", "--jobs", 1).code == 0
    assert tables(folder) == tables(tmp_path / "alone")


def test_nobody_there(job, widthwise, monkeypatch):
    monkeypatch.setattr(cluster, "PATIENCE", "1s")
    started = time.monotonic()
    finished = widthwise("run", job, "--cluster", "tcp://127.0.0.1:9")
    assert finished.code == 2 and "no scheduler answers there" in finished.err and finished.err.count("\n") == 1
    assert time.monotonic() - started < 30


def test_another_version_is_refused(job, widthwise, three_workers, monkeypatch):
    monkeypatch.setattr(cluster, "__version__", "99")
    finished = widthwise("run", job, "--cluster", three_workers.scheduler_address)
    assert finished.code == 2 and "this is 99" in finished.err and finished.err.count("\n") == 1
