"""Scatter of dopants against the list's section 3: one device, 50 x 50 nm, 3 nm of oxide, n_i = 1e10 cm^-3, 300 K."""

import numpy as np
import pytest

from physics.constants import ELEMENTARY_CHARGE, OXIDE_PERMITTIVITY, SILICON_PERMITTIVITY
from physics.dopants import asenov_sigma, dopant_sigma, weighted_count
from physics.profile import UniformProfile
from physics.silicon import fermi_potential, thermal_voltage
from physics.threshold import oxide_capacitance

SIDE = 50e-9  # [m]
OXIDE = 3e-9  # [m]
FERMI = {n: fermi_potential(n * 1e6, thermal_voltage(300.0), 1e16) for n in (1e17, 5e17, 1e18, 2e18, 5e18)}


def law_sigma(doping_per_cm3):
    profile = UniformProfile(doping=doping_per_cm3 * 1e6)
    width = profile.depletion_width(2 * FERMI[doping_per_cm3])
    return dopant_sigma(profile, width, SIDE, SIDE, oxide_capacitance(OXIDE))


# Derived: sigma = (q/C_ox) sqrt(N x_d/(3 W L)), number N x_d W L.
@pytest.mark.parametrize(
    "doping_per_cm3, sigma_mv, number",
    [
        (1e17, "16.38", "26.0"),
        (5e17, "25.08", "60.9"),
        (1e18, "30.11", "87.7"),
        (2e18, "36.14", "126.4"),
        (5e18, "45.98", "204.6"),
    ],
)
def test_sigma_and_number(doping_per_cm3, sigma_mv, number):
    profile = UniformProfile(doping=doping_per_cm3 * 1e6)
    width = profile.depletion_width(2 * FERMI[doping_per_cm3])
    assert f"{law_sigma(doping_per_cm3) * 1e3:.2f}" == sigma_mv
    assert f"{weighted_count(profile, width, SIDE, SIDE, 0):.1f}" == number


def test_asenov_fit():
    # A. Asenov, IEEE Trans. Electron Devices 45, 2505 (1998), from memory.
    assert f"{asenov_sigma(OXIDE, 5e24, SIDE, SIDE) * 1e3:.2f}" == "60.29"


# The same fit over the law above, from memory as the fit is. It crosses 1 between 5e17 and 1e18 and is meant for 1e18
# to 5e18.
@pytest.mark.parametrize("doping_per_cm3, ratio", [(5e17, "0.955"), (1e18, "1.050"), (2e18, "1.155"), (5e18, "1.311")])
def test_asenov_over_the_law(doping_per_cm3, ratio):
    assert f"{asenov_sigma(OXIDE, doping_per_cm3 * 1e6, SIDE, SIDE) / law_sigma(doping_per_cm3):.3f}" == ratio


def test_ideal_normalised_coefficient():
    # Derived: with the normalisation of Takeuchi (IEDM 2007, from memory) sigma sqrt(W L)/sqrt(t_ox * drop over the
    # oxide) is sqrt(q/(3 eps_ox)) = 1.2436 mV um/sqrt(nm V) for every doping and oxide; the drop is that of the
    # depletion charge.
    for doping, oxide in ((1e23, 10e-9), (1e24, 3e-9), (5e24, 1.5e-9)):
        profile, capacitance = UniformProfile(doping=doping), oxide_capacitance(oxide)
        width = profile.depletion_width(0.9)
        drop = profile.depletion_charge(width) / capacitance
        coefficient = dopant_sigma(profile, width, 2e-6, 0.5e-6, capacitance) * 1e-6 / np.sqrt(oxide * drop)
        assert coefficient == pytest.approx(np.sqrt(ELEMENTARY_CHARGE / (3 * OXIDE_PERMITTIVITY)), rel=1e-12, abs=0)
        in_mv_um = coefficient * 1e3 * 1e6 * np.sqrt(1e-9)  # from V m/sqrt(m V) to mV um/sqrt(nm V)
        assert f"{in_mv_um:.4f}" == "1.2436"


def test_quartic_shorthand_needs_the_fermi_potential_itself():
    # Mizuno 1994 and Stolk 1998: sigma = ((4 q^3 eps_s phi)^(1/4)/sqrt(3)) (t_ox/eps_ox) N^(1/4)/sqrt(W L). It is the
    # law above with phi = phi_F; with phi = 2 phi_F it is 2^(1/4) = 1.19 times too large (the list's remark; derived).
    for doping_per_cm3, fermi in FERMI.items():
        once, twice = (
            (4 * ELEMENTARY_CHARGE**3 * SILICON_PERMITTIVITY * phi * doping_per_cm3 * 1e6) ** 0.25
            / np.sqrt(3)
            * OXIDE
            / OXIDE_PERMITTIVITY
            / SIDE
            for phi in (fermi, 2 * fermi)
        )
        assert once == pytest.approx(law_sigma(doping_per_cm3), rel=1e-12, abs=0)
        assert f"{twice / law_sigma(doping_per_cm3):.2f}" == "1.19"
