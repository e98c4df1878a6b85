"""Bulk silicon: limits and rates."""

import numpy as np
import pytest

from physics.silicon import (
    band_gap,
    fermi_potential,
    intrinsic_density,
    intrinsic_density_misiakos,
    thermal_voltage,
)


def test_fermi_potential_gives_the_doping_back():
    doping = np.geomspace(1e21, 1e25, 9)
    potential = fermi_potential(doping, thermal_voltage(350.0), 1e17)
    assert 1e17 * np.exp(potential / thermal_voltage(350.0)) == pytest.approx(doping, rel=1e-12, abs=0)
    assert fermi_potential(1e17, 0.03, 1e17) == 0.0


def test_gap_shrinks_steadily_from_its_value_at_absolute_zero():
    temperature = np.linspace(0, 700, 71)
    assert band_gap(temperature)[0] == 1.17
    assert np.all(np.diff(band_gap(temperature)) < 0)


@pytest.mark.parametrize("density", [intrinsic_density, intrinsic_density_misiakos])
def test_intrinsic_density_is_activated_by_half_the_gap(density):
    # The slope of ln n_i against 1/kT is half the gap extrapolated to absolute zero and some kT: 0.5 to 0.7 V.
    temperature = np.array([280.0, 320.0])
    slope = np.diff(np.log(density(temperature))) / np.diff(1 / thermal_voltage(temperature))
    assert 0.5 < -slope[0] < 0.7


def test_the_two_densities_agree_where_both_are_fitted():
    temperature = np.linspace(250, 340, 19)
    assert intrinsic_density_misiakos(temperature) == pytest.approx(intrinsic_density(temperature), rel=0.1, abs=0)
