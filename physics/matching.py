"""Two devices that should be equal: offset of a differential pair, error of a current mirror.

Both devices are saturated. There the current has a closed form and a closed inverse, so the answer is evaluated from the
two devices as they are; the small-signal shorthand is given beside it, for comparison and for limits.
"""

import numpy as np

from physics.current import Channel, soft_plus


def _corrections(channel):
    """Coefficients of mobility degradation and of velocity saturation on the source-end charge [1]."""
    twice_kt = 2 * channel.thermal_voltage
    return twice_kt * channel.slope_factor * channel.mobility_degradation, twice_kt / channel.critical_drop


def saturated_current(channel: Channel, gate_voltage):
    """Drain current in saturation, the limit of `drain_current` for a large drain voltage.

    channel : see `physics.current.Channel`
    gate_voltage : against the source, a magnitude [V]
    Returns current [A], > 0.
    Source: `physics.current.drain_current` with the drain end at its saturation value.
    """
    charge = soft_plus((gate_voltage - channel.threshold) / (2 * channel.slope_factor * channel.thermal_voltage))
    degradation, saturation = _corrections(channel)
    return channel.specific_current * charge * charge / ((1 + degradation * charge) * (1 + saturation * charge))


def largest_current(channel: Channel):
    """Current that no gate voltage exceeds when both mobility corrections are present.

    channel : see `physics.current.Channel`
    Returns current [A]; infinite when one of the corrections is absent.
    Source: limit of `saturated_current` for a large gate voltage.
    """
    degradation, saturation = _corrections(channel)
    with np.errstate(divide="ignore", over="ignore"):
        return channel.specific_current / (np.asarray(degradation, float) * saturation)


def gate_voltage_at(channel: Channel, drain_current):
    """Gate voltage that makes a saturated device carry a current, the exact inverse of `saturated_current`.

    channel : see `physics.current.Channel`
    drain_current : current [A], > 0 and below `largest_current`
    Returns gate voltage against the source, a magnitude [V].
    Source: I (1 + a s)(1 + c s) = I_spec s^2 is quadratic in the source-end charge s (own derivation).
    """
    degradation, saturation = _corrections(channel)
    linear = degradation + saturation
    square = channel.specific_current / drain_current - degradation * saturation
    charge = (linear + np.sqrt(linear * linear + 4 * square)) / (2 * square)
    # ln(exp(s) - 1) without overflow
    logarithm = charge + np.log(-np.expm1(-charge))
    return channel.threshold + 2 * channel.slope_factor * channel.thermal_voltage * logarithm


def saturated_efficiency(channel: Channel, gate_voltage):
    """gm/I of a saturated device.

    channel : see `physics.current.Channel`
    gate_voltage : against the source, a magnitude [V]
    Returns gm/I [1/V], at most 1/(n kT/q).
    Source: derivative of the logarithm of `saturated_current`.
    """
    half = (gate_voltage - channel.threshold) / (2 * channel.slope_factor * channel.thermal_voltage)
    charge = soft_plus(half)
    degradation, saturation = _corrections(channel)
    relative = 2 / charge - degradation / (1 + degradation * charge) - saturation / (1 + saturation * charge)
    slope = np.exp(half - charge)  # d ln(1 + exp(x))/dx
    return relative * slope / (2 * channel.slope_factor * channel.thermal_voltage)


def saturation_voltage(channel: Channel, gate_voltage):
    """Drain voltage from which on the current keeps within 2 % of its saturated value.

    channel : see `physics.current.Channel`
    gate_voltage : against the source, a magnitude [V]
    Returns drain voltage [V], about 4 kT/q in weak inversion.
    Source: the drain-end charge falls to its saturation value, or to exp(-4), on the scale of the source-end charge
    (own derivation from `physics.current.drain_current`).
    """
    charge = soft_plus((gate_voltage - channel.threshold) / (2 * channel.slope_factor * channel.thermal_voltage))
    _, saturation = _corrections(channel)
    return 2 * channel.thermal_voltage * charge / (1 + saturation * charge) + 4 * channel.thermal_voltage


def pair_offset(threshold_difference, relative_factor_difference, efficiency):
    """Input-referred offset of a differential pair, small-signal shorthand.

    threshold_difference : V_T of one less the other [V]
    relative_factor_difference : difference of the current factors over their mean, the other less the one [1]
    efficiency : gm/I [1/V]
    Returns offset [V].
    Source: dV_T + (I/gm) d(beta)/beta; P. R. Kinget, IEEE J. Solid-State Circuits 40, 1212 (2005) (memory).
    """
    return threshold_difference + relative_factor_difference / efficiency


def mirror_error(threshold_difference, relative_factor_difference, efficiency):
    """Relative current error of a mirror, small-signal shorthand.

    threshold_difference : V_T of the input device less that of the output [V]
    relative_factor_difference : current factor of the output less that of the input, over their mean [1]
    efficiency : gm/I [1/V]
    Returns error [1].
    Source: (gm/I) dV_T + d(beta)/beta; Kinget 2005 (memory).
    """
    return efficiency * threshold_difference + relative_factor_difference


def distance_sigma(area_sigma, distance_coefficient, distance):
    """Sigma of a pair's difference with its distance term.

    area_sigma : sigma of the difference of neighbours [V]
    distance_coefficient : S [V/m]
    distance : between the devices' centers [m]
    Returns sigma [V].
    Source: sigma^2 = A^2/(W L) + S^2 D^2; Pelgrom and Duinmaijer, ESSCIRC 1988.
    """
    return np.hypot(area_sigma, distance_coefficient * distance)
