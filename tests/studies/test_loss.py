"""The loss question: tails against closed forms and counting, dies that differ, spares, and what a person asks of it."""

from importlib.resources import files

import numpy as np
import pytest
from scipy.stats import binom, norm

from mc.experiment import Inputs
from mc.plan import Block
from studies import loss
from studies.process_file import load_process
from studies.settings import Settings, Workers

HERE = Workers(jobs=1)
PLAIN = """
title = "plain"
[device.n]
channel = "n"
oxide_thickness_nm = 3.0
gate = "n+ polysilicon"
doping_per_cm3 = 4e17
mobility_cm2_per_vs = 300
[device.n.edge]
kind = "none"
[device.n.variation]
flat_band = {{ die_mv = {die_mv} }}
[device.n.scatter]
dopants = "off"
remainder_pair_mv_um = 2.0
"""
SIGMA_MV = 2.0 / np.sqrt(2) / 0.2  # of one 0.2 um x 0.2 um device: 7.07 mV


def plain(tmp_path, die_mv=0.0):
    path = tmp_path / "plain.toml"
    path.write_text(PLAIN.format(die_mv=die_mv))
    return load_process(path)


def demo(option="a"):
    return load_process(files("studies.examples") / f"option_{option}.toml")


def asked(**changes):
    usual = {"device": "n", "width_um": [0.2], "length_um": 0.2, "vth_window_mv": 40.0, "devices": 10**6}
    usual |= {"fixed_area_mm2": 1.0}
    return loss.Question.model_validate({key: value for key, value in (usual | changes).items() if value is not None})


def answer_of(question, file, seed=1, workers=HERE):
    return loss.answer(question, file, Settings(seed=seed), workers)


@pytest.mark.parametrize("window_mv", [30.0, 40.0, 44.0])
def test_a_normal_tail_of_both_sides(tmp_path, window_mv):
    row = answer_of(asked(vth_window_mv=window_mv), plain(tmp_path)).table.iloc[0]
    truth = 2 * norm.sf(window_mv / SIGMA_MV)
    assert row.device_failure == pytest.approx(truth, rel=0.4), "four times the estimator's own 10 %"
    assert row.device_failure_low < 1.1 * truth and truth < 1.1 * row.device_failure_high
    assert row.failure_vth_low == pytest.approx(truth / 2, rel=0.4)


