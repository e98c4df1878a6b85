"""Threshold voltage against worked examples: N4 is Neamen, Semiconductor Physics and Devices, 4th ed. (print).

Each of his examples is replayed twice: with his constants (kT/q = 0.0259 V, n_i = 1.5e10 cm^-3, q and permittivities
from the fixture) it must round to what he prints; with CODATA and kT/q at 300 K, n_i still his, to the list's second
figure.
"""

import numpy as np
import pytest

from physics.constants import ELEMENTARY_CHARGE
from physics.edges import fringe_factor
from physics.profile import UniformProfile
from physics.short_channel import charge_sharing_factor
from physics.silicon import fermi_potential, thermal_voltage
from physics.threshold import (
    body_coefficient,
    body_effect,
    flat_band_voltage,
    implant_shift,
    long_channel_threshold,
    oxide_capacitance,
)

BOOK_KT = 0.0259  # [V]
OWN_KT = thermal_voltage(300.0)
BOOK_INTRINSIC = 1.5e16  # [m^-3]


def depletion(doping_per_cm3, kt):
    """Surface potential 2 phi_F [V], depletion width [m] and depletion charge [C/m^2] at threshold."""
    profile = UniformProfile(doping=doping_per_cm3 * 1e6)
    potential = 2 * fermi_potential(profile.doping, kt, BOOK_INTRINSIC)
    width = profile.depletion_width(potential)
    return potential, width, profile.depletion_charge(width)


def example_threshold(kt, charge, doping_per_cm3, oxide_nm, interface_per_cm2, work_function_difference, polarity):
    capacitance = oxide_capacitance(oxide_nm * 1e-9)
    flat_band = flat_band_voltage(work_function_difference, interface_per_cm2 * 1e4 * charge, capacitance)
    potential, _, bulk_charge = depletion(doping_per_cm3, kt)
    return long_channel_threshold(flat_band, potential, bulk_charge / capacitance, polarity)


def test_example_10_3_flat_band_as_printed(neamen):
    capacitance = oxide_capacitance(20e-9)
    assert f"{capacitance * 1e-4:.3e}" == "1.726e-07"  # [F/cm^2]; 1.72575 exactly
    assert f"{flat_band_voltage(-1.1, 5e14 * neamen, capacitance):.2f}" == "-1.15"


def test_example_10_3_flat_band_with_our_constants():
    assert f"{flat_band_voltage(-1.1, 5e14 * ELEMENTARY_CHARGE, oxide_capacitance(20e-9)):.4f}" == "-1.1464"


N_CHANNEL_10_4 = (1e15, 12, 1e10, -0.88, +1)
P_CHANNEL_10_5 = (1e17, 12, 2e10, +1.1, -1)


@pytest.mark.parametrize("inputs, printed", [(N_CHANNEL_10_4, "-0.262"), (P_CHANNEL_10_5, "-0.296")])
def test_examples_10_4_and_10_5_as_printed(neamen, inputs, printed):
    assert f"{example_threshold(BOOK_KT, neamen, *inputs):.3f}" == printed


@pytest.mark.parametrize("inputs, derived", [(N_CHANNEL_10_4, "-0.2633"), (P_CHANNEL_10_5, "-0.2942")])
def test_examples_10_4_and_10_5_with_our_constants(inputs, derived):
    assert f"{example_threshold(OWN_KT, ELEMENTARY_CHARGE, *inputs):.4f}" == derived


def test_example_10_9_body_effect_as_printed(neamen):
    # The book divides by its rounded C_ox = 1.726e-7 F/cm^2; the exact 1.72575e-7 would give 0.5777 instead of its
    # 0.5776.
    coefficient = body_coefficient(3e22, 1.726e-3)
    potential, _, _ = depletion(3e16, BOOK_KT)
    assert f"{coefficient:.4f}" == "0.5776"
    assert f"{body_effect(coefficient, potential, 1.0):.3f}" == "0.264"


def test_example_10_9_body_effect_with_our_constants():
    coefficient = body_coefficient(3e22, oxide_capacitance(20e-9))
    potential, _, _ = depletion(3e16, OWN_KT)
    assert f"{coefficient:.5f}" == "0.57798"
    assert f"{body_effect(coefficient, potential, 1.0):.5f}" == "0.26403"


def yau_shift(kt):
    """Example 11.3: L = 1 um, junctions of 0.3 um, 20 nm of oxide, 3e16 cm^-3 [V]."""
    _, width, charge = depletion(3e16, kt)
    return (charge_sharing_factor(width, 1e-6, 0.3e-6) - 1) * charge / oxide_capacitance(20e-9)


def test_example_11_3_charge_sharing_as_printed(neamen):
    assert f"{yau_shift(BOOK_KT):.4f}" == "-0.0726"


def test_example_11_3_charge_sharing_with_our_constants():
    assert f"{yau_shift(OWN_KT):.5f}" == "-0.07251"


def narrow_width(kt):
    """Example 11.4: the width [um] at which quarter circles raise the threshold by 0.2 V; the shift goes as 1/W."""
    _, depletion_width, charge = depletion(3e16, kt)
    shift_at_one_um = (fringe_factor(depletion_width, 1e-6, np.pi / 2) - 1) * charge / oxide_capacitance(20e-9)
    return shift_at_one_um / 0.2


def test_example_11_4_narrow_width_as_printed(neamen):
    assert f"{narrow_width(BOOK_KT):.3f}" == "0.708"


def test_example_11_4_narrow_width_with_our_constants():
    assert f"{narrow_width(OWN_KT):.4f}" == "0.7070"


def implant(kt):
    """Example 11.6: threshold before the implant [V], and the dose [cm^-2] that lifts it to +0.4 V."""
    capacitance = oxide_capacitance(18e-9)
    potential, _, charge = depletion(5e15, kt)
    before = long_channel_threshold(-1.25, potential, charge / capacitance)
    return before, (0.4 - before) / implant_shift(1e4, capacitance)


def test_example_11_6_implant_as_printed(neamen):
    before, dose_per_cm2 = implant(BOOK_KT)
    assert f"{before:.3f}" == "-0.419"
    assert f"{dose_per_cm2:.3e}" == "9.815e+11"


def test_example_11_6_implant_with_our_constants():
    before, dose_per_cm2 = implant(OWN_KT)
    assert f"{before:.4f}" == "-0.4203"
    assert f"{dose_per_cm2:.3e}" == "9.822e+11"


def test_body_effect_of_rabaey():
    # J. M. Rabaey, Digital Integrated Circuits, example 2.8, second hand: V_T0 0.75, gamma 0.54, 2 phi 0.6, V_SB 5.
    assert f"{0.75 + body_effect(0.54, 0.6, 5.0):.4f}" == "1.6096"


def test_body_effect_of_singh(use_constants):
    # J. Singh, Semiconductor Devices, example 9.10, second hand: N = 2e16, 50 nm, V_SB = 1, n_i = 1.5e10, kT/q = 0.026
    # and a permittivity of 11.9. With our 11.7 it is 0.543: gamma goes as the root of the silicon's permittivity.
    use_constants(ELEMENTARY_CHARGE=1.6e-19, SILICON_PERMITTIVITY=11.9 * 8.85e-12, OXIDE_PERMITTIVITY=3.9 * 8.85e-12)
    potential, _, _ = depletion(2e16, 0.026)
    assert f"{body_effect(body_coefficient(2e22, oxide_capacitance(50e-9)), potential, 1.0):.3f}" == "0.547"
