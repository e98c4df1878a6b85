"""What a cross-section through the channel's width is made of: the channel, and one of two shapes of its edges.

The section is described by SI scalars and refuses what cannot be built. No mesh and no equation here.
"""

import math
from dataclasses import dataclass
from numbers import Real
from typing import Any

from physics.edges import NoEdge
from physics.profile import Profile
from physics.silicon import intrinsic_density as default_intrinsic_density


def _nm(value):
    return f"{1e9 * value:g} nm"


def _refuse_unless_positive(**values):
    for name, value in values.items():
        if not (isinstance(value, Real) and 0 < value < math.inf):
            raise ValueError(f"{name} must be a positive, finite number, not {value!r}")


def _refuse_negative(**values):
    for name, value in values.items():
        if not (isinstance(value, Real) and 0 <= value < math.inf):
            raise ValueError(f"{name} must be a finite number, zero or more, not {value!r}")


@dataclass(frozen=True, kw_only=True)
class FieldStep:
    """Field oxide on a flat silicon surface: the gate climbs on to it at the channel's edge.

    field_oxide_thickness : oxide under the gate beside the channel [m]
    taper_length : length over which the oxide grows from the gate oxide's thickness, linearly [m]; 0 for an abrupt step
    implant_doping : doping added beyond the edge by a field implant [m^-3]
    implant_depth : depth of that implant [m]; needed if there is one
    field_width : from the channel's edge to the middle of the field, a mirror plane [m]; more than several depletion
        widths changes nothing
    Raises ValueError for a taper longer than the field, and for an implant without depth or a depth without implant.
    """

    field_oxide_thickness: float
    taper_length: float = 0.0
    implant_doping: float = 0.0
    implant_depth: float = 0.0
    field_width: float = 2e-6

    def __post_init__(self):
        _refuse_unless_positive(field_oxide_thickness=self.field_oxide_thickness, field_width=self.field_width)
        _refuse_negative(taper_length=self.taper_length, implant_doping=self.implant_doping)
        _refuse_negative(implant_depth=self.implant_depth)
        if self.taper_length > self.field_width:
            raise ValueError(
                f"the taper, {_nm(self.taper_length)}, is longer than the field, {_nm(self.field_width)}: shorten the "
                "one or widen the other"
            )
        if (self.implant_doping > 0) != (self.implant_depth > 0):
            raise ValueError(
                f"a field implant needs both implant_doping and implant_depth above zero, not {self.implant_doping:g} "
                f"and {self.implant_depth:g}"
            )


@dataclass(frozen=True, kw_only=True)
class TrenchWall:
    """Trench isolation: the silicon ends at a vertical wall, oxide beyond it, silicon again below the trench.

    trench_depth : depth of the trench below the silicon surface [m]
    divot : how far the trench oxide's surface lies below the gate oxide's [m], 0 to trench_depth. The gate fills the
        recess up to one gate-oxide thickness from the wall, and so wraps the corner once the divot exceeds that thickness
    field_width : from the channel's edge to the middle of the trench, a mirror plane [m]
    Raises ValueError for a divot as deep as the trench or deeper.
    """

    trench_depth: float
    divot: float = 0.0
    field_width: float = 2e-6

    def __post_init__(self):
        _refuse_unless_positive(trench_depth=self.trench_depth, field_width=self.field_width)
        _refuse_negative(divot=self.divot)
        if self.divot >= self.trench_depth:
            raise ValueError(
                f"the divot, {_nm(self.divot)}, must be less deep than the trench, {_nm(self.trench_depth)}"
            )


def _refuse_misfit(edge, oxide_thickness):
    """An edge must fit its gate oxide."""
    if isinstance(edge, FieldStep) and edge.field_oxide_thickness <= oxide_thickness:
        raise ValueError(
            f"the field oxide, {_nm(edge.field_oxide_thickness)}, must be thicker than the gate oxide, "
            f"{_nm(oxide_thickness)}"
        )
    if isinstance(edge, TrenchWall) and edge.divot > 0 and edge.field_width <= oxide_thickness:
        raise ValueError(
            f"a recessed gate keeps one gate oxide, {_nm(oxide_thickness)}, from the wall: the field's width, "
            f"{_nm(edge.field_width)}, must be larger"
        )


SectionEdge = FieldStep | TrenchWall | NoEdge


@dataclass(frozen=True, kw_only=True)
class Section:
    """Cross-section of a long channel along its width; both edges are alike.

    width : channel width [m]
    oxide_thickness : gate oxide, SiO2 equivalent [m]
    profile : see `physics.profile`, scalars
    temperature : absolute temperature [K], 200 to 500
    edge : see `FieldStep`, `TrenchWall`, and `physics.edges.NoEdge` for a channel without edges
    body_bias : reverse body bias, a magnitude [V], >= 0
    intrinsic_density : intrinsic carrier density [m^-3]; None for `physics.silicon.intrinsic_density`
    An n-channel on a p-type substrate. A p-channel is its mirror image: the same numbers, all voltages and charges with
    the other sign. Raises ValueError for values without meaning.
    """

    width: float
    oxide_thickness: float
    profile: Profile
    temperature: float
    edge: Any
    body_bias: float = 0.0
    intrinsic_density: float | None = None

    def __post_init__(self):
        _refuse_unless_positive(width=self.width, oxide_thickness=self.oxide_thickness, temperature=self.temperature)
        _refuse_negative(body_bias=self.body_bias)
        if not 200 <= self.temperature <= 500:
            raise ValueError(f"temperature must lie between 200 and 500 K, not {self.temperature!r}")
        if not isinstance(self.edge, SectionEdge):
            raise ValueError(f"edge must be a FieldStep, a TrenchWall or NoEdge(), not {self.edge!r}")
        if self.intrinsic_density is None:
            object.__setattr__(self, "intrinsic_density", float(default_intrinsic_density(self.temperature)))
        _refuse_unless_positive(intrinsic_density=self.intrinsic_density)
        _refuse_negative(surface_depth=self.surface_depth)
        for name in ("doping", "surface_doping"):
            value = getattr(self.profile, name)
            if not (isinstance(value, Real) and self.intrinsic_density < value < 1e27):
                raise ValueError(
                    f"{name} must lie between the intrinsic density, {self.intrinsic_density:.3g} m^-3, and 1e27 m^-3, "
                    f"not {value!r}"
                )
        _refuse_misfit(self.edge, self.oxide_thickness)

    @property
    def surface_depth(self):
        """Thickness of the profile's surface layer [m], zero for uniform doping."""
        return getattr(self.profile, "surface_depth", 0.0)
