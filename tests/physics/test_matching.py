"""Saturated current and its inverse, gm/I, and the small-signal shorthands of pairs."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from physics.current import Channel, drain_current, transconductance_efficiency
from physics.matching import (
    distance_sigma,
    gate_voltage_at,
    largest_current,
    mirror_error,
    pair_offset,
    saturated_current,
    saturated_efficiency,
)

KT = 0.02585


def channel(threshold=0.3, degradation=0.3, drop=0.6):
    return Channel(
        threshold=threshold,
        slope_factor=1.3,
        specific_current=5e-7,
        thermal_voltage=KT,
        mobility_degradation=degradation,
        critical_drop=drop,
    )


GATES = np.linspace(-0.1, 1.2, 27)  # from deep weak to strong inversion


@pytest.mark.parametrize("degradation, drop", [(0.0, np.inf), (0.3, np.inf), (0.0, 0.6), (0.3, 0.6)])
def test_saturated_current_is_the_limit_of_the_drain_current(degradation, drop):
    device = channel(degradation=degradation, drop=drop)
    # in weak inversion the drain still matters by exp(-V/kT): 2 V leaves nothing
    assert saturated_current(device, GATES) == pytest.approx(drain_current(device, GATES, 2.5), rel=1e-9, abs=0)
    efficiency = transconductance_efficiency(device, GATES, 2.5)
    assert saturated_efficiency(device, GATES) == pytest.approx(efficiency, rel=1e-7, abs=0)


@pytest.mark.parametrize("degradation, drop", [(0.0, np.inf), (0.3, np.inf), (0.0, 0.6), (0.3, 0.6)])
def test_gate_voltage_is_the_exact_inverse(degradation, drop):
    device = channel(degradation=degradation, drop=drop)
    assert gate_voltage_at(device, saturated_current(device, GATES)) == pytest.approx(GATES, abs=1e-12)


@settings(max_examples=60, deadline=None)
@given(current=st.floats(1e-14, 4e-6), degradation=st.floats(0, 2), drop=st.floats(0.05, 100))
def test_inverse_and_current_agree_for_any_device(current, degradation, drop):
    device = channel(degradation=degradation, drop=drop)
    if current > 0.9 * largest_current(device):
        return
    again = saturated_current(device, gate_voltage_at(device, current))
    assert again == pytest.approx(current, rel=1e-9, abs=0)


def test_efficiency_against_a_difference_of_logarithms():
    device, step = channel(), 1e-6
    difference = np.log(saturated_current(device, GATES + step) / saturated_current(device, GATES - step)) / (2 * step)
    assert saturated_efficiency(device, GATES) == pytest.approx(difference, rel=1e-6, abs=0)
    # weak inversion reaches 1/(n kT/q)
    assert saturated_efficiency(device, -0.6) == pytest.approx(1 / (1.3 * KT), rel=1e-4)


def test_no_gate_voltage_exceeds_the_largest_current():
    device = channel()
    assert saturated_current(device, 1e3) < largest_current(device)
    assert saturated_current(device, 1e5) == pytest.approx(largest_current(device), rel=1e-3)
    assert np.isinf(largest_current(channel(degradation=0.0)))


@pytest.mark.parametrize("gate", [0.1, 0.35, 0.8])
def test_shorthands_are_the_first_order_of_the_drawn_answer(gate):
    device = channel()
    current, efficiency = saturated_current(device, gate), saturated_efficiency(device, gate)
    errors = []
    for size in (1e-3, 1e-4):
        other = device._replace(
            threshold=device.threshold + 2 * size, specific_current=device.specific_current * (1 + 3 * size)
        )
        drawn_offset = gate_voltage_at(device, current) - gate_voltage_at(other, current)
        drawn_error = saturated_current(other, gate) / current - 1
        errors.append(
            [
                abs(drawn_offset - pair_offset(-2 * size, 3 * size, efficiency)),
                abs(drawn_error - mirror_error(-2 * size, 3 * size, efficiency)),
            ]
        )
    # what is left is of second order: a tenth of the mismatch leaves a hundredth of it
    assert np.array(errors[0]) / np.array(errors[1]) == pytest.approx([100, 100], rel=0.15)


def test_tiny_devices_in_weak_inversion_leave_the_shorthand():
    # 40 mV between the thresholds of a mirror in weak inversion: the current is exponential, not linear
    device = channel()
    current, efficiency = saturated_current(device, -0.1), saturated_efficiency(device, -0.1)
    drawn = saturated_current(device._replace(threshold=0.26), -0.1) / current - 1
    assert drawn == pytest.approx(np.expm1(0.04 / (1.3 * KT)), rel=0.02)
    assert drawn > 1.8 * mirror_error(0.04, 0.0, efficiency)


# M. J. M. Pelgrom and A. C. J. Duinmaijer, ESSCIRC 1988, second hand: 30 mV um and 4 uV/um; derived sums
@pytest.mark.parametrize("side, distance, expected", [(20e-6, 1e-3, 4.272e-3), (3e-6, 250e-6, 10.050e-3)])
def test_area_and_distance(side, distance, expected):
    assert distance_sigma(30e-9 / side, 4.0, distance) == pytest.approx(expected, abs=5e-7)
