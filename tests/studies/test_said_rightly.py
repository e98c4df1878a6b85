"""What was once said wrongly: the largest cause, yields near zero, the name of a failure."""

import csv
import subprocess
import sys
import warnings

import numpy as np
import pytest
from scipy.special import ndtr

from mc.intervals import bounded_mean


def test_the_largest_cause_is_a_cause_and_its_share_the_value(small_results):
    with open(small_results.folder / "spread_shares.csv", newline="") as file:
        rows = [row for row in csv.DictReader(file) if row["process"] == "option_a" and row["width_um"] == "0.12"]
    shares = {row["part"]: float(row["share"]) for row in rows if not row["part"].startswith("level_")}
    largest = max(shares, key=shares.get)
    said = f"the largest cause is {largest.replace('_', ' ')} with {100 * shares[largest]:.0f} % of the variance"
    assert said in " ".join(small_results.finished.out.split())


def test_no_chip_in_time_bounds_the_yield_from_above_only():
    loss = bounded_mean(2000.0, 2000.0, 2000)
    assert loss.high == 1.0
    assert 1 - loss.low == pytest.approx(bounded_mean(0.0, 0.0, 2000).high, rel=1e-9, abs=0)


@pytest.mark.parametrize("distance", [3.0, 3.5, 4.0])
def test_a_yield_near_zero_is_covered_by_its_interval(distance):
    """The mirror of test_tables' yield near one: a few good dies carry the whole yield."""
    within = 0.1
    truth = ndtr(distance / np.sqrt(1 + within**2))
    generator = np.random.default_rng(1)
    misses = 0
    for _ in range(200):
        loss = ndtr((generator.standard_normal(1000) + distance) / within)
        estimate = bounded_mean(loss.sum(), (loss * loss).sum(), loss.size)
        misses += not estimate.low <= truth <= estimate.high
    assert misses / 200 <= 0.1


def test_another_failure_is_not_called_a_full_output(make_job):
    script = (
        "import sys, studies.cli, studies.job\n"
        "def fails(*_): raise OSError(12, 'Cannot allocate memory')\n"
        "studies.job.Job.answers = fails\n"
        "sys.exit(studies.cli.main(['run', sys.argv[1]]))"
    )
    words = [sys.executable, "-c", script, str(make_job())]
    said = subprocess.run(words, capture_output=True, text=True, timeout=60).stderr
    assert "Cannot allocate memory" in said and "standard output" not in said


def test_a_spread_of_exactly_nothing_is_drawn_without_a_word(widthwise, tmp_path):
    process = tmp_path / "long.toml"
    process.write_text(
        'title = "long"\n[device.n]\nchannel = "n"\noxide_thickness_nm = 3\ngate = "n+ polysilicon"\n'
        'doping_per_cm3 = 5e17\nedge = { kind = "none" }\n'
        'scatter = { dopants = "off", gate_edge_nm = 1, gate_edge_correlation_nm = 20 }\n'  # moves currents alone
    )
    words = ["--device", "n", "--width-um", "0.2", "1", "--length-um", "0.2", "--samples", "1000", "--jobs", "1"]
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        assert widthwise("spread", process, *words, "--out", tmp_path / "results").code == 0
