"""Dopants one by one: where they lie, and their charge on the mesh."""

from dataclasses import dataclass
from typing import Any

import numpy as np

from physics.atom_mesh import AtomDevice, AtomMesh
from physics.section_geometry import FieldStep, TrenchWall

_SMALLEST_SHARE = 1e-12  # of a cloud; less is rounding


@dataclass(frozen=True, kw_only=True)
class Dopants:
    """Acceptors of one device.

    across : places along the width [m], from the middle of the channel
    depth : places below the silicon surface [m], the same shape
    along : places along the length [m], from the source
    charge : of each [1], in elementary charges; a scalar or the same shape
    continuous : whether the doping is there as a continuum besides, so that these are extra ones
    """

    across: Any
    depth: Any
    along: Any
    charge: Any = 1.0
    continuous: bool = False


def continuous_doping():
    """No single dopants: the doping as a continuum.

    Returns Dopants.
    Source: definition.
    """
    return Dopants(across=np.zeros(0), depth=np.zeros(0), along=np.zeros(0), continuous=True)


def doped_blocks(device: AtomDevice):
    """Blocks of silicon, each with one doping; where two lie over each other both count.

    device : see `physics.atom_mesh.AtomDevice`
    Returns rows of least and greatest place along the width, least and greatest depth [m], and doping [m^-3].
    Source: the profile, the trench and the field implant of the device.
    """
    profile, edge, half = device.profile, device.edge, device.width / 2
    far = half + device.field_boxes * device.width / (device.plane[0] - 2 * device.field_boxes)
    layers = [(0.0, device.surface_depth, profile.surface_doping), (device.surface_depth, device.depth, profile.doping)]
    blocks = []
    for top, bottom, doping in layers:
        if isinstance(edge, TrenchWall):
            floor = min(max(edge.trench_depth, top), bottom)
            blocks += [(-half, half, top, floor, doping), (-far, far, floor, bottom, doping)]
        else:
            blocks.append((-far, far, top, bottom, doping))
    if isinstance(edge, FieldStep) and edge.implant_doping:
        blocks += [
            (side[0], side[1], 0.0, edge.implant_depth, edge.implant_doping) for side in ((-far, -half), (half, far))
        ]
    return [block for block in blocks if block[3] > block[2]]


def place_dopants(device: AtomDevice, generator) -> Dopants:
    """Draw the dopants of one device.

    device : see `physics.atom_mesh.AtomDevice`
    generator : see `numpy.random`: a stream with `poisson` and `uniform`; it is moved on
    Returns Dopants.
    Source: a Poisson field whose density is the doping; number and places are independent.
    """
    places = []
    for left, right, top, bottom, doping in doped_blocks(device):
        number = generator.poisson(doping * (right - left) * (bottom - top) * device.length)
        low, high = np.array([left, top, 0.0]), np.array([right, bottom, device.length])
        places.append(low + (high - low) * generator.uniform(size=(number, 3)))
    across, depth, along = np.concatenate(places).T
    return Dopants(across=across, depth=depth, along=along)


def _shares(place, side, lines, walls):
    """Share of each cloud that goes to each line of one direction, array (dopants, lines); the walls are mirrors.

    Each piece of a cloud goes to the lines on both sides of it, linearly; so no cloud's centre is moved but by a wall.
    """
    first, last = walls
    gap = np.diff(lines)

    def integral(end):
        """Of the shares of this and all later lines, from the first wall; mirrored at both."""
        inside = first + np.abs(end - first)
        over = inside > last
        inside = np.where(over, 2 * last - inside, inside)[:, None]
        within = np.clip((inside - lines[:-1]) / gap, 0, 1)
        total = gap / 2 * within**2 + np.maximum(inside - lines[1:], 0)
        whole = gap / 2 + np.maximum(last - lines[1:], 0)
        return np.where((end < first)[:, None], -1, 1) * np.where(over[:, None], 2 * whole - total, total)

    later = (integral(place + side / 2) - integral(place - side / 2)) / side
    every = np.ones((place.size, 1))
    shares = -np.diff(np.concatenate([every, later, 0 * every], axis=1), axis=1)
    return np.where(shares > _SMALLEST_SHARE, shares, 0.0)


def _touched(shares):
    """The boxes that a cloud touches and its shares there, arrays (dopants, few)."""
    start = np.argmax(shares > 0, axis=1)
    end = shares.shape[1] - np.argmax(shares[:, ::-1] > 0, axis=1)
    boxes = start[:, None] + np.arange(int((end - start).max(initial=1)))
    inside = boxes < shares.shape[1]
    boxes = np.where(inside, boxes, 0)
    return boxes, np.take_along_axis(shares, boxes, axis=1) * inside


def dopant_charge(device: AtomDevice, mesh: AtomMesh, dopants: Dopants):
    """Acceptors in each box of the mesh.

    device : see `physics.atom_mesh.AtomDevice`
    mesh : see `physics.atom_mesh.AtomMesh`
    dopants : see `Dopants`
    Returns elementary charges, array (depth, along the width, along the length) [1]; their sum is the dopants' number.
    Raises ValueError for a dopant outside the silicon of the mesh, and for places or charges that are not rows of numbers.
    Source: cloud in cell: a cube of constant density, each piece of it shared linearly among the eight nearest nodes; R.
    W. Hockney and J. W. Eastwood, Computer Simulation Using Particles (1981), ch. 5 (memory). The surface is a mirror;
    beside a trench half a cloud may reach into the oxide.
    """
    total = np.zeros((mesh.depth.size, *mesh.plane))
    if dopants.continuous:
        total += mesh.gathered(mesh.doping)[..., None]
    place = [np.asarray(values, dtype=float) for values in (dopants.depth, dopants.across, dopants.along)]
    if len({values.shape for values in place}) > 1 or place[0].ndim != 1 or not np.all(np.isfinite(dopants.charge)):
        shapes = ", ".join(str(values.shape) for values in place)
        raise ValueError(f"places of dopants must be rows of one length, not {shapes}, and their charges finite")
    if not place[0].size:
        return total
    surface, half = mesh.surface, mesh.plane[0] * mesh.box_width / 2
    down = mesh.depth[surface:]
    across = (np.arange(mesh.plane[0]) + 0.5) * mesh.box_width - half
    along = (np.arange(mesh.plane[1]) + 0.5) * mesh.box_length
    lines, walls = [down, across, along], [(0.0, down[-1]), (-half, half), (0.0, device.length)]
    for name, values, (first, last) in zip(("depth", "across", "along"), place, walls):
        if not np.all((values >= first) & (values <= last)):
            raise ValueError(f"a dopant lies outside the silicon: {name} must be {first:.3g} to {last:.3g} m")
    (row, one), (column, two), (box, three) = (
        _touched(_shares(values, device.cloud_length, *space)) for values, *space in zip(place, lines, walls)
    )
    index = ((row + surface)[:, :, None, None] * mesh.plane[0] + column[:, None, :, None]) * mesh.plane[1]
    index = index + box[:, None, None, :]
    share = one[:, :, None, None] * two[:, None, :, None] * three[:, None, None, :]
    share = share * np.broadcast_to(dopants.charge, place[0].shape)[:, None, None, None]
    total += np.bincount(index.ravel(), share.ravel(), minlength=total.size).reshape(total.shape)
    return total
