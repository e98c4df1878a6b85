"""The scatter of neighbours: sizes from the physics' formulas, counted dopants, and what is switched off."""

import numpy as np
import pytest
from scipy.stats import kurtosis, skew

from mc.streams import Streams
from physics import dopants, roughness
from physics.threshold import electrostatics, oxide_capacitance
from studies.population import Population

SAMPLES = 200_000
WIDTH, LENGTH = 0.1e-6, 0.05e-6
ROUGH = {
    "scatter": {
        "dopants": "off",
        "gate_edge_nm": 1.3,
        "gate_edge_correlation_nm": 25.0,
        "active_edge_nm": 2.5,
        "active_edge_correlation_nm": 40.0,
        "oxide_roughness_nm": 0.15,
        "oxide_roughness_correlation_nm": 8.0,
        "grain_mv": 40.0,
        "grain_area_nm2": 100.0,
        "remainder_pair_mv_um": 1.2,
        "current_factor_pair_percent_um": 0.9,
    }
}


def geometry_of(file):
    """Geometry of the tests' channel: drawn is electrical, there is no bias."""
    return Population(file, "n").geometry(WIDTH * 1e6, LENGTH * 1e6)


@pytest.mark.parametrize("correlation", ["exponential", "gaussian"])
def test_sizes_are_the_physics_formulas(make_plain_process, correlation):
    geometry = geometry_of(make_plain_process(ROUGH | {"scatter.edge_correlation": correlation}))

    def same(value):
        return pytest.approx(value, rel=1e-9, abs=0)

    assert (geometry.width, geometry.length, geometry.drawn_width) == (same(WIDTH), same(LENGTH), same(WIDTH))
    # a gate edge averages along the width, an edge of the active area along the length
    assert geometry.gate_edge_sigma == same(roughness.edge_pair_sigma(1.3e-9, 25e-9, WIDTH, correlation))
    assert geometry.active_edge_sigma == same(roughness.edge_pair_sigma(2.5e-9, 40e-9, LENGTH, correlation))
    assert geometry.oxide_sigma == same(roughness.oxide_roughness_sigma(0.15e-9, 8e-9, WIDTH, LENGTH) / 3e-9)
    # natural grains, 1.13 times more than equal ones; a pair coefficient is sqrt(2) times that of one device
    assert geometry.grain_sigma == same(0.040 * np.sqrt(1.280 * 100e-18 / (WIDTH * LENGTH)))
    assert geometry.remainder_sigma == same(1.2e-9 / np.sqrt(2 * WIDTH * LENGTH))
    assert geometry.current_factor_sigma == same(0.9e-8 / np.sqrt(2 * WIDTH * LENGTH))
    assert geometry.counted is None and geometry.fringe_shape == 0.0


def test_equal_grains(make_plain_process):
    geometry = geometry_of(make_plain_process(ROUGH | {"scatter.grain_cells": "equal"}))
    assert geometry.grain_sigma == pytest.approx(0.040 * np.sqrt(100e-18 / (WIDTH * LENGTH)), rel=1e-9, abs=0)


def test_what_is_not_given_has_no_size(make_plain_process):
    geometry = geometry_of(make_plain_process())
    sizes = "gate_edge", "active_edge", "oxide", "grain", "remainder", "current_factor"
    assert [getattr(geometry, f"{size}_sigma") for size in sizes] == [0.0] * 6


@pytest.mark.parametrize(
    "cause", ["gate_edges", "active_edges", "oxide_roughness", "grains", "remainder", "current_factor"]
)
def test_sizes_reach_the_devices(make_plain_process, cause):
    population = Population(make_plain_process(ROUGH | {"mobility_cm2_per_vs": 300.0}), "n")
    draws = Streams(3, 0, population.names(cause=cause)).take(SAMPLES)
    geometry, silicon = population.geometry(WIDTH * 1e6, LENGTH * 1e6), population.silicon(draws)
    device = population.devices(draws, geometry, silicon)
    currents = population.channels(draws, geometry, silicon, [0.05])[0].specific_current
    sample, sigma = {
        "gate_edges": (device.length, geometry.gate_edge_sigma),
        "active_edges": (device.width, geometry.active_edge_sigma),
        "oxide_roughness": (device.oxide_thickness / 3e-9, geometry.oxide_sigma),
        "grains": (population.scatter(draws, geometry, device, silicon.state), geometry.grain_sigma),
        "remainder": (population.scatter(draws, geometry, device, silicon.state), geometry.remainder_sigma),
        "current_factor": (currents / np.mean(currents), geometry.current_factor_sigma),
    }[cause]
    assert np.std(sample) == pytest.approx(sigma, rel=4 / np.sqrt(2 * SAMPLES), abs=0)


