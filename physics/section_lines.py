"""Lines of a section's tensor mesh: where along the width and the depth they lie, and how densely.

Lines lie on every interface. Between interfaces their spacing follows the lengths that the solution has of its own
(inversion layer, Debye length, oxide thickness), so that the mesh changes smoothly with the geometry and its error is
much the same for neighbouring widths.
"""

from dataclasses import dataclass

import numpy as np

from physics.constants import ELEMENTARY_CHARGE, SILICON_PERMITTIVITY
from physics.edges import NoEdge
from physics.section_geometry import FieldStep, Section, TrenchWall
from physics.silicon import fermi_potential, thermal_voltage

MOST_NODES = 400_000  # of a mesh; the factor of the largest then stays below 1 GB
_GROWTH = 0.14  # of the spacing per distance from a feature [1]
_REACH = 4.0  # depletion widths and oxide thicknesses beyond the edge after which nothing changes any more
_DEBYE_LENGTHS_BELOW = 9.0  # depth of the mesh below the depletion edge: what is cut off has decayed to exp(-9)


@dataclass(frozen=True, kw_only=True)
class Scales:
    """Lengths that the solution at threshold has of its own, in the depletion approximation.

    surface_potential : band bending at threshold without body bias [V]
    depletion_width : with body bias [m]
    layer_thickness : decay length of the inversion layer, (kT/q)/surface field [m]
    """

    surface_potential: float
    depletion_width: float
    layer_thickness: float


def debye_length(doping, thermal_voltage):
    """Decay length of a small disturbance in neutral silicon.

    doping : net doping [m^-3]
    thermal_voltage : kT/q [V]
    Returns length [m].
    Source: Poisson's equation with Boltzmann carriers, linearised (elementary).
    """
    return np.sqrt(SILICON_PERMITTIVITY * thermal_voltage / (ELEMENTARY_CHARGE * doping))


def section_scales(section: Section):
    """The section's own lengths.

    section : see `physics.section_geometry.Section`
    Returns Scales.
    Source: depletion approximation, see `physics.threshold.electrostatics`.
    """
    kt = thermal_voltage(section.temperature)
    profile = section.profile
    potential = sum(
        fermi_potential(doping, kt, section.intrinsic_density) for doping in (profile.doping, profile.surface_doping)
    )
    depletion_width = float(profile.depletion_width(potential + section.body_bias))
    field = profile.depletion_charge(depletion_width) / SILICON_PERMITTIVITY
    return Scales(
        surface_potential=float(potential), depletion_width=depletion_width, layer_thickness=float(kt / field)
    )


@dataclass(frozen=True, kw_only=True)
class _Feature:
    """A place that wants a fine mesh.

    place : coordinate [m]
    spacing : wanted there [m]
    """

    place: float
    spacing: float


def _wanted_spacing(place, features, cap):
    """The finest of all features' spacings, each growing with distance from it; a harmonic sum keeps it smooth."""
    total = 1 / cap**2
    for feature in features:
        total = total + 1 / (feature.spacing + _GROWTH * np.abs(place - feature.place)) ** 2
    return 1 / np.sqrt(total)


def _graded(start, stop, spacing, refinement):
    """Lines between two interfaces, both included, as many and as dense as the integral of 1/spacing asks."""
    # samples dense at both ends, where spacing is smallest
    half = np.geomspace(1e-5, 0.5, 120)
    share = np.concatenate([[0.0], half, 1 - half[-2::-1], [1.0]])
    places = start + (stop - start) * share
    density = 1 / spacing(places)
    count = np.concatenate([[0.0], np.cumsum(0.5 * (density[1:] + density[:-1]) * np.diff(places))])
    intervals = int(np.ceil(count[-1] * refinement))
    if intervals > MOST_NODES:
        raise ValueError(f"the mesh would need {intervals} lines between two interfaces, more than the memory holds")
    lines = np.interp(np.linspace(0, count[-1], intervals + 1), count, places)
    lines[0], lines[-1] = start, stop
    return lines


def _joined(breaks, spacing, refinement):
    """Graded lines through all interfaces.

    An interface closer to the one before than a millionth of the whole is left out: no line can part the two.
    """
    least = 1e-6 * (breaks[-1] - breaks[0])
    breaks = [place for last, place in zip([-np.inf, *breaks], breaks) if place - last > least]
    parts = [_graded(start, stop, spacing, refinement)[:-1] for start, stop in zip(breaks[:-1], breaks[1:])]
    return np.concatenate([*parts, breaks[-1:]])


def _taper(section, scales, refinement):
    """Shares of the taper at which lines cross the gate's slope: on them lines of both directions meet."""
    edge, oxide = section.edge, section.oxide_thickness
    rise = edge.field_oxide_thickness - oxide
    corner = _Feature(place=0.0, spacing=0.07 * oxide)

    def spacing(share):
        along = _wanted_spacing(share * edge.taper_length, [corner], scales.depletion_width) / edge.taper_length
        up = _wanted_spacing(share * rise, [corner], rise) / rise
        return np.minimum(along, up)

    return _graded(0.0, 1.0, spacing, refinement)


