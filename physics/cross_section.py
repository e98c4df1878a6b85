"""Threshold voltage of a channel with true edges: Poisson's equation solved on its width-depth plane.

The threshold is the gate voltage above flat band at which the inversion charge of the whole section, per unit length
and divided by the width, is C_ox kT/q. Its shift is measured against the same channel without edges, solved on the
same depth lines, so that most of the mesh's error drops out.
"""

from dataclasses import dataclass, replace

import numpy as np

from physics.constants import ELEMENTARY_CHARGE, VACUUM_PERMITTIVITY
from physics.edges import NoEdge
from physics.section_geometry import FieldStep, Section
from physics.section_lines import section_scales
from physics.section_mesh import SectionMesh, edge_free_mesh, section_mesh
from physics.section_poisson import Solution, box_equations, newton
from physics.silicon import thermal_voltage
from physics.threshold import oxide_capacitance

_COARSE = 1 / 3  # refinement of the mesh whose solution is the first guess


@dataclass(frozen=True, kw_only=True)
class SectionThreshold:
    """A section at threshold. Arrays of nodes have the mesh's shape (depth, lateral); they cover half the width.

    section : see `physics.section_geometry.Section`
    mesh : see `physics.section_mesh.SectionMesh`
    threshold : gate against source, above flat band, at the inversion charge C_ox kT/q per area [V]
    wide_threshold : the same without edges, on the same depth lines [V]
    potential : against neutral substrate [V], array of nodes
    inversion_density : electrons [m^-3], array of nodes, zero outside the silicon
    gate_charge : charge on the gate per unit length, both halves [C/m]
    silicon_charge : charge in the silicon per unit length, both halves [C/m]
    iterations : linear solves on the final mesh [1]
    """

    section: Section
    mesh: SectionMesh
    threshold: float
    wide_threshold: float
    potential: np.ndarray
    inversion_density: np.ndarray
    gate_charge: float
    silicon_charge: float
    iterations: int

    @property
    def shift(self):
        """Shift of the threshold by both edges [V], positive where the edges raise it."""
        return self.threshold - self.wide_threshold

    @property
    def charge_factor(self):
        """Factor on the bulk depletion charge that gives the same shift [1], F_w of `physics.threshold`."""
        section, scales = self.section, section_scales(self.section)
        charge = section.profile.depletion_charge(scales.depletion_width)
        return 1 + self.shift * oxide_capacitance(section.oxide_thickness) / charge


def threshold_inversion(section: Section):
    """Electrons per unit length of HALF a section at threshold.

    section : see `physics.section_geometry.Section`
    Returns electrons per length [m^-1].
    Source: definition, inversion charge C_ox kT/q per area.
    """
    per_area = oxide_capacitance(section.oxide_thickness) * thermal_voltage(section.temperature) / ELEMENTARY_CHARGE
    return per_area * section.width / 2


def _column_guess(section, mesh):
    """Normalised potential along the depth in the depletion approximation, and the gate's."""
    kt, scales = thermal_voltage(section.temperature), section_scales(section)
    surface = (scales.surface_potential + section.body_bias) / kt
    within = np.clip(1 - mesh.depth / scales.depletion_width, 0, 1)
    neutral = np.where(mesh.depth < section.surface_depth, section.profile.surface_doping, section.profile.doping)
    band = surface * within**2 - np.log(neutral / section.profile.doping)
    drop = section.profile.depletion_charge(scales.depletion_width) / oxide_capacitance(section.oxide_thickness) / kt
    share = np.clip(-mesh.depth / section.oxide_thickness, 0, 1)
    return np.where(mesh.depth < 0, surface + share * drop, band), surface + drop


def _without_edges(section, mesh):
    """Solution of the same channel without edges on the depth lines of a mesh, and its own mesh."""
    bare, column = replace(section, edge=NoEdge()), edge_free_mesh(section, mesh)
    guess, gate = _column_guess(bare, column)
    start = np.repeat(guess[:, None], column.lateral.size, axis=1)
    return newton(box_equations(bare, column), start, gate, threshold_inversion(bare)), column


