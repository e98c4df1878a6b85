"""Sums of dopant weights: closed forms against drawing the dopants one by one."""

import numpy as np
import pytest
from scipy.integrate import quad

from physics.counted import layered_weight_density
from physics.dopants import dopant_sigma, fringe_weighted_dopants, single_dopant_shift, weighted_count
from physics.profile import StepProfile, UniformProfile
from physics.threshold import oxide_capacitance

UNIFORM = UniformProfile(doping=1e24)
STEP = StepProfile(surface_doping=3e23, surface_depth=12e-9, doping=1.2e24)
DEPTH = 35e-9  # depletion width [m]
CAPACITANCE = oxide_capacitance(3e-9)
DEVICES = 40_000


def sums_of_weights(generator, counts, weight_of):
    """Sum of the weights of `counts` dopants, device by device."""
    device = np.repeat(np.arange(counts.size), counts)
    return np.bincount(device, weight_of(generator, counts.sum()), counts.size)


def channel_sums(generator, profile, width, length):
    """Dopants thrown one by one: a Poisson number in each layer, uniform depths, weight 1 - depth/x_d."""
    step = profile.surface_depth if isinstance(profile, StepProfile) else 0.0
    total = 0.0
    for top, bottom, doping in ((0.0, step, profile.surface_doping), (step, DEPTH, profile.doping)):
        counts = generator.poisson(doping * (bottom - top) * width * length, DEVICES)
        total = total + sums_of_weights(
            generator, counts, lambda g, n, top=top, bottom=bottom: 1 - g.uniform(top, bottom, n) / DEPTH
        )
    return total


def quarter_circle_sums(generator, doping, length):
    """Dopants thrown into squares beside both edges, those outside the quarter circle of radius x_d left out."""
    counts = generator.poisson(2 * doping * DEPTH**2 * length, DEVICES)

    def weight(g, n):
        radius = np.hypot(g.uniform(0, 1, n), g.uniform(0, 1, n))
        return np.where(radius < 1, 1 - radius, 0.0)

    return sums_of_weights(generator, counts, weight)


def assert_cumulants(sums, cumulants):
    """Mean, variance and third cumulant within 5 standard errors; moments about the known mean have the plain error."""
    mean, variance, third = cumulants
    centred = sums - mean
    for sample, expected in ((centred, 0.0), (centred**2, variance), (centred**3, third)):
        standard_error = sample.std() / np.sqrt(sample.size)
        assert abs(sample.mean() - expected) < 5 * standard_error


@pytest.mark.parametrize("profile", [UNIFORM, STEP], ids=["uniform", "step"])
@pytest.mark.parametrize("side", [30e-9, 60e-9])
def test_closed_forms_against_dopants_drawn_one_by_one(profile, side):
    sums = channel_sums(np.random.default_rng(11), profile, side, side)
    assert_cumulants(sums, [weighted_count(profile, DEPTH, side, side, power) for power in (1, 2, 3)])


def test_closed_forms_with_the_fringe_against_dopants_drawn_one_by_one():
    generator, side = np.random.default_rng(12), 40e-9
    sums = channel_sums(generator, UNIFORM, side, side) + quarter_circle_sums(generator, UNIFORM.doping, side)
    shape = np.pi / 2
    assert_cumulants(sums, [weighted_count(UNIFORM, DEPTH, side, side, power, shape) for power in (1, 2, 3)])


@pytest.mark.parametrize("power", [0, 1, 2, 3])
def test_fringe_against_a_numeric_integral(power):
    # Half a circle's circumference in all at radius rho: shape pi/2 is two quarter circles, of pi rho/2 each.
    expected = quad(lambda rho: np.pi * rho * 1e24 * (1 - rho / DEPTH) ** power, 0, DEPTH)[0]
    assert fringe_weighted_dopants(1e24, DEPTH, np.pi / 2, power) == pytest.approx(expected, rel=1e-10, abs=0)


@pytest.mark.parametrize("width", [20e-9, 50e-9, 1e-6])
def test_fringe_multiplies_the_variance(width):
    plain = dopant_sigma(UNIFORM, DEPTH, width, 50e-9, CAPACITANCE)
    fringed = dopant_sigma(UNIFORM, DEPTH, width, 50e-9, CAPACITANCE, np.pi / 2)
    assert (fringed / plain) ** 2 == pytest.approx(1 + np.pi / 4 * DEPTH / width, rel=1e-12, abs=0)


def test_number_of_dopants_is_that_of_the_volume():
    assert weighted_count(UNIFORM, DEPTH, 50e-9, 80e-9, 0) == pytest.approx(
        1e24 * DEPTH * 50e-9 * 80e-9, rel=1e-12, abs=0
    )
    inside = 3e23 * 12e-9 + 1.2e24 * (DEPTH - 12e-9)
    assert weighted_count(STEP, DEPTH, 50e-9, 80e-9, 0) == pytest.approx(inside * 50e-9 * 80e-9, rel=1e-12, abs=0)


def test_sigma_follows_the_area_and_skew_the_number():
    # sigma sqrt(W L) is constant; the skew falls as one over the root of the number.
    small, large = (dopant_sigma(UNIFORM, DEPTH, side, side, CAPACITANCE) for side in (50e-9, 200e-9))
    assert small / large == pytest.approx(4, rel=1e-12, abs=0)
    skew = [
        weighted_count(UNIFORM, DEPTH, side, side, 3) / weighted_count(UNIFORM, DEPTH, side, side, 2) ** 1.5
        for side in (50e-9, 200e-9)
    ]
    assert skew[0] / skew[1] == pytest.approx(4, rel=1e-12, abs=0)


def test_one_dopant_moves_the_threshold_by_its_share_of_the_charge():
    # A sheet of as many charges as there are unit areas in the channel moves it by q dose/C_ox: W L dose dopants in
    # all.
    dose, width, length = 1e15, 50e-9, 80e-9
    number = dose * width * length
    expected = 1.602176634e-19 * dose / CAPACITANCE
    assert number * single_dopant_shift(CAPACITANCE, width, length) == pytest.approx(expected, rel=1e-12, abs=0)


@pytest.mark.parametrize("fringe_shape", [0.0, np.pi / 2])
@pytest.mark.parametrize("profile", [UNIFORM, STEP], ids=["uniform", "step"])
def test_density_of_the_weight_has_the_moments_of_the_counts(profile, fringe_shape):
    # Two ways to the same law: integrals over places (weighted_count) and over weights (the density the table is made
    # of).
    width, length = 50e-9, 60e-9
    surface_depth = profile.surface_depth if profile is STEP else 0.0
    ratios = {
        "surface_ratio": profile.surface_doping / profile.doping,
        "depth_ratio": surface_depth / DEPTH,
        "fringe_ratio": fringe_weighted_dopants(profile.surface_doping, DEPTH, fringe_shape, 0)
        / (profile.doping * width * DEPTH),
    }
    step = [1 - surface_depth / DEPTH]

    def moment(power):
        return quad(lambda w: w**power * layered_weight_density(w, **ratios), 0, 1, points=step, epsrel=1e-11)[0]

    for power in (1, 2, 3):
        counts = [weighted_count(profile, DEPTH, width, length, j, fringe_shape) for j in (power, 0)]
        assert moment(power) / moment(0) == pytest.approx(counts[0] / counts[1], rel=1e-8, abs=0)
