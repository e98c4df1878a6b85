"""Weight of a single dopant at every place of a section, and the dopant scatter of a device with those edges.

A dopant's charge is averaged along the channel's length, as the two-dimensional solution implies, and its effect is
taken to first order. One adjoint solve then gives the weights of all places at once. One dopant of weight w shifts the
threshold by w q/(C_ox W L); in the middle of a wide channel w is close to 1 - x/x_d, with a tail below the depletion
edge, which is soft.
"""

from dataclasses import dataclass

import numpy as np

from physics.constants import VACUUM_PERMITTIVITY
from physics.cross_section import SectionThreshold
from physics.dopants import single_dopant_shift
from physics.section_poisson import NewtonMatrix, box_equations
from physics.silicon import thermal_voltage
from physics.threshold import oxide_capacitance


def dopant_weights(solved: SectionThreshold):
    """Weight of one acceptor at each node of the mesh, at threshold.

    solved : see `physics.cross_section.SectionThreshold`
    Returns weights, array (depth, lateral) [1], about 1 at the surface; zero outside the silicon and on the lowest line.
    Range: first order in the dopant's charge; the charge is spread along the whole channel.
    Source: adjoint of the linearised box equations bordered by the inversion charge (own derivation). The matrix is
    symmetric, so its one factor serves the adjoint. A dopant on one side of the section moves the threshold half as far
    as a pair of mirror images.
    """
    section = solved.section
    equations = box_equations(section, solved.mesh)
    potential = solved.potential / thermal_voltage(section.temperature)
    electrons = np.where(equations.fixed, 0.0, equations.inversion(potential))
    adjoint = NewtonMatrix(equations).factored(potential)((electrons / electrons.sum())[..., None])[..., 0]
    per_gate = (adjoint * equations.gate_pull).sum()
    plate = oxide_capacitance(section.oxide_thickness) * section.width / VACUUM_PERMITTIVITY
    return plate / 2 * adjoint / per_gate * equations.is_silicon


def weighted_dopants(solved: SectionThreshold, weights, power):
    """Dopants of the whole section per unit length, each counted with a power of its weight.

    solved : see `physics.cross_section.SectionThreshold`
    weights : from `dopant_weights`, array (depth, lateral) [1]
    power : exponent, 1, 2, ... [1]
    Returns weighted dopants per length [m^-1]; over the width, what `physics.profile` integrates over the depth.
    Source: Campbell's theorem for a Poisson field of dopants; both halves of the section.
    """
    return float(2 * (solved.mesh.dopants * weights**power).sum())


@dataclass(frozen=True, kw_only=True)
class DopantScatter:
    """Scatter of ONE device's threshold by the number and the places of its dopants.

    mean_shift : mean of the sum of all dopants' shifts, what the doping itself contributes to first order [V]
    sigma : standard deviation [V]
    third_moment : third central moment [V^3]
    """

    mean_shift: float
    sigma: float
    third_moment: float

    @property
    def skewness(self):
        """Third central moment over sigma cubed [1]."""
        return self.third_moment / self.sigma**3


def dopant_scatter(solved: SectionThreshold, weights, length):
    """First three cumulants of the threshold of a device with the section's edges.

    solved : see `physics.cross_section.SectionThreshold`
    weights : from `dopant_weights`, array (depth, lateral) [1]
    length : channel length [m], > 0
    Returns DopantScatter. Raises ValueError for a length that is not a positive number.
    Range: every dopant on its own, Poisson in number; a pair's difference has sqrt(2) times the sigma.
    Source: Campbell's theorem, see `physics.dopants`.
    """
    if not 0 < length < np.inf:
        raise ValueError(f"length must be a positive, finite number, not {length!r}")
    section = solved.section
    shift = single_dopant_shift(oxide_capacitance(section.oxide_thickness), section.width, length)
    first, second, third = (length * weighted_dopants(solved, weights, power) for power in (1, 2, 3))
    return DopantScatter(
        mean_shift=float(shift * first), sigma=float(shift * np.sqrt(second)), third_moment=float(shift**3 * third)
    )
