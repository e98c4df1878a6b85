"""Edges along the width: limits, rates, and the shifts they make in a threshold voltage."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from physics.constants import SILICON_PERMITTIVITY
from physics.edges import FieldOxide, NoEdge, TabulatedEdge, Trench, fringe_factor, trench_factor, trench_length
from physics.threshold import electrostatics, oxide_capacitance, threshold_voltage

WIDTHS = np.geomspace(30e-9, 30e-6, 61)
OXIDE = 3e-9
EDGES = {
    "field oxide": FieldOxide(),
    "trench": Trench(field_oxide_thickness=300e-9),
    "table": TabulatedEdge(width=[50e-9, 100e-9, 400e-9], factor=[1.6, 1.25, 1.05]),
}


def threshold(device):
    return threshold_voltage(device, electrostatics(device))


@pytest.mark.parametrize("edge", EDGES.values(), ids=EDGES)
def test_factor_tends_to_one_for_a_wide_channel(edge):
    # Within 1e-3 of one at 100 um, and ten times nearer at ten times the width: the rate of a 1/W law.
    factor = np.array([float(edge.charge_factor(80e-9, width, OXIDE)) for width in (1e-4, 1e-3)])
    assert abs(factor[0] - 1) < 2e-3
    assert (factor[0] - 1) / (factor[1] - 1) == pytest.approx(10, rel=2e-2, abs=0)


def test_field_oxide_raises_and_trench_lowers_narrow_thresholds(make_device):
    plain = threshold(make_device(width=WIDTHS))
    raised = threshold(make_device(width=WIDTHS, edge=EDGES["field oxide"]))
    lowered = threshold(make_device(width=WIDTHS, edge=EDGES["trench"]))
    assert np.all(raised > plain) and np.all(np.diff(raised) < 0)
    assert np.all(lowered < plain) and np.all(np.diff(lowered) > 0)


@pytest.mark.parametrize("shape", [1.0, np.pi / 2, 2.0])
def test_field_oxide_shift_is_exact(make_device, shape):
    # 2 xi eps_s (2 phi_F + V_SB)/(C_ox W) whatever the doping, since x_d grows with the body bias as the charge does.
    bias = np.array([0.0, 0.5, 1.0, 3.0])
    plain = make_device(width=150e-9, body_bias=bias)
    edged = make_device(width=150e-9, body_bias=bias, edge=FieldOxide(shape=shape))
    bending = electrostatics(plain).surface_potential + bias
    expected = 2 * shape * SILICON_PERMITTIVITY * bending / (oxide_capacitance(OXIDE) * 150e-9)
    assert threshold(edged) - threshold(plain) == pytest.approx(expected, rel=1e-12, abs=0)


def test_trench_as_wide_as_its_length_halves_the_bulk_term(make_device):
    trench = Trench(field_oxide_thickness=300e-9)
    width = trench_length(OXIDE, 300e-9)
    plain, edged = make_device(width=width), make_device(width=width, edge=trench)
    bulk_term = electrostatics(plain).bulk_charge / oxide_capacitance(OXIDE)
    assert trench_factor(width, width) == 0.5
    assert threshold(plain) - threshold(edged) == pytest.approx(bulk_term / 2, rel=1e-12, abs=0)


def test_trench_factor_is_that_of_two_capacitors():
    # The bulk term is Q W/(C_ox W + 2 C_F) with 2 C_F = C_ox F: the gate's two sides stand in parallel with its face.
    capacitance, sides = oxide_capacitance(OXIDE), oxide_capacitance(OXIDE) * trench_length(OXIDE, 300e-9)
    expected = capacitance * WIDTHS / (capacitance * WIDTHS + sides)
    assert trench_factor(WIDTHS, trench_length(OXIDE, 300e-9)) == pytest.approx(expected, rel=1e-12, abs=0)


def test_fringe_depends_on_the_ratio_alone():
    assert fringe_factor(50e-9, WIDTHS) == pytest.approx(fringe_factor(100e-9, 2 * WIDTHS), rel=1e-14, abs=0)


def test_no_edge_does_nothing(make_device):
    assert NoEdge().charge_factor(50e-9, WIDTHS, OXIDE) == 1.0
    assert np.ptp(threshold(make_device(width=WIDTHS))) == 0.0


@given(strength_nm=st.floats(-20.0, 80.0), nodes=st.sets(st.floats(30.0, 3000.0), min_size=2, max_size=8))
@settings(max_examples=60, deadline=None)
def test_table_of_a_one_over_width_law_gives_the_law(strength_nm, nodes):
    # Between, beyond and below its points: interpolation is in 1/W, where the law is a straight line.
    nodes = np.array(sorted(nodes))
    nodes = nodes[np.concatenate([[True], np.diff(nodes) > 1e-3])]
    if nodes.size < 2:
        nodes = np.array([nodes[0], 2 * nodes[0]])
    table = TabulatedEdge(width=nodes * 1e-9, factor=1 + strength_nm / nodes)
    widths_nm = np.concatenate([WIDTHS * 1e9, nodes, 0.8 * nodes[:1]])
    expected = 1 + strength_nm / widths_nm
    # 1e-7: slopes between nodes 1e-3 nm apart lose that many digits to the subtraction.
    assert table.charge_factor(0.0, widths_nm * 1e-9, OXIDE) == pytest.approx(expected, rel=1e-7, abs=1e-7)


@given(steps=st.lists(st.floats(0.0, 0.5), min_size=3, max_size=8))
@settings(max_examples=60, deadline=None)
def test_table_is_monotone_between_monotone_points(steps):
    # No overshoot between points: a bump between two measured widths would be an invented optimum.
    nodes = 40e-9 * 2.0 ** np.arange(len(steps))
    factor = 1 + np.cumsum(steps)[::-1]
    inside = np.geomspace(nodes[0], 1e-4, 200)
    values = TabulatedEdge(width=nodes, factor=factor).charge_factor(0.0, inside, OXIDE)
    assert np.all(np.diff(values) <= 1e-12)
    assert np.all((values >= 1 - 1e-12) & (values <= factor[0] + 1e-12))


def test_table_gives_its_points_and_takes_its_last_slope_below_them():
    table = EDGES["table"]
    assert table.charge_factor(0.0, np.array([50e-9, 100e-9, 400e-9]), OXIDE) == pytest.approx([1.6, 1.25, 1.05])
    below = np.array([50e-9, 48e-9, 46e-9])
    slopes = np.diff(table.charge_factor(0.0, below, OXIDE)) / np.diff(1 / below)
    assert slopes[0] == pytest.approx(slopes[1], rel=1e-9, abs=0)
    just_above = np.array([50e-9, 50.001e-9])
    inside = np.diff(table.charge_factor(0.0, just_above, OXIDE)) / np.diff(1 / just_above)
    assert slopes[0] == pytest.approx(inside[0], rel=1e-3, abs=0)


@pytest.mark.parametrize("widths", [[100e-9], [100e-9, 100e-9], [200e-9, 100e-9]])
def test_table_refuses_widths_that_do_not_increase(widths):
    with pytest.raises(ValueError, match="must increase, and be two or more"):
        TabulatedEdge(width=widths, factor=[1.1] * len(widths))
