"""Matched pairs against the list's section 4.

A printed coefficient is that of a pair's DIFFERENCE; our functions give one device, so every comparison below
multiplies by sqrt(2).
"""

import numpy as np
import pytest

from physics.dopants import dopant_sigma
from physics.profile import UniformProfile
from physics.roughness import area_law_sigma
from physics.silicon import fermi_potential, thermal_voltage
from physics.threshold import oxide_capacitance


# Ideal coefficient of a pair with no other cause than dopants (derived; CODATA, 300 K, n_i = 1e10 cm^-3).
@pytest.mark.parametrize(
    "oxide_nm, doping_per_cm3, coefficient_mv_um",
    [(50, 1e16, "10.44"), (10, 1e17, "3.86"), (5, 3e17, "2.58"), (3, 1e18, "2.13"), (2, 2e18, "1.70")],
)
def test_dopants_only_pair_coefficient(oxide_nm, doping_per_cm3, coefficient_mv_um):
    profile = UniformProfile(doping=doping_per_cm3 * 1e6)
    depletion_width = profile.depletion_width(2 * fermi_potential(profile.doping, thermal_voltage(300.0), 1e16))
    width, length = 0.4e-6, 0.1e-6
    sigma = dopant_sigma(profile, depletion_width, width, length, oxide_capacitance(oxide_nm * 1e-9))
    assert f"{np.sqrt(2) * sigma * np.sqrt(width * length) * 1e9:.2f}" == coefficient_mv_um


# M. J. M. Pelgrom and A. C. J. Duinmaijer, ESSCIRC 1988, second hand: 30 mV um (n-channel) and 4 uV/um. The distance
# term is not the area law's, so it is added here: 4.0 mV at 1 mm, 1.0 mV at 250 um.
@pytest.mark.parametrize(
    "side_um, distance_um, area_mv, distance_mv, together_mv",
    [(20, 1000, "1.5", "4.0", "4.272"), (3, 250, "10.0", "1.0", "10.050")],
)
def test_area_law_of_pelgrom_and_duinmaijer(side_um, distance_um, area_mv, distance_mv, together_mv):
    area = np.sqrt(2) * area_law_sigma(30e-9, side_um * 1e-6, side_um * 1e-6) * 1e3
    distance = 4e-3 * distance_um
    assert f"{area:.1f}" == area_mv
    assert f"{distance:.1f}" == distance_mv
    assert f"{np.hypot(area, distance):.3f}" == together_mv


# Schaper and Linnenbank, 130 nm pairs, second hand: length and width in um, sigma in mV, sigma sqrt(W L) in mV um.
SCHAPER = [
    (0.24, 1.60, 7.42, "4.598"),
    (0.24, 12.8, 2.62, "4.592"),
    (0.48, 1.60, 5.25, "4.601"),
    (0.48, 3.20, 3.71, "4.598"),
]


@pytest.mark.parametrize("length_um, width_um, sigma_mv, coefficient", SCHAPER)
def test_area_law_of_schaper_and_linnenbank(length_um, width_um, sigma_mv, coefficient):
    # One coefficient, that of the first row, holds for a factor of eight in area to 0.2 %.
    assert f"{sigma_mv * np.sqrt(length_um * width_um):.3f}" == coefficient
    law = np.sqrt(2) * area_law_sigma(4.598e-9, width_um * 1e-6, length_um * 1e-6) * 1e3
    assert law == pytest.approx(sigma_mv, rel=2e-3, abs=0)


def test_area_law_fails_at_the_shortest_length():
    # The same source at L = 0.12 um: 12.1 mV measured, coefficient 5.302; the area law is 13 % low. Short devices have
    # causes of their own, which is why length is not the law's to scale (Drennan and McAndrew, IEEE J. Solid-State
    # Circuits 38, 450 (2003), abstract in print: mismatch does not follow 1/sqrt(area)).
    assert f"{12.1 * np.sqrt(0.12 * 1.60):.3f}" == "5.302"
    law = np.sqrt(2) * area_law_sigma(4.598e-9, 1.60e-6, 0.12e-6) * 1e3
    assert law / 12.1 == pytest.approx(0.867, abs=1e-3)
