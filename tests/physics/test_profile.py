"""The depletion region of uniform and step profiles: limits, continuity, and integrals done numerically."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad

from physics.constants import ELEMENTARY_CHARGE, SILICON_PERMITTIVITY
from physics.profile import StepProfile, UniformProfile
from physics.threshold import implant_shift, oxide_capacitance

POTENTIALS = np.linspace(0.05, 4.0, 40)
PROFILES = [
    StepProfile(surface_doping=2e23, surface_depth=20e-9, doping=4e23),  # retrograde
    StepProfile(surface_doping=1e24, surface_depth=15e-9, doping=1e23),  # implanted
    UniformProfile(doping=3e23),
]

log_doping = st.floats(22.0, 24.7)
depth_nm = st.floats(1.0, 60.0)
volts = st.floats(0.05, 5.0)


def doping_at(profile, depth):
    in_surface_layer = isinstance(profile, StepProfile) and depth < profile.surface_depth
    return profile.surface_doping if in_surface_layer else profile.doping


def integral(profile, width, weight):
    """Integral of doping times weight(depth) down to `width`, the step told to the integrator."""
    step = [profile.surface_depth] if isinstance(profile, StepProfile) and profile.surface_depth < width else None
    return quad(lambda depth: doping_at(profile, depth) * weight(depth), 0, width, points=step, epsrel=1e-11)[0]


@pytest.mark.parametrize("profile", PROFILES, ids=["retrograde", "implanted", "uniform"])
@pytest.mark.parametrize("potential", [0.1, 0.9, 3.0])
def test_width_charge_and_weights_against_numeric_integrals(profile, potential):
    width = profile.depletion_width(potential)
    # Poisson's equation integrated twice: the band bending is q/eps_s times the first moment of the doping.
    bending = ELEMENTARY_CHARGE / SILICON_PERMITTIVITY * integral(profile, width, lambda depth: depth)
    assert bending == pytest.approx(potential, rel=1e-9, abs=0)
    charge = ELEMENTARY_CHARGE * integral(profile, width, lambda depth: 1.0)
    assert profile.depletion_charge(width) == pytest.approx(charge, rel=1e-9, abs=0)
    for power in range(4):
        weighted = integral(profile, width, lambda depth, power=power: (1 - depth / width) ** power)
        assert profile.weighted_dopants(width, power) == pytest.approx(weighted, rel=1e-9, abs=0)


@given(log_doping=log_doping, depth_nm=depth_nm, potential=volts)
@settings(max_examples=60, deadline=None)
def test_step_of_equal_dopings_is_uniform(log_doping, depth_nm, potential):
    doping = 10**log_doping
    uniform = UniformProfile(doping=doping)
    step = StepProfile(surface_doping=doping, surface_depth=depth_nm * 1e-9, doping=doping)
    width = uniform.depletion_width(potential)
    assert step.depletion_width(potential) == pytest.approx(width, rel=1e-12, abs=0)
    assert step.depletion_charge(width) == pytest.approx(uniform.depletion_charge(width), rel=1e-12, abs=0)
    for power in range(4):
        expected = uniform.weighted_dopants(width, power)
        assert step.weighted_dopants(width, power) == pytest.approx(expected, rel=1e-12, abs=0)


@given(surface=log_doping, substrate=log_doping, depth_nm=depth_nm)
@settings(max_examples=60, deadline=None)
def test_width_is_continuous_where_it_crosses_the_step(surface, substrate, depth_nm):
    depth = depth_nm * 1e-9
    profile = StepProfile(surface_doping=10**surface, surface_depth=depth, doping=10**substrate)
    crossing = ELEMENTARY_CHARGE * profile.surface_doping * depth**2 / (2 * SILICON_PERMITTIVITY)
    around = profile.depletion_width(crossing * np.array([1 - 1e-9, 1 + 1e-9]))
    # The width's own slope there: d ln(x_d)/d ln(potential) is 1/2 above the step, (N_surface/N_substrate)/2 below it.
    allowed = 1e-9 * (1 + max(1, 10 ** (surface - substrate)))
    assert around == pytest.approx(depth, rel=allowed, abs=0)


@given(surface=log_doping, substrate=log_doping, depth_nm=depth_nm)
@settings(max_examples=60, deadline=None)
def test_width_grows_with_the_potential(surface, substrate, depth_nm):
    profile = StepProfile(surface_doping=10**surface, surface_depth=depth_nm * 1e-9, doping=10**substrate)
    assert np.all(np.diff(profile.depletion_width(POTENTIALS)) > 0)


def test_step_below_the_depletion_region_does_not_count():
    shallow = UniformProfile(doping=8e23)
    step = StepProfile(surface_doping=8e23, surface_depth=1e-6, doping=1e22)
    width = shallow.depletion_width(0.9)
    assert step.depletion_width(0.9) == pytest.approx(width, rel=1e-14, abs=0)
    assert step.depletion_charge(width) == pytest.approx(shallow.depletion_charge(width), rel=1e-14, abs=0)
    assert step.weighted_dopants(width, 2) == pytest.approx(shallow.weighted_dopants(width, 2), rel=1e-14, abs=0)


def test_thin_layer_tends_to_a_sheet_of_dopants():
    # At a fixed dose the shift tends to q dose/C_ox as the layer thins, and the error falls in proportion to its depth.
    substrate, dose, capacitance, potential = 1e23, 3e15, oxide_capacitance(5e-9), 0.85
    plain = UniformProfile(doping=substrate)
    before = plain.depletion_charge(plain.depletion_width(potential)) / capacitance

    def error(depth):
        layer = StepProfile(surface_doping=substrate + dose / depth, surface_depth=depth, doping=substrate)
        shift = layer.depletion_charge(layer.depletion_width(potential)) / capacitance - before
        return shift - implant_shift(dose, capacitance)

    assert abs(error(0.01e-9)) < 1e-3 * implant_shift(dose, capacitance)
    assert error(0.02e-9) / error(0.01e-9) == pytest.approx(2, rel=1e-3, abs=0)


@pytest.mark.parametrize("profile", PROFILES, ids=["retrograde", "implanted", "uniform"])
def test_scaled_profile(profile):
    # Four times every density at four times the bending leaves the width where it is and takes four times the charge.
    scaled = profile.scaled(4.0)
    width = profile.depletion_width(POTENTIALS)
    assert scaled.depletion_width(4 * POTENTIALS) == pytest.approx(width, rel=1e-12, abs=0)
    assert scaled.depletion_charge(width) == pytest.approx(4 * profile.depletion_charge(width), rel=1e-12, abs=0)


def test_arrays_of_profiles_broadcast():
    doping = np.array([1e23, 3e23, 9e23])
    together = StepProfile(surface_doping=2 * doping, surface_depth=20e-9, doping=doping)
    widths = together.depletion_width(POTENTIALS[:, None])
    assert widths.shape == (POTENTIALS.size, 3)
    for column, value in enumerate(doping):
        alone = StepProfile(surface_doping=2 * value, surface_depth=20e-9, doping=value)
        assert np.array_equal(widths[:, column], alone.depletion_width(POTENTIALS))