def _lateral_lines(section, scales, taper, refinement):
    """Lines along the width, from its middle to the middle of the field or to where nothing changes any more."""
    edge, half, oxide = section.edge, section.width / 2, section.oxide_thickness
    if isinstance(edge, NoEdge):
        return np.array([0.0, half])
    features, breaks, tapered = [], [0.0, half], np.array([])
    if isinstance(edge, FieldStep):
        features.append(_Feature(place=half, spacing=min(0.2 * oxide, 0.03 * section.width)))
        reach = edge.taper_length + _REACH * (scales.depletion_width + edge.field_oxide_thickness)
        if edge.taper_length:
            tapered = half + edge.taper_length * taper[1:]
    else:
        features.append(_Feature(place=half, spacing=min(0.2 * scales.layer_thickness, 0.15 * oxide)))
        reach = oxide + _REACH * (scales.depletion_width + edge.trench_depth)
        if edge.divot:
            breaks.append(half + oxide)
            features.append(_Feature(place=half + oxide, spacing=0.15 * oxide))
    reach = min(reach, edge.field_width)

    def spacing(place):
        return _wanted_spacing(place, features, 10 * (section.width + reach))

    channel = _joined(breaks, spacing, refinement)
    last = tapered[-1] if tapered.size else breaks[-1]
    if half + reach <= last:
        return np.concatenate([channel, tapered])
    return np.concatenate([channel, tapered, _joined([last, half + reach], spacing, refinement)[1:]])


def _oxide_lines(section, taper, refinement):
    """Lines above the silicon surface, from the top of the highest oxide to 0."""
    edge, oxide = section.edge, section.oxide_thickness
    features, breaks, raised = [_Feature(place=0.0, spacing=0.05 * oxide)], [-oxide, 0.0], np.array([])
    if isinstance(edge, FieldStep):
        thick = edge.field_oxide_thickness
        features.append(_Feature(place=-oxide, spacing=0.06 * oxide))
        if edge.taper_length:
            raised = -oxide - (thick - oxide) * taper[:0:-1]
        else:
            raised = _graded(-thick, -oxide, lambda place: _wanted_spacing(place, features, thick), refinement)[:-1]
    if isinstance(edge, TrenchWall) and 0 < edge.divot < oxide:
        breaks.insert(1, edge.divot - oxide)
        features.append(_Feature(place=edge.divot - oxide, spacing=0.1 * oxide))
    gate_oxide = _joined(breaks, lambda place: _wanted_spacing(place, features, oxide), refinement)
    return np.concatenate([raised, gate_oxide[:-1], [0.0]])


def _silicon_lines(section, scales, refinement):
    """Lines from the silicon surface down to where the silicon is neutral."""
    edge, profile, kt = section.edge, section.profile, thermal_voltage(section.temperature)
    depletion_width, dopings, deepest = scales.depletion_width, [profile.doping, profile.surface_doping], [0.0]
    features, breaks = [_Feature(place=0.0, spacing=0.1 * scales.layer_thickness)], [0.0]
    if isinstance(edge, FieldStep) and edge.implant_depth:
        breaks.append(edge.implant_depth)
        deepest.append(edge.implant_depth)
        dopings.append(profile.doping + edge.implant_doping)
    if isinstance(edge, TrenchWall):
        breaks.append(edge.trench_depth)
        deepest.append(edge.trench_depth + depletion_width)
        if edge.divot > section.oxide_thickness:
            gate_bottom = edge.divot - section.oxide_thickness
            breaks.append(gate_bottom)
            features.append(_Feature(place=gate_bottom, spacing=0.15 * section.oxide_thickness))
    if section.surface_depth:
        breaks.append(section.surface_depth)
        features.append(_Feature(place=section.surface_depth, spacing=0.6 * debye_length(max(dopings), kt)))
    substrate_debye = debye_length(profile.doping, kt)
    bottom = max(depletion_width, section.surface_depth, *deepest) + _DEBYE_LENGTHS_BELOW * substrate_debye
    soft = depletion_width + 4 * substrate_debye  # down to here the soft depletion edge wants its Debye length resolved

    def spacing(place):
        doping = np.where(place < section.surface_depth, profile.surface_doping, profile.doping)
        cap = 0.8 * debye_length(doping, kt) + _GROWTH * np.maximum(place - soft, 0)
        return _wanted_spacing(place, features, cap)

    return _joined(sorted({*breaks, bottom}), spacing, refinement)


def section_lines(section: Section, refinement):
    """Lines of the mesh of half a section.

    section : see `physics.section_geometry.Section`
    refinement : lines are this many times denser than the standard mesh [1], > 0
    Returns lines along the width, from its middle, and along the depth, from the silicon surface down [m].
    Raises ValueError for a refinement that is not a positive number, and for more lines than the memory holds.
    Source: own choice, see the module; tests halve the spacing.
    """
    if not 0 < refinement < np.inf:
        raise ValueError(f"refinement must be a positive, finite number, not {refinement!r}")
    edge, scales = section.edge, section_scales(section)
    tapered = isinstance(edge, FieldStep) and edge.taper_length > 0
    taper = _taper(section, scales, refinement) if tapered else None
    depth = np.concatenate([_oxide_lines(section, taper, refinement)[:-1], _silicon_lines(section, scales, refinement)])
    return _lateral_lines(section, scales, taper, refinement), depth
