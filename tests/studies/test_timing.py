"""The timing question: against its brute-force twin, limits, and what a person asks of it."""

from importlib.resources import files
from pathlib import Path
from runpy import run_path

import numpy as np
import pytest

from mc.plan import Block
from studies import timing
from studies.chip import fail_probability, slowest_path
from studies.errors import InputError
from studies.process_file import load_process
from studies.settings import Settings, Workers

HERE = Workers(jobs=1)
SCRIPTS = Path(__file__).parents[2] / "notebooks_free_scripts"
TWIN = run_path(str(SCRIPTS / "03_every_device_of_every_chip.py"))


def process(option):
    return load_process(files("studies.examples") / f"option_{option}.toml")


def asked(**changes):
    usual = {"width_um": [0.16], "length_um": 0.13, "period_ps": 1270, "paths": 100, "stages": 10, "supply_v": 0.6}
    return timing.Question(**(usual | {"wire_capacitance_ff": 0.4} | changes))


# periods near each case's median, where a disagreement shows best; weak inversion, few stages and odd stages included
@pytest.mark.parametrize(
    "option, changes",
    [
        ("a", {}),
        ("a", {"width_um": [0.12], "stages": 4, "paths": 50, "period_ps": 560}),
        ("a", {"stages": 5, "paths": 30, "period_ps": 626}),
        ("b", {"width_um": [0.12], "stages": 4, "paths": 50, "period_ps": 370}),
        ("b", {"supply_v": 1.0, "stages": 8, "period_ps": 421}),
    ],
)
def test_conditioning_agrees_with_every_device_drawn(option, changes):
    (outcomes, probabilities, _), _, _ = TWIN["compare"](asked(**changes), process(option), dies=1500, seed=3)
    # given the dies the outcomes are independent yes-or-no draws with the computed probabilities
    error = np.sqrt((probabilities * (1 - probabilities)).sum()) / len(outcomes)
    assert 0.1 < probabilities.mean() < 0.95, "the case would not test anything"
    assert abs(outcomes.mean() - probabilities.mean()) < 4 * error


def test_slowest_path_has_the_same_mean_and_sigma_as_its_twin():
    question = asked(stages=6, paths=40)
    chips = timing.prepare(question, process("a"), Settings(seed=5))
    every, ours, random = [], [], np.random.default_rng(6)
    for die in chips.inputs.slices(Block(0, 2000)):
        every.append(TWIN["slowest_of_every_device"](chips.stages[0], die, question.paths, random)[0])
        normals = [die[name] for name in timing.SLOWEST]
        ours.append(slowest_path(chips.stages[0].path_cumulants(die), normals, question.paths))
    every, ours = np.concatenate(every), np.concatenate(ours)
    # the same dies: the difference has only the scatter within dies
    difference = every - ours
    assert abs(difference.mean()) < 4 * difference.std() / np.sqrt(len(difference))
    assert every.std() / ours.std() == pytest.approx(1, abs=4 * np.sqrt(1 / len(every)))


def test_probability_and_slowest_path_are_one_law():
    question = asked()
    chips = timing.prepare(question, process("a"), Settings(seed=7))
    die = next(chips.inputs.slices(Block(0, 1)))
    cumulants = chips.stages[0].path_cumulants(die)
    normals = np.random.default_rng(8).standard_normal((2, 100_000))
    slowest = slowest_path(cumulants, normals, question.paths)
    for period in np.quantile(slowest, [0.1, 0.5, 0.9]):
        expected = 1 - float(fail_probability(cumulants, period, question.paths)[0])
        assert (slowest <= period).mean() == pytest.approx(expected, abs=4 * np.sqrt(0.25 / slowest.size))


def test_more_paths_more_stages_and_less_time_fail_more():
    chips = timing.prepare(asked(), process("a"), Settings())
    die = next(chips.inputs.slices(Block(0, 200)))
    cumulants = chips.stages[0].path_cumulants(die)
    yields = [1 - fail_probability(cumulants, 1270e-12, paths).mean() for paths in (1, 10, 100, 1000)]
    assert np.all(np.diff(yields) < 0)
    periods = [1 - fail_probability(cumulants, period * 1e-12, 100).mean() for period in (900, 1200, 1300, 3000, 1e6)]
    assert np.all(np.diff(periods) >= 0) and periods[-1] == 1


@pytest.fixture(scope="module")
def demo_answer():
    question = asked(width_um=[0.12, 0.16, 0.2, 0.3], period_ps=5100, paths=1500, stages=40)
    return timing.answer(question, process("a"), Settings(seed=1, samples=4096), HERE)


def test_smallest_width_lies_where_the_yield_crosses_the_target(demo_answer):
    table, width = demo_answer.table, demo_answer.headlines["min_width_um"]
    assert table["yield"].is_monotonic_increasing
    below = table.width_um[table["yield"] < 0.99].max()
    above = table.width_um[table["yield"] >= 0.99].min()
    assert below < width.low < width.value < width.high < above


def test_period_at_target_gives_the_target_when_asked_back(demo_answer):
    period = demo_answer.table.period_at_target_ps[1]
    question = asked(width_um=[0.16], period_ps=float(period), paths=1500, stages=40)
    again = timing.answer(question, process("a"), Settings(seed=1, samples=4096), HERE).table
    # the period is interpolated on a grid of a quarter sigma: good to a small part of the yield's own interval
    assert again["yield"][0] == pytest.approx(0.99, abs=2e-4)
    assert again.yield_low[0] < 0.99 < again.yield_high[0]


def test_a_target_out_of_reach_is_said_and_not_met():
    answer = timing.answer(asked(period_ps=10.0), process("a"), Settings(samples=1000), HERE)
    assert not answer.met and "annot be met" in answer.sentences[0]
    assert np.isinf(answer.headlines["min_width_um"].value)


@pytest.mark.parametrize("workers", [Workers(jobs=2), Workers(jobs=2, backend="threading")])
def test_the_same_bits_on_any_workers(workers):
    settings = Settings(seed=9, samples=3 * timing.BLOCK + 100)
    here, there = (timing.answer(asked(), process("b"), settings, each).table.to_csv() for each in (HERE, workers))
    assert here == there


def test_a_precision_of_the_yield_is_reached():
    table = timing.answer(asked(), process("a"), Settings(precision=0.004), HERE).table
    assert ((table.yield_high - table.yield_low) / 2).max() <= 0.004


def test_what_timing_needs_is_asked_for(tmp_path):
    text = (files("studies.examples") / "option_a.toml").read_text()
    path = tmp_path / "option.toml"
    path.write_text(text.replace("mobility_cm2_per_vs = 320\n", ""))
    with pytest.raises(InputError, match="mobility_cm2_per_vs"):
        timing.answer(asked(), load_process(path), Settings(samples=1000), HERE)
    with pytest.raises(InputError, match="n_device needs"):
        timing.answer(asked(n_device="p"), process("a"), Settings(samples=1000), HERE)
