"""Threshold voltage of a device: mirror symmetry, body bias by two routes, the optional corrections."""

import numpy as np
import pytest

from physics.constants import ELEMENTARY_CHARGE, SILICON_PERMITTIVITY
from physics.edges import FieldOxide, Trench
from physics.profile import StepProfile, UniformProfile
from physics.short_channel import ChargeSharing, QuasiTwoDimensional
from physics.silicon import ELECTRON_AFFINITY, band_gap, fermi_potential, thermal_voltage
from physics.threshold import (
    body_coefficient,
    body_effect,
    electrostatics,
    gate_depletion_potential,
    oxide_capacitance,
    quantum_potential,
    threshold_voltage,
)

STEP = StepProfile(surface_doping=2e23, surface_depth=15e-9, doping=6e23)
VARIANTS = {
    "plain": {},
    "body bias": {"body_bias": 1.2},
    "field oxide": {"edge": FieldOxide()},
    "trench": {"edge": Trench(field_oxide_thickness=300e-9)},
    "step": {"profile": STEP},
    "trapezoid": {"short_channel": ChargeSharing(junction_depth=50e-9)},
    "quasi-2-D": {"short_channel": QuasiTwoDimensional()},
    "quantum": {"quantum_shift": True},
    "gate depletion": {"gate_doping": 8e25},
}


def threshold(device, drain_voltage=0.0):
    return threshold_voltage(device, electrostatics(device), drain_voltage)


def flat_band(device):
    """Work-function difference less oxide charge over capacitance, written out [V]."""
    fermi = fermi_potential(device.profile.doping, thermal_voltage(device.temperature), device.intrinsic_density)
    silicon = ELECTRON_AFFINITY + band_gap(device.temperature) / 2 + device.polarity * fermi
    charge = device.oxide_charge / oxide_capacitance(device.oxide_thickness)
    return device.gate_work_function + device.flat_band_shift - silicon - charge


@pytest.mark.parametrize("fields", VARIANTS.values(), ids=VARIANTS)
def test_p_channel_mirrors_n_channel_about_the_flat_band(make_device, fields):
    for gate, charge in ((4.1, 0.0), (4.6, 5e-5), (5.2, 2e-4)):
        given = {**fields, "gate_work_function": gate, "oxide_charge": charge, "flat_band_shift": 0.01}
        n, p = make_device(polarity=1, **given), make_device(polarity=-1, **given)
        rise = threshold(n, 0.8) - flat_band(n)
        assert rise > 0
        assert threshold(p, 0.8) - flat_band(p) == pytest.approx(-rise, rel=1e-12, abs=0)


def test_midgap_gate_mirrors_the_thresholds_themselves(make_device):
    midgap = ELECTRON_AFFINITY + band_gap(300.0) / 2
    n = make_device(polarity=1, gate_work_function=midgap)
    p = make_device(polarity=-1, gate_work_function=midgap)
    assert threshold(p) == pytest.approx(-threshold(n), rel=1e-12, abs=0)


def test_positive_oxide_charge_lowers_both_thresholds(make_device):
    for polarity in (1, -1):
        shift = threshold(make_device(polarity=polarity, oxide_charge=1e-4)) - threshold(make_device(polarity=polarity))
        assert shift == pytest.approx(-1e-4 / oxide_capacitance(3e-9), rel=1e-9, abs=0)


def test_body_bias_by_the_coefficient(make_device):
    # Two routes: the grown depletion charge, and gamma times the difference of two roots.
    bias = np.array([0.2, 1.0, 3.0])
    rise = threshold(make_device(body_bias=bias)) - threshold(make_device())
    potential = electrostatics(make_device()).surface_potential
    expected = body_effect(body_coefficient(5e23, oxide_capacitance(3e-9)), potential, bias)
    assert rise == pytest.approx(expected, rel=1e-10, abs=0)


