"""Averages of roughness over a device: closed forms against double integrals, limits, scaling."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import dblquad

from physics.roughness import (
    AVERAGING,
    area_law_sigma,
    edge_pair_sigma,
    exponential_averaging,
    gaussian_averaging,
    grain_sigma,
    oxide_roughness_sigma,
    two_orientation_sigma,
)

CORRELATION = {
    "exponential": lambda distance, ratio: np.exp(-distance / ratio),
    "gaussian": lambda distance, ratio: np.exp(-((distance / ratio) ** 2)),
}
# Integral of the correlation from minus to plus infinity over the correlation length: the slope of the factor at r = 0.
WHOLE_AREA = {"exponential": 2.0, "gaussian": np.sqrt(np.pi)}


@pytest.mark.parametrize("correlation", AVERAGING)
@pytest.mark.parametrize("ratio", [0.05, 0.2, 0.7, 1.0, 3.0, 20.0])
def test_averaging_against_a_double_integral(correlation, ratio):
    # Variance of the mean of a line is the mean of its correlation over all pairs of places; the half y < x, twice, so
    # that the cusp at x = y is a boundary.
    half, error = dblquad(
        lambda y, x: CORRELATION[correlation](x - y, ratio), 0, 1, 0, lambda x: x, epsabs=1e-10, epsrel=1e-10
    )
    assert error < 1e-8
    assert AVERAGING[correlation](ratio) == pytest.approx(2 * half, abs=2 * error + 1e-12)


@pytest.mark.parametrize("correlation", AVERAGING)
def test_short_correlation(correlation):
    # r -> 0: the line holds 1/r independent pieces; the next term is -2 r^2 (exponential) or -r^2 (Gaussian).
    ratio = np.array([1e-2, 1e-3, 1e-4])
    slope = AVERAGING[correlation](ratio) / ratio
    missing = WHOLE_AREA[correlation] - slope
    assert missing / ratio == pytest.approx({"exponential": 2.0, "gaussian": 1.0}[correlation], rel=1e-6, abs=0)


@pytest.mark.parametrize("correlation", AVERAGING)
def test_long_correlation(correlation):
    # r -> infinity: the line moves as one. One minus the factor is 1/(3 r) or 1/(6 r^2), the mean distance or its
    # square.
    ratio = np.array([1e2, 1e3])
    order, coefficient = {"exponential": (1, 1 / 3), "gaussian": (2, 1 / 6)}[correlation]
    assert (1 - AVERAGING[correlation](ratio)) * ratio**order == pytest.approx(coefficient, rel=1e-2, abs=0)
    assert AVERAGING[correlation](1e6) == pytest.approx(1, abs=1e-6)


@given(ratio=st.floats(1e-4, 1e4))
@settings(max_examples=60, deadline=None)
def test_averaging_is_a_share_and_grows_with_the_correlation_length(ratio):
    for average in (exponential_averaging, gaussian_averaging):
        lower, upper = average(np.array([ratio, 1.2 * ratio]))
        assert 0 < lower < 1
        # 1e-8: at r = 1e4 two numbers near one are what is left of a difference of numbers near r.
        assert upper > lower - 1e-8


@pytest.mark.parametrize("correlation", AVERAGING)
def test_two_edges_against_edges_drawn_point_by_point(correlation):
    # 2000 devices; each edge a correlated Gaussian vector of 120 points across a width of three correlation lengths.
    places = (np.arange(120) + 0.5) / 120
    covariance = CORRELATION[correlation](np.abs(places[:, None] - places), 1 / 3)
    values, vectors = np.linalg.eigh(covariance)
    root = vectors * np.sqrt(np.maximum(values, 0))
    edges = root @ np.random.default_rng(31).standard_normal((120, 4000))
    first, second = edges.mean(axis=0).reshape(2, 2000)
    length = second - first
    expected = edge_pair_sigma(1.0, 1 / 3, 1.0, correlation)
    assert abs(length.std() / expected - 1) < 5 / np.sqrt(2 * length.size)


def test_rough_oxide_of_short_correlation_is_an_area_law():
    # The correlation exp(-r^2/Lambda^2) covers pi Lambda^2, so the device holds W L/(pi Lambda^2) independent patches.
    sigma = oxide_roughness_sigma(0.2e-9, 1e-9, 3e-6, 2e-6)
    assert sigma == pytest.approx(0.2e-9 * np.sqrt(np.pi * 1e-18 / 6e-12), rel=1e-3, abs=0)


def test_rough_oxide_of_long_correlation_moves_as_one():
    assert oxide_roughness_sigma(0.2e-9, 1e-3, 50e-9, 80e-9) == pytest.approx(0.2e-9, rel=1e-6, abs=0)


def test_rough_oxide_against_a_riemann_sum():
    # Mean of the correlation over all pairs of 24 x 24 cells' middles; halving the cell takes the error to a quarter.
    def numeric(cells):
        places = (np.arange(cells) + 0.5) / cells
        square = (places[:, None] - places) ** 2
        across, along = square * 50e-9**2, square * 80e-9**2
        distance = across[:, :, None, None] + along[None, None, :, :]
        return np.exp(-distance / 30e-9**2).mean()

    exact = oxide_roughness_sigma(1.0, 30e-9, 50e-9, 80e-9) ** 2
    errors = [numeric(cells) - exact for cells in (12, 24)]
    assert errors[0] / errors[1] == pytest.approx(4, rel=0.05, abs=0)
    assert abs(errors[1]) < 2e-3 * exact


def test_grains_of_any_size_distribution():
    # Independent grains weighted by their area: sigma^2 = s^2 sum(a^2)/(sum a)^2, here of drawn areas, n grains in all.
    areas = np.random.default_rng(32).gamma(3.6, 1.0, 4000) * 1e-17
    expected = 0.1 * np.sqrt(np.sum(areas**2)) / np.sum(areas)
    factor = np.mean(areas**2) / np.mean(areas) ** 2
    side = np.sqrt(areas.sum())
    assert grain_sigma(0.1, areas.mean(), side, side, factor) == pytest.approx(expected, rel=1e-12, abs=0)


def test_voronoi_cells_are_the_default():
    # 1.13 = sqrt(1.280), the figure that is usually quoted.
    ratio = grain_sigma(0.1, 1e-16, 50e-9, 80e-9) / grain_sigma(0.1, 1e-16, 50e-9, 80e-9, area_factor=1.0)
    assert f"{ratio:.2f}" == "1.13"


def test_one_grain_covering_the_device_keeps_its_sigma():
    assert grain_sigma(0.1, 50e-9 * 80e-9, 50e-9, 80e-9, area_factor=1.0) == pytest.approx(0.1, rel=1e-14, abs=0)


def test_two_orientations_against_their_list():
    share, values = 0.35, np.array([4.4, 4.6])
    weights = np.array([share, 1 - share])
    mean = weights @ values
    assert two_orientation_sigma(share, 0.2) == pytest.approx(np.sqrt(weights @ (values - mean) ** 2), rel=1e-12, abs=0)
    assert two_orientation_sigma(1 - share, 0.2) == pytest.approx(two_orientation_sigma(share, 0.2), rel=1e-14, abs=0)
    assert two_orientation_sigma(0.0, 0.2) == two_orientation_sigma(1.0, 0.2) == 0.0


def test_area_law_is_one_device_of_a_pair():
    # Two such devices, independent, differ by A/sqrt(W L).
    one = area_law_sigma(3e-9, 2e-6, 0.5e-6)
    assert np.hypot(one, one) == pytest.approx(3e-9 / np.sqrt(1e-12), rel=1e-12, abs=0)
    assert area_law_sigma(3e-9, 4e-6, 1e-6) == pytest.approx(one / 2, rel=1e-12, abs=0)
