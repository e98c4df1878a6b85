"""Differences with a control: the truth is inside their intervals, which are much narrower than separate ones."""

from dataclasses import replace
from importlib.resources import files

import numpy as np
import pytest

from mc.streams import Streams
from studies import controlled
from studies.controlled import METHOD, Option, threshold_changes
from studies.process_file import load_process
from studies.settings import Settings, Workers
from studies.spread import Question

OPTIONS = [load_process(files("studies.examples") / f"option_{letter}.toml") for letter in "ab"]
QUESTION = Question(device="n", width_um=[0.12, 0.5], length_um=0.13)
HERE = Workers(jobs=1)


@pytest.fixture(autouse=True)
def small_blocks(monkeypatch):
    monkeypatch.setattr(controlled, "BLOCK", 256)


def changes(seed, samples=6144, question=QUESTION):
    return threshold_changes(*OPTIONS, question, samples, Settings(seed=seed), HERE)


def test_the_intervals_hold_what_a_large_run_finds():
    truth = changes(1, 400_000)
    held = {key: 0 for key in truth}
    for seed in range(2, 102):
        for key, found in changes(seed).items():
            error = (truth[key].high - truth[key].low) / 2
            held[key] += found.low - error <= truth[key].value <= found.high + error
    assert min(held.values()) >= 88 and np.mean(list(held.values())) >= 92


def test_they_agree_with_plain_differences_and_are_far_narrower():
    found = changes(5, 40_000)
    options = [Option.of(file, QUESTION) for file in OPTIONS]
    names = tuple(dict.fromkeys((*options[0].names, *options[1].names)))
    draws = Streams(9, 0, names).take(40_000)
    plain = [option.thresholds_and_controls(draws)[:2] * 1e3 for option in options]
    for column, width in enumerate(QUESTION.width_um):
        first, second = (values[column] for values in plain)
        error = np.hypot(first.std(), second.std()) / np.sqrt(40_000)
        change = found["vth_mean_mv", width]
        assert abs(change.value - (second.mean() - first.mean())) < 4 * error
        assert (change.high - change.low) / 2 < 1.96 * error / 20
        sigma = found["vth_sigma_mv", width]
        assert abs(sigma.value - (second.std() - first.std())) < 4 * error
        assert (sigma.high - sigma.low) / 2 < 1.96 * error / np.sqrt(2) / 10
        assert change.method == METHOD


def test_the_linear_part_is_the_threshold_s_own_near_nominal():
    option = Option.of(OPTIONS[0], QUESTION)
    draws = {name: np.full(3, 0.0) for name in option.names}
    draws["n.doping.die"] = np.array([-0.01, 0.0, 0.01])
    rows = option.thresholds_and_controls(draws)
    assert np.diff(rows[0]) == pytest.approx(np.diff(rows[2]), rel=1e-3)


def test_correlated_inputs_of_the_device_are_left_to_plain_differences():
    correlation = (
        OPTIONS[0].process.correlation[0].model_copy(update={"inputs": ["n.oxide_thickness.lot", "n.doping.lot"]})
    )
    process = OPTIONS[0].process.model_copy(update={"correlation": [correlation]})
    odd = replace(OPTIONS[0], process=process)
    assert threshold_changes(odd, OPTIONS[1], QUESTION, 4096, Settings(), HERE) == {}