def assert_within_errors(statistic, expected, *samples):
    """A statistic of whole samples is right within four standard errors, these from fifty batches."""
    batches = [statistic(*parts) for parts in zip(*(np.split(sample, 50) for sample in samples))]
    assert statistic(*samples) == pytest.approx(expected, abs=4 * np.std(batches) / np.sqrt(50))


def dopant_shifts(file):
    """Shifts of the threshold by dopants alone, drawn [V], and the population."""
    population = Population(file, "n")
    draws = Streams(3, 0, ["n.dopants.device"]).take(SAMPLES)
    silicon, geometry = population.silicon(draws), population.geometry(WIDTH * 1e6, LENGTH * 1e6)
    shifts = population.thresholds(draws, geometry, silicon, 0.0) - population.thresholds({}, geometry, silicon, 0.0)
    return np.asarray(shifts), population


def place(population):
    """Profile, depletion width and dimensions, as the dopants' formulas want them."""
    return population.nominal.profile, electrostatics(population.nominal).depletion_width, WIDTH, LENGTH


LAYERED = {"surface_doping_per_cm3": 2e17, "surface_depth_nm": 10.0}


@pytest.mark.parametrize("law", ["counted", "normal"])
@pytest.mark.parametrize("profile", [{}, LAYERED], ids=["uniform", "layered"])
def test_dopants_have_the_formula_s_moments(make_plain_process, law, profile):
    """Counted dopants have Campbell's cumulants, the normal law only the first two of them."""
    shifts, population = dopant_shifts(make_plain_process({"scatter.dopants": law} | profile))
    sigma = float(dopants.dopant_sigma(*place(population), oxide_capacitance(3e-9)))
    powers = [float(dopants.weighted_count(*place(population), power)) for power in (2, 3, 4)]
    expected_skew, excess = powers[1] / powers[0] ** 1.5, powers[2] / powers[0] ** 2
    if law == "normal":
        expected_skew, excess = 0.0, 0.0
    for statistic, expected in ((np.mean, 0.0), (np.std, sigma), (skew, expected_skew), (kurtosis, excess)):
        assert_within_errors(statistic, expected, shifts)
    assert law == "normal" or expected_skew > 10 * np.sqrt(6 / SAMPLES)  # the test can tell the laws apart


def test_a_wide_uniform_device_by_hand(make_plain_process):
    """sigma^2 = (q/C_ox)^2 N x_d/(3 W L), for one device."""
    shifts, population = dopant_shifts(make_plain_process({"scatter.dopants": "normal"}))
    depletion = electrostatics(population.nominal).depletion_width
    expected = 1.602176634e-19 / (3.9 * 8.8541878128e-12 / 3e-9) * np.sqrt(5e23 * depletion / (3 * WIDTH * LENGTH))
    assert np.std(shifts) == pytest.approx(expected, rel=4 / np.sqrt(2 * SAMPLES), abs=0)


def test_more_dopants_than_nominal_raise_the_threshold_s_magnitude(make_plain_process):
    for channel, gate, sign in (("n", "n+ polysilicon", 1), ("p", "p+ polysilicon", -1)):
        file = make_plain_process({"scatter.dopants": "counted", "channel": channel, "gate": gate})
        assert np.sign(skew(dopant_shifts(file)[0])) == sign


@pytest.mark.parametrize("law", ["counted", "normal"])
def test_fringe_dopants_multiply_the_variance(make_plain_process, law):
    """By 1 + (pi/4) x_d/W for two quarter circles; everything else stays."""
    changes = {"edge": {"kind": "field oxide"}, "scatter.dopants": law}
    plain, population = dopant_shifts(make_plain_process(changes))
    fringed, _ = dopant_shifts(make_plain_process(changes | {"scatter.fringe_dopants": True}))
    factor = 1 + np.pi / 4 * electrostatics(population.nominal).depletion_width / WIDTH
    assert factor > 1.3
    if law == "normal":  # the two share their draws
        np.testing.assert_allclose(fringed, np.sqrt(factor) * plain, rtol=1e-9)
    else:
        assert_within_errors(lambda one, other: np.var(one) / np.var(other), factor, fringed, plain)
