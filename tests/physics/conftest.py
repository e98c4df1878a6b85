"""What the physics tests share: a device to vary, a channel to vary.

Comparisons say abs=0 wherever they say rel: pytest.approx else allows 1e-12 besides, more than a gate's capacitance in
farads, and a ten-thousandth of a depletion width in metres.
"""

import dataclasses

import numpy as np
import pytest

from physics.current import Channel
from physics.device import Device
from physics.edges import NoEdge
from physics.profile import UniformProfile
from physics.short_channel import LongChannel

MIDGAP_GATE = 4.05 + 1.12452 / 2  # [V], electron affinity and half the gap at 300 K

_DEVICE = Device(
    polarity=1,
    temperature=300.0,
    intrinsic_density=1e16,
    width=0.2e-6,
    length=0.2e-6,
    oxide_thickness=3e-9,
    profile=UniformProfile(doping=5e23),
    gate_work_function=MIDGAP_GATE,
    oxide_charge=0.0,
    edge=NoEdge(),
    short_channel=LongChannel(),
)

_CHANNEL = Channel(
    threshold=0.4,
    slope_factor=1.3,
    specific_current=1e-6,
    thermal_voltage=0.02585,
    mobility_degradation=0.0,
    critical_drop=np.inf,
)


@pytest.fixture
def make_device():
    """A function giving an n-channel device, 0.2 x 0.2 um, wide and long formulas, with the named fields changed."""
    return lambda **changes: dataclasses.replace(_DEVICE, **changes)


@pytest.fixture
def make_channel():
    """A function giving a long channel without mobility degradation, with the named fields changed."""
    return lambda **changes: _CHANNEL._replace(**changes)
