"""The counted law driven by one standard normal, against closed-form cumulants and dopants drawn one by one."""

import numpy as np
import pytest
from scipy.special import ndtr, ndtri

from physics.constants import ELEMENTARY_CHARGE
from physics.counted import CountedLaw, layered_weight_density
from physics.dopants import dopant_sigma, fringe_weighted_dopants, single_dopant_shift, weighted_count
from physics.profile import StepProfile, UniformProfile
from physics.silicon import fermi_potential, thermal_voltage
from physics.threshold import oxide_capacitance

DRAWS = 400_000
LEVELS = np.array([-2.5, -1.5, -0.5, 0.0, 0.5, 1.5, 2.5])


def uniform_density(weight):
    return np.ones_like(weight)


def drawn_sums(generator, mean_count, draw_weight, devices):
    """The slow twin: a Poisson number of dopants a device, one weight each, added up; in blocks, to spare memory."""
    blocks = []
    for _ in range(devices // 10_000):
        counts = generator.poisson(mean_count, 10_000)
        weights = draw_weight(generator, counts.sum())
        blocks.append(np.bincount(np.repeat(np.arange(10_000), counts), weights, 10_000))
    return np.concatenate(blocks)


def assert_standardised(sample, skew):
    """Mean 0, variance 1 and the third cumulant, each within 5 standard errors of the sample's own."""
    for moment, expected in ((sample, 0.0), (sample**2, 1.0), (sample**3, skew)):
        assert abs(moment.mean() - expected) < 5 * moment.std() / np.sqrt(moment.size)


def assert_shares(sums, quantiles):
    """Share of drawn sums below the law's quantiles, within 5 standard errors of a share."""
    probability = ndtr(LEVELS)
    share = (sums[:, None] <= quantiles).mean(axis=0)
    assert np.all(np.abs(share - probability) < 5 * np.sqrt(probability * (1 - probability) / sums.size))


@pytest.mark.parametrize("mean_count", [25.0, 100.0, 400.0])
def test_law_and_slow_twin_have_the_closed_forms_cumulants(mean_count):
    # Uniform depths: cumulants m/2, m/3, m/4 (Campbell), so the skew is (m/4)/(m/3)^1.5.
    mean, sigma = mean_count / 2, np.sqrt(mean_count / 3)
    skew = mean_count / 4 / sigma**3
    law = CountedLaw.build(mean_count, uniform_density)
    normal = np.random.default_rng(21).standard_normal(DRAWS)
    assert_standardised(law.standardised(normal, mean_count), skew)
    sums = drawn_sums(np.random.default_rng(22), mean_count, lambda g, n: g.random(n), 50_000)
    assert_standardised((sums - mean) / sigma, skew)
    assert_shares(sums, mean + sigma * law.standardised(LEVELS, mean_count))


@pytest.mark.parametrize("mean_count", [25.0, 100.0, 400.0])
def test_moments_without_randomness(mean_count):
    # The same moments on a fine, even ladder of probabilities: no sampling error is left, only the table's. Its
    # docstring allows d = 1e-3 sigma at 25 dopants, which moves the mean by d at most, the second moment by 2 d E|x|,
    # the third by 3 d E[x^2].
    normal = ndtri((np.arange(1_000_000) + 0.5) / 1_000_000)
    found = CountedLaw.build(mean_count, uniform_density).standardised(normal, mean_count)
    assert abs(found.mean()) < 1e-3
    assert found.var() == pytest.approx(1, abs=2e-3)
    assert (found**3).mean() == pytest.approx(mean_count / 4 / (mean_count / 3) ** 1.5, abs=3e-3)


def test_skew_of_a_small_device_shows():
    # 50 x 50 nm, 3 nm of oxide, 1e18 cm^-3: 88 dopants. In volts, as a study uses it.
    profile, side, capacitance = UniformProfile(doping=1e24), 50e-9, oxide_capacitance(3e-9)
    depth = profile.depletion_width(2 * fermi_potential(1e24, thermal_voltage(300.0), 1e16))
    counts = [weighted_count(profile, depth, side, side, power) for power in range(4)]
    sigma = dopant_sigma(profile, depth, side, side, capacitance)
    assert sigma == pytest.approx(single_dopant_shift(capacitance, side, side) * np.sqrt(counts[2]), rel=1e-12, abs=0)
    assert sigma == pytest.approx(ELEMENTARY_CHARGE / capacitance * np.sqrt(1e24 * depth / 3) / side, rel=1e-12, abs=0)
    normal = np.random.default_rng(23).standard_normal(DRAWS)
    scatter = sigma * CountedLaw.build(counts[0], uniform_density).standardised(normal, counts[0])
    cubes = (scatter / sigma) ** 3
    standard_error = cubes.std() / np.sqrt(DRAWS)
    assert cubes.mean() > 10 * standard_error  # a normal law would be within a few of zero
    assert abs(cubes.mean() - counts[3] / counts[2] ** 1.5) < 5 * standard_error


def test_step_profile_against_dopants_drawn_one_by_one():
    # A retrograde well: a third of the doping down to a third of the depth; weights from depths in the two layers.
    depth, surface_depth, area = 36e-9, 12e-9, (45e-9) ** 2
    profile = StepProfile(surface_doping=4e23, surface_depth=surface_depth, doping=1.2e24)
    counts = [weighted_count(profile, depth, area**0.5, area**0.5, power) for power in range(4)]
    sigma = np.sqrt(counts[2])
    in_surface = 4e23 * surface_depth * area / counts[0]

    def draw(generator, number):
        shallow = generator.random(number) < in_surface
        place = generator.random(number)
        return 1 - np.where(shallow, place * surface_depth, surface_depth + place * (depth - surface_depth)) / depth

    law = CountedLaw.build(
        counts[0], lambda w: layered_weight_density(w, surface_ratio=1 / 3, depth_ratio=surface_depth / depth)
    )
    normal = np.random.default_rng(24).standard_normal(DRAWS)
    assert_standardised(law.standardised(normal, counts[0]), counts[3] / sigma**3)
    sums = drawn_sums(np.random.default_rng(25), counts[0], draw, 100_000)
    assert_standardised((sums - counts[1]) / sigma, counts[3] / sigma**3)
    assert_shares(sums, counts[1] + sigma * law.standardised(LEVELS, counts[0]))


def test_fringe_against_dopants_drawn_one_by_one():
    # A channel as wide as its depletion depth between two quarter circles: pi/2 as many dopants beside it as under it.
    depth, width, length, doping = 35e-9, 35e-9, 60e-9, 8e23
    profile = UniformProfile(doping=doping)
    counts = [weighted_count(profile, depth, width, length, power, np.pi / 2) for power in range(4)]
    sigma = np.sqrt(counts[2])
    fringe_ratio = fringe_weighted_dopants(doping, depth, np.pi / 2, 0) / (doping * width * depth)
    assert fringe_ratio == pytest.approx(np.pi / 2)

    def draw(generator, number):
        beside = generator.random(number) < fringe_ratio / (1 + fringe_ratio)
        place = generator.random(number)
        return 1 - np.where(beside, np.sqrt(place), place)  # radii in a circle go as the root of a uniform number

    law = CountedLaw.build(
        counts[0],
        lambda w: layered_weight_density(w, surface_ratio=1.0, depth_ratio=0.0, fringe_ratio=fringe_ratio),
    )
    normal = np.random.default_rng(26).standard_normal(DRAWS)
    assert_standardised(law.standardised(normal, counts[0]), counts[3] / sigma**3)
    sums = drawn_sums(np.random.default_rng(27), counts[0], draw, 100_000)
    assert_standardised((sums - counts[1]) / sigma, counts[3] / sigma**3)
    assert_shares(sums, counts[1] + sigma * law.standardised(LEVELS, counts[0]))
