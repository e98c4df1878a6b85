"""Tensor mesh of half a section: the materials and the doping between its lines, and the geometry of its boxes."""

from dataclasses import dataclass, replace

import numpy as np

from physics.constants import OXIDE_RELATIVE_PERMITTIVITY, SILICON_RELATIVE_PERMITTIVITY
from physics.edges import NoEdge
from physics.section_geometry import FieldStep, Section, TrenchWall
from physics.section_lines import MOST_NODES, section_lines


@dataclass(frozen=True, kw_only=True)
class SectionMesh:
    """Half a section on a tensor mesh; x from the middle of the channel, y down from the silicon surface.

    lateral : lines along the width [m], increasing from 0
    depth : lines along the depth [m], increasing, negative in the oxide, 0 at the silicon surface
    is_gate : nodes in the gate, a Boolean array (depth, lateral) [1]
    permittivity : relative permittivity of the cells between lines, array (depth - 1, lateral - 1) [1]
    doping : doping of the cells, zero in the oxide, the same shape [m^-3]
    """

    lateral: np.ndarray
    depth: np.ndarray
    is_gate: np.ndarray
    permittivity: np.ndarray
    doping: np.ndarray

    def gathered(self, density):
        """Integral of a quantity of the cells over each node's box.

        density : per area of section, array (depth - 1, lateral - 1) [1]
        Returns integral, array (depth, lateral), units of density times area [m^2].
        Source: box scheme, a quarter of each of the four cells around a node.
        """
        quarter = density * np.outer(np.diff(self.depth), np.diff(self.lateral)) / 4
        total = np.zeros((self.depth.size, self.lateral.size))
        for rows in (slice(None, -1), slice(1, None)):
            for columns in (slice(None, -1), slice(1, None)):
                total[rows, columns] += quarter
        return total

    @property
    def silicon_area(self):
        """Area of silicon in each node's box [m^2], array (depth, lateral)."""
        return self.gathered((self.doping > 0).astype(float))

    @property
    def dopants(self):
        """Acceptors in each node's box per unit length [m^-1], array (depth, lateral)."""
        return self.gathered(self.doping)

    @property
    def conductances(self):
        """Relative permittivity times box face over distance [1], arrays (depth, lateral - 1) and (depth - 1, lateral)."""
        height, length = np.diff(self.depth), np.diff(self.lateral)
        along = np.zeros((self.depth.size, length.size))
        along[:-1] += self.permittivity * height[:, None] / 2
        along[1:] += self.permittivity * height[:, None] / 2
        down = np.zeros((height.size, self.lateral.size))
        down[:, :-1] += self.permittivity * length / 2
        down[:, 1:] += self.permittivity * length / 2
        return along / length, down / height[:, None]


def _filled(section, lateral, depth):
    """The mesh with its materials: which nodes are gate, what lies in the cells."""
    edge, half, oxide, profile = section.edge, section.width / 2, section.oxide_thickness, section.profile
    rounding = 1e-9 * oxide
    gate_level = np.full(lateral.size, -oxide)  # lowest gate node of each line
    middle, height = (lateral[1:] + lateral[:-1]) / 2, ((depth[1:] + depth[:-1]) / 2)[:, None]
    silicon = np.broadcast_to(height > 0, (height.size, middle.size))
    doping = np.where(height < section.surface_depth, profile.surface_doping, profile.doping) * silicon
    if isinstance(edge, FieldStep):
        share = np.clip((lateral - half) / max(edge.taper_length, rounding), 0, 1)
        gate_level = -oxide - (edge.field_oxide_thickness - oxide) * share
        doping = doping + edge.implant_doping * (silicon & (middle > half) & (height < edge.implant_depth))
    elif isinstance(edge, TrenchWall):
        gate_level[lateral >= half + oxide - rounding] += edge.divot
        silicon = silicon & ((middle < half) | (height > edge.trench_depth))
        doping = doping * silicon
    return SectionMesh(
        lateral=lateral,
        depth=depth,
        is_gate=depth[:, None] <= gate_level + rounding,
        permittivity=np.where(silicon, SILICON_RELATIVE_PERMITTIVITY, OXIDE_RELATIVE_PERMITTIVITY),
        doping=doping,
    )


def section_mesh(section: Section, refinement=1.0):
    """Mesh of half a section.

    section : see `physics.section_geometry.Section`
    refinement : lines are this many times denser than the standard mesh [1], > 0
    Returns a SectionMesh. Raises ValueError for a mesh that would not fit into memory.
    Source: own choice, see the module; tests halve it.
    """
    lateral, depth = section_lines(section, refinement)
    if lateral.size * depth.size > MOST_NODES:
        raise ValueError(
            f"the mesh would need {lateral.size} x {depth.size} nodes; the memory allows {MOST_NODES} in all: lower the "
            "refinement"
        )
    return _filled(section, lateral, depth)


def edge_free_mesh(section: Section, mesh: SectionMesh):
    """The same channel without edges on the depth lines of a mesh, in one column of cells.

    section : see `physics.section_geometry.Section`
    mesh : the section's own, see `SectionMesh`
    Returns a SectionMesh of the section with `physics.edges.NoEdge`.
    Source: own choice; the uniform solution on a tensor mesh is that of its depth lines alone, so errors cancel.
    """
    depth = mesh.depth[mesh.depth > -section.oxide_thickness * (1 + 1e-9)]
    return _filled(replace(section, edge=NoEdge()), np.array([0.0, section.width / 2]), depth)
