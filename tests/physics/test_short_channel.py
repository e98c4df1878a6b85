"""Short channels: Yau's trapezoid up to its closure, the quasi-two-dimensional form against its boundary problem."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_bvp
from scipy.optimize import brentq, minimize_scalar

from physics.edges import FieldOxide
from physics.short_channel import (
    ChannelTooShort,
    ChargeSharing,
    QuasiTwoDimensional,
    charge_sharing_factor,
    charge_sharing_reach,
    quasi_two_dimensional_shift,
)
from physics.threshold import electrostatics, threshold_voltage

LENGTHS = np.geomspace(0.15e-6, 6e-6, 31)
QUASI_ROWS = [(10.0, 0.3, 1.0), (5.0, 0.3, 0.05), (5.0, 0.3, 1.0), (3.0, 0.3, 1.0), (4.0, 0.15, 1.8), (2.0, 0.5, 0.0)]


def threshold(device, drain_voltage=0.0):
    return threshold_voltage(device, electrostatics(device), drain_voltage)


def test_trapezoid_against_its_drawing():
    # Depletion circles of radius r_j + x_d about the centres of the junctions' corners, cut at the depth x_d by
    # Pythagoras; the trapezoid's mean length over the channel's is the share. Drawn here, not simplified.
    depletion_width, length, junction = 60e-9, 400e-9, 100e-9
    reach = np.sqrt((junction + depletion_width) ** 2 - depletion_width**2) - junction
    assert charge_sharing_reach(depletion_width, junction) == pytest.approx(reach, rel=1e-12, abs=0)
    bottom = length - 2 * reach
    expected = (length + bottom) / 2 / length
    assert charge_sharing_factor(depletion_width, length, junction) == pytest.approx(expected, rel=1e-12, abs=0)


def test_charge_sharing_is_refused_where_the_trapezoid_closes():
    closed = 2 * charge_sharing_reach(60e-9, 100e-9)
    assert charge_sharing_factor(60e-9, closed, 100e-9) == pytest.approx(0.5, rel=1e-12, abs=0)
    with pytest.raises(ChannelTooShort, match="trapezoid has closed"):
        charge_sharing_factor(60e-9, closed * (1 - 1e-9), 100e-9)
    # One device of an array is enough: nothing is clamped.
    with pytest.raises(ChannelTooShort):
        charge_sharing_factor(60e-9, np.array([1e-6, 0.9 * closed]), 100e-9)


def test_charge_sharing_is_refused_in_a_threshold_too(make_device):
    with pytest.raises(ChannelTooShort):
        threshold(make_device(length=20e-9, short_channel=ChargeSharing(junction_depth=100e-9)))


@pytest.mark.parametrize(
    "short_channel", [ChargeSharing(junction_depth=60e-9), QuasiTwoDimensional()], ids=["trapezoid", "quasi-2-D"]
)
def test_short_channel_lowers_the_threshold_and_vanishes(make_device, short_channel):
    long = threshold(make_device(length=LENGTHS))
    short = threshold(make_device(length=LENGTHS, short_channel=short_channel))
    lowering = long - short
    assert np.all(lowering >= 0) and np.all(np.diff(lowering) <= 0)
    assert lowering[-1] <= lowering[0] * LENGTHS[0] / LENGTHS[-1] * (1 + 1e-9)  # at least as fast as 1/L


@pytest.mark.filterwarnings("error::RuntimeWarning")
@pytest.mark.parametrize("length", [15e-6, 100e-6])
def test_very_long_channel_has_no_short_channel_effect(make_device, length):
    # A sensor's input pair may well be 100 um long on a thin oxide, whose decay length is 20 nm.
    short = threshold(make_device(length=length, short_channel=QuasiTwoDimensional()), 1.0)
    assert short == pytest.approx(threshold(make_device(length=length)), rel=1e-12, abs=0)


def test_charge_sharing_does_not_know_the_drain(make_device):
    device = make_device(short_channel=ChargeSharing(junction_depth=60e-9))
    assert threshold(device, 0.05) == threshold(device, 1.8)


def test_quasi_two_dimensional_factor_is_the_shift(make_device):
    # With no edge the factor must give back the shift it was made from.
    plain, short = make_device(), make_device(short_channel=QuasiTwoDimensional())
    state = electrostatics(plain)
    decay = np.sqrt(3 * plain.oxide_thickness * state.depletion_width)  # 11.7/3.9 = 3
    for drain_voltage in (0.0, 0.05, 1.0):
        expected = quasi_two_dimensional_shift(plain.length / decay, state.junction_barrier, drain_voltage)
        assert threshold(plain) - threshold(short, drain_voltage) == pytest.approx(expected, rel=1e-9, abs=0)


def test_width_and_length_factors_multiply(make_device):
    # The stated approximation: on the bulk term, F(W, L) = F(W) F(L).
    edge, short_channel = FieldOxide(), ChargeSharing(junction_depth=60e-9)
    bulk = {}
    for name, fields in {
        "both": {"edge": edge, "short_channel": short_channel},
        "edge": {"edge": edge},
        "short": {"short_channel": short_channel},
        "none": {},
    }.items():
        device = make_device(**fields)
        no_charge = make_device(**fields, oxide_thickness=1e-18)  # leaves flat band and surface potential
        bulk[name] = threshold(device) - threshold(no_charge)
    assert bulk["both"] * bulk["none"] == pytest.approx(bulk["edge"] * bulk["short"], rel=1e-7, abs=0)


@pytest.mark.parametrize("length_ratio, barrier, drain_voltage", QUASI_ROWS)
def test_quasi_two_dimensional_shift_solves_the_boundary_problem(length_ratio, barrier, drain_voltage):
    # In units of the decay length: u'' = u, u measured from the long channel's surface potential; at threshold the
    # source stands `barrier` above the minimum, and the minimum itself is the lowering.
    shift = quasi_two_dimensional_shift(length_ratio, barrier, drain_voltage)
    ends = barrier + shift, barrier + drain_voltage + shift
    places = np.linspace(0, length_ratio, 201)
    solution = solve_bvp(
        lambda place, u: np.vstack([u[1], u[0]]),
        lambda at_source, at_drain: np.array([at_source[0] - ends[0], at_drain[0] - ends[1]]),
        places,
        np.vstack([np.interp(places, [0, length_ratio], ends), np.zeros_like(places)]),
        tol=1e-9,
        max_nodes=20000,
    )
    assert solution.success
    lowest = minimize_scalar(
        lambda place: solution.sol(place)[0], bounds=(0, length_ratio), method="bounded", options={"xatol": 1e-10}
    )
    assert 0 < lowest.x < length_ratio
    assert lowest.fun == pytest.approx(shift, rel=1e-6, abs=0)


def minimum_of_the_sinh_solution(shift, length_ratio, barrier, drain_voltage):
    source, drain = barrier + shift, barrier + drain_voltage + shift

    def potential(place):
        return (source * np.sinh(length_ratio - place) + drain * np.sinh(place)) / np.sinh(length_ratio)

    found = minimize_scalar(potential, bounds=(0, length_ratio), method="bounded", options={"xatol": 1e-10})
    return found.fun


@given(length_ratio=st.floats(2.5, 12.0), barrier=st.floats(0.1, 0.6), drain_voltage=st.floats(0.0, 2.0))
@settings(max_examples=25, deadline=None)
def test_quasi_two_dimensional_shift_against_numeric_minimisation(length_ratio, barrier, drain_voltage):
    def excess(shift):
        return minimum_of_the_sinh_solution(shift, length_ratio, barrier, drain_voltage) - shift

    expected = brentq(excess, 1e-9, 20.0, xtol=1e-12)
    found = quasi_two_dimensional_shift(length_ratio, barrier, drain_voltage)
    assert found == pytest.approx(expected, rel=1e-6, abs=0)


@given(length_ratio=st.floats(1.5, 12.0), barrier=st.floats(0.05, 0.6))
@settings(max_examples=40, deadline=None)
def test_quasi_two_dimensional_shift_grows_with_the_drain_and_falls_with_the_length(length_ratio, barrier):
    drains = np.linspace(0, 3, 20)
    assert np.all(np.diff(quasi_two_dimensional_shift(length_ratio, barrier, drains)) > 0)
    ratios = np.linspace(length_ratio, 15, 20)
    assert np.all(np.diff(quasi_two_dimensional_shift(ratios, barrier, 1.0)) < 0)
