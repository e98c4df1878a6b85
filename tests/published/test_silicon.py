"""Bulk silicon against print: Fermi potential, depletion width, gap, intrinsic density."""

import numpy as np
import pytest

from physics.profile import UniformProfile
from physics.silicon import band_gap, fermi_potential, intrinsic_density, intrinsic_density_misiakos, thermal_voltage

PER_CM3 = 1e6


def test_fermi_potential():
    # N4 example 10.1, print: N = 1e16, n_i = 1.5e10 cm^-3, kT/q = 0.0259 V.
    assert fermi_potential(1e16 * PER_CM3, 0.0259, 1.5e10 * PER_CM3) == pytest.approx(0.3473, abs=5e-5)


# N4 chapters 10 and 11, print. The tolerance is half of the last printed digit.
@pytest.mark.parametrize(
    "doping_per_cm3, printed_um, half_digit",
    [
        (1e15, 0.863, 5e-4),
        (5e15, 0.4130, 5e-5),
        (1e16, 0.30, 5e-3),
        (3e16, 0.18, 5e-3),
        (1e17, 0.1026, 5e-5),
    ],
)
def test_maximum_depletion_width_with_the_books_constants(neamen, doping_per_cm3, printed_um, half_digit):
    # The book carries phi_F on with the four digits it prints: 0.3294 V at 5e15, whence 0.41296 and its 0.4130 um. The
    # unrounded 0.32937 V gives 0.41294, which would round to 0.4129.
    fermi = np.round(fermi_potential(doping_per_cm3 * PER_CM3, 0.0259, 1.5e10 * PER_CM3), 4)
    width = UniformProfile(doping=doping_per_cm3 * PER_CM3).depletion_width(2 * fermi)
    assert width * 1e6 == pytest.approx(printed_um, abs=half_digit)


# Derived: CODATA constants, 11.7, 300 K, n_i = 1e10 cm^-3. Five decimals are given, which is coarser than the list's
# 1e-4 (relative) for the last row only: 0.0350947 um stands there as 0.03509.
@pytest.mark.parametrize(
    "doping_per_cm3, derived_um", [(1e15, 0.87737), (1e16, 0.30393), (1e17, 0.10381), (1e18, 0.03509)]
)
def test_maximum_depletion_width_with_our_constants(doping_per_cm3, derived_um):
    fermi = fermi_potential(doping_per_cm3 * PER_CM3, thermal_voltage(300.0), 1e10 * PER_CM3)
    width = UniformProfile(doping=doping_per_cm3 * PER_CM3).depletion_width(2 * fermi)
    assert width * 1e6 == pytest.approx(derived_um, abs=5e-6)


def test_band_gap():
    # Varshni's form; the constants 1.17, 4.73e-4, 636 in print: R. F. Pierret, Advanced Semiconductor Fundamentals, ex.
    # 2.4.
    assert band_gap(300.0) == pytest.approx(1.12452, abs=1e-5)


def test_intrinsic_density_of_sproul_and_green():
    # J. Appl. Phys. 70, 846 (1991), second hand: the fit gives 1.0037e10 cm^-3 at 300 K, which the paper rounds to
    # 1.00e10.
    density_per_cm3 = intrinsic_density(300.0) / PER_CM3
    assert density_per_cm3 == pytest.approx(1.0037e10, rel=1e-3, abs=0)
    assert f"{density_per_cm3:.2e}" == "1.00e+10"


def test_intrinsic_density_of_misiakos_and_tsamakis():
    # J. Appl. Phys. 74, 3293 (1993), second hand: 9.696e9 cm^-3 at 300 K, which the paper rounds to 9.7e9.
    density_per_cm3 = intrinsic_density_misiakos(300.0) / PER_CM3
    assert density_per_cm3 == pytest.approx(9.696e9, rel=1e-3, abs=0)
    assert f"{density_per_cm3:.1e}" == "9.7e+09"


# The same paper's data, second hand; 3 % is the list's tolerance, for the scatter of the measurements about their own
# fit.
@pytest.mark.parametrize(
    "temperature_k, measured_per_cm3",
    [(256.5, 1.45e8), (270.6, 6.7e8), (281.0, 1.79e9), (300.0, 9.7e9), (319.5, 4.51e10), (340.5, 1.89e11)],
)
def test_intrinsic_density_against_the_measurements(temperature_k, measured_per_cm3):
    assert intrinsic_density_misiakos(temperature_k) / PER_CM3 == pytest.approx(measured_per_cm3, rel=0.03, abs=0)
