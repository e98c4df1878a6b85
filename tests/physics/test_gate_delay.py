"""Stage delay: charge over current, and how both scale."""

import numpy as np
import pytest

from physics.current import drain_current
from physics.gate_delay import effective_drive_current, gate_capacitance, stage_delay


def test_effective_current_is_the_mean_of_two_points(make_channel):
    half, full = make_channel(threshold=0.42), make_channel(threshold=0.38)
    expected = 0.5 * drain_current(half, 1.2, 0.6) + 0.5 * drain_current(full, 0.6, 1.2)
    assert effective_drive_current(half, full, 1.2) == pytest.approx(expected, rel=1e-14, abs=0)


def test_delay_is_the_charge_of_half_a_swing_over_the_current():
    assert stage_delay(2e-15, 1.2, 60e-6) == pytest.approx(2e-15 * 0.6 / 60e-6, rel=1e-14, abs=0)


def test_delay_against_a_discharge_in_small_steps():
    # A constant current from the supply to half of it, the charge counted out step by step; it stops at most one step
    # late.
    load, supply, current, step = 2e-15, 1.2, 60e-6, 2e-16
    voltage, time = supply, 0.0
    while voltage > supply / 2:
        voltage, time = voltage - current * step / load, time + step
    assert stage_delay(load, supply, current) == pytest.approx(time, abs=1.01 * step)


def test_delay_scales_with_load_and_current():
    one = stage_delay(1e-15, 1.0, 50e-6)
    assert stage_delay(3e-15, 1.0, 50e-6) == pytest.approx(3 * one, rel=1e-14, abs=0)
    assert stage_delay(1e-15, 1.0, 150e-6) == pytest.approx(one / 3, rel=1e-14, abs=0)


def test_stage_that_drives_its_own_kind_does_not_care_for_the_width(make_channel):
    # Load and current both go as the width; a wire adds a part that falls as 1/W.
    def delay(width, wire):
        channel = make_channel(specific_current=1e-6 * width / 1e-7)
        load = gate_capacitance(1e-2, width, 0.1e-6, 0.3e-9) + wire
        return stage_delay(load, 1.2, effective_drive_current(channel, channel, 1.2))

    widths = np.array([0.1e-6, 0.2e-6, 0.8e-6])
    bare = np.array([delay(width, 0.0) for width in widths])
    assert bare == pytest.approx(bare[0], rel=1e-12, abs=0)
    extra = np.array([delay(width, 1e-15) for width in widths]) - bare
    assert extra * widths == pytest.approx(extra[0] * widths[0], rel=1e-9, abs=0)


def test_gate_capacitance_is_a_plate_and_two_overlaps():
    assert gate_capacitance(1e-2, 0.5e-6, 0.1e-6, 0.0) == pytest.approx(1e-2 * 0.5e-6 * 0.1e-6, rel=1e-14, abs=0)
    overlaps = gate_capacitance(1e-2, 0.5e-6, 0.1e-6, 0.3e-9) - gate_capacitance(1e-2, 0.5e-6, 0.1e-6, 0.0)
    assert overlaps == pytest.approx(2 * 0.3e-9 * 0.5e-6, rel=1e-12, abs=0)


def test_higher_threshold_is_slower(make_channel):
    thresholds = np.linspace(0.1, 0.6, 26)
    channel = make_channel(threshold=thresholds, mobility_degradation=0.3)
    assert np.all(np.diff(stage_delay(1e-15, 1.2, effective_drive_current(channel, channel, 1.2))) > 0)
