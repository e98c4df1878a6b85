"""Timing yields beyond counting: against counting where it reaches, and against themselves."""

from importlib.resources import files

import numpy as np
import pytest

from studies import timing
from studies.process_file import load_process
from studies.settings import Settings, Workers
from studies.timing_tail import Tail, beyond_counting

PROCESS = load_process(files("studies.examples") / "option_a.toml")
ASKED = {"length_um": 0.13, "paths": 100, "stages": 10, "supply_v": 0.6, "wire_capacitance_ff": 0.4}
PICOSECOND = 1e-12


def tail(period_ps, width_um=0.16):
    question = timing.Question(width_um=[width_um], period_ps=period_ps, **ASKED)
    chips = timing.prepare(question, PROCESS, Settings(seed=11))
    return Tail.of(chips.stages[0], question.paths, period_ps * PICOSECOND, chips.inputs, timing.SLOWEST)


def counted(period_ps, samples, **changes):
    question = timing.Question(width_um=[0.16], period_ps=period_ps, **(ASKED | changes))
    return timing.answer(question, PROCESS, Settings(seed=12, samples=samples), Workers(jobs=1))


@pytest.mark.parametrize("period_ps", [1400, 1450])
def test_estimator_and_counting_agree_where_counting_reaches(period_ps):
    row = counted(period_ps, 100_000).table.iloc[0]
    rare = tail(period_ps).failure(period_ps * PICOSECOND)
    assert 1e-5 < rare.value < 3e-2, "the case would not test anything"
    assert not rare.notes
    assert rare.low < 1 - row.yield_low and 1 - row.yield_high < rare.high


@pytest.mark.parametrize("target", [1 - 1e-5, 1 - 1e-9])
def test_the_period_of_a_target_meets_it(target):
    found = tail(1400)
    period = found.period_at(target, 1265 * PICOSECOND, 52 * PICOSECOND)
    asked_back = found.failure(period.value)
    assert asked_back.low < 1 - target < asked_back.high
    assert period.low < period.value < period.high < period.value * 1.01


def test_the_share_lost_falls_with_the_period():
    found = tail(1400)
    shares = [found.failure(period * PICOSECOND).value for period in (1300, 1400, 1500, 1600, 1700)]
    assert np.all(np.diff(shares) < 0) and shares[-1] > 0


def test_the_question_turns_to_it_by_itself():
    answer = counted(1600, 4096, **{"yield": 0.999999})
    row = answer.table.iloc[0]
    assert row.yield_method.startswith("rare events")
    assert row.yield_low < row["yield"] < row.yield_high < 1
    assert any("rare events" in note for note in answer.notes)
    near = counted(row.period_at_target_ps, 4096, **{"yield": 0.999999}).table.iloc[0]
    assert 1 - near.yield_high < 1e-6 < 1 - near.yield_low


def test_counting_keeps_what_it_can_see():
    answer = counted(1270, 4096, **{"yield": 0.999999})
    assert not answer.table.yield_method.iloc[0].startswith("rare events")
    assert not counted(1270, 4096).table.yield_method.iloc[0].startswith("rare events")


def test_when_counting_is_left():
    assert not beyond_counting(0.99, 16384) and beyond_counting(0.9999, 16384)
    assert not beyond_counting(0.9999, 1_000_000)


def test_gates_that_do_not_switch_are_late():
    margin = tail(1400).margin
    points = np.zeros((2, len(margin.names)))
    points[1] = 8.0 * np.where(["doping" in name or "oxide" in name for name in margin.names], 1, 0)
    values = margin(points)
    assert np.all(np.isfinite(values)) and values[0] > 0 > values[1]
