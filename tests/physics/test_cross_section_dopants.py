"""Weights of single dopants against brute force and against the wide channel's law; the scatter against references."""

from dataclasses import replace

import numpy as np
import pytest

from physics.constants import BOLTZMANN, ELEMENTARY_CHARGE
from physics.cross_section import solve_threshold, threshold_inversion
from physics.cross_section_dopants import dopant_scatter, dopant_weights, weighted_dopants
from physics.dopants import dopant_sigma, single_dopant_shift
from physics.edges import NoEdge
from physics.profile import StepProfile, UniformProfile
from physics.section_geometry import FieldStep, Section, TrenchWall
from physics.section_lines import section_scales
from physics.section_poisson import box_equations, newton
from physics.silicon import thermal_voltage
from physics.threshold import oxide_capacitance

FIELD = FieldStep(field_oxide_thickness=300e-9)
TRENCH = TrenchWall(trench_depth=300e-9)
LENGTH = 0.1e-6
REFERENCE = Section(
    width=0.25e-6,
    oxide_thickness=5e-9,
    profile=UniformProfile(doping=3e23),
    temperature=25.852e-3 * ELEMENTARY_CHARGE / BOLTZMANN,
    intrinsic_density=9.7e15,
    edge=FIELD,
)
EDGES = pytest.mark.parametrize(
    "edge",
    [
        FIELD,
        TRENCH,
        NoEdge(),
        FieldStep(field_oxide_thickness=300e-9, taper_length=100e-9, implant_doping=2e23, implant_depth=100e-9),
        TrenchWall(trench_depth=300e-9, divot=20e-9),
    ],
    ids=["field oxide", "trench", "none", "taper and implant", "divot"],
)


def sigma_over_law(section, refinement=1.0):
    """Sigma of the solved section over that of the wide channel's 1/sqrt(3) law."""
    solved = solve_threshold(section, refinement)
    capacitance, depletion_width = oxide_capacitance(section.oxide_thickness), section_scales(section).depletion_width
    law = dopant_sigma(section.profile, depletion_width, section.width, LENGTH, capacitance)
    return dopant_scatter(solved, dopant_weights(solved), LENGTH).sigma / law


@EDGES
@pytest.mark.parametrize("changes", [{}, {"body_bias": 1.5, "temperature": 350.0, "intrinsic_density": None}])
def test_weights_against_perturbed_doping_in_ten_random_cells(edge, changes):
    section = replace(REFERENCE, edge=edge, **changes)
    solved = solve_threshold(section)
    weights, equations = dopant_weights(solved), box_equations(section, solved.mesh)
    kt = thermal_voltage(section.temperature)
    potential, gate = solved.potential / kt, (solved.threshold + section.body_bias) / kt
    whole = single_dopant_shift(oxide_capacitance(section.oxide_thickness), section.width, 1.0)
    places = np.argwhere(weights > 1e-4)
    chosen = np.random.default_rng(20).choice(places, 10)
    for row, column in chosen:
        added = np.zeros(weights.shape)
        # a line of charge on both sides of the section, a hundredth of a dopant per nanometer
        added[row, column] = 1e7
        gates = [
            newton(
                replace(equations, dopants=equations.dopants + sign * added),
                potential,
                gate,
                threshold_inversion(section),
            ).gate
            for sign in (1, -1)
        ]
        moved = (gates[0] - gates[1]) * kt / 2
        assert 2 * weights[row, column] * whole * 1e7 == pytest.approx(moved, rel=0.01, abs=0)


def test_middle_of_a_wide_device():
    solved = solve_threshold(replace(REFERENCE, width=5e-6))
    silicon, depletion_width = solved.mesh.depth >= 0, section_scales(REFERENCE).depletion_width
    depth, middle = solved.mesh.depth[silicon] / depletion_width, dopant_weights(solved)[silicon, 0]
    # above the straight line throughout: the soft edge lies deeper than the depletion approximation's
    assert np.all((middle - (1 - depth) > 0.01) & (middle - (1 - depth) < 0.09) | (depth > 1))
    assert np.interp(1.0, depth, middle) == pytest.approx(0.07, abs=0.01)
    assert np.interp(1.5, depth, middle) < 0.01
    # rising a little inside the inversion layer, falling below it
    assert np.all(np.diff(middle[depth > 0.15]) < 0)
    assert 1.06 < sigma_over_law(replace(REFERENCE, edge=NoEdge())) < 1.08