@pytest.mark.parametrize("spares, blocks", [(0, 1), (3, 1), (2, 4)])
def test_spares_without_die_variation_are_a_plain_binomial(tmp_path, spares, blocks):
    question = asked(devices=400_000, spares=spares, blocks=blocks, vth_window_mv=32.0)
    row = answer_of(question, plain(tmp_path)).table.iloc[0]

    def expected(share):
        return binom.cdf(spares, 400_000 // blocks, share) ** blocks

    truth = 2 * norm.sf(32.0 / SIGMA_MV)
    # the yield follows the failure share's own error; inside its interval it must lie
    assert expected(truth * 1.4) < row.chip_yield < expected(truth / 1.4)
    assert row.chip_yield_low < expected(truth) < row.chip_yield_high


def test_dies_that_differ_are_not_one_average(tmp_path):
    # half the variance is the die's: bad dies lose many devices, good ones none, and the mean share tells neither
    question, file = asked(vth_window_mv=45.0, devices=10**6), plain(tmp_path, die_mv=SIGMA_MV)
    row = answer_of(question, file).table.iloc[0]
    dies = np.linspace(-8, 8, 20001)
    share = norm.sf((45.0 - SIGMA_MV * dies) / SIGMA_MV) + norm.sf((45.0 + SIGMA_MV * dies) / SIGMA_MV)
    weight = norm.pdf(dies) / norm.pdf(dies).sum()
    truth = weight @ np.exp(-1e6 * share)
    average = np.exp(-1e6 * (weight @ share))
    assert row.device_failure == pytest.approx(weight @ share, rel=0.4)
    assert row.chip_yield == pytest.approx(truth, abs=0.02)
    assert truth > average + 0.3, "the average share would tell another story"


def test_the_surface_over_dies_agrees_with_all_causes_at_once():
    question = asked(width_um=[0.12, 0.2], length_um=0.13, vth_window_mv=70.0)
    for margins in loss._margins(question, demo()):
        width = loss.study(margins, seed=3)
        names = loss.die_names(margins.population)
        draws = next(Inputs(seed=5, names=names, slice_size=200_000).slices(Block(0, 200_000)))
        dies = np.column_stack([draws[name] for name in names])
        # two independent estimates of the same mean, each with about 10 %
        assert width.shares(dies).mean() == pytest.approx(width.whole["any"].value, rel=0.35)


def test_counting_and_the_estimator_agree_where_counting_can():
    question = asked(width_um=[0.12, 0.14, 0.16, 0.2], length_um=0.13, vth_window_mv=40.0)
    table = answer_of(question, demo()).table
    seen = table[table.counted_failure > 1e-4]
    assert len(seen) >= 3
    assert np.all(seen.device_failure_low < seen.counted_failure_high)
    assert np.all(seen.counted_failure_low < seen.device_failure_high)


def test_drive_and_leakage_move_together():
    question = asked(
        width_um=[0.16],
        length_um=0.13,
        vth_window_mv=None,
        drive_floor_percent=70.0,
        leakage_ceiling_times=8.0,
        supply_v=1.2,
    )
    row = answer_of(question, demo()).table.iloc[0]
    assert 0 < row.failure_drive < 0.1 and 0 < row.failure_leakage < 0.1
    assert max(row.failure_drive, row.failure_leakage) * 0.8 < row.device_failure


def test_wider_devices_fail_less_and_cost_area():
    array = {"devices": 4_000_000, "spares": 8, "blocks": 16, "cell_length_um": 1.5}
    question = asked(width_um=[0.12, 0.14, 0.2, 0.3], length_um=0.13, vth_window_mv=70.0, **array)
    answer = answer_of(question, demo(), workers=Workers(jobs=2))
    table = answer.table
    assert table.device_failure.is_monotonic_decreasing and table.chip_yield.is_monotonic_increasing
    assert 0 < table.good_chips_per_cm2.argmax() < 3, "neither the narrowest nor the widest gives the most good chips"
    assert "most good chips" in answer.sentences[1]
    assert table.to_csv() == answer_of(question, demo()).table.to_csv(), "the same bits on one worker"


def test_defects_and_rim_cost_chips():
    bare, dirty = (
        answer_of(asked(**more), demo()).table.good_chips_per_cm2[0]
        for more in ({}, {"defects_per_cm2": 1.0, "wafer_diameter_mm": 300.0, "edge_exclusion_mm": 3.0})
    )
    # 1 mm2 at one defect per cm2, clustering 2: (1 + 0.01/2)^-2; the rim leaves 0.98^2
    assert dirty == pytest.approx(bare * 1.005**-2 * 0.98**2, rel=1e-12)


def test_what_cannot_fail_gets_an_upper_bound(tmp_path):
    answer = answer_of(asked(vth_window_mv=500.0), plain(tmp_path))
    row = answer.table.iloc[0]
    assert row.device_failure < 1e-12 and row.device_failure_high > 0 and row.chip_yield > 0.99
    assert any("too rare to be met" in note for note in answer.notes)


@pytest.mark.parametrize(
    "changes, words",
    [
        ({"vth_window_mv": None}, "no limit at all"),
        ({"vth_window_mv": None, "vth_low_v": 0.4, "vth_high_v": 0.2}, "must be below"),
        ({"vth_low_v": 0.1}, "goes with neither"),
        ({"devices": -1}, "devices"),
        ({"spares": -1}, "spares"),
        ({"devices": 10, "spares": 11}, "more spares"),
        ({"leakage_ceiling_times": 3.0}, "supply_v"),
        ({"supply_v": 1.0}, "supply_v"),
        ({"drive_floor_ua": 1.0, "drive_floor_percent": 50.0, "supply_v": 1.0}, "one of the two"),
        ({"fixed_area_mm2": 0.0}, "no area"),
        ({"edge_exclusion_mm": 3.0}, "wafer_diameter_mm"),
    ],
)
def test_nonsense_is_refused_when_asked(changes, words):
    with pytest.raises(ValueError, match=words):
        asked(**changes)
