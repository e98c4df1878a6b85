"""Second half of the list's section 2: identities of the edges, and the quasi-two-dimensional short channel."""

import numpy as np
import pytest

from physics.constants import SILICON_PERMITTIVITY
from physics.edges import fringe_factor, trench_factor, trench_length
from physics.profile import UniformProfile
from physics.short_channel import quasi_two_dimensional_length, quasi_two_dimensional_shift
from physics.threshold import oxide_capacitance


@pytest.mark.parametrize("shape", [1.0, np.pi / 2, 2.0])
@pytest.mark.parametrize("body_bias", [0.0, 1.0, 3.3])
def test_field_oxide_shift(shape, body_bias):
    # Derived: (F - 1) Q_B/C_ox = 2 xi eps_s (2 phi_F + V_SB)/(C_ox W), because Q_B x_d = 2 eps_s (2 phi_F + V_SB).
    profile, potential, width = UniformProfile(doping=4e23), 0.88 + body_bias, 0.2e-6
    depletion_width = profile.depletion_width(potential)
    capacitance = oxide_capacitance(3.2e-9)
    shift = (fringe_factor(depletion_width, width, shape) - 1) * profile.depletion_charge(depletion_width) / capacitance
    assert shift == pytest.approx(
        2 * shape * SILICON_PERMITTIVITY * potential / (capacitance * width), rel=1e-12, abs=0
    )


# Derived: F = (4 t_ox/pi) ln(2 t_fox/t_ox), the form of L. A. Akers, IEEE Electron Device Lett. 7, 419 (1986).
@pytest.mark.parametrize(
    "oxide_nm, field_oxide_nm, derived_nm",
    [(20, 600, "104.262"), (10, 400, "55.794"), (5, 300, "30.478"), (2, 300, "14.525")],
)
def test_trench_length(oxide_nm, field_oxide_nm, derived_nm):
    assert f"{trench_length(oxide_nm * 1e-9, field_oxide_nm * 1e-9) * 1e9:.3f}" == derived_nm


def test_trench_as_wide_as_its_length_halves_the_bulk_term():
    # Derived.
    assert trench_factor(30e-9, 30e-9) == 0.5


def test_edges_vanish_for_a_wide_channel():
    # Derived: both factors tend to 1 as 1/W, so a hundred times the width leaves a hundredth of the effect.
    narrow, wide = 100e-6, 100e-4
    for factor in (lambda width: fringe_factor(50e-9, width), lambda width: trench_factor(width, 30e-9)):
        assert abs(factor(narrow) - 1) < 1e-3
        assert (factor(wide) - 1) / (factor(narrow) - 1) == pytest.approx(0.01, rel=1e-3, abs=0)


# Derived: l = sqrt(eps_s t_ox x_dep/(eps_ox eta)), eta = 1.
@pytest.mark.parametrize("oxide_nm, depletion_nm, derived_nm", [(20, 180, "103.923"), (5, 50, "27.386")])
def test_quasi_two_dimensional_length(oxide_nm, depletion_nm, derived_nm):
    assert f"{quasi_two_dimensional_length(oxide_nm * 1e-9, depletion_nm * 1e-9) * 1e9:.3f}" == derived_nm


# The boundary problem of Z.-H. Liu et al., IEEE Trans. Electron Devices 40, 86 (1993) (model from memory), solved
# numerically for the list with V_bi - phi_s = 0.3 V; the digits are those given.
@pytest.mark.parametrize(
    "length_ratio, drain_voltage, solved_mv",
    [(10, 1.0, "8.562"), (5, 0.05, "63.16"), (5, 1.0, "126.5"), (3, 1.0, "500.5")],
)
def test_quasi_two_dimensional_shift(length_ratio, drain_voltage, solved_mv):
    decimals = len(solved_mv.split(".")[1])
    assert f"{quasi_two_dimensional_shift(length_ratio, 0.3, drain_voltage) * 1e3:.{decimals}f}" == solved_mv
