"""The spread question: closed forms, shares, common draws."""

from dataclasses import replace as replace_dataclass
from importlib.resources import files

import numpy as np
import pytest

from studies import spread
from studies.errors import InputError
from studies.process_file import load_process
from studies.settings import Settings, Workers

HERE = Workers(jobs=1)
LONG = """
title = "long and wide"
[device.n]
channel = "n"
oxide_thickness_nm = 3.0
gate = "n+ polysilicon"
doping_per_cm3 = 1e18
[device.n.edge]
kind = "{edge}"
[device.n.scatter]
dopants = "{dopants}"
{more}
"""


def process_of(tmp_path, edge="none", dopants="counted", more=""):
    path = tmp_path / "process.toml"
    path.write_text(LONG.format(edge=edge, dopants=dopants, more=more))
    return load_process(path)


def asked(**changes):
    return spread.Question(**({"device": "n", "width_um": [0.05], "length_um": 0.05} | changes))


@pytest.fixture(scope="module")
def demo():
    return load_process(files("studies.examples") / "option_a.toml")


@pytest.fixture(scope="module")
def demo_answer(demo):
    question = asked(width_um=[0.12, 0.3, 2.0], length_um=0.13)
    return spread.answer(question, demo, Settings(seed=1, samples=200_000), HERE)


def test_dopants_alone_give_the_printed_sigma_and_a_visible_skew(tmp_path):
    # 50 nm x 50 nm, 3 nm, 1e18: 30.11 mV and 87.7 dopants (derived); skew 1.299/sqrt(87.7) = 0.139
    row = spread.answer(asked(), process_of(tmp_path), Settings(seed=2, samples=400_000), HERE).table.iloc[0]
    assert row.vth_sigma_low_mv < 30.11 < row.vth_sigma_high_mv
    standard_error = np.sqrt(6 / row.samples)
    assert row.vth_skew == pytest.approx(0.1387, abs=5 * standard_error)
    assert row.vth_skew > 20 * standard_error, "a small device's skew must be seen"
    assert row.share_dopants == pytest.approx(1, abs=1e-9)


def test_dopants_alone_follow_the_area_law_at_every_width(tmp_path):
    question = asked(width_um=[0.05, 0.1, 0.4, 1.6])
    table = spread.answer(question, process_of(tmp_path, edge="field oxide"), Settings(samples=100_000), HERE).table
    flat = table.vth_sigma_mv * np.sqrt(table.width_um)
    # every width sees the same draws, so the flatness is far sharper than the sampling error of a sigma
    assert np.ptp(flat) / flat.mean() < 1e-3


def test_causes_and_levels_add_up_to_the_whole(demo_answer):
    table = demo_answer.table
    levels = table[[f"share_level_{level}" for level in ("lot", "wafer", "die", "device")]].sum(axis=1)
    assert np.all(np.abs(levels - 1) < 0.01)
    # what is missing are interactions: the demo's narrowest device is nearly additive
    assert np.all(np.abs(table.share_sum_of_causes - 1) < 0.01)


def test_share_of_a_measured_remainder_is_what_it_was_told(tmp_path):
    remainder = "remainder_pair_mv_um = 2.0"
    row = spread.answer(asked(), process_of(tmp_path, more=remainder), Settings(samples=200_000), HERE).table.iloc[0]
    remainder_mv, dopants_mv = 2.0 / np.sqrt(2) / 0.05, 30.11
    expected = remainder_mv**2 / (remainder_mv**2 + dopants_mv**2)
    assert row.share_remainder == pytest.approx(expected, rel=5 * np.sqrt(2 / 131072) * np.sqrt(2))


def test_edges_shift_the_nominal_threshold_and_vanish_for_wide_devices(demo_answer):
    shift = demo_answer.table.vth_nominal_v - demo_answer.table.vth_nominal_without_edges_v
    assert shift.is_monotonic_decreasing and shift.iloc[0] > 0.04 and shift.iloc[-1] < 0.003


