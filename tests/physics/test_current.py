"""Drain current and gm/I: limits of every region, monotone and continuous, slow numeric twins."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from physics.constants import SILICON_PERMITTIVITY
from physics.current import (
    Channel,
    critical_drop,
    drain_current,
    interpolation,
    off_current,
    slope_factor,
    specific_current,
    transconductance_efficiency,
)
from physics.threshold import oxide_capacitance

KT = 0.02585
N = 1.3
GATES = np.linspace(-0.3, 1.8, 211)
DRAINS = np.linspace(0.0, 2.0, 201)
CORRECTIONS = {
    "none": {},
    "mobility": {"mobility_degradation": 0.4},
    "velocity": {"critical_drop": 0.7},
    "both": {"mobility_degradation": 0.4, "critical_drop": 0.7},
}
every_correction = pytest.mark.parametrize("fields", CORRECTIONS.values(), ids=CORRECTIONS)


def test_interpolation_limits():
    # exp(v) far below, (v/2)^2 far above; the errors there are exp(v/2) and exp(-v/2) relative.
    assert interpolation(-60.0) == pytest.approx(np.exp(-60), rel=1e-12, abs=0)
    assert interpolation(80.0) == pytest.approx(1600.0, rel=1e-12, abs=0)
    assert np.isfinite(interpolation(np.array([-5e3, 5e3]))).all()


@every_correction
def test_current_grows_with_the_gate(make_channel, fields):
    for drain in (0.05, 0.5, 1.8):
        assert np.all(np.diff(drain_current(make_channel(**fields), GATES, drain)) > 0)


@pytest.mark.parametrize("name", ["none", "mobility"])
def test_current_never_falls_with_the_drain(make_channel, name):
    for gate in (0.2, 0.6, 1.2):
        current = drain_current(make_channel(**CORRECTIONS[name]), gate, DRAINS)
        assert np.all(np.diff(current) >= 0)


@pytest.mark.parametrize("name", ["velocity", "both"])
def test_current_never_falls_with_the_drain_under_velocity_saturation(make_channel, name):
    # A passive channel whose threshold is held fixed has no negative output conductance. Sodini's model stops the drop
    # at V_ov E_c L/(V_ov + E_c L), where the triode current has just reached W C_ox v_sat (V_ov - drop).
    current = drain_current(make_channel(**CORRECTIONS[name]), 1.2, DRAINS)
    assert np.all(np.diff(current) >= -1e-12 * current.max())


@every_correction
def test_no_current_without_drain_voltage(make_channel, fields):
    assert np.all(drain_current(make_channel(**fields), GATES, 0.0) == 0.0)


@every_correction
def test_current_is_continuous(make_channel, fields):
    # No region boundary: a millionth of a volt at the gate never changes the current by more than exp(dV/(n kT/q))
    # does.
    step = 1e-6
    for drain in (0.05, 1.0):
        low, high = (drain_current(make_channel(**fields), GATES + offset, drain) for offset in (0.0, step))
        change = np.log(high / low)
        assert np.all((change > 0) & (change < 1.001 * step / (N * KT)))


@every_correction
def test_weak_inversion_swing(make_channel, fields):
    # n kT/q ln 10 per decade; one volt below threshold F(v) is exp(v) to 4e-7.
    channel = make_channel(threshold=1.0, **fields)
    low, high = drain_current(channel, np.array([0.0, 0.01]), 0.5)
    assert 0.01 / np.log10(high / low) == pytest.approx(N * KT * np.log(10), rel=1e-5, abs=0)


def test_weak_inversion_drain_dependence(make_channel):
    # 1 - exp(-V_D/(kT/q)): diffusion alone.
    channel, drains = make_channel(threshold=1.0), np.array([0.01, 0.03, 0.1])
    saturated = drain_current(channel, 0.0, 2.0)
    expected = saturated * (1 - np.exp(-drains / KT))
    assert drain_current(channel, 0.0, drains) == pytest.approx(expected, rel=1e-5, abs=0)


def test_strong_inversion_is_the_square_law(make_channel):
    # beta = I_spec/(2 n (kT/q)^2): beta (V_ov V_D - n V_D^2/2) in the triode region, beta V_ov^2/(2 n) in saturation.
    channel, overdrive = make_channel(threshold=0.0), 3.0
    beta = channel.specific_current / (2 * N * KT**2)
    triode = drain_current(channel, overdrive, 0.5)
    assert triode == pytest.approx(beta * (overdrive * 0.5 - N * 0.5**2 / 2), rel=1e-9, abs=0)
    assert drain_current(channel, overdrive, 6.0) == pytest.approx(beta * overdrive**2 / (2 * N), rel=1e-9, abs=0)


def test_mobility_degradation_divides_the_current(make_channel):
    plain, degraded = make_channel(), make_channel(mobility_degradation=0.5)
    overdrive = 2 * N * KT * np.log1p(np.exp((GATES - 0.4) / (2 * N * KT)))
    ratio = drain_current(plain, GATES, 0.7) / drain_current(degraded, GATES, 0.7)
    assert ratio == pytest.approx(1 + 0.5 * overdrive, rel=1e-12, abs=0)


def saturated_ratio(make_channel, mobility):
    """Saturated current over W C_ox v_sat V_ov for a given low-field mobility."""
    width, length, velocity, capacitance, overdrive = 1e-6, 0.1e-6, 1e5, oxide_capacitance(2e-9), 1.5
    channel = make_channel(
        threshold=0.0,
        specific_current=specific_current(N, mobility, capacitance, width, length, KT),
        critical_drop=critical_drop(mobility, length, velocity),
    )
    return drain_current(channel, overdrive, 8.0) / (width * capacitance * velocity * overdrive)


def test_velocity_saturated_limit(make_channel):
    # W C_ox v_sat V_ov for a mobility without bound; short of it by E_c L over the overdrive, so by 1/mobility.
    missing = [1 - saturated_ratio(make_channel, mobility) for mobility in (1e3, 1e4)]
    assert missing[0] / missing[1] == pytest.approx(10, rel=1e-2, abs=0)
    assert missing[1] < 1e-5


def test_saturated_current_at_a_finite_mobility(make_channel):
    # Sodini 1984 (memory): W C_ox v_sat V_ov^2/(V_ov + E_c L), when the smooth drop is measured as V_ov/n.
    ratio = saturated_ratio(make_channel, 0.03)
    drop, bound = 1.5 / N, critical_drop(0.03, 0.1e-6, 1e5)
    assert ratio == pytest.approx(drop / (drop + bound), rel=1e-9, abs=0)


@every_correction
@pytest.mark.parametrize("drain", [0.02, 0.3, 1.5])
def test_transconductance_efficiency_against_a_numeric_derivative(make_channel, fields, drain):
    channel, step = make_channel(**fields), 1e-4
    ends = [np.log(drain_current(channel, GATES + offset, drain)) for offset in (-step, step, -2 * step, 2 * step)]
    # Fourth-order central difference: its own error is about (step/(n kT/q))^4, below 1e-10.
    numeric = (8 * (ends[1] - ends[0]) - (ends[3] - ends[2])) / (12 * step)
    assert transconductance_efficiency(channel, GATES, drain) == pytest.approx(numeric, rel=1e-7, abs=0)


@every_correction
def test_transconductance_efficiency_limit(make_channel, fields):
    # At most 1/(n kT/q), and that in weak inversion; in saturation it falls steadily from there.
    found = transconductance_efficiency(make_channel(**fields), GATES, 4.0)
    assert np.all(found <= 1 / (N * KT)) and np.all(np.diff(found) < 0)
    deep = transconductance_efficiency(make_channel(threshold=1.0, **fields), 0.0, 1.0)
    assert deep == pytest.approx(1 / (N * KT), rel=1e-5, abs=0)


def test_transconductance_efficiency_in_strong_inversion(make_channel):
    # 2/V_ov for the square law.
    assert transconductance_efficiency(make_channel(threshold=0.0), 2.0, 6.0) == pytest.approx(1.0, rel=1e-9, abs=0)


@given(threshold=st.floats(-0.2, 0.9), gate=st.floats(-0.2, 1.8), drain=st.floats(0.01, 1.8))
@settings(max_examples=60, deadline=None)
def test_threshold_and_gate_act_as_a_difference(threshold, gate, drain):
    def current(threshold, gate):
        return drain_current(Channel(threshold, N, 1e-6, KT, 0.3, 0.7), gate, drain)

    assert current(threshold, gate) == pytest.approx(current(0.0, gate - threshold), rel=1e-9, abs=0)


def test_off_current_is_the_drain_current_with_the_gate_at_the_source(make_channel):
    channel = make_channel(threshold=np.array([0.5, 0.6, 0.7]))
    assert np.array_equal(off_current(channel, 1.2), drain_current(channel, 0.0, 1.2))
    # A tenth of a volt of threshold is a fixed ratio, short of it by exp(v/2) = 6e-4 at half a volt.
    ratios = off_current(channel, 1.2)[:-1] / off_current(channel, 1.2)[1:]
    assert ratios == pytest.approx(np.exp(0.1 / (N * KT)), rel=1e-3, abs=0)


def test_slope_factor_is_a_capacitive_divider():
    depletion, oxide = SILICON_PERMITTIVITY / 60e-9, oxide_capacitance(3e-9)
    assert slope_factor(60e-9, oxide) == pytest.approx((oxide + depletion) / oxide, rel=1e-12, abs=0)
    assert slope_factor(1.0, oxide) == pytest.approx(1.0, abs=1e-6)


def test_specific_current_scales_with_the_shape():
    one = specific_current(N, 0.03, 1e-2, 1e-6, 0.1e-6, KT)
    assert specific_current(N, 0.03, 1e-2, 3e-6, 0.3e-6, KT) == pytest.approx(one, rel=1e-12, abs=0)
    assert specific_current(N, 0.03, 1e-2, 2e-6, 0.1e-6, 2 * KT) == pytest.approx(8 * one, rel=1e-12, abs=0)
