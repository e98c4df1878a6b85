"""The device whose dopants are counted one by one, and its mesh: boxes in the plane, lines in the depth.

The plane has equal boxes, so that cosine transforms part the layered stack into columns; the lines of the depth are
fine at the surface, where the inversion layer is thin, and widen below. Length is a mirror at source and drain, width a
mirror at the channel's edges or in the middle of the field.
"""

from dataclasses import dataclass, replace
from numbers import Real
from typing import Any

import numpy as np

from physics.constants import OXIDE_RELATIVE_PERMITTIVITY, SILICON_RELATIVE_PERMITTIVITY
from physics.edges import NoEdge
from physics.section_geometry import FieldStep, Section, TrenchWall
from physics.section_lines import debye_length, section_scales
from physics.silicon import thermal_voltage

MOST_NODES = 4_000_000  # of a mesh; some 30 arrays of 8 bytes a node, or 1 GB
_FEWEST_BOXES = 4  # along the width and the length of a channel
_REACH = 4.0  # depletion widths and oxide thicknesses beyond the edge after which nothing changes any more
_DEBYE_LENGTHS_BELOW = 6.0  # depth of the mesh below the depletion edge: what is cut off has decayed to exp(-6)


@dataclass(frozen=True, kw_only=True)
class AtomDevice(Section):
    """A section with a length, and how finely its dopants are looked at. The fields of `Section` come first.

    length : channel length [m]
    edge : see `physics.section_geometry.Section`: a TrenchWall has no divot here; NoEdge() is a mirror at both edges
    mesh_spacing : box of the plane, and line distance below the surface, about [m]
    cloud_length : side of the cube over which a dopant's charge is spread [m]
    silicon_depth : depth of the silicon solved [m]; None for the depletion width and 6 Debye lengths
    charge_level : inversion charge per area at threshold over C_ox kT/q [1]; a tenth is well below threshold
    bound_holes : whether holes may be trapped by single acceptors, see `physics.atom_poisson`
    Raises ValueError for values without meaning, for fewer than 4 boxes along width or length, for a depletion layer that
    does not fit into the depth, and for a mesh that would not fit into memory.
    """

    length: float
    edge: Any = NoEdge()
    mesh_spacing: float = 1e-9
    cloud_length: float = 1e-9
    silicon_depth: float | None = None
    charge_level: float = 1.0
    bound_holes: bool = False

    def __post_init__(self):
        for name in ("width", "length", "mesh_spacing", "cloud_length", "charge_level"):
            value = getattr(self, name)
            if not (isinstance(value, Real) and 0 < value < np.inf):
                raise ValueError(f"{name} must be a positive, finite number, not {value!r}")
        super().__post_init__()
        for name in ("width", "length"):
            if getattr(self, name) < (_FEWEST_BOXES - 0.5) * self.mesh_spacing:
                raise ValueError(
                    f"{name}, {_nm(getattr(self, name))}, must hold {_FEWEST_BOXES} boxes of mesh_spacing, "
                    f"{_nm(self.mesh_spacing)}: lower mesh_spacing"
                )
            if self.cloud_length > getattr(self, name):
                raise ValueError(f"cloud_length, {_nm(self.cloud_length)}, must fit into {name}: shorten it")
        if isinstance(self.edge, TrenchWall) and self.edge.divot:
            raise ValueError(f"the gate over a trench must be planar here, so the divot 0, not {_nm(self.edge.divot)}")
        least = section_scales(self).depletion_width + 3 * self.substrate_debye
        if self.silicon_depth is not None and not least <= self.silicon_depth < np.inf:
            raise ValueError(
                f"silicon_depth, {_nm(self.silicon_depth)}, must hold the depletion layer and 3 Debye lengths, "
                f"{_nm(least)}: make it deeper, or leave it out"
            )
        nodes = self.plane[0] * self.plane[1] * _depth_lines(self).size
        if nodes > MOST_NODES:
            raise ValueError(
                f"the mesh would need {nodes} nodes, {nodes / 4e6:.1f} GB; the memory allows {MOST_NODES}, 1 GB: widen "
                "mesh_spacing, or narrow the field's width"
            )

    @property
    def substrate_debye(self):
        """Debye length of the substrate [m]."""
        return debye_length(self.profile.doping, thermal_voltage(self.temperature))

    @property
    def depth(self):
        """Depth of the silicon solved [m]."""
        if self.silicon_depth is not None:
            return self.silicon_depth
        below = [section_scales(self).depletion_width, self.surface_depth]
        if isinstance(self.edge, TrenchWall):
            below.append(self.edge.trench_depth)
        if isinstance(self.edge, FieldStep):
            below.append(self.edge.implant_depth)
        return max(below) + _DEBYE_LENGTHS_BELOW * self.substrate_debye

    @property
    def field_boxes(self):
        """Boxes along the width beyond each edge [1]."""
        if isinstance(self.edge, NoEdge):
            return 0
        if isinstance(self.edge, TrenchWall):
            beyond, taper = self.edge.trench_depth, 0.0
        else:
            beyond, taper = self.edge.field_oxide_thickness, self.edge.taper_length
        reach = taper + _REACH * (section_scales(self).depletion_width + beyond)
        return int(np.ceil(min(reach, self.edge.field_width) / self.mesh_spacing - 1e-6))

    @property
    def plane(self):
        """Boxes along the width and along the length [1], the field's included."""
        along_width, along_length = (round(side / self.mesh_spacing) for side in (self.width, self.length))
        return along_width + 2 * self.field_boxes, along_length

    def shortened(self):
        """The same device a few boxes long, for solutions that do not change along the length.

        Returns an AtomDevice.
        Source: definition.
        """
        return replace(self, length=_FEWEST_BOXES * self.mesh_spacing)