def test_the_area_law_starts_from_the_widest(demo_answer):
    last = demo_answer.table.iloc[-1]
    assert last.vth_device_sigma_mv == last.vth_device_sigma_area_law_mv


def test_more_widths_and_more_samples_change_no_other_draw(demo, demo_answer):
    alone = spread.answer(asked(width_um=[0.3], length_um=0.13), demo, Settings(seed=1, samples=200_000), HERE).table
    same = ["vth_mean_v", "vth_sigma_mv", "vth_skew", "vth_p0_1_v", "vth_p99_9_v"]
    assert alone.loc[0, same].tolist() == demo_answer.table.loc[1, same].tolist()


def test_seeds_differ_and_zero_is_one(demo):
    question = asked(width_um=[0.3], length_um=0.13)
    means = [
        spread.answer(question, demo, Settings(seed=seed, samples=5000), HERE).table.vth_mean_v[0] for seed in (0, 0, 1)
    ]
    assert means[0] == means[1] != means[2]


@pytest.mark.parametrize("workers", [Workers(jobs=2), Workers(jobs=4), Workers(jobs=2, backend="threading")])
def test_the_same_bits_on_any_workers(demo, workers):
    question = asked(width_um=[0.12, 1.0], length_um=0.13)
    settings = Settings(seed=4, samples=3 * spread.BLOCK + 1000)
    here = spread.answer(question, demo, settings, HERE)
    there = spread.answer(question, demo, settings, workers)
    assert here.table.to_csv() == there.table.to_csv()
    assert here.tables["spread_shares"].to_csv() == there.tables["spread_shares"].to_csv()


def test_a_precision_is_reached_and_not_by_luck(demo):
    question = asked(width_um=[0.12, 1.0], length_um=0.13)
    answer = spread.answer(question, demo, Settings(precision=0.002), HERE)
    table = answer.table
    half_widths = (table.vth_sigma_high_mv - table.vth_sigma_low_mv) / 2 / table.vth_sigma_mv
    assert half_widths.max() <= 0.002
    # a normal sigma needs about 2 (1.96/(2 * 0.002))**2 = 480 000
    assert 400_000 < answer.samples < 800_000 and answer.samples % spread.BLOCK == 0


def test_body_bias_and_temperature_move_the_threshold_the_right_way(demo):
    def mean(**changes):
        question = asked(width_um=[0.5], length_um=0.13, **changes)
        return spread.answer(question, demo, Settings(samples=1000), HERE).table.vth_nominal_v[0]

    assert mean(body_bias_v=1.0) > mean() > mean(temperature_c=125.0)
    assert mean(drain_v=1.2) < mean(), "the drain lowers the barrier of a short channel"


def test_p_devices_are_negative_and_skewed_to_the_other_side(demo, tmp_path):
    row = spread.answer(asked(device="p", length_um=0.13, width_um=[0.3]), demo, Settings(samples=1000), HERE).table
    assert row.vth_mean_v[0] < 0
    text = LONG.format(edge="none", dopants="counted", more="").replace("device.n", "device.p").replace('"n"', '"p"')
    path = tmp_path / "p.toml"
    path.write_text(text.replace("n+ poly", "p+ poly"))
    only = spread.answer(asked(device="p"), load_process(path), Settings(samples=400_000), HERE).table.iloc[0]
    assert only.vth_skew == pytest.approx(-0.1387, abs=5 * np.sqrt(6 / 400_000))


def test_nothing_varies_is_said(tmp_path):
    with pytest.raises(InputError, match="nothing varies"):
        spread.answer(asked(), process_of(tmp_path, dopants="off"), Settings(samples=1000), HERE)


def test_quarter_circles_are_called_an_upper_bound(tmp_path):
    answer = spread.answer(asked(), process_of(tmp_path, edge="field oxide"), Settings(samples=1000), HERE)
    assert any("upper bound" in note for note in answer.notes)


def test_an_answer_is_read_only(demo_answer):
    with pytest.raises(AttributeError):
        demo_answer.samples = 1
    assert replace_dataclass(demo_answer, samples=1).samples == 1