def _spread(section, mesh, wide, column):
    """First guess on a coarse mesh: the solution without edges, fading out beyond the edge."""
    scales = section_scales(section)
    beyond = np.maximum(mesh.lateral - section.width / 2, 0) / scales.depletion_width
    fade = np.exp(-beyond) if isinstance(section.edge, FieldStep) else 1 / (1 + beyond)
    return np.interp(mesh.depth, column.depth, wide.potential[:, 0])[:, None] * fade


def _carried(potential, coarse, fine):
    """A potential carried from one mesh to another, linear along both directions."""
    along = np.array([np.interp(fine.lateral, coarse.lateral, row) for row in potential])
    return np.array([np.interp(fine.depth, coarse.depth, column) for column in along.T]).T


def _solved(section, mesh, coarse=None):
    """Solution at threshold on a mesh, warm from a coarse one if given, and without edges."""
    wide, column = _without_edges(section, mesh)
    if isinstance(section.edge, NoEdge):
        return wide, wide
    goal = threshold_inversion(section)
    if coarse is None:
        guess, gate = _spread(section, mesh, wide, column), wide.gate
    else:
        first, _ = _solved(section, coarse)
        guess, gate = _carried(first.potential, coarse, mesh), first.gate
    return newton(box_equations(section, mesh), guess, gate, goal), wide


def solve_threshold(section: Section, refinement=1.0) -> SectionThreshold:
    """Threshold of a section with its edges.

    section : see `physics.section_geometry.Section`
    refinement : lines are this many times denser than the standard mesh [1], > 0
    Returns a SectionThreshold. Raises ValueError for a mesh too large for the memory.
    Range: Boltzmann carriers, full ionisation, a long channel; no quantum shift, an ideal gate. The standard mesh gives the
    shift within 2 %, see the tests. Where the field inverts before the channel its charge counts too, and the threshold
    then depends on the field's width.
    Source: Poisson's equation, see `physics.section_poisson`.
    """
    mesh = section_mesh(section, refinement)
    solution, wide = _solved(section, mesh, section_mesh(section, _COARSE * refinement))
    return _at_threshold(section, mesh, solution, wide)


def _at_threshold(section, mesh, solution: Solution, wide: Solution):
    """The record of a solution: back to volts, both halves of the section together."""
    kt, equations = thermal_voltage(section.temperature), box_equations(section, mesh)
    free, potential = ~equations.fixed, solution.potential
    charge = equations.holes(potential) - equations.inversion(potential) - equations.dopants
    flux = equations.displacement(potential)
    return SectionThreshold(
        section=section,
        mesh=mesh,
        threshold=solution.gate * kt - section.body_bias,
        wide_threshold=wide.gate * kt - section.body_bias,
        potential=potential * kt,
        inversion_density=equations.electron_density * np.exp(np.where(equations.is_silicon, potential, -np.inf)),
        gate_charge=float(2 * VACUUM_PERMITTIVITY * kt * flux[equations.is_gate].sum()),
        silicon_charge=float(2 * ELEMENTARY_CHARGE * charge[free].sum()),
        iterations=solution.iterations,
    )


def inversion_sweep(solved: SectionThreshold, gate_voltage):
    """Inversion charge of a section along a sweep of the gate, each step warm from the one before.

    solved : see `SectionThreshold`; the sweep starts from it
    gate_voltage : gate against source, above flat band, a sequence [V]
    Returns magnitude of the charge of the whole section over the width, one per voltage [C/m^2].
    Source: as `solve_threshold`, with the gate given.
    """
    section, kt = solved.section, thermal_voltage(solved.section.temperature)
    equations, potential, charges = box_equations(section, solved.mesh), solved.potential / kt, []
    for voltage in gate_voltage:
        potential = newton(equations, potential, (voltage + section.body_bias) / kt).potential
        charges.append(equations.inversion(potential)[~equations.fixed].sum())
    return ELEMENTARY_CHARGE * np.array(charges) / (section.width / 2)
