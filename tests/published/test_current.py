"""The interpolation function and the ideal swing against the list's sections 6 and 1 (derived)."""

import numpy as np
import pytest

from physics.current import Channel, drain_current, interpolation
from physics.silicon import thermal_voltage


@pytest.mark.parametrize(
    "normalised_voltage, printed",
    [(0, "0.4804530139"), (2, "1.7246562599"), (-2, "0.0981328849"), (10, "25.0671985808")],
)
def test_interpolation(normalised_voltage, printed):
    assert f"{interpolation(normalised_voltage):.10f}" == printed


def test_interpolation_far_below_threshold():
    # ln(1 + x) with x = e^-10 must not lose digits.
    assert f"{interpolation(-20):.7e}" == "2.0610601e-09"


def test_ideal_swing():
    # 59.5264 mV/decade at 300 K: kT/q ln 10.
    kt = thermal_voltage(300.0)
    assert f"{kt * np.log(10) * 1e3:.4f}" == "59.5264"


def test_swing_of_the_drain_current_tends_to_the_ideal():
    # The same figure from the current itself, slope factor 1, 1.2 V below threshold: there the current is exp(v) to
    # 1e-10.
    channel = Channel(
        threshold=1.2,
        slope_factor=1.0,
        specific_current=1e-6,
        thermal_voltage=thermal_voltage(300.0),
        mobility_degradation=0.0,
        critical_drop=np.inf,
    )
    low, high = drain_current(channel, np.array([0.0, 0.01]), 1.0)
    assert f"{0.01 / np.log10(high / low) * 1e3:.4f}" == "59.5264"