def _nm(value):
    return f"{1e9 * value:g} nm"


def _spaced(start, stop, spacing):
    """Lines between two interfaces, both included, as dense as the integral of 1/spacing asks."""
    places = start + (stop - start) * np.linspace(0, 1, 400) ** 2
    density = 1 / spacing(places)
    count = np.concatenate([[0.0], np.cumsum(0.5 * (density[1:] + density[:-1]) * np.diff(places))])
    intervals = max(1, int(np.ceil(count[-1] - 1e-6)))
    lines = np.interp(np.linspace(0, count[-1], intervals + 1), count, places)
    lines[0], lines[-1] = start, stop
    return lines


def _depth_lines(device):
    """Lines from the highest gate down to neutral silicon; the silicon surface is at 0."""
    scales, fine, oxide, edge = section_scales(device), device.mesh_spacing, device.oxide_thickness, device.edge
    debye, soft = device.substrate_debye, scales.depletion_width + 3 * device.substrate_debye

    def spacing(place):
        cap = np.minimum(fine + 0.06 * place, 0.7 * debye) + 0.25 * np.maximum(place - soft, 0)
        return np.minimum(0.25 * scales.layer_thickness + 0.3 * place, cap)

    inner = [device.surface_depth, getattr(edge, "trench_depth", 0.0), getattr(edge, "implant_depth", 0.0)]
    breaks = sorted({0.0, device.depth, *(place for place in inner if place < device.depth)})
    down = [_spaced(start, stop, spacing)[1:] for start, stop in zip(breaks[:-1], breaks[1:])]
    up = np.linspace(-oxide, 0.0, max(4, round(oxide / fine)) + 1)
    if isinstance(edge, FieldStep):
        beyond = _spaced(oxide, edge.field_oxide_thickness, lambda place: fine / 2 + 0.3 * (place - oxide))
        up = np.concatenate([-beyond[:0:-1], up])
    return np.concatenate([up, *down])


@dataclass(frozen=True, kw_only=True)
class AtomMesh:
    """Boxes of a device. Columns of cells have the shape (depth - 1, along the width); nothing changes along the length.

    depth : lines [m], increasing, negative in the oxide, 0 at the silicon surface
    plane : boxes along the width and along the length [1]
    box_width, box_length : sides of a box in the plane [m]
    beyond : middle of each box from the channel's edge [m], negative in the channel
    is_gate : lines in the gate, a Boolean array (depth, along the width) [1]
    is_silicon : cells of silicon [1]
    permittivity : relative permittivity of the cells [1]
    doping : doping of the cells, zero in the oxide [m^-3]
    """

    depth: np.ndarray
    plane: tuple
    box_width: float
    box_length: float
    beyond: np.ndarray
    is_gate: np.ndarray
    is_silicon: np.ndarray
    permittivity: np.ndarray
    doping: np.ndarray

    @property
    def surface(self):
        """Number of the line on the silicon surface [1]."""
        return int(np.argmin(np.abs(self.depth)))

    def gathered(self, density):
        """A quantity of the cells in each node's box.

        density : per volume, array (depth - 1, along the width) [1]
        Returns integral, array (depth, along the width), units of density times volume [m^3].
        Source: box scheme, half of the cell above and half of the cell below.
        """
        half = density * np.diff(self.depth)[:, None] * (self.box_width * self.box_length / 2)
        total = np.zeros((self.depth.size, self.plane[0]))
        total[:-1] += half
        total[1:] += half
        return total


def atom_mesh(device: AtomDevice) -> AtomMesh:
    """Mesh of a device.

    device : see `AtomDevice`
    Returns an AtomMesh.
    Source: own choice, see the module; halving it is reported in the tests.
    """
    depth, edge, profile = _depth_lines(device), device.edge, device.profile
    along_width, along_length = device.plane
    channel = along_width - 2 * device.field_boxes
    box_width = device.width / channel
    beyond = np.abs((np.arange(along_width) - (along_width - 1) / 2) * box_width) - device.width / 2
    middle = ((depth[1:] + depth[:-1]) / 2)[:, None]
    silicon = np.broadcast_to(middle > 0, (middle.size, along_width))
    doping = np.where(middle < device.surface_depth, profile.surface_doping, profile.doping)
    gate_level = np.full(along_width, -device.oxide_thickness)
    if isinstance(edge, FieldStep):
        share = np.clip(beyond / max(edge.taper_length, 1e-6 * box_width), 0, 1)
        gate_level = gate_level - (edge.field_oxide_thickness - device.oxide_thickness) * share
        doping = doping + edge.implant_doping * ((beyond > 0) & (middle < edge.implant_depth))
    elif isinstance(edge, TrenchWall):
        silicon = silicon & ((beyond < 0) | (middle > edge.trench_depth))
    return AtomMesh(
        depth=depth,
        plane=(along_width, along_length),
        box_width=box_width,
        box_length=device.length / along_length,
        beyond=beyond,
        is_gate=depth[:, None] <= gate_level + 1e-6 * device.oxide_thickness,
        is_silicon=silicon,
        permittivity=np.where(silicon, SILICON_RELATIVE_PERMITTIVITY, OXIDE_RELATIVE_PERMITTIVITY),
        doping=doping * silicon,
    )