def test_step_of_equal_dopings_is_uniform(make_device):
    step = StepProfile(surface_doping=5e23, surface_depth=15e-9, doping=5e23)
    uniform = UniformProfile(doping=5e23)
    for found, expected in zip(
        electrostatics(make_device(profile=step)), electrostatics(make_device(profile=uniform)), strict=True
    ):
        assert found == pytest.approx(expected, rel=1e-12, abs=0)


def test_surface_carriers_equal_the_surface_doping_at_threshold(make_device):
    # The condition that defines the surface potential, checked from Boltzmann's law in the bulk: n = n_i^2/N
    # exp(psi/U_T).
    psi = electrostatics(make_device(profile=STEP)).surface_potential
    carriers = (1e16**2 / STEP.doping) * np.exp(psi / thermal_voltage(300.0))
    assert carriers == pytest.approx(STEP.surface_doping, rel=1e-9, abs=0)


def test_junction_barrier_is_what_remains_of_the_built_in_potential(make_device):
    # A degenerate source at the band edge: built-in potential Eg/2 + phi_F; uniform doping leaves Eg/2 - phi_F.
    fermi = fermi_potential(5e23, thermal_voltage(300.0), 1e16)
    assert electrostatics(make_device()).junction_barrier == pytest.approx(
        band_gap(300.0) / 2 - fermi, rel=1e-12, abs=0
    )


def test_arrays_broadcast_and_agree_with_single_devices(make_device):
    widths = np.array([0.1e-6, 0.3e-6, 1e-6])[:, None]
    dopings = np.array([2e23, 5e23])
    fields = {"edge": FieldOxide(), "body_bias": 0.5, "quantum_shift": True, "gate_doping": 1e26}
    together = threshold(make_device(width=widths, profile=UniformProfile(doping=dopings), **fields))
    assert together.shape == (3, 2)
    for row, width in enumerate(widths[:, 0]):
        for column, doping in enumerate(dopings):
            alone = threshold(make_device(width=width, profile=UniformProfile(doping=doping), **fields))
            assert together[row, column] == pytest.approx(alone, rel=1e-14, abs=0)


def test_quantum_shift_adds_its_potential(make_device):
    field = electrostatics(make_device()).bulk_charge / SILICON_PERMITTIVITY
    shift = threshold(make_device(quantum_shift=True)) - threshold(make_device())
    assert shift == pytest.approx(quantum_potential(field, 300.0), rel=1e-9, abs=0)
    # Its laws: field to 2/3, temperature to -1/3. Its unit: at 1 MV/cm some 0.2 V, so a slip of 1e2 in cm or m shows.
    assert quantum_potential(8 * field, 300.0) == pytest.approx(4 * quantum_potential(field, 300.0), rel=1e-12, abs=0)
    assert quantum_potential(field, 8 * 300.0) == pytest.approx(quantum_potential(field, 300.0) / 2, rel=1e-12, abs=0)
    assert 0.1 < quantum_potential(1e8, 300.0) < 0.4


def test_gate_depletion_adds_its_potential(make_device):
    charge = electrostatics(make_device()).bulk_charge
    shift = threshold(make_device(gate_doping=5e25)) - threshold(make_device())
    assert shift == pytest.approx(gate_depletion_potential(charge, 5e25), rel=1e-9, abs=0)
    # By another route: the bending of a uniform profile depleted by that charge.
    width = charge / (ELEMENTARY_CHARGE * 5e25)
    found = UniformProfile(doping=5e25).depletion_width(gate_depletion_potential(charge, 5e25))
    assert found == pytest.approx(width, rel=1e-12, abs=0)


def test_gate_depletion_vanishes_for_a_heavily_doped_gate(make_device):
    metal = threshold(make_device())
    assert threshold(make_device(gate_doping=1e40)) == pytest.approx(metal, abs=1e-12)
    assert threshold(make_device(gate_doping=float("inf"))) == metal
