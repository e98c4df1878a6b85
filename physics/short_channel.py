"""Short-channel effect: the part of the bulk depletion charge's voltage drop that the junctions take from the gate.

Every kind has one method, `lowering(electrostatics, bulk_drop, length, oxide_thickness, drain_voltage)`.
"""

from dataclasses import dataclass

import numpy as np

from physics.constants import OXIDE_PERMITTIVITY, SILICON_PERMITTIVITY

LEAST_LENGTH_RATIO = 1.5  # channel lengths over the decay length for the quasi-two-dimensional form to have a meaning


class ChannelTooShort(ValueError):
    """A channel outside the range of its short-channel formula; refused, never clamped."""


def charge_sharing_reach(depletion_width, junction_depth):
    """How far each junction reaches under the gate at the bottom of the depletion region.

    depletion_width : depletion width [m]
    junction_depth : radius of the junctions' corners [m], > 0
    Returns length per junction [m]; the trapezoid closes at a channel length of twice this.
    Source: L. D. Yau, Solid-State Electron. 17, 1059 (1974).
    """
    return junction_depth * (np.sqrt(1 + 2 * depletion_width / junction_depth) - 1)


def charge_sharing_factor(depletion_width, length, junction_depth):
    """Share of the depletion charge that the gate holds in a short channel.

    depletion_width : depletion width [m]
    length : effective channel length [m]
    junction_depth : junction depth [m]
    Returns factor on the bulk depletion charge [1], 1/2 to 1.
    Range: length >= twice `charge_sharing_reach`. Raises ChannelTooShort beyond.
    Source: Yau 1974; Neamen, 4th ed., eq. 11.24.
    """
    reach = charge_sharing_reach(depletion_width, junction_depth)
    if np.any(length < 2 * reach):
        shortest = 2e9 * np.max(reach)
        raise ChannelTooShort(
            f"the charge-sharing trapezoid has closed: {shortest:.0f} nm, twice the reach of a junction, is the shortest "
            f"channel it holds for; {1e9 * np.min(length):.0f} nm is asked for"
        )
    return 1 - reach / length


def quasi_two_dimensional_length(oxide_thickness, depletion_width, eta=1.0):
    """Decay length of the junctions' field along the channel.

    oxide_thickness : gate oxide [m]
    depletion_width : depletion width [m]
    eta : fitting parameter of the vertical field's average [1], 1 if unknown
    Returns length [m].
    Source: Z.-H. Liu et al., IEEE Trans. Electron Devices 40, 86 (1993) (model from memory).
    """
    return np.sqrt(SILICON_PERMITTIVITY / (OXIDE_PERMITTIVITY * eta) * (oxide_thickness * depletion_width))


def quasi_two_dimensional_shift(length_ratio, barrier, drain_voltage):
    """Lowering of the threshold of a short channel, exact solution of the quasi-two-dimensional boundary problem.

    length_ratio : channel length over `quasi_two_dimensional_length` [1], > 0
    barrier : built-in potential of source to channel less the surface potential at threshold [V], > 0
    drain_voltage : drain to source [V], >= 0
    Returns lowering [V], > 0. Where the potential's minimum would lie at the source the form still holds
    algebraically but the barrier is gone; a length_ratio above 1.5 keeps clear of that.
    Source: Liu 1993, boundary problem. The minimum of A sinh + B sinh set equal to the surface potential gives a
    quadratic; with half-angle identities its root is (2a + V + 2 cosh(h) sqrt(a(a + V)))/(2 sinh^2 h), h = L/2l
    (own derivation).
    """
    decay = np.exp(-0.5 * length_ratio)
    squared = decay * decay
    at_drain = barrier + drain_voltage
    root = np.sqrt(barrier * at_drain)
    shift = (barrier + at_drain) * decay  # has the full shape, so that the rest can be done in place
    shift += (1 + squared) * root
    shift *= decay
    shift /= 0.5 * (1 - squared) ** 2
    return shift


@dataclass(frozen=True, kw_only=True)
class LongChannel:
    """No short-channel effect."""

    def lowering(self, electrostatics, bulk_drop, length, oxide_thickness, drain_voltage):
        """Lowering [V], exactly none. Arguments as in `QuasiTwoDimensional.lowering`."""
        return 0.0


@dataclass(frozen=True, kw_only=True)
class ChargeSharing:
    """Yau's trapezoid. No drain-voltage dependence.

    junction_depth : junction depth [m]
    """

    junction_depth: float

    def lowering(self, electrostatics, bulk_drop, length, oxide_thickness, drain_voltage):
        """Lowering [V]. Arguments as in `QuasiTwoDimensional.lowering`. Source: `charge_sharing_factor`."""
        return bulk_drop * (1 - charge_sharing_factor(electrostatics.depletion_width, length, self.junction_depth))


@dataclass(frozen=True, kw_only=True)
class QuasiTwoDimensional:
    """Barrier lowering by both junctions, with its drain-voltage dependence.

    eta : fitting parameter [1], > 0
    """

    eta: float = 1.0

    def lowering(self, electrostatics, bulk_drop, length, oxide_thickness, drain_voltage):
        """Lowering of the threshold of a wide channel.

        electrostatics : see `physics.threshold.Electrostatics`
        bulk_drop : bulk charge over oxide capacitance [V]
        length : effective channel length [m]
        oxide_thickness : gate oxide [m]
        drain_voltage : drain to source [V], >= 0
        Returns lowering [V], > 0. Raises ChannelTooShort below LEAST_LENGTH_RATIO decay lengths.
        Source: `quasi_two_dimensional_shift`.
        """
        decay = quasi_two_dimensional_length(oxide_thickness, electrostatics.depletion_width, self.eta)
        ratio = length / decay
        if np.min(ratio) < LEAST_LENGTH_RATIO:
            raise ChannelTooShort(
                f"{1e9 * np.min(length):.0f} nm is shorter than {LEAST_LENGTH_RATIO:g} decay lengths of the junctions' field, "
                f"{1e9 * LEAST_LENGTH_RATIO * np.max(decay):.0f} nm: no barrier is left"
            )
        return quasi_two_dimensional_shift(ratio, electrostatics.junction_barrier, drain_voltage)


ShortChannel = LongChannel | ChargeSharing | QuasiTwoDimensional