def test_charge_at_the_surface_of_a_channel_without_edges_has_weight_one():
    """It moves the flat band by q/(C_ox W L), exactly, whatever the silicon does."""
    for changes in ({}, {"body_bias": 2.0}, {"oxide_thickness": 20e-9, "profile": UniformProfile(doping=1e22)}):
        solved = solve_threshold(replace(REFERENCE, edge=NoEdge(), **changes))
        surface = np.searchsorted(solved.mesh.depth, 0.0)
        assert dopant_weights(solved)[surface] == pytest.approx(1.0, rel=1e-9, abs=0)


@pytest.mark.parametrize(
    "edge, width, expected",
    [(FIELD, 4e-6, 1.080), (TRENCH, 4e-6, 1.072), (FIELD, 0.25e-6, 1.098), (TRENCH, 0.25e-6, 1.004)],
)
def test_reference_scatter(edge, width, expected):
    assert sigma_over_law(replace(REFERENCE, edge=edge, width=width)) == pytest.approx(expected, rel=0.02, abs=0)


@pytest.mark.parametrize("edge, most", [(FIELD, 1.6), (TRENCH, 2.0)], ids=["field oxide", "trench"])
def test_narrow_devices_scatter_less_than_the_law(edge, most):
    """Below 2 depletion widths beside a trench; beside this field oxide the ratio reaches 1 at 1.61 of them."""
    depletion_width = section_scales(REFERENCE).depletion_width
    ratios = [
        sigma_over_law(replace(REFERENCE, edge=edge, width=n * depletion_width)) for n in (most, 0.8 * most, 0.5 * most)
    ]
    assert 1 > ratios[0] > ratios[1] > ratios[2]


@pytest.mark.parametrize("edge", [FIELD, TRENCH], ids=["field oxide", "trench"])
def test_scatter_is_converged(edge):
    section = replace(REFERENCE, edge=edge)
    assert sigma_over_law(section) == pytest.approx(sigma_over_law(section, refinement=2), rel=0.005, abs=0)


@EDGES
def test_first_cumulant_is_what_doping_does(edge):
    """All dopants more by a thousandth move the threshold by the sum of their weights, cell by cell."""
    section = replace(REFERENCE, edge=edge)
    solved = solve_threshold(section)
    equations, kt = box_equations(section, solved.mesh), thermal_voltage(section.temperature)
    depleted = np.where((solved.mesh.depth < 100e-9)[:, None], 1e-3, 0.0)
    more = newton(
        replace(equations, dopants=equations.dopants * (1 + depleted)),
        solved.potential / kt,
        (solved.threshold + section.body_bias) / kt,
        threshold_inversion(section),
    )
    scatter = dopant_scatter(solved, dopant_weights(solved) * (depleted > 0), LENGTH)
    moved = more.gate * kt - section.body_bias - solved.threshold
    assert moved == pytest.approx(1e-3 * scatter.mean_shift, rel=0.01, abs=0)


def test_moments_hang_together():
    section = replace(REFERENCE, profile=StepProfile(surface_doping=5e23, surface_depth=20e-9, doping=2e23))
    solved = solve_threshold(section)
    weights = dopant_weights(solved)
    assert weights.shape == solved.mesh.is_gate.shape
    assert np.all(weights >= 0) and np.all(weights[solved.mesh.silicon_area == 0] == 0)
    short, long = (dopant_scatter(solved, weights, length) for length in (LENGTH, 4 * LENGTH))
    assert long.mean_shift == pytest.approx(short.mean_shift, rel=1e-12, abs=0)
    assert long.sigma == pytest.approx(short.sigma / 2, rel=1e-12, abs=0)
    assert long.skewness == pytest.approx(short.skewness / 2, rel=1e-12, abs=0)
    shift = single_dopant_shift(oxide_capacitance(section.oxide_thickness), section.width, LENGTH)
    assert short.third_moment == pytest.approx(
        shift**3 * LENGTH * weighted_dopants(solved, weights, 3), rel=1e-12, abs=0
    )
    with pytest.raises(ValueError, match="length must be a positive, finite number, not 0"):
        dopant_scatter(solved, weights, 0)
