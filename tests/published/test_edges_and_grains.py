"""Rough edges and gate grains against the list's section 5 (all derived)."""

import numpy as np
import pytest

from physics.roughness import (
    edge_pair_sigma,
    exponential_averaging,
    gaussian_averaging,
    grain_sigma,
    two_orientation_sigma,
)


# Correlation length 20 nm; averaging length; root of the variance factor for exp(-|x|/Lambda) and for
# exp(-x^2/Lambda^2).
@pytest.mark.parametrize(
    "averaging_nm, exponential, gaussian",
    [
        (10, ".923171", ".979963"),
        (20, ".857764", ".928185"),
        (50, ".711525", ".740947"),
        (100, ".566162", ".560795"),
        (200, ".424265", ".408956"),
        (1000, ".197990", ".187214"),
    ],
)
def test_averaging(averaging_nm, exponential, gaussian):
    assert f"{np.sqrt(exponential_averaging(20 / averaging_nm)):.6f}" == "0" + exponential
    assert f"{np.sqrt(gaussian_averaging(20 / averaging_nm)):.6f}" == "0" + gaussian


# Two edges of 4 nm, which is 3 sigma as the literature quotes it; Lambda 20 nm, width 100 nm.
@pytest.mark.parametrize("correlation, sigma_nm", [("exponential", "1.0676"), ("gaussian", "1.0574")])
def test_length_of_two_rough_edges(correlation, sigma_nm):
    assert f"{edge_pair_sigma(4e-9 / 3, 20e-9, 100e-9, correlation) * 1e9:.4f}" == sigma_nm


def test_grains_of_two_orientations():
    one_grain = two_orientation_sigma(0.6, 0.2)
    assert f"{one_grain * 1e3:.3f}" == "97.980"
    # 25 equal grains (area factor 1): a device of 5 x 5 grains.
    assert f"{grain_sigma(one_grain, 1e-16, 50e-9, 50e-9, area_factor=1.0) * 1e3:.3f}" == "19.596"
