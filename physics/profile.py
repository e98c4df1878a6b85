"""Doping under the gate: uniform, or a surface layer over a substrate.

A profile knows its depletion width, its charge, and the moments of a dopant's weight. Everything that depends on how
the doping varies with depth is here and nowhere else.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np

from physics.constants import ELEMENTARY_CHARGE, SILICON_PERMITTIVITY


@dataclass(frozen=True, kw_only=True)
class UniformProfile:
    """The same doping at every depth.

    doping : net doping [m^-3], any shape
    """

    doping: Any

    @property
    def surface_doping(self):
        """Doping at the silicon surface [m^-3]."""
        return self.doping

    def depletion_width(self, potential):
        """Depletion width under a band bending, depletion approximation.

        potential : band bending including the body bias [V], >= 0
        Returns width [m].
        Source: Neamen, 4th ed., eq. 10.5.
        """
        return np.sqrt(2 * SILICON_PERMITTIVITY / ELEMENTARY_CHARGE * potential / self.doping)

    def depletion_charge(self, depletion_width):
        """Magnitude of the depletion charge.

        depletion_width : depletion width [m]
        Returns charge per area [C/m^2].
        Source: definition.
        """
        return ELEMENTARY_CHARGE * self.doping * depletion_width

    def weighted_dopants(self, depletion_width, power):
        """Areal dopant density weighted by a power of (1 - depth/depletion_width).

        depletion_width : depletion width [m]
        power : exponent, 0, 1, 2, ... [1]
        Returns integral of N (1 - x/x_d)^power over the depletion region [m^-2].
        Source: elementary integral, N x_d/(power + 1).
        """
        dopants = self.doping * depletion_width
        return dopants / (power + 1) if power else dopants

    def mean_square_weight(self, depletion_width):
        """Mean of (1 - depth/depletion_width)^2 over the dopants.

        depletion_width : depletion width [m] (not used by this profile)
        Returns mean square [1]. Source: elementary integral.
        """
        return 1 / 3

    def scaled(self, factor):
        """The same profile with every density multiplied.

        factor : relative doping [1], > 0
        Returns a profile.
        """
        return UniformProfile(doping=self.doping * factor)


@dataclass(frozen=True, kw_only=True)
class StepProfile:
    """One doping down to a depth, another below: a retrograde well or a threshold implant.

    surface_doping : doping from the surface to `surface_depth` [m^-3]
    surface_depth : thickness of the surface layer [m], less than the depletion width for `doping` to have a meaning
    doping : doping of the substrate below [m^-3]
    """

    surface_doping: Any
    surface_depth: Any
    doping: Any

    def depletion_width(self, potential):
        """Depletion width under a band bending, depletion approximation; continuous where the edge crosses the step.

        potential : band bending including the body bias [V], >= 0
        Returns width [m].
        Source: Poisson's equation integrated twice over the two layers (own derivation).
        """
        double_length = 2 * SILICON_PERMITTIVITY / ELEMENTARY_CHARGE * potential
        depth_squared = self.surface_depth**2
        beyond = (double_length - (self.surface_doping - self.doping) * depth_squared) / self.doping
        within = double_length / self.surface_doping
        return np.sqrt(np.where(beyond > depth_squared, beyond, within))

    def depletion_charge(self, depletion_width):
        """Magnitude of the depletion charge.

        depletion_width : depletion width [m]
        Returns charge per area [C/m^2].
        Source: definition.
        """
        surface = np.minimum(self.surface_depth, depletion_width)
        return ELEMENTARY_CHARGE * (self.doping * depletion_width + (self.surface_doping - self.doping) * surface)

    def weighted_dopants(self, depletion_width, power):
        """Areal dopant density weighted by a power of (1 - depth/depletion_width).

        depletion_width : depletion width [m]
        power : exponent, 0, 1, 2, ... [1]
        Returns integral of N (1 - x/x_d)^power over the depletion region [m^-2].
        Source: elementary integral over the two layers.
        """
        below = (1 - np.minimum(self.surface_depth / depletion_width, 1)) ** (power + 1)
        mean_doping = self.surface_doping + (self.doping - self.surface_doping) * below
        return mean_doping * depletion_width / (power + 1)

    def mean_square_weight(self, depletion_width):
        """Mean of (1 - depth/depletion_width)^2 over the dopants.

        depletion_width : depletion width [m]
        Returns mean square [1]. Source: `weighted_dopants`.
        """
        return self.weighted_dopants(depletion_width, 2) / self.weighted_dopants(depletion_width, 0)

    def scaled(self, factor):
        """The same profile with every density multiplied.

        factor : relative doping [1], > 0
        Returns a profile.
        """
        return StepProfile(
            surface_doping=self.surface_doping * factor,
            surface_depth=self.surface_depth,
            doping=self.doping * factor,
        )


Profile = UniformProfile | StepProfile
