"""Drain current in all regions by one expression, and gm/I from the same expression.

All voltages are magnitudes in the direction that turns the device on, so p-channel devices use the same functions.
Limits: long-channel saturation has no channel-length modulation beyond the drain's effect on the threshold; no series
resistance, no gate leakage, no junction leakage.
"""

from typing import Any, NamedTuple

import numpy as np

from physics.constants import SILICON_PERMITTIVITY


def soft_plus(value):
    """ln(1 + exp(x)) without overflow and without losing the tail.

    value : x [1]
    Returns ln(1 + exp(x)) [1].
    Source: elementary; max(x, 0) + ln(1 + exp(-|x|)), several times faster than numpy's logaddexp.
    """
    return np.maximum(value, 0) + np.log1p(np.exp(-np.abs(value)))


def interpolation(normalised_voltage):
    """Interpolation function between weak and strong inversion, ln^2(1 + exp(v/2)).

    normalised_voltage : v, pinch-off less terminal voltage over kT/q [1]
    Returns normalised current [1].
    Source: C. C. Enz, F. Krummenacher, E. A. Vittoz, Analog Integr. Circuits Signal Process. 8, 83 (1995).
    """
    return soft_plus(normalised_voltage / 2) ** 2


def slope_factor(depletion_width, oxide_capacitance):
    """Slope factor n from the depletion capacitance.

    depletion_width : depletion width at threshold [m]
    oxide_capacitance : gate oxide capacitance [F/m^2]
    Returns n [1], > 1.
    Source: 1 + C_dep/C_ox (elementary).
    """
    return 1 + SILICON_PERMITTIVITY / depletion_width / oxide_capacitance


def specific_current(slope_factor, mobility, oxide_capacitance, width, length, thermal_voltage):
    """Specific current 2 n beta (kT/q)^2, beta = mobility C_ox W/L.

    slope_factor : n [1]
    mobility : low-field mobility [m^2/(V s)]
    oxide_capacitance : gate oxide capacitance [F/m^2]
    width, length : channel width and length [m]
    thermal_voltage : kT/q [V]
    Returns current [A].
    Source: Enz 1995.
    """
    return 2 * slope_factor * mobility * oxide_capacitance * width / length * thermal_voltage**2


class Channel(NamedTuple):
    """What the current needs besides voltages.

    threshold : magnitude of the threshold voltage [V] (negative if the device conducts at zero gate voltage)
    slope_factor : n [1]
    specific_current : see `specific_current` [A]
    thermal_voltage : kT/q [V]
    mobility_degradation : theta, loss of mobility per volt of overdrive [1/V], >= 0
    critical_drop : 2 v_sat L/mobility [V]; infinite without velocity saturation
    """

    threshold: Any
    slope_factor: Any
    specific_current: Any
    thermal_voltage: Any
    mobility_degradation: float
    critical_drop: Any


def critical_drop(mobility, length, saturation_velocity):
    """Voltage along the channel at which velocity saturation halves the current.

    mobility : low-field mobility [m^2/(V s)]
    length : channel length [m]
    saturation_velocity : [m/s]
    Returns voltage [V], E_c L with E_c = 2 v_sat/mobility.
    Source: C. G. Sodini, P. K. Ko, J. L. Moll, IEEE Trans. Electron Devices 31, 1386 (1984) (memory).
    """
    return 2 * saturation_velocity * length / mobility


def _terminal_charges(channel, gate_voltage, drain_voltage):
    """ln(1 + exp(v/2)) at source and drain [1]: square roots of the forward and the reverse normalised current.

    Once carriers move at their saturation velocity the drain end keeps the charge that carries the saturated current, so
    that the current never falls as the drain voltage rises (Sodini's saturation drop, see `critical_drop`).
    """
    forward = (gate_voltage - channel.threshold) / (channel.slope_factor * channel.thermal_voltage)
    reverse = forward - drain_voltage / channel.thermal_voltage
    at_source, at_drain = soft_plus(forward / 2), soft_plus(reverse / 2)
    drop_scale = 2 * channel.thermal_voltage / channel.critical_drop
    saturated = drop_scale * at_source**2 / (1 + drop_scale * at_source)
    return forward, reverse, at_source, np.maximum(at_drain, saturated)


def drain_current(channel: Channel, gate_voltage, drain_voltage):
    """Drain current in any region.

    channel : see `Channel`
    gate_voltage, drain_voltage : against the source, magnitudes [V], drain_voltage >= 0
    Returns current [A], >= 0.
    Forward less reverse interpolation, divided by 1 + theta V_ov and by 1 + drop/(E_c L), with the smooth overdrive
    V_ov = 2 n kT/q ln(1 + exp(v/2)) and the smooth drop 2 kT/q times the difference of the logarithms, at most
    the saturation drop. For a mobility without bound the saturated current tends to W C_ox v_sat V_ov, as it should.
    Source: Enz 1995 with the two usual corrections (common practice).
    """
    _, _, at_source, at_drain = _terminal_charges(channel, gate_voltage, drain_voltage)
    twice_kt = 2 * channel.thermal_voltage
    overdrive = twice_kt * channel.slope_factor * at_source
    drop = twice_kt * (at_source - at_drain)
    reduction = (1 + channel.mobility_degradation * overdrive) * (1 + drop / channel.critical_drop)
    return channel.specific_current * (at_source**2 - at_drain**2) / reduction


def transconductance_efficiency(channel: Channel, gate_voltage, drain_voltage):
    """gm/I, the relative change of the drain current per volt at the gate.

    channel : see `Channel`
    gate_voltage, drain_voltage : against the source, magnitudes [V], drain_voltage > 0
    Returns gm/I [1/V], at most 1/(n kT/q).
    Source: derivative of the logarithm of `drain_current`.
    """
    forward, reverse, at_source, at_drain = _terminal_charges(channel, gate_voltage, drain_voltage)
    twice_kt = 2 * channel.thermal_voltage
    ratio = twice_kt / channel.critical_drop * at_source
    source_slope = 0.5 / (1 + np.exp(-forward / 2))
    drain_slope = np.where(
        at_drain > soft_plus(reverse / 2),
        source_slope * ratio * (2 + ratio) / (1 + ratio) ** 2,
        0.5 / (1 + np.exp(-reverse / 2)),
    )
    overdrive_scale = twice_kt * channel.slope_factor * channel.mobility_degradation
    drop_scale = twice_kt / channel.critical_drop
    current_part = 2 * (at_source * source_slope - at_drain * drain_slope) / (at_source**2 - at_drain**2)
    mobility_part = overdrive_scale * source_slope / (1 + overdrive_scale * at_source)
    velocity_part = drop_scale * (source_slope - drain_slope) / (1 + drop_scale * (at_source - at_drain))
    return (current_part - mobility_part - velocity_part) / (channel.slope_factor * channel.thermal_voltage)


def off_current(channel: Channel, supply):
    """Drain current with the gate at the source and the drain at the supply.

    channel : see `Channel`
    supply : supply voltage [V]
    Returns current [A]. Subthreshold current only; junction and gate leakage are not modelled.
    Source: `drain_current`.
    """
    return drain_current(channel, 0.0, supply)
